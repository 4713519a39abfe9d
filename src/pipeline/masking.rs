//! What leaving arcs of the limb out does to the shape, and how radius goes with brightness.

use super::blemishes::{Arcs, Blemishes};
use super::correct::CorrectedSequence;
use super::measure::{MeasuredSequence, facing};
use super::solve::{self, Selected, Shape};
use crate::limb::blemish::Blemish;
use crate::limb::residual::{PARTS, RINGS, ResidualMap, bin_of};
use crate::limb::structure;
use crate::result::record::{
    AxisBlurRecord, BrightnessRegression, MaskArc, MaskingRecord, RegressionLine,
};
use crate::shape::{self, Known, Observation, REFERENCE_RADIUS_MAS};

/// The record of masking.
pub(super) fn record(
    blemishes: &Blemishes,
    measured: &[MeasuredSequence],
    bare: &[CorrectedSequence],
    selected: &Selected,
    by_frame: &Shape,
    known: &Known,
    radius_bias_mas: f64,
) -> MaskingRecord {
    let with = fitted(&by_frame.observations, known);
    let without = solve::select(measured, bare).ok().and_then(|it| {
        let kept: Vec<Observation> = it
            .observations
            .iter()
            .zip(&selected.observations)
            .zip(&by_frame.kept)
            .filter(|(_, kept)| **kept)
            .map(|((bare, with), _)| Observation {
                weight: with.weight,
                ..*bare
            })
            .collect();
        fitted(&kept, known)
    });
    let radius = |it: &Option<Found>| {
        it.map(|it| (REFERENCE_RADIUS_MAS + it.radius_mas - radius_bias_mas) / 1000.0)
    };
    let frames: u64 = measured.iter().map(|it| it.residuals.frames()).sum();
    let weighed = |of: &dyn Fn(&MeasuredSequence) -> f64| {
        measured
            .iter()
            .map(|it| it.residuals.frames() as f64 * of(it))
            .sum::<f64>()
            / frames as f64
    };
    MaskingRecord {
        share_of_limb: weighed(&structure_share),
        passing_share: weighed(&|it| it.passing),
        hits_per_frame: weighed(&|it| it.residuals.hits_per_frame()),
        arcs: blemishes.arcs.iter().map(arc).collect(),
        structures_left_in: blemishes.kept,
        radius_with_arcsec: radius(&with),
        radius_without_arcsec: radius(&without),
        oblateness_with_mas: with.and_then(|it| it.oblateness_mas),
        oblateness_without_mas: without.and_then(|it| it.oblateness_mas),
        brightness_regression: BrightnessRegression {
            whole_limb: regression(measured, bare, true),
            masked_out: regression(measured, bare, false),
        },
    }
}

/// The records of blur along one axis.
pub(super) fn axis_blurs(measured: &[MeasuredSequence]) -> Vec<AxisBlurRecord> {
    measured
        .iter()
        .map(|it| AxisBlurRecord {
            sequence: it.index,
            blur_arcsec53: it.axis_blur.mean,
            amplitude_arcsec53: it.axis_blur.amplitude(),
            axis_deg: it.axis_blur.axis_rad().to_degrees(),
            removed_mas: 1000.0
                * it.axis_blur.shift_per_blur
                * it.axis_blur.amplitude()
                * it.middle.sun.distance_au,
        })
        .collect()
}

/// Radius and oblateness of a plain fit.
#[derive(Clone, Copy, Debug)]
struct Found {
    radius_mas: f64,
    oblateness_mas: Option<f64>,
}

fn fitted(observations: &[Observation], known: &Known) -> Option<Found> {
    let (blocks, ..) = shape::blocks(observations);
    let separability = shape::judge(observations, &blocks, known.distortion_sigma_mas.is_some());
    let fit = shape::fit(observations, &blocks, known, &separability).ok()?;
    Some(Found {
        radius_mas: fit.radius_mas() - REFERENCE_RADIUS_MAS,
        oblateness_mas: separability.oblateness.then(|| fit.oblateness_mas()),
    })
}

/// Share of a sequence's sectors that are left out for structure.
fn structure_share(m: &MeasuredSequence) -> f64 {
    let masked = m
        .blemishes
        .iter()
        .flatten()
        .filter(|it| !it.is_absence())
        .count();
    masked as f64 / m.blemishes.len() as f64
}

fn arc(it: &Arcs) -> MaskArc {
    let on_sun = it.kind.on_the_sun();
    let looked = match it.orientations {
        1 => "one orientation of the detector: what stays on the Sun and what stays on the detector cannot be told apart".to_owned(),
        n => format!("median of {n} orientations of the detector on the Sun"),
    };
    let how = if it.kind == Blemish::Image {
        "mask image".to_owned()
    } else {
        format!("brightness inside the limb against its neighbours, {looked}")
    };
    MaskArc {
        kind: it.kind.kind().to_owned(),
        stays_on: if on_sun { "sun" } else { "detector" }.to_owned(),
        from_deg: it.angles_rad.0.to_degrees(),
        to_deg: it.angles_rad.1.to_degrees(),
        contrast_percent: it.contrast.map(|it| 100.0 * it),
        robust_sigmas: it.sigmas,
        how,
    }
}

/// Highest harmonic taken off before radius is compared with brightness.
const TAKEN_OFF: usize = 4;

/// Mean radius of each sector about its frame's low harmonics against the brightness that the other
/// sequences of its camera saw at its place on the Sun, about its neighbours': slope, its uncertainty by
/// the scatter. None for a sequence alone: its own noise would be on both sides.
fn regression(
    measured: &[MeasuredSequence],
    limbs: &[CorrectedSequence],
    whole: bool,
) -> Option<RegressionLine> {
    let mut points: Vec<(f64, f64)> = Vec::new();
    let maps: Vec<ResidualMap> = measured
        .iter()
        .map(|it| structure::flattened(&it.residuals.by_sun()))
        .collect();
    for (position, (m, l)) in measured.iter().zip(limbs).enumerate() {
        let others: Vec<ResidualMap> = (0..measured.len())
            .filter(|&k| k != position && std::sync::Arc::ptr_eq(&measured[k].setup, &m.setup))
            .map(|k| maps[k].clone())
            .collect();
        if others.is_empty() {
            continue;
        }
        let map = structure::mean(&others);
        let at_middle = facing(&m.middle);
        let count = m.blemishes.len();
        let bins = map.mean.len();
        let mut sum = vec![(0.0, 0.0); count];
        for frame in &l.frames {
            let h = &frame.harmonics;
            for (s, &radius) in frame.limb.radius_mas.iter().enumerate() {
                if !frame.usable[s] || (!whole && m.blemishes[s].is_some()) {
                    continue;
                }
                let mut about = radius - h.cos[0];
                for order in 1..=TAKEN_OFF {
                    let (sin, cos) = (order as f64 * frame.limb.angles_rad[s]).sin_cos();
                    about -= h.cos[order] * cos + h.sin[order] * sin;
                }
                sum[s].0 += about;
                sum[s].1 += 1.0;
            }
        }
        for (s, (total, n)) in sum.into_iter().enumerate() {
            let part_rad = m.setup.annulus.sector_rad() / PARTS as f64;
            let cells = (0..PARTS).flat_map(|k| {
                let off = part_rad * (k as f64 + 0.5 - 0.5 * PARTS as f64);
                let theta = m.setup.annulus.angle_rad(s) + off;
                map.mean[bin_of(at_middle.solar_rad(theta), bins)]
            });
            let percent = 100.0 * cells.sum::<f64>() / (PARTS * RINGS) as f64;
            if n > 0.0 && percent.is_finite() {
                points.push((percent, total / n));
            }
        }
    }
    line(&points)
}

/// Straight line through points by least squares.
fn line(points: &[(f64, f64)]) -> Option<RegressionLine> {
    let n = points.len() as f64;
    if points.len() < 8 {
        return None;
    }
    let mean = |of: &dyn Fn(&(f64, f64)) -> f64| points.iter().map(of).sum::<f64>() / n;
    let (x, y) = (mean(&|it| it.0), mean(&|it| it.1));
    let xx = points.iter().map(|it| (it.0 - x).powi(2)).sum::<f64>();
    let xy = points.iter().map(|it| (it.0 - x) * (it.1 - y)).sum::<f64>();
    let slope = xy / xx;
    let rest = points
        .iter()
        .map(|it| (it.1 - y - slope * (it.0 - x)).powi(2))
        .sum::<f64>();
    slope.is_finite().then(|| RegressionLine {
        slope_mas_percent: slope,
        sigma_mas_percent: (rest / (n - 2.0) / xx).sqrt(),
        sectors: points.len(),
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    /// A worked line: (0, 1), (1, 3), (2, 5), ... has slope 2; with one point off by 3 the textbook
    /// formulas give the values below (common practice, no source).
    #[test]
    fn a_line_comes_back_with_its_uncertainty() {
        let mut points: Vec<(f64, f64)> = (0..10)
            .map(|k| (f64::from(k), 1.0 + 2.0 * f64::from(k)))
            .collect();
        let exact = line(&points).unwrap();
        assert!((exact.slope_mas_percent - 2.0).abs() < 1e-12);
        assert!(exact.sigma_mas_percent < 1e-7);
        points[9].1 += 3.0;
        let off = line(&points).unwrap();
        // slope = 2 + 3 * 4.5 / 82.5; residual sum = 9 (1 - 1/10 - 4.5^2 / 82.5)
        assert!((off.slope_mas_percent - (2.0 + 13.5 / 82.5)).abs() < 1e-12);
        let rest: f64 = 9.0 * (0.9 - 20.25 / 82.5);
        assert!((off.sigma_mas_percent - (rest / 8.0 / 82.5).sqrt()).abs() < 1e-12);
    }
}
