//! The seeing: by the motion of the limb and by its width, how fast it changes, the floor it sets.

use super::blur::{blur, noise_warning};
use super::floor::{HarmonicFloor, floors, slow_air};
use super::noise::{NoiseRatio, noise_ratio};
use super::{above_the_air, aperture};
use crate::pipeline::correct::CorrectedSequence;
use crate::pipeline::measure::MeasuredSequence;
use crate::seeing::{
    BlurSeeing, Coherence, HarmonicSeries, LEAST_FRAMES, MotionSeeing, Setup, by_motion, coherence,
};
use crate::session::Session;
use crate::shape::REFERENCE_RADIUS_MAS;
use crate::turbulence::Tilt;
use crate::units::MAS_RAD;
use ndarray::Array2;
use rayon::prelude::*;

/// What the air did, by every way; what was not found has its reason.
#[derive(Clone, Debug)]
pub(in crate::pipeline) struct SeeingResult {
    /// By the limb's motion.
    pub motion: Result<MotionSeeing, String>,
    /// By the limb's width.
    pub blur: Result<BlurSeeing, String>,
    /// Coherence time of the session.
    pub coherence: Result<Coherence, String>,
    /// What each sequence alone says, in the order of the measured sequences.
    pub each: Vec<SequenceAir>,
    /// Floors of the harmonics.
    pub floors: Result<Vec<HarmonicFloor>, String>,
    /// Noise of the limb over its expectation.
    pub noise: Option<NoiseRatio>,
    /// What the reader must know, with a code.
    pub warnings: Vec<(&'static str, String)>,
}

/// One sequence's air.
#[derive(Clone, Debug)]
pub(in crate::pipeline) struct SequenceAir {
    /// Fried's parameter by motion, 500 nm, towards the Sun, and its standard uncertainty, m.
    pub motion: Result<(f64, f64), String>,
    /// Fried's parameter by width, 500 nm, zenith, and its standard uncertainty, m.
    pub blur: Result<(f64, f64), String>,
    /// Coherence time.
    pub coherence: Result<Coherence, String>,
    /// Strength of the motion of each corrected frame over the sequence's mean, by harmonics m >= 5.
    pub strength: Vec<f64>,
}

/// Estimates the seeing from all sequences.
pub(in crate::pipeline) fn seeing(
    session: &Session,
    measured: &[MeasuredSequence],
    limbs: &[CorrectedSequence],
) -> SeeingResult {
    let none = |reason: &str| SequenceAir {
        motion: Err(reason.to_owned()),
        blur: Err(reason.to_owned()),
        coherence: Err(reason.to_owned()),
        strength: Vec::new(),
    };
    if above_the_air(session) {
        let reason = "above the air".to_owned();
        return SeeingResult {
            motion: Err(reason.clone()),
            blur: Err(reason.clone()),
            coherence: Err(reason.clone()),
            each: measured.iter().map(|_| none(&reason)).collect(),
            floors: Err(reason),
            noise: None,
            warnings: Vec::new(),
        };
    }
    let ratios: Vec<Option<NoiseRatio>> = measured.par_iter().map(noise_ratio).collect();
    // Limbs of a table bring the ratio of the run that measured them.
    let noise = pooled(&ratios).or_else(|| {
        let saved = measured.iter().find_map(|it| it.saved_noise);
        saved.map(|(value, sigma)| NoiseRatio { value, sigma })
    });
    let owned: Vec<Series> = measured
        .iter()
        .zip(limbs)
        .map(|(m, l)| series(m, l, noise.map_or(1.0, |it| it.value)))
        .collect();
    let long: Vec<usize> = (0..owned.len())
        .filter(|&k| owned[k].time_s.len() >= LEAST_FRAMES)
        .collect();
    let mut warnings = Vec::new();
    warnings.extend(
        noise
            .as_ref()
            .and_then(noise_warning)
            .map(|it| ("noise", it)),
    );
    let setup = setup(session, measured, long.iter().map(|&k| &owned[k]));
    let motion = setup.as_ref().map_err(Clone::clone).and_then(|setup| {
        let list: Vec<HarmonicSeries<'_>> = long
            .iter()
            .map(|&k| owned[k].as_seen(&measured[k]))
            .collect();
        by_motion(&list, setup).map_err(|it| it.to_string())
    });

    let mut each: Vec<SequenceAir> = measured.iter().map(|_| none("too few frames")).collect();
    match &motion {
        Ok(found) => {
            for (&k, own) in long.iter().zip(&found.sequences) {
                each[k].motion = Ok((own.r0_los_500nm_m, own.r0_los_sigma_m));
            }
            let memories: Vec<Result<Coherence, String>> = long
                .par_iter()
                .zip(&found.sequences)
                .map(|(&k, own)| {
                    let r0 = (own.r0_los_500nm_m, own.relative_sigma);
                    let share = setup.as_ref().map_or(0.0, |it| it.zernike_share);
                    let tilt = Tilt::Between {
                        zernike_share: share,
                    };
                    let seen = owned[k].as_seen(&measured[k]);
                    coherence(&seen, &found.profile, &aperture(session), tilt, r0)
                        .map_err(|it| it.to_string())
                })
                .collect();
            for (&k, it) in long.iter().zip(memories) {
                each[k].coherence = it;
            }
        }
        Err(reason) => each = measured.iter().map(|_| none(reason)).collect(),
    }
    let by_motion: Vec<Option<(f64, f64)>> = (0..measured.len())
        .map(|k| {
            let found = motion.as_ref().ok()?;
            let at = long.iter().position(|it| *it == k)?;
            let own = &found.sequences[at];
            Some((own.r0_los_500nm_m, own.relative_sigma))
        })
        .collect();
    let blur = blur(session, measured, motion.as_ref().ok(), &by_motion);
    for (k, it) in each.iter_mut().enumerate() {
        it.blur = match &blur {
            Ok(found) => found.sequences[k]
                .ok_or_else(|| "the limb is as sharp as the telescope alone makes it".to_owned()),
            Err(reason) => Err(reason.clone()),
        };
        it.strength = owned[k].strength();
    }
    let coherence = session_coherence(&each);
    let floors = match (&motion, &setup) {
        (Ok(found), Ok(setup)) => {
            let pairs: Vec<_> = long.iter().map(|&k| (&owned[k], &measured[k])).collect();
            let wind_m_s = coherence.as_ref().map_or(setup.wind_m_s, |it| it.wind_m_s);
            floors(found, setup, &pairs, wind_m_s)
        }
        (Err(reason), _) | (_, Err(reason)) => Err(reason.clone()),
    };
    warnings.extend(
        floors
            .as_ref()
            .ok()
            .and_then(|it| slow_air(it))
            .map(|it| ("slow-air", it)),
    );
    SeeingResult {
        motion,
        blur,
        coherence,
        each,
        floors,
        noise,
        warnings,
    }
}

/// The ratios of all sequences, weighted by what is known of each.
fn pooled(ratios: &[Option<NoiseRatio>]) -> Option<NoiseRatio> {
    let (mut sum, mut weight) = (0.0, 0.0);
    for it in ratios.iter().flatten() {
        let w = (it.value / it.sigma).powi(2);
        sum += w * it.value;
        weight += w;
    }
    (weight > 0.0).then(|| {
        let value = sum / weight;
        NoiseRatio {
            value,
            sigma: value / weight.sqrt(),
        }
    })
}

/// Mean of the sequences whose cadence allowed it, or the first reason.
fn session_coherence(each: &[SequenceAir]) -> Result<Coherence, String> {
    let found: Vec<&Coherence> = each
        .iter()
        .filter_map(|it| it.coherence.as_ref().ok())
        .collect();
    if found.is_empty() {
        let first = each
            .iter()
            .find_map(|it| it.coherence.as_ref().err().cloned());
        return Err(first.unwrap_or_else(|| "no sequence".to_owned()));
    }
    let n = found.len() as f64;
    let mean = |f: &dyn Fn(&Coherence) -> f64| found.iter().map(|it| f(it)).sum::<f64>() / n;
    // The error of one speed for all layers is common to the sequences: it does not average.
    Ok(Coherence {
        time_s: mean(&|it| it.time_s),
        sigma_s: mean(&|it| it.sigma_s),
        wind_m_s: mean(&|it| it.wind_m_s),
        correlation: mean(&|it| it.correlation),
    })
}

/// The instrument and the harmonics that all sequences have.
fn setup<'a>(
    session: &Session,
    measured: &[MeasuredSequence],
    long: impl Iterator<Item = &'a Series>,
) -> Result<Setup, String> {
    let Some(first) = measured.first() else {
        return Err("no sequence".to_owned());
    };
    let mut setup = Setup::new(aperture(session), first.setup.optics.wavelength_nm);
    // Gaps in the limb lower the number of harmonics; all sequences are taken to the same.
    let highest = long.map(|it| it.cos_mas.ncols()).min().unwrap_or(0);
    setup.m_max = setup.m_max.min(highest.saturating_sub(1));
    Ok(setup)
}

/// Owned arrays of one sequence's harmonics, as seen (not at 1 AU).
pub(super) struct Series {
    pub(super) time_s: Vec<f64>,
    pub(super) cos_mas: Array2<f64>,
    pub(super) sin_mas: Array2<f64>,
    pub(super) noise_mas2: Vec<f64>,
    /// Which of these frames each corrected frame is.
    place: Vec<Option<usize>>,
}

impl Series {
    /// As the estimators take it.
    pub(super) fn as_seen(&self, m: &MeasuredSequence) -> HarmonicSeries<'_> {
        HarmonicSeries {
            time_s: &self.time_s,
            cos_mas: &self.cos_mas,
            sin_mas: &self.sin_mas,
            noise_variance_mas2: &self.noise_mas2,
            zenith_rad: m.middle.sun.zenith_true_rad,
            sector_rad: m.setup.annulus.sector_rad(),
            limb_radius_rad: REFERENCE_RADIUS_MAS * MAS_RAD / m.middle.sun.distance_au,
            exposure_s: m.exposure_s,
        }
    }

    /// Strength of the motion of each corrected frame over the mean, from the harmonics m >= 5; not a
    /// number where the frame has too few harmonics.
    fn strength(&self) -> Vec<f64> {
        let (frames, orders) = self.cos_mas.dim();
        let mut index = vec![0.0; frames];
        let mut used = 0.0;
        for m in 5..orders {
            let columns = [&self.cos_mas, &self.sin_mas].map(|it| it.column(m).to_vec());
            let centred: Vec<Vec<f64>> = columns
                .iter()
                .map(|it| {
                    let mean = it.iter().sum::<f64>() / frames as f64;
                    it.iter().map(|v| (v - mean).powi(2)).collect()
                })
                .collect();
            let power = centred.iter().flatten().sum::<f64>() / (2 * frames) as f64;
            let motion = power - self.noise_mas2[m];
            if motion > 0.5 * power {
                for (k, to) in index.iter_mut().enumerate() {
                    *to += (0.5 * (centred[0][k] + centred[1][k]) - self.noise_mas2[m]) / motion;
                }
                used += 1.0;
            }
        }
        self.place
            .iter()
            .map(|it| it.map_or(f64::NAN, |k| index[k] / used))
            .collect()
    }
}

/// A sequence's harmonics of the frames that have the usual number of them; the noise as expected times
/// what the halves of the pixels say.
fn series(measured: &MeasuredSequence, limbs: &CorrectedSequence, noise_ratio: f64) -> Series {
    let mut highest: Vec<usize> = limbs
        .frames
        .iter()
        .map(|it| it.harmonics.cos.len())
        .collect();
    highest.sort_unstable();
    let usual = highest.get(highest.len() / 2).copied().unwrap_or(0);
    let mut place = Vec::with_capacity(limbs.frames.len());
    let mut frames = Vec::new();
    for it in &limbs.frames {
        let usable = it.harmonics.cos.len() >= usual;
        place.push(usable.then_some(frames.len()));
        if usable {
            frames.push(it);
        }
    }
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
                noise_ratio * sum / frames.len() as f64 / (distance * distance)
            })
            .collect(),
        place,
    }
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
