//! Advance of the innermost planet's perihelion by the quadrupole and by general relativity.
//!
//! # Model
//!
//! ```text
//! by J2, an orbit in the equator:  3 pi J2 R^2 / (a^2 (1 - e^2)^2)     a revolution
//! by relativity:                   6 pi GM / (a c^2 (1 - e^2))         a revolution
//! ```
//!
//! # Valid for
//!
//! First order in both; the orbit's tilt of 3.4 degrees to the Sun's equator lowers the first by half
//! a percent, which is left out.
//!
//! # Accuracy
//!
//! 1e-4 by relativity, half a percent by the quadrupole.
//!
//! # Source
//!
//! Celestial mechanics and the Schwarzschild metric: any text; elements of the orbit from memory.

use crate::constants::{SOLAR_MASS_PARAMETER, SOLAR_RADIUS_NOMINAL};
use crate::units::ARCSEC_RAD;
use std::f64::consts::PI;

/// Semi-major axis of the innermost planet, m; from memory.
const AXIS_M: f64 = 57.909_083e9;
/// Its eccentricity; from memory.
const ECCENTRICITY: f64 = 0.205_63;
/// Its period, days; from memory.
const PERIOD_DAYS: f64 = 87.9691;
/// Days of a Julian century: by definition.
const CENTURY_DAYS: f64 = 36525.0;
/// Speed of light, m/s: by definition.
const LIGHT_M_S: f64 = 299_792_458.0;

/// Radians a revolution as arcseconds a century.
fn by_century(radians: f64) -> f64 {
    radians / ARCSEC_RAD * CENTURY_DAYS / PERIOD_DAYS
}

/// Advance by a quadrupole moment, arcsec a century.
pub fn quadrupole_advance_arcsec(j2: f64) -> f64 {
    let parameter_m = AXIS_M * (1.0 - ECCENTRICITY * ECCENTRICITY);
    by_century(3.0 * PI * j2 * (SOLAR_RADIUS_NOMINAL.value / parameter_m).powi(2))
}

/// Advance by general relativity, arcsec a century.
pub fn relativity_advance_arcsec() -> f64 {
    let parameter_m = AXIS_M * (1.0 - ECCENTRICITY * ECCENTRICITY);
    by_century(6.0 * PI * SOLAR_MASS_PARAMETER.value / (parameter_m * LIGHT_M_S * LIGHT_M_S))
}
