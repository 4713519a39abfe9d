//! Unit conversions, each named once. Raw numbers carry their unit in the name.

use std::f64::consts::PI;

/// One second of arc, in radians.
pub const ARCSEC_RAD: f64 = PI / 648_000.0;

/// One thousandth of a second of arc, in radians.
pub const MAS_RAD: f64 = ARCSEC_RAD / 1000.0;

/// One minute of arc, in radians.
pub const ARCMIN_RAD: f64 = PI / 10_800.0;

/// One degree, in radians.
pub const DEG_RAD: f64 = PI / 180.0;

/// Full width at half maximum of a Gaussian of unit standard deviation.
pub const FWHM_PER_SIGMA: f64 = 2.354_820_045_030_949_3;

/// Zero of the Celsius scale, in kelvin.
pub const CELSIUS_ZERO_K: f64 = 273.15;

/// The angle folded into `(-pi, pi]`, in radians.
pub fn wrapped_rad(angle_rad: f64) -> f64 {
    let turn = 2.0 * PI;
    let folded = angle_rad.rem_euclid(turn);
    if folded > PI { folded - turn } else { folded }
}
