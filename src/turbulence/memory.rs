//! How long the harmonics of the limb's motion remember: their covariance over a time lag.
//!
//! # Model
//!
//! ```text
//! Cov[a_m(t), a_m(t + tau)] = E_m + (-1)^m cos(2 m phi) O_m,   b_m with minus
//! E_m = 4 pi lambda^2 int f^3 W g^2 J'_m^2(2 pi rho f) J0(2 pi s f) df       s = V tau
//! O_m = 4 pi lambda^2 int f^3 W g^2 J'_m^2(2 pi rho f) J_2m(2 pi s f) df
//! m = 0: half of E_0 with J_1^2 in place of J'_m^2, no O
//! ```
//!
//! | symbol | meaning | unit |
//! |--------|---------|------|
//! | `s` | how far the layer drifts in the lag | m |
//! | `phi` | position angle of the wind | rad |
//!
//! Averaged over directions of the wind, or over `a_m` and `b_m`, only `E_m` is left.
//!
//! # Valid for
//!
//! Frozen flow; full limbs, ring radii to 500 m, drifts to 1000 m.
//!
//! # Accuracy
//!
//! 1e-4 of the one-axis variance; a Monte Carlo of plane waves, drifts included, is met within its
//! sampling error (`tests/published/motion_monte_carlo.rs`).
//!
//! # Source
//!
//! Taylor's hypothesis in the covariance of J. Borgnino, F. Martin and A. Ziad, Optics
//! Communications 91, 267 (1992); derived here.

use super::bessel::{RingWeights, add_mean_far, fill_j};
use super::covariance::LONGEST_M;
use super::error::{checked_length_m, checked_order, checked_outer_scale_m};
use super::quadrature::{Node, Oscillation, nodes, taper};
use super::spectrum::gradient_spectrum;
use super::{Aperture, Tilt, TurbulenceError};
use std::f64::consts::PI;

/// Covariance of one coefficient of a harmonic with itself after a drift, in m^(-1/3).
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct LagKernel {
    /// Mean over the directions of the wind: `E_m`.
    pub mean: f64,
    /// What the direction adds: `O_m`, times `(-1)^m cos(2 m phi)` for the cosine coefficient and
    /// minus that for the sine.
    pub swing: f64,
}

/// Phases between which the drift's oscillation is faded out.
const FADE: (f64, f64) = (120.0, 300.0);

/// Covariances of the harmonics m = 0..=`m_max` with themselves after the layer has drifted by
/// `drift_m` (wind speed times lag).
///
/// # Errors
///
/// [`TurbulenceError`] for an argument out of range.
pub fn harmonic_lag_kernels(
    aperture: &Aperture,
    tilt: Tilt,
    outer_scale_m: f64,
    ring_radius_m: f64,
    m_max: usize,
    drift_m: f64,
) -> Result<Vec<LagKernel>, TurbulenceError> {
    aperture.checked()?;
    tilt.checked()?;
    let m_max = checked_order(m_max)?;
    let outer_scale_m = checked_outer_scale_m(outer_scale_m)?;
    let rho = checked_length_m("ring radius", ring_radius_m, 0.0, 0.5 * LONGEST_M)?;
    let s = checked_length_m("drift", drift_m, 0.0, LONGEST_M)?;
    let ring_from = (2.5 * m_max as f64).max(60.0);
    let ring_to = 2.5 * ring_from;
    let until = |length_m: f64, phase: f64| Oscillation {
        length_m,
        until_per_m: if length_m > 0.0 {
            phase / (2.0 * PI * length_m)
        } else {
            0.0
        },
    };
    let [outer, inner] = aperture.oscillations();
    let lengths = [
        outer,
        inner,
        until(2.0 * rho, 2.0 * ring_to),
        until(s, FADE.1),
    ];
    let longest_m = [aperture.diameter_m, 2.0 * rho, s, outer_scale_m]
        .into_iter()
        .filter(|it| it.is_finite())
        .fold(0.0, |a, b| if b > a { b } else { a });
    let mut weights = RingWeights::new(m_max);
    let mut row = vec![0.0; m_max + 1];
    let mut drifted = vec![0.0; 2 * m_max + 3];
    let mut sums = vec![LagKernel::default(); m_max + 1];
    for Node {
        f_per_m,
        width_per_m,
    } in nodes(0.1 / longest_m, aperture.last_per_m(), &lengths)
    {
        let phase = 2.0 * PI * s * f_per_m;
        let alive = taper(phase, FADE.0, FADE.1);
        if alive <= 0.0 {
            break;
        }
        fill_j(phase, &mut drifted);
        let z = 2.0 * PI * rho * f_per_m;
        let keep = taper(z, ring_from, ring_to);
        row.fill(0.0);
        if keep > 0.0 {
            weights.add_exact(z, keep, &mut row);
        }
        if keep <= 0.0 {
            add_mean_far(z, &mut row);
        } else if keep < 1.0 {
            weights.add_mean(z, 1.0 - keep, &mut row);
        }
        let common = alive
            * width_per_m
            * gradient_spectrum(f_per_m, outer_scale_m)
            * tilt.filter_squared(aperture, f_per_m);
        for (m, (sum, weight)) in sums.iter_mut().zip(&row).enumerate() {
            sum.mean += common * weight * drifted[0];
            if m > 0 {
                sum.swing += common * weight * drifted[2 * m];
            }
        }
    }
    for (m, it) in sums.iter_mut().enumerate() {
        it.mean *= if m == 0 { 2.0 * PI } else { 4.0 * PI };
        it.swing *= 4.0 * PI;
    }
    Ok(sums)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::turbulence::{harmonic_correlation_length_m, harmonic_kernels};

    #[test]
    fn no_drift_is_the_variance_and_a_long_one_is_forgotten() -> Result<(), TurbulenceError> {
        let aperture = Aperture::clear(0.1);
        let at = |drift_m| harmonic_lag_kernels(&aperture, Tilt::Gradient, 25.0, 2.3, 12, drift_m);
        let still = harmonic_kernels(&aperture, Tilt::Gradient, 25.0, 2.3, 12)?;
        for (a, b) in at(0.0)?.iter().zip(&still) {
            assert!((a.mean / b - 1.0).abs() < 1e-9 && a.swing == 0.0);
        }
        assert!(
            at(200.0)?
                .iter()
                .zip(&still)
                .all(|(a, b)| a.mean.abs() < 0.02 * b)
        );
        Ok(())
    }

    #[test]
    fn the_covariances_sum_to_the_correlation_length() -> Result<(), TurbulenceError> {
        // int Cov d(V tau) over both signs is the two-sided correlation length times the variance.
        let aperture = Aperture::clear(0.1);
        let (rho, m) = (2.3, 6);
        let still = harmonic_kernels(&aperture, Tilt::Gradient, 25.0, rho, m)?[m];
        let wanted = harmonic_correlation_length_m(&aperture, Tilt::Gradient, 25.0, rho, m)?[m];
        let step = 0.02;
        let mut sum = -0.5 * still;
        for k in 0..1500 {
            sum +=
                harmonic_lag_kernels(&aperture, Tilt::Gradient, 25.0, rho, m, step * f64::from(k))?
                    [m]
                    .mean;
        }
        let found = 2.0 * step * sum / still;
        assert!((found / wanted - 1.0).abs() < 0.02, "{found} {wanted}");
        Ok(())
    }
}
