//! What a finite exposure takes from the image motion.
//!
//! # Model
//!
//! ```text
//! integrand times  S(f V T),   S(a) = mean over direction of sinc^2(a cos gamma)
//!                                   = 2 int_0^1 (1 - t) J0(2 pi a t) dt
//!                                   = (2/b) [ int_0^b J0 - J1(b) ],   b = 2 pi a
//! int_0^b J0 = 2 (J1 + J3 + J5 + ...)                                         b < 60
//! S(a) ~ (2/b) [1 + J2/b + 3 J3/b^2 + 15 J4/b^3 + 105 J5/b^4]                  b >= 60
//! ```
//!
//! | symbol | meaning | unit |
//! |--------|---------|------|
//! | `V T` | wind speed times exposure: the drift of the layer in one frame | m |
//!
//! # Valid for
//!
//! Frozen flow; harmonics averaged over the direction of the wind (one harmonic, one direction:
//! up to twice or none of the loss).
//!
//! # Accuracy
//!
//! 1e-5 of the factor.
//!
//! # Source
//!
//! H. M. Martin, Publ. Astron. Soc. Pacific 99, 1360 (1987) (from memory), for the method.

use super::bessel::fill_j;
use super::covariance::plan;
use super::error::{checked_length_m, checked_outer_scale_m};
use super::harmonics::{Power, ring_integrals};
use super::quadrature::Node;
use super::spectrum::gradient_spectrum;
use super::{Aperture, Tilt, TurbulenceError};
use std::f64::consts::PI;

/// Factor on the variance of each harmonic m = 0..=`m_max` when the layer drifts by `drift_m` (wind
/// speed times exposure) during a frame.
///
/// # Errors
///
/// [`TurbulenceError`] for an argument out of range; the ring needs a radius.
pub fn finite_exposure(
    aperture: &Aperture,
    tilt: Tilt,
    outer_scale_m: f64,
    ring_radius_m: f64,
    m_max: usize,
    drift_m: f64,
) -> Result<Vec<f64>, TurbulenceError> {
    checked_length_m("ring radius", ring_radius_m, 1e-6, 500.0)?;
    let scales = [outer_scale_m];
    let integrals = |drift_m| {
        ring_integrals(
            aperture,
            tilt,
            &scales,
            ring_radius_m,
            m_max,
            drift_m,
            Power::Variance,
        )
    };
    let (still, moving) = (integrals(0.0)?, integrals(drift_m)?);
    Ok(moving[0]
        .iter()
        .zip(&still[0])
        .map(|(a, b)| a / b)
        .collect())
}

/// The same factor for the variance of one axis in one direction, averaged over the wind's
/// direction.
///
/// # Errors
///
/// [`TurbulenceError`] for an argument out of range.
pub fn variance_exposure_factor(
    aperture: &Aperture,
    tilt: Tilt,
    outer_scale_m: f64,
    drift_m: f64,
) -> Result<f64, TurbulenceError> {
    aperture.checked()?;
    tilt.checked()?;
    let outer_scale_m = checked_outer_scale_m(outer_scale_m)?;
    let drift_m = checked_length_m("wind times exposure", drift_m, 0.0, 1000.0)?;
    let (mut still, mut moving) = (0.0, 0.0);
    for Node {
        f_per_m,
        width_per_m,
    } in plan(aperture, &[outer_scale_m], drift_m, 1000.0)
    {
        let share = width_per_m
            * gradient_spectrum(f_per_m, outer_scale_m)
            * tilt.filter_squared(aperture, f_per_m);
        still += share;
        moving += share * direction_mean_sinc_squared(drift_m * f_per_m);
    }
    Ok(moving / still)
}

/// Mean of `sinc^2(a cos gamma)` over all directions gamma.
pub(super) fn direction_mean_sinc_squared(a: f64) -> f64 {
    let b = 2.0 * PI * a.abs();
    if b < 1e-2 {
        // sinc^2 = 1 - (pi a cos gamma)^2 / 3 + 2 (pi a cos gamma)^4 / 45
        let q = 0.25 * b * b;
        return 1.0 - q / 6.0 + q * q / 60.0;
    }
    if b >= 60.0 {
        let (j0, j1) = (libm::j0(b), libm::j1(b));
        let j2 = 2.0 * j1 / b - j0;
        let j3 = 4.0 * j2 / b - j1;
        let j4 = 6.0 * j3 / b - j2;
        let j5 = 8.0 * j4 / b - j3;
        let series = j2 / b + 3.0 * j3 / b.powi(2) + 15.0 * j4 / b.powi(3) + 105.0 * j5 / b.powi(4);
        return 2.0 / b * (1.0 + series);
    }
    let mut row = [0.0; 112];
    let used = (b as usize + 50).min(row.len());
    fill_j(b, &mut row[..used]);
    let odd: f64 = row[..used].iter().skip(1).step_by(2).sum();
    2.0 / b * (2.0 * odd - row[1])
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_closed_form_is_the_mean_over_directions() {
        for a in [0.0, 1e-3, 0.002, 0.3, 1.7, 9.4, 9.6, 30.0] {
            let count = 20_000;
            let mean: f64 = (0..count)
                .map(|k| {
                    let u = PI * a * (PI * (f64::from(k) + 0.5) / f64::from(count)).cos();
                    if u.abs() < 1e-9 {
                        1.0
                    } else {
                        (u.sin() / u).powi(2)
                    }
                })
                .sum::<f64>()
                / f64::from(count);
            let found = direction_mean_sinc_squared(a);
            assert!((found / mean - 1.0).abs() < 1e-5, "a = {a}: {found} {mean}");
        }
    }
}
