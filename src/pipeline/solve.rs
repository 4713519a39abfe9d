//! Seeing, selection and shape of the corrected limbs.

use super::Error;
use super::correct::CorrectedSequence;
use super::limb_model::LimbModel;
use super::measure::MeasuredSequence;
use crate::result::record::KeptPoint;
use crate::seeing::{self, HarmonicSeries, MotionSeeing};
use crate::select::{self, Candidate, FIRST_JUDGING};
use crate::session::{Session, WeatherSource};
use crate::shape::{
    self, Block, Fit, Known, LARGEST_ZENITH_DEG, Observation, RefractivityInput, Separability,
    ShapeError, SineTerms,
};
use crate::turbulence::Aperture;
use crate::units::{DEG_RAD, MAS_RAD};
use ndarray::Array2;

/// What the air did, by both ways.
#[derive(Clone, Debug)]
pub(super) struct SeeingResult {
    /// By the limb's motion, or why not.
    pub motion: Result<MotionSeeing, String>,
    /// By the limb's width: Fried's parameter at 500 nm at the zenith and towards the Sun, m.
    pub blur: Result<BlurSeeing, String>,
}

/// Fried's parameter from the limb's width.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct BlurSeeing {
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

/// Residual fixed to the vertical that the fit allows for, mas.
const VERTICAL_SIGMA_MAS: f64 = 0.3;

/// Standard uncertainty of the refractivity formula, in `n - 1`: 2e-8 stated for laboratory
/// pressures, doubled for mountain stations outside the stated range.
const FORMULA_SIGMA: f64 = 4e-8;

/// Estimates the seeing from all sequences.
pub(super) fn seeing(
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

/// Whether the session has no air.
pub(super) fn above_the_air(session: &Session) -> bool {
    matches!(session.weather.source, WeatherSource::None)
}

/// The telescope's aperture as the kernels take it.
pub(super) fn aperture(session: &Session) -> Aperture {
    Aperture {
        diameter_m: session.telescope.aperture_m,
        obstruction: session.telescope.central_obstruction,
    }
}

/// Owned arrays of one sequence's harmonics.
struct Series {
    time_s: Vec<f64>,
    cos_mas: Array2<f64>,
    sin_mas: Array2<f64>,
    noise_mas2: Vec<f64>,
}

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
        .filter(|(it, _)| it.time_s.len() >= seeing::LEAST_FRAMES)
        .map(|(it, m)| HarmonicSeries {
            time_s: &it.time_s,
            cos_mas: &it.cos_mas,
            sin_mas: &it.sin_mas,
            noise_variance_mas2: &it.noise_mas2,
            zenith_rad: m.middle.sun.zenith_true_rad,
            sector_rad: m.setup.annulus.sector_rad(),
            limb_radius_rad: shape::REFERENCE_RADIUS_MAS * MAS_RAD / m.middle.sun.distance_au,
            exposure_s: m.exposure_s,
        })
        .collect();
    let Some(first) = measured.first() else {
        return Err("no sequence".to_owned());
    };
    let mut setup = seeing::Setup::new(aperture(session), first.setup.optics.wavelength_nm);
    // Gaps in the limb lower the number of harmonics; all sequences are taken to the same.
    let highest = list.iter().map(|it| it.cos_mas.ncols()).min().unwrap_or(0);
    setup.m_max = setup.m_max.min(highest.saturating_sub(1));
    seeing::by_motion(&list, &setup).map_err(|it| it.to_string())
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
pub(super) fn frame_r0_m(measured: &MeasuredSequence, blur: f64) -> Option<f64> {
    if !(blur > 0.0) {
        return None;
    }
    let wavelength_nm = measured.setup.optics.wavelength_nm;
    let width_rad = crate::limb::template::width_of_blur_arcsec(blur) * crate::units::ARCSEC_RAD;
    let r0_m = wavelength_nm * 1e-9 / width_rad;
    Some(r0_m * (500.0 / wavelength_nm).powf(1.2))
}

/// From towards the Sun to the zenith.
pub(super) fn zenith_factor(measured: &MeasuredSequence) -> f64 {
    measured.middle.sun.zenith_true_rad.cos().powf(-0.6)
}

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

/// The frames that go to the shape, with weights from the seeing.
#[derive(Clone, Debug)]
pub(super) struct Selected {
    /// All usable frames.
    pub observations: Vec<Observation>,
    /// Which sequence (by position) and corrected frame each is.
    pub origin: Vec<(usize, usize)>,
    /// What selection saw of them.
    pub candidates: Vec<Candidate>,
}

/// Weighs every usable frame of the sequences that go to the shape.
///
/// # Errors
///
/// When the Sun stood too low in all of them.
pub(super) fn select(
    measured: &[MeasuredSequence],
    limbs: &[CorrectedSequence],
) -> Result<Selected, ShapeError> {
    if measured.iter().all(|it| it.set_aside.is_some()) {
        let highest_deg = measured
            .iter()
            .map(|it| it.middle.sun.zenith_true_rad.to_degrees())
            .fold(f64::INFINITY, |a, b| if b < a { b } else { a });
        return Err(ShapeError::TooLow {
            limit_deg: LARGEST_ZENITH_DEG,
            highest_deg,
        });
    }
    let start = measured[0].frames[0].utc;
    let mut out = Selected {
        observations: Vec::new(),
        origin: Vec::new(),
        candidates: Vec::new(),
    };
    for (position, (sequence, corrected)) in measured.iter().zip(limbs).enumerate() {
        if sequence.set_aside.is_some() {
            continue;
        }
        for (k, it) in corrected.frames.iter().enumerate() {
            let frame = &sequence.frames[it.measured];
            out.candidates.push(Candidate {
                sequence: sequence.index,
                blur: frame.limb.mean_blur(),
                high_power: (FIRST_JUDGING..it.harmonics.cos.len())
                    .map(|m| {
                        0.5 * (it.harmonics.cos[m].powi(2) + it.harmonics.sin[m].powi(2))
                            - it.noise_mas2[m]
                    })
                    .collect(),
            });
            let (axis_rad, zenith_rad) = frame.moment.axis_and_zenith_rad();
            let (c, s, n) = (&it.harmonics.cos, &it.harmonics.sin, &it.noise_mas2);
            out.observations.push(Observation {
                sequence: sequence.index,
                time_s: frame.utc.minus(start),
                axis_rad,
                zenith_rad,
                b0_rad: frame.moment.sun.b0_rad,
                weight: 1.0,
                harmonics_mas: [c[0], c[2], s[2], c[3], s[3], c[4], s[4]],
                noise_mas2: [n[0], n[2], n[2], n[3], n[3], n[4], n[4]],
                air: frame.air,
            });
            out.origin.push((position, k));
        }
    }
    for (it, weight) in out
        .observations
        .iter_mut()
        .zip(select::weights(&out.candidates))
    {
        it.weight = weight;
    }
    Ok(out)
}

/// What is known before the fit.
pub(super) fn known(session: &Session, measured: &[MeasuredSequence]) -> Known {
    let refractivity = if above_the_air(session) {
        Vec::new()
    } else {
        refractivity_inputs(session, measured)
    };
    let camera = &session.camera;
    Known {
        vertical_sigma_mas: if refractivity.is_empty() {
            0.0
        } else {
            VERTICAL_SIGMA_MAS
        },
        refractivity,
        camera_angle_sigma_rad: camera.angle_sigma_deg * DEG_RAD,
        scale_sigma_rel: camera.scale_sigma_rel,
        clock_sigma_s: session.time.clock_sigma_s,
        tilt_sigma_arcmin: if above_the_air(session) {
            0.0
        } else {
            session.refractivity.layer_tilt_sigma_arcmin
        },
        tilt_tau_s: 60.0 * session.refractivity.layer_tilt_tau_min,
        distortion_sigma_mas: session.instrument.distortion_sigma_mas,
    }
}

fn refractivity_inputs(session: &Session, measured: &[MeasuredSequence]) -> Vec<RefractivityInput> {
    let n = measured.len() as f64;
    let mean = |k: usize| (measured.iter().map(|it| it.sensitivities[k]).sum::<f64>() / n).abs();
    let refractivity = measured
        .iter()
        .map(|it| it.middle.refractivity)
        .sum::<f64>()
        / n;
    let weather = &session.weather;
    let line = |term, sigma_rel, scope, how: String| RefractivityInput {
        term,
        sigma_rel,
        scope,
        how,
    };
    vec![
        line(
            "pressure",
            mean(0) * weather.pressure_sigma_hpa,
            "session",
            format!(
                "weather.pressure_sigma_hpa = {} through the refractivity",
                weather.pressure_sigma_hpa
            ),
        ),
        line(
            "temperature",
            mean(1) * weather.temperature_sigma_c,
            "session",
            format!(
                "weather.temperature_sigma_c = {} through the refractivity",
                weather.temperature_sigma_c
            ),
        ),
        line(
            "humidity",
            mean(2) * weather.humidity_sigma,
            "session",
            format!(
                "weather.humidity_sigma = {} through the refractivity",
                weather.humidity_sigma
            ),
        ),
        line(
            "wavelength",
            mean(3) * session.refractivity.wavelength_sigma_nm,
            "session",
            format!(
                "refractivity.wavelength_sigma_nm = {} through the dispersion",
                session.refractivity.wavelength_sigma_nm
            ),
        ),
        line(
            "refractivity formula",
            FORMULA_SIGMA / refractivity,
            "model",
            "4e-8 in n: the formula's stated 2e-8, doubled outside its range of pressure"
                .to_owned(),
        ),
    ]
}

/// The shape of the kept frames and what goes with it.
#[derive(Clone, Debug)]
pub(super) struct Shape {
    /// The fit.
    pub fit: Fit,
    /// The blocks it was made of.
    pub blocks: Vec<Block>,
    /// What can be told apart.
    pub separability: Separability,
    /// Sine terms about the Sun's axis.
    pub sines: Option<SineTerms>,
    /// Inflation of the variance of a mean for m = 0, 2, 3, 4 by correlation in time.
    pub factor: [f64; 5],
    /// Which of the usable frames were kept.
    pub kept: Vec<bool>,
    /// Kept fraction.
    pub fraction: f64,
    /// Error with all frames over error with the kept ones.
    pub gain: f64,
    /// Shape against kept fraction.
    pub curve: Vec<KeptPoint>,
    /// Early minus late half of the session: oblateness and its uncertainty, mas.
    pub halves: Option<(f64, f64)>,
    /// The frames that were fitted.
    pub observations: Vec<Observation>,
}

/// Fractions of the curve of the shape against what is kept.
const FRACTIONS: [f64; 6] = [1.0, 0.8, 0.6, 0.4, 0.2, 0.1];

/// A smaller fraction must lower the random error by this to be taken: the errors are estimates.
const MUST_PAY: f64 = 0.85;

/// Fits the shape, to all usable frames unless fewer of them do better.
///
/// # Errors
///
/// When there is nothing to fit.
pub(super) fn shape(selected: &Selected, known: &Known, model: &LimbModel) -> Result<Shape, Error> {
    let usable = selected.observations.len();
    let mut best: Option<(f64, f64, Vec<bool>)> = None;
    let mut whole_sigma = f64::NAN;
    let mut curve = Vec::new();
    for fraction in FRACTIONS {
        let kept = if fraction < 1.0 {
            select::sharpest(&selected.candidates, fraction)
        } else {
            vec![true; usable]
        };
        let Ok((fit, .., separability)) = fitted(&picked(selected, &kept), known) else {
            continue;
        };
        let [radius, oblateness, _] = fit.sigmas_mas(true);
        if fraction >= 1.0 {
            whole_sigma = oblateness;
        }
        curve.push(KeptPoint {
            fraction,
            frames: kept.iter().filter(|it| **it).count(),
            oblateness_mas: separability.oblateness.then(|| fit.oblateness_mas()),
            oblateness_sigma_mas: separability.oblateness.then_some(oblateness),
            radius_arcsec: (fit.radius_mas() - model.radius_bias_mas) / 1000.0,
            radius_sigma_mas: radius,
        });
        if best
            .as_ref()
            .is_none_or(|it| separability.oblateness && oblateness < MUST_PAY * it.1)
        {
            best = Some((fraction, oblateness, kept));
        }
    }
    let Some((fraction, sigma, kept)) = best else {
        return Err(ShapeError::TooFew {
            frames: usable,
            sequences: 0,
        }
        .into());
    };
    let observations = picked(selected, &kept);
    let (fit, blocks, factor, separability) = fitted(&observations, known)?;
    let sines = shape::sine_terms(&observations, &blocks, known, &separability);
    let halves = halves(&observations, known);
    Ok(Shape {
        gain: whole_sigma / sigma,
        fit,
        blocks,
        separability,
        sines,
        factor,
        kept,
        fraction,
        curve,
        halves,
        observations,
    })
}

/// The kept observations.
fn picked(selected: &Selected, kept: &[bool]) -> Vec<Observation> {
    selected
        .observations
        .iter()
        .zip(kept)
        .filter(|(_, kept)| **kept)
        .map(|(it, _)| *it)
        .collect()
}

type Fitted = (Fit, Vec<Block>, [f64; 5], Separability);

fn fitted(observations: &[Observation], known: &Known) -> Result<Fitted, ShapeError> {
    let sequences = {
        let mut it: Vec<usize> = observations.iter().map(|it| it.sequence).collect();
        it.dedup();
        it.len()
    };
    if observations.len() < sequences + 1 {
        return Err(ShapeError::TooFew {
            frames: observations.len(),
            sequences,
        });
    }
    let (blocks, factor, _) = shape::blocks(observations);
    let separability = shape::judge(observations, &blocks, known.distortion_sigma_mas.is_some());
    let fit = shape::fit(observations, &blocks, known, &separability)?;
    Ok((fit, blocks, factor, separability))
}

/// Oblateness of the early half of the sequences minus the late half, where both can tell it.
fn halves(observations: &[Observation], known: &Known) -> Option<(f64, f64)> {
    let mut sequences: Vec<usize> = observations.iter().map(|it| it.sequence).collect();
    sequences.dedup();
    let middle = *sequences.get(sequences.len() / 2)?;
    let half = |early: bool| -> Option<Fit> {
        let part: Vec<Observation> = observations
            .iter()
            .filter(|it| (it.sequence < middle) == early)
            .copied()
            .collect();
        let (fit, .., separability) = fitted(&part, known).ok()?;
        separability.oblateness.then_some(fit)
    };
    let (a, b) = (half(true)?, half(false)?);
    let sigma = a.sigmas_mas(true)[1].hypot(b.sigmas_mas(true)[1]);
    Some((a.oblateness_mas() - b.oblateness_mas(), sigma))
}
