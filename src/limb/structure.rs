//! Structure at the limb by its brightness: spots, faculae, dust, in the residuals of many frames.
//!
//! # Model
//!
//! A map of residuals ([`super::residual`]) is compared with its own running median along the limb, ring
//! by ring and over all rings, bin by bin and over three bins together; what stands out by more than a
//! number of robust standard deviations of the same map is structure. Of several sequences the median
//! map counts: about the Sun's angle it holds what stays on the Sun while the camera is turned, about
//! the detector's what stays on the detector. Where the limb is does not enter.
//!
//! # Valid for
//!
//! Structure narrower than 12 degrees along the limb, over less than a third of it.
//!
//! # Accuracy
//!
//! 200 clean limbs of photon noise lose four bins at most (tests below); faculae of 5 percent and 4 arcsec
//! are found in ten frames at each of four orientations (`tests/published/limb_structure.rs`).
//!
//! # Source
//!
//! Running medians and median absolute deviations; common practice, no source.

use super::blemish::median;
use super::residual::{RINGS, ResidualMap};

/// Robust standard deviations beyond which a bin stands out.
const SIGMAS: f64 = 5.5;

/// Least mean contrast that counts, in units of the disk's centre.
const SMALLEST: f64 = 0.003;

/// Half width of the running median, as a share of the limb.
const RUNNING_SHARE: f64 = 0.035;

/// Bins taken together, beside each alone.
const TOGETHER: usize = 3;

/// A run of bins that stands out.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Structure {
    /// First bin.
    pub first: usize,
    /// Bins, from the first in the sense of growing angle.
    pub bins: usize,
    /// Bin in which it stands out most.
    pub peak: usize,
    /// Ring in which it does; [`RINGS`] for their mean.
    pub ring: usize,
    /// Bins about the peak that do together.
    pub together: usize,
    /// Contrast where it is greatest, in units of the disk's centre: a lower limit for strong ones.
    pub contrast: f64,
    /// Robust standard deviations there.
    pub sigmas: f64,
}

impl Structure {
    /// Whether it holds a bin of a turn of so many.
    pub fn holds(&self, bin: usize, bins: usize) -> bool {
        (bin + bins - self.first) % bins < self.bins
    }
}

/// Median of several maps, cell by cell; of two their mean.
pub fn combined(maps: &[ResidualMap]) -> ResidualMap {
    let bins = maps.first().map_or(0, |it| it.mean.len());
    ResidualMap {
        mean: (0..bins)
            .map(|bin| {
                std::array::from_fn(|ring| {
                    median(
                        maps.iter()
                            .map(|it| it.mean[bin][ring])
                            .filter(|it| it.is_finite()),
                    )
                })
            })
            .collect(),
    }
}

/// Mean of several maps, cell by cell.
pub fn mean(maps: &[ResidualMap]) -> ResidualMap {
    let bins = maps.first().map_or(0, |it| it.mean.len());
    ResidualMap {
        mean: (0..bins)
            .map(|bin| {
                std::array::from_fn(|ring| {
                    let (sum, n) = maps
                        .iter()
                        .map(|it| it.mean[bin][ring])
                        .filter(|it| it.is_finite())
                        .fold((0.0, 0.0), |(sum, n), it| (sum + it, n + 1.0));
                    sum / n
                })
            })
            .collect(),
    }
}

/// A map with the running median along the limb taken off, ring by ring.
pub fn flattened(map: &ResidualMap) -> ResidualMap {
    let columns = columns(map);
    ResidualMap {
        mean: (0..map.mean.len())
            .map(|bin| std::array::from_fn(|ring| columns[ring][bin]))
            .collect(),
    }
}

/// The contrast of a flattened map where, and as, a structure stands out most.
pub fn contrast(map: &ResidualMap, at: &Structure) -> f64 {
    let count = map.mean.len();
    let cell = |bin: usize| match map.mean[bin].get(at.ring) {
        Some(&it) => it,
        None => map.mean[bin].iter().sum::<f64>() / RINGS as f64,
    };
    let boxed = (0..at.together).map(|k| cell((at.peak + count + k - at.together / 2) % count));
    boxed.sum::<f64>() / at.together as f64
}

/// The rings less their running medians, and their mean.
fn columns(map: &ResidualMap) -> Vec<Vec<f64>> {
    let mut columns: Vec<Vec<f64>> = (0..RINGS)
        .map(|ring| less_running(&map.mean.iter().map(|it| it[ring]).collect::<Vec<_>>()))
        .collect();
    let all = (0..map.mean.len())
        .map(|bin| columns.iter().map(|it| it[bin]).sum::<f64>() / RINGS as f64)
        .collect();
    columns.push(all);
    columns
}

fn less_running(values: &[f64]) -> Vec<f64> {
    let count = values.len();
    let half = ((count as f64 * RUNNING_SHARE) as usize).max(3);
    (0..count)
        .map(|bin| {
            let around = (0..=2 * half)
                .map(|k| values[(bin + count + k - half) % count])
                .filter(|it| it.is_finite());
            values[bin] - median(around)
        })
        .collect()
}

/// The look in which a bin stands out most.
#[derive(Clone, Copy, Debug, Default)]
struct Look {
    contrast: f64,
    sigmas: f64,
    ring: usize,
    together: usize,
}

/// Finds the structure in a map, in the order of the angle.
pub fn find(map: &ResidualMap) -> Vec<Structure> {
    let count = map.mean.len();
    let mut best = vec![Look::default(); count];
    for (ring, column) in columns(map).into_iter().enumerate() {
        for together in [1, TOGETHER] {
            let boxed: Vec<f64> = (0..count)
                .map(|bin| {
                    let sum: f64 = (0..together)
                        .map(|k| column[(bin + count + k - together / 2) % count])
                        .sum();
                    sum / together as f64
                })
                .collect();
            let known = boxed.iter().filter(|it| it.is_finite());
            let sigma = 1.4826 * median(known.map(|it| it.abs()));
            for (look, &contrast) in best.iter_mut().zip(&boxed) {
                let sigmas = (contrast / sigma).abs();
                if sigmas > SIGMAS && contrast.abs() > SMALLEST && sigmas > look.sigmas {
                    *look = Look {
                        contrast,
                        sigmas,
                        ring,
                        together,
                    };
                }
            }
        }
    }
    runs(&best)
}

/// Runs of bins that stand out in one sense, the turn closed.
fn runs(best: &[Look]) -> Vec<Structure> {
    let count = best.len();
    let mut out: Vec<Structure> = Vec::new();
    for (bin, look) in best.iter().enumerate().filter(|it| it.1.sigmas > 0.0) {
        let alone = Structure {
            first: bin,
            bins: 1,
            peak: bin,
            ring: look.ring,
            together: look.together,
            contrast: look.contrast,
            sigmas: look.sigmas,
        };
        match out.last_mut() {
            Some(it) if it.first + it.bins == bin && it.contrast * look.contrast > 0.0 => {
                *it = joined(it, &alone);
            }
            _ => out.push(alone),
        }
    }
    if let [first, .., last] = out[..]
        && first.first == 0
        && last.first + last.bins == count
        && first.contrast * last.contrast > 0.0
    {
        out.remove(0);
        out.pop();
        out.push(joined(&last, &first));
    }
    out
}

/// Two neighbouring runs as one.
fn joined(before: &Structure, after: &Structure) -> Structure {
    let strongest = if after.sigmas > before.sigmas {
        after
    } else {
        before
    };
    Structure {
        first: before.first,
        bins: before.bins + after.bins,
        ..*strongest
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use rand::SeedableRng;
    use rand_chacha::ChaCha12Rng;
    use rand_distr::{Distribution, StandardNormal};

    const BINS: usize = 480;

    fn noise(seed: u64) -> ResidualMap {
        let mut rng = ChaCha12Rng::seed_from_u64(seed);
        let mut draw = || -> f64 { StandardNormal.sample(&mut rng) };
        ResidualMap {
            // A slow wave of 2 percent, as an uneven flat leaves.
            mean: (0..BINS)
                .map(|bin| {
                    let wave = 0.02 * (std::f64::consts::TAU * bin as f64 / BINS as f64).sin();
                    std::array::from_fn(|_| wave + 0.002 * draw())
                })
                .collect(),
        }
    }

    fn with(mut map: ResidualMap, bins: &[usize], contrast: f64) -> ResidualMap {
        for &bin in bins {
            for it in &mut map.mean[bin] {
                *it += contrast;
            }
        }
        map
    }

    /// 200 limbs of 480 bins, 10 looks at each: with normal noise 0.6 false alarms are expected.
    #[test]
    fn a_clean_limb_loses_next_to_nothing() {
        let lost: usize = (0..200).map(|seed| find(&noise(seed)).len()).sum();
        assert!(lost <= 4, "{lost} false alarms on 200 clean limbs");
    }

    #[test]
    fn faculae_and_spots_are_found_across_the_end_of_the_turn() {
        let map = with(noise(1), &[BINS - 1, 0, 1], 0.02);
        let map = with(map, &[200], -0.05);
        let found = find(&map);
        assert_eq!(found.len(), 2, "{found:?}");
        assert!(found[0].holds(200, BINS) && found[0].bins <= 3);
        assert!(found[0].contrast < 0.0);
        assert!((BINS - 2..BINS).contains(&found[1].first));
        assert!((3..=5).contains(&found[1].bins));
        assert!(found[1].holds(0, BINS) && !found[1].holds(100, BINS));
    }

    #[test]
    fn what_only_a_few_sequences_show_is_not_in_the_median() {
        let maps: Vec<ResidualMap> = (0..8)
            .map(|q| {
                let map = with(noise(q), &[300, 301], 0.02);
                if q % 4 == 0 {
                    with(map, &[100], -0.1)
                } else {
                    map
                }
            })
            .collect();
        let found = find(&combined(&maps));
        assert_eq!(found.len(), 1, "{found:?}");
        assert!(found[0].holds(300, BINS));
    }
}
