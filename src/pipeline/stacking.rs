//! The kept frames stacked by sequence, the stacks' limbs, and the shape by that route.

use super::Error;
use super::Progress;
use super::correct::CorrectedSequence;
use super::limb_model::LimbModel;
use super::measure::{MeasuredFrame, MeasuredSequence, Setup, predicted};
use super::solve::{Selected, Shape};
use crate::calibrate::{self, Calibration, Detector};
use crate::frames::Reader;
use crate::limb::blemish;
use crate::limb::geometry::Annulus;
use crate::limb::harmonics::Projector;
use crate::limb::template::EdgeTable;
use crate::limb::{self, Disk, Extraction, Flag};
use crate::shape::{self, Block, COMPONENTS, Fit, Known, Observation};
use crate::sky::Parity;
use crate::stack::{Placed, Stack};
use crate::units::ARCSEC_RAD;
use ndarray::Array2;
use std::f64::consts::{FRAC_PI_2, TAU};

/// The stacks of a session.
#[derive(Clone, Debug)]
pub(super) struct Stacks {
    /// By position among the measured sequences.
    by_sequence: Vec<Option<SequenceStack>>,
    /// All of them.
    pub whole: Option<Stack>,
}

/// The stack of one sequence and its twin.
#[derive(Clone, Debug)]
struct SequenceStack {
    stack: Stack,
    /// Noise-free frames of the template with the limbs that some of the frames had, stacked the same
    /// way: what it shows beyond those limbs' mean is what stacking does.
    twin: Stack,
    /// Those limbs' mean harmonics, mas at 1 AU.
    twin_mean_mas: [f64; COMPONENTS],
}

/// Frames of a sequence that go to its twin, at the most.
const TWIN_FRAMES: usize = 16;

impl Stacks {
    /// No stack was asked for.
    pub(super) fn none() -> Self {
        Self {
            by_sequence: Vec::new(),
            whole: None,
        }
    }

    /// How many sequences were stacked.
    pub(super) fn count(&self) -> usize {
        self.by_sequence.iter().flatten().count()
    }
}

/// Stacks the kept frames in a second pass, one frame in memory at a time.
///
/// # Errors
///
/// When a frame that was read once cannot be read again.
pub(super) fn combine(
    measured: &[MeasuredSequence],
    limbs: &[CorrectedSequence],
    selected: &Selected,
    kept: &[bool],
    progress: &dyn Progress,
) -> Result<Stacks, Error> {
    let radius_arcsec = measured
        .iter()
        .map(apparent_radius_arcsec)
        .fold(0.0, |a: f64, b| if b > a { b } else { a });
    progress.stage("stack", kept.iter().filter(|it| **it).count() as u64);
    let mut whole: Option<Stack> = None;
    let mut by_sequence = Vec::new();
    for (position, sequence) in measured.iter().enumerate() {
        let chosen: Vec<usize> = (0..kept.len())
            .filter(|&k| kept[k] && selected.origin[k].0 == position)
            .collect();
        if chosen.is_empty() {
            by_sequence.push(None);
            continue;
        }
        let empty = || Stack::new(radius_arcsec, sequence.setup.scale_arcsec_px);
        let stack = of_frames(
            sequence,
            &limbs[position],
            selected,
            &chosen,
            empty(),
            progress,
        )?;
        match &mut whole {
            Some(sum) => sum.merge(&stack),
            None => whole = Some(stack.clone()),
        }
        let every = chosen.len().div_ceil(TWIN_FRAMES);
        let some: Vec<usize> = chosen.iter().copied().step_by(every).collect();
        let (twin, twin_mean_mas) = twin(sequence, &limbs[position], selected, &some, empty());
        by_sequence.push(Some(SequenceStack {
            stack: stack.finished(),
            twin: twin.finished(),
            twin_mean_mas,
        }));
    }
    Ok(Stacks {
        by_sequence,
        whole: whole.map(|it| it.finished()),
    })
}

fn of_frames(
    sequence: &MeasuredSequence,
    limbs: &CorrectedSequence,
    selected: &Selected,
    chosen: &[usize],
    mut stack: Stack,
    progress: &dyn Progress,
) -> Result<Stack, Error> {
    let setup = &sequence.setup;
    let mut reader = Reader::new();
    let mut raw = Array2::zeros((0, 0));
    let mut calibrated = Array2::zeros((0, 0));
    for &k in chosen {
        progress.tick();
        let frame = &sequence.frames[limbs.frames[selected.origin[k].1].measured];
        reader.read(&sequence.list, frame.source, &mut raw)?;
        calibrate::apply(
            &raw,
            &setup.calibration,
            setup.detector.saturation_adu,
            &mut calibrated,
        )?;
        let weight = selected.observations[k].weight;
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

/// The twin of a sequence's stack from some of its frames, and their mean harmonics.
fn twin(
    sequence: &MeasuredSequence,
    limbs: &CorrectedSequence,
    selected: &Selected,
    some: &[usize],
    mut stack: Stack,
) -> (Stack, [f64; COMPONENTS]) {
    let setup = &sequence.setup;
    // Room about the window for the kernel's reach.
    let reach = 4.0 * setup.scale_arcsec_px;
    let (radii, slopes) = predicted(setup, &sequence.middle);
    let (low, high) = bounds(&radii);
    let wide = Annulus::new(
        setup.annulus.sectors(),
        setup.annulus.angle_rad(0),
        setup.scale_arcsec_px,
        (low - 3.0, high + 3.0),
        (setup.window_arcsec.0 + reach, setup.window_arcsec.1 + reach),
    );
    let (mut mean, mut total) = ([0.0; COMPONENTS], 0.0);
    for &k in some {
        let frame = &sequence.frames[limbs.frames[selected.origin[k].1].measured];
        let observation = &selected.observations[k];
        let seen: Vec<f64> = frame
            .limb
            .sectors
            .iter()
            .zip(&radii)
            .map(|(it, &model)| {
                if it.flag == Flag::Good {
                    it.radius_arcsec
                } else {
                    model
                }
            })
            .collect();
        let blur = frame.limb.mean_blur();
        // The same brightness as the frame's, so that the stack's fit weighs its pixels the same way.
        let good = || frame.limb.sectors.iter().filter(|it| it.flag == Flag::Good);
        let level = blemish::median(good().map(|it| it.gain_adu));
        let sky = blemish::median(good().map(|it| it.background_adu));
        let size = (sequence.list.height, sequence.list.width);
        let image = wide.synthetic(frame.limb.centre_px, size, &seen, &slopes, |s, x| {
            level * setup.table.value(s, blur, x) + sky
        });
        let weight = observation.weight;
        stack.add(
            image.view(),
            frame.limb.centre_px,
            weight,
            &placed(sequence, frame),
        );
        total += weight;
        for (sum, it) in mean.iter_mut().zip(observation.harmonics_mas) {
            *sum += weight * it;
        }
    }
    (stack, mean.map(|it| it / total))
}

fn bounds(values: &[f64]) -> (f64, f64) {
    values
        .iter()
        .fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), &it| {
            (
                if it < low { it } else { low },
                if it > high { it } else { high },
            )
        })
}

/// Apparent radius of a sequence's Sun without the air, arcsec.
fn apparent_radius_arcsec(sequence: &MeasuredSequence) -> f64 {
    shape::reference_radius_rad(sequence.middle.sun.distance_au) / ARCSEC_RAD
}

/// The shape of the stacks' limbs, or why there is none.
pub(super) fn shape(
    stacks: &Stacks,
    measured: &[MeasuredSequence],
    by_frame: &Shape,
    known: &Known,
    model: &LimbModel,
) -> Result<Fit, String> {
    let mut observations = Vec::new();
    let mut blocks = Vec::new();
    for (position, stack) in stacks.by_sequence.iter().enumerate() {
        let Some(it) = stack else { continue };
        let sequence = &measured[position];
        let named = |why: String| format!("stack of sequence {}: {why}", sequence.index + 1);
        let (mut harmonics, noise) =
            limb_of(&it.stack, sequence, by_frame, model).map_err(named)?;
        let (twin, _) = limb_of(&it.twin, sequence, by_frame, model).map_err(named)?;
        for c in 0..COMPONENTS {
            harmonics[c] -= twin[c] - it.twin_mean_mas[c];
        }
        let Some((mut observation, variance)) = mean_of(sequence.index, by_frame) else {
            continue;
        };
        observation.harmonics_mas = harmonics;
        observation.weight = 1.0;
        let k = observations.len();
        blocks.push(Block {
            sequence: sequence.index,
            time_s: observation.time_s,
            frames: vec![k],
            mean_mas: harmonics,
            variance_mas2: std::array::from_fn(|c| variance[c] + noise[c]),
            degrees: by_frame
                .blocks
                .iter()
                .filter(|it| it.sequence == sequence.index)
                .map(|it| it.degrees)
                .sum(),
        });
        observations.push(observation);
    }
    if observations.is_empty() {
        return Err("no stack was made".to_owned());
    }
    let mut fit = shape::fit(&observations, &blocks, known, &by_frame.separability)
        .map_err(|it| it.to_string())?;
    // Its random error is that of the frames.
    fit.degrees = by_frame.fit.degrees;
    Ok(fit)
}

/// A sequence's mean observation and the variance of its mean by the frames' route.
fn mean_of(sequence: usize, by_frame: &Shape) -> Option<(Observation, [f64; COMPONENTS])> {
    let frames: Vec<&Observation> = by_frame
        .observations
        .iter()
        .filter(|it| it.sequence == sequence)
        .collect();
    let total: f64 = frames.iter().map(|it| it.weight).sum();
    let first = *frames.first()?;
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
    let mut variance = [0.0; COMPONENTS];
    for block in by_frame.blocks.iter().filter(|it| it.sequence == sequence) {
        let weight: f64 = block
            .frames
            .iter()
            .map(|&k| by_frame.observations[k].weight)
            .sum();
        for (v, b) in variance.iter_mut().zip(block.variance_mas2) {
            *v += (weight / total).powi(2) * b;
        }
    }
    let observation = Observation {
        time_s: mean(&|it| it.time_s),
        axis_rad: turned(&|it| it.axis_rad),
        zenith_rad: turned(&|it| it.zenith_rad),
        b0_rad: mean(&|it| it.b0_rad),
        air,
        ..*first
    };
    Some((observation, variance))
}

/// Harmonics of one stack's limb on the detector, mas at 1 AU, and their photon noise.
fn limb_of(
    stack: &Stack,
    sequence: &MeasuredSequence,
    by_frame: &Shape,
    model: &LimbModel,
) -> Result<([f64; COMPONENTS], [f64; COMPONENTS]), String> {
    let setup: &Setup = &sequence.setup;
    let count = setup.annulus.sectors();
    let axis_rad = {
        let (mut c, mut s) = (0.0, 0.0);
        for it in by_frame
            .observations
            .iter()
            .filter(|it| it.sequence == sequence.index)
        {
            c += it.weight * it.axis_rad.cos();
            s += it.weight * it.axis_rad.sin();
        }
        s.atan2(c)
    };
    let sense = match sequence.middle.orientation.parity {
        Parity::Sky => 1.0,
        Parity::Mirrored => -1.0,
    };
    // On the grid angles run from +x (solar west) to +y (solar north); on the detector solar north
    // stands at `axis_rad`. Sectors are laid so that the pixels' boxes fall into the same classes.
    let first_detector = setup.annulus.angle_rad(0);
    let first_grid = sense * (first_detector - axis_rad) + FRAC_PI_2;
    let on_detector: Vec<f64> = (0..count)
        .map(|s| first_detector + sense * TAU * s as f64 / count as f64)
        .collect();
    let table = EdgeTable::new(&setup.optics, 0.0, stack.scale_arcsec_px, &on_detector)
        .map_err(|it| it.to_string())?;
    // The grid is a tangent plane.
    let radius_arcsec = (apparent_radius_arcsec(sequence) * ARCSEC_RAD).tan() / ARCSEC_RAD;
    let annulus = Annulus::new(
        count,
        first_grid,
        stack.scale_arcsec_px,
        (radius_arcsec - 2.0, radius_arcsec + 2.0),
        setup.window_arcsec,
    );
    let model_arcsec = vec![radius_arcsec; count];
    let model_slope = vec![0.0; count];
    let n = stack.size();
    let calibration = Calibration::neutral(n, n);
    let frames = stack.frames as f64;
    let extraction = Extraction {
        table: &table,
        annulus: &annulus,
        calibration: &calibration,
        detector: Detector {
            gain_e_adu: setup.detector.gain_e_adu * frames,
            read_noise_e: setup.detector.read_noise_e * frames.sqrt(),
            saturation_adu: None,
        },
        model_arcsec: &model_arcsec,
        model_slope: &model_slope,
        blur_start: model.blur,
    };
    let image = stack.image.mapv(|it| it as f32);
    let centre = stack.centre_px();
    // The twin is dark inside its annulus: the brightest pixel serves both.
    let level = f64::from(
        image
            .iter()
            .copied()
            .filter(|it| it.is_finite())
            .fold(0.0_f32, |a, b| if b > a { b } else { a }),
    );
    let start = Disk {
        x_px: centre,
        y_px: centre,
        radius_px: 0.0,
        level_adu: level,
        sky_adu: 0.0,
    };
    let limb = limb::extract(image.view(), start, &extraction).map_err(|it| it.to_string())?;
    let usable: Vec<bool> = limb
        .sectors
        .iter()
        .enumerate()
        .map(|(s, it)| {
            let across = (sense * s as f64).rem_euclid(count as f64) as usize % count;
            it.flag == Flag::Good
                && sequence.blemishes[if sense > 0.0 { s } else { across }].is_none()
        })
        .collect();
    let projector = Projector::new(&on_detector, &usable, 30)
        .ok_or("too few sectors of its limb are usable")?;
    let distance = sequence.middle.sun.distance_au;
    let radii: Vec<f64> = limb
        .sectors
        .iter()
        .map(|it| shape::beyond_reference_mas((it.radius_arcsec * ARCSEC_RAD).atan(), distance))
        .collect();
    let found = projector.apply(&radii);
    let variances: Vec<f64> = limb
        .sectors
        .iter()
        .map(|it| (1000.0 * it.sigma_arcsec * distance).powi(2))
        .collect();
    let noise = projector.noise(&variances);
    let (c, s) = (&found.cos, &found.sin);
    Ok((
        [c[0], c[2], s[2], c[3], s[3], c[4], s[4]],
        [
            noise[0], noise[2], noise[2], noise[3], noise[3], noise[4], noise[4],
        ],
    ))
}
