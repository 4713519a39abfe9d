//! Whether the shape runs with the kept fraction, tested against zero.
//!
//! # Model
//!
//! ```text
//! slope = sum_f w_f (f - f_mean) q_f / sum_f w_f (f - f_mean)^2          w_f = f
//! var   = sum_s G_s / (G_s - 1) sum_g (U_sg - mean_g U_sg)^2
//! U_sg  = sum of all that the frames of group g of sequence s add to the slope
//! ```
//!
//! What a frame adds is its gain in the fit times its deviation from the mean of all usable frames about
//! it: the mean of a few kept ones would follow them. `q_f` is the oblateness or the radius fitted to the kept fraction `f`. Every fit is linear in its
//! frames, so the slope is a sum over frames as well: a frame that several fractions share enters
//! once, with all that it does to each of them. Frames are summed by groups of neighbours in time, so
//! that their correlation is in the scatter of the groups.
//!
//! # Valid for
//!
//! Fractions that leave at least [`LEAST_FRAMES`] frames in every sequence.
//!
//! # Accuracy
//!
//! Pulls of unit width for frames correlated over a few neighbours (test below); the tilted layers and
//! the weather act on all fractions alike and cancel.
//!
//! # Source
//!
//! Infinitesimal jackknife by groups: B. Efron, "The Jackknife, the Bootstrap and Other Resampling
//! Plans", SIAM (1982), chapter 6.

use crate::result::record::{KeptSlope, SlopeTest};
use crate::shape::{Block, COMPONENTS, Fit, Observation};
use statrs::distribution::{ContinuousCDF, StudentsT};

/// Frames that a fraction must leave in every sequence.
const LEAST_FRAMES: usize = 8;

/// Groups of a sequence in time, at the most.
const GROUPS: usize = 8;

/// Frames of a group, at the least.
const LEAST_IN_GROUP: usize = 5;

/// The fit to one kept fraction.
#[derive(Debug)]
pub(super) struct FractionFit {
    /// Kept share of the usable frames.
    pub fraction: f64,
    /// Its frames, as indices of the usable ones, in the order of the fit's observations.
    pub frames: Vec<usize>,
    /// Those observations.
    pub observations: Vec<Observation>,
    /// The blocks they were fitted in.
    pub blocks: Vec<Block>,
    /// What came out.
    pub fit: Fit,
    /// Whether the oblateness was separated.
    pub separated: bool,
}

/// The slopes of radius and oblateness against the kept fraction, with what chance makes of them.
pub(super) fn slope(all: &[Observation], fits: &[FractionFit]) -> KeptSlope {
    let groups = Groups::new(all);
    let enough: Vec<&FractionFit> = fits.iter().filter(|it| groups.enough(it, all)).collect();
    if enough.len() < 3 {
        return KeptSlope {
            reason: Some(format!(
                "fewer than three kept fractions leave {LEAST_FRAMES} frames in every sequence"
            )),
            ..KeptSlope::default()
        };
    }
    let separated = enough.iter().all(|it| it.separated);
    KeptSlope {
        radius: test(&groups, all, &enough, 0),
        oblateness: separated.then(|| test(&groups, all, &enough, 1)).flatten(),
        fractions: enough.iter().map(|it| it.fraction).collect(),
        reason: (!separated).then(|| "the oblateness is not separated".to_owned()),
    }
}

/// Which group of neighbours in time every usable frame is of.
struct Groups {
    /// Group of each frame.
    of: Vec<usize>,
    /// First group of each sequence, and one behind the last.
    sequences: Vec<(usize, usize)>,
}

impl Groups {
    fn new(all: &[Observation]) -> Self {
        let mut of = Vec::with_capacity(all.len());
        let mut sequences = Vec::new();
        let mut first = 0;
        for run in all.chunk_by(|a, b| a.sequence == b.sequence) {
            let count = (run.len() / LEAST_IN_GROUP).clamp(2, GROUPS);
            of.extend((0..run.len()).map(|k| first + k * count / run.len()));
            sequences.push((first, first + count));
            first += count;
        }
        Self { of, sequences }
    }

    fn enough(&self, it: &FractionFit, all: &[Observation]) -> bool {
        let mut kept = vec![0; self.sequences.len()];
        let places: Vec<usize> = all
            .chunk_by(|a, b| a.sequence == b.sequence)
            .enumerate()
            .flat_map(|(s, run)| std::iter::repeat_n(s, run.len()))
            .collect();
        for &k in &it.frames {
            kept[places[k]] += 1;
        }
        kept.iter().all(|it| *it >= LEAST_FRAMES)
    }

    fn count(&self) -> usize {
        self.sequences.last().map_or(0, |it| it.1)
    }

    /// Variance of a sum from what the groups add to it, and its degrees of freedom.
    fn variance(&self, adds: &[f64]) -> (f64, f64) {
        let (mut variance, mut degrees) = (0.0, 0.0);
        for &(from, to) in &self.sequences {
            let n = (to - from) as f64;
            let mean = adds[from..to].iter().sum::<f64>() / n;
            let squares: f64 = adds[from..to].iter().map(|it| (it - mean).powi(2)).sum();
            variance += n / (n - 1.0) * squares;
            degrees += n - 1.0;
        }
        (variance, degrees)
    }
}

/// Deviations of all frames from the means of the fit to the largest fraction.
fn deviations(all: &[Observation], largest: &FractionFit) -> Vec<[f64; COMPONENTS]> {
    let mut out = vec![[0.0; COMPONENTS]; all.len()];
    for block in &largest.blocks {
        for &k in &block.frames {
            let own = largest.frames[k];
            out[own] = std::array::from_fn(|c| all[own].harmonics_mas[c] - block.mean_mas[c]);
        }
    }
    out
}

/// The slope of the radius (`quantity` 0) or the oblateness (1).
fn test(
    groups: &Groups,
    all: &[Observation],
    fits: &[&FractionFit],
    quantity: usize,
) -> Option<SlopeTest> {
    let total: f64 = fits.iter().map(|it| it.fraction).sum();
    let mean = fits.iter().map(|it| it.fraction.powi(2)).sum::<f64>() / total;
    let spread: f64 = fits
        .iter()
        .map(|it| it.fraction * (it.fraction - mean).powi(2))
        .sum();
    let deviations = deviations(all, fits.first()?);
    let mut slope = 0.0;
    let mut adds = vec![0.0; groups.count()];
    for it in fits {
        let share = it.fraction * (it.fraction - mean) / spread;
        slope += share
            * if quantity == 0 {
                it.fit.values[0]
            } else {
                it.fit.oblateness_mas()
            };
        for (block, gain) in it.blocks.iter().zip(&it.fit.gain[quantity]) {
            let weight: f64 = block
                .frames
                .iter()
                .map(|&k| it.observations[k].weight)
                .sum();
            for &k in &block.frames {
                let own = it.frames[k];
                let add: f64 = (0..COMPONENTS).map(|c| gain[c] * deviations[own][c]).sum();
                adds[groups.of[own]] += share * all[own].weight / weight * add;
            }
        }
    }
    let (variance, degrees) = groups.variance(&adds);
    let sigma = variance.sqrt();
    let pull = slope / sigma;
    if !(pull.is_finite() && degrees >= 1.0) {
        return None;
    }
    let chance = StudentsT::new(0.0, 1.0, degrees)
        .map(|it| 2.0 * it.cdf(-pull.abs()))
        .ok()?;
    Some(SlopeTest {
        slope_mas: slope,
        sigma_mas: sigma,
        pull,
        chance,
        degrees,
    })
}

#[cfg(test)]
mod tests {
    use super::super::shape::{FRACTIONS, fraction_fit};
    use super::*;
    use crate::select::Candidate;
    use crate::shape::{AirResponse, Known};
    use rand::{RngExt, SeedableRng};
    use rand_chacha::ChaCha8Rng;
    use rand_distr::{Distribution, StandardNormal};

    const SEQUENCES: usize = 4;
    const FRAMES: usize = 120;

    fn known() -> Known {
        Known {
            refractivity: Vec::new(),
            vertical_sigma_mas: 0.1,
            camera_angle_sigma_rad: 5e-4,
            scale_sigma_rel: 2e-4,
            clock_sigma_s: 0.0,
            vertical_direction_sigma_arcmin: 0.0,
            tilt_sigma_arcmin: 0.0,
            tilt_tau_s: 1800.0,
            distortion_sigma_mas: None,
            drivers: Vec::new(),
        }
    }

    /// Four rolls of frames whose harmonics are correlated from frame to frame, a blur that knows
    /// nothing of them, and `by_blur` mas of oblateness for each unit of the blur.
    fn session(seed: u64, by_blur: f64) -> (Vec<Observation>, Vec<Candidate>) {
        let mut rng = ChaCha8Rng::seed_from_u64(seed);
        let mut observations = Vec::new();
        let mut candidates = Vec::new();
        for sequence in 0..SEQUENCES {
            let axis_rad = 0.3 + sequence as f64 * std::f64::consts::FRAC_PI_4;
            let mut state = [0.0; COMPONENTS];
            let mut blur: f64 = 0.0;
            for k in 0..FRAMES {
                let mut normal = || -> f64 { StandardNormal.sample(&mut rng) };
                for it in &mut state {
                    *it = 0.5 * *it + 0.75_f64.sqrt() * 150.0 * normal();
                }
                blur = 0.7 * blur + 0.51_f64.sqrt() * normal();
                let sun = crate::shape::sun_columns(0.05, axis_rad)[1];
                observations.push(Observation {
                    sequence,
                    time_s: 1000.0 * sequence as f64 + 0.7 * k as f64,
                    axis_rad,
                    zenith_rad: 0.9,
                    b0_rad: 0.05,
                    weight: 0.5 + rng.random::<f64>(),
                    harmonics_mas: std::array::from_fn(|c| {
                        state[c] + (8.0 + by_blur * blur) * sun[c]
                    }),
                    noise_mas2: [4.0; COMPONENTS],
                    air: AirResponse::default(),
                });
                candidates.push(Candidate {
                    sequence,
                    blur,
                    high_power: Vec::new(),
                });
            }
        }
        (observations, candidates)
    }

    fn found(seed: u64, by_blur: f64) -> KeptSlope {
        let (observations, candidates) = session(seed, by_blur);
        let fits: Vec<FractionFit> = FRACTIONS
            .iter()
            .filter_map(|&it| fraction_fit(&observations, &candidates, it, &known()).ok())
            .collect();
        slope(&observations, &fits)
    }

    /// Source: the definition of a pull. 200 sessions: their root mean square is known to 5 percent.
    #[test]
    fn without_a_cause_the_pulls_have_unit_width() {
        let sessions = 200;
        let mut squares = [0.0; 2];
        let mut far = 0;
        for seed in 0..sessions {
            let it = found(seed, 0.0);
            let (radius, oblateness) = (it.radius.unwrap(), it.oblateness.unwrap());
            squares[0] += radius.pull.powi(2);
            squares[1] += oblateness.pull.powi(2);
            far += usize::from(oblateness.chance < 0.05);
        }
        for it in squares {
            let width = (it / sessions as f64).sqrt();
            assert!((0.85..1.15).contains(&width), "pulls of width {width}");
        }
        assert!(far <= 20, "{far} of {sessions} below 5 percent");
    }

    #[test]
    fn a_shape_that_runs_with_the_blur_is_found() {
        let it = found(3, 120.0).oblateness.unwrap();
        assert!(it.pull > 4.0 && it.chance < 1e-3, "{it:?}");
    }

    #[test]
    fn few_frames_have_a_reason_and_no_slope() {
        let (observations, candidates) = session(1, 0.0);
        let few: Vec<usize> = (0..observations.len()).filter(|k| k % 12 == 0).collect();
        let observations: Vec<_> = few.iter().map(|&k| observations[k]).collect();
        let candidates: Vec<_> = few.iter().map(|&k| candidates[k].clone()).collect();
        let fits: Vec<FractionFit> = FRACTIONS
            .iter()
            .filter_map(|&it| fraction_fit(&observations, &candidates, it, &known()).ok())
            .collect();
        let it = slope(&observations, &fits);
        assert!(it.radius.is_none() && it.reason.is_some());
    }
}
