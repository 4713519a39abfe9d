//! `limbs.fits`, written and read back, and limbs measured elsewhere.
//!
//! What is read back is what the extraction gave: everything after it (times, refraction, harmonics,
//! selection, fit) is done again, so that a barometer, a clock or an angle can be put right without
//! the frames. What needs pixels is not there: stacks, and another template, window or edge.

mod elsewhere;
mod given;
mod read;
mod write;

pub(super) use elsewhere::of_files;
pub(super) use given::Given;
pub(super) use read::Saved;
pub(super) use write::write;

/// Reasons for which a frame has no limb, by the code they have in `limbs.fits`.
const LOST: [&str; 9] = [
    "file could not be opened",
    "could not be read",
    "no disk in the frame",
    "disk cut by the field",
    "radius disagrees with the plate scale",
    "disk too small",
    "less than half of the limb usable",
    "no stable centre",
    "another reason",
];
