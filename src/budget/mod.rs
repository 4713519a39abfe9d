//! The error budget: lines from the fit, lines from the model of the limb, one total.
//!
//! # Model
//!
//! ```text
//! sigma^2 = sum over lines of sigma_i^2
//! ```
//!
//! The lines of the fit split its covariance by the group of prior knowledge each part comes from
//! (GUM 5.1: independent inputs); what the fit does not know, the model of the limb, is propagated by
//! measuring noise-free limbs made with another model through the whole extraction.
//!
//! # Valid for
//!
//! Inputs that are independent of each other.
//!
//! # Accuracy
//!
//! The total is the root of the sum of the lines' squares, the same numbers that are printed.
//!
//! # Source
//!
//! JCGM 100:2008 (GUM), 5.1.

use crate::calibrate::Calibration;
use crate::limb::template::EdgeTable;
use crate::limb::{self, Disk, Extraction, Flag, LimbError};
use crate::shape::Contribution;

/// What another model of the limb does to the measured radius and blur.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Displacement {
    /// Measured minus true radius, mas as seen.
    pub radius_mas: f64,
    /// Measured over true blur.
    pub blur_ratio: f64,
}

/// Level of the noise-free limb: only ratios matter.
pub const LEVEL_ADU: f64 = 30_000.0;

/// Measures a noise-free limb that is made with the tables `truth` by the extraction as it stands.
///
/// # Errors
///
/// Whatever the extraction refuses.
pub fn displacement(
    truth: &EdgeTable,
    truth_blur: f64,
    extraction: &Extraction<'_>,
) -> Result<Displacement, LimbError> {
    let annulus = extraction.annulus;
    let size = annulus.size_px();
    let calibration = Calibration::neutral(size, size);
    let mut radius = 0.0;
    let mut ratio = 0.0;
    let phases = [(0.13, 0.37), (-0.31, 0.08), (0.42, -0.22)];
    for (dx, dy) in phases {
        let half = (size / 2) as f64;
        let centre = (half + dx, half + dy);
        let frame = annulus.synthetic(
            centre,
            (size, size),
            extraction.model_arcsec,
            extraction.model_slope,
            |s, x| LEVEL_ADU * truth.value(s, truth_blur, x),
        );
        let start = Disk {
            x_px: centre.0,
            y_px: centre.1,
            radius_px: 0.0,
            level_adu: LEVEL_ADU,
            sky_adu: 0.0,
        };
        let clean = Extraction {
            calibration: &calibration,
            detector: crate::calibrate::Detector {
                saturation_adu: None,
                ..extraction.detector
            },
            ..extraction.clone()
        };
        let limb = limb::extract(frame.view(), start, &clean)?;
        let good: Vec<f64> = limb
            .sectors
            .iter()
            .zip(extraction.model_arcsec)
            .filter(|(it, _)| it.flag == Flag::Good)
            .map(|(it, model)| it.radius_arcsec - model)
            .collect();
        radius += 1000.0 * good.iter().sum::<f64>() / good.len() as f64;
        ratio += limb.mean_blur() / truth_blur;
    }
    let n = phases.len() as f64;
    Ok(Displacement {
        radius_mas: radius / n,
        blur_ratio: ratio / n,
    })
}

/// A systematic line of the limb's model: it moves the radius alone.
pub fn limb_model_line(term: &str, sigma_radius_mas: f64, how: &str) -> Contribution {
    Contribution {
        term: term.to_owned(),
        radius_mas2: sigma_radius_mas * sigma_radius_mas,
        oblateness_mas2: 0.0,
        p4_mas2: 0.0,
        random: false,
        scope: "model",
        how: how.to_owned(),
    }
}

/// Standard uncertainties of radius, oblateness and `R c4` over some lines, mas.
pub fn total<'a>(lines: impl Iterator<Item = &'a Contribution>) -> [f64; 3] {
    let mut sum = [0.0; 3];
    for it in lines {
        sum[0] += it.radius_mas2;
        sum[1] += it.oblateness_mas2;
        sum[2] += it.p4_mas2;
    }
    sum.map(f64::sqrt)
}
