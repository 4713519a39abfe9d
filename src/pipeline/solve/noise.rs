//! The noise of the limb from the data alone: two halves of a sector's pixels see the same air.

use crate::frames::Reader;
use crate::limb::geometry::Annulus;
use crate::limb::{self, Disk, Extraction, Flag, ObservedLimb, SectorLimb};
use crate::pipeline::measure::{MeasuredFrame, MeasuredSequence, predicted};
use ndarray::Array2;

/// Variance of the limb's noise over what photons and read noise let expect.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(in crate::pipeline) struct NoiseRatio {
    /// The ratio of variances.
    pub value: f64,
    /// Its standard uncertainty.
    pub sigma: f64,
}

/// Frames of a sequence that are measured twice.
const FRAMES: usize = 6;
/// Fewest differences that make a ratio.
const LEAST_DIFFERENCES: usize = 60;
/// A difference of more than this many of its expected deviations is a particle or a defect.
const OUTLIER: f64 = 8.0;

/// The ratio for one sequence, from a few of its frames spread over it; none where they cannot be read
/// again or are too few.
pub(super) fn noise_ratio(sequence: &MeasuredSequence) -> Option<NoiseRatio> {
    if sequence.from_table {
        return None;
    }
    let halves = [false, true].map(|odd| sequence.setup.annulus.half(odd));
    let (model, slope) = predicted(&sequence.setup, &sequence.middle);
    let mut reader = Reader::new();
    let mut raw = Array2::zeros((0, 0));
    let count = sequence.frames.len();
    let taken = count.min(FRAMES);
    let mut pairs: Vec<[ObservedLimb; 2]> = Vec::new();
    for k in 0..taken {
        let frame = &sequence.frames[k * count / taken];
        if reader.read(&sequence.list, frame.source, &mut raw).is_err() {
            continue;
        }
        let both = halves
            .each_ref()
            .map(|it| half_limb(it, &raw, sequence, frame, (&model, &slope)));
        if let [Some(even), Some(odd)] = both {
            pairs.push([even, odd]);
        }
    }
    ratio(&pairs, sequence)
}

/// The limb of one half of the pixels.
fn half_limb(
    annulus: &Annulus,
    raw: &Array2<f32>,
    sequence: &MeasuredSequence,
    frame: &MeasuredFrame,
    (model_arcsec, model_slope): (&[f64], &[f64]),
) -> Option<ObservedLimb> {
    let setup = &sequence.setup;
    let good = frame.limb.sectors.iter().find(|it| it.flag == Flag::Good)?;
    let start = Disk {
        x_px: frame.limb.centre_px.0,
        y_px: frame.limb.centre_px.1,
        radius_px: 0.0,
        level_adu: good.gain_adu + good.background_adu,
        sky_adu: good.background_adu,
    };
    let extraction = Extraction {
        table: &setup.table,
        annulus,
        calibration: &setup.calibration,
        detector: setup.detector,
        model_arcsec,
        model_slope,
        blur_start: frame.limb.mean_blur(),
    };
    limb::extract(raw.view(), start, &extraction).ok()
}

/// Scatter in time of the halves' difference over its expectation, all sectors together. What stands
/// still, such as errors of the flat field, goes with the mean over time.
fn ratio(pairs: &[[ObservedLimb; 2]], sequence: &MeasuredSequence) -> Option<NoiseRatio> {
    let (mut seen, mut expected, mut freedom) = (0.0, 0.0, 0.0);
    let sectors = sequence.setup.annulus.sectors();
    for s in 0..sectors {
        if sequence.blemishes[s].is_some() {
            continue;
        }
        let usable = |it: &SectorLimb| it.flag == Flag::Good && it.sigma_arcsec > 0.0;
        let differences: Vec<(f64, f64)> = pairs
            .iter()
            .map(|[a, b]| (&a.sectors[s], &b.sectors[s]))
            .filter(|(a, b)| usable(a) && usable(b))
            .map(|(a, b)| {
                let variance = a.sigma_arcsec.powi(2) + b.sigma_arcsec.powi(2);
                (a.radius_arcsec - b.radius_arcsec, variance)
            })
            .filter(|(d, variance)| d * d < OUTLIER * OUTLIER * variance)
            .collect();
        if differences.len() < 2 {
            continue;
        }
        let n = differences.len() as f64;
        let mean = differences.iter().map(|it| it.0).sum::<f64>() / n;
        seen += differences
            .iter()
            .map(|it| (it.0 - mean).powi(2))
            .sum::<f64>();
        expected += differences.iter().map(|it| it.1).sum::<f64>() * (n - 1.0) / n;
        freedom += n - 1.0;
    }
    if freedom < LEAST_DIFFERENCES as f64 {
        return None;
    }
    // Each half has its own centre: two of all the sectors' freedoms went with it.
    let n = sectors as f64;
    let value = seen / expected * n / (n - 2.0);
    Some(NoiseRatio {
        value,
        sigma: value * (2.0 / freedom).sqrt(),
    })
}
