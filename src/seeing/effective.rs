//! How many independent frames a series holds, from its own times.
//!
//! # Model
//!
//! ```text
//! Var(mean) = (C_0 / N) [1 + 2 sum (1 - k/N) rho_k] = C_0 / N_eff
//! of a variance:  N_eff = N / (1 + 2 sum (1 - k/N) rho_k^2)
//! ```
//!
//! Autocovariances are binned by the difference of the times, never by the index. The sum runs to
//! the first non-positive `gamma_2k + gamma_(2k+1)` (initial positive sequence); batch means over
//! blocks of time give a second estimate, and the larger error counts.
//!
//! | symbol | meaning | unit |
//! |--------|---------|------|
//! | `gamma_k`, `rho_k` | autocovariance, autocorrelation at k median spacings | -, - |
//! | `N` | frames | - |
//!
//! # Valid for
//!
//! Series of 4 frames or more whose memory is much shorter than themselves. A series that has not
//! forgotten by a tenth of its length is reported as not converged.
//!
//! # Accuracy
//!
//! 10 percent over 2000 frames of a first-order autoregression
//! (`tests/published/seeing_scales.rs`); heuristic where correlations go negative, as in frozen
//! flow.
//!
//! # Source
//!
//! C. J. Geyer, Statistical Science 7, 473 (1992) (from memory); batch means: common practice, no
//! source.

/// Effective number of independent frames, and how far to trust it.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct EffectiveCount {
    /// Effective number of frames of the mean: variance of a frame over variance of the mean.
    pub count: f64,
    /// The same from the initial positive sequence alone.
    pub by_sequence: f64,
    /// The same from batch means alone; none with fewer than 10 blocks of 4 frames.
    pub by_batches: Option<f64>,
    /// False if the batch variance still rises with the length of the blocks.
    pub converged: bool,
}

/// Effective number of independent frames of the mean of `values` at `time_s`; the larger error of
/// two estimators. `None` with fewer than 4 frames, times that do not differ, or values that do
/// not.
pub fn effective_count(time_s: &[f64], values: &[f64]) -> Option<EffectiveCount> {
    let count = values.len() as f64;
    let lags = Autocovariance::of(time_s, &[values])?;
    let by_sequence = count / lags.inflation(count);
    let long_blocks = batch_count(time_s, values, 10);
    let short_blocks = batch_count(time_s, values, 20);
    // With 10 blocks the variance itself is uncertain by half: a call for alarm needs more than
    // that.
    let converged = match (long_blocks, short_blocks) {
        (Some(long), Some(short)) => long > 0.4 * short,
        _ => true,
    };
    let least = long_blocks.map_or(by_sequence, |batch| batch.min(by_sequence));
    Some(EffectiveCount {
        count: least.clamp(1.0, count),
        by_sequence: by_sequence.clamp(1.0, count),
        by_batches: long_blocks,
        converged,
    })
}

/// Effective number of frames for the *variance* of several series with a common memory, per frame
/// given: `1 / (1 + 2 sum rho_k^2)`, 0 to 1. `None` as [`effective_count`].
pub fn effective_count_of_power(time_s: &[f64], series: &[&[f64]]) -> Option<f64> {
    let lags = Autocovariance::of(time_s, series)?;
    Some(1.0 / lags.square_inflation(time_s.len() as f64))
}

/// Autocovariances at multiples of the median spacing, pooled over series that share their times.
#[derive(Clone, Debug)]
pub(super) struct Autocovariance {
    pub(super) gamma: Vec<f64>,
    /// Products behind each lag, all series together.
    pub(super) products: Vec<f64>,
    /// Seconds from lag to lag.
    pub(super) spacing_s: f64,
}

impl Autocovariance {
    pub(super) fn of(time_s: &[f64], series: &[&[f64]]) -> Option<Self> {
        let frames = time_s.len();
        if frames < 4 || series.is_empty() || series.iter().any(|it| it.len() != frames) {
            return None;
        }
        let mut order: Vec<usize> = (0..frames).collect();
        order.sort_by(|&a, &b| time_s[a].total_cmp(&time_s[b]));
        let mut steps: Vec<f64> = order
            .windows(2)
            .map(|pair| time_s[pair[1]] - time_s[pair[0]])
            .collect();
        steps.sort_by(f64::total_cmp);
        let spacing_s = steps[steps.len() / 2];
        if spacing_s.is_nan() || spacing_s <= 0.0 {
            return None;
        }
        let last = frames / 2;
        let (mut sums, mut products) = (vec![0.0; last + 1], vec![0.0; last + 1]);
        for values in series {
            let mean = values.iter().sum::<f64>() / frames as f64;
            for (at, &i) in order.iter().enumerate() {
                for &j in &order[at..] {
                    let lag = ((time_s[j] - time_s[i]) / spacing_s).round() as usize;
                    if lag > last {
                        break;
                    }
                    sums[lag] += (values[i] - mean) * (values[j] - mean);
                    products[lag] += 1.0;
                }
            }
        }
        // Lag 0 must be the variance alone, also where two frames share a bin.
        let variance: f64 = series
            .iter()
            .map(|values| {
                let mean = values.iter().sum::<f64>() / frames as f64;
                values.iter().map(|it| (it - mean).powi(2)).sum::<f64>()
            })
            .sum();
        let total = (series.len() * frames) as f64;
        if variance.is_nan() || variance <= 0.0 {
            return None;
        }
        let gamma = sums
            .iter()
            .zip(&products)
            .enumerate()
            .map(|(k, (sum, n))| match (k, *n > 0.0) {
                (0, _) => variance / total,
                (_, true) => sum / n,
                (_, false) => 0.0,
            })
            .collect();
        products[0] = total;
        Some(Self {
            gamma,
            products,
            spacing_s,
        })
    }

    /// `1 + 2 sum (1 - k/N) rho_k` over the initial positive sequence; at least 1/N.
    fn inflation(&self, count: f64) -> f64 {
        let mut sum = -1.0;
        for (k, pair) in self.gamma.chunks_exact(2).enumerate() {
            let both = pair[0] + pair[1];
            if both <= 0.0 {
                break;
            }
            let weight = |lag: usize| 1.0 - lag as f64 / count;
            sum += 2.0 * (weight(2 * k) * pair[0] + weight(2 * k + 1) * pair[1]) / self.gamma[0];
        }
        sum.max(1.0 / count)
    }

    /// `1 + 2 sum (1 - k/N) rho_k^2`, what noise adds to a square taken out.
    fn square_inflation(&self, count: f64) -> f64 {
        let mut sum = 1.0;
        for (k, (gamma, products)) in self.gamma.iter().zip(&self.products).enumerate().skip(1) {
            let square = (gamma / self.gamma[0]).powi(2) - 1.0 / products.max(1.0);
            // Two squares in a row no larger than their noise: forgotten.
            if square <= 0.0 && k > 1 {
                break;
            }
            sum += 2.0 * (1.0 - k as f64 / count) * square;
        }
        sum.max(1.0)
    }
}

/// Variance of a frame over the variance of the mean, from the means of `blocks` equal spans of
/// time.
fn batch_count(time_s: &[f64], values: &[f64], blocks: usize) -> Option<f64> {
    if values.len() < 4 * blocks {
        return None;
    }
    let (first, last) = time_s
        .iter()
        .fold((f64::INFINITY, f64::NEG_INFINITY), |(lo, hi), &t| {
            (lo.min(t), hi.max(t))
        });
    let mean = values.iter().sum::<f64>() / values.len() as f64;
    let (mut sums, mut counts) = (vec![0.0; blocks], vec![0.0; blocks]);
    for (&t, &value) in time_s.iter().zip(values) {
        let at = ((t - first) / (last - first) * blocks as f64) as usize;
        sums[at.min(blocks - 1)] += value - mean;
        counts[at.min(blocks - 1)] += 1.0;
    }
    // A block's mean of n frames scatters by Var/n n/n_eff: weighting by n makes unequal blocks
    // alike.
    let used = counts.iter().filter(|it| **it > 0.0).count() as f64;
    if used < 0.8 * blocks as f64 {
        return None;
    }
    let scatter: f64 = sums
        .iter()
        .zip(&counts)
        .filter(|(_, n)| **n > 0.0)
        .map(|(sum, n)| sum * sum / n)
        .sum::<f64>()
        / (used - 1.0);
    let variance =
        values.iter().map(|it| (it - mean).powi(2)).sum::<f64>() / (values.len() as f64 - 1.0);
    (scatter > 0.0).then(|| values.len() as f64 * variance / scatter)
}
