//! From the solutions for each outer scale to one value with its interval.
//!
//! # Model
//!
//! ```text
//! p(ln r0) = sum_o w_o N(ln r0; mean_o, sigma_o),   w_o ~ prior_o x evidence_o
//! ln r0_o  = -(3/5) ln [ sum_i J_i  sum_k f_k g_k s_k ],   g_k = 1 at the zenith, sec z_k along
//! the sight
//! ```
//!
//! | symbol | meaning | unit |
//! |--------|---------|------|
//! | `f_k` | share of sequence k in all frames | - |
//! | `o` | outer scale | - |
//!
//! # Valid for
//!
//! Any mixture; widths by linear propagation within each outer scale.
//!
//! # Accuracy
//!
//! Quantiles to 1e-6 in `ln r0`.
//!
//! # Source
//!
//! Mixture of normal distributions: common practice, no source.

use super::fit::Solution;
use nalgebra::DVector;

/// A mixture of normal distributions in one variable.
#[derive(Clone, Debug)]
pub(super) struct Mixture {
    /// Weight, mean, standard deviation; weights sum to one.
    parts: Vec<(f64, f64, f64)>,
}

impl Mixture {
    pub(super) fn new(parts: Vec<(f64, f64, f64)>) -> Self {
        Self { parts }
    }

    pub(super) fn mean(&self) -> f64 {
        self.parts.iter().map(|(w, mean, _)| w * mean).sum()
    }

    pub(super) fn sigma(&self) -> f64 {
        let mean = self.mean();
        self.parts
            .iter()
            .map(|(w, m, s)| w * (s * s + (m - mean).powi(2)))
            .sum::<f64>()
            .sqrt()
    }

    /// Mean of the exponential.
    pub(super) fn mean_exponential(&self) -> f64 {
        self.parts
            .iter()
            .map(|(w, m, s)| w * (m + 0.5 * s * s).exp())
            .sum()
    }

    /// Value below which lies this probability.
    pub(super) fn quantile(&self, probability: f64) -> f64 {
        let below = |x: f64| -> f64 {
            self.parts
                .iter()
                .map(|(w, m, s)| 0.5 * w * libm::erfc((m - x) / (s * std::f64::consts::SQRT_2)))
                .sum()
        };
        let reach = |sign: f64| {
            self.parts
                .iter()
                .map(|(_, m, s)| sign * m + 8.0 * s)
                .fold(f64::NEG_INFINITY, f64::max)
        };
        let (mut low, mut high) = (-reach(-1.0), reach(1.0));
        for _ in 0..60 {
            let middle = 0.5 * (low + high);
            if below(middle) < probability {
                low = middle;
            } else {
                high = middle;
            }
        }
        0.5 * (low + high)
    }

    /// The same shifted, with a further independent normal error.
    pub(super) fn widened(&self, sigma: f64) -> Self {
        Self {
            parts: self
                .parts
                .iter()
                .map(|&(w, m, s)| (w, m, s.hypot(sigma)))
                .collect(),
        }
    }
}

/// Weights of the solutions: prior times evidence, normalised.
pub(super) fn weights(solutions: &[Solution], outer_scales_m: &[(f64, f64)]) -> Vec<f64> {
    let best = solutions
        .iter()
        .map(|it| it.log_evidence)
        .fold(f64::NEG_INFINITY, f64::max);
    let raw: Vec<f64> = solutions
        .iter()
        .map(|it| outer_scales_m[it.outer_scale_index].1 * (it.log_evidence - best).exp())
        .collect();
    let total: f64 = raw.iter().sum();
    raw.iter().map(|it| it / total).collect()
}

/// `ln sum_i J_i + ln sum_k c_k s_k` of a solution with its standard deviation; `sequence_at` gives
/// the place of `ln s_k`.
pub(super) fn log_strength(
    solution: &Solution,
    layers: usize,
    shares: &[f64],
    sequence_at: impl Fn(usize) -> usize,
) -> (f64, f64) {
    let at = &solution.parameters;
    let mut slope = DVector::zeros(at.len());
    let strengths: Vec<f64> = (0..layers).map(|i| at[i].exp()).collect();
    let total: f64 = strengths.iter().sum();
    for (i, it) in strengths.iter().enumerate() {
        slope[i] = it / total;
    }
    let scales: Vec<f64> = shares
        .iter()
        .enumerate()
        .map(|(k, c)| c * at[sequence_at(k)].exp())
        .collect();
    let scale: f64 = scales.iter().sum();
    for (k, it) in scales.iter().enumerate() {
        slope[sequence_at(k)] = it / scale;
    }
    let variance = (slope.transpose() * &solution.covariance * &slope)[(0, 0)];
    (total.ln() + scale.ln(), variance.sqrt())
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn quantiles_of_one_normal_are_the_tables() {
        let one = Mixture::new(vec![(1.0, 2.0, 0.5)]);
        // Standard normal: 84.134 percent at 1, 97.5 percent at 1.959964 (any table).
        assert!((one.quantile(0.8413447461) - 2.5).abs() < 1e-6);
        assert!((one.quantile(0.975) - (2.0 + 0.5 * 1.959964)).abs() < 1e-6);
        assert!((one.mean_exponential() - (2.0_f64 + 0.125).exp()).abs() < 1e-12);
    }

    #[test]
    fn two_parts_spread_the_mixture() {
        let two = Mixture::new(vec![(0.5, -1.0, 0.1), (0.5, 1.0, 0.1)]);
        assert!(two.mean().abs() < 1e-15 && (two.sigma() - 1.01_f64.sqrt()).abs() < 1e-12);
        assert!((two.quantile(0.25) + 1.0).abs() < 1e-6);
    }
}
