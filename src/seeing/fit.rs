//! Strengths and heights of the layers for one outer scale, from the power of the harmonics.
//!
//! # Model
//!
//! ```text
//! P_km ~ M_km chi^2(dof_km) / dof_km
//! M_km = n_km + n_x + U sum_i J_i s_k sec z_k K_m(h_i sec z_k R_k) sinc^2(m w_k / 2)
//! U    = (500 nm)^2 in mas^2,   J_i = r0_i^(-5/3) at the zenith, 500 nm
//! ```
//!
//! The parameters are the logarithms of `J_i`, `h_i`, `n_x` and `s_k`; each has a normal prior, the
//! total strength none. The posterior's maximum is found by scoring (Newton's method with the
//! expected curvature), and the posterior is taken as normal about it (Laplace), which also gives
//! the evidence for this outer scale.
//!
//! | symbol | meaning | unit |
//! |--------|---------|------|
//! | `n_km` | noise known beforehand | mas^2 |
//! | `n_x` | further white noise common to all harmonics | mas^2 |
//! | `s_k` | strength of sequence k relative to the common profile | - |
//! | `R_k`, `w_k` | angular radius of the limb, width of the sectors | rad |
//!
//! # Valid for
//!
//! Weak turbulence and isotropic layers.
//!
//! # Accuracy
//!
//! The maximum to 0.03 of the posterior's own width, 0.1 at worst. The normal approximation is
//! checked by the pulls in `tests/published/motion_sessions.rs`.
//!
//! # Source
//!
//! Gamma likelihood of variances; Laplace's approximation: common practice, no source.

use super::error::SeeingError;
use super::prior::ProfilePrior;
use crate::turbulence::KernelTable;
use crate::units::MAS_RAD;
use nalgebra::{Cholesky, DMatrix, DVector, Dyn};

/// `(500 nm)^2` as angles: what multiplies `K r0^(-5/3)` to give mas^2.
pub(super) const UNIT_MAS2: f64 = (500e-9 / MAS_RAD) * (500e-9 / MAS_RAD);

/// One sequence as the fit sees it.
#[derive(Clone, Debug)]
pub(super) struct Observed {
    pub(super) power_mas2: Vec<f64>,
    pub(super) degrees_of_freedom: Vec<f64>,
    pub(super) noise_mas2: Vec<f64>,
    /// `sinc^2` of the sectors, per m.
    pub(super) window: Vec<f64>,
    pub(super) air_mass: f64,
    pub(super) limb_radius_rad: f64,
    /// Which table has this sequence's exposure.
    pub(super) table: usize,
}

/// What is fitted, to what.
#[derive(Debug)]
pub(super) struct Problem<'a> {
    pub(super) sequences: &'a [Observed],
    pub(super) tables: &'a [KernelTable],
    pub(super) prior: &'a ProfilePrior,
    /// Harmonics used.
    pub(super) orders: &'a [usize],
    /// Median of the prior of the further noise.
    pub(super) extra_noise_mas2: f64,
}

/// The posterior for one outer scale.
#[derive(Clone, Debug)]
pub(super) struct Solution {
    pub(super) outer_scale_index: usize,
    pub(super) parameters: DVector<f64>,
    pub(super) covariance: DMatrix<f64>,
    /// Logarithm of the evidence, up to a constant common to all outer scales.
    pub(super) log_evidence: f64,
    /// Model power by sequence, then harmonic in the order of `Problem::orders`.
    pub(super) model_mas2: Vec<Vec<f64>>,
}

/// Width of the prior of the further noise, in its logarithm.
const EXTRA_NOISE_SIGMA_LN: f64 = 1.5;

/// Largest change of a logarithm in one step.
const LONGEST_STEP: f64 = 1.0;

/// Square of the step still to go, in units of the posterior's own width, at which the search ends.
const AT_REST: f64 = 5e-4;
const NEARLY_AT_REST: f64 = 1e-2;
/// Steps after which nearly at rest is enough.
const ROUNDS: usize = 60;

struct Evaluation {
    objective: f64,
    gradient: DVector<f64>,
    curvature: DMatrix<f64>,
    model_mas2: Vec<Vec<f64>>,
}

impl Evaluation {
    fn solution(
        self,
        outer_scale_index: usize,
        parameters: DVector<f64>,
        factors: &Cholesky<f64, Dyn>,
    ) -> Solution {
        let log_determinant = 2.0 * factors.l().diagonal().map(f64::ln).sum();
        Solution {
            outer_scale_index,
            parameters,
            covariance: factors.inverse(),
            log_evidence: self.objective - 0.5 * log_determinant,
            model_mas2: self.model_mas2,
        }
    }
}

impl Problem<'_> {
    fn layers(&self) -> usize {
        self.prior.layers.len()
    }

    fn extra_noise_at(&self) -> usize {
        2 * self.layers()
    }

    pub(super) fn sequence_at(&self, sequence: usize) -> usize {
        2 * self.layers() + 1 + sequence
    }

    fn parameters(&self) -> usize {
        2 * self.layers() + 1 + self.sequences.len()
    }

    /// Where the search starts: the prior's profile, as strong as the total power asks for.
    pub(super) fn start(&self, outer_scale_index: usize) -> Result<DVector<f64>, SeeingError> {
        let mut at = DVector::zeros(self.parameters());
        for (i, layer) in self.prior.layers.iter().enumerate() {
            at[i] = layer.share.ln();
            at[self.layers() + i] = layer.height_m.ln();
        }
        at[self.extra_noise_at()] = self.extra_noise_mas2.ln();
        let unit = self.evaluate(outer_scale_index, &at)?;
        let (mut seen, mut expected) = (0.0, 0.0);
        for (sequence, model) in self.sequences.iter().zip(&unit.model_mas2) {
            for (&m, model) in self.orders.iter().zip(model) {
                let noise = sequence.noise_mas2[m];
                // Each harmonic counts by its relative excess over the noise.
                seen += (sequence.power_mas2[m] - noise) / sequence.power_mas2[m];
                expected += (model - noise - self.extra_noise_mas2) / sequence.power_mas2[m];
            }
        }
        let scale = (seen.max(1e-3) / expected).ln();
        for i in 0..self.layers() {
            at[i] += scale;
        }
        Ok(at)
    }

    /// Maximum of the posterior for one outer scale; `None` if the search does not come to rest.
    pub(super) fn solve(
        &self,
        outer_scale_index: usize,
        start: DVector<f64>,
    ) -> Result<Option<Solution>, SeeingError> {
        let mut at = start;
        let mut here = self.evaluate(outer_scale_index, &at)?;
        let mut last_step = DVector::zeros(at.len());
        for round in 0..=ROUNDS {
            let Some(factors) = here.curvature.clone().cholesky() else {
                return Ok(None);
            };
            let mut step = factors.solve(&here.gradient);
            let decrement = step.dot(&here.gradient);
            let enough = if round < ROUNDS {
                AT_REST
            } else {
                NEARLY_AT_REST
            };
            if decrement < enough {
                return Ok(Some(here.solution(outer_scale_index, at, &factors)));
            }
            // Where the true curvature exceeds the expected one the full step overshoots and comes
            // back.
            if step.dot(&last_step) < 0.0 {
                step *= 0.5;
            }
            let longest = step.amax();
            if longest > LONGEST_STEP {
                step *= LONGEST_STEP / longest;
            }
            let mut tries = 0;
            loop {
                let there = &at + &step;
                if self.allowed(&there) {
                    let next = self.evaluate(outer_scale_index, &there)?;
                    if next.objective > here.objective {
                        (at, here) = (there, next);
                        last_step = step;
                        break;
                    }
                }
                step *= 0.4;
                tries += 1;
                if tries > 12 {
                    // Interpolated kernels have kinks of 1e-5; no better place can be found near
                    // one.
                    let near = decrement < NEARLY_AT_REST;
                    return Ok(near.then(|| here.solution(outer_scale_index, at, &factors)));
                }
            }
        }
        Ok(None)
    }

    /// True where the tables reach.
    fn allowed(&self, at: &DVector<f64>) -> bool {
        let heights = at.rows(self.layers(), self.layers());
        heights
            .iter()
            .all(|ln_h| (LEAST_HEIGHT_M.ln()..=MOST_HEIGHT_M.ln()).contains(ln_h))
    }

    fn evaluate(
        &self,
        outer_scale_index: usize,
        at: &DVector<f64>,
    ) -> Result<Evaluation, SeeingError> {
        let (layers, size) = (self.layers(), self.parameters());
        let mut gradient = DVector::zeros(size);
        let mut curvature = DMatrix::zeros(size, size);
        let mut objective = self.prior.add_to(at, &mut gradient, &mut curvature);
        let (extra_at, weight) = (self.extra_noise_at(), EXTRA_NOISE_SIGMA_LN.powi(-2));
        let apart = at[extra_at] - self.extra_noise_mas2.ln();
        objective -= 0.5 * weight * apart * apart;
        gradient[extra_at] -= weight * apart;
        curvature[(extra_at, extra_at)] += weight;
        let last = self.orders.last().map_or(0, |m| m + 1);
        let mut kernels = vec![vec![0.0; last]; layers];
        let mut slopes = kernels.clone();
        // Derivatives of one model value by ln J_i, ln h_i, ln n_x and ln s_k, in this order.
        let mut slope = vec![0.0; 2 * layers + 2];
        let extra = at[self.extra_noise_at()].exp();
        let mut model_mas2 = Vec::with_capacity(self.sequences.len());
        for (k, sequence) in self.sequences.iter().enumerate() {
            let own = self.sequence_at(k);
            let strength = UNIT_MAS2 * sequence.air_mass * at[own].exp();
            for i in 0..layers {
                let ring_m = at[layers + i].exp() * sequence.air_mass * sequence.limb_radius_rad;
                self.tables[sequence.table].fill_with_slopes(
                    outer_scale_index,
                    ring_m,
                    &mut kernels[i],
                    &mut slopes[i],
                )?;
            }
            let mut model_row = Vec::with_capacity(self.orders.len());
            for &m in self.orders {
                let mut motion = 0.0;
                for i in 0..layers {
                    let part = strength * sequence.window[m] * at[i].exp() * kernels[i][m];
                    slope[i] = part;
                    slope[layers + i] = part * slopes[i][m];
                    motion += part;
                }
                slope[2 * layers] = extra;
                slope[2 * layers + 1] = motion;
                let model = motion + extra + sequence.noise_mas2[m];
                model_row.push(model);
                let half = 0.5 * sequence.degrees_of_freedom[m];
                let ratio = sequence.power_mas2[m] / model;
                objective -= half * (model.ln() + ratio);
                let pull = half * (ratio - 1.0) / model;
                let weight = half / (model * model);
                let place = |j: usize| if j > 2 * layers { own } else { j };
                for (a, da) in slope.iter().enumerate() {
                    gradient[place(a)] += pull * da;
                    for (b, db) in slope.iter().enumerate().take(a + 1) {
                        curvature[(place(a), place(b))] += weight * da * db;
                    }
                }
            }
            model_mas2.push(model_row);
        }
        // Only the lower triangle was summed; the prior's part is symmetric and below it too.
        curvature.fill_upper_triangle_with_lower_triangle();
        Ok(Evaluation {
            objective,
            gradient,
            curvature,
            model_mas2,
        })
    }
}

/// Heights the search may reach, above the telescope.
pub(super) const LEAST_HEIGHT_M: f64 = 2.0;
/// The highest turbulence of interest is below 20 km; the search needs room beyond.
pub(super) const MOST_HEIGHT_M: f64 = 25_000.0;
