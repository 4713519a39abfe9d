//! The harmonics' kernels tabulated over the ring radius, for fits that need many of them.
//!
//! # Model
//!
//! `ln K_m` on a uniform grid in `ln rho`, 48 points a decade, interpolated by the polynomial of
//! degree five through the six nearest points. Where the ring is much smaller than the aperture, or
//! much larger than the outer scale, `K_m` is a power of `rho`, which is a straight line here.
//!
//! # Valid for
//!
//! The range of ring radii it was built for, which may be 0.1 mm to 500 m.
//!
//! # Accuracy
//!
//! 2e-6 of the one-axis variance, and relative 1e-4 for the harmonics that carry more than a
//! hundredth of it (tested); the kernels are not smooth where the ring is as wide as the aperture.
//!
//! # Source
//!
//! Lagrange interpolation; kernels as in `harmonics`.

use super::error::checked_length_m;
use super::harmonics::{Power, ring_integrals};
use super::{Aperture, Tilt, TurbulenceError};

const POINTS_PER_DECADE: f64 = 48.0;

/// Kernels of the harmonics m = 0..=`m_max` for a set of outer scales.
#[derive(Clone, Debug)]
pub struct KernelTable {
    outer_scales_m: Vec<f64>,
    range_m: (f64, f64),
    m_max: usize,
    first_ln: f64,
    step_ln: f64,
    points: usize,
    /// `ln K`, by outer scale, ring, harmonic.
    ln_k: Vec<f64>,
}

impl KernelTable {
    /// Tabulates the kernels for ring radii in `range_m`. `drift_m`, wind speed times exposure,
    /// takes the loss by finite exposure into the kernels; zero leaves it out.
    ///
    /// # Errors
    ///
    /// [`TurbulenceError`] for an argument out of range.
    pub fn build(
        aperture: &Aperture,
        tilt: Tilt,
        outer_scales_m: &[f64],
        range_m: (f64, f64),
        m_max: usize,
        drift_m: f64,
    ) -> Result<Self, TurbulenceError> {
        let least_m = checked_length_m("smallest ring radius", range_m.0, 1e-4, 250.0)?;
        let most_m = checked_length_m("largest ring radius", range_m.1, 1.01 * least_m, 500.0)?;
        let step_ln = std::f64::consts::LN_10 / POINTS_PER_DECADE;
        let points = ((most_m / least_m).ln() / step_ln).ceil() as usize + 6;
        // Two points beyond each end, so that every place has three neighbours on both sides.
        let first_ln = least_m.ln() - 2.0 * step_ln;
        let mut ln_k = vec![0.0; outer_scales_m.len() * points * (m_max + 1)];
        for ring in 0..points {
            let rho = (first_ln + step_ln * ring as f64).exp().min(500.0);
            let rows = ring_integrals(
                aperture,
                tilt,
                outer_scales_m,
                rho,
                m_max,
                drift_m,
                Power::Variance,
            )?;
            for (scale, row) in rows.iter().enumerate() {
                let at = (scale * points + ring) * (m_max + 1);
                for (to, k) in ln_k[at..].iter_mut().zip(row) {
                    *to = k.ln();
                }
            }
        }
        let outer_scales_m = outer_scales_m.to_vec();
        Ok(Self {
            outer_scales_m,
            range_m,
            m_max,
            first_ln,
            step_ln,
            points,
            ln_k,
        })
    }

    /// The outer scales held, in the order of their index.
    pub fn outer_scales_m(&self) -> &[f64] {
        &self.outer_scales_m
    }

    /// Highest harmonic held.
    pub fn m_max(&self) -> usize {
        self.m_max
    }

    /// Variances of the harmonics m = 0.. at one ring radius, in m^(-1/3), as many as `into` holds.
    ///
    /// # Errors
    ///
    /// [`TurbulenceError::Length`] outside the table's range, [`TurbulenceError::NotTabulated`] or
    /// [`TurbulenceError::Order`] for an outer scale or harmonic it does not hold.
    pub fn fill(
        &self,
        outer_scale_index: usize,
        ring_radius_m: f64,
        into: &mut [f64],
    ) -> Result<(), TurbulenceError> {
        let (base, x) = self.place(outer_scale_index, ring_radius_m, into.len())?;
        let weights = lagrange_weights(x);
        for (m, to) in into.iter_mut().enumerate() {
            *to = self.combine(base, m, &weights).exp();
        }
        Ok(())
    }

    /// As [`KernelTable::fill`], with the slopes `d ln K / d ln rho` beside.
    ///
    /// # Errors
    ///
    /// As [`KernelTable::fill`].
    pub fn fill_with_slopes(
        &self,
        outer_scale_index: usize,
        ring_radius_m: f64,
        into: &mut [f64],
        slopes: &mut [f64],
    ) -> Result<(), TurbulenceError> {
        let (base, x) = self.place(outer_scale_index, ring_radius_m, into.len())?;
        let (weights, rates) = (lagrange_weights(x), lagrange_rates(x));
        for (m, (to, slope)) in into.iter_mut().zip(slopes).enumerate() {
            *to = self.combine(base, m, &weights).exp();
            *slope = self.combine(base, m, &rates) / self.step_ln;
        }
        Ok(())
    }

    /// Index of the first of the six rings about a place, and the place counted from it.
    fn place(
        &self,
        outer_scale_index: usize,
        ring_radius_m: f64,
        orders: usize,
    ) -> Result<(usize, f64), TurbulenceError> {
        let (least_m, most_m) = self.range_m;
        // Room for the rounding of a radius that was a product.
        let slack = 1e-9;
        checked_length_m(
            "ring radius",
            ring_radius_m,
            least_m * (1.0 - slack),
            most_m * (1.0 + slack),
        )?;
        let held = self.outer_scales_m.len();
        if outer_scale_index >= held {
            return Err(TurbulenceError::NotTabulated {
                found: outer_scale_index,
                held,
            });
        }
        if orders > self.m_max + 1 {
            return Err(TurbulenceError::Order { found: orders - 1 });
        }
        let place = (ring_radius_m.ln() - self.first_ln) / self.step_ln;
        let base = ((place.floor() as usize).max(2) - 2).min(self.points - 6);
        Ok((outer_scale_index * self.points + base, place - base as f64))
    }

    fn combine(&self, base: usize, m: usize, weights: &[f64; 6]) -> f64 {
        let stride = self.m_max + 1;
        weights
            .iter()
            .enumerate()
            .map(|(k, w)| w * self.ln_k[(base + k) * stride + m])
            .sum()
    }
}

/// Weights of the points 0..6 for the value at `x`.
fn lagrange_weights(x: f64) -> [f64; 6] {
    std::array::from_fn(|k| {
        others(k)
            .map(|j| (x - j as f64) / (k as f64 - j as f64))
            .product()
    })
}

/// Weights of the points 0..6 for the derivative at `x`, per step.
fn lagrange_rates(x: f64) -> [f64; 6] {
    std::array::from_fn(|k| {
        let scale: f64 = others(k).map(|j| k as f64 - j as f64).product();
        let sum: f64 = others(k)
            .map(|i| {
                others(k)
                    .filter(|&j| j != i)
                    .map(|j| x - j as f64)
                    .product::<f64>()
            })
            .sum();
        sum / scale
    })
}

fn others(k: usize) -> impl Iterator<Item = usize> {
    (0..6).filter(move |&j| j != k)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::turbulence::harmonic_kernels;

    #[test]
    fn the_table_gives_the_integrals() -> Result<(), TurbulenceError> {
        let aperture = Aperture {
            diameter_m: 0.15,
            obstruction: 0.3,
        };
        let scales = [8.0, f64::INFINITY];
        let table = KernelTable::build(&aperture, Tilt::Gradient, &scales, (0.01, 150.0), 30, 0.0)?;
        let mut row = [0.0; 31];
        let (mut worst_of_sigma2, mut worst_relative) = (0.0_f64, 0.0_f64);
        for rho in [0.01, 0.0123, 0.0251, 0.077, 0.31, 1.9, 14.7, 88.0, 150.0] {
            for (index, &scale) in scales.iter().enumerate() {
                table.fill(index, rho, &mut row)?;
                let exact = harmonic_kernels(&aperture, Tilt::Gradient, scale, rho, 30)?;
                let sigma2: f64 = exact.iter().sum();
                for (a, b) in row.iter().zip(exact) {
                    worst_of_sigma2 = worst_of_sigma2.max((a - b).abs() / sigma2);
                    if b > 1e-2 * sigma2 {
                        worst_relative = worst_relative.max((a / b - 1.0).abs());
                    }
                }
            }
        }
        assert!(worst_of_sigma2 < 2e-6, "{worst_of_sigma2}");
        assert!(worst_relative < 1e-4, "{worst_relative}");
        assert!(table.fill(0, 151.0, &mut row).is_err());
        assert!(table.fill(2, 1.0, &mut row).is_err());
        Ok(())
    }

    #[test]
    fn slopes_are_those_of_the_values() -> Result<(), TurbulenceError> {
        let aperture = Aperture::clear(0.2);
        let table = KernelTable::build(&aperture, Tilt::Zernike, &[20.0], (0.05, 5.0), 8, 0.0)?;
        let [mut k, mut slopes, mut low, mut high, mut unused] = [[0.0; 9]; 5];
        for rho in [0.06_f64, 0.4, 2.0] {
            let step = 1e-4_f64;
            table.fill_with_slopes(0, rho, &mut k, &mut slopes)?;
            table.fill(0, rho * (-step).exp(), &mut low)?;
            table.fill_with_slopes(0, rho * step.exp(), &mut high, &mut unused)?;
            for m in 0..9 {
                let numeric = (high[m] / low[m]).ln() / (2.0 * step);
                assert!(
                    (slopes[m] - numeric).abs() < 1e-4 * numeric.abs().max(1.0),
                    "{rho} {m}"
                );
            }
        }
        Ok(())
    }
}
