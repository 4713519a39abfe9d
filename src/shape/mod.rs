//! The shape: Sun, instrument and air told apart over all sequences.
//!
//! # Model
//!
//! The harmonics of a frame's limb, air taken out, on the detector (`theta` from +x towards +y):
//!
//! ```text
//! r(theta) = R [1 + c2 P2(x) + c4 P4(x)] + sum_m Re[D_m e^(i m theta)] + air,   x = cos B0 cos(theta - alpha)
//! oblateness = R (-3/2 c2 - 5/8 c4)                 equatorial minus polar radius at B0 = 0
//! air  = kappa (apparent - true limb) + V cos 2(theta - zeta) + tilt of the layers + turn of the camera
//! ```
//!
//! | symbol | meaning | unit |
//! |--------|---------|------|
//! | `R` | radius at 1 AU | mas |
//! | `alpha`, `zeta` | detector angle of solar north, of the zenith | rad |
//! | `D_m` | distortion fixed to the detector, m = 2, 3, 4 | mas |
//! | `kappa` | relative error of the refractivity | - |
//! | `V` | residual fixed to the vertical | mas |
//!
//! The instrument's terms are free unless `[instrument] distortion_sigma_mas` says otherwise; what is
//! known of weather, plate scale, camera angle and tilted layers enters as prior knowledge, so that
//! the stated error contains it.
//!
//! # Valid for
//!
//! Zenith distances below 75 degrees; at least one sequence of two frames.
//!
//! # Accuracy
//!
//! Judged by sessions of an independent model: see the README's table.
//!
//! # Source
//!
//! Generalised least squares with prior knowledge; singular values for what can be told apart; GUM
//! (JCGM 100:2008) for the budget. Legendre coefficients: any table.

mod bootstrap;
mod design;
mod driver;
mod fit;
mod noise;
mod separation;

pub use bootstrap::{Bootstrap, bootstrap};
pub use design::{COMPONENTS, Component, sun_columns};
pub use driver::{Driver, DriverSlope};
pub use fit::{Contribution, Fit, Known, NullTerms, RefractivityInput, fit, odd_terms, sine_terms};
pub use noise::{Block, Correlation, Growth, blocks};
pub use separation::{Separability, judge};

use crate::units::MAS_RAD;

/// Radius about which everything is measured, mas at 1 AU.
pub const REFERENCE_RADIUS_MAS: f64 = 959_230.0;

/// Angular radius of a Sun of the reference radius at a distance, rad.
pub fn reference_radius_rad(distance_au: f64) -> f64 {
    ((REFERENCE_RADIUS_MAS * MAS_RAD).sin() / distance_au).asin()
}

/// The radius at 1 AU of a disk seen at a distance, minus [`REFERENCE_RADIUS_MAS`], mas.
pub fn beyond_reference_mas(radius_rad: f64, distance_au: f64) -> f64 {
    (distance_au * radius_rad.sin()).asin() / MAS_RAD - REFERENCE_RADIUS_MAS
}

/// Zenith distance above which a sequence is set aside for the shape, degrees.
pub const LARGEST_ZENITH_DEG: f64 = 75.0;

/// How the limb answers the air at one moment, all apparent minus true, mas at 1 AU.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct AirResponse {
    /// Mean radius.
    pub mean_mas: f64,
    /// `cos 2` about the zenith.
    pub cos2_mas: f64,
    /// `cos 3` about the zenith.
    pub cos3_mas: f64,
    /// `cos 4` about the zenith.
    pub cos4_mas: f64,
    /// Change of the mean by one arcminute of true zenith distance.
    pub mean_mas_arcmin: f64,
    /// Change of `cos 2` by one arcminute of true zenith distance.
    pub cos2_mas_arcmin: f64,
    /// Sine of the zenith distance.
    pub sin_zenith: f64,
    /// Change of the true zenith distance, arcmin a second of time.
    pub zenith_rate_arcmin_s: f64,
}

/// One frame's limb in harmonics, with what the fit must know of its moment.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Observation {
    /// Index of the sequence.
    pub sequence: usize,
    /// Mid-exposure, seconds after the session's first frame.
    pub time_s: f64,
    /// Detector angle of solar north, rad.
    pub axis_rad: f64,
    /// Detector angle of the zenith, rad.
    pub zenith_rad: f64,
    /// Heliographic latitude of the disk's centre, rad.
    pub b0_rad: f64,
    /// Weight, from the seeing alone.
    pub weight: f64,
    /// Mean radius minus [`REFERENCE_RADIUS_MAS`], then cosine and sine of m = 2, 3, 4; mas at 1 AU.
    pub harmonics_mas: [f64; COMPONENTS],
    /// Photon-noise variance of the same, mas^2.
    pub noise_mas2: [f64; COMPONENTS],
    /// How the limb answers the air.
    pub air: AirResponse,
}

/// Why there is no shape.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum ShapeError {
    /// Nothing to fit.
    #[error(
        "{frames} usable frames in {sequences} sequences; a shape with an error needs a sequence of at least 2"
    )]
    TooFew {
        /// Usable frames.
        frames: usize,
        /// Sequences that hold them.
        sequences: usize,
    },
    /// Every sequence was set aside because the Sun stood too low.
    #[error(
        "every sequence was observed more than {limit_deg} deg from the zenith (the highest Sun at {highest_deg:.1} deg), where refraction is not known well enough for the shape; observe when the Sun stands higher"
    )]
    TooLow {
        /// Limit.
        limit_deg: f64,
        /// Smallest zenith distance of the session.
        highest_deg: f64,
    },
    /// The normal equations have no solution although prior knowledge was added.
    #[error("the {unknowns} unknowns of the shape are not determined by {blocks} blocks of frames")]
    Singular {
        /// Unknowns.
        unknowns: usize,
        /// Blocks.
        blocks: usize,
    },
}
