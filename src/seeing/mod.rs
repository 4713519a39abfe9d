//! The state of the air, from what it does to the limb.
//!
//! Turbulence moves the limb radially; harmonics m = 2 and above of that motion cannot come from
//! the telescope's shake, and their power tells Fried's parameter ([`by_motion`]). It also widens the
//! limb, which tells it a second time ([`by_blur`]), and drifts across it, which tells how fast
//! ([`coherence`]).

mod answer;
mod blur;
mod coherence;
mod convert;
mod effective;
mod error;
mod fit;
mod floor;
mod harmonics;
mod motion;
mod posterior;
mod prior;
mod session;

pub use blur::{BlurReading, BlurRefusal, BlurSeeing, BlurSetup, OwnBlur, by_blur};
pub use coherence::{Coherence, NoCoherence, coherence};
pub use convert::{
    coherence_time_s, fwhm_arcsec, r0_at_wavelength_m, r0_line_of_sight_m, r0_zenith_m,
};
pub use effective::{EffectiveCount, effective_count, effective_count_of_power};
pub use error::SeeingError;
pub use floor::{View, floor_correlation_time_s, floor_variance_mas2, within_sector_variance_mas2};
pub use harmonics::{HarmonicPower, HarmonicSeries, LEAST_FRAMES, harmonic_power};
pub use motion::{MotionSeeing, PowerRow, SequenceSeeing, Setup, by_motion};
pub use prior::{LayerPrior, ProfilePrior};

/// One turbulent layer of a profile.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Layer {
    /// Vertical height above the telescope.
    pub height_m: f64,
    /// Share of the turbulence at the zenith, `r0^(-5/3)`, 0 to 1.
    pub share: f64,
    /// Fried's parameter of this layer alone, zenith, 500 nm.
    pub r0_zenith_500nm_m: f64,
}

/// Layers and their outer scale.
#[derive(Clone, Debug, PartialEq)]
pub struct Profile {
    /// Layers, lowest first.
    pub layers: Vec<Layer>,
    /// Outer scale of all layers; infinite where none is seen.
    pub outer_scale_m: f64,
}
