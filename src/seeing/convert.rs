//! Fried's parameter, the width of the seeing disk and the coherence time.
//!
//! # Model
//!
//! ```text
//! r0(lambda)  = r0(500 nm) (lambda / 500 nm)^(6/5)
//! r0(z)       = r0(0) (cos z)^(3/5)                       along the line of sight
//! FWHM        = 0.97586 lambda/r0 sqrt(1 - 2.183 (r0/L0)^0.356)
//! tau0        = 0.314 r0 / V
//! ```
//!
//! | symbol | meaning | unit |
//! |--------|---------|------|
//! | `z` | zenith distance | rad |
//! | `FWHM` | full width at half maximum of the long exposure | rad |
//! | `L0` | outer scale | m |
//! | `V` | wind speed, weighted by turbulence to the power 5/3 | m/s |
//!
//! # Valid for
//!
//! Zenith distances to 80 degrees (flat layers: above 75 the air mass is overestimated); outer
//! scales above 20 r0. Wavelengths 300 to 2500 nm.
//!
//! # Accuracy
//!
//! The outer scale's factor is within 1.3 percent of the exact transfer function
//! (`tests/published/seeing_scales.rs`).
//!
//! # Source
//!
//! D. L. Fried, J. Opt. Soc. Am. 56, 1372 (1966); F. Roddier, Progress in Optics 19, 281 (1981) for
//! `tau0`; A. Tokovinin, Publ. Astron. Soc. Pacific 114, 1156 (2002) for the outer scale (from
//! memory).

use super::error::{SeeingError, checked};
use crate::units::{ARCSEC_RAD, DEG_RAD};

/// Largest zenith distance for flat layers.
const ZENITH_RAD: (f64, f64) = (0.0, 80.0 * DEG_RAD);
const R0_M: (f64, f64) = (1e-3, 100.0);

/// Fried's parameter at a wavelength, from that at 500 nm.
///
/// # Errors
///
/// [`SeeingError::OutOfRange`] for a wavelength outside 300 to 2500 nm.
pub fn r0_at_wavelength_m(r0_500nm_m: f64, wavelength_nm: f64) -> Result<f64, SeeingError> {
    let wavelength_nm = checked("wavelength", wavelength_nm, (300.0, 2500.0), "nm")?;
    Ok(checked("r0", r0_500nm_m, R0_M, "m")? * (wavelength_nm / 500.0).powf(1.2))
}

/// Fried's parameter along the line of sight, from that at the zenith.
///
/// # Errors
///
/// [`SeeingError::OutOfRange`] beyond 80 degrees.
pub fn r0_line_of_sight_m(r0_zenith_m: f64, zenith_rad: f64) -> Result<f64, SeeingError> {
    Ok(checked("r0", r0_zenith_m, R0_M, "m")? * cosine(zenith_rad)?.powf(0.6))
}

/// Fried's parameter at the zenith, from that along the line of sight.
///
/// # Errors
///
/// [`SeeingError::OutOfRange`] beyond 80 degrees.
pub fn r0_zenith_m(r0_line_of_sight_m: f64, zenith_rad: f64) -> Result<f64, SeeingError> {
    Ok(checked("r0", r0_line_of_sight_m, R0_M, "m")? / cosine(zenith_rad)?.powf(0.6))
}

fn cosine(zenith_rad: f64) -> Result<f64, SeeingError> {
    Ok(checked("zenith distance", zenith_rad, ZENITH_RAD, "rad")?.cos())
}

/// Width of the long-exposure seeing disk, full at half maximum. `r0_m` is at the same wavelength;
/// without an outer scale the width is Kolmogorov's.
///
/// # Errors
///
/// [`SeeingError::OutOfRange`] for an outer scale below 20 r0 or a wavelength outside 300 to 2500
/// nm.
pub fn fwhm_arcsec(
    r0_m: f64,
    wavelength_nm: f64,
    outer_scale_m: Option<f64>,
) -> Result<f64, SeeingError> {
    let wavelength_nm = checked("wavelength", wavelength_nm, (300.0, 2500.0), "nm")?;
    let r0_m = checked("r0", r0_m, R0_M, "m")?;
    let kolmogorov = 0.97586 * wavelength_nm * 1e-9 / r0_m / ARCSEC_RAD;
    let Some(outer_scale_m) = outer_scale_m else {
        return Ok(kolmogorov);
    };
    let outer_scale_m = checked(
        "outer scale",
        outer_scale_m,
        (20.0 * r0_m, f64::INFINITY),
        "m",
    )?;
    Ok(kolmogorov * (1.0 - 2.183 * (r0_m / outer_scale_m).powf(0.356)).sqrt())
}

/// Coherence time of the wavefront.
///
/// # Errors
///
/// [`SeeingError::OutOfRange`] for a wind outside 0.1 to 100 m/s.
pub fn coherence_time_s(r0_m: f64, wind_m_s: f64) -> Result<f64, SeeingError> {
    let wind_m_s = checked("wind speed", wind_m_s, (0.1, 100.0), "m/s")?;
    Ok(0.314 * checked("r0", r0_m, R0_M, "m")? / wind_m_s)
}
