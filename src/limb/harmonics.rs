//! Least squares of harmonics over the sectors that can be used.
//!
//! # Model
//!
//! ```text
//! r(theta) = a_0 + sum_m (a_m cos m theta + b_m sin m theta),   m = 1 .. m_max
//! ```
//!
//! With every sector present the fit is the discrete Fourier sum; with sectors missing it is least
//! squares on those that are there, never a sum that assumes the rest.
//!
//! # Valid for
//!
//! More usable sectors than twice the unknowns.
//!
//! # Accuracy
//!
//! Exact for a limb that is the series.
//!
//! # Source
//!
//! Least squares.

use super::Flag;
use super::blemish::median;
use super::geometry::Annulus;
use super::sector::Fit;
use nalgebra::{DMatrix, DVector, Matrix5, Vector5};

/// Misfit over the usual one above which a sector says nothing of the centre: it is crossed by the edge
/// of a dome, a tree, a large spot, and wanders from step to step.
const WANDERING: f64 = 6.0;

/// Brightness, as a share of the usual one, below which a sector holds no Sun: it is behind something.
pub(super) const DIM: f64 = 0.25;

/// Offset of the limb's centre from the one assumed, arcsec, `(x, y)`, with the second harmonic
/// fitted beside it so that missing sectors do not turn flattening into motion. Sectors that are not
/// steady are left out; with `judge` those that wander are marked as not steady, for good: a sector that
/// came and went would keep the centre from settling.
pub(super) fn centre_offset(
    annulus: &Annulus,
    fits: &[Fit],
    steady: &mut [bool],
    judge: bool,
) -> (f64, f64) {
    let mut normal = Matrix5::<f64>::zeros();
    let mut right = Vector5::<f64>::zeros();
    let good = || {
        fits.iter()
            .enumerate()
            .filter(|(_, it)| it.flag == Flag::Good)
    };
    let usual = median(good().map(|(_, it)| it.misfit));
    let dim = DIM * median(good().map(|(_, it)| it.gain_adu));
    if judge {
        for (steady, it) in steady.iter_mut().zip(fits) {
            *steady &= it.flag == Flag::Good && it.misfit <= WANDERING * usual && it.gain_adu > dim;
        }
    }
    for (s, fit) in good().filter(|(s, _)| steady[*s]) {
        let (c, n) = annulus.direction(s);
        let row = Vector5::new(1.0, c, n, c * c - n * n, 2.0 * c * n);
        normal += row * row.transpose();
        right += row * fit.shift_arcsec;
    }
    normal.cholesky().map_or((f64::NAN, f64::NAN), |it| {
        let solved = it.solve(&right);
        (solved[1], solved[2])
    })
}

/// The linear map from sector radii to harmonics for one pattern of usable sectors.
#[derive(Clone, Debug)]
pub struct Projector {
    used: Vec<usize>,
    matrix: DMatrix<f64>,
    m_max: usize,
}

/// Harmonics of one limb: `cos[m]`, `sin[m]`, `m = 0 ..= m_max`; `sin[0]` is zero.
#[derive(Clone, Debug, PartialEq)]
pub struct Harmonics {
    /// Coefficients of `cos m theta`.
    pub cos: Vec<f64>,
    /// Coefficients of `sin m theta`.
    pub sin: Vec<f64>,
}

impl Projector {
    /// The projector for sectors at `angles_rad`, of which `usable` can be used; the number of
    /// harmonics is lowered where too few are left.
    pub fn new(angles_rad: &[f64], usable: &[bool], m_max: usize) -> Option<Self> {
        let used: Vec<usize> = (0..angles_rad.len()).filter(|&s| usable[s]).collect();
        // A gap of a harmonic's half wave leaves it open: shorter waves are not asked for.
        let gap = longest_gap(usable);
        let open = (angles_rad.len() - 1) / (2 * (gap + 1));
        let m_max = m_max.min(open).min(used.len() / 4).max(4);
        if 2 * used.len() < angles_rad.len() || used.len() < 3 * m_max {
            return None;
        }
        let columns = 2 * m_max + 1;
        let design = DMatrix::from_fn(used.len(), columns, |row, column| {
            let theta = angles_rad[used[row]];
            let m = column.div_ceil(2) as f64;
            if column == 0 {
                1.0
            } else if column % 2 == 1 {
                (m * theta).cos()
            } else {
                (m * theta).sin()
            }
        });
        let normal = design.transpose() * &design;
        let matrix = normal.cholesky()?.solve(&design.transpose());
        Some(Self {
            used,
            matrix,
            m_max,
        })
    }

    /// Highest harmonic.
    pub fn m_max(&self) -> usize {
        self.m_max
    }

    /// The sectors that are used.
    pub fn used(&self) -> &[usize] {
        &self.used
    }

    /// Harmonics of one limb given at every sector.
    pub fn apply(&self, radii: &[f64]) -> Harmonics {
        let picked = DVector::from_iterator(self.used.len(), self.used.iter().map(|&s| radii[s]));
        let solved = &self.matrix * picked;
        let mut cos = vec![solved[0]];
        let mut sin = vec![0.0];
        for m in 1..=self.m_max {
            cos.push(solved[2 * m - 1]);
            sin.push(solved[2 * m]);
        }
        Harmonics { cos, sin }
    }

    /// Variance of every coefficient that independent sector variances cause, mean of cosine and sine.
    pub fn noise(&self, variances: &[f64]) -> Vec<f64> {
        let row = |r: usize| -> f64 {
            self.used
                .iter()
                .enumerate()
                .map(|(k, &s)| self.matrix[(r, k)].powi(2) * variances[s])
                .sum()
        };
        (0..=self.m_max)
            .map(|m| {
                if m == 0 {
                    row(0)
                } else {
                    0.5 * (row(2 * m - 1) + row(2 * m))
                }
            })
            .collect()
    }
}

/// Longest run of sectors that cannot be used, around the limb.
fn longest_gap(usable: &[bool]) -> usize {
    let (mut longest, mut run) = (0, 0);
    for good in usable.iter().chain(usable) {
        run = if *good { 0 } else { run + 1 };
        longest = longest.max(run);
    }
    longest.min(usable.len())
}

#[cfg(test)]
mod tests {
    use super::*;

    fn angles(n: usize) -> Vec<f64> {
        (0..n)
            .map(|s| (s as f64 + 0.5) * std::f64::consts::TAU / n as f64)
            .collect()
    }

    #[test]
    fn a_series_comes_back_with_a_third_of_the_limb_missing() {
        let at = angles(120);
        let radii: Vec<f64> = at
            .iter()
            .map(|t| 5.0 + 0.3 * (2.0 * t).cos() - 0.2 * (4.0 * t).sin())
            .collect();
        let usable: Vec<bool> = (0..120).map(|s| !(20..60).contains(&s)).collect();
        let found = Projector::new(&at, &usable, 30)
            .expect("enough sectors")
            .apply(&radii);
        assert!((found.cos[0] - 5.0).abs() < 1e-9);
        assert!((found.cos[2] - 0.3).abs() < 1e-9);
        assert!((found.sin[4] + 0.2).abs() < 1e-9);
        assert!(found.cos[3].abs() < 1e-9);
    }

    #[test]
    fn white_noise_has_the_variance_of_the_fourier_sum() {
        let at = angles(120);
        let noise = Projector::new(&at, &[true; 120], 30)
            .expect("whole limb")
            .noise(&[1.0; 120]);
        assert!((noise[0] - 1.0 / 120.0).abs() < 1e-12);
        assert!((noise[7] - 2.0 / 120.0).abs() < 1e-12);
    }
}
