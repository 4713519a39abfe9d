//! The figure of a Sun whose surface turns by a published law, with no quadrupole of its own.
//!
//! # Model
//!
//! ```text
//! Omega = A + B x^2 + C x^4,   x = sin(latitude)
//! f(x) = -(R^3 / GM) Integral_0^x Omega^2 y dy           radius along the surface, relative
//! oblateness / R = -f(1),   c_n = (2 n + 1) Integral_0^1 f P_n dx
//! ```
//!
//! | symbol | meaning | unit |
//! |--------|---------|------|
//! | `A`, `B`, `C` | sidereal rotation | deg/day |
//! | `R`, `GM` | nominal radius and mass parameter | m, m^3 s^-2 |
//!
//! # Valid for
//!
//! First order in the centrifugal over the gravitational acceleration, 2e-5.
//!
//! # Accuracy
//!
//! Closed form; the coefficients of the laws are good to their printed digits, and the laws differ by
//! a mas.
//!
//! # Source
//!
//! Hydrostatic equilibrium at the surface; Snodgrass & Ulrich (1990), Snodgrass (1983), Howard &
//! Harvey (1970), coefficients from memory, checked against the table of the project's physics page.

use crate::constants::{SOLAR_MASS_PARAMETER, SOLAR_RADIUS_NOMINAL};
use crate::session::RotationLaw;
use crate::units::DEG_RAD;

/// A figure, relative to the radius.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct Figure {
    /// Equatorial minus polar radius.
    pub oblateness: f64,
    /// Coefficient of `P2`.
    pub c2: f64,
    /// Coefficient of `P4`.
    pub c4: f64,
    /// Coefficient of `P6`.
    pub c6: f64,
}

/// Coefficients of a law, deg/day: equator, `sin^2` and `sin^4` of the latitude; none for the middle of
/// the laws' range.
fn coefficients(law: RotationLaw) -> Option<[f64; 3]> {
    match law {
        RotationLaw::Middle => None,
        RotationLaw::SnodgrassUlrich1990 => Some([14.71, -2.39, -1.78]),
        RotationLaw::Snodgrass1983 => Some([14.366, -2.297, -1.624]),
        RotationLaw::HowardHarvey1970 => Some([13.76, -1.74, -2.19]),
        // 25.38 days: 2.865e-6 rad/s.
        RotationLaw::Uniform => Some([2.865e-6 * 86400.0 / DEG_RAD, 0.0, 0.0]),
    }
}

/// The laws whose range counts as the uncertainty: a uniform rotation is no law of the surface.
pub(super) const SPANNED: [RotationLaw; 3] = [
    RotationLaw::SnodgrassUlrich1990,
    RotationLaw::Snodgrass1983,
    RotationLaw::HowardHarvey1970,
];

/// The figure that rotation alone gives.
pub fn figure(law: RotationLaw) -> Figure {
    match coefficients(law) {
        Some(it) => turning(it),
        None => over_laws(|low, high| 0.5 * (low + high)),
    }
}

/// Standard uncertainty of the figure by the choice of the law: half the range over root 3.
pub fn spread() -> Figure {
    over_laws(|low, high| (high - low) / 12.0_f64.sqrt())
}

/// Something of the least and the greatest of the laws, for each number of the figure.
fn over_laws(of: impl Fn(f64, f64) -> f64) -> Figure {
    let figures = SPANNED.map(figure);
    let each = |pick: &dyn Fn(&Figure) -> f64| {
        let (low, high) =
            figures
                .iter()
                .map(pick)
                .fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), it| {
                    (
                        if it < low { it } else { low },
                        if it > high { it } else { high },
                    )
                });
        of(low, high)
    };
    Figure {
        oblateness: each(&|it| it.oblateness),
        c2: each(&|it| it.c2),
        c4: each(&|it| it.c4),
        c6: each(&|it| it.c6),
    }
}

/// The figure of a law.
fn turning([a, b, c]: [f64; 3]) -> Figure {
    let rad_s = DEG_RAD / 86400.0;
    let r_m = SOLAR_RADIUS_NOMINAL.value;
    let factor = r_m.powi(3) / SOLAR_MASS_PARAMETER.value * rad_s * rad_s;
    // Omega^2 by even powers of x, integrated over y dy: f = -sum power[k] x^(2k + 2).
    let squared = [a * a, 2.0 * a * b, b * b + 2.0 * a * c, 2.0 * b * c, c * c];
    let power: Vec<f64> = squared
        .iter()
        .enumerate()
        .map(|(k, it)| factor * it / (2 * k + 2) as f64)
        .collect();
    let coefficient = |n: usize, polynomial: &[f64]| {
        let mut sum = 0.0;
        for (k, of_f) in power.iter().enumerate() {
            for (j, of_p) in polynomial.iter().enumerate() {
                sum -= of_f * of_p / (2 * k + 2 + 2 * j + 1) as f64;
            }
        }
        (2 * n + 1) as f64 * sum
    };
    Figure {
        oblateness: power.iter().sum(),
        c2: coefficient(2, &[-0.5, 1.5]),
        c4: coefficient(4, &[0.375, -3.75, 4.375]),
        c6: coefficient(6, &[-0.3125, 6.5625, -19.6875, 14.4375]),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Source: the sum of the harmonics from equator to pole, `P2`, `P4`, `P6` at both: mathematics.
    #[test]
    fn the_harmonics_add_up_to_the_oblateness() {
        for law in SPANNED {
            let it = figure(law);
            let sum = -1.5 * it.c2 - 0.625 * it.c4 - 1.3125 * it.c6;
            // What is left are harmonics above 6, below a thousandth.
            assert!((sum / it.oblateness - 1.0).abs() < 1e-3, "{law:?} {sum}");
        }
    }

    /// Source: common practice, no source: one turn in about 25 days at the equator; 7 to 8 mas are 5
    /// to 6 km.
    #[test]
    fn the_size_is_that_of_the_trade() {
        for law in SPANNED {
            let [a, ..] = coefficients(law).unwrap();
            assert!((24.0..26.5).contains(&(360.0 / a)), "{law:?}");
            let it = figure(law);
            let km = it.oblateness * SOLAR_RADIUS_NOMINAL.value / 1000.0;
            assert!((5.0..6.2).contains(&km), "{law:?} {km}");
        }
    }

    #[test]
    fn a_uniform_rotation_has_no_fourth_harmonic() {
        let it = figure(RotationLaw::Uniform);
        assert!(it.c4.abs() < 1e-18 && it.c6.abs() < 1e-18);
        assert!((it.oblateness + 1.5 * it.c2).abs() < 1e-18);
    }
}
