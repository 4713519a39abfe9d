//! What can keep the seeing from being measured.

use crate::turbulence::TurbulenceError;
use thiserror::Error;

/// A measurement of the seeing that cannot be made.
#[derive(Clone, Debug, Error, PartialEq)]
#[non_exhaustive]
pub enum SeeingError {
    /// No sequence at all.
    #[error("no sequence of limb harmonics was given; at least 1 is needed")]
    NoSequence,
    /// Too few frames to form a variance.
    #[error("sequence {sequence} has {found} frames; at least {least} are needed")]
    TooFewFrames {
        /// Which sequence, from 0.
        sequence: usize,
        /// Frames found.
        found: usize,
        /// Frames needed.
        least: usize,
    },
    /// The harmonics do not reach far enough, or differ between sequences.
    #[error("sequence {sequence} has harmonics to m = {found}; {wanted} are needed")]
    Harmonics {
        /// Which sequence, from 0.
        sequence: usize,
        /// Highest harmonic found.
        found: usize,
        /// What is needed, in words.
        wanted: &'static str,
    },
    /// Two inputs that belong together differ in length.
    #[error("sequence {sequence}: {name} has {found} entries; {wanted} are needed")]
    Length {
        /// Which sequence, from 0.
        sequence: usize,
        /// Which input.
        name: &'static str,
        /// Entries found.
        found: usize,
        /// Entries needed.
        wanted: usize,
    },
    /// A number outside what the method is good for.
    #[error("{name} is {found} {unit}; allowed are {least} to {most} {unit}")]
    OutOfRange {
        /// Which number.
        name: &'static str,
        /// Value found.
        found: f64,
        /// Least allowed.
        least: f64,
        /// Most allowed.
        most: f64,
        /// Unit.
        unit: &'static str,
    },
    /// No motion is left above the noise.
    #[error(
        "the limb moves no more than the noise: {found_mas2} mas^2 in m >= 2 against \
         {noise_mas2} mas^2"
    )]
    NoMotion {
        /// Power summed over the harmonics.
        found_mas2: f64,
        /// Noise summed over the harmonics.
        noise_mas2: f64,
    },
    /// The fit of the layers did not come to rest.
    #[error("the fit of layers found no maximum for any outer scale, from {starts} starts")]
    NotConverged {
        /// Starts tried.
        starts: usize,
    },
    /// The kernels refused their input.
    #[error("turbulence kernels: {0}")]
    Turbulence(#[from] TurbulenceError),
}

/// The value, if it is finite and in range.
pub(super) fn checked(
    name: &'static str,
    found: f64,
    (least, most): (f64, f64),
    unit: &'static str,
) -> Result<f64, SeeingError> {
    if (least..=most).contains(&found) {
        Ok(found)
    } else {
        Err(SeeingError::OutOfRange {
            name,
            found,
            least,
            most,
            unit,
        })
    }
}
