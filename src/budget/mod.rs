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
use statrs::distribution::{ContinuousCDF, Normal, StudentsT};

/// What another model of the limb does to the measured radius and blur.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Displacement {
    /// Measured minus true radius, mas as seen.
    pub radius_mas: f64,
    /// Measured over true blur.
    pub blur_ratio: f64,
}

/// What a gradient that the flat field leaves does to a limb: measured minus true, mas as seen.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct ShadeEffect {
    /// Mean radius.
    pub radius_mas: f64,
    /// Amplitude of m = 2, fixed to the detector.
    pub second_mas: f64,
    /// Amplitude of m = 4.
    pub fourth_mas: f64,
}

/// Measures a noise-free limb of the extraction's own model whose brightness is shaded by `1 + g x +
/// g x^2`, `x` from -1 to 1 across the disk along the detector's rows and `g` the relative gradient.
///
/// # Errors
///
/// Whatever the extraction refuses.
pub fn shaded(
    extraction: &Extraction<'_>,
    blur: f64,
    gradient_rel: f64,
    radius_px: f64,
) -> Result<ShadeEffect, LimbError> {
    let clear = noise_free(extraction.table, blur, extraction, (0.13, 0.37), |_| 1.0)?;
    let dim = noise_free(extraction.table, blur, extraction, (0.13, 0.37), |x| {
        let x = x / radius_px;
        1.0 + gradient_rel * (x + x * x)
    })?;
    let mut sum = [0.0; 5];
    let mut count = 0.0;
    for (s, (a, b)) in dim.sectors.iter().zip(&clear.sectors).enumerate() {
        if a.flag != Flag::Good || b.flag != Flag::Good {
            continue;
        }
        let moved = 1000.0 * (a.radius_arcsec - b.radius_arcsec);
        let angle = extraction.annulus.angle_rad(s);
        count += 1.0;
        sum[0] += moved;
        for (k, m) in [(1, 2.0), (3, 4.0)] {
            sum[k] += 2.0 * moved * (m * angle).cos();
            sum[k + 1] += 2.0 * moved * (m * angle).sin();
        }
    }
    let it = sum.map(|it| it / count);
    Ok(ShadeEffect {
        radius_mas: it[0],
        second_mas: it[1].hypot(it[2]),
        fourth_mas: it[3].hypot(it[4]),
    })
}

/// The limb that the extraction finds in a noise-free frame made with the tables `truth`, the disk's
/// centre off a pixel's by `phase_px`, each pixel's brightness times `shade` of its distance from the
/// centre along the rows, px.
fn noise_free(
    truth: &EdgeTable,
    truth_blur: f64,
    extraction: &Extraction<'_>,
    phase_px: (f64, f64),
    shade: impl Fn(f64) -> f64,
) -> Result<limb::ObservedLimb, LimbError> {
    let annulus = extraction.annulus;
    let size = annulus.size_px();
    let calibration = Calibration::neutral(size, size);
    let half = (size / 2) as f64;
    let centre = (half + phase_px.0, half + phase_px.1);
    let mut frame = annulus.synthetic(
        centre,
        (size, size),
        extraction.model_arcsec,
        extraction.model_slope,
        |s, x| LEVEL_ADU * truth.value(s, truth_blur, x),
    );
    for ((_, x), value) in frame.indexed_iter_mut() {
        *value *= shade(x as f64 - centre.0) as f32;
    }
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
    limb::extract(frame.view(), start, &clean)
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
    let mut radius = 0.0;
    let mut ratio = 0.0;
    let phases = [(0.13, 0.37), (-0.31, 0.08), (0.42, -0.22)];
    for phase in phases {
        let limb = noise_free(truth, truth_blur, extraction, phase, |_| 1.0)?;
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

/// A systematic line of the limb's model: standard uncertainties of radius, oblateness and `R c4`, mas.
pub fn limb_model_line(term: &str, [radius, oblateness, p4]: [f64; 3], how: &str) -> Contribution {
    Contribution {
        term: term.to_owned(),
        radius_mas2: radius * radius,
        oblateness_mas2: oblateness * oblateness,
        p4_mas2: p4 * p4,
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

/// Degrees of freedom from which the expansion about the normal distribution is better than the
/// library's inversion, which loses digits (0.25 percent at a million degrees).
const MANY: f64 = 500.0;

/// Multiple of a standard uncertainty with `degrees` of freedom (at least 2) that holds a `share`, 0 to
/// 1, of Student's distribution on both sides together.
///
/// Good to 1e-6. Above 500 degrees by the expansion of Abramowitz & Stegun 26.7.5.
pub fn coverage_factor(degrees: f64, share: f64) -> f64 {
    let degrees = if degrees > 2.0 { degrees } else { 2.0 };
    let at = 0.5 + 0.5 * share;
    if degrees < MANY {
        return StudentsT::new(0.0, 1.0, degrees).map_or(f64::NAN, |it| it.inverse_cdf(at));
    }
    let z = Normal::standard().inverse_cdf(at);
    let first = (z.powi(3) + z) / 4.0;
    let second = (5.0 * z.powi(5) + 16.0 * z.powi(3) + 3.0 * z) / 96.0;
    z + first / degrees + second / (degrees * degrees)
}

#[cfg(test)]
mod tests {
    use super::coverage_factor;

    /// Source: JCGM 100:2008 (GUM), table G.2, rows and columns from memory; half a digit.
    #[test]
    fn coverage_factors_are_those_of_the_guide() {
        for (degrees, row) in [
            (2.0, [1.32, 4.30]),
            (5.0, [1.11, 2.57]),
            (10.0, [1.05, 2.23]),
            (20.0, [1.03, 2.09]),
            (50.0, [1.01, 2.01]),
            (100.0, [1.005, 1.984]),
        ] {
            for (share, wanted) in [0.6827, 0.95].into_iter().zip(row) {
                let half = if degrees < 100.0 { 0.005 } else { 0.0005 };
                let found = coverage_factor(degrees, share);
                assert!((found - wanted).abs() <= half, "{degrees} {share}: {found}");
            }
        }
        assert!((coverage_factor(1e6, 0.95) - 1.959964).abs() < 5e-6);
        assert!(coverage_factor(1e6, 0.682689492) >= 1.0);
    }

    /// Source: `scipy.stats.t.ppf` of `SciPy` 1.16 on both sides of the change of method.
    #[test]
    fn both_methods_are_those_of_another_library() {
        for (degrees, row) in [
            (50.0, [1.0101004989424436, 2.008559112100761]),
            (499.9, [1.0010012006565008, 1.9647207910953255]),
            (500.1, [1.0010007998558847, 1.9647188842216923]),
        ] {
            for (share, wanted) in [0.682689492, 0.95].into_iter().zip(row) {
                let found = coverage_factor(degrees, share);
                assert!((found - wanted).abs() < 1e-7, "{degrees} {share}: {found}");
            }
        }
    }
}
