//! Blur along one axis, by wind on the tube, guiding or the air's dispersion: what it does to the shape.
//!
//! # Model
//!
//! ```text
//! J(theta)     = J_0 + J_c cos 2 theta + J_s sin 2 theta         mean of a sequence, least squares
//! shift(theta) = k (J_c cos 2 theta + J_s sin 2 theta)           taken off the sequence's limbs
//! k            = [D(S) + S / R] / [J(S) - J(0)],   S with J(S) - J(0) = 2 sqrt(J_c^2 + J_s^2)
//! ```
//!
//! | symbol | meaning | unit |
//! |--------|---------|------|
//! | `J` | blur that the extraction finds | arcsec^(5/3) |
//! | `S` | variance of a Gaussian blur beside the air's | arcsec^2 |
//! | `D` | shift that the extraction finds of a noise-free limb with it, less that without it | arcsec |
//! | `R` | radius of the disk: across the axis the limb's curvature moves it by `-S / 2R` | arcsec |
//!
//! The template's blur is the air's, of another shape than a smear: a sector that lies along the axis is
//! fitted with too large a blur of the wrong kind, and found too far out. The air itself has no lasting
//! second harmonic; each frame's own is left alone.
//!
//! # Valid for
//!
//! Smears narrower than the limb's width; pixels up to 5 arcsec.
//!
//! # Accuracy
//!
//! 0.5 mas of oblateness for jitter of 0.5 arcsec rms along one axis
//! (`tests/published/limb_extraction.rs`).
//!
//! # Source
//!
//! Differences of the extraction's own answers; common practice, no source.

use super::Error;
use super::measure::{MeasuredSequence, predicted};
use crate::budget;
use crate::calibrate::Detector;
use crate::limb::template::EdgeTable;
use crate::limb::{Extraction, Flag, ObservedLimb};
use crate::optics::limb_profile::LimbOptics;
use nalgebra::{Matrix3, Vector3};
use std::sync::Arc;

/// Variance of the smear that is tried first, arcsec^2.
const FIRST_ARCSEC2: f64 = 0.1;

/// Bounds of the variance that is tried, arcsec^2.
const TRIED_ARCSEC2: (f64, f64) = (0.01, 4.0);

/// Least blur that the air is taken to have while the smear is tried, arcsec^(5/3).
const LEAST_BLUR: f64 = 0.1;

/// The lasting second harmonic of a sequence's blur and the shift it causes.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct AxisBlur {
    /// Mean blur, arcsec^(5/3).
    pub mean: f64,
    /// Mean gain of the sectors, ADU: photon noise weighs the pixels of the limb.
    pub level_adu: f64,
    /// Coefficient of `cos 2 theta` of the blur.
    pub cos2: f64,
    /// Coefficient of `sin 2 theta` of the blur.
    pub sin2: f64,
    /// Shift of the limb for a change of the blur, arcsec / arcsec^(5/3).
    pub shift_per_blur: f64,
}

impl AxisBlur {
    /// None: nothing is taken off.
    pub fn none() -> Self {
        Self {
            mean: 0.0,
            level_adu: 0.0,
            cos2: 0.0,
            sin2: 0.0,
            shift_per_blur: 0.0,
        }
    }

    /// Half of the blur's change around the limb.
    pub fn amplitude(&self) -> f64 {
        self.cos2.hypot(self.sin2)
    }

    /// Detector angle along which the limb is most blurred, rad, 0 to pi.
    pub fn axis_rad(&self) -> f64 {
        (0.5 * self.sin2.atan2(self.cos2)).rem_euclid(std::f64::consts::PI)
    }

    /// What the blur adds to a radius at a detector angle, arcsec.
    pub fn shift_arcsec(&self, theta_rad: f64) -> f64 {
        let (sin, cos) = (2.0 * theta_rad).sin_cos();
        self.shift_per_blur * (self.cos2 * cos + self.sin2 * sin)
    }
}

/// The lasting second harmonic of the blur in a sequence's limbs; none where too few sectors tell.
pub fn second_harmonic<'a>(limbs: impl Iterator<Item = &'a ObservedLimb>) -> AxisBlur {
    let mut normal = Matrix3::<f64>::zeros();
    let mut right = Vector3::<f64>::zeros();
    let (mut gain, mut sectors) = (0.0, 0.0);
    for limb in limbs {
        for (s, it) in limb.sectors.iter().enumerate() {
            if it.flag != Flag::Good {
                continue;
            }
            let (sin, cos) = (2.0 * limb.angle_rad(s)).sin_cos();
            let row = Vector3::new(1.0, cos, sin);
            normal += row * row.transpose();
            right += row * it.blur;
            gain += it.gain_adu;
            sectors += 1.0;
        }
    }
    normal.cholesky().map_or_else(AxisBlur::none, |it| {
        let found = it.solve(&right);
        AxisBlur {
            mean: found[0],
            level_adu: gain / sectors,
            cos2: found[1],
            sin2: found[2],
            shift_per_blur: 0.0,
        }
    })
}

/// Works out the shifts of all sequences: once for a camera and filter, at the mean blur and the
/// greatest second harmonic of its sequences.
///
/// # Errors
///
/// Whatever the tables or the extraction refuse.
pub(super) fn work_out(measured: &mut [MeasuredSequence]) -> Result<(), Error> {
    for first in 0..measured.len() {
        let setup = Arc::clone(&measured[first].setup);
        let same = |it: &MeasuredSequence| Arc::ptr_eq(&it.setup, &setup);
        if measured[..first].iter().any(same) {
            continue;
        }
        let group: Vec<AxisBlur> = measured
            .iter()
            .filter(|it| same(it))
            .map(|it| it.axis_blur)
            .collect();
        let Some(&greatest) = group
            .iter()
            .max_by(|a, b| a.amplitude().total_cmp(&b.amplitude()))
        else {
            continue;
        };
        let mean = group.iter().map(|it| it.mean).sum::<f64>() / group.len() as f64;
        let (model_arcsec, model_slope) = predicted(&setup, &measured[first].middle);
        let extraction = Extraction {
            table: &setup.table,
            annulus: &setup.annulus,
            calibration: &setup.calibration,
            detector: setup.detector,
            model_arcsec: &model_arcsec,
            model_slope: &model_slope,
            blur_start: mean,
        };
        let found = with_shift(AxisBlur { mean, ..greatest }, &setup.optics, &extraction)?;
        for it in measured.iter_mut().filter(|it| same(it)) {
            it.axis_blur.shift_per_blur = found.shift_per_blur;
        }
    }
    Ok(())
}

/// Works out the shift for a sequence's second harmonic with the extraction as it stands.
///
/// # Errors
///
/// Whatever the tables or the extraction refuse.
pub fn with_shift(
    found: AxisBlur,
    optics: &LimbOptics,
    extraction: &Extraction<'_>,
) -> Result<AxisBlur, Error> {
    if !(found.level_adu > 0.0) {
        return Ok(found);
    }
    let annulus = extraction.annulus;
    let angles: Vec<f64> = (0..annulus.sectors())
        .map(|s| annulus.angle_rad(s))
        .collect();
    let rise = 2.0 * found.amplitude();
    let across = found.mean - found.amplitude();
    let across = if across > LEAST_BLUR {
        across
    } else {
        LEAST_BLUR
    };
    // The noise-free limb is made at a level of its own: electrons to a unit of it as in the frames.
    let own = budget::LEVEL_ADU / found.level_adu;
    let clean = Extraction {
        blur_start: across,
        detector: Detector {
            gain_e_adu: extraction.detector.gain_e_adu / own,
            ..extraction.detector
        },
        ..extraction.clone()
    };
    let tried = |variance: f64| -> Result<(f64, f64), Error> {
        let pixel = annulus.scale_arcsec_px();
        let table = EdgeTable::of_blur(optics, variance.sqrt(), pixel, &angles, across)?;
        let it = budget::displacement(&table, across, &clean)?;
        Ok((it.radius_mas / 1000.0, it.blur_ratio * across))
    };
    let none = tried(0.0)?;
    let radius = optics.edge.radius_arcsec;
    let mut variance = FIRST_ARCSEC2;
    let mut shift_per_blur = 0.0;
    for _ in 0..2 {
        let with = tried(variance)?;
        let risen = with.1 - none.1;
        if !(risen > 0.0) {
            return Ok(found);
        }
        shift_per_blur = (with.0 - none.0 + variance / radius) / risen;
        variance = (variance * rise / risen).clamp(TRIED_ARCSEC2.0, TRIED_ARCSEC2.1);
    }
    Ok(AxisBlur {
        shift_per_blur,
        ..found
    })
}
