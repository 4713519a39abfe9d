//! The limb of one frame: raw pixels of an annulus fitted, sector by sector, with the blurred edge.
//!
//! # Model
//!
//! ```text
//! pixel value at (x, y) = g E(r - r_model(theta) - shift ; J) + b + c (r - r_model(theta))
//! ```
//!
//! | symbol | meaning | unit |
//! |--------|---------|------|
//! | `r`, `theta` | polar coordinates of the pixel's centre about the disk's centre | px, rad |
//! | `r_model` | predicted apparent limb: circle and refraction's flattening | arcsec |
//! | `E` | blurred, pixel-integrated limb of the Sun, 1 at disk centre | - |
//! | `shift` | limb minus `r_model`, of the unblurred limb's inflection point | arcsec |
//! | `J` | blur, `(lambda / r0)^(5/3)` | arcsec^(5/3) |
//! | `g`, `b`, `c` | gain, background and its slope | ADU, ADU/arcsec |
//!
//! Shift, gain, background, slope and blur are free in every sector, with weights from the modelled
//! variance. The image is never interpolated. The centre is moved until the limb's first harmonic is
//! zero.
//!
//! # Valid for
//!
//! Pixels of 0.3 to 5 arcsec, disks of more than 40 pixels radius, limbs of which at least half is in
//! the field.
//!
//! # Accuracy
//!
//! Noise-free bias below 0.1 mas in m = 0, 2, 4 at 1 to 2 arcsec a pixel; the scatter is that of the
//! Fisher matrix of the five parameters (tests in `tests/published/limb_extraction.rs`).
//!
//! # Source
//!
//! Fit of a pixel-integrated edge to raw pixels: general least squares. Limb darkening, blur and
//! pixel as in [`crate::disk`] and [`crate::optics`].

pub mod blemish;
pub mod geometry;
pub mod harmonics;
pub mod lines;
pub mod locate;
pub mod residual;
pub mod sector;
pub mod structure;
pub mod template;

use crate::calibrate::{Calibration, Detector};
use geometry::Annulus;
use ndarray::ArrayView2;
use template::EdgeTable;

pub use locate::Disk;

/// Why no limb was measured.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum LimbError {
    /// Nothing bright enough to be a disk.
    #[error(
        "no disk: the bright tenth of the frame stands at {bright_adu:.1} ADU, the dark tenth at {dark_adu:.1} ADU; a disk needs a difference of at least {needed_adu:.1} ADU"
    )]
    NoDisk {
        /// 90th percentile of the frame.
        bright_adu: f64,
        /// 10th percentile of the frame.
        dark_adu: f64,
        /// Difference that is needed.
        needed_adu: f64,
    },
    /// The edge was crossed too seldom to fit a circle.
    #[error(
        "only {found} crossings of the disk's edge lie on a circle; at least {needed} are needed (is the disk cut by the field?)"
    )]
    TooFewCrossings {
        /// Crossings found.
        found: usize,
        /// Crossings needed.
        needed: usize,
    },
    /// The radius is not the one that the plate scale predicts.
    #[error(
        "the disk's radius is {found_px:.1} px where the plate scale predicts {expected_px:.1} px; is camera.scale_arcsec_px right?"
    )]
    WrongRadius {
        /// Radius found.
        found_px: f64,
        /// Radius predicted.
        expected_px: f64,
    },
    /// The disk is too small for its limb to be resolved.
    #[error("the disk's radius is {found_px:.1} px; a limb needs at least {needed_px:.0} px of it")]
    TooSmall {
        /// Radius found.
        found_px: f64,
        /// Radius needed.
        needed_px: f64,
    },
    /// Too much of the limb is outside the field, masked or unusable.
    #[error(
        "only {found} of {sectors} sectors of the limb could be measured; at least {needed} are needed"
    )]
    TooFewSectors {
        /// Sectors measured.
        found: usize,
        /// Sectors of a whole limb.
        sectors: usize,
        /// Sectors needed.
        needed: usize,
    },
    /// The centre ran away while it was refined.
    #[error("the centre moved by {moved_px:.2} px in the last step of {steps}: no stable limb")]
    Unstable {
        /// Last step.
        moved_px: f64,
        /// Steps taken.
        steps: usize,
    },
}

/// Why a sector has no radius.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Flag {
    /// It has one.
    Good,
    /// Too few of its pixels are inside the field and usable.
    Incomplete,
    /// The fit did not settle, or the misfit is far above the noise.
    Misfit,
    /// Left out because of a spot, a facula, dust or the like.
    Masked,
}

impl Flag {
    /// The number written to tables.
    pub fn code(self) -> u8 {
        match self {
            Self::Good => 0,
            Self::Incomplete => 1,
            Self::Misfit => 2,
            Self::Masked => 3,
        }
    }
}

/// The limb in one sector of one frame.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct SectorLimb {
    /// Apparent radius about the frame's centre at the sector's middle, arcsec on the plate scale.
    pub radius_arcsec: f64,
    /// Standard uncertainty from photon and read noise, arcsec.
    pub sigma_arcsec: f64,
    /// Blur `J`, arcsec^(5/3).
    pub blur: f64,
    /// Standard uncertainty of the blur.
    pub blur_sigma: f64,
    /// Gain: disk centre of the template, ADU.
    pub gain_adu: f64,
    /// Background at the limb, ADU.
    pub background_adu: f64,
    /// Mean square misfit over its expectation.
    pub misfit: f64,
    /// Whether it can be used.
    pub flag: Flag,
}

/// The limb of one frame, as it arrived: blurred, shaken and bent by the air.
#[derive(Clone, Debug, PartialEq)]
pub struct ObservedLimb {
    /// Centre of the limb (first harmonic zero), 0-based pixel centres, `(x, y)`.
    pub centre_px: (f64, f64),
    /// Angle of the first sector's middle from +x towards +y, rad; the others follow evenly.
    pub first_rad: f64,
    /// The sectors, a full turn.
    pub sectors: Vec<SectorLimb>,
}

impl ObservedLimb {
    /// Angle of a sector's middle from +x towards +y, rad.
    pub fn angle_rad(&self, sector: usize) -> f64 {
        self.first_rad + std::f64::consts::TAU * sector as f64 / self.sectors.len() as f64
    }

    /// Blur averaged over the good sectors: sharpness of the frame, which knows nothing of positions.
    pub fn mean_blur(&self) -> f64 {
        let mut sum = 0.0;
        let mut weight = 0.0;
        for it in self.sectors.iter().filter(|it| it.flag == Flag::Good) {
            let w = 1.0 / (it.blur_sigma * it.blur_sigma);
            sum += w * it.blur;
            weight += w;
        }
        sum / weight
    }
}

/// What the extraction needs beside the frame.
#[derive(Clone, Debug)]
pub struct Extraction<'a> {
    /// Template tables of this optics.
    pub table: &'a EdgeTable,
    /// Pixels of the annulus by sector.
    pub annulus: &'a Annulus,
    /// Dark, flat, bad pixels.
    pub calibration: &'a Calibration,
    /// Gain, read noise, saturation.
    pub detector: Detector,
    /// Predicted radius of the apparent limb by sector, arcsec.
    pub model_arcsec: &'a [f64],
    /// Its slope by detector angle, arcsec/rad.
    pub model_slope: &'a [f64],
    /// Blur to start from, and to lean on where a sector cannot tell.
    pub blur_start: f64,
}

/// Steps of the centre's refinement before it is called unstable.
const MAX_STEPS: usize = 12;

/// Steps after the first that are always taken.
const LEAST_STEPS: usize = 2;

/// A centre is settled when it moves by less than this, px.
const SETTLED_PX: f64 = 0.004;

/// Measures the limb of one raw frame.
///
/// # Errors
///
/// [`LimbError::TooFewSectors`] where less than half of the limb is usable, and
/// [`LimbError::Unstable`] where the centre does not settle.
pub fn extract(
    raw: ArrayView2<'_, f32>,
    start: Disk,
    setup: &Extraction<'_>,
) -> Result<ObservedLimb, LimbError> {
    let count = setup.annulus.sectors();
    let mut centre = (start.x_px, start.y_px);
    let mut fits =
        vec![sector::Fit::start(start.level_adu, start.sky_adu, setup.blur_start); count];
    let mut scratch = geometry::Pixels::default();
    let mut moved = f64::INFINITY;
    let mut steady = vec![true; count];
    for step in 0..MAX_STEPS {
        // Each round brings the fit a factor of some hundred nearer; the later steps start there.
        let rounds = if step == 0 { 3 } else { 1 };
        for (s, fit) in fits.iter_mut().enumerate() {
            setup.annulus.gather(s, raw, centre, setup, &mut scratch);
            fit.refine(&scratch, setup, s, rounds);
        }
        let (dx, dy) = harmonics::centre_offset(setup.annulus, &fits, &mut steady, step > 0);
        let scale = setup.annulus.scale_arcsec_px();
        moved = dx.hypot(dy) / scale;
        if !moved.is_finite() {
            break;
        }
        if moved < SETTLED_PX && step >= LEAST_STEPS {
            return finished(centre, &fits, setup);
        }
        centre = (centre.0 + dx / scale, centre.1 + dy / scale);
        for (s, fit) in fits.iter_mut().enumerate() {
            let theta = setup.annulus.angle_rad(s);
            fit.shift_arcsec -= dx * theta.cos() + dy * theta.sin();
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
    Err(LimbError::Unstable {
        moved_px: moved,
        steps: MAX_STEPS,
    })
}

/// The sectors' radii, when enough of them are good.
fn finished(
    centre: (f64, f64),
    fits: &[sector::Fit],
    setup: &Extraction<'_>,
) -> Result<ObservedLimb, LimbError> {
    let count = fits.len();
    let good = || fits.iter().filter(|it| it.flag == Flag::Good);
    let dim = harmonics::DIM * blemish::median(good().map(|it| it.gain_adu));
    let found = good().filter(|it| it.gain_adu > dim).count();
    if 2 * found < count {
        return Err(LimbError::TooFewSectors {
            found,
            sectors: count,
            needed: count.div_ceil(2),
        });
    }
    let sectors = fits
        .iter()
        .enumerate()
        .map(|(s, fit)| SectorLimb {
            radius_arcsec: setup.model_arcsec[s] + fit.shift_arcsec,
            sigma_arcsec: fit.shift_sigma_arcsec,
            blur: fit.blur,
            blur_sigma: fit.blur_sigma,
            gain_adu: fit.gain_adu,
            background_adu: fit.background_adu,
            misfit: fit.misfit,
            flag: if fit.flag == Flag::Good && fit.gain_adu <= dim {
                Flag::Misfit
            } else {
                fit.flag
            },
        })
        .collect();
    Ok(ObservedLimb {
        centre_px: centre,
        first_rad: setup.annulus.angle_rad(0),
        sectors,
    })
}
