//! The limb on an image whose rows are lines in time over a detector that stands still.
//!
//! # Model
//!
//! As for a frame (see [`crate::limb`]), with the pixels where the sky's motion puts them: the caller
//! lists, for every pixel near the limb, its true offset from the Sun's centre. The template's pixel is the
//! box of a slit's pixel and of the way the Sun makes during a line.
//!
//! # Valid for
//!
//! Boxes of 0.3 to 5 arcsec a side; the whole disk on the image.
//!
//! # Accuracy
//!
//! As the fit of a frame on a limb that does not shake; shaken from line to line, the blur along the motion is
//! the larger, and each sector has its own.
//!
//! # Source
//!
//! General least squares.

use super::geometry::{Annulus, Pixels};
use super::{Extraction, Flag, LimbError, ObservedLimb, harmonics, sector};
use crate::calibrate::{Calibration, Detector};
use ndarray::ArrayView2;
use std::f64::consts::TAU;

/// One pixel near the limb.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct LinePixel {
    /// Line.
    pub row: u32,
    /// Place on the slit.
    pub column: u32,
    /// True distance from the Sun's centre, arcsec.
    pub radius_arcsec: f64,
    /// Its direction, from +x towards +y of the detector, +y along the slit, rad.
    pub theta_rad: f64,
}

/// What the extraction needs beside the lines.
#[derive(Clone, Debug)]
pub struct LineExtraction<'a> {
    /// Template tables.
    pub table: &'a super::template::EdgeTable,
    /// Sectors and windows; its scale is the larger side of the pixel's box.
    pub annulus: &'a Annulus,
    /// Dark and flat of the line.
    pub calibration: &'a Calibration,
    /// Gain, read noise, saturation.
    pub detector: Detector,
    /// Radius of the round Sun about which the limb is measured, arcsec.
    pub model_arcsec: f64,
    /// Limb inside and outside, arcsec.
    pub window_arcsec: (f64, f64),
    /// Blur to start from.
    pub blur_start: f64,
    /// Level of the disk's centre and of the sky, dark taken off, ADU.
    pub levels_adu: (f64, f64),
}

/// Steps of the centre's refinement.
const STEPS: usize = 5;

/// Measures the limb of one transit: its offset from the centre that the pixels were listed about, arcsec,
/// and its true radius by sector.
///
/// # Errors
///
/// [`LimbError::TooFewSectors`] where less than half of the limb is usable.
pub fn extract(
    raw: ArrayView2<'_, f32>,
    pixels: &[LinePixel],
    setup: &LineExtraction<'_>,
) -> Result<((f64, f64), ObservedLimb), LimbError> {
    let count = setup.annulus.sectors();
    let model = vec![setup.model_arcsec; count];
    let slope = vec![0.0; count];
    let fitting = Extraction {
        table: setup.table,
        annulus: setup.annulus,
        calibration: setup.calibration,
        detector: setup.detector,
        model_arcsec: &model,
        model_slope: &slope,
        blur_start: setup.blur_start,
    };
    let (level, sky) = setup.levels_adu;
    let mut fits = vec![sector::Fit::start(level, sky, setup.blur_start); count];
    let mut offset = (0.0, 0.0);
    let mut steady = vec![true; count];
    for step in 0..STEPS {
        let gathered = gathered(raw, pixels, offset, setup);
        let rounds = if step == 0 { 4 } else { 2 };
        for (s, fit) in fits.iter_mut().enumerate() {
            fit.refine(&gathered[s], &fitting, s, rounds);
        }
        let (dx, dy) = harmonics::centre_offset(setup.annulus, &fits, &mut steady, step > 0);
        if step + 1 == STEPS || !(dx.is_finite() && dy.is_finite()) {
            break;
        }
        offset = (offset.0 + dx, offset.1 + dy);
        for (s, fit) in fits.iter_mut().enumerate() {
            let (c, n) = setup.annulus.direction(s);
            fit.shift_arcsec -= dx * c + dy * n;
        }
    }
    let found = fits.iter().filter(|it| it.flag == Flag::Good).count();
    if 2 * found < count {
        return Err(LimbError::TooFewSectors {
            found,
            sectors: count,
            needed: count.div_ceil(2),
        });
    }
    let limb = ObservedLimb {
        centre_px: offset,
        first_rad: setup.annulus.angle_rad(0),
        sectors: fits
            .iter()
            .map(|fit| super::SectorLimb {
                radius_arcsec: setup.model_arcsec + fit.shift_arcsec,
                sigma_arcsec: fit.shift_sigma_arcsec,
                blur: fit.blur,
                blur_sigma: fit.blur_sigma,
                gain_adu: fit.gain_adu,
                background_adu: fit.background_adu,
                misfit: fit.misfit,
                flag: fit.flag,
            })
            .collect(),
    };
    Ok((offset, limb))
}

/// The calibrated pixels by sector about an offset centre.
fn gathered(
    raw: ArrayView2<'_, f32>,
    pixels: &[LinePixel],
    offset: (f64, f64),
    setup: &LineExtraction<'_>,
) -> Vec<Pixels> {
    let count = setup.annulus.sectors();
    let first = setup.annulus.angle_rad(0);
    let width = setup.annulus.sector_rad();
    let mut out = vec![Pixels::default(); count];
    let dark = setup.calibration.dark_adu().row(0);
    let inverse = setup.calibration.flat_inverse().row(0);
    for it in pixels {
        let (s, c) = it.theta_rad.sin_cos();
        let (x, y) = (
            it.radius_arcsec * c - offset.0,
            it.radius_arcsec * s - offset.1,
        );
        let from_limb = x.hypot(y) - setup.model_arcsec;
        if from_limb < -setup.window_arcsec.0 || from_limb > setup.window_arcsec.1 {
            continue;
        }
        let turn = ((y.atan2(x) - first) / width + 0.5).rem_euclid(TAU / width);
        let into = &mut out[(turn as usize).min(count - 1)];
        into.expected += 1;
        let (row, column) = (it.row as usize, it.column as usize);
        let raw_adu = raw[[row, column]];
        if setup
            .detector
            .saturation_adu
            .is_some_and(|it| f64::from(raw_adu) >= it)
        {
            continue;
        }
        let value = (raw_adu - dark[column]) * inverse[column];
        if value.is_finite() {
            into.x_arcsec.push(from_limb);
            into.value_adu.push(f64::from(value));
            into.flat_inverse.push(f64::from(inverse[column]));
        }
    }
    out
}
