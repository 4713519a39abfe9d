//! Which frames count, and how much, judged by what cannot see the shape.
//!
//! # Model
//!
//! ```text
//! sharpness of a frame = -(mean blur J of its sectors)           no positions in it
//! weight = 1 / v,  v = (nu_0 + sum_{m >= 5} (a_m^2 + b_m^2) / P_m) / (nu_0 + 2 (m_max - 4))
//! ```
//!
//! `P_m` is the sequence's mean power of harmonic m, `nu_0` leans a frame on its sequence. The shape
//! lives in m = 0, 2, 4, which neither statistic contains; for isotropic turbulence harmonics of
//! different m are independent.
//!
//! # Valid for
//!
//! Limbs with harmonics to at least m = 8; fewer give equal weights.
//!
//! # Accuracy
//!
//! A selection on m >= 5 leaves the oblateness unchanged within 3 percent at 10 percent kept; one on
//! roundness shrinks it to 0.1 to 0.4, both against a table in `tests/published/selection_bias.rs`; whole
//! sessions in `tests/selected_and_stacked.rs`.
//!
//! # Source
//!
//! Independence of limb harmonics in isotropic turbulence: [`crate::turbulence`].

use std::ops::Range;

/// First harmonic that judges a frame.
pub const FIRST_JUDGING: usize = 5;

/// Prior degrees of freedom of a frame's weight.
const PRIOR_DOF: f64 = 24.0;

/// A frame as selection sees it: nothing of its shape.
#[derive(Clone, Debug, PartialEq)]
pub struct Candidate {
    /// Index of the sequence.
    pub sequence: usize,
    /// Mean blur of the frame.
    pub blur: f64,
    /// Squared amplitudes of m = [`FIRST_JUDGING`] and up, noise taken off, any unit.
    pub high_power: Vec<f64>,
}

/// The runs of neighbouring frames of one sequence.
fn runs(candidates: &[Candidate]) -> impl Iterator<Item = Range<usize>> {
    candidates
        .chunk_by(|a, b| a.sequence == b.sequence)
        .scan(0, |end, run| {
            let at = *end;
            *end += run.len();
            Some(at..*end)
        })
}

/// The weights of frames, 1 on average over each sequence.
pub fn weights(candidates: &[Candidate]) -> Vec<f64> {
    let mut out = vec![1.0; candidates.len()];
    for run in runs(candidates) {
        let group = &candidates[run.clone()];
        let modes = group
            .iter()
            .map(|it| it.high_power.len())
            .min()
            .unwrap_or(0);
        if modes >= 4 && group.len() >= 8 {
            let mean: Vec<f64> = (0..modes)
                .map(|m| group.iter().map(|it| it.high_power[m]).sum::<f64>() / group.len() as f64)
                .collect();
            for (k, it) in group.iter().enumerate() {
                let dof = 2.0 * modes as f64;
                let sum: f64 = it
                    .high_power
                    .iter()
                    .zip(&mean)
                    .map(|(p, m)| if *m > 0.0 { 2.0 * p / m } else { 2.0 })
                    .sum();
                let v = (PRIOR_DOF + sum) / (PRIOR_DOF + dof);
                out[run.start + k] = if v > 0.05 { 1.0 / v } else { 20.0 };
            }
            let total: f64 = out[run.clone()].iter().sum();
            let n = run.len() as f64;
            out[run].iter_mut().for_each(|it| *it *= n / total);
        }
    }
    out
}

/// The sharpest share of every sequence's frames, so that no roll loses more than another.
pub fn sharpest(candidates: &[Candidate], fraction: f64) -> Vec<bool> {
    let mut out = vec![false; candidates.len()];
    for run in runs(candidates) {
        let keep = (run.len() as f64 * fraction).round().max(2.0) as usize;
        let mut order: Vec<usize> = run.collect();
        order.sort_by(|&a, &b| candidates[a].blur.total_cmp(&candidates[b].blur));
        for &k in order.iter().take(keep) {
            out[k] = true;
        }
    }
    out
}

#[cfg(test)]
mod tests {
    use super::*;

    fn candidate(blur: f64, power: f64) -> Candidate {
        Candidate {
            sequence: 0,
            blur,
            high_power: vec![power; 26],
        }
    }

    #[test]
    fn a_frame_of_twice_the_power_weighs_less_and_the_mean_is_one() {
        let mut frames: Vec<Candidate> = (0..20).map(|_| candidate(1.0, 1.0)).collect();
        frames[3] = candidate(1.0, 2.0);
        let w = weights(&frames);
        assert!(w[3] < 0.7 && (w.iter().sum::<f64>() / 20.0 - 1.0).abs() < 1e-12);
    }

    #[test]
    fn the_sharpest_are_those_of_least_blur() {
        let frames: Vec<Candidate> = (0..10).map(|k| candidate(f64::from(10 - k), 1.0)).collect();
        let kept = sharpest(&frames, 0.3);
        assert_eq!(kept.iter().filter(|it| **it).count(), 3);
        assert!(kept[9] && kept[8] && kept[7]);
    }
}
