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

use super::noise::{Correlation, whitened};
use super::{DriftError, FixedCamera, Mounting, Seen};
use crate::sky::Parity;
use crate::units::wrapped_rad;
use nalgebra::{DMatrix, DVector, Matrix4, Vector4};

/// Whole disks that a drift needs at least.
pub const LEAST_FRAMES: usize = 6;

/// Parts into which the way is cut for the map of the distortion.
pub const DISTORTION_BINS: usize = 8;

/// Centres that a part of the way needs for the map of the distortion.
const BIN_FRAMES: usize = 4;

/// Unknowns: ln scale, bearing of +y, axis along and across the vertical.
const UNKNOWNS: usize = 4;

/// Of the way expected, below which the Sun did not move, and beyond which it moved at another rate.
const STILL: f64 = 0.05;
/// See [`STILL`].
const RATE_TOLERANCE: f64 = 0.03;

/// Longest correlation time of the centre that is looked at, s: an outer scale of 30 m on a wind of 3 m/s
/// (common practice, no source). What changes more slowly is the way's own, and shows as distortion.
const LONGEST_TAU_S: f64 = 10.0;

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

/// A part of the way: how far the disk was from where an even scale puts it.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct DistortionBin {
    /// Distance along the way from the detector's middle, px.
    pub along_px: f64,
    /// Centres in it.
    pub frames: usize,
    /// Mean residual along the way, mas.
    pub along_mas: f64,
    /// Mean residual across it (to the left of the motion on the detector), mas.
    pub across_mas: f64,
    /// Standard uncertainty of the two, mas: the noise of that many centres, correlated as it is.
    pub sigma_mas: (f64, f64),
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
    Ok(turned.finished(mounting, &solved, velocity_px_s))
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
fn linearised(
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

/// The linear problem about the plain solution, turned along and across the way, arcsec.
struct Turned {
    times_s: Vec<f64>,
    /// Residual and four derivatives along, the same across.
    columns: [Vec<Vec<f64>>; 2],
    /// Distance along the way from the detector's middle, px.
    along_px: Vec<f64>,
    scale_arcsec_px: f64,
}

/// The solution averaged over the correlation.
struct Solved {
    step: Vector4<f64>,
    covariance: Matrix4<f64>,
    noise_arcsec2: [f64; 2],
    correlation: Correlation,
}

impl Turned {
    fn new(
        centres: &[Centre],
        camera: &FixedCamera,
        it: &Mounting,
        velocity_px_s: (f64, f64),
    ) -> Self {
        let speed = velocity_px_s.0.hypot(velocity_px_s.1);
        let (c, s) = (velocity_px_s.0 / speed, velocity_px_s.1 / speed);
        let scale = it.scale_arcsec_px;
        let mut columns = [
            vec![Vec::with_capacity(centres.len()); 1 + UNKNOWNS],
            vec![Vec::with_capacity(centres.len()); 1 + UNKNOWNS],
        ];
        let mut along_px = Vec::with_capacity(centres.len());
        for centre in centres {
            let (residual, by) = linearised(centre, camera, it);
            for j in 0..=UNKNOWNS {
                let pick = |axis: usize| {
                    if j == 0 {
                        residual[axis]
                    } else {
                        by[axis][j - 1]
                    }
                };
                columns[0][j].push(scale * (c * pick(0) + s * pick(1)));
                columns[1][j].push(scale * (c * pick(1) - s * pick(0)));
            }
            along_px.push(
                c * (centre.x_px - camera.middle_px.0) + s * (centre.y_px - camera.middle_px.1),
            );
        }
        Self {
            times_s: centres.iter().map(|it| it.time_s).collect(),
            columns,
            along_px,
            scale_arcsec_px: scale,
        }
    }

    /// Shares and times of the correlation that are looked at.
    fn grid(&self) -> Vec<Correlation> {
        let n = self.times_s.len();
        let duration = self.times_s[n - 1] - self.times_s[0];
        let shortest = 0.3 * duration / (n as f64 - 1.0);
        let longest = (0.25 * duration).clamp(2.0 * shortest, LONGEST_TAU_S.max(2.0 * shortest));
        let steps = 10;
        let mut out = vec![Correlation {
            share: 0.0,
            tau_s: shortest,
        }];
        for i in 0..steps {
            let tau_s = shortest * (longest / shortest).powf(f64::from(i) / f64::from(steps - 1));
            // Without a share there is no time: the white point stands for one row of the grid.
            out.extend(
                [0.1, 0.2, 0.3, 0.4, 0.5, 0.6, 0.7, 0.8, 0.9, 0.99]
                    .map(|share| Correlation { share, tau_s }),
            );
        }
        out
    }

    /// The columns with two more unknowns for each axis: a bend and a cubic of the way, so that what the
    /// lens does slowly along it is not taken for noise.
    fn bent(&self) -> [Vec<Vec<f64>>; 2] {
        let n = self.along_px.len();
        let mean = self.along_px.iter().sum::<f64>() / n as f64;
        let reach = self
            .along_px
            .iter()
            .map(|it| (it - mean).abs())
            .fold(1e-9, |a, b| if b > a { b } else { a });
        let legendre = |x: f64| [1.5 * x * x - 0.5, 2.5 * x * x * x - 1.5 * x];
        let mut out = self.columns.clone();
        for own in 0..2 {
            for order in 0..2 {
                for (axis, columns) in out.iter_mut().enumerate() {
                    columns.push(
                        self.along_px
                            .iter()
                            .map(|it| {
                                if axis == own {
                                    legendre((it - mean) / reach)[order]
                                } else {
                                    0.0
                                }
                            })
                            .collect(),
                    );
                }
            }
        }
        out
    }

    /// The solution for one correlation, with the logarithm of the residual likelihood.
    fn solved(&self, columns: &[Vec<Vec<f64>>; 2], it: Correlation) -> Option<(Solved, f64)> {
        let n = self.times_s.len();
        let unknowns = columns[0].len() - 1;
        let (along, log_determinant) = whitened(&self.times_s, it, &columns[0]);
        let (across, _) = whitened(&self.times_s, it, &columns[1]);
        // For unit variance: the products of the columns with each other and with the data.
        let products = [along, across].map(|white| {
            let design = DMatrix::from_fn(n, unknowns, |k, j| white[j + 1][k]);
            let data = DVector::from_column_slice(&white[0]);
            (
                design.transpose() * &design,
                design.transpose() * &data,
                data.norm_squared(),
            )
        });
        let degrees = n as f64 - 0.5 * unknowns as f64;
        let mut noise = [1.0, 1.0];
        for round in 0..4 {
            let mut information = DMatrix::zeros(unknowns, unknowns);
            let mut right = DVector::zeros(unknowns);
            for ((normal, with_data, _), variance) in products.iter().zip(noise) {
                information += normal / variance;
                right += with_data / variance;
            }
            // Relative and angular unknowns differ by far in size.
            let size: Vec<f64> = (0..unknowns)
                .map(|i| information[(i, i)].max(1e-300).sqrt())
                .collect();
            let scaled = DMatrix::from_fn(unknowns, unknowns, |i, j| {
                information[(i, j)] / (size[i] * size[j])
            });
            let cholesky = scaled.cholesky()?;
            let log_information = 2.0
                * (0..unknowns)
                    .map(|i| (cholesky.l_dirty()[(i, i)] * size[i]).ln())
                    .sum::<f64>();
            let inverse = cholesky.inverse();
            let covariance = DMatrix::from_fn(unknowns, unknowns, |i, j| {
                inverse[(i, j)] / (size[i] * size[j])
            });
            let step = &covariance * right;
            if round == 3 {
                // The information has the variances in it; the squares of the residuals come to a
                // constant.
                let log_likelihood = -0.5 * n as f64 * (noise[0].ln() + noise[1].ln())
                    - log_determinant
                    - 0.5 * log_information;
                return log_likelihood.is_finite().then_some((
                    Solved {
                        step: step.fixed_rows::<UNKNOWNS>(0).into_owned(),
                        covariance: covariance
                            .fixed_view::<UNKNOWNS, UNKNOWNS>(0, 0)
                            .into_owned(),
                        noise_arcsec2: noise,
                        correlation: it,
                    },
                    log_likelihood,
                ));
            }
            for ((normal, with_data, square), variance) in products.iter().zip(&mut noise) {
                let left = square - 2.0 * step.dot(with_data) + step.dot(&(normal * &step));
                *variance = (left / degrees).max(1e-12);
            }
        }
        None
    }

    fn averaged(&self, columns: &[Vec<Vec<f64>>; 2]) -> Option<Solved> {
        let all: Vec<(Solved, f64)> = self
            .grid()
            .into_iter()
            .filter_map(|it| self.solved(columns, it))
            .collect();
        let best = all
            .iter()
            .map(|it| it.1)
            .fold(f64::NEG_INFINITY, |a, b| if b > a { b } else { a });
        let weights: Vec<f64> = all.iter().map(|it| (it.1 - best).exp()).collect();
        let total: f64 = weights.iter().sum();
        let mut out = Solved {
            step: Vector4::zeros(),
            covariance: Matrix4::zeros(),
            noise_arcsec2: [0.0; 2],
            correlation: Correlation {
                share: 0.0,
                tau_s: 0.0,
            },
        };
        if !(total > 0.0) {
            return None;
        }
        for ((it, _), w) in all.iter().zip(&weights) {
            let w = w / total;
            out.step += it.step * w;
            out.noise_arcsec2[0] += w * it.noise_arcsec2[0];
            out.noise_arcsec2[1] += w * it.noise_arcsec2[1];
            out.correlation.share += w * it.correlation.share;
            out.correlation.tau_s += w * it.correlation.tau_s;
        }
        for ((it, _), w) in all.iter().zip(&weights) {
            let apart = it.step - out.step;
            out.covariance += (it.covariance + apart * apart.transpose()) * (w / total);
        }
        Some(out)
    }

    fn finished(&self, mounting: Mounting, solved: &Solved, velocity_px_s: (f64, f64)) -> DriftFit {
        let n = self.times_s.len();
        let fitted = |axis: usize, k: usize| -> f64 {
            (0..UNKNOWNS)
                .map(|j| self.columns[axis][j + 1][k] * solved.step[j])
                .sum()
        };
        let residuals: Vec<(f64, f64, f64)> = (0..n)
            .map(|k| {
                let left = |axis: usize| 1000.0 * (self.columns[axis][0][k] - fitted(axis, k));
                (self.along_px[k], left(0), left(1))
            })
            .collect();
        let mean = self.along_px.iter().sum::<f64>() / n as f64;
        let spread = self
            .along_px
            .iter()
            .map(|it| (it - mean).powi(2))
            .sum::<f64>()
            / n as f64
            * self.scale_arcsec_px.powi(2);
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
            travel_arcsec: speed * (self.times_s[n - 1] - self.times_s[0]) * self.scale_arcsec_px,
            velocity_px_s,
            distortion: self
                .averaged(&self.bent())
                .map_or_else(Vec::new, |it| distortion(&residuals, &self.times_s, &it)),
            residuals,
        }
    }
}

/// Means of the residuals over equal parts of the way, with the variance of means of correlated noise.
fn distortion(
    residuals: &[(f64, f64, f64)],
    times_s: &[f64],
    solved: &Solved,
) -> Vec<DistortionBin> {
    let ends = residuals
        .iter()
        .fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), it| {
            (
                if it.0 < low { it.0 } else { low },
                if it.0 > high { it.0 } else { high },
            )
        });
    let width = (ends.1 - ends.0) / DISTORTION_BINS as f64;
    if !(width > 0.0) || residuals.len() < BIN_FRAMES * DISTORTION_BINS {
        return Vec::new();
    }
    let mut members: Vec<Vec<usize>> = vec![Vec::new(); DISTORTION_BINS];
    for (k, it) in residuals.iter().enumerate() {
        let bin = ((it.0 - ends.0) / width) as usize;
        members[bin.min(DISTORTION_BINS - 1)].push(k);
    }
    let Correlation { share, tau_s } = solved.correlation;
    members
        .iter()
        .filter(|it| it.len() >= BIN_FRAMES)
        .map(|it| {
            let n = it.len() as f64;
            let mean = |f: &dyn Fn(usize) -> f64| it.iter().map(|&k| f(k)).sum::<f64>() / n;
            let mut inflation = 0.0;
            for &i in it {
                for &j in it {
                    inflation += if i == j {
                        1.0
                    } else {
                        share * (-(times_s[i] - times_s[j]).abs() / tau_s).exp()
                    };
                }
            }
            let sigma = |variance: f64| 1000.0 * (variance * inflation).sqrt() / n;
            DistortionBin {
                along_px: mean(&|k| residuals[k].0),
                frames: it.len(),
                along_mas: mean(&|k| residuals[k].1),
                across_mas: mean(&|k| residuals[k].2),
                sigma_mas: (
                    sigma(solved.noise_arcsec2[0]),
                    sigma(solved.noise_arcsec2[1]),
                ),
            }
        })
        .collect()
}

#[cfg(test)]
mod tests;
