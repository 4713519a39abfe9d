//! What the figures show beside the record: every frame, the mean limb, a preview of the stack.

use super::Parts;
use crate::pipeline::measure::MeasuredSequence;
use crate::pipeline::solve::frame_r0_m;
use crate::result::record::{FrameTrace, LimbTrace, Traces};
use crate::shape::REFERENCE_RADIUS_MAS;
use crate::stack::Stack;
use ndarray::Array2;
use std::f64::consts::TAU;

/// The traces of all usable frames, with limb and preview.
pub(super) fn traces(p: &Parts<'_>) -> Traces {
    let mean_radius = p.shape.fit.radius_mas() - REFERENCE_RADIUS_MAS;
    let mut frames = Vec::new();
    let influence = p
        .shape
        .fit
        .influence(&p.shape.observations, &p.shape.blocks);
    let mut influence = influence.iter();
    for (k, (it, &(position, frame))) in p
        .selected
        .observations
        .iter()
        .zip(&p.selected.origin)
        .enumerate()
    {
        let m = &p.measured[position];
        let measured = &m.frames[p.limbs[position].frames[frame].measured];
        frames.push(FrameTrace {
            sequence: m.index,
            frame: measured.frame,
            time_s: it.time_s,
            kept: p.shape.kept[k],
            weight: it.weight,
            r0_blur_m: frame_r0_m(m, measured.limb.mean_blur()).unwrap_or(f64::NAN),
            radius_mas: it.harmonics_mas[0] - mean_radius,
            cos2_mas: it.harmonics_mas[1],
            sin2_mas: it.harmonics_mas[2],
            north_deg: measured
                .moment
                .orientation
                .detector_angle_rad(0.0)
                .to_degrees()
                .rem_euclid(360.0),
            harmonics_mas: it.harmonics_mas,
            influence: p.shape.kept[k]
                .then(|| influence.next().copied())
                .flatten()
                .unwrap_or_default(),
        });
    }
    let (preview, preview_radius_px) = match &p.stacks.whole {
        Some(it) => preview(it, &p.measured[0]),
        None => (None, 0.0),
    };
    Traces {
        frames,
        limb: limb_trace(p),
        preview,
        preview_radius_px,
    }
}

/// Bins of position angle of the drawn limb.
const LIMB_BINS: usize = 120;

/// Mean limb on the sky with the instrument's distortion taken off, about the fitted circle.
fn limb_trace(p: &Parts<'_>) -> LimbTrace {
    let mut sum = [0.0; LIMB_BINS];
    let mut square = [0.0; LIMB_BINS];
    let mut weight = [0.0; LIMB_BINS];
    let fit = &p.shape.fit;
    let instrument: Vec<(f64, f64)> = (2..=4)
        .map(|m| {
            let (c, s, _) = fit.instrument_mas(m);
            (c, s)
        })
        .collect();
    for (it, &(position, frame)) in p.selected.observations.iter().zip(&p.selected.origin) {
        let m = &p.measured[position];
        let corrected = &p.limbs[position].frames[frame];
        let moment = &m.frames[corrected.measured].moment;
        let (c1, s1) = (corrected.harmonics.cos[1], corrected.harmonics.sin[1]);
        for (s, &radius) in corrected.limb.radius_mas.iter().enumerate() {
            if !corrected.usable[s] || !radius.is_finite() {
                continue;
            }
            let theta = corrected.limb.angles_rad[s];
            let mut value = radius - fit.values[0] - c1 * theta.cos() - s1 * theta.sin();
            for (k, (c, s)) in instrument.iter().enumerate() {
                let phase = (k + 2) as f64 * theta;
                value -= c * phase.cos() + s * phase.sin();
            }
            let turn = moment.orientation.position_angle_rad(theta) / TAU;
            let bin = ((turn * LIMB_BINS as f64) as usize).min(LIMB_BINS - 1);
            sum[bin] += it.weight * value;
            square[bin] += it.weight * value * value;
            weight[bin] += it.weight;
        }
    }
    let sun = &p.measured[p.measured.len() / 2].middle.sun;
    let columns = crate::shape::sun_columns(sun.b0_rad, 0.0);
    let width = 360.0 / LIMB_BINS as f64;
    let mut out = LimbTrace {
        position_angle_deg: Vec::new(),
        residual_mas: Vec::new(),
        sigma_mas: Vec::new(),
        model_mas: Vec::new(),
        axis_deg: sun.axis_rad.to_degrees(),
        zenith_deg: sun.parallactic_rad.to_degrees(),
    };
    for bin in 0..LIMB_BINS {
        if weight[bin] < 2.0 {
            continue;
        }
        let mean = sum[bin] / weight[bin];
        let variance = (square[bin] / weight[bin] - mean * mean).max(0.0);
        let at_deg = (bin as f64 + 0.5) * width;
        let psi = at_deg.to_radians() - sun.axis_rad;
        let (o, q) = (fit.oblateness_mas(), fit.p4_mas());
        let term = |k: usize| o * columns[1][k] + q * columns[2][k];
        out.position_angle_deg.push(at_deg);
        out.residual_mas.push(mean);
        out.sigma_mas.push((variance / (weight[bin] - 1.0)).sqrt());
        out.model_mas
            .push(term(0) + term(1) * (2.0 * psi).cos() + term(5) * (4.0 * psi).cos());
    }
    out
}

/// The stack as the page shows it, and the radius of its disk, px.
fn preview(stack: &Stack, first: &MeasuredSequence) -> (Option<Array2<f32>>, f64) {
    let image = stack.image.mapv(|it| it as f32);
    let radius_arcsec = REFERENCE_RADIUS_MAS / 1000.0 / first.middle.sun.distance_au;
    let radius_px = radius_arcsec / stack.scale_arcsec_px / reduction(stack.size()) as f64;
    (Some(reduced(&image)), radius_px)
}

/// Largest side of the preview, px.
const PREVIEW_PX: usize = 512;

/// By how many pixels each way a stack of that side is reduced.
fn reduction(side_px: usize) -> usize {
    side_px.div_ceil(PREVIEW_PX)
}

/// The image of `stack.fits` reduced by whole pixels, row 0 the southern edge, disk centre one.
pub(in crate::pipeline) fn reduced(image: &Array2<f32>) -> Array2<f32> {
    let n = image.nrows();
    let by = reduction(n);
    let side = n / by;
    let centre = f64::from(image[[n / 2, n / 2]]);
    Array2::from_shape_fn((side, side), |(row, column)| {
        let y0 = row * by;
        let x0 = column * by;
        let block = image.slice(ndarray::s![y0..y0 + by, x0..x0 + by]);
        let sum: f64 = block
            .iter()
            .filter(|it| it.is_finite())
            .map(|&it| f64::from(it))
            .sum();
        (sum / (by * by) as f64 / centre) as f32
    })
}
