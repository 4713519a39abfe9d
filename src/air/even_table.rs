//! An even function of an angle, tabulated as a polynomial in the cosine of the angle.
//!
//! # Model
//!
//! ```text
//! E(c) = sum_k a_k t^k,   t = (c - c_m)/d,   c = cos(angle)
//! ```
//!
//! | symbol | meaning | unit |
//! |--------|---------|------|
//! | `c_m`, `d` | middle and half width of the interval of cosines | - |
//!
//! Refraction is odd in the zenith distance, so refraction over its sine is even, and smooth in the
//! cosine straight through the zenith. The polynomial interpolates at Chebyshev points.
//!
//! # Valid for
//!
//! The interval it was fitted on.
//!
//! # Accuracy
//!
//! For the bending of light over a degree: 1e-9 arcsec to 75 degrees, 1e-7 at 89.
//!
//! # Source
//!
//! L. N. Trefethen, "Approximation Theory and Approximation Practice" (2013), chapters 2 to 5.

use std::f64::consts::PI;

/// Largest number of coefficients.
pub(super) const MAX_TERMS: usize = 16;

/// Enough for a disk that is not near the horizon.
pub(super) const FEW_TERMS: usize = 6;

/// An even function of an angle over an interval.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct EvenTable {
    middle: f64,
    inverse_half: f64,
    coefficients: [f64; MAX_TERMS],
    terms: usize,
}

impl EvenTable {
    /// Tabulates `f(angle)` on `[low_rad, high_rad]` from `points` values, at most 16.
    ///
    /// A negative `low_rad` means an interval through zero. Coefficients that add less than
    /// `negligible` are left out.
    pub(super) fn fit(
        (low_rad, high_rad): (f64, f64),
        points: usize,
        negligible: f64,
        f: impl Fn(f64) -> f64,
    ) -> Self {
        let points = points.min(MAX_TERMS);
        let (c_high, c_low) = (low_rad.max(0.0).cos(), high_rad.cos());
        let (middle, half) = (0.5 * (c_high + c_low), 0.5 * (c_high - c_low));
        let mut chebyshev = [0.0; MAX_TERMS];
        for k in 0..points {
            let phase = PI * (k as f64 + 0.5) / points as f64;
            let value = f((middle + half * phase.cos()).acos());
            for (order, sum) in chebyshev.iter_mut().enumerate().take(points) {
                *sum += value * (order as f64 * phase).cos();
            }
        }
        for (order, it) in chebyshev.iter_mut().enumerate() {
            *it *= if order == 0 { 1.0 } else { 2.0 } / points as f64;
        }
        let mut terms = points;
        while terms > 1 && chebyshev[terms - 1].abs() < negligible {
            terms -= 1;
        }
        let coefficients = powers_from_chebyshev(&chebyshev[..terms]);
        Self {
            middle,
            inverse_half: 1.0 / half,
            coefficients,
            terms,
        }
    }

    /// Whether the first [`FEW_TERMS`] coefficients are all there are.
    #[inline]
    pub(super) fn is_short(&self) -> bool {
        self.terms <= FEW_TERMS
    }

    /// The function at a cosine.
    #[inline]
    pub(super) fn value(&self, cosine: f64) -> f64 {
        if self.is_short() {
            self.sum::<FEW_TERMS>(cosine)
        } else {
            self.sum::<MAX_TERMS>(cosine)
        }
    }

    /// The sum of the first `T` terms at a cosine, in pairs: half as many dependent products.
    #[inline(always)]
    pub(super) fn sum<const T: usize>(&self, cosine: f64) -> f64 {
        let t = (cosine - self.middle) * self.inverse_half;
        let t2 = t * t;
        let mut sum = 0.0;
        for k in (0..T / 2).rev() {
            sum = sum * t2 + (self.coefficients[2 * k] + self.coefficients[2 * k + 1] * t);
        }
        sum
    }

    /// The function at a cosine, and its first two derivatives with respect to the cosine.
    pub(super) fn with_derivatives(&self, cosine: f64) -> [f64; 3] {
        let t = (cosine - self.middle) * self.inverse_half;
        let [mut value, mut first, mut half_second] = [0.0; 3];
        for a in self.coefficients[..self.terms].iter().rev() {
            half_second = half_second * t + first;
            first = first * t + value;
            value = value * t + a;
        }
        let scale = self.inverse_half;
        [value, first * scale, 2.0 * half_second * scale * scale]
    }
}

/// Coefficients of powers from those of Chebyshev polynomials.
fn powers_from_chebyshev(chebyshev: &[f64]) -> [f64; MAX_TERMS] {
    let mut before = [0.0; MAX_TERMS];
    let mut current = [0.0; MAX_TERMS];
    let mut powers = [0.0; MAX_TERMS];
    current[0] = 1.0;
    for (order, a) in chebyshev.iter().enumerate() {
        for (power, c) in powers.iter_mut().zip(&current) {
            *power += a * c;
        }
        // T_1 = t T_0, then T_(k+1) = 2 t T_k - T_(k-1).
        let factor = if order == 0 { 1.0 } else { 2.0 };
        let mut next = [0.0; MAX_TERMS];
        for k in 0..MAX_TERMS {
            let raised = if k == 0 { 0.0 } else { factor * current[k - 1] };
            next[k] = raised - before[k];
        }
        before = current;
        current = next;
    }
    powers
}
