//! Quantiles of Student's t and of the normal law, and the power of the t test.
//!
//! # Model
//!
//! ```text
//! P(|T| > t),   T = (Z + d) / sqrt(X / n),   Z normal, X chi square with n degrees of freedom
//! ```
//!
//! summed over the root of `X` in 128 panels of 8 Gauss-Legendre nodes.
//!
//! # Valid for
//!
//! One degree of freedom or more.
//!
//! # Accuracy
//!
//! 1e-10 of probability (`tests/published/consensus_trend.rs`).
//!
//! # Source
//!
//! The non-central t distribution: Johnson, Kotz & Balakrishnan 1995, Continuous Univariate
//! Distributions 2, chapter 31.

use gauss_quad::GaussLegendre;
use statrs::distribution::{ChiSquared, Continuous, ContinuousCDF, Normal, StudentsT};
use std::num::NonZeroUsize;

/// Panels of the integral over chi square.
const PANELS: usize = 128;

/// How far from the root of the degrees of freedom the root of chi square is followed: its standard
/// deviation is below 0.71.
const REACH: f64 = 9.0;

/// Nodes of a panel.
const NODES: NonZeroUsize = NonZeroUsize::new(8).unwrap();

/// Quantile of the normal law for a two-sided interval with this coverage.
pub fn normal_quantile(coverage: f64) -> f64 {
    Normal::standard().inverse_cdf(0.5 + 0.5 * coverage)
}

/// Quantile of Student's t for a two-sided interval with this coverage; the normal law's where the
/// degrees of freedom are infinite.
pub fn quantile(coverage: f64, degrees: f64) -> f64 {
    match StudentsT::new(0.0, 1.0, degrees) {
        Ok(it) if degrees.is_finite() => it.inverse_cdf(0.5 + 0.5 * coverage),
        _ => normal_quantile(coverage),
    }
}

/// Share of Student's t below `t`; the normal law's where the degrees of freedom are infinite.
pub fn share_below(t: f64, degrees: f64) -> f64 {
    match StudentsT::new(0.0, 1.0, degrees) {
        Ok(it) if degrees.is_finite() => it.cdf(t),
        _ => Normal::standard().cdf(t),
    }
}

/// Probability that a t test finds an effect of `effect` standard errors at `critical`, two-sided.
pub fn power(effect: f64, critical: f64, degrees: f64) -> f64 {
    let normal = Normal::standard();
    let found = |critical: f64| normal.sf(critical - effect) + normal.cdf(-critical - effect);
    let Ok(chi_square) = ChiSquared::new(degrees) else {
        return found(critical);
    };
    let rule = GaussLegendre::new(NODES);
    let middle = degrees.sqrt();
    let low = if middle > REACH { middle - REACH } else { 0.0 };
    let high = middle + REACH;
    // In the root of chi square the density has no singularity at zero.
    let width = (high - low) / PANELS as f64;
    (0..PANELS)
        .map(|panel| {
            let from = low + width * panel as f64;
            rule.integrate(from, from + width, |root| {
                let x = root * root;
                2.0 * root * chi_square.pdf(x) * found(critical * (x / degrees).sqrt())
            })
        })
        .sum()
}

/// The effect, in standard errors, that a two-sided test at 95 percent finds with a probability of
/// `share`; with infinite degrees of freedom the standard error is taken as known.
pub fn effect_found(share: f64, degrees: f64) -> f64 {
    let critical = quantile(0.95, degrees);
    let (mut low, mut high) = (0.0, 4.0 * critical + 10.0);
    for _ in 0..60 {
        let middle = 0.5 * (low + high);
        let power = if degrees.is_finite() {
            power(middle, critical, degrees)
        } else {
            let normal = Normal::standard();
            normal.sf(critical - middle) + normal.cdf(-critical - middle)
        };
        if power < share {
            low = middle;
        } else {
            high = middle;
        }
    }
    0.5 * (low + high)
}
