//! How a telescope's aperture filters the gradient of the wavefront.
//!
//! # Model
//!
//! ```text
//! gradient tilt    g(x) = 2 J1(x) / x      with obstruction e:  [g(x) - e^2 g(e x)] / (1 - e^2)
//! Zernike tilt     g(x) = 8 J2(x) / x^2                         [g(x) - e^4 g(e x)] / (1 - e^4)
//! x = pi D f
//! ```
//!
//! The gradient tilt is the motion of the image's centroid; the Zernike tilt that of the best plane
//! through the wavefront. An edge estimator follows something between: the square of the filter is
//! mixed, `(1 - w) g_G^2 + w g_Z^2`.
//!
//! # Valid for
//!
//! Circular apertures, central obstruction to 0.9 of the diameter.
//!
//! # Accuracy
//!
//! Exact; above `x = 150` the square is replaced by its mean over a cycle.
//!
//! # Source
//!
//! D. L. Fried, Radio Science 10, 71 (1975); M. Sarazin and F. Roddier, Astron. Astrophys. 227, 294
//! (1990); G. A. Tyler, J. Opt. Soc. Am. A 11, 358 (1994) (from memory).

use super::TurbulenceError;
use super::quadrature::{Oscillation, taper};
use std::f64::consts::PI;

/// Where the square of the filter goes over into its mean.
const MEAN_FROM: f64 = 60.0;
const MEAN_TO: f64 = 150.0;

/// A circular aperture, perhaps with a central obstruction.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Aperture {
    /// Diameter.
    pub diameter_m: f64,
    /// Diameter of the central obstruction, as a fraction of `diameter_m`.
    pub obstruction: f64,
}

/// Which tilt of the wavefront the measured position follows.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Tilt {
    /// Mean gradient over the aperture: the centroid of the image (G-tilt).
    Gradient,
    /// Best-fitting plane over the aperture (Z-tilt).
    Zernike,
    /// Variances mixed: this share of the Zernike tilt's, the rest of the gradient tilt's.
    Between {
        /// Share of the Zernike tilt, 0 for the gradient tilt, 1 for the Zernike tilt.
        zernike_share: f64,
    },
}

impl Aperture {
    /// An unobstructed aperture.
    pub const fn clear(diameter_m: f64) -> Self {
        Self {
            diameter_m,
            obstruction: 0.0,
        }
    }

    pub(super) fn checked(&self) -> Result<(), TurbulenceError> {
        if !(0.005..=20.0).contains(&self.diameter_m) {
            return Err(TurbulenceError::Diameter {
                found_m: self.diameter_m,
            });
        }
        if !(0.0..=0.9).contains(&self.obstruction) {
            return Err(TurbulenceError::Obstruction {
                found: self.obstruction,
            });
        }
        Ok(())
    }

    /// The lengths over which the square of the filter oscillates, and until where.
    pub(super) fn oscillations(&self) -> [Oscillation; 2] {
        let of = |length_m: f64| Oscillation {
            length_m,
            until_per_m: MEAN_TO / (PI * length_m),
        };
        // A small obstruction's own oscillation is slow; it must not ask for panels for ever.
        let inner_m = self.obstruction * self.diameter_m;
        let inner = if inner_m > 0.0 {
            of(inner_m)
        } else {
            Oscillation {
                length_m: 0.0,
                until_per_m: 0.0,
            }
        };
        [of(self.diameter_m), inner]
    }

    /// Above this frequency nothing passes: what is left is 1e-11 of the variance.
    pub(super) fn last_per_m(&self) -> f64 {
        3000.0 / self.diameter_m
    }
}

impl Tilt {
    pub(super) fn checked(self) -> Result<(), TurbulenceError> {
        match self {
            Self::Between {
                zernike_share: found,
            } if !(-0.5..=1.5).contains(&found) => Err(TurbulenceError::TiltShare { found }),
            _ => Ok(()),
        }
    }

    /// Square of the filter, its mean over a cycle at high frequency.
    pub(super) fn filter_squared(self, aperture: &Aperture, f_per_m: f64) -> f64 {
        let x = PI * aperture.diameter_m * f_per_m;
        match self {
            Self::Gradient => gradient_squared(x, aperture.obstruction),
            Self::Zernike => zernike_squared(x, aperture.obstruction),
            Self::Between { zernike_share: w } => {
                (1.0 - w) * gradient_squared(x, aperture.obstruction)
                    + w * zernike_squared(x, aperture.obstruction)
            }
        }
    }
}

fn gradient_squared(x: f64, e: f64) -> f64 {
    if x < 1e-3 {
        // Second order of both terms: 1 - x^2 (1 + e^2) / 4 for the square.
        return 1.0 - 0.25 * x * x * (1.0 + e * e);
    }
    let scale = 4.0 / (x * x * (1.0 - e * e).powi(2));
    scale * ring_squared(x, e, 1, e)
}

fn zernike_squared(x: f64, e: f64) -> f64 {
    if x < 0.02 {
        // 8 J2(x)/x^2 = 1 - x^2/12 + x^4/384
        let g = |x: f64| 1.0 - x * x / 12.0 + x.powi(4) / 384.0;
        return ((g(x) - e.powi(4) * g(e * x)) / (1.0 - e.powi(4))).powi(2);
    }
    let scale = 64.0 / (x.powi(4) * (1.0 - e.powi(4)).powi(2));
    scale * ring_squared(x, e, 2, e * e)
}

/// `[J_n(x) - c J_n(e x)]^2`, each square its mean where its argument is large.
fn ring_squared(x: f64, e: f64, order: i32, c: f64) -> f64 {
    let outer = square_or_mean(x, order);
    if e == 0.0 {
        return outer;
    }
    let keep = taper(x, MEAN_FROM, MEAN_TO);
    let cross = if keep > 0.0 {
        keep * bessel_j(order, x) * bessel_j(order, e * x)
    } else {
        0.0
    };
    outer - 2.0 * c * cross + c * c * square_or_mean(e * x, order)
}

fn square_or_mean(x: f64, order: i32) -> f64 {
    let keep = taper(x, MEAN_FROM, MEAN_TO);
    let mut out = 0.0;
    if keep > 0.0 {
        out += keep * bessel_j(order, x).powi(2);
    }
    if keep < 1.0 {
        // Mean of J_n^2: (J^2 + Y^2)/2 = (1/(pi x)) [1 + (mu - 1)/(8 x^2) + ...], mu = 4 n^2
        // (Abramowitz and Stegun 9.2.28).
        let mu = f64::from(4 * order * order);
        let series = 1.0
            + (mu - 1.0) / (8.0 * x * x)
            + 3.0 * (mu - 1.0) * (mu - 9.0) / (8.0 * 16.0 * x.powi(4));
        out += (1.0 - keep) * series / (PI * x);
    }
    out
}

fn bessel_j(order: i32, x: f64) -> f64 {
    if order == 1 {
        libm::j1(x)
    } else {
        2.0 * libm::j1(x) / x - libm::j0(x)
    }
}
