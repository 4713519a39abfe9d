//! Interpolation of a band-limited profile from wide steps to narrow ones.
//!
//! # Model
//!
//! ```text
//! g(x) = sum_j g_j s(x/h - j),   s(t) = sin(pi t) / (pi t) exp{ b [sqrt(1 - (t/12)^2) - 1] },  |t| <= 12
//! ```
//!
//! with `h` the wide step, 24 terms for each value, and the weights of one value made to add up to one.
//!
//! # Valid for
//!
//! Profiles without frequencies above a quarter of the wide step's sampling frequency.
//!
//! # Accuracy
//!
//! 1e-7 of the amplitude at the highest frequency allowed, better below it.
//!
//! # Source
//!
//! Sinc interpolation under a window; the window is the "exponential of a semicircle" of Barnett,
//! Magland & af Klinteberg 2019, SIAM J. Sci. Comput. 41, C479.

use std::f64::consts::PI;

/// Values of the wide grid that make up one of the narrow grid.
const TAPS: usize = 24;

/// Wide points needed before the first narrow one.
pub(super) const LEAD: usize = TAPS / 2 - 1;

/// Highest frequency allowed, in cycles per wide step.
pub(super) const HIGHEST_CYCLES_PER_STEP: f64 = 0.25;

/// Shape of the window.
const WINDOW: f64 = 18.0;

/// Weights for a whole number of narrow steps per wide step.
#[derive(Clone, Debug)]
pub(super) struct Interpolator {
    factor: usize,
    /// `[tap][phase]`.
    weights: Vec<f64>,
}

impl Interpolator {
    pub(super) fn new(factor: usize) -> Self {
        let mut weights = vec![0.0; TAPS * factor];
        for phase in 0..factor {
            let at = |tap: usize| {
                let t = phase as f64 / factor as f64 + LEAD as f64 - tap as f64;
                kernel(t)
            };
            let sum: f64 = (0..TAPS).map(at).sum();
            for tap in 0..TAPS {
                weights[tap * factor + phase] = at(tap) / sum;
            }
        }
        Self { factor, weights }
    }

    /// Length of the wide grid for `n` narrow points.
    pub(super) fn wide_len(&self, n: usize) -> usize {
        if self.factor == 1 {
            n
        } else {
            (n - 1) / self.factor + TAPS
        }
    }

    /// Wide points before the first narrow one.
    pub(super) fn lead(&self) -> usize {
        if self.factor == 1 { 0 } else { LEAD }
    }

    /// The `n` narrow values.
    pub(super) fn apply(&self, wide: &[f64], n: usize) -> Vec<f64> {
        if self.factor == 1 {
            return wide[..n].to_vec();
        }
        let mut narrow = vec![0.0; n.div_ceil(self.factor) * self.factor];
        for (out, terms) in narrow.chunks_exact_mut(self.factor).zip(wide.windows(TAPS)) {
            for (value, weights) in terms.iter().zip(self.weights.chunks_exact(self.factor)) {
                for (o, w) in out.iter_mut().zip(weights) {
                    *o += w * value;
                }
            }
        }
        narrow.truncate(n);
        narrow
    }
}

fn kernel(t: f64) -> f64 {
    let u = 2.0 * t / TAPS as f64;
    let window = (WINDOW * ((1.0 - u * u).max(0.0).sqrt() - 1.0)).exp();
    let sinc = if t == 0.0 {
        1.0
    } else {
        (PI * t).sin() / (PI * t)
    };
    sinc * window
}
