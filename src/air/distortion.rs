//! What the air does to the shape of a round disk.
//!
//! # Model
//!
//! ```text
//! r(theta) = rho + a0 + a2 cos 2 theta + a3 cos 3 theta + ...        about the limb's own centre
//!
//! a0 = -(rho/2)(R' + R cot z)        a2 = -(rho/2)(R' - R cot z)
//! a1 = (rho^2/4)[(3/2)R'' + (R cot z)' + (1/2)R' cot z - (1/2)R cot^2 z + R/2]
//! a3 = (rho^2/4)[(1/2)R'' - (R cot z)' - (1/2)R' cot z + (1/2)R cot^2 z - R/2]
//! ```
//!
//! | symbol | meaning | unit |
//! |--------|---------|------|
//! | `rho`, `r` | true, apparent radius | rad |
//! | `theta` | bearing from the direction of the zenith | rad |
//! | `a1` | shift of the limb's centre towards the zenith, fitted away | rad |
//! | `R` | refraction at the centre; primes are by the true zenith distance | rad |
//!
//! Flattening is horizontal minus vertical radius, `-2 a2`.
//!
//! # Valid for
//!
//! [`distortion`]: any disk that [`DiskMap`] holds. [`distortion_analytic`]: first order in `R`.
//!
//! # Accuracy
//!
//! Exact map: 1e-6 mas. Analytic: `a2` to 0.02 mas up to 60 degrees, `a0` to 0.2 mas.
//!
//! # Source
//!
//! Expansion of the exact map; classical differential refraction.

use std::f64::consts::PI;

use nalgebra::{SMatrix, SVector};

use super::disk_map::DiskMap;
use crate::units::MAS_RAD;

/// Points on half the limb; the other half mirrors it.
const HALF_POINTS: usize = 180;

/// Harmonics fitted, `cos 0` to `cos 7`.
const TERMS: usize = 8;

/// Apparent minus true limb, in harmonics of the bearing about the limb's own centre.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Distortion {
    /// Change of the mean radius, in mas.
    pub mean_mas: f64,
    /// Shift of the limb's own centre from the refracted centre, towards the zenith, in mas.
    pub centre_shift_mas: f64,
    /// Coefficient of `cos 2 theta`, in mas.
    pub cos2_mas: f64,
    /// Horizontal minus vertical radius, in mas.
    pub flattening_mas: f64,
    /// Coefficient of `cos 3 theta`, in mas.
    pub cos3_mas: f64,
    /// Coefficient of `cos 4 theta`, in mas.
    pub cos4_mas: f64,
    /// Coefficient of `cos 5 theta`, in mas.
    pub cos5_mas: f64,
    /// Coefficient of the Legendre polynomial `P4`, `(64/35)` of `cos 4 theta`, in mas.
    pub p4_mas: f64,
    /// What the harmonics leave, rms, in mas.
    pub residual_mas: f64,
}

/// Distortion of a disk of a true radius.
pub fn distortion(map: &DiskMap, radius_rad: f64) -> Distortion {
    const STEPS: usize = 8;
    let mut limb: Vec<(f64, f64)> = (0..HALF_POINTS)
        .map(|k| (radius_rad, PI * (k as f64 + 0.5) / HALF_POINTS as f64))
        .collect();
    map.apparent_from_true_each(&mut limb);
    for point in &mut limb {
        let (sin, cos) = point.1.sin_cos();
        *point = (point.0 * sin, point.0 * cos);
    }
    let mut centre_rad = 0.0;
    let (mut a, mut residual_rad) = harmonics(&limb, centre_rad, radius_rad);
    for _ in 0..STEPS {
        centre_rad += a[1];
        (a, residual_rad) = harmonics(&limb, centre_rad, radius_rad);
        if a[1].abs() < 1e-9 * MAS_RAD {
            break;
        }
    }
    Distortion {
        mean_mas: a[0] / MAS_RAD,
        centre_shift_mas: centre_rad / MAS_RAD,
        cos2_mas: a[2] / MAS_RAD,
        flattening_mas: -2.0 * a[2] / MAS_RAD,
        cos3_mas: a[3] / MAS_RAD,
        cos4_mas: a[4] / MAS_RAD,
        cos5_mas: a[5] / MAS_RAD,
        p4_mas: 64.0 / 35.0 * a[4] / MAS_RAD,
        residual_mas: residual_rad / MAS_RAD,
    }
}

/// Least squares of cosines to the radius about a point on the vertical, less the true radius.
fn harmonics(limb: &[(f64, f64)], centre_rad: f64, radius_rad: f64) -> (SVector<f64, TERMS>, f64) {
    let mut normal = SMatrix::<f64, TERMS, TERMS>::zeros();
    let mut right = SVector::<f64, TERMS>::zeros();
    let mut square_sum = 0.0;
    for &(x_rad, y_rad) in limb {
        let y_rad = y_rad - centre_rad;
        let r_rad = x_rad.hypot(y_rad);
        let cos = y_rad / r_rad;
        let mut row = SVector::<f64, TERMS>::zeros();
        row[0] = 1.0;
        row[1] = cos;
        for m in 2..TERMS {
            row[m] = 2.0 * cos * row[m - 1] - row[m - 2];
        }
        let excess_rad = r_rad - radius_rad;
        normal.ger(1.0, &row, &row, 1.0);
        right.axpy(excess_rad, &row, 1.0);
        square_sum += excess_rad * excess_rad;
    }
    let nan = SVector::<f64, TERMS>::repeat(f64::NAN);
    let a = normal.cholesky().map_or(nan, |it| it.solve(&right));
    let left = (square_sum - a.dot(&right)).max(0.0) / limb.len() as f64;
    (a, left.sqrt())
}

/// The first-order distortion, from the refraction at the centre and its derivatives.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct AnalyticDistortion {
    /// Change of the mean radius, in mas.
    pub mean_mas: f64,
    /// Shift of the limb's own centre towards the zenith, in mas.
    pub centre_shift_mas: f64,
    /// Coefficient of `cos 2 theta`, in mas.
    pub cos2_mas: f64,
    /// Horizontal minus vertical radius, in mas.
    pub flattening_mas: f64,
    /// Coefficient of `cos 3 theta`, in mas.
    pub cos3_mas: f64,
}

/// Distortion of a disk of a true radius to first order in the refraction.
pub fn distortion_analytic(map: &DiskMap, radius_rad: f64) -> AnalyticDistortion {
    /// Closer to the zenith the odd terms vanish as the zenith distance, below 1e-6 mas.
    const AT_ZENITH_RAD: f64 = 1e-6;
    let bending = map.bending();
    let (z, zeta) = (map.zenith_true_rad(), map.zenith_apparent_rad());
    let r = bending.refraction_rad(zeta);
    let slope = bending.slope(zeta);
    let r1 = slope / (1.0 + slope);
    let r2 = bending.curvature_per_rad(zeta) / (1.0 + slope).powi(3);
    let quarter = 0.25 * radius_rad * radius_rad;
    let (r_cot, a1, a3) = if z < AT_ZENITH_RAD {
        (r1, 0.0, 0.0)
    } else {
        let cot = z.cos() / z.sin();
        let r_cot_slope = r1 * cot - r / z.sin().powi(2);
        let common = r_cot_slope + 0.5 * r1 * cot - 0.5 * r * cot * cot + 0.5 * r;
        (
            r * cot,
            quarter * (1.5 * r2 + common),
            quarter * (0.5 * r2 - common),
        )
    };
    let a0 = -0.5 * radius_rad * (r1 + r_cot);
    let a2 = -0.5 * radius_rad * (r1 - r_cot);
    AnalyticDistortion {
        mean_mas: a0 / MAS_RAD,
        centre_shift_mas: a1 / MAS_RAD,
        cos2_mas: a2 / MAS_RAD,
        flattening_mas: -2.0 * a2 / MAS_RAD,
        cos3_mas: a3 / MAS_RAD,
    }
}
