//! Variance of the angle of arrival, and its covariance in two directions.
//!
//! # Model
//!
//! ```text
//! sigma^2 = pi lambda^2 int f^3 W g^2(pi D f) df                          one axis
//! B0(s)   = pi lambda^2 int f^3 W g^2 J0(2 pi s f) df
//! B2(s)   = pi lambda^2 int f^3 W g^2 J2(2 pi s f) df
//! C_l = B0 - B2   along the separation,   C_t = B0 + B2   across it
//! C_rr(delta) = cos(delta) B0(s) + B2(s),   s = 2 rho |sin(delta/2)|      radial, on the limb
//! ```
//!
//! | symbol | meaning | unit |
//! |--------|---------|------|
//! | `s` | separation of the two beams in the layer | m |
//! | `rho` | radius of the limb's ring in the layer: range times angular radius | m |
//! | `delta` | difference of position angle | rad |
//! | `W`, `g` | see `spectrum`, `aperture` | |
//!
//! # Valid for
//!
//! Separations from 0 to 1000 m; outer scales from 0.1 m to infinity.
//!
//! # Accuracy
//!
//! 1e-6 of `sigma^2`; checked in `tests/published/limb_motion_kernels.rs`.
//!
//! # Source
//!
//! D. L. Fried, Radio Science 10, 71 (1975); J. Borgnino, F. Martin and A. Ziad, Optics
//! Communications 91, 267 (1992); R. Conan et al., J. Opt. Soc. Am. A 17, 1807 (2000).

use super::error::{checked_length_m, checked_outer_scale_m};
use super::quadrature::{Node, Oscillation, nodes, taper};
use super::spectrum::gradient_spectrum;
use super::{Aperture, Tilt, TurbulenceError};
use std::f64::consts::PI;

/// Longest length in a layer: the limb seen through 15 km of slant range at the lowest Sun spans
/// far less.
pub(super) const LONGEST_M: f64 = 1000.0;

/// Argument of the Bessel functions between which their oscillation is faded out.
const FADE: (f64, f64) = (120.0, 300.0);

/// Variance of one axis of the angle of arrival, in m^(-1/3).
///
/// # Errors
///
/// [`TurbulenceError`] for an aperture, tilt or outer scale that cannot be.
pub fn variance_kernel(
    aperture: &Aperture,
    tilt: Tilt,
    outer_scale_m: f64,
) -> Result<f64, TurbulenceError> {
    covariance_kernels(aperture, tilt, outer_scale_m, 0.0).map(|(b0, _)| b0)
}

/// `(B0, B2)` of two beams, in m^(-1/3).
///
/// # Errors
///
/// [`TurbulenceError`] for an aperture, tilt, outer scale or separation that cannot be.
pub fn covariance_kernels(
    aperture: &Aperture,
    tilt: Tilt,
    outer_scale_m: f64,
    separation_m: f64,
) -> Result<(f64, f64), TurbulenceError> {
    aperture.checked()?;
    tilt.checked()?;
    let outer_scale_m = checked_outer_scale_m(outer_scale_m)?;
    let s = checked_length_m("separation", separation_m, 0.0, LONGEST_M)?;
    let (mut b0, mut b2) = (0.0, 0.0);
    for Node {
        f_per_m,
        width_per_m,
    } in plan(aperture, &[outer_scale_m], s, FADE.1)
    {
        let z = 2.0 * PI * s * f_per_m;
        let keep = taper(z, FADE.0, FADE.1);
        if keep <= 0.0 {
            continue;
        }
        let common = keep
            * width_per_m
            * gradient_spectrum(f_per_m, outer_scale_m)
            * tilt.filter_squared(aperture, f_per_m);
        let j0 = libm::j0(z);
        // 2 J1/z - J0 loses its figures below z = 1e-3, where z^2/8 is exact.
        let j2 = if z < 1e-3 {
            z * z / 8.0
        } else {
            2.0 * libm::j1(z) / z - j0
        };
        b0 += common * j0;
        b2 += common * j2;
    }
    Ok((PI * b0, PI * b2))
}

/// Covariance of the limb's radial displacement at two position angles, in m^(-1/3).
///
/// # Errors
///
/// [`TurbulenceError`] as [`covariance_kernels`].
pub fn limb_covariance_kernel(
    aperture: &Aperture,
    tilt: Tilt,
    outer_scale_m: f64,
    ring_radius_m: f64,
    delta_rad: f64,
) -> Result<f64, TurbulenceError> {
    let separation_m = 2.0 * ring_radius_m * (0.5 * delta_rad).sin().abs();
    let (b0, b2) = covariance_kernels(aperture, tilt, outer_scale_m, separation_m)?;
    Ok(delta_rad.cos() * b0 + b2)
}

/// Nodes for an integrand that oscillates over the aperture and once per `2 pi / separation` until
/// the phase `2 pi separation f` reaches `until_phase`.
pub(super) fn plan(
    aperture: &Aperture,
    outer_scales_m: &[f64],
    separation_m: f64,
    until_phase: f64,
) -> Vec<Node> {
    let [outer, inner] = aperture.oscillations();
    let apart = Oscillation {
        length_m: separation_m,
        until_per_m: if separation_m > 0.0 {
            until_phase / (2.0 * PI * separation_m)
        } else {
            0.0
        },
    };
    let longest_m = outer_scales_m
        .iter()
        .copied()
        .filter(|it| it.is_finite())
        .fold(aperture.diameter_m.max(separation_m), f64::max);
    nodes(
        0.1 / longest_m,
        aperture.last_per_m(),
        &[outer, inner, apart],
    )
}
