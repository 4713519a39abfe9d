//! What telescope, air and pixel make of the limb: transfer functions, the blurred profile, and the
//! definitions of the limb's place in it.

pub mod definitions;
mod interpolation;
pub mod limb_profile;
mod limb_spectrum;
pub mod transfer;

pub use limb_profile::{Blur, Exposure, Grid, LimbOptics, PixelBox, ProfileMaker};
pub use transfer::Telescope;

use crate::disk::DiskError;

/// Why there is no blurred profile, or no limb in it.
#[derive(Clone, Copy, Debug, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum OpticsError {
    /// The unblurred limb is not that of the Sun.
    #[error(transparent)]
    Disk(#[from] DiskError),
    /// A quantity is outside its range.
    #[error("{quantity} is {found} {unit}; allowed is {lowest} to {highest} {unit}")]
    OutOfRange {
        /// What it is.
        quantity: &'static str,
        /// Value found.
        found: f64,
        /// Smallest value allowed.
        lowest: f64,
        /// Largest value allowed.
        highest: f64,
        /// Unit of the three.
        unit: &'static str,
    },
    /// The profile holds no inflection: it does not fall, or falls most at an end.
    #[error(
        "no inflection inside the profile: it falls fastest at {found_arcsec:.3} arcsec of {from_arcsec:.3} to {to_arcsec:.3} arcsec"
    )]
    NoInflection {
        /// Place of the steepest fall.
        found_arcsec: f64,
        /// Begin of the profile.
        from_arcsec: f64,
        /// End of the profile.
        to_arcsec: f64,
    },
    /// The transform over the window never changes its sign from plus to minus.
    #[error(
        "no edge: the transform over +-{window_arcsec} arcsec has no zero from {from_arcsec:.3} to {to_arcsec:.3} arcsec"
    )]
    NoZero {
        /// Half width of the window.
        window_arcsec: f64,
        /// Begin of the search.
        from_arcsec: f64,
        /// End of the search.
        to_arcsec: f64,
    },
}

/// `Ok` when a quantity is inside its range; not-a-number is outside.
fn within(
    quantity: &'static str,
    found: f64,
    (lowest, highest): (f64, f64),
    unit: &'static str,
) -> Result<(), OpticsError> {
    if (lowest..=highest).contains(&found) {
        Ok(())
    } else {
        Err(OpticsError::OutOfRange {
            quantity,
            found,
            lowest,
            highest,
            unit,
        })
    }
}
