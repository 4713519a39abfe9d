//! The kept frames stacked by sequence, the stacks' limbs, and the shape by that route.

use super::Error;
use super::Progress;
use super::limb_model::LimbModel;
use super::measure::{MeasuredSequence, Setup};
use super::solve::{Selected, Shape};
use crate::calibrate::{Calibration, Detector};
use crate::frames::Reader;
use crate::limb::geometry::Annulus;
use crate::limb::harmonics::Projector;
use crate::limb::template::EdgeTable;
use crate::limb::{self, Disk, Extraction, Flag};
use crate::shape::{self, Block, COMPONENTS, Fit, Known, Observation, REFERENCE_RADIUS_MAS};
use crate::sky::Parity;
use crate::stack::{FrameOptics, Stack};
use crate::units::{ARCSEC_RAD, MAS_RAD};
use ndarray::Array2;
use std::f64::consts::{FRAC_PI_2, TAU};

/// The stacks of a session.
#[derive(Clone, Debug)]
pub struct Stacks {
    /// By position among the measured sequences.
    pub by_sequence: Vec<Option<Stack>>,
    /// All of them.
    pub whole: Option<Stack>,
}

impl Stacks {
    /// No stack was asked for.
    pub fn none() -> Self {
        Self {
            by_sequence: Vec::new(),
            whole: None,
        }
    }
}

/// Stacks the kept frames in a second pass, one frame in memory at a time.
///
/// # Errors
///
/// When a frame that was read once cannot be read again.
pub fn combine(
    measured: &[MeasuredSequence],
    selected: &Selected,
    kept: &[bool],
    progress: &dyn Progress,
) -> Result<Stacks, Error> {
    let radius_arcsec = measured
        .iter()
        .map(apparent_radius_arcsec)
        .fold(0.0, |a: f64, b| if b > a { b } else { a });
    let scale = measured[0].setup.scale_arcsec_px;
    let mut by_sequence: Vec<Option<Stack>> = vec![None; measured.len()];
    progress.stage("stack", selected.observations.len() as u64);
    let mut raw = Array2::zeros((0, 0));
    let mut reader = Reader::new();
    let mut at = None;
    let chosen = selected
        .observations
        .iter()
        .zip(&selected.origin)
        .zip(kept)
        .filter(|it| *it.1);
    for ((observation, &(position, k)), _) in chosen {
        progress.tick();
        let sequence = &measured[position];
        let frame = &sequence.frames[k];
        if at != Some(position) {
            (at, reader) = (Some(position), Reader::new());
        }
        reader.read(&sequence.list, frame.source, &mut raw)?;
        let optics = FrameOptics {
            moment: &frame.moment,
            plate: sequence.setup.plate,
            scale_arcsec_px: sequence.setup.scale_arcsec_px,
            calibration: &sequence.setup.calibration,
            detector: sequence.setup.detector,
        };
        by_sequence[position]
            .get_or_insert_with(|| Stack::new(radius_arcsec, scale))
            .add(
                raw.view(),
                frame.limb.centre_px,
                observation.weight,
                &optics,
            );
    }
    let mut whole: Option<Stack> = None;
    for it in by_sequence.iter().flatten() {
        match &mut whole {
            Some(sum) => sum.merge(it),
            None => whole = Some(it.clone()),
        }
    }
    let by_sequence = by_sequence
        .into_iter()
        .map(|it| it.map(|it| it.finished()))
        .collect();
    Ok(Stacks {
        by_sequence,
        whole: whole.map(|it| it.finished()),
    })
}

/// Apparent radius of a sequence's Sun without the air, arcsec.
fn apparent_radius_arcsec(sequence: &MeasuredSequence) -> f64 {
    ((REFERENCE_RADIUS_MAS * MAS_RAD).sin() / sequence.middle.sun.distance_au).asin() / ARCSEC_RAD
}

/// The shape of the stacks' limbs, or why there is none.
pub fn shape(
    stacks: &Stacks,
    measured: &[MeasuredSequence],
    by_frame: &Shape,
    known: &Known,
    model: &LimbModel,
) -> Result<Fit, String> {
    let mut observations = Vec::new();
    let mut blocks = Vec::new();
    for (position, stack) in stacks.by_sequence.iter().enumerate() {
        let Some(stack) = stack else { continue };
        let sequence = &measured[position];
        let (harmonics, noise) = harmonics(stack, sequence, by_frame, model)
            .map_err(|it| format!("stack of sequence {}: {it}", sequence.index + 1))?;
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
        });
        observations.push(observation);
    }
    if observations.is_empty() {
        return Err("no stack was made".to_owned());
    }
    shape::fit(&observations, &blocks, known, &by_frame.separability).map_err(|it| it.to_string())
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
fn harmonics(
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
    let level = f64::from(image[[n / 2, n / 2]]);
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
        .map(|it| {
            (distance * (it.radius_arcsec * ARCSEC_RAD).atan().sin()).asin() / MAS_RAD
                - REFERENCE_RADIUS_MAS
        })
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
