//! Random error of the harmonics from the data themselves.
//!
//! # Model
//!
//! ```text
//! var(block mean) = f_m s_m^2 sum w^2 / (sum w)^2
//! ```
//!
//! `s_m^2` is the scatter of one coefficient about its block's mean (cosine and sine together, for
//! turbulence has no preferred direction on average), `f_m` the factor by which correlation in time
//! makes frames count less: the larger of the initial positive sequence of the autocorrelation and
//! batch means, both by the time stamps and pooled over all sequences.
//!
//! # Valid for
//!
//! Sequences of at least two frames; batch means need batches of ten frames.
//!
//! # Accuracy
//!
//! Initial positive sequence 1.1 times the true variance at the median, batch means 0.95 to 1.0, for
//! m = 2 of a layer at 500 m to 2 km.
//!
//! # Source
//!
//! C. J. Geyer, Statistical Science 7, 473 (1992); batch means: standard.

use super::{COMPONENTS, Observation, design::Component};

/// Frames of one sequence that are fitted as one mean.
#[derive(Clone, Debug, PartialEq)]
pub struct Block {
    /// Index of the sequence.
    pub sequence: usize,
    /// Weighted mean time, seconds.
    pub time_s: f64,
    /// Observations, as indices.
    pub frames: Vec<usize>,
    /// Weighted mean.
    pub mean_mas: Component,
    /// Variance of the mean.
    pub variance_mas2: Component,
    /// Degrees of freedom behind the variance, frames that say the same counted once.
    pub degrees: f64,
}

/// A block is cut where it grows longer than this, so that slow changes of the geometry stay in it.
const BLOCK_S: f64 = 300.0;

/// Prior degrees of freedom by which a sequence's scatter leans on that of all.
const PRIOR_DOF: f64 = 10.0;

/// Harmonic of each component.
const HARMONIC: [usize; COMPONENTS] = [0, 2, 2, 3, 3, 4, 4];

/// How the variance of a mean grows with the length of the batches it is judged by.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Growth {
    /// Frames in a batch.
    pub frames: usize,
    /// Its length, seconds.
    pub length_s: f64,
    /// Variance of batch means over that of independent frames.
    pub factor: f64,
    /// Degrees of freedom.
    pub degrees: f64,
}

/// What correlation in time does to the variance of a mean.
#[derive(Clone, Debug, PartialEq)]
pub struct Correlation {
    /// The factors `f_m` for m = 0, 2, 3, 4, by m.
    pub factor: [f64; 5],
    /// The factor for m = 2 by batches of growing length.
    pub growth: Vec<Growth>,
}

impl Correlation {
    /// Whether longer batches leave the variance as it is; none where there are too few batches to
    /// say. The longest batches with enough degrees of freedom must not exceed the factor by more than
    /// chance makes of them in 1 case of 100.
    pub fn converged(&self) -> Option<bool> {
        use statrs::distribution::{ChiSquared, ContinuousCDF};
        let last = self.growth.iter().rev().find(|it| it.degrees >= 8.0)?;
        let limit = ChiSquared::new(last.degrees).ok()?.inverse_cdf(0.99) / last.degrees;
        Some(last.factor <= self.factor[2] * limit)
    }
}

/// Blocks with means and variances, and what correlation in time does to them.
pub fn blocks(observations: &[Observation]) -> (Vec<Block>, Correlation) {
    let groups = groups(observations);
    let residuals = residuals(observations, &groups);
    let mut factor = [1.0; 5];
    for m in [0, 2, 3, 4] {
        factor[m] = correlation_factor(observations, &groups, &residuals, m);
    }
    let growth = growth(observations, &groups, &residuals);
    let scatter = scatter(observations, &groups, &residuals);
    let out = groups
        .iter()
        .zip(&scatter)
        .map(|(frames, scatter)| {
            let (mean, time_s, sum, squares) = mean(observations, frames);
            Block {
                sequence: observations[frames[0]].sequence,
                time_s,
                frames: frames.clone(),
                mean_mas: mean,
                variance_mas2: std::array::from_fn(|c| {
                    // Frames that are copies of each other scatter less than their photons must.
                    let noise = frames
                        .iter()
                        .map(|&k| observations[k].noise_mas2[c])
                        .sum::<f64>()
                        / frames.len() as f64;
                    let own = if scatter[c] > noise {
                        scatter[c]
                    } else {
                        noise
                    };
                    let inflation = factor[HARMONIC[c]];
                    inflation * own * about_mean(frames.len(), inflation) * squares / (sum * sum)
                }),
                degrees: 2.0 * (frames.len() as f64 - 1.0) / factor[2],
            }
        })
        .collect();
    (out, Correlation { factor, growth })
}

/// The variance over the scatter about the mean of `n` frames when that mean itself scatters by
/// `inflation` times what independent frames would give; 2 at most.
fn about_mean(n: usize, inflation: f64) -> f64 {
    if n < 2 {
        // Its variance is its noise: there is no mean that was taken out.
        return 1.0;
    }
    let n = n as f64;
    let left = (n - inflation) / (n - 1.0);
    if left > 0.5 { 1.0 / left } else { 2.0 }
}

/// Frames by sequence, cut at [`BLOCK_S`].
fn groups(observations: &[Observation]) -> Vec<Vec<usize>> {
    let mut out: Vec<Vec<usize>> = Vec::new();
    for (k, it) in observations.iter().enumerate() {
        match out.last_mut() {
            Some(last)
                if observations[last[0]].sequence == it.sequence
                    && it.time_s - observations[last[0]].time_s < BLOCK_S =>
            {
                last.push(k);
            }
            _ => out.push(vec![k]),
        }
    }
    out
}

/// Weighted mean, its time, the sum of weights and of their squares.
fn mean(observations: &[Observation], frames: &[usize]) -> (Component, f64, f64, f64) {
    let mut out = [0.0; COMPONENTS];
    let (mut time, mut sum, mut squares) = (0.0, 0.0, 0.0);
    for &k in frames {
        let it = &observations[k];
        sum += it.weight;
        squares += it.weight * it.weight;
        time += it.weight * it.time_s;
        for (o, h) in out.iter_mut().zip(it.harmonics_mas) {
            *o += it.weight * h;
        }
    }
    (out.map(|it| it / sum), time / sum, sum, squares)
}

/// Each frame's deviation from its group's mean, scaled by the root of its weight so that all frames
/// have the scatter of a frame of weight one.
fn residuals(observations: &[Observation], groups: &[Vec<usize>]) -> Vec<Component> {
    let mut out = vec![[0.0; COMPONENTS]; observations.len()];
    for frames in groups {
        let (mean, ..) = mean(observations, frames);
        for &k in frames {
            let it = &observations[k];
            out[k] = std::array::from_fn(|c| it.weight * (it.harmonics_mas[c] - mean[c]));
        }
    }
    out
}

/// Weighted scatter per group and component such that `scatter * sum w^2 / (sum w)^2` is the variance
/// of the mean of independent frames.
fn scatter(
    observations: &[Observation],
    groups: &[Vec<usize>],
    residuals: &[Component],
) -> Vec<Component> {
    let pair = |c: usize| -> [usize; 2] {
        match c {
            0 => [0, 0],
            c if c % 2 == 1 => [c, c + 1],
            c => [c - 1, c],
        }
    };
    let own: Vec<(Component, f64)> = groups
        .iter()
        .map(|frames| {
            let n = frames.len() as f64;
            let squares: f64 = frames.iter().map(|&k| observations[k].weight.powi(2)).sum();
            let dof = (n - 1.0).max(0.0);
            let value = std::array::from_fn(|c| {
                if dof == 0.0 {
                    return 0.0;
                }
                let [a, b] = pair(c);
                let sum: f64 = frames
                    .iter()
                    .map(|&k| 0.5 * (residuals[k][a].powi(2) + residuals[k][b].powi(2)))
                    .sum();
                sum / squares * n / dof
            });
            (value, dof)
        })
        .collect();
    let total: f64 = own.iter().map(|it| it.1).sum();
    let pooled: Component =
        std::array::from_fn(|c| own.iter().map(|it| it.1 * it.0[c]).sum::<f64>() / total.max(1.0));
    own.iter()
        .map(|(value, dof)| {
            std::array::from_fn(|c| (PRIOR_DOF * pooled[c] + dof * value[c]) / (PRIOR_DOF + dof))
        })
        .collect()
}

/// The factor by which correlation in time inflates the variance of a mean.
fn correlation_factor(
    observations: &[Observation],
    groups: &[Vec<usize>],
    residuals: &[Component],
    m: usize,
) -> f64 {
    let components: Vec<usize> = (0..COMPONENTS).filter(|&c| HARMONIC[c] == m).collect();
    let step = typical_step(observations, groups);
    let lags = groups.iter().map(Vec::len).max().unwrap_or(0).min(200);
    let mut sum = vec![0.0; lags.max(1)];
    let mut pairs = vec![0.0; lags.max(1)];
    let mut frames_at_zero = 0.0;
    let mut zero = 0.0;
    for frames in groups.iter().filter(|it| it.len() >= 8) {
        for (i, &a) in frames.iter().enumerate() {
            for &c in &components {
                zero += residuals[a][c].powi(2);
            }
            frames_at_zero += 1.0;
            for &b in &frames[i + 1..] {
                let lag =
                    ((observations[b].time_s - observations[a].time_s) / step).round() as usize;
                if lag >= lags {
                    break;
                }
                pairs[lag] += 1.0;
                for &c in &components {
                    sum[lag] += residuals[a][c] * residuals[b][c];
                }
            }
        }
    }
    if zero == 0.0 || frames_at_zero < 16.0 {
        return 1.0;
    }
    // The mean of a group that was taken out costs f / n of the variance at every lag, with the very
    // factor f that is sought.
    let groups_used = groups.iter().filter(|it| it.len() >= 8).count() as f64;
    let share = groups_used / frames_at_zero;
    let found: Vec<f64> = sum
        .iter()
        .zip(&pairs)
        .map(|(sum, pairs)| sum / pairs / (zero / frames_at_zero))
        .collect();
    let longest = (0.25 / share) as usize;
    let mut sequence = 1.0;
    for _ in 0..20 {
        let lost = share * sequence;
        let rho = |k: usize| match found.get(k) {
            Some(it) if k <= longest && it.is_finite() => it * (1.0 - lost) + lost,
            _ => 0.0,
        };
        sequence = initial_sequence(rho, longest, 1.0 / frames_at_zero.sqrt());
    }
    let length = ((50.0 * sequence) as usize).clamp(SHORTEST_BATCH, 100);
    let (batch, dof) = batch_factor(groups, residuals, &components, length);
    let surely = 1.0 + 2.0 / dof.max(1.0).sqrt();
    let larger = if batch > surely && batch > sequence {
        batch
    } else {
        sequence
    };
    if larger > 1.0 { larger } else { 1.0 }
}

/// Sum of the autocorrelations as long as pairs of neighbours are positive by more than their noise and
/// do not grow.
fn initial_sequence(rho: impl Fn(usize) -> f64, longest: usize, noise: f64) -> f64 {
    let mut out = 1.0 + 2.0 * rho(1).max(0.0);
    let mut smallest = f64::INFINITY;
    let mut k = 2;
    while k < longest {
        let pair = rho(k) + rho(k + 1);
        if pair <= noise {
            break;
        }
        smallest = if pair < smallest { pair } else { smallest };
        out += 2.0 * smallest;
        k += 2;
    }
    out
}

/// The factor for m = 2 by batches that double in length.
fn growth(
    observations: &[Observation],
    groups: &[Vec<usize>],
    residuals: &[Component],
) -> Vec<Growth> {
    let step = typical_step(observations, groups);
    let longest = groups.iter().map(Vec::len).max().unwrap_or(0) / 2;
    let mut out = Vec::new();
    let mut frames = SHORTEST_BATCH;
    while frames <= longest {
        let (factor, degrees) = batch_factor(groups, residuals, &[1, 2], frames);
        if degrees >= 4.0 {
            out.push(Growth {
                frames,
                length_s: frames as f64 * step,
                factor,
                degrees,
            });
        }
        frames *= 2;
    }
    out
}

/// Frames in the shortest batch.
const SHORTEST_BATCH: usize = 10;

/// Median spacing of neighbouring frames, seconds.
fn typical_step(observations: &[Observation], groups: &[Vec<usize>]) -> f64 {
    let mut steps: Vec<f64> = groups
        .iter()
        .flat_map(|frames| frames.windows(2))
        .map(|it| observations[it[1]].time_s - observations[it[0]].time_s)
        .filter(|it| *it > 0.0)
        .collect();
    steps.sort_by(f64::total_cmp);
    steps.get(steps.len() / 2).copied().unwrap_or(1.0)
}

/// Variance of means of batches of `length` frames over what independent frames would give, and its
/// degrees of freedom.
fn batch_factor(
    groups: &[Vec<usize>],
    residuals: &[Component],
    components: &[usize],
    length: usize,
) -> (f64, f64) {
    let (mut between, mut within, mut dof, mut count) = (0.0, 0.0, 0.0, 0.0);
    for frames in groups {
        let batches = frames.len() / length;
        if batches < 2 {
            continue;
        }
        let size = frames.len() / batches;
        for &c in components {
            let sums: Vec<f64> = frames
                .chunks_exact(size)
                .take(batches)
                .map(|it| it.iter().map(|&k| residuals[k][c]).sum::<f64>())
                .collect();
            let mean = sums.iter().sum::<f64>() / batches as f64;
            between += sums.iter().map(|it| (it - mean).powi(2)).sum::<f64>() / size as f64;
            dof += batches as f64 - 1.0;
            within += frames.iter().map(|&k| residuals[k][c].powi(2)).sum::<f64>();
            count += frames.len() as f64 - 1.0;
        }
    }
    if dof < 4.0 {
        (1.0, dof)
    } else {
        ((between / dof) / (within / count), dof)
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use rand::{RngExt, SeedableRng};
    use rand_chacha::ChaCha8Rng;
    use rand_distr::{Distribution, StandardNormal};

    /// Frames half a second apart, in 8 sequences, whose harmonics forget themselves by `keep` a step.
    fn frames(keep: f64, seed: u64) -> Vec<Observation> {
        let mut random = ChaCha8Rng::seed_from_u64(seed);
        let fresh = (1.0 - keep * keep).sqrt();
        let mut out = Vec::new();
        for sequence in 0..8 {
            let mut state = [0.0; COMPONENTS];
            for it in &mut state {
                *it = StandardNormal.sample(&mut random);
            }
            for k in 0..80 {
                for it in &mut state {
                    let new: f64 = StandardNormal.sample(&mut random);
                    *it = keep * *it + fresh * new;
                }
                out.push(Observation {
                    sequence,
                    time_s: 600.0 * sequence as f64 + 0.5 * f64::from(k),
                    axis_rad: 0.0,
                    zenith_rad: 0.0,
                    b0_rad: 0.0,
                    weight: 1.0,
                    harmonics_mas: state.map(|it| 100.0 * it),
                    noise_mas2: [1.0; COMPONENTS],
                    air: crate::shape::AirResponse::default(),
                });
            }
        }
        out
    }

    /// Source: variance of the mean of a first-order process, `(1 + rho) / (1 - rho)`: any textbook.
    #[test]
    fn the_factor_is_that_of_a_first_order_process() {
        for keep in [0.0, 0.5, 0.8] {
            let wanted = (1.0 + keep) / (1.0 - keep);
            let found: f64 = (0..20)
                .map(|seed| blocks(&frames(keep, seed)).1.factor[2])
                .sum::<f64>()
                / 20.0;
            assert!(
                (found / wanted - 1.0).abs() < 0.15,
                "{keep}: {found} {wanted}"
            );
        }
    }

    #[test]
    fn another_order_in_time_never_shrinks_the_error() {
        for seed in 0..10 {
            let ordered = frames(0.7, seed);
            let mut shuffled = ordered.clone();
            let mut random = ChaCha8Rng::seed_from_u64(seed);
            for sequence in shuffled.chunks_mut(80) {
                for k in (1..sequence.len()).rev() {
                    let other = random.random_range(0..=k);
                    let (a, b) = (sequence[k].harmonics_mas, sequence[other].harmonics_mas);
                    sequence[k].harmonics_mas = b;
                    sequence[other].harmonics_mas = a;
                }
            }
            let sum = |it: &[Observation]| -> f64 {
                blocks(it).0.iter().map(|it| it.variance_mas2[1]).sum()
            };
            assert!(sum(&shuffled) <= sum(&ordered), "seed {seed}");
        }
    }

    #[test]
    fn batches_that_grow_are_called_not_converged() {
        let batch = |factor: f64| Growth {
            frames: 40,
            length_s: 20.0,
            factor,
            degrees: 16.0,
        };
        let it = |factor: f64| Correlation {
            factor: [1.0; 5],
            growth: vec![batch(factor)],
        };
        assert_eq!(it(1.5).converged(), Some(true));
        assert_eq!(it(3.0).converged(), Some(false));
        assert_eq!(blocks(&frames(0.2, 3)).1.converged(), Some(true));
    }
}
