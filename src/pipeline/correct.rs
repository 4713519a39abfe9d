//! The air out of every frame, and the frame's limb in harmonics.

use super::blemishes::on_marked_sun;
use super::measure::{MeasuredFrame, MeasuredSequence, facing};
use crate::limb::Flag;
use crate::limb::blemish::Blemish;
use crate::limb::harmonics::{Harmonics, Projector};
use crate::refraction::{self, TrueLimb};

/// One frame's limb without the air.
#[derive(Clone, Debug, PartialEq)]
pub struct CorrectedFrame {
    /// Index into the sequence's measured frames.
    pub measured: usize,
    /// Radius by sector.
    pub limb: TrueLimb,
    /// Sectors that went to the harmonics.
    pub usable: Vec<bool>,
    /// Harmonics on the detector, mas at 1 AU, of the radius minus the reference.
    pub harmonics: Harmonics,
    /// Photon-noise variance of one coefficient of each harmonic, mas^2.
    pub noise_mas2: Vec<f64>,
}

/// One sequence's limbs without the air.
#[derive(Clone, Debug, PartialEq)]
pub struct CorrectedSequence {
    /// Index in the session file.
    pub index: usize,
    /// Its frames.
    pub frames: Vec<CorrectedFrame>,
    /// Frames whose limb has too many gaps.
    pub gaps: Vec<usize>,
}

/// Highest harmonic that is worked out.
const HIGHEST: usize = 30;

/// Takes the air out of a sequence's limbs and projects them on harmonics.
pub(super) fn correct(sequence: &MeasuredSequence) -> CorrectedSequence {
    let mut out = CorrectedSequence {
        index: sequence.index,
        frames: Vec::new(),
        gaps: Vec::new(),
    };
    let mut last: Option<(Vec<bool>, Projector)> = None;
    for (k, frame) in sequence.frames.iter().enumerate() {
        let mut limb = refraction::remove(&frame.limb, sequence.setup.plate, &frame.moment);
        let to_mas = 1000.0 * frame.moment.sun.distance_au;
        for (radius, &theta) in limb.radius_mas.iter_mut().zip(&limb.angles_rad) {
            *radius -= to_mas * sequence.axis_blur.shift_arcsec(theta);
        }
        let usable = usable(frame, sequence);
        if last.as_ref().is_none_or(|it| it.0 != usable) {
            let Some(it) = Projector::new(&limb.angles_rad, &usable, HIGHEST) else {
                out.gaps.push(k);
                continue;
            };
            last = Some((usable.clone(), it));
        }
        let Some((_, projector)) = &last else {
            continue;
        };
        let variances: Vec<f64> = limb.sigma_mas.iter().map(|it| it * it).collect();
        out.frames.push(CorrectedFrame {
            measured: k,
            harmonics: projector.apply(&limb.radius_mas),
            noise_mas2: projector.noise(&variances),
            limb,
            usable,
        });
    }
    out
}

fn usable(frame: &MeasuredFrame, sequence: &MeasuredSequence) -> Vec<bool> {
    let facing = facing(&frame.moment);
    // What a run before left out for what it saw in the pixels stays out.
    let saved = sequence.saved_mask.get(frame.frame);
    let left_out = |s: usize| saved.and_then(|it| it.get(s)).is_some_and(|it| *it);
    frame
        .limb
        .sectors
        .iter()
        .zip(&sequence.blemishes)
        .enumerate()
        .map(|(s, (it, blemish))| {
            it.flag == Flag::Good
                && blemish.is_none_or(Blemish::on_the_sun)
                && !on_marked_sun(sequence, facing, s)
                && !left_out(s)
        })
        .collect()
}

/// The same limbs projected with everything that was left out for structure taken in again: only
/// sectors that are not there stay away.
pub(super) fn without_mask(
    sequence: &MeasuredSequence,
    corrected: &CorrectedSequence,
) -> CorrectedSequence {
    let mut out = corrected.clone();
    let mut last: Option<(Vec<bool>, Projector)> = None;
    for it in &mut out.frames {
        let frame = &sequence.frames[it.measured];
        let usable: Vec<bool> = frame
            .limb
            .sectors
            .iter()
            .zip(&sequence.blemishes)
            .map(|(sector, blemish)| {
                sector.flag == Flag::Good && !blemish.is_some_and(Blemish::is_absence)
            })
            .collect();
        if last.as_ref().is_none_or(|known| known.0 != usable) {
            last = Projector::new(&it.limb.angles_rad, &usable, HIGHEST)
                .map(|projector| (usable.clone(), projector));
        }
        let Some((_, projector)) = &last else {
            continue;
        };
        let variances: Vec<f64> = it.limb.sigma_mas.iter().map(|it| it * it).collect();
        it.harmonics = projector.apply(&it.limb.radius_mas);
        it.noise_mas2 = projector.noise(&variances);
        it.usable = usable;
    }
    out
}
