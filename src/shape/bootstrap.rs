//! The random error once more, by resampling runs of frames.
//!
//! # Model
//!
//! ```text
//! d_k = sum_c influence_kc (h_kc - block mean_c),   what frame k adds to the answer
//! sigma^2 = sum over blocks of n / (n - 1) var(sum of n runs of d drawn with replacement)
//! ```
//!
//! The fit is linear in the harmonics, so that a resampled session need not be fitted again. Runs are
//! contiguous, several correlation times long, and never cross from one block to the next.
//!
//! # Valid for
//!
//! Blocks of at least two runs; shorter ones are resampled frame by frame.
//!
//! # Accuracy
//!
//! Low by about the ratio of the correlation time to the length of a run, a tenth here; scatter of the
//! answer itself one over the root of twice the number of runs.
//!
//! # Source
//!
//! H. R. Kuensch, Annals of Statistics 17, 1217 (1989), with runs that do not overlap.

use super::design::{COMPONENTS, Component};
use super::{Block, Fit, Observation};
use rand::{RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;

/// Random errors by resampling.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Bootstrap {
    /// Standard errors of radius, oblateness and `R c4`, mas.
    pub sigma_mas: [f64; 3],
    /// Frames in a run.
    pub run_frames: usize,
    /// Runs in the session.
    pub runs: usize,
    /// Resampled sessions.
    pub resamples: usize,
}

/// Resampled sessions: the error of a standard error by them is 1.6 percent.
const RESAMPLES: usize = 2000;

/// Inflation factors, each twice the correlation time in frames, that a run is long.
const FACTORS_IN_RUN: f64 = 5.0;

/// Resamples runs of frames; `factor` is the inflation of the variance of a mean by correlation in
/// time, for m = 2. None where no block has two frames.
pub fn bootstrap(
    observations: &[Observation],
    blocks: &[Block],
    fit: &Fit,
    factor: f64,
    seed: u64,
) -> Option<Bootstrap> {
    let run_frames = (FACTORS_IN_RUN * factor).ceil() as usize;
    let influence = fit.influence(observations, blocks);
    let sums: Vec<Vec<[f64; 3]>> = blocks
        .iter()
        .filter(|it| it.frames.len() >= 2)
        .map(|block| runs(observations, block, &influence, run_frames))
        .collect();
    let total: usize = sums.iter().map(Vec::len).sum();
    if total == 0 {
        return None;
    }
    let mut random = ChaCha8Rng::seed_from_u64(seed);
    let mut square = [0.0; 3];
    for _ in 0..RESAMPLES {
        let mut answer = [0.0; 3];
        for runs in &sums {
            let n = runs.len();
            let widen = (n as f64 / (n as f64 - 1.0)).sqrt();
            for _ in 0..n {
                let drawn = &runs[random.random_range(0..n)];
                for (a, d) in answer.iter_mut().zip(drawn) {
                    *a += widen * d;
                }
            }
        }
        for (s, a) in square.iter_mut().zip(answer) {
            *s += a * a;
        }
    }
    Some(Bootstrap {
        sigma_mas: square.map(|it| (it / RESAMPLES as f64).sqrt()),
        run_frames,
        runs: total,
        resamples: RESAMPLES,
    })
}

/// What every run of a block adds to the answer; their sum is zero.
fn runs(
    observations: &[Observation],
    block: &Block,
    influence: &[[Component; 3]],
    run_frames: usize,
) -> Vec<[f64; 3]> {
    let n = block.frames.len();
    let count = if n / run_frames >= 2 {
        n / run_frames
    } else {
        n.min(2)
    };
    let mut out = vec![[0.0; 3]; count];
    for (i, &k) in block.frames.iter().enumerate() {
        let run = &mut out[i * count / n];
        for (q, influence) in influence[k].iter().enumerate() {
            run[q] += (0..COMPONENTS)
                .map(|c| influence[c] * (observations[k].harmonics_mas[c] - block.mean_mas[c]))
                .sum::<f64>();
        }
    }
    out
}
