//! Plate scale and camera angle from the centres of a drifting disk.
//!
//! # Model
//!
//! ```text
//! (x_k, y_k) = place of the Sun's apparent direction at t_k  +  noise along and across the path
//! unknown: ln scale, bearing of +y, two of the axis' direction
//! ```
//!
//! Generalised least squares. The noise has a variance of its own along and across the path and one
//! correlation in time (see `noise.rs`); variances by residual likelihood, correlation averaged over all
//! shares and times by that likelihood, so that not knowing it is in the covariance. For `N` centres
//! independent of each other, evenly spread over a way `L`:
//!
//! ```text
//! sigma(scale) / scale = sigma_x sqrt(12) / (L sqrt N)
//! ```
//!
//! # Valid for
//!
//! Six or more whole disks; a Sun that moves by a twentieth of what it must, or not at all, or another
//! way, is an error. The scale is that along the way: what a lens does elsewhere in the field is not seen.
//!
//! # Accuracy
//!
//! That of the covariance: squares of the pulls 0.8 to 1.2 over 400 made drifts of each kind of noise (tests).
//!
//! # Source
//!
//! H. D. Patterson and R. Thompson, Biometrika 58, 545 (1971), for the residual likelihood; the formula
//! of the scale: regression on evenly spread points.

use super::distortion::{DistortionBin, distortion};
use super::linear::{Solved, Turned};
use super::{DriftError, FixedCamera, Mounting, Seen};
use crate::sky::Parity;
use crate::units::wrapped_rad;
use nalgebra::{Matrix4, Vector4};

/// Whole disks that a drift needs at least.
pub const LEAST_FRAMES: usize = 6;

/// Unknowns: ln scale, bearing of +y, axis along and across the vertical.
pub(super) const UNKNOWNS: usize = 4;

/// Of the way expected, below which the Sun did not move, and beyond which it moved at another rate.
const STILL: f64 = 0.05;
/// See [`STILL`].
const RATE_TOLERANCE: f64 = 0.03;

/// Difference of direction beyond which parity or angle is wrong, deg.
const DIRECTION_TOLERANCE_DEG: f64 = 20.0;

/// One whole disk.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Centre {
    /// When the row through the disk's centre was exposed, s after any moment.
    pub time_s: f64,
    /// Centre on the detector, px.
    pub x_px: f64,
    /// Centre on the detector, px.
    pub y_px: f64,
    /// Where the Sun's centre was seen then.
    pub seen: Seen,
}

/// What a drift says.
#[derive(Clone, Debug, PartialEq)]
pub struct DriftFit {
    /// Scale, bearing of +y, axis.
    pub mounting: Mounting,
    /// Relative standard uncertainty of the scale.
    pub scale_sigma_rel: f64,
    /// Standard uncertainty of the bearing of +y, rad.
    pub up_sigma_rad: f64,
    /// Correlation of the two.
    pub correlation: f64,
    /// Scatter of a centre along and across the way, arcsec.
    pub noise_arcsec: (f64, f64),
    /// Share of its variance that is correlated in time, and that time, s.
    pub correlated: (f64, f64),
    /// Independent centres that would give the same error of the scale.
    pub independent: f64,
    /// The way, arcsec.
    pub travel_arcsec: f64,
    /// Velocity on the detector, px/s.
    pub velocity_px_s: (f64, f64),
    /// Every centre: distance along the way from the detector's middle, px, and residual along and across
    /// it, mas.
    pub residuals: Vec<(f64, f64, f64)>,
    /// Means of the residuals by part of the way, where there are enough centres.
    pub distortion: Vec<DistortionBin>,
}

/// Fits scale and bearing to the centres, in order of time, from the nominal ones.
///
/// # Errors
///
/// [`DriftError`]: too few centres, a Sun that does not move as it must, or an open system.
pub fn fit(
    centres: &[Centre],
    camera: &FixedCamera,
    nominal: (f64, f64),
) -> Result<DriftFit, DriftError> {
    let n = centres.len();
    if n < LEAST_FRAMES {
        return Err(DriftError::TooFew {
            found: n,
            needed: LEAST_FRAMES,
        });
    }
    let start = started(&centres[n / 2], camera, nominal);
    require_motion(centres, camera, &start)?;
    let mounting = settled(centres, camera, start)?;
    let velocity_px_s = velocity(centres);
    let turned = Turned::new(centres, camera, &mounting, velocity_px_s);
    let singular = DriftError::Singular { frames: n };
    let solved = turned.averaged(&turned.columns).ok_or(singular)?;
    Ok(finished(&turned, mounting, &solved, velocity_px_s))
}

/// The nominal mounting with its axis where the middle centre puts it.
fn started(middle: &Centre, camera: &FixedCamera, (scale, up_rad): (f64, f64)) -> Mounting {
    let mut it = Mounting {
        scale_arcsec_px: scale,
        up_rad,
        axis: middle.seen,
    };
    let place = (
        2.0 * camera.middle_px.0 - middle.x_px,
        2.0 * camera.middle_px.1 - middle.y_px,
    );
    it.axis = camera.seen_at(&it, place);
    it
}

fn least_squares_slope(centres: &[Centre], value: impl Fn(&Centre) -> f64) -> f64 {
    let n = centres.len() as f64;
    let mean_t = centres.iter().map(|it| it.time_s).sum::<f64>() / n;
    let mean_v = centres.iter().map(&value).sum::<f64>() / n;
    let (mut top, mut bottom) = (0.0, 0.0);
    for it in centres {
        top += (it.time_s - mean_t) * (value(it) - mean_v);
        bottom += (it.time_s - mean_t).powi(2);
    }
    top / bottom
}

fn velocity(centres: &[Centre]) -> (f64, f64) {
    (
        least_squares_slope(centres, |it| it.x_px),
        least_squares_slope(centres, |it| it.y_px),
    )
}

/// Refuses a Sun that stands still, moves at another rate or another way.
fn require_motion(
    centres: &[Centre],
    camera: &FixedCamera,
    start: &Mounting,
) -> Result<(), DriftError> {
    let predicted: Vec<Centre> = centres
        .iter()
        .map(|it| {
            let (x_px, y_px) = camera.place_px(start, &it.seen);
            Centre { x_px, y_px, ..*it }
        })
        .collect();
    let duration_s = centres[centres.len() - 1].time_s - centres[0].time_s;
    let (found, expected) = (velocity(centres), velocity(&predicted));
    let moved_px = found.0.hypot(found.1) * duration_s;
    let expected_px = expected.0.hypot(expected.1) * duration_s;
    if !(moved_px > STILL * expected_px) {
        return Err(DriftError::NotMoving {
            moved_px,
            expected_px,
        });
    }
    let angle = |(x, y): (f64, f64)| y.atan2(x);
    let off = wrapped_rad(angle(found) - angle(expected)).abs();
    if off.to_degrees() > DIRECTION_TOLERANCE_DEG {
        // The other parity shows the direction mirrored about +y.
        return Err(DriftError::WrongWay {
            found_deg: angle(found).to_degrees(),
            expected_deg: angle(expected).to_degrees(),
            other_deg: angle((-expected.0, expected.1)).to_degrees(),
            parity: match camera.parity {
                Parity::Sky => "sky",
                Parity::Mirrored => "mirrored",
            },
        });
    }
    if (moved_px / expected_px - 1.0).abs() > RATE_TOLERANCE {
        return Err(DriftError::WrongRate {
            moved_px,
            expected_px,
        });
    }
    Ok(())
}

/// The mounting moved by the four unknowns.
fn moved(it: &Mounting, by: &Vector4<f64>) -> Mounting {
    let (along, across) = (by[2], by[3]);
    Mounting {
        scale_arcsec_px: it.scale_arcsec_px * by[0].exp(),
        up_rad: it.up_rad + by[1],
        axis: it.axis.offset(along.hypot(across), across.atan2(along)),
    }
}

/// Steps of the differences: relative, rad, rad, rad.
const STEPS: [f64; UNKNOWNS] = [1e-5, 1e-5, 1e-6, 1e-6];

/// Residual in x and y, px, and the derivatives of the predicted place by the unknowns.
pub(super) fn linearised(
    centre: &Centre,
    camera: &FixedCamera,
    it: &Mounting,
) -> ([f64; 2], [[f64; UNKNOWNS]; 2]) {
    let (x, y) = camera.place_px(it, &centre.seen);
    let mut by = [[0.0; UNKNOWNS]; 2];
    for (j, &step) in STEPS.iter().enumerate() {
        let mut up = Vector4::zeros();
        up[j] = step;
        let a = camera.place_px(&moved(it, &up), &centre.seen);
        let b = camera.place_px(&moved(it, &-up), &centre.seen);
        by[0][j] = (a.0 - b.0) / (2.0 * step);
        by[1][j] = (a.1 - b.1) / (2.0 * step);
    }
    ([centre.x_px - x, centre.y_px - y], by)
}

/// Plain least squares until it stands.
fn settled(
    centres: &[Centre],
    camera: &FixedCamera,
    start: Mounting,
) -> Result<Mounting, DriftError> {
    let frames = centres.len();
    let mut it = start;
    for _ in 0..8 {
        let (mut normal, mut right) = (Matrix4::zeros(), Vector4::zeros());
        for centre in centres {
            let (residual, by) = linearised(centre, camera, &it);
            for axis in 0..2 {
                let row = Vector4::from(by[axis]);
                normal += row * row.transpose();
                right += row * residual[axis];
            }
        }
        let step = normal
            .cholesky()
            .ok_or(DriftError::Singular { frames })?
            .solve(&right);
        it = moved(&it, &step);
        if step.amax() < 1e-11 {
            break;
        }
    }
    if it.scale_arcsec_px.is_finite() && it.up_rad.is_finite() {
        Ok(it)
    } else {
        Err(DriftError::Singular { frames })
    }
}

/// The answer with its residuals.
fn finished(
    turned: &Turned,
    mounting: Mounting,
    solved: &Solved,
    velocity_px_s: (f64, f64),
) -> DriftFit {
    let n = turned.times_s.len();
    let fitted = |axis: usize, k: usize| -> f64 {
        (0..UNKNOWNS)
            .map(|j| turned.columns[axis][j + 1][k] * solved.step[j])
            .sum()
    };
    let residuals: Vec<(f64, f64, f64)> = (0..n)
        .map(|k| {
            let left = |axis: usize| 1000.0 * (turned.columns[axis][0][k] - fitted(axis, k));
            (turned.along_px[k], left(0), left(1))
        })
        .collect();
    let mean = turned.along_px.iter().sum::<f64>() / n as f64;
    let spread = turned
        .along_px
        .iter()
        .map(|it| (it - mean).powi(2))
        .sum::<f64>()
        / n as f64
        * turned.scale_arcsec_px.powi(2);
    let (a, b) = (solved.covariance[(0, 0)], solved.covariance[(1, 1)]);
    let speed = velocity_px_s.0.hypot(velocity_px_s.1);
    DriftFit {
        mounting: moved(&mounting, &solved.step),
        scale_sigma_rel: a.sqrt(),
        up_sigma_rad: b.sqrt(),
        correlation: solved.covariance[(0, 1)] / (a * b).sqrt(),
        noise_arcsec: (
            solved.noise_arcsec2[0].sqrt(),
            solved.noise_arcsec2[1].sqrt(),
        ),
        correlated: (solved.correlation.share, solved.correlation.tau_s),
        independent: solved.noise_arcsec2[0] / (a * spread),
        travel_arcsec: speed * (turned.times_s[n - 1] - turned.times_s[0]) * turned.scale_arcsec_px,
        velocity_px_s,
        distortion: turned
            .averaged(&turned.bent())
            .map_or_else(Vec::new, |it| distortion(&residuals, &turned.times_s, &it)),
        residuals,
    }
}

#[cfg(test)]
mod tests;
