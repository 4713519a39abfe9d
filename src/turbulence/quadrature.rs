//! Nodes in spatial frequency for integrals whose integrand oscillates over known lengths.
//!
//! # Model
//!
//! ```text
//! [0, f_1]      f = t^3, one panel          takes the cusp f^(-2/3) of Kolmogorov's spectrum
//! above         panels of an octave, never wider than 2.4 / (sum of the lengths that still count)
//! ```
//!
//! A length counts until the integrand's oscillation over it has been replaced by its mean (see
//! [`taper`]); because the replacement is gradual over many cycles, what is dropped integrates to
//! less than 1e-9 of the whole.
//!
//! # Valid for
//!
//! Integrands that fall faster than 1/f, smooth but for the named lengths.
//!
//! # Accuracy
//!
//! 16-point Gauss-Legendre panels: 1e-12 for the smooth part.
//!
//! # Source
//!
//! Gauss-Legendre quadrature; panel plan our own.

use gauss_quad::GaussLegendre;
use std::{num::NonZeroUsize, sync::OnceLock};

/// Sixteen.
const POINTS: NonZeroUsize = NonZeroUsize::MIN.saturating_add(15);

/// A length over which the integrand oscillates once per cycle of `f x length`.
#[derive(Clone, Copy, Debug)]
pub(super) struct Oscillation {
    pub(super) length_m: f64,
    /// Above this frequency the oscillation has been averaged out.
    pub(super) until_per_m: f64,
}

/// A node: frequency and the width it stands for, both in cycles/m.
#[derive(Clone, Copy, Debug)]
pub(super) struct Node {
    pub(super) f_per_m: f64,
    pub(super) width_per_m: f64,
}

fn rule() -> &'static GaussLegendre {
    static RULE: OnceLock<GaussLegendre> = OnceLock::new();
    RULE.get_or_init(|| GaussLegendre::new(POINTS))
}

/// Nodes from 0 to `last_per_m`, smooth below `first_per_m`.
pub(super) fn nodes(first_per_m: f64, last_per_m: f64, lengths: &[Oscillation]) -> Vec<Node> {
    let mut out = Vec::with_capacity(4096);
    let top = first_per_m.cbrt();
    for &(x, w) in rule().as_node_weight_pairs() {
        let t = 0.5 * top * (x + 1.0);
        out.push(Node {
            f_per_m: t.powi(3),
            width_per_m: 0.5 * top * w * 3.0 * t * t,
        });
    }
    let mut start = first_per_m;
    while start < last_per_m {
        let mut end = (2.0 * start).min(last_per_m);
        let counting = lengths.iter().filter(|it| start < it.until_per_m);
        let total_m: f64 = counting.clone().map(|it| it.length_m).sum();
        if total_m > 0.0 {
            end = end.min(start + 2.4 / total_m);
        }
        for it in counting {
            end = end.min(it.until_per_m);
        }
        let half = 0.5 * (end - start);
        for &(x, w) in rule().as_node_weight_pairs() {
            out.push(Node {
                f_per_m: start + half * (x + 1.0),
                width_per_m: half * w,
            });
        }
        start = end;
    }
    out
}

/// Gradual switch from 1 at `from` to 0 at `to`, smooth enough that oscillations cannot follow it.
pub(super) fn taper(x: f64, from: f64, to: f64) -> f64 {
    if x <= from {
        1.0
    } else if x >= to {
        0.0
    } else {
        0.5 * libm::erfc(9.0 * (x - 0.5 * (from + to)) / (to - from))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_cusp_and_the_oscillation_are_integrated() {
        // int_0^inf f^(-2/3) exp(-f) df = Gamma(1/3)
        let smooth: f64 = nodes(0.05, 60.0, &[])
            .iter()
            .map(|n| n.width_per_m / n.f_per_m.cbrt().powi(2) * (-n.f_per_m).exp())
            .sum();
        assert!((smooth / libm::tgamma(1.0 / 3.0) - 1.0).abs() < 1e-11);
        // int_0^inf cos(2 pi s f) exp(-f) df = 1 / (1 + (2 pi s)^2)
        let s = 3.0;
        let k = 2.0 * std::f64::consts::PI * s;
        let over = [Oscillation {
            length_m: s,
            until_per_m: f64::INFINITY,
        }];
        let wave: f64 = nodes(0.05 / s, 60.0, &over)
            .iter()
            .map(|n| n.width_per_m * (k * n.f_per_m).cos() * (-n.f_per_m).exp())
            .sum();
        assert!((wave - 1.0 / (1.0 + k * k)).abs() < 1e-12);
    }
}
