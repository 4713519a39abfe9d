//! Several laboratories, each with repeated results: who is off in level, who in scatter.
//!
//! # Model
//!
//! ```text
//! s_r^2 = mean of s_i^2,   s_x = standard deviation of the means,
//! s_R = max(s_r, sqrt(s_x^2 + s_r^2 (n - 1) / n))
//! h_i = (x_i - x) / s_x,   k_i = s_i / s_r
//! h_crit = (p - 1) t / sqrt(p (t^2 + p - 2)),    t = t_{1 - a/2, p - 2}
//! k_crit = sqrt(p / (1 + (p - 1) / F)),          F = F_{1 - a; n - 1, (p - 1)(n - 1)}
//! ```
//!
//! # Valid for
//!
//! Equally many results from each of three laboratories or more.
//!
//! # Accuracy
//!
//! That of the quantiles, 1e-9.
//!
//! # Source
//!
//! Mandel 1991, The validation of measurement through interlaboratory studies, Chemom. Intell. Lab.
//! Syst. 11, 109; ASTM E691 (from memory).

use super::ConsensusError;
use statrs::distribution::{ContinuousCDF, FisherSnedecor, StudentsT};

/// Consistency of laboratories.
#[derive(Clone, Debug, PartialEq)]
pub struct Consistency {
    /// Mean of all.
    pub mean: f64,
    /// Standard deviation of the laboratories' means.
    pub of_means: f64,
    /// Repeatability: standard deviation within a laboratory.
    pub within: f64,
    /// Reproducibility: standard deviation of one result of any laboratory.
    pub reproducibility: f64,
    /// Level of each laboratory.
    pub h: Vec<f64>,
    /// Scatter of each laboratory.
    pub k: Vec<f64>,
    /// `|h|` that one laboratory of `level` exceeds by chance.
    pub h_critical: f64,
    /// `k` that one laboratory of `level` exceeds by chance.
    pub k_critical: f64,
}

fn mean(values: &[f64]) -> f64 {
    values.iter().sum::<f64>() / values.len() as f64
}

fn variance(values: &[f64]) -> f64 {
    let middle = mean(values);
    values.iter().map(|it| (it - middle).powi(2)).sum::<f64>() / (values.len() - 1) as f64
}

/// Consistency of laboratories with equally many results, with critical values at a level such as
/// 0.005.
///
/// # Errors
///
/// [`ConsensusError`] for fewer than three laboratories, fewer than two results, unequal numbers, and
/// values that are no numbers.
pub fn consistency(laboratories: &[Vec<f64>], level: f64) -> Result<Consistency, ConsensusError> {
    let p = laboratories.len();
    let too_few = |what, found, needed| ConsensusError::TooFew {
        what,
        found,
        needed,
    };
    if p < 3 {
        return Err(too_few("a comparison of laboratories", p, 3));
    }
    let n = laboratories[0].len();
    if n < 2 {
        return Err(too_few("a laboratory's scatter", n, 2));
    }
    for it in laboratories {
        if it.len() != n {
            return Err(ConsensusError::Lengths {
                what: "results of a laboratory",
                found: it.len(),
                needed: n,
            });
        }
    }
    for (&found, place) in laboratories.iter().flatten().zip(1..) {
        if !found.is_finite() {
            return Err(ConsensusError::NotFinite { place, found });
        }
    }
    let means: Vec<f64> = laboratories.iter().map(|it| mean(it)).collect();
    let variances: Vec<f64> = laboratories.iter().map(|it| variance(it)).collect();
    let within2 = mean(&variances);
    let of_means2 = variance(&means);
    let total2 = of_means2 + within2 * (n - 1) as f64 / n as f64;
    let singular = |what| ConsensusError::Singular {
        what,
        cure: "laboratories without scatter cannot be compared",
    };
    let labs = p as f64;
    let t = StudentsT::new(0.0, 1.0, labs - 2.0)
        .map_err(|_| singular("Student's t"))?
        .inverse_cdf(1.0 - 0.5 * level);
    let f = FisherSnedecor::new((n - 1) as f64, (labs - 1.0) * (n - 1) as f64)
        .map_err(|_| singular("the ratio of variances"))?
        .inverse_cdf(1.0 - level);
    Ok(Consistency {
        mean: mean(&means),
        of_means: of_means2.sqrt(),
        within: within2.sqrt(),
        reproducibility: if total2 > within2 { total2 } else { within2 }.sqrt(),
        h: means
            .iter()
            .map(|it| (it - mean(&means)) / of_means2.sqrt())
            .collect(),
        k: variances.iter().map(|it| (it / within2).sqrt()).collect(),
        h_critical: (labs - 1.0) * t / (labs * (t * t + labs - 2.0)).sqrt(),
        k_critical: (labs / (1.0 + (labs - 1.0) / f)).sqrt(),
    })
}
