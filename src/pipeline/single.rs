//! Limb and shape of one image in pixels, without a session.
//!
//! The plate scale is taken from the disk itself (a Sun of 959.6 arcsec), which only sets how limb
//! darkening and blur look; every result is in pixels. Errors come from the scatter of the sectors
//! about the fitted harmonics, which holds photon noise and whatever the air did to this image; that
//! of the radius also holds what is not known of the camera's blur and of the Sun's edge.

use super::Error;
use crate::calibrate::{Calibration, Detector};
use crate::disk::{Darkening, DarkeningLaw, SolarEdge};
use crate::frames::ImageFile;
use crate::limb::blemish;
use crate::limb::geometry::Annulus;
use crate::limb::harmonics::Projector;
use crate::limb::template::{EdgeTable, blur_of_width, width_of_blur_arcsec};
use crate::limb::{self, Extraction, Flag, LimbError, ObservedLimb};
use crate::optics::definitions::{fftd_arcsec, half_intensity_arcsec, inflection_arcsec};
use crate::optics::limb_profile::{Blur, LimbOptics, ProfileMaker};
use crate::optics::{Exposure, Telescope};
use crate::units::ARCSEC_RAD;
use ndarray::Array2;
use serde::Serialize;
use std::f64::consts::TAU;
use std::path::Path;

/// Which edge of the blurred limb is called the limb.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Definition {
    /// The unblurred limb's inflection point, by the template.
    Template,
    /// The blurred limb's inflection point.
    Inflection,
    /// Half of the blurred limb's brightness at 10 arcsec inside the unblurred limb.
    HalfIntensity,
    /// Zero of the finite Fourier transform of a window, arcsec.
    Fourier(f64),
}

impl Definition {
    /// In words.
    pub fn words(self) -> String {
        match self {
            Self::Template => "template: inflection of the unblurred limb".to_owned(),
            Self::Inflection => "inflection of the blurred limb".to_owned(),
            Self::HalfIntensity => {
                "half-intensity: half of the brightness at 10 arcsec inside".to_owned()
            }
            Self::Fourier(window) => format!("finite Fourier transform, window {window} arcsec"),
        }
    }
}

/// What is assumed of an image.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct SingleSettings {
    /// Wavelength, nm: limb darkening and diffraction.
    pub wavelength_nm: f64,
    /// Aperture, m: diffraction.
    pub aperture_m: f64,
    /// Plane of a cube.
    pub plane: usize,
    /// What is called the limb.
    pub definition: Definition,
}

impl Default for SingleSettings {
    fn default() -> Self {
        Self {
            wavelength_nm: 550.0,
            aperture_m: 0.15,
            plane: 0,
            definition: Definition::Template,
        }
    }
}

/// Limb of one image, pixels. Harmonics are of `r = R + sum (cos_m cos m theta + sin_m sin m theta)`,
/// theta from +x towards +y about the centre.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct SingleLimb {
    /// Centre, 0-based pixel centres, `[x, y]`.
    pub centre_px: [f64; 2],
    /// Standard uncertainty of either coordinate.
    pub centre_sigma_px: f64,
    /// Mean radius.
    pub radius_px: f64,
    /// Its standard uncertainty.
    pub radius_sigma_px: f64,
    /// Coefficient of `cos 2 theta`.
    pub cos2_px: f64,
    /// Coefficient of `sin 2 theta`.
    pub sin2_px: f64,
    /// Coefficient of `cos 3 theta`.
    pub cos3_px: f64,
    /// Coefficient of `sin 3 theta`.
    pub sin3_px: f64,
    /// Coefficient of `cos 4 theta`.
    pub cos4_px: f64,
    /// Coefficient of `sin 4 theta`.
    pub sin4_px: f64,
    /// Standard uncertainty of each of these coefficients.
    pub harmonic_sigma_px: f64,
    /// Blur: full width at half maximum of the seeing, diffraction and pixel apart.
    pub width_px: f64,
    /// Sectors that were used.
    pub sectors_used: usize,
    /// Sectors that were not.
    pub sectors_rejected: usize,
    /// Definition of the limb.
    pub definition: String,
    /// What a reader must know.
    pub warnings: Vec<String>,
}

/// Semi-diameter that sets the scale, arcsec.
const RADIUS_ARCSEC: f64 = 959.6;

/// Scale height of the Sun's edge, arcsec.
const EDGE_ARCSEC: f64 = 0.11;

/// Smallest radius whose limb is measured, px: 10 arcsec a pixel.
const SMALLEST_PX: f64 = 96.0;

/// Standard uncertainty of the radius by the thickness of the Sun's edge and its darkening, arcsec.
const EDGE_SIGMA_ARCSEC: f64 = 0.015;

/// Share of the limb's displacement by blur that depends on the blur's shape: the difference of a
/// Gaussian and a turbulent blur of one width.
const BLUR_SIGMA_SHARE: f64 = 0.08;

/// Electrons that the disk's centre is taken to hold, for the weights.
const ELECTRONS: f64 = 30_000.0;

/// Measures the limb of one image file.
///
/// # Errors
///
/// When the file is no image, or the image holds no limb that can be measured.
pub fn limb_of_file(path: &Path, settings: &SingleSettings) -> Result<SingleLimb, Error> {
    let mut file = ImageFile::open(path)?;
    let mut image = Array2::zeros((0, 0));
    file.read_plane(settings.plane, &mut image)?;
    let mut out = limb_of_image(&image, settings)?;
    if let Some(it) = file.lossy() {
        out.warnings
            .push(format!("the pixels went through lossy compression: {it}"));
    }
    if file.planes() > 1 {
        out.warnings
            .push(format!("plane {} of {}", settings.plane, file.planes()));
    }
    Ok(out)
}

/// Measures the limb of one image.
///
/// # Errors
///
/// When the image holds no limb that can be measured.
pub fn limb_of_image(image: &Array2<f32>, settings: &SingleSettings) -> Result<SingleLimb, Error> {
    let disk = limb::locate::find(image.view())?;
    let scale = RADIUS_ARCSEC / disk.radius_px;
    if disk.radius_px < SMALLEST_PX {
        return Err(LimbError::TooSmall {
            found_px: disk.radius_px,
            needed_px: SMALLEST_PX,
        }
        .into());
    }
    let optics = LimbOptics {
        edge: SolarEdge {
            radius_arcsec: RADIUS_ARCSEC,
            scale_arcsec: EDGE_ARCSEC,
            darkening: Darkening::new(DarkeningLaw::Neckel2005, settings.wavelength_nm)?,
        },
        telescope: Telescope {
            aperture_m: settings.aperture_m,
            central_obstruction: 0.0,
        },
        wavelength_nm: settings.wavelength_nm,
        exposure: Exposure::Long,
    };
    // Sectors of some ten pixels along the limb, in a number that folds onto few directions.
    let sectors = ((TAU * disk.radius_px / 12.0 / 8.0).round() as usize * 8).clamp(24, 120);
    let angles: Vec<f64> = (0..sectors)
        .map(|s| TAU * (s as f64 + 0.5) / sectors as f64)
        .collect();
    let table = EdgeTable::new(&optics, 0.0, scale, &angles)?;
    let wide = |arcsec: f64, pixels: f64| {
        if arcsec > pixels * scale {
            arcsec
        } else {
            pixels * scale
        }
    };
    let annulus = Annulus::new(
        sectors,
        angles[0],
        scale,
        (RADIUS_ARCSEC - 4.0 * scale, RADIUS_ARCSEC + 4.0 * scale),
        (wide(12.0, 4.0), wide(10.0, 3.5)),
    );
    let (height, width) = image.dim();
    let calibration = Calibration::neutral(width, height);
    let model = vec![RADIUS_ARCSEC; sectors];
    let slope = vec![0.0; sectors];
    let gain = ELECTRONS / (disk.level_adu - disk.sky_adu);
    let extraction = Extraction {
        table: &table,
        annulus: &annulus,
        calibration: &calibration,
        detector: Detector {
            gain_e_adu: gain,
            read_noise_e: 10.0,
            saturation_adu: None,
        },
        model_arcsec: &model,
        model_slope: &slope,
        blur_start: blur_of_width(2.0 + scale),
    };
    // A sky that is not zero would count as photons in the weights; the fit's background takes it.
    let found = limb::extract(image.view(), disk, &extraction)?;
    let shift = displacement_arcsec(&optics, settings.definition, &found)?;
    // How far blur moves the limb, and how well that is known of an unknown camera.
    let moved = displacement_arcsec(&optics, Definition::Inflection, &found)?;
    let model_sigma_arcsec = EDGE_SIGMA_ARCSEC.hypot(BLUR_SIGMA_SHARE * moved);
    let mut out = summed_up(&found, &angles, scale, shift, settings.definition)?;
    out.radius_sigma_px = out.radius_sigma_px.hypot(model_sigma_arcsec / scale);
    Ok(out)
}

/// Displacement of a definition from the template's limb at the image's mean blur, arcsec.
fn displacement_arcsec(
    optics: &LimbOptics,
    definition: Definition,
    limb: &ObservedLimb,
) -> Result<f64, Error> {
    if definition == Definition::Template {
        return Ok(0.0);
    }
    let maker = ProfileMaker::new(optics, 30.0, 0.02, 0.0)?;
    let width_rad = width_of_blur_arcsec(limb.mean_blur()) * ARCSEC_RAD;
    let r0_m = if width_rad > 0.0 {
        optics.wavelength_nm * 1e-9 / width_rad
    } else {
        f64::INFINITY
    };
    let profile = maker.profile(
        &Blur {
            r0_m,
            gaussian_sigma_arcsec: 0.0,
        },
        0.0,
    );
    Ok(match definition {
        Definition::Fourier(window) => fftd_arcsec(&profile, &maker.grid(), window)?,
        Definition::HalfIntensity => half_intensity_arcsec(&profile, &maker.grid())?,
        _ => inflection_arcsec(&profile, &maker.grid())?,
    })
}

fn summed_up(
    limb: &ObservedLimb,
    angles: &[f64],
    scale: f64,
    shift_arcsec: f64,
    definition: Definition,
) -> Result<SingleLimb, Error> {
    let blemishes = blemish::judge(&[limb]);
    let usable: Vec<bool> = limb
        .sectors
        .iter()
        .zip(&blemishes)
        .map(|(it, blemish)| it.flag == Flag::Good && blemish.is_none())
        .collect();
    let used = usable.iter().filter(|it| **it).count();
    let needed = angles.len().div_ceil(2);
    let projector = Projector::new(angles, &usable, 4)
        .filter(|_| used >= needed)
        .ok_or(LimbError::TooFewSectors {
            found: used,
            sectors: angles.len(),
            needed,
        })?;
    let radii: Vec<f64> = limb
        .sectors
        .iter()
        .map(|it| it.radius_arcsec / scale)
        .collect();
    let h = projector.apply(&radii);
    let residual: f64 = projector
        .used()
        .iter()
        .map(|&s| {
            let mut model = h.cos[0];
            for m in 1..=4 {
                let phase = m as f64 * angles[s];
                model += h.cos[m] * phase.cos() + h.sin[m] * phase.sin();
            }
            (radii[s] - model).powi(2)
        })
        .sum();
    let scatter = residual / (used as f64 - 9.0).max(1.0);
    let noise = projector.noise(&vec![scatter; angles.len()]);
    let mut warnings = Vec::new();
    if used < angles.len() {
        warnings.push(format!(
            "{} of {} sectors of the limb were left out",
            angles.len() - used,
            angles.len()
        ));
    }
    Ok(SingleLimb {
        centre_px: [limb.centre_px.0 + h.cos[1], limb.centre_px.1 + h.sin[1]],
        centre_sigma_px: noise[1].sqrt(),
        radius_px: h.cos[0] + shift_arcsec / scale,
        radius_sigma_px: noise[0].sqrt(),
        cos2_px: h.cos[2],
        sin2_px: h.sin[2],
        cos3_px: h.cos[3],
        sin3_px: h.sin[3],
        cos4_px: h.cos[4],
        sin4_px: h.sin[4],
        harmonic_sigma_px: noise[2].sqrt(),
        width_px: 0.98 * width_of_blur_arcsec(limb.mean_blur()) / scale,
        sectors_used: used,
        sectors_rejected: angles.len() - used,
        definition: definition.words(),
        warnings,
    })
}
