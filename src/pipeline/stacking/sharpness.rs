//! How much sharper the stacks are than the plain mean of the frames as they came.
//!
//! The energy of the edge, [`edge_energy`], is measured on the stacks and on a mean of frames that were
//! neither registered nor freed of the air. The same energies of the noise-free twins are what the
//! limbs of the single frames predict.

use super::twin::{Maker, level_adu};
use super::{Work, apparent_radius_arcsec};
use crate::calibrate;
use crate::frames::Reader;
use crate::pipeline::Error;
use crate::pipeline::measure::MeasuredSequence;
use crate::result::record::StackSharpness;
use crate::stack::{Stack, edge_energy};
use ndarray::Array2;

/// Frames of a sequence that go to its plain mean, at the most, evenly from all usable ones.
const MEAN_FRAMES: usize = 12;

/// Sums of edge energies, 1/arcsec.
#[derive(Clone, Copy, Debug, Default)]
pub(super) struct Energies {
    stack: f64,
    stack_twin: f64,
    stacks: f64,
    mean: f64,
    mean_twin: f64,
    means: f64,
}

/// How far from the limb the energy is summed, arcsec: within the window of the limb's fit.
fn reach_arcsec(sequence: &MeasuredSequence) -> f64 {
    let (inside, outside) = sequence.setup.window_arcsec;
    let smaller = if inside < outside { inside } else { outside };
    smaller - sequence.setup.scale_arcsec_px
}

impl Energies {
    /// Takes in one stack, its twin, and the mean brightness of its frames.
    pub(super) fn take_stack(
        &mut self,
        sequence: &MeasuredSequence,
        (stack, twin): (&Stack, &Stack),
        level_adu: f64,
    ) {
        let centre = (stack.centre_px(), stack.centre_px());
        let radius_arcsec = apparent_radius_arcsec(sequence);
        let of = |it: &Stack| {
            edge_energy(
                it.image.view(),
                centre,
                radius_arcsec,
                reach_arcsec(sequence),
                it.scale_arcsec_px,
            )
        };
        if let (Some(stack), Some(twin)) = (of(stack), of(twin)) {
            self.stack += stack / level_adu.powi(2);
            self.stack_twin += twin / level_adu.powi(2);
            self.stacks += 1.0;
        }
    }

    /// Reads some of all usable frames again and takes in their plain mean and its twin.
    ///
    /// # Errors
    ///
    /// When a frame that was read once cannot be read again.
    pub(super) fn take_mean(&mut self, work: &Work<'_>, usable: &[usize]) -> Result<(), Error> {
        let sequence = work.sequence;
        let setup = &sequence.setup;
        let some: Vec<usize> = usable
            .iter()
            .copied()
            .step_by(usable.len().div_ceil(MEAN_FRAMES))
            .collect();
        let n = some.len() as f64;
        let mean = |f: &dyn Fn(usize) -> f64| some.iter().map(|&k| f(k)).sum::<f64>() / n;
        let at = |k: usize| work.frame(k).limb.centre_px;
        let centre = (mean(&|k| at(k).0), mean(&|k| at(k).1));
        let farthest_px = some.iter().fold(0.0, |far: f64, &k| {
            let it = (at(k).0 - centre.0).hypot(at(k).1 - centre.1);
            if it > far { it } else { far }
        });
        // Lit far enough that the edge of no frame's window comes near any other's limb.
        let maker = Maker::new(sequence, (farthest_px + 4.0) * setup.scale_arcsec_px);
        let size = (sequence.list.height, sequence.list.width);
        let (mut sum, mut twin) = (Array2::<f64>::zeros(size), Array2::<f64>::zeros(size));
        let mut reader = Reader::new();
        let mut raw = Array2::zeros((0, 0));
        let mut calibrated = Array2::zeros((0, 0));
        for &k in &some {
            let frame = work.frame(k);
            reader.read(&sequence.list, frame.source, &mut raw)?;
            calibrate::apply(
                &raw,
                &setup.calibration,
                setup.detector.saturation_adu,
                &mut calibrated,
            )?;
            sum.zip_mut_with(&calibrated, |sum, &it| *sum += f64::from(it) / n);
            twin.zip_mut_with(&maker.frame(frame), |sum, &it| *sum += f64::from(it) / n);
        }
        let radius_arcsec = {
            let sectors = &work.frame(some[0]).limb.sectors;
            sectors.iter().map(|it| it.radius_arcsec).sum::<f64>() / sectors.len() as f64
        };
        let level = mean(&|k| level_adu(work.frame(k)));
        let of = |it: &Array2<f64>| {
            edge_energy(
                it.view(),
                centre,
                radius_arcsec,
                reach_arcsec(sequence),
                setup.scale_arcsec_px,
            )
        };
        if let (Some(sum), Some(twin)) = (of(&sum), of(&twin)) {
            self.mean += sum / level.powi(2);
            self.mean_twin += twin / level.powi(2);
            self.means += 1.0;
        }
        Ok(())
    }

    /// What the result says of it; none where there is no stack or no mean.
    pub(super) fn record(&self) -> Option<StackSharpness> {
        let stack = self.stack / self.stacks;
        let mean = self.mean / self.means;
        let predicted = (self.stack_twin / self.stacks) / (self.mean_twin / self.means);
        (stack.is_finite() && mean > 0.0 && predicted.is_finite()).then(|| StackSharpness {
            stack_per_arcsec: stack,
            mean_per_arcsec: mean,
            gain: stack / mean,
            gain_predicted: predicted,
            how: "energy of the edge: squared gradient integrated across the limb, over the squared brightness of disk centre; the mean is of frames as they came, neither registered nor freed of the air; predicted from the limb, place and blur of every single frame".to_owned(),
        })
    }
}
