//! The floor that turbulence sets to every harmonic, predicted from the seeing and as observed.

use super::seeing::Series;
use super::zenith_factor;
use crate::pipeline::measure::MeasuredSequence;
use crate::seeing::{
    MotionSeeing, Setup, View, effective_count, floor_correlation_time_s, floor_variance_mas2,
    harmonic_power,
};
use crate::turbulence::Tilt;

/// Highest harmonic whose floor is given.
const HIGHEST: usize = 8;

/// One harmonic's floor: of a frame, and of the mean over a sequence. Standard deviations of one
/// coefficient, mas at 1 AU.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(in crate::pipeline) struct HarmonicFloor {
    /// Harmonic.
    pub m: usize,
    /// Of a frame, predicted.
    pub frame_predicted_mas: f64,
    /// Of a frame, observed, noise taken off.
    pub frame_observed_mas: f64,
    /// Relative standard deviation of the observed.
    pub frame_relative_sigma: f64,
    /// Mean length of the sequences.
    pub time_s: f64,
    /// Correlation time, predicted.
    pub correlation_time_s: f64,
    /// Of a sequence's mean, predicted.
    pub mean_predicted_mas: f64,
    /// Of a sequence's mean, observed from blocks within it, noise taken off, with its relative standard
    /// deviation; none where the sequences are too short for blocks.
    pub mean_observed: Option<(f64, f64)>,
}

/// Sums over sequences.
#[derive(Clone, Copy, Default)]
struct Sum {
    frames: f64,
    predicted: f64,
    observed: f64,
    spread: f64,
    time: f64,
    correlation: f64,
    sequences: f64,
    mean_predicted: f64,
    blocks: f64,
    block_predicted: f64,
    block_observed: f64,
    block_noise: f64,
}

/// Floors of the harmonics m = 0 and m >= 2, over the sequences that the motion was taken from;
/// `wind_m_s` of each.
pub(super) fn floors(
    motion: &MotionSeeing,
    setup: &Setup,
    sequences: &[(&Series, &MeasuredSequence)],
    wind_m_s: f64,
) -> Result<Vec<HarmonicFloor>, String> {
    let mut sums = [Sum::default(); HIGHEST + 1];
    let tilt = Tilt::Between {
        zernike_share: setup.zernike_share,
    };
    for (&(series, m), own) in sequences.iter().zip(&motion.sequences) {
        let seen = series.as_seen(m);
        let view = View {
            zenith_rad: seen.zenith_rad,
            limb_radius_rad: seen.limb_radius_rad,
            sector_rad: seen.sector_rad,
            drift_m: wind_m_s * seen.exposure_s,
        };
        // The profile is the session's; each sequence has its own strength.
        let zenith_m = own.r0_los_500nm_m * zenith_factor(m);
        let strength = (zenith_m / motion.r0_zenith_500nm_m).powf(-5.0 / 3.0);
        let au2 = m.middle.sun.distance_au.powi(2);
        let say = |it: &dyn std::fmt::Display| it.to_string();
        let profile = &motion.profile;
        let predicted = floor_variance_mas2(profile, &setup.aperture, tilt, &view, HIGHEST)
            .map_err(|it| say(&it))?;
        let correlation =
            floor_correlation_time_s(profile, &setup.aperture, tilt, &view, wind_m_s, HIGHEST)
                .map_err(|it| say(&it))?;
        let power = harmonic_power(0, &seen).map_err(|it| say(&it))?;
        let n = seen.time_s.len() as f64;
        let duration_s = (seen.time_s[seen.time_s.len() - 1] - seen.time_s[0]) * n / (n - 1.0);
        for (order, sum) in sums.iter_mut().enumerate() {
            if order == 1 || order >= power.power_mas2.len() {
                continue;
            }
            let frame = predicted[order] * strength * au2;
            let noise = seen.noise_variance_mas2[order] * au2;
            sum.frames += n;
            sum.predicted += n * frame;
            sum.observed += n * (power.power_mas2[order] * au2 - noise);
            let freedom = power.degrees_of_freedom[order];
            sum.spread += 2.0 / freedom * (n * power.power_mas2[order] * au2).powi(2);
            let memory = correlation[order] / duration_s;
            let independent = if memory > 1.0 / n { memory } else { 1.0 / n };
            sum.time += duration_s;
            sum.correlation += correlation[order];
            sum.sequences += 1.0;
            sum.mean_predicted += frame * independent;
            for table in [seen.cos_mas, seen.sin_mas]
                .iter()
                .take(if order == 0 { 1 } else { 2 })
            {
                let values = table.column(order).to_vec();
                let by_blocks = effective_count(seen.time_s, &values).and_then(|it| it.by_batches);
                if let Some(count) = by_blocks {
                    let mean = values.iter().sum::<f64>() / n;
                    let scatter =
                        values.iter().map(|it| (it - mean).powi(2)).sum::<f64>() / (n - 1.0);
                    sum.block_observed += scatter / count * au2;
                    sum.block_noise += noise / n;
                    sum.block_predicted += frame * independent;
                    sum.blocks += 1.0;
                }
            }
        }
    }
    let floor = |(m, it): (usize, &Sum)| {
        let observed = it.observed / it.frames;
        let relative = 0.5 * it.spread.sqrt() / it.observed.abs();
        HarmonicFloor {
            m,
            frame_predicted_mas: (it.predicted / it.frames).sqrt(),
            frame_observed_mas: root(observed),
            frame_relative_sigma: relative,
            time_s: it.time / it.sequences,
            correlation_time_s: it.correlation / it.sequences,
            mean_predicted_mas: (it.mean_predicted / it.sequences).sqrt(),
            mean_observed: (it.blocks > 0.0).then(|| {
                let excess = (it.block_observed - it.block_noise) / it.block_predicted;
                let mean = it.mean_predicted / it.sequences;
                // Ten blocks leave nine degrees of freedom to each coefficient of each sequence.
                let relative = (2.0 * 9.0 * it.blocks).sqrt().recip();
                (root(excess * mean), relative)
            }),
        }
    };
    Ok(sums
        .iter()
        .enumerate()
        .filter(|(_, it)| it.frames > 0.0)
        .map(floor)
        .collect())
}

fn root(variance: f64) -> f64 {
    if variance > 0.0 { variance.sqrt() } else { 0.0 }
}

/// A word where the mean of a sequence scatters more than frozen flow says.
pub(super) fn slow_air(floors: &[HarmonicFloor]) -> Option<String> {
    let it = floors.iter().find(|it| it.m == 2)?;
    let (observed, relative) = it.mean_observed?;
    let ratio = observed / it.mean_predicted_mas;
    (ratio * (1.0 - 3.0 * relative) > 1.1).then(|| {
        format!(
            "the air was slower than frozen flow: the mean of m = 2 over {:.0} s scatters by {observed:.1} mas where {:.1} mas are predicted ({ratio:.2} +- {:.2} times); more frames at this rate lower the error less than their number says",
            it.time_s,
            it.mean_predicted_mas,
            ratio * relative
        )
    })
}
