//! The weighted mean, and whether the values agree with it.
//!
//! # Model
//!
//! ```text
//! w_i = 1 / u_i^2,   x = sum w_i x_i / sum w_i,   u_int = (sum w_i)^(-1/2)
//! Q = sum w_i (x_i - x)^2,   B = sqrt(Q / (k - 1)),   u_ext = B u_int
//! I^2 = max(0, (Q - (k - 1)) / Q)
//! ```
//!
//! # Valid for
//!
//! Independent values whose uncertainties are known. `u_ext` is meant for `B > 1` only, where one
//! common factor on all uncertainties is believed.
//!
//! # Accuracy
//!
//! That of the arithmetic.
//!
//! # Source
//!
//! Birge 1932, Phys. Rev. 40, 207 (ratio); Higgins & Thompson 2002, Stat. Med. 21, 1539 (`I^2`).

use super::{ConsensusError, Value, check};
use statrs::distribution::{ChiSquared, ContinuousCDF};

/// A weighted mean with its tests of consistency.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct WeightedMean {
    /// The mean.
    pub value: f64,
    /// Standard uncertainty from those of the values alone.
    pub u_internal: f64,
    /// Standard uncertainty by the scatter, `birge * u_internal`.
    pub u_external: f64,
    /// Weighted sum of squared residuals.
    pub q: f64,
    /// Degrees of freedom, one less than values.
    pub degrees: usize,
    /// Birge's ratio; null with one value.
    pub birge: Option<f64>,
    /// Probability of a sum of squares at least as large if the values agree; null with one value.
    pub p: Option<f64>,
    /// Share of the scatter that the uncertainties do not explain, 0 to 1; null with one value.
    pub unexplained: Option<f64>,
}

/// The weighted mean of independent values.
///
/// # Errors
///
/// [`ConsensusError`] for an empty list, and for values or uncertainties that are no numbers.
///
/// ```
/// use truelimb::consensus::{weighted_mean, Value};
/// let mean = weighted_mean(&[Value::new(8.0, 0.6), Value::new(9.0, 0.8)])?;
/// assert!((mean.value - 8.36).abs() < 1e-12 && (mean.u_internal - 0.48).abs() < 1e-12);
/// # Ok::<(), truelimb::consensus::ConsensusError>(())
/// ```
pub fn weighted_mean(values: &[Value]) -> Result<WeightedMean, ConsensusError> {
    check(values, "a mean", 1)?;
    let weights: f64 = values.iter().map(|it| it.u.powi(-2)).sum();
    let value = values
        .iter()
        .map(|it| it.value * it.u.powi(-2))
        .sum::<f64>()
        / weights;
    let q: f64 = values
        .iter()
        .map(|it| ((it.value - value) / it.u).powi(2))
        .sum();
    let degrees = values.len() - 1;
    let u_internal = weights.sqrt().recip();
    let birge = (degrees > 0).then(|| (q / degrees as f64).sqrt());
    Ok(WeightedMean {
        value,
        u_internal,
        u_external: birge.map_or(u_internal, |it| it * u_internal),
        q,
        degrees,
        birge,
        p: chi_square_tail(q, degrees),
        unexplained: (degrees > 0).then(|| unexplained(q, degrees)),
    })
}

/// Share of a sum of squares beyond its expectation.
fn unexplained(q: f64, degrees: usize) -> f64 {
    let excess = q - degrees as f64;
    if excess > 0.0 { excess / q } else { 0.0 }
}

/// Probability that chi square is at least `q`; null without degrees of freedom.
pub(super) fn chi_square_tail(q: f64, degrees: usize) -> Option<f64> {
    if degrees == 0 {
        return None;
    }
    ChiSquared::new(degrees as f64).ok().map(|it| it.sf(q))
}
