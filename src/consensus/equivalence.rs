//! Degrees of equivalence: how far each value is from the consensus and from each other value.
//!
//! # Model
//!
//! ```text
//! consistent     d_i = x_i - x,    u^2(d_i) = u_i^2 - u^2(x)                     x_i is in the mean
//! inconsistent   d_i = x_i - mu,   u^2(d_i) = se^2 + (1 - 2 w_i)(u_i^2 + tau^2)  w_i add up to one
//! pair           d_ij = x_i - x_j, u^2(d_ij) = u_i^2 + u_j^2 - 2 cov(x_i, x_j)
//! U = 2 u(d),   E_n = d / U
//! ```
//!
//! # Valid for
//!
//! Values that are in the mean themselves. A value outside it has `u_i^2 + u^2(x)`: that is a pair.
//!
//! # Accuracy
//!
//! That of the arithmetic.
//!
//! # Source
//!
//! Cox 2002, Metrologia 39, 589, procedure A; the second line from the variance of
//! `x_i - sum w_j x_j`; compatibility: Kacker, Kessel & Lawrence 2010, J. Res. NIST 115, 453.

use super::{ConsensusError, RandomEffects, Value, check, weighted_mean};

/// A difference with its expanded uncertainty.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Equivalence {
    /// Value minus consensus.
    pub difference: f64,
    /// Expanded uncertainty of the difference, two standard uncertainties.
    pub expanded: f64,
}

impl Equivalence {
    /// A difference with the variance it has.
    pub(super) fn new(difference: f64, variance: f64) -> Self {
        Self {
            difference,
            expanded: expanded(variance),
        }
    }

    /// Difference over expanded uncertainty: within 1 the two are compatible.
    pub fn normalised(&self) -> f64 {
        self.difference / self.expanded
    }
}

/// A difference of two values of a list.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct PairDifference {
    /// Place of the first value, from 0.
    pub first: usize,
    /// Place of the second value, from 0.
    pub second: usize,
    /// First minus second, with its expanded uncertainty.
    pub equivalence: Equivalence,
}

fn expanded(variance: f64) -> f64 {
    // A value that makes up the whole mean leaves nothing; rounding must not make it negative.
    if variance > 0.0 {
        2.0 * variance.sqrt()
    } else {
        0.0
    }
}

/// Each value minus the weighted mean of all: for values that agree.
///
/// # Errors
///
/// [`ConsensusError`] for fewer than two values, and for values that are no numbers.
pub fn equivalence_of_consistent(values: &[Value]) -> Result<Vec<Equivalence>, ConsensusError> {
    check(values, "a degree of equivalence", 2)?;
    let mean = weighted_mean(values)?;
    Ok(values
        .iter()
        .map(|it| Equivalence::new(it.value - mean.value, it.u * it.u - mean.u_internal.powi(2)))
        .collect())
}

/// Each value minus a consensus with dark uncertainty that was made from these values.
///
/// # Errors
///
/// [`ConsensusError`] for fewer than two values, and for a consensus of another list.
pub fn equivalence_of_inconsistent(
    values: &[Value],
    consensus: &RandomEffects,
) -> Result<Vec<Equivalence>, ConsensusError> {
    check(values, "a degree of equivalence", 2)?;
    if consensus.weights.len() != values.len() {
        return Err(ConsensusError::Lengths {
            what: "weights of the consensus",
            found: consensus.weights.len(),
            needed: values.len(),
        });
    }
    let tau2 = consensus.tau.powi(2);
    Ok(values
        .iter()
        .zip(&consensus.weights)
        .map(|(it, w)| {
            let variance = consensus.se.powi(2) + (1.0 - 2.0 * w) * (it.u * it.u + tau2);
            Equivalence::new(it.value - consensus.value, variance)
        })
        .collect())
}

/// All differences of two values, first before second; `covariance(i, j)` is what they share.
///
/// # Errors
///
/// [`ConsensusError`] for fewer than two values, and for values that are no numbers.
pub fn pairwise(
    values: &[Value],
    covariance: impl Fn(usize, usize) -> f64,
) -> Result<Vec<PairDifference>, ConsensusError> {
    check(values, "a difference", 2)?;
    let mut pairs = Vec::with_capacity(values.len() * (values.len() - 1) / 2);
    for (first, a) in values.iter().enumerate() {
        for (second, b) in values.iter().enumerate().skip(first + 1) {
            let variance = a.u * a.u + b.u * b.u - 2.0 * covariance(first, second);
            pairs.push(PairDifference {
                first,
                second,
                equivalence: Equivalence::new(a.value - b.value, variance),
            });
        }
    }
    Ok(pairs)
}
