//! Variances and correlation times of the harmonics of the limb's radial displacement.
//!
//! # Model
//!
//! ```text
//! dr(psi) = a_0 + sum_m (a_m cos m psi + b_m sin m psi)
//! Var a_0 = 2 pi lambda^2 int f^3 W g^2 J_1^2(2 pi rho f) df
//! Var a_m = Var b_m = 4 pi lambda^2 int f^3 W g^2 J'_m^2(2 pi rho f) df          m >= 1
//! T_0 V   = 2 lambda^2 int f^2 W g^2 J_1^2 df / Var a_0                          wind average
//! T_m V   = 4 lambda^2 int f^2 W g^2 J'_m^2 df / Var a_m
//! ```
//!
//! For isotropic turbulence harmonics of different m are uncorrelated. They sum to the variance
//! of one axis; for a layer at the telescope only m = 1 is left.
//!
//! | symbol | meaning | unit |
//! |--------|---------|------|
//! | `rho` | radius of the limb's ring in the layer | m |
//! | `T_m` | two-sided correlation time: a mean over a time T has the variance `Var T_m / T` | s |
//! | `V` | wind speed of frozen flow | m/s |
//!
//! # Valid for
//!
//! Full limbs, ring radii from 0 to 500 m, harmonics to 200, point directions (averaging over a
//! sector of width w multiplies the variance by sinc^2(m w / 2 pi)). The correlation length of
//! m = 1 does not exist for an infinite outer scale and is returned as infinity.
//!
//! # Accuracy
//!
//! 1e-6 of the one-axis variance; checked in `tests/published/limb_motion_kernels.rs`.
//!
//! # Source
//!
//! Jacobi-Anger expansion of the covariance of J. Borgnino, F. Martin and A. Ziad, Optics
//! Communications 91, 267 (1992); derived here.

use super::bessel::{RingWeights, add_mean_far};
use super::covariance::{LONGEST_M, plan};
use super::error::{checked_length_m, checked_order, checked_outer_scale_m};
use super::exposure::direction_mean_sinc_squared;
use super::quadrature::{Node, taper};
use super::spectrum::gradient_spectrum;
use super::{Aperture, Tilt, TurbulenceError};
use std::f64::consts::PI;

/// Variances of the harmonics m = 0..=`m_max`, in m^(-1/3).
///
/// # Errors
///
/// [`TurbulenceError`] for an aperture, tilt, outer scale, ring or order out of range.
pub fn harmonic_kernels(
    aperture: &Aperture,
    tilt: Tilt,
    outer_scale_m: f64,
    ring_radius_m: f64,
    m_max: usize,
) -> Result<Vec<f64>, TurbulenceError> {
    let mut rows = ring_integrals(
        aperture,
        tilt,
        &[outer_scale_m],
        ring_radius_m,
        m_max,
        0.0,
        Power::Variance,
    )?;
    Ok(rows.swap_remove(0))
}

/// Correlation time of each harmonic times the wind speed, averaged over the wind's direction, in
/// m.
///
/// # Errors
///
/// [`TurbulenceError`] as [`harmonic_kernels`]; a ring of no radius has no correlation length.
pub fn harmonic_correlation_length_m(
    aperture: &Aperture,
    tilt: Tilt,
    outer_scale_m: f64,
    ring_radius_m: f64,
    m_max: usize,
) -> Result<Vec<f64>, TurbulenceError> {
    checked_length_m("ring radius", ring_radius_m, 1e-6, 0.5 * LONGEST_M)?;
    let scales = [outer_scale_m];
    let integrals =
        |power| ring_integrals(aperture, tilt, &scales, ring_radius_m, m_max, 0.0, power);
    let (variance, still) = (
        integrals(Power::Variance)?,
        integrals(Power::ZeroFrequency)?,
    );
    let mut out: Vec<f64> = still[0]
        .iter()
        .zip(&variance[0])
        .map(|(s, v)| s / v)
        .collect();
    if outer_scale_m.is_infinite() && m_max >= 1 {
        out[1] = f64::INFINITY;
    }
    Ok(out)
}

/// Which moment of the spectrum is integrated.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) enum Power {
    /// `f^3 W`: the variance.
    Variance,
    /// `f^2 W / pi`: the density at zero temporal frequency times the wind speed.
    ZeroFrequency,
}

/// The integrals for several outer scales at once, which share their Bessel functions.
pub(super) fn ring_integrals(
    aperture: &Aperture,
    tilt: Tilt,
    outer_scales_m: &[f64],
    ring_radius_m: f64,
    m_max: usize,
    drift_m: f64,
    power: Power,
) -> Result<Vec<Vec<f64>>, TurbulenceError> {
    aperture.checked()?;
    tilt.checked()?;
    let m_max = checked_order(m_max)?;
    let rho = checked_length_m("ring radius", ring_radius_m, 0.0, 0.5 * LONGEST_M)?;
    let drift_m = checked_length_m("wind times exposure", drift_m, 0.0, LONGEST_M)?;
    for &it in outer_scales_m {
        checked_outer_scale_m(it)?;
    }
    // The squares oscillate until well above the order; from there on their mean is enough.
    let fade_from = (2.5 * m_max as f64).max(60.0);
    let fade_to = 2.5 * fade_from;
    let mut weights = RingWeights::new(m_max);
    let mut row = vec![0.0; m_max + 1];
    let mut sums = vec![vec![0.0; m_max + 1]; outer_scales_m.len()];
    for Node {
        f_per_m,
        width_per_m,
    } in plan(aperture, outer_scales_m, 2.0 * rho, 2.0 * fade_to)
    {
        let z = 2.0 * PI * rho * f_per_m;
        let mut common = width_per_m * tilt.filter_squared(aperture, f_per_m);
        if drift_m > 0.0 {
            common *= direction_mean_sinc_squared(drift_m * f_per_m);
        }
        if power == Power::ZeroFrequency {
            common /= PI * f_per_m;
        }
        let keep = taper(z, fade_from, fade_to);
        row.fill(0.0);
        if keep > 0.0 {
            weights.add_exact(z, keep, &mut row);
        }
        if keep <= 0.0 {
            add_mean_far(z, &mut row);
        } else if keep < 1.0 {
            weights.add_mean(z, 1.0 - keep, &mut row);
        }
        for (&outer_scale_m, sum) in outer_scales_m.iter().zip(&mut sums) {
            let share = common * gradient_spectrum(f_per_m, outer_scale_m);
            for (to, weight) in sum.iter_mut().zip(&row) {
                *to += share * weight;
            }
        }
    }
    for sum in &mut sums {
        for (m, it) in sum.iter_mut().enumerate() {
            *it *= if m == 0 { 2.0 * PI } else { 4.0 * PI };
        }
    }
    Ok(sums)
}
