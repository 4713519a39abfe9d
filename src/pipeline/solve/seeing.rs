//! The seeing: by the motion of the limb and by its width.

use super::{above_the_air, aperture};
use crate::pipeline::correct::CorrectedSequence;
use crate::pipeline::measure::MeasuredSequence;
use crate::seeing::{HarmonicSeries, LEAST_FRAMES, MotionSeeing, Setup, by_motion};
use crate::session::Session;
use crate::shape::REFERENCE_RADIUS_MAS;
use crate::units::MAS_RAD;
use ndarray::Array2;

/// What the air did, by both ways.
#[derive(Clone, Debug)]
pub(in crate::pipeline) struct SeeingResult {
    /// By the limb's motion, or why not.
    pub motion: Result<MotionSeeing, String>,
    /// By the limb's width: Fried's parameter at 500 nm at the zenith and towards the Sun, m.
    pub blur: Result<BlurSeeing, String>,
}

/// Fried's parameter from the limb's width.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(in crate::pipeline) struct BlurSeeing {
    /// At 500 nm at the zenith, m.
    pub zenith_m: f64,
    /// Its standard uncertainty, m.
    pub sigma_m: f64,
}

/// Relative systematic uncertainty of a seeing width from the limb: the Sun's edge and the family of
/// transfer functions.
const BLUR_MODEL_SIGMA: f64 = 0.06;

/// Pixels above this say nothing of the width, arcsec.
const LARGEST_PIXEL_ARCSEC: f64 = 2.6;

/// Fried's parameter above this many apertures says nothing through the width.
const LARGEST_APERTURES: f64 = 1.5;

/// Estimates the seeing from all sequences.
pub(in crate::pipeline) fn seeing(
    session: &Session,
    measured: &[MeasuredSequence],
    limbs: &[CorrectedSequence],
) -> SeeingResult {
    let none = above_the_air(session);
    if none {
        let reason = "above the air".to_owned();
        return SeeingResult {
            motion: Err(reason.clone()),
            blur: Err(reason),
        };
    }
    SeeingResult {
        motion: motion(session, measured, limbs),
        blur: blur(session, measured),
    }
}

/// Owned arrays of one sequence's harmonics.
struct Series {
    time_s: Vec<f64>,
    cos_mas: Array2<f64>,
    sin_mas: Array2<f64>,
    noise_mas2: Vec<f64>,
}

/// The seeing by the limb's motion, of the sequences that are long enough.
fn motion(
    session: &Session,
    measured: &[MeasuredSequence],
    limbs: &[CorrectedSequence],
) -> Result<MotionSeeing, String> {
    let owned: Vec<Series> = measured
        .iter()
        .zip(limbs)
        .map(|(m, l)| series(m, l))
        .collect();
    let list: Vec<HarmonicSeries<'_>> = owned
        .iter()
        .zip(measured)
        .filter(|(it, _)| it.time_s.len() >= LEAST_FRAMES)
        .map(|(it, m)| HarmonicSeries {
            time_s: &it.time_s,
            cos_mas: &it.cos_mas,
            sin_mas: &it.sin_mas,
            noise_variance_mas2: &it.noise_mas2,
            zenith_rad: m.middle.sun.zenith_true_rad,
            sector_rad: m.setup.annulus.sector_rad(),
            limb_radius_rad: REFERENCE_RADIUS_MAS * MAS_RAD / m.middle.sun.distance_au,
            exposure_s: m.exposure_s,
        })
        .collect();
    let Some(first) = measured.first() else {
        return Err("no sequence".to_owned());
    };
    let mut setup = Setup::new(aperture(session), first.setup.optics.wavelength_nm);
    // Gaps in the limb lower the number of harmonics; all sequences are taken to the same.
    let highest = list.iter().map(|it| it.cos_mas.ncols()).min().unwrap_or(0);
    setup.m_max = setup.m_max.min(highest.saturating_sub(1));
    by_motion(&list, &setup).map_err(|it| it.to_string())
}

/// A sequence's harmonics as seen (not at 1 AU), of the frames that have the usual number of them.
fn series(measured: &MeasuredSequence, limbs: &CorrectedSequence) -> Series {
    let mut highest: Vec<usize> = limbs
        .frames
        .iter()
        .map(|it| it.harmonics.cos.len())
        .collect();
    highest.sort_unstable();
    let usual = highest.get(highest.len() / 2).copied().unwrap_or(0);
    let frames: Vec<_> = limbs
        .frames
        .iter()
        .filter(|it| it.harmonics.cos.len() >= usual)
        .collect();
    let distance = measured.middle.sun.distance_au;
    let pick = |f: &dyn Fn(usize, usize) -> f64| {
        Array2::from_shape_fn((frames.len(), usual), |(k, m)| f(k, m) / distance)
    };
    let start = measured.frames.first().map(|it| it.utc);
    Series {
        time_s: frames
            .iter()
            .map(|it| start.map_or(0.0, |s| measured.frames[it.measured].utc.minus(s)))
            .collect(),
        cos_mas: pick(&|k, m| frames[k].harmonics.cos[m]),
        sin_mas: pick(&|k, m| frames[k].harmonics.sin[m]),
        noise_mas2: (0..usual)
            .map(|m| {
                let sum: f64 = frames.iter().map(|it| it.noise_mas2[m]).sum();
                sum / frames.len() as f64 / (distance * distance)
            })
            .collect(),
    }
}

/// The seeing by the limb's width, where pixels and air let it tell.
fn blur(session: &Session, measured: &[MeasuredSequence]) -> Result<BlurSeeing, String> {
    let Some(first) = measured.first() else {
        return Err("no sequence".to_owned());
    };
    let pixel = first.setup.scale_arcsec_px;
    if pixel > LARGEST_PIXEL_ARCSEC {
        return Err(format!(
            "pixels of {pixel:.2} arcsec are too large for the width of the limb to tell the seeing; up to {LARGEST_PIXEL_ARCSEC} arcsec"
        ));
    }
    let known: Vec<f64> = measured.iter().filter_map(blur_r0_m).collect();
    if known.is_empty() {
        return Err("the limb is as sharp as the telescope alone makes it".to_owned());
    }
    let strength = known.iter().map(|it| it.powf(-5.0 / 3.0)).sum::<f64>() / known.len() as f64;
    let zenith_m = strength.powf(-0.6);
    let largest = LARGEST_APERTURES * session.telescope.aperture_m;
    let at_wavelength = zenith_m * (first.setup.optics.wavelength_nm / 500.0).powf(1.2);
    if at_wavelength > largest {
        return Err(format!(
            "Fried's parameter of {at_wavelength:.2} m at the observing wavelength is above {largest:.2} m, where the width says little"
        ));
    }
    let n = known.len() as f64;
    let scatter = if known.len() > 1 {
        (known.iter().map(|it| (it - zenith_m).powi(2)).sum::<f64>() / (n - 1.0) / n).sqrt()
    } else {
        0.0
    };
    Ok(BlurSeeing {
        zenith_m,
        sigma_m: scatter.hypot(BLUR_MODEL_SIGMA * zenith_m),
    })
}

/// Fried's parameter of one sequence from the mean blur of its frames, 500 nm, zenith, m.
fn blur_r0_m(measured: &MeasuredSequence) -> Option<f64> {
    let blurs: Vec<f64> = measured
        .frames
        .iter()
        .map(|it| it.limb.mean_blur())
        .filter(|it| it.is_finite())
        .collect();
    let mean = blurs.iter().sum::<f64>() / blurs.len() as f64;
    frame_r0_m(measured, mean).map(|it| it * zenith_factor(measured))
}

/// Fried's parameter at 500 nm towards the Sun of a blur, m.
pub(in crate::pipeline) fn frame_r0_m(measured: &MeasuredSequence, blur: f64) -> Option<f64> {
    if !(blur > 0.0) {
        return None;
    }
    let wavelength_nm = measured.setup.optics.wavelength_nm;
    let width_rad = crate::limb::template::width_of_blur_arcsec(blur) * crate::units::ARCSEC_RAD;
    let r0_m = wavelength_nm * 1e-9 / width_rad;
    Some(r0_m * (500.0 / wavelength_nm).powf(1.2))
}

/// From towards the Sun to the zenith.
pub(in crate::pipeline) fn zenith_factor(measured: &MeasuredSequence) -> f64 {
    measured.middle.sun.zenith_true_rad.cos().powf(-0.6)
}
