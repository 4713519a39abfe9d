//! What can be wrong with a question about turbulence.

use thiserror::Error;

/// A question the closed forms cannot answer.
#[derive(Clone, Debug, Error, PartialEq)]
#[non_exhaustive]
pub enum TurbulenceError {
    /// The aperture is not a real telescope's.
    #[error("aperture diameter is {found_m} m; allowed are 0.005 to 20 m")]
    Diameter {
        /// Diameter given.
        found_m: f64,
    },
    /// The central obstruction leaves no ring to see through.
    #[error("central obstruction is {found} of the diameter; allowed are 0 to 0.9")]
    Obstruction {
        /// Obstruction given, as a fraction of the diameter.
        found: f64,
    },
    /// The mixture of tilt definitions is no mixture.
    #[error("share of the Zernike tilt is {found}; allowed are -0.5 to 1.5")]
    TiltShare {
        /// Share given.
        found: f64,
    },
    /// The outer scale is too small or not a number.
    #[error("outer scale is {found_m} m; allowed are 0.1 m to infinity")]
    OuterScale {
        /// Outer scale given.
        found_m: f64,
    },
    /// A length in the layer is negative or too long.
    #[error("{name} is {found_m} m; allowed are {least_m} to {most_m} m")]
    Length {
        /// Which length.
        name: &'static str,
        /// Length given.
        found_m: f64,
        /// Shortest allowed.
        least_m: f64,
        /// Longest allowed.
        most_m: f64,
    },
    /// Too many harmonics asked for.
    #[error("highest harmonic is m = {found}; allowed are 0 to 200")]
    Order {
        /// Highest harmonic given.
        found: usize,
    },
    /// A table was asked for an outer scale it does not hold.
    #[error("outer scale number {found} of a table that holds {held}")]
    NotTabulated {
        /// Index given.
        found: usize,
        /// Number of outer scales held.
        held: usize,
    },
}

/// The length, if it is finite and in range.
pub(super) fn checked_length_m(
    name: &'static str,
    found_m: f64,
    least_m: f64,
    most_m: f64,
) -> Result<f64, TurbulenceError> {
    if (least_m..=most_m).contains(&found_m) {
        Ok(found_m)
    } else {
        Err(TurbulenceError::Length {
            name,
            found_m,
            least_m,
            most_m,
        })
    }
}

/// The outer scale, if it is one; infinity is allowed.
pub(super) fn checked_outer_scale_m(found_m: f64) -> Result<f64, TurbulenceError> {
    if found_m >= 0.1 {
        Ok(found_m)
    } else {
        Err(TurbulenceError::OuterScale { found_m })
    }
}

/// The highest harmonic, if the recurrences are good for it.
pub(super) fn checked_order(found: usize) -> Result<usize, TurbulenceError> {
    if found <= 200 {
        Ok(found)
    } else {
        Err(TurbulenceError::Order { found })
    }
}
