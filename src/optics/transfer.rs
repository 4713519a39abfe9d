//! Modulation transfer functions of the telescope and of the turbulent air.
//!
//! # Model
//!
//! ```text
//! telescope   T(u) = [L(1, 1, 2u) - 2 L(1, e, 2u) + L(e, e, 2u)] / (pi (1 - e^2)),   u = lambda f / D
//! long        T(f) = exp{ -3.44 (lambda f / r0)^(5/3) }
//! short       T(f) = exp{ -3.44 (lambda f / r0)^(5/3) [1 - u^(1/3)] }
//! ```
//!
//! | symbol | meaning | unit |
//! |--------|---------|------|
//! | `f` | frequency | cycles/rad in the formulas, cycles/arcsec in the arguments |
//! | `lambda`, `D`, `r0` | wavelength, aperture, Fried's parameter at this wavelength | m |
//! | `e` | diameter of the central obstruction over that of the aperture | - |
//! | `L(a, b, d)` | area common to two circles of radii `a`, `b` whose centres are `d` apart | - |
//!
//! `T` of the telescope is the autocorrelation of an annular pupil, written as areas; without an
//! obstruction it is `2/pi [acos u - u sqrt(1 - u^2)]`.
//!
//! # Valid for
//!
//! The short-exposure form is that of the near field. It holds where the tilt of the wavefront over the
//! whole aperture has been taken out.
//!
//! # Accuracy
//!
//! Telescope: exact. Short exposure: 1..2 % of wave-optics simulations for `u <= 0.2` at `D/r0 <= 3`,
//! 8 % low at `D/r0 = 5`; at `u` about 0.5 low by 5 % (`D/r0 = 1`) to 29 % (3); it goes to one at the
//! cutoff, where the telescope passes nothing.
//!
//! # Source
//!
//! Annular pupil: O'Neill 1956, J. Opt. Soc. Am. 46, 285. Air: Fried 1966, J. Opt. Soc. Am. 56, 1372.

use super::{OpticsError, within};
use crate::units::ARCSEC_RAD;
use std::f64::consts::PI;

/// Coefficient of the phase structure function over two, Fried 1966.
const STRUCTURE: f64 = 3.44;

/// A telescope with a circular aperture and a central obstruction.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Telescope {
    /// Diameter of the aperture, m. Infinity stands for no diffraction at all.
    pub aperture_m: f64,
    /// Diameter of the central obstruction over that of the aperture.
    pub central_obstruction: f64,
}

impl Telescope {
    /// Whether the telescope can be built.
    ///
    /// # Errors
    ///
    /// [`OpticsError::OutOfRange`] for an aperture below 5 mm or above 20 m (other than infinity) and an
    /// obstruction of 0.9 or more.
    pub fn check(&self) -> Result<(), OpticsError> {
        if self.aperture_m != f64::INFINITY {
            within("telescope aperture", self.aperture_m, (0.005, 20.0), "m")?;
        }
        within(
            "central obstruction",
            self.central_obstruction,
            (0.0, 0.9),
            "of the aperture",
        )
    }

    /// Frequency from which on nothing passes, cycles per arcsec.
    pub fn cutoff_cycles_arcsec(&self, wavelength_m: f64) -> f64 {
        self.aperture_m / wavelength_m * ARCSEC_RAD
    }

    /// Transfer function at a frequency.
    pub fn transfer(&self, f_cycles_arcsec: f64, wavelength_m: f64) -> f64 {
        let u = f_cycles_arcsec.abs() / self.cutoff_cycles_arcsec(wavelength_m);
        if u >= 1.0 {
            return 0.0;
        }
        let e = self.central_obstruction;
        let full = common_area(1.0, 1.0, 2.0 * u);
        if e == 0.0 {
            return full / PI;
        }
        let blocked = 2.0 * common_area(1.0, e, 2.0 * u) - common_area(e, e, 2.0 * u);
        (full - blocked) / (PI * (1.0 - e * e))
    }

    /// Frequencies inside the cutoff where a derivative of the transfer function jumps, ascending,
    /// cycles per arcsec.
    pub(super) fn kinks_cycles_arcsec(&self, wavelength_m: f64) -> Vec<f64> {
        let e = self.central_obstruction;
        if e == 0.0 || !self.aperture_m.is_finite() {
            return Vec::new();
        }
        let cutoff = self.cutoff_cycles_arcsec(wavelength_m);
        let mut kinks = vec![
            cutoff * 0.5 * (1.0 - e),
            cutoff * e,
            cutoff * 0.5 * (1.0 + e),
        ];
        kinks.sort_by(f64::total_cmp);
        kinks
    }
}

/// Area common to two circles.
fn common_area(a: f64, b: f64, distance: f64) -> f64 {
    let small = a.min(b);
    if distance >= a + b {
        return 0.0;
    }
    if distance <= (a - b).abs() {
        return PI * small * small;
    }
    let (a2, b2, d2) = (a * a, b * b, distance * distance);
    let alpha = ((d2 + a2 - b2) / (2.0 * distance * a))
        .clamp(-1.0, 1.0)
        .acos();
    let beta = ((d2 + b2 - a2) / (2.0 * distance * b))
        .clamp(-1.0, 1.0)
        .acos();
    // Four times the area of the triangle of the centres and a crossing point (Heron).
    let heron = (a + b + distance) * (a + b - distance) * (distance + a - b) * (distance + b - a);
    a2 * alpha + b2 * beta - 0.5 * heron.max(0.0).sqrt()
}

/// Exponent of the air's transfer function for `r0` of one metre; times `r0^(-5/3)` it is the exponent
/// for `r0`. `tilt_share` is the `u^(1/3)` of the short exposure, zero for the long one.
pub(super) fn air_exponent(f_cycles_arcsec: f64, wavelength_m: f64, tilt_share: f64) -> f64 {
    let lag_m = wavelength_m * f_cycles_arcsec.abs() / ARCSEC_RAD;
    STRUCTURE * lag_m.powf(5.0 / 3.0) * (1.0 - tilt_share)
}

/// `u^(1/3)` of the short exposure, held at one beyond the cutoff, where the telescope passes nothing.
pub(super) fn tilt_share(f_cycles_arcsec: f64, wavelength_m: f64, aperture_m: f64) -> f64 {
    (wavelength_m * f_cycles_arcsec.abs() / ARCSEC_RAD / aperture_m)
        .cbrt()
        .min(1.0)
}

/// Transfer function of the air in a long exposure.
pub fn long_exposure(f_cycles_arcsec: f64, wavelength_m: f64, r0_m: f64) -> f64 {
    (-air_exponent(f_cycles_arcsec, wavelength_m, 0.0) * r0_m.powf(-5.0 / 3.0)).exp()
}

/// Transfer function of the air in an exposure that freezes it, the tilt over the aperture taken out;
/// near field. Beyond the telescope's cutoff it is one.
pub fn short_exposure(f_cycles_arcsec: f64, wavelength_m: f64, aperture_m: f64, r0_m: f64) -> f64 {
    let tilt = tilt_share(f_cycles_arcsec, wavelength_m, aperture_m);
    (-air_exponent(f_cycles_arcsec, wavelength_m, tilt) * r0_m.powf(-5.0 / 3.0)).exp()
}
