//! Noise-free frames with the limbs that the frames had: what they show beyond those limbs is what
//! stacking does.

use super::{Work, placed};
use crate::limb::geometry::Annulus;
use crate::limb::{Flag, blemish};
use crate::pipeline::measure::{MeasuredFrame, MeasuredSequence, predicted};
use crate::shape::COMPONENTS;
use crate::stack::Stack;
use ndarray::Array2;

/// Makes the twins of a sequence's frames.
#[derive(Debug)]
pub(super) struct Maker<'a> {
    sequence: &'a MeasuredSequence,
    annulus: Annulus,
    radii_arcsec: Vec<f64>,
    slopes: Vec<f64>,
}

impl<'a> Maker<'a> {
    /// Frames that are lit `beyond_arcsec` farther from the limb than the window reaches.
    pub(super) fn new(sequence: &'a MeasuredSequence, beyond_arcsec: f64) -> Self {
        let setup = &sequence.setup;
        let (radii_arcsec, slopes) = predicted(setup, &sequence.middle);
        let (low, high) = bounds(&radii_arcsec);
        let annulus = Annulus::new(
            setup.annulus.sectors(),
            setup.annulus.angle_rad(0),
            setup.scale_arcsec_px,
            (low - 3.0, high + 3.0),
            (
                setup.window_arcsec.0 + beyond_arcsec,
                setup.window_arcsec.1 + beyond_arcsec,
            ),
        );
        Self {
            sequence,
            annulus,
            radii_arcsec,
            slopes,
        }
    }

    /// The twin of one frame.
    pub(super) fn frame(&self, frame: &MeasuredFrame) -> Array2<f32> {
        let seen: Vec<f64> = frame
            .limb
            .sectors
            .iter()
            .zip(&self.radii_arcsec)
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
        let (level, sky) = (level_adu(frame), sky_adu(frame));
        let list = &self.sequence.list;
        let table = &self.sequence.setup.table;
        self.annulus.synthetic(
            frame.limb.centre_px,
            (list.height, list.width),
            &seen,
            &self.slopes,
            |s, x| level * table.value(s, blur, x) + sky,
        )
    }
}

/// Brightness of disk centre by a frame's limb, ADU.
pub(super) fn level_adu(frame: &MeasuredFrame) -> f64 {
    let good = frame.limb.sectors.iter().filter(|it| it.flag == Flag::Good);
    blemish::median(good.map(|it| it.gain_adu))
}

fn sky_adu(frame: &MeasuredFrame) -> f64 {
    let good = frame.limb.sectors.iter().filter(|it| it.flag == Flag::Good);
    blemish::median(good.map(|it| it.background_adu))
}

/// The twin of a stack from some of its frames, and their mean harmonics, mas at 1 AU.
pub(super) fn stack(
    work: &Work<'_>,
    maker: &Maker<'_>,
    some: &[usize],
    mut stack: Stack,
) -> (Stack, [f64; COMPONENTS]) {
    let (mut mean, mut total) = ([0.0; COMPONENTS], 0.0);
    for &k in some {
        let frame = work.frame(k);
        let observation = &work.selected.observations[k];
        let image = maker.frame(frame);
        let weight = observation.weight;
        stack.add(
            image.view(),
            frame.limb.centre_px,
            weight,
            &placed(work.sequence, frame),
        );
        total += weight;
        for (sum, it) in mean.iter_mut().zip(observation.harmonics_mas) {
            *sum += weight * it;
        }
    }
    (stack.into_means(), mean.map(|it| it / total))
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
