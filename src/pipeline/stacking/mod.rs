//! The kept frames stacked by sequence, the stacks' limbs, and the shape by that route.

mod limb;
mod sharpness;
mod twin;

use super::Error;
use super::Progress;
use super::correct::CorrectedSequence;
use super::measure::{MeasuredFrame, MeasuredSequence};
use super::solve::{Selected, Shape};
use crate::calibrate;
use crate::frames::Reader;
use crate::result::record::StackSharpness;
use crate::shape::{self, Block, COMPONENTS, Fit, Known, Observation};
use crate::stack::{Placed, Stack};
use crate::units::ARCSEC_RAD;
use limb::Ruler;
use ndarray::Array2;
use sharpness::Energies;
use twin::Maker;

/// The stacks of a session.
#[derive(Clone, Debug)]
pub(super) struct Stacks {
    /// The limbs of all stacks, in order of time, or why there are none.
    limbs: Result<Vec<StackLimb>, String>,
    /// All kept frames.
    pub whole: Option<Stack>,
    /// How much sharper the stacks are than the mean of the frames.
    pub sharpness: Option<StackSharpness>,
}

/// The limb of one stack.
#[derive(Clone, Debug)]
struct StackLimb {
    /// Its harmonics, mean moment and weight.
    observation: Observation,
    /// What stacking had added to the harmonics, taken off, mas at 1 AU.
    removed_mas: [f64; COMPONENTS],
}

/// Stacks of a sequence by time, at the most.
const PARTS: usize = 6;

/// Frames of a stack, at the least.
const LEAST_IN_PART: usize = 5;

/// Stacks of every sequence from which their own scatter is the error.
const PARTS_FOR_ERROR: usize = 3;

/// Frames of a sequence that go to its twins, at the most.
const TWIN_FRAMES: usize = 48;

impl Stacks {
    /// No stack was asked for.
    pub(super) fn none() -> Self {
        Self {
            limbs: Ok(Vec::new()),
            whole: None,
            sharpness: None,
        }
    }

    /// How many stacks have a limb.
    pub(super) fn count(&self) -> usize {
        self.limbs.as_ref().map_or(0, Vec::len)
    }

    /// What was taken off radius and oblateness by a fit to the stacks' limbs, mas.
    pub(super) fn removed_mas(&self, fit: &Fit, blocks: &[Block]) -> Option<[f64; 2]> {
        let limbs = self.limbs.as_ref().ok()?;
        let total = |b: &Block| {
            b.frames
                .iter()
                .map(|&k| limbs[k].observation.weight)
                .sum::<f64>()
        };
        Some([0, 1].map(|q| {
            let by_block = blocks.iter().zip(&fit.gain[q]).map(|(block, gain)| {
                let of = |&k: &usize| -> f64 {
                    let it = &limbs[k];
                    let answer: f64 = (0..COMPONENTS).map(|c| gain[c] * it.removed_mas[c]).sum();
                    it.observation.weight * answer
                };
                block.frames.iter().map(of).sum::<f64>() / total(block)
            });
            by_block.sum()
        }))
    }
}

/// One sequence with all that is known of its frames.
#[derive(Clone, Copy, Debug)]
struct Work<'a> {
    sequence: &'a MeasuredSequence,
    limbs: &'a CorrectedSequence,
    selected: &'a Selected,
}

impl<'a> Work<'a> {
    /// The measured frame of a usable one.
    fn frame(&self, k: usize) -> &'a MeasuredFrame {
        &self.sequence.frames[self.limbs.frames[self.selected.origin[k].1].measured]
    }
}

/// Stacks the kept frames in a second pass, one frame in memory at a time: a few stacks of every
/// sequence by time, whose limbs are measured at once, and their sum.
///
/// # Errors
///
/// When a frame that was read once cannot be read again.
pub(super) fn combine(
    measured: &[MeasuredSequence],
    limbs: &[CorrectedSequence],
    selected: &Selected,
    kept: &[bool],
    blur: f64,
    progress: &dyn Progress,
) -> Result<Stacks, Error> {
    let radius_arcsec = measured
        .iter()
        .map(apparent_radius_arcsec)
        .fold(0.0, |a: f64, b| if b > a { b } else { a });
    progress.stage("stack", kept.iter().filter(|it| **it).count() as u64);
    let mut whole: Option<Stack> = None;
    let mut energies = Energies::default();
    let mut found = Ok(Vec::new());
    for (position, sequence) in measured.iter().enumerate() {
        let usable: Vec<usize> = (0..kept.len())
            .filter(|&k| selected.origin[k].0 == position)
            .collect();
        let chosen: Vec<usize> = usable.iter().copied().filter(|&k| kept[k]).collect();
        if chosen.is_empty() {
            continue;
        }
        let work = Work {
            sequence,
            limbs: &limbs[position],
            selected,
        };
        let scale = sequence.setup.scale_arcsec_px;
        let maker = Maker::new(sequence, 4.0 * scale);
        let every = chosen.len().div_ceil(TWIN_FRAMES);
        let count = (chosen.len() / LEAST_IN_PART).clamp(1, PARTS);
        for p in 0..count {
            let part = &chosen[p * chosen.len() / count..(p + 1) * chosen.len() / count];
            let stack = of_frames(&work, part, Stack::new(radius_arcsec, scale), progress)?;
            match &mut whole {
                Some(sum) => sum.merge(&stack),
                None => whole = Some(stack.clone()),
            }
            let stack = stack.into_means();
            let some: Vec<usize> = part.iter().copied().step_by(every).collect();
            let lit = (
                sequence.setup.window_arcsec.0 + 2.0 * scale + 2.0,
                sequence.setup.window_arcsec.1 + 2.0 * scale + 2.0,
            );
            let ring = Stack::ring(radius_arcsec, scale, apparent_radius_arcsec(sequence), lit);
            let (twin, twin_mean_mas) = twin::stack(&work, &maker, &some, ring);
            let level = part
                .iter()
                .map(|&k| twin::level_adu(work.frame(k)))
                .sum::<f64>();
            energies.take_stack(sequence, (&stack, &twin), level / part.len() as f64);
            if let Ok(list) = &mut found {
                match limb(&work, part, (&stack, &twin), twin_mean_mas, blur) {
                    Ok(it) => list.push(it),
                    Err(why) => {
                        found = Err(format!("stack of sequence {}: {why}", sequence.index + 1));
                    }
                }
            }
        }
        energies.take_mean(&work, &usable)?;
    }
    Ok(Stacks {
        limbs: found,
        whole: whole.map(Stack::into_means),
        sharpness: energies.record(),
    })
}

/// The limb of one stack, with what its twin shows beyond the frames' own limbs taken off.
fn limb(
    work: &Work<'_>,
    part: &[usize],
    (stack, twin): (&Stack, &Stack),
    twin_mean_mas: [f64; COMPONENTS],
    blur: f64,
) -> Result<StackLimb, String> {
    let frames: Vec<&Observation> = part
        .iter()
        .map(|&k| &work.selected.observations[k])
        .collect();
    let mut observation = mean_of(&frames);
    let ruler = Ruler {
        sequence: work.sequence,
        axis_rad: observation.axis_rad,
        blur,
    };
    let (harmonics, noise) = ruler.measure(stack)?;
    let (shown, _) = ruler.measure(twin)?;
    let removed_mas: [f64; COMPONENTS] = std::array::from_fn(|c| shown[c] - twin_mean_mas[c]);
    observation.harmonics_mas = std::array::from_fn(|c| harmonics[c] - removed_mas[c]);
    observation.noise_mas2 = noise;
    Ok(StackLimb {
        observation,
        removed_mas,
    })
}

fn of_frames(
    work: &Work<'_>,
    part: &[usize],
    mut stack: Stack,
    progress: &dyn Progress,
) -> Result<Stack, Error> {
    let sequence = work.sequence;
    let setup = &sequence.setup;
    let mut reader = Reader::new();
    let mut raw = Array2::zeros((0, 0));
    let mut calibrated = Array2::zeros((0, 0));
    for &k in part {
        progress.tick();
        let frame = work.frame(k);
        reader.read(&sequence.list, frame.source, &mut raw)?;
        calibrate::apply(
            &raw,
            &setup.calibration,
            setup.detector.saturation_adu,
            &mut calibrated,
        )?;
        let weight = work.selected.observations[k].weight;
        stack.add(
            calibrated.view(),
            frame.limb.centre_px,
            weight,
            &placed(sequence, frame),
        );
    }
    Ok(stack)
}

fn placed<'a>(sequence: &'a MeasuredSequence, frame: &'a MeasuredFrame) -> Placed<'a> {
    Placed {
        moment: &frame.moment,
        plate: sequence.setup.plate,
        scale_arcsec_px: sequence.setup.scale_arcsec_px,
        flat_inverse: sequence.setup.calibration.flat_inverse(),
        detector: sequence.setup.detector,
    }
}

/// Apparent radius of a sequence's Sun without the air, arcsec.
fn apparent_radius_arcsec(sequence: &MeasuredSequence) -> f64 {
    shape::reference_radius_rad(sequence.middle.sun.distance_au) / ARCSEC_RAD
}

/// The shape of the stacks' limbs and the blocks it was fitted in, or why there is none.
///
/// Its random error is the scatter of the stacks of every sequence; where there are too few of them it
/// is that of the frames.
pub(super) fn shape(
    stacks: &Stacks,
    by_frame: &Shape,
    known: &Known,
) -> Result<(Fit, Vec<Block>), String> {
    let limbs = stacks.limbs.as_ref().map_err(Clone::clone)?;
    if limbs.is_empty() {
        return Err("no stack was made".to_owned());
    }
    let observations: Vec<Observation> = limbs.iter().map(|it| it.observation).collect();
    let (mut blocks, ..) = shape::blocks(&observations);
    let enough = observations
        .chunk_by(|a, b| a.sequence == b.sequence)
        .all(|it| it.len() >= PARTS_FOR_ERROR);
    if !enough {
        for block in &mut blocks {
            let of = frames_variance(block.sequence, by_frame);
            let all = observations
                .iter()
                .filter(|it| it.sequence == block.sequence);
            let all: f64 = all.map(|it| it.weight).sum();
            let own: f64 = block.frames.iter().map(|&k| observations[k].weight).sum();
            block.variance_mas2 = of.map(|it| it * all / own);
        }
    }
    let mut fit = shape::fit(&observations, &blocks, known, &by_frame.separability)
        .map_err(|it| it.to_string())?;
    if !enough {
        fit.degrees = by_frame.fit.degrees;
    }
    Ok((fit, blocks))
}

/// The variance of a sequence's mean by the frames' route, mas^2.
fn frames_variance(sequence: usize, by_frame: &Shape) -> [f64; COMPONENTS] {
    let own = || by_frame.blocks.iter().filter(|it| it.sequence == sequence);
    let weight = |it: &Block| -> f64 {
        let frames = it.frames.iter();
        frames.map(|&k| by_frame.observations[k].weight).sum()
    };
    let total: f64 = own().map(weight).sum();
    let mut variance = [0.0; COMPONENTS];
    for block in own() {
        for (v, b) in variance.iter_mut().zip(block.variance_mas2) {
            *v += (weight(block) / total).powi(2) * b;
        }
    }
    variance
}

/// The mean of some frames of one sequence, with the sum of their weights.
fn mean_of(frames: &[&Observation]) -> Observation {
    let total: f64 = frames.iter().map(|it| it.weight).sum();
    let first = *frames[0];
    let mean = |f: &dyn Fn(&Observation) -> f64| {
        frames.iter().map(|it| it.weight * f(it)).sum::<f64>() / total
    };
    let turned = |f: &dyn Fn(&Observation) -> f64| {
        let (c, s) = (mean(&|it| f(it).cos()), mean(&|it| f(it).sin()));
        s.atan2(c)
    };
    let mut air = first.air;
    air.mean_mas = mean(&|it| it.air.mean_mas);
    air.cos2_mas = mean(&|it| it.air.cos2_mas);
    air.cos2_mas_arcmin = mean(&|it| it.air.cos2_mas_arcmin);
    air.mean_mas_arcmin = mean(&|it| it.air.mean_mas_arcmin);
    Observation {
        time_s: mean(&|it| it.time_s),
        axis_rad: turned(&|it| it.axis_rad),
        zenith_rad: turned(&|it| it.zenith_rad),
        b0_rad: mean(&|it| it.b0_rad),
        weight: total,
        air,
        ..first
    }
}
