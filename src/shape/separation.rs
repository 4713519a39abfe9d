//! What the observation can tell apart: singular values of the scaled design.

use super::design::{self, about, sun_columns};
use super::{Block, COMPONENTS, Observation};
use nalgebra::DMatrix;

/// A singular value below this share of the largest belongs to a direction that is not measured:
/// its error would be more than fifty times that of a term standing alone.
const SMALLEST_SHARE: f64 = 0.02;

/// Squared part of an unknown in such a direction above which the unknown is not separated.
const TOUCHED: f64 = 0.02;

/// What can be told apart.
#[derive(Clone, Debug, PartialEq)]
pub struct Separability {
    /// Rank of the scaled design of Sun, instrument and air without prior knowledge.
    pub rank: usize,
    /// Its unknowns.
    pub unknowns: usize,
    /// Its singular values, largest first.
    pub singular_values: Vec<f64>,
    /// Condition number of Sun and instrument alone; none where one of their directions is not measured.
    pub sun_condition_number: Option<f64>,
    /// Whether the oblateness is separated from the instrument.
    pub oblateness: bool,
    /// Whether `R c4` is.
    pub p4: bool,
    /// Range of the detector angle of solar north, degrees.
    pub turned_deg: f64,
}

impl Separability {
    /// Condition number, or none where the design is singular.
    pub fn condition_number(&self) -> Option<f64> {
        let (first, last) = (self.singular_values.first()?, self.singular_values.last()?);
        (self.rank == self.unknowns).then(|| first / last)
    }
}

/// Judges Sun against instrument (whose terms are free unless `distortion_known`), and the rank of the
/// whole with the air's terms.
pub fn judge(
    observations: &[Observation],
    blocks: &[Block],
    distortion_known: bool,
) -> Separability {
    let instrument = 6;
    let sun = scaled(observations, blocks, 3 + instrument, false);
    let all = scaled(observations, blocks, 3 + instrument + 2, true);
    let touched = |unknown: usize| -> bool {
        let svd = sun.clone().svd(false, true);
        let Some(vt) = svd.v_t else { return true };
        let largest = svd.singular_values.max();
        svd.singular_values
            .iter()
            .enumerate()
            .filter(|(_, it)| **it < SMALLEST_SHARE * largest)
            .map(|(k, _)| vt[(k, unknown)].powi(2))
            .sum::<f64>()
            > TOUCHED
    };
    let own = sun.singular_values();
    let (widest, narrowest) = (own.max(), own.min());
    let mut singular_values: Vec<f64> = all.singular_values().iter().copied().collect();
    singular_values.sort_by(|a, b| b.total_cmp(a));
    let largest = singular_values.first().copied().unwrap_or(0.0);
    let rank = singular_values
        .iter()
        .filter(|it| **it >= SMALLEST_SHARE * largest)
        .count();
    Separability {
        rank,
        unknowns: singular_values.len(),
        singular_values,
        sun_condition_number: (narrowest >= SMALLEST_SHARE * widest && narrowest > 0.0)
            .then(|| widest / narrowest),
        oblateness: distortion_known || !touched(1),
        p4: distortion_known || !touched(2),
        turned_deg: turned_deg(observations),
    }
}

/// The design over blocks, rows weighted, columns scaled to one.
fn scaled(
    observations: &[Observation],
    blocks: &[Block],
    unknowns: usize,
    with_air: bool,
) -> DMatrix<f64> {
    let rows = blocks.len() * COMPONENTS;
    let mut out = DMatrix::<f64>::zeros(rows.max(unknowns), unknowns);
    for (b, block) in blocks.iter().enumerate() {
        let total: f64 = block.frames.iter().map(|&k| observations[k].weight).sum();
        for &k in &block.frames {
            let o = &observations[k];
            let mut columns = sun_columns(o.b0_rad, o.axis_rad).to_vec();
            for m in 2..=4 {
                columns.push(about(m, 0.0, 1.0));
                columns.push(about(m, std::f64::consts::FRAC_PI_2 / m as f64, 1.0));
            }
            if with_air {
                columns.push(design::refractivity(o));
                columns.push(design::vertical(o));
            }
            for (j, column) in columns.iter().enumerate() {
                for (c, it) in column.iter().enumerate() {
                    let sigma = block.variance_mas2[c].sqrt().max(1e-9);
                    out[(b * COMPONENTS + c, j)] += o.weight / total * it / sigma;
                }
            }
        }
    }
    for mut column in out.column_iter_mut() {
        let norm = column.norm();
        if norm > 0.0 {
            column /= norm;
        }
    }
    out
}

/// How far solar north turned on the detector, degrees, in steps below 180.
fn turned_deg(observations: &[Observation]) -> f64 {
    let Some(first) = observations.first() else {
        return 0.0;
    };
    let (mut low, mut high) = (0.0, 0.0);
    for it in observations {
        let turn = crate::units::wrapped_rad(it.axis_rad - first.axis_rad).to_degrees();
        low = if turn < low { turn } else { low };
        high = if turn > high { turn } else { high };
    }
    high - low
}
