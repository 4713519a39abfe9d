//! The blurred limb for every r0 and every direction of the pixel, by interpolation.
//!
//! # Model
//!
//! ```text
//! B(x; r0, theta) = sum over i, k of  b_ik(x) L_i(ln r0) T_k(cos 4 theta)
//! ```
//!
//! `L_i` are the Lagrange polynomials of Chebyshev points, `T_k` Chebyshev polynomials: the square
//! pixel makes the profile an even function of `theta` with the period of a right angle. Over `x` a
//! cubic through four values of a fine grid.
//!
//! # Valid for
//!
//! The range of r0 for which the table was made.
//!
//! # Accuracy
//!
//! 2e-6 of disk centre against the profile itself (test below).
//!
//! # Source
//!
//! Interpolation in Chebyshev points: common practice.

use std::f64::consts::PI;

use rayon::prelude::*;

use super::SynthError;
use crate::optics::{Blur, LimbOptics, ProfileMaker};

/// Points in `ln r0`.
const AIR_POINTS: usize = 9;
/// Points in `cos 4 theta`.
const TURNS: usize = 7;
/// Step of the grid in cycles of the telescope's cutoff.
const STEP_CYCLES: f64 = 0.03;

/// Profiles at the points of `ln r0`, each in [`TURNS`] Chebyshev terms at every grid value.
#[derive(Clone, Debug)]
pub(super) struct ProfileTable {
    log_r0: Vec<f64>,
    profiles: Vec<Vec<[f64; TURNS]>>,
    x0_arcsec: f64,
    step_arcsec: f64,
}

/// The blurred limb at one r0.
#[derive(Clone, Debug)]
pub(super) struct FrameProfile {
    terms: Vec<[f64; TURNS]>,
    x0_arcsec: f64,
    step_arcsec: f64,
}

impl ProfileTable {
    /// Prepares profiles out to `span_arcsec` for r0 (at the wavelength, along the line of sight) in
    /// a range; infinity stands for no air.
    pub(super) fn new(
        optics: &LimbOptics,
        span_arcsec: f64,
        pixel_arcsec: f64,
        (lowest_r0_m, highest_r0_m): (f64, f64),
    ) -> Result<Self, SynthError> {
        let cutoff = optics
            .telescope
            .cutoff_cycles_arcsec(optics.wavelength_nm * 1e-9);
        let step_arcsec = STEP_CYCLES / cutoff;
        let maker = ProfileMaker::new(optics, span_arcsec, step_arcsec, pixel_arcsec)?;
        let grid = maker.grid();
        let (low, high) = (lowest_r0_m.ln(), highest_r0_m.ln());
        let log_r0: Vec<f64> = if low.is_finite() && high > low {
            (0..AIR_POINTS)
                .map(|i| 0.5 * (low + high) + 0.5 * (high - low) * chebyshev_point(i, AIR_POINTS))
                .collect()
        } else {
            vec![low]
        };
        let turns: Vec<f64> = (0..TURNS).map(|k| chebyshev_point(k, TURNS)).collect();
        let jobs: Vec<(f64, f64)> = log_r0
            .iter()
            .flat_map(|it| turns.iter().map(move |turn| (it.exp(), *turn)))
            .collect();
        let made: Vec<Vec<f64>> = jobs
            .par_iter()
            .map(|&(r0_m, turn)| {
                let blur = Blur {
                    r0_m,
                    gaussian_sigma_arcsec: 0.0,
                };
                maker.profile(&blur, 0.25 * turn.acos())
            })
            .collect();
        let profiles = made
            .chunks_exact(TURNS)
            .map(|of_air| {
                (0..grid.n)
                    .map(|x| std::array::from_fn(|k| term(k, |j| of_air[j][x])))
                    .collect()
            })
            .collect();
        Ok(Self {
            log_r0,
            profiles,
            x0_arcsec: grid.x0_arcsec,
            step_arcsec,
        })
    }

    /// The limb at one r0 of the range.
    pub(super) fn at(&self, r0_m: f64) -> FrameProfile {
        let log = r0_m.ln();
        let weights: Vec<f64> = (0..self.log_r0.len())
            .map(|i| lagrange(&self.log_r0, i, log))
            .collect();
        let terms = (0..self.profiles[0].len())
            .map(|x| {
                let mut sum = [0.0; TURNS];
                for (profile, weight) in self.profiles.iter().zip(&weights) {
                    for (to, from) in sum.iter_mut().zip(&profile[x]) {
                        *to += weight * from;
                    }
                }
                sum
            })
            .collect();
        FrameProfile {
            terms,
            x0_arcsec: self.x0_arcsec,
            step_arcsec: self.step_arcsec,
        }
    }
}

impl FrameProfile {
    /// Brightness at a distance from the limb for `cos 4 theta` of the pixel's direction, in units of
    /// the disk's centre; none outside the table.
    #[inline]
    pub(super) fn at(&self, x_arcsec: f64, cos4: f64) -> Option<f64> {
        let place = (x_arcsec - self.x0_arcsec) / self.step_arcsec;
        if place < 1.0 {
            return None;
        }
        let low = place as usize;
        let four = self.terms.get(low - 1..low + 3)?;
        let t = place - low as f64;
        // Lagrange's polynomial through -1, 0, 1, 2.
        let weights = [
            -t * (t - 1.0) * (t - 2.0) / 6.0,
            (t * t - 1.0) * (t - 2.0) / 2.0,
            -t * (t + 1.0) * (t - 2.0) / 2.0,
            t * (t * t - 1.0) / 6.0,
        ];
        let mut chebyshev = [1.0; TURNS];
        chebyshev[1] = cos4;
        for k in 2..TURNS {
            chebyshev[k] = 2.0 * cos4 * chebyshev[k - 1] - chebyshev[k - 2];
        }
        let mut sum = 0.0;
        for (terms, weight) in four.iter().zip(weights) {
            let there: f64 = terms.iter().zip(&chebyshev).map(|(a, b)| a * b).sum();
            sum += weight * there;
        }
        Some(sum)
    }
}

fn chebyshev_point(index: usize, count: usize) -> f64 {
    (PI * (index as f64 + 0.5) / count as f64).cos()
}

/// Coefficient of `T_k` of the polynomial through values at the Chebyshev points.
fn term(k: usize, value: impl Fn(usize) -> f64) -> f64 {
    let n = TURNS as f64;
    let sum: f64 = (0..TURNS)
        .map(|j| value(j) * (PI * k as f64 * (j as f64 + 0.5) / n).cos())
        .sum();
    if k == 0 { sum / n } else { 2.0 * sum / n }
}

fn lagrange(points: &[f64], index: usize, at: f64) -> f64 {
    let others = points.iter().enumerate().filter(|(j, _)| *j != index);
    others.fold(1.0, |product, (_, other)| {
        product * (at - other) / (points[index] - other)
    })
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::disk::{Darkening, DarkeningLaw, SolarEdge};
    use crate::optics::{Exposure, Telescope};

    #[test]
    fn the_table_is_the_profile() {
        let optics = LimbOptics {
            edge: SolarEdge {
                radius_arcsec: 950.0,
                scale_arcsec: 0.12,
                darkening: Darkening::new(DarkeningLaw::Neckel2005, 550.0).unwrap(),
            },
            telescope: Telescope {
                aperture_m: 0.15,
                central_obstruction: 0.0,
            },
            wavelength_nm: 550.0,
            exposure: Exposure::Short,
        };
        let table = ProfileTable::new(&optics, 20.0, 4.0, (0.04, 0.12)).unwrap();
        let maker = ProfileMaker::new(&optics, 20.0, 0.05, 4.0).unwrap();
        let mut worst = 0.0_f64;
        for (r0_m, angle_rad) in [(0.041, 0.0), (0.055, 0.4), (0.08, 0.7), (0.119, 2.2)] {
            let blur = Blur {
                r0_m,
                gaussian_sigma_arcsec: 0.0,
            };
            let exact = maker.profile(&blur, angle_rad);
            let made = table.at(r0_m);
            for (i, exact) in exact.iter().enumerate() {
                let x = maker.grid().x_arcsec(i);
                if x.abs() < 19.0 {
                    let it = made.at(x, (4.0 * angle_rad).cos()).unwrap();
                    worst = worst.max((it - exact).abs());
                }
            }
        }
        assert!(worst < 2e-6, "{worst:e}");
    }
}
