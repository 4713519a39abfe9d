//! The air out of every frame, and the frame's limb in harmonics.

use super::measure::{MeasuredFrame, MeasuredSequence};
use crate::limb::Flag;
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
        let limb = refraction::remove(&frame.limb, sequence.setup.plate, &frame.moment);
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
    frame
        .limb
        .sectors
        .iter()
        .zip(&sequence.blemishes)
        .map(|(it, blemish)| it.flag == Flag::Good && blemish.is_none())
        .collect()
}
