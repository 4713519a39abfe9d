//! Which arcs of the limb are left out, judged by all sequences together: what stays on the Sun, what
//! stays on the detector.

use super::measure::{MeasuredSequence, facing};
use crate::limb::blemish::{Blemish, median};
use crate::limb::residual::{Facing, ResidualMap, bin_of};
use crate::limb::structure::{self, Structure};
use std::f64::consts::TAU;
use std::sync::Arc;

/// Bins left out beside a structure, on either side.
const MARGIN_BINS: usize = 1;

/// Turns of the detector on the Sun that are one orientation, in bins.
const SAME_BINS: f64 = 3.0;

/// Share of the orientations that must show a structure, and the share of its contrast they must show.
const SHOWN: (f64, f64) = (0.6, 0.3);

/// Largest share of the limb that is left out for structure: beyond it the weaker ones stay.
const LARGEST_SHARE: f64 = 0.35;

/// Share of a sector's pixels that are missing where it is called outside the field or crossed by dead
/// columns, and the share of these in one line.
const LACKING: (f64, f64) = (0.1, 0.5);

/// An arc left out for what was seen in it.
#[derive(Clone, Debug, PartialEq)]
pub(super) struct Arcs {
    /// What it is.
    pub kind: Blemish,
    /// Angles from and to with the margin, rad: from solar north through east on the Sun, else from +x
    /// towards +y.
    pub angles_rad: (f64, f64),
    /// Greatest contrast, in units of the disk's centre; none where not by brightness.
    pub contrast: Option<f64>,
    /// Robust standard deviations there.
    pub sigmas: Option<f64>,
    /// Orientations of the detector on the Sun that were compared.
    pub orientations: usize,
}

/// What was found in all sequences.
#[derive(Clone, Debug, Default, PartialEq)]
pub(super) struct Blemishes {
    /// Arcs left out.
    pub arcs: Vec<Arcs>,
    /// Structures that were found and not left out, so that enough of the limb remains.
    pub kept: usize,
}

/// Judges all sequences and marks their sectors. `image` holds the bins of the position angle from solar
/// north that a mask image covers.
pub(super) fn judge(measured: &mut [MeasuredSequence], image: Option<&[bool]>) -> Blemishes {
    let mut out = Blemishes::default();
    let mut done: Vec<bool> = vec![false; measured.len()];
    for first in 0..measured.len() {
        if done[first] {
            continue;
        }
        let group: Vec<usize> = (first..measured.len())
            .filter(|&k| Arc::ptr_eq(&measured[k].setup, &measured[first].setup))
            .collect();
        for &k in &group {
            done[k] = true;
        }
        one_camera(measured, &group, image, &mut out);
    }
    for it in measured {
        name_seldom(it);
    }
    out
}

/// The sequences of one camera, filter and calibration.
fn one_camera(
    measured: &mut [MeasuredSequence],
    group: &[usize],
    image: Option<&[bool]>,
    out: &mut Blemishes,
) {
    let bins = measured[group[0]].residuals.bins();
    let orientations = orientations(measured, group);
    let maps = |of: &dyn Fn(&MeasuredSequence) -> ResidualMap| -> Vec<ResidualMap> {
        orientations
            .iter()
            .map(|same| {
                let flat: Vec<ResidualMap> = same
                    .iter()
                    .map(|&k| structure::flattened(&of(&measured[k])))
                    .collect();
                structure::mean(&flat)
            })
            .collect()
    };
    let turned = orientations.len() > 1;
    let by_sun = maps(&|it| it.residuals.by_sun());
    let by_detector = maps(&|it| it.residuals.by_detector());
    let mut found: Vec<(Blemish, Structure)> = Vec::new();
    for it in shown(&by_sun) {
        let kind = if it.contrast > 0.0 {
            Blemish::Facula
        } else {
            Blemish::Spot
        };
        found.push((kind, it));
    }
    // Without a turn the two maps are one.
    if turned {
        found.extend(
            shown(&by_detector)
                .into_iter()
                .map(|it| (Blemish::Dust, it)),
        );
    }
    found.sort_by(|a, b| b.1.sigmas.total_cmp(&a.1.sigmas));
    let mut sun: Vec<Option<Blemish>> = vec![None; bins];
    let mut detector: Vec<Option<Blemish>> = vec![None; bins];
    if let Some(image) = image {
        mark_image(image, &mut sun, orientations.len(), out);
    }
    for (kind, it) in found {
        let left_out = sun.iter().chain(&detector).flatten().count() + it.bins + 2 * MARGIN_BINS;
        if left_out as f64 > LARGEST_SHARE * bins as f64 {
            out.kept += 1;
            continue;
        }
        let marks = if kind.on_the_sun() {
            &mut sun
        } else {
            &mut detector
        };
        for k in 0..it.bins + 2 * MARGIN_BINS {
            marks[(it.first + bins + k - MARGIN_BINS) % bins].get_or_insert(kind);
        }
        let angle = |bin: f64| TAU * bin / bins as f64;
        out.arcs.push(Arcs {
            kind,
            angles_rad: (
                angle(it.first as f64 - MARGIN_BINS as f64),
                angle((it.first + it.bins + MARGIN_BINS) as f64),
            ),
            contrast: Some(it.contrast),
            sigmas: Some(it.sigmas),
            orientations: orientations.len(),
        });
    }
    for &k in group {
        mark(&mut measured[k], &sun, &detector);
    }
}

/// The sequences by the detector's orientation on the Sun.
fn orientations(measured: &[MeasuredSequence], group: &[usize]) -> Vec<Vec<usize>> {
    let width = SAME_BINS * TAU / measured[group[0]].residuals.bins() as f64;
    let mut out: Vec<(f64, Vec<usize>)> = Vec::new();
    for &k in group {
        let zero = facing(&measured[k].middle).zero_rad;
        let near = |other: f64| {
            let off = (zero - other).rem_euclid(TAU);
            off < width || off > TAU - width
        };
        match out.iter_mut().find(|it| near(it.0)) {
            Some(it) => it.1.push(k),
            None => out.push((zero, vec![k])),
        }
    }
    out.into_iter().map(|it| it.1).collect()
}

/// What stands out in the median of the orientations' maps and is shown by most of them.
fn shown(maps: &[ResidualMap]) -> Vec<Structure> {
    structure::find(&structure::combined(maps))
        .into_iter()
        .filter(|it| {
            let seen = maps
                .iter()
                .filter(|&map| {
                    let here = structure::contrast(map, it) / it.contrast;
                    maps.len() == 1 || here > SHOWN.1
                })
                .count();
            seen as f64 > SHOWN.0 * maps.len() as f64
        })
        .collect()
}

/// Marks what a mask image covers.
fn mark_image(
    image: &[bool],
    sun: &mut [Option<Blemish>],
    orientations: usize,
    out: &mut Blemishes,
) {
    let bins = sun.len();
    let covered = (0..bins).map(|bin| image[bin * image.len() / bins]);
    let mut run: Option<usize> = None;
    for (bin, here) in covered.chain([false]).enumerate() {
        if here {
            sun[bin] = Some(Blemish::Image);
            run = run.or(Some(bin));
        } else if let Some(first) = run.take() {
            let angle = |bin: usize| TAU * bin as f64 / bins as f64;
            out.arcs.push(Arcs {
                kind: Blemish::Image,
                angles_rad: (angle(first), angle(bin)),
                contrast: None,
                sigmas: None,
                orientations,
            });
        }
    }
}

/// Marks the sectors of a sequence that touch the marked bins.
fn mark(sequence: &mut MeasuredSequence, sun: &[Option<Blemish>], detector: &[Option<Blemish>]) {
    let at_middle = facing(&sequence.middle);
    let count = sequence.blemishes.len();
    let first = sequence.setup.annulus.angle_rad(0);
    for s in 0..count {
        let found = touched(s, count, first, detector, None)
            .or_else(|| touched(s, count, first, sun, Some(at_middle)));
        if let Some(it) = found {
            sequence.blemishes[s] = match sequence.blemishes[s] {
                Some(old @ Blemish::Seldom) => Some(old),
                _ => Some(it),
            };
        }
    }
    sequence.sun_masked = if sun.iter().any(Option::is_some) {
        sun.iter().map(Option::is_some).collect()
    } else {
        Vec::new()
    };
}

/// The first mark among the bins of a sector; through `facing` when the bins are of the Sun.
fn touched<T: Copy>(
    sector: usize,
    sectors: usize,
    first_rad: f64,
    marks: &[Option<T>],
    facing: Option<Facing>,
) -> Option<T> {
    let bins = marks.len();
    let width = TAU / bins as f64;
    let parts = bins / sectors;
    (0..parts).find_map(|part| {
        let theta = first_rad
            + TAU * sector as f64 / sectors as f64
            + width * (part as f64 + 0.5 - 0.5 * parts as f64);
        let angle = facing.map_or(theta, |it| it.solar_rad(theta));
        marks[bin_of(angle, bins)]
    })
}

/// Whether a sector of a frame lies on a marked part of the Sun.
pub(super) fn on_marked_sun(
    sequence: &MeasuredSequence,
    frame_facing: Facing,
    sector: usize,
) -> bool {
    if sequence.sun_masked.is_empty() {
        return false;
    }
    let bins = sequence.sun_masked.len();
    let count = sequence.blemishes.len();
    let first = sequence.setup.annulus.angle_rad(0);
    let width = TAU / bins as f64;
    let parts = bins / count;
    (0..parts).any(|part| {
        let theta = first
            + TAU * sector as f64 / count as f64
            + width * (part as f64 + 0.5 - 0.5 * parts as f64);
        sequence.sun_masked[bin_of(frame_facing.solar_rad(theta), bins)]
    })
}

/// Says of sectors that are seldom there whether the field ends before them or dead columns cross them.
fn name_seldom(sequence: &mut MeasuredSequence) {
    let centres = |k: usize| {
        median(sequence.frames.iter().map(|it| {
            let at = it.limb.centre_px;
            if k == 0 { at.0 } else { at.1 }
        }))
    };
    let centre = (centres(0), centres(1));
    let flat = sequence.setup.calibration.flat_inverse();
    let dims = flat.dim();
    for s in 0..sequence.blemishes.len() {
        if sequence.blemishes[s] != Some(Blemish::Seldom) {
            continue;
        }
        let (outside, bad, in_line) = sequence
            .setup
            .annulus
            .lacks(s, centre, dims, |at| !flat[at].is_finite());
        if outside > LACKING.0 {
            sequence.blemishes[s] = Some(Blemish::Edge);
        } else if bad > LACKING.0 && in_line > LACKING.1 {
            sequence.blemishes[s] = Some(Blemish::Column);
        }
    }
}
