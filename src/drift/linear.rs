//! The linear problem of a drift about its plain solution, for every correlation of the noise in time.
//!
//! Residuals and derivatives are turned along and across the way, whitened, and solved with variances of
//! their own by residual likelihood; the answer is the mean over shares and times of the correlation.

use super::fit::{Centre, UNKNOWNS, linearised};
use super::noise::{Correlation, whitened};
use super::{FixedCamera, Mounting};
use nalgebra::{DMatrix, DVector, Matrix4, Vector4};

/// Longest correlation time of the centre that is looked at, s: an outer scale of 30 m on a wind of 3 m/s
/// (common practice, no source). What changes more slowly is the way's own, and shows as distortion.
const LONGEST_TAU_S: f64 = 10.0;

/// The linear problem about the plain solution, turned along and across the way, arcsec.
pub(super) struct Turned {
    pub(super) times_s: Vec<f64>,
    /// Residual and four derivatives along, the same across.
    pub(super) columns: [Vec<Vec<f64>>; 2],
    /// Distance along the way from the detector's middle, px.
    pub(super) along_px: Vec<f64>,
    pub(super) scale_arcsec_px: f64,
}

/// The solution averaged over the correlation.
pub(super) struct Solved {
    pub(super) step: Vector4<f64>,
    pub(super) covariance: Matrix4<f64>,
    pub(super) noise_arcsec2: [f64; 2],
    pub(super) correlation: Correlation,
}

impl Turned {
    pub(super) fn new(
        centres: &[Centre],
        camera: &FixedCamera,
        it: &Mounting,
        velocity_px_s: (f64, f64),
    ) -> Self {
        let speed = velocity_px_s.0.hypot(velocity_px_s.1);
        let (c, s) = (velocity_px_s.0 / speed, velocity_px_s.1 / speed);
        let scale = it.scale_arcsec_px;
        let mut columns = [
            vec![Vec::new(); 1 + UNKNOWNS],
            vec![Vec::new(); 1 + UNKNOWNS],
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
    pub(super) fn bent(&self) -> [Vec<Vec<f64>>; 2] {
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

    pub(super) fn averaged(&self, columns: &[Vec<Vec<f64>>; 2]) -> Option<Solved> {
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
}
