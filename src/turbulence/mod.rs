//! Closed-form statistics of the angle of arrival through von Karman turbulence.
//!
//! Everything is a kernel `K`: a variance or covariance in rad^2 is `K lambda^2 r0^(-5/3)`, with
//! `K` in m^(-1/3). `lambda^2 r0^(-5/3)` does not depend on the wavelength, and layers add:
//! `sum K(h_i) lambda^2 r0_i^(-5/3)`. Lengths are in the layer: a ring radius is the slant range
//! times the angular radius of the limb.

mod aperture;
mod bessel;
mod covariance;
mod error;
mod exposure;
mod harmonics;
mod memory;
mod quadrature;
mod spectrum;
mod table;

pub use aperture::{Aperture, Tilt};
pub use covariance::{covariance_kernels, limb_covariance_kernel, variance_kernel};
pub use error::TurbulenceError;
pub use exposure::{finite_exposure, variance_exposure_factor};
pub use harmonics::{harmonic_correlation_length_m, harmonic_kernels};
pub use memory::{LagKernel, harmonic_lag_kernels};
pub use spectrum::{PHASE_PSD_CONSTANT, STRUCTURE_CONSTANT};
pub use table::KernelTable;
