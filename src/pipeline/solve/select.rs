//! The frames that go to the shape, weighed.

use crate::pipeline::correct::CorrectedSequence;
use crate::pipeline::measure::MeasuredSequence;
use crate::select::{Candidate, FIRST_JUDGING, weights};
use crate::shape::{LARGEST_ZENITH_DEG, Observation, ShapeError};

/// The frames that go to the shape, with weights from the seeing.
#[derive(Clone, Debug)]
pub(in crate::pipeline) struct Selected {
    /// All usable frames.
    pub observations: Vec<Observation>,
    /// Which sequence (by position) and corrected frame each is.
    pub origin: Vec<(usize, usize)>,
    /// What selection saw of them.
    pub candidates: Vec<Candidate>,
}

/// Weighs every usable frame of the sequences that go to the shape.
///
/// # Errors
///
/// When the Sun stood too low in all of them.
pub(in crate::pipeline) fn select(
    measured: &[MeasuredSequence],
    limbs: &[CorrectedSequence],
) -> Result<Selected, ShapeError> {
    if measured.iter().all(|it| it.set_aside.is_some()) {
        let highest_deg = measured
            .iter()
            .map(|it| it.middle.sun.zenith_true_rad.to_degrees())
            .fold(f64::INFINITY, |a, b| if b < a { b } else { a });
        return Err(ShapeError::TooLow {
            limit_deg: LARGEST_ZENITH_DEG,
            highest_deg,
        });
    }
    let start = measured[0].frames[0].utc;
    let mut out = Selected {
        observations: Vec::new(),
        origin: Vec::new(),
        candidates: Vec::new(),
    };
    for (position, (sequence, corrected)) in measured.iter().zip(limbs).enumerate() {
        if sequence.set_aside.is_some() {
            continue;
        }
        for (k, it) in corrected.frames.iter().enumerate() {
            let frame = &sequence.frames[it.measured];
            out.candidates.push(Candidate {
                sequence: sequence.index,
                blur: frame.limb.mean_blur(),
                high_power: (FIRST_JUDGING..it.harmonics.cos.len())
                    .map(|m| {
                        0.5 * (it.harmonics.cos[m].powi(2) + it.harmonics.sin[m].powi(2))
                            - it.noise_mas2[m]
                    })
                    .collect(),
            });
            let (axis_rad, zenith_rad) = frame.moment.axis_and_zenith_rad();
            let (c, s, n) = (&it.harmonics.cos, &it.harmonics.sin, &it.noise_mas2);
            out.observations.push(Observation {
                sequence: sequence.index,
                time_s: frame.utc.minus(start),
                axis_rad,
                zenith_rad,
                b0_rad: frame.moment.sun.b0_rad,
                weight: 1.0,
                harmonics_mas: [c[0], c[2], s[2], c[3], s[3], c[4], s[4]],
                noise_mas2: [n[0], n[2], n[2], n[3], n[3], n[4], n[4]],
                air: frame.air,
            });
            out.origin.push((position, k));
        }
    }
    for (it, weight) in out.observations.iter_mut().zip(weights(&out.candidates)) {
        it.weight = weight;
    }
    Ok(out)
}
