//! The blur of every sequence put before the motion, with what edge and instrument do to it.

use super::noise::NoiseRatio;
use super::{aperture, zenith_factor};
use crate::budget;
use crate::limb::Extraction;
use crate::limb::template::EdgeTable;
use crate::pipeline::Error;
use crate::pipeline::measure::{MeasuredSequence, Setup, limb_optics, predicted};
use crate::seeing::{
    BlurReading, BlurSeeing, BlurSetup, MotionSeeing, OwnBlur, SeeingError, View, by_blur,
    within_sector_variance_mas2,
};
use crate::session::Session;
use crate::shape::REFERENCE_RADIUS_MAS;
use crate::turbulence::{Aperture, Tilt};
use crate::units::MAS_RAD;
use std::sync::Arc;

/// Blur of the instrument at which the response is worked out, standard deviation on an axis.
const TRIAL_ARCSEC: f64 = 0.6;

/// Largest blur of the instrument at which it is worked out anew.
const LARGEST_TRIAL_ARCSEC: f64 = 2.0;

/// Least blur at which the response is worked out, arcsec^(5/3).
const LEAST_BLUR: f64 = 0.3;

/// The seeing by the limb's width; `each` is by motion, per sequence.
pub(super) fn blur(
    session: &Session,
    measured: &[MeasuredSequence],
    motion: Option<&MotionSeeing>,
    each: &[Option<(f64, f64)>],
) -> Result<BlurSeeing, String> {
    let Some(first) = measured.first() else {
        return Err("no sequence".to_owned());
    };
    let setup = BlurSetup {
        aperture_m: session.telescope.aperture_m,
        pixel_arcsec: first.setup.scale_arcsec_px,
        motion_relative_sigma: motion.map_or(0.1, |it| it.r0_los_sigma_m / it.r0_los_500nm_m),
    };
    let mut readings: Vec<BlurReading> = measured
        .iter()
        .zip(each)
        .map(|(m, own)| {
            let mut it = reading(m, *own);
            if let (Some(found), Some((r0_m, _))) = (motion, own) {
                let aperture = aperture(session);
                it.within_arcsec2 =
                    within_sector_arcsec2(found, *r0_m, &aperture, m).unwrap_or(0.0);
            }
            it
        })
        .collect();
    // Where the pixels forbid the answer its response is not worked out.
    by_blur(&readings, &setup).map_err(|it| it.to_string())?;
    respond(session, measured, &mut readings, TRIAL_ARCSEC).map_err(|it| it.to_string())?;
    let found = by_blur(&readings, &setup).map_err(|it| it.to_string())?;
    match found.own {
        // The response is that to a blur of the size that was found.
        OwnBlur::Seen { sigma_arcsec, .. } if sigma_arcsec < LARGEST_TRIAL_ARCSEC => {
            respond(session, measured, &mut readings, sigma_arcsec).map_err(|it| it.to_string())?;
            by_blur(&readings, &setup).map_err(|it| it.to_string())
        }
        _ => Ok(found),
    }
}

/// Works out what every reading answers to the instrument and the edge.
fn respond(
    session: &Session,
    measured: &[MeasuredSequence],
    readings: &mut [BlurReading],
    trial_arcsec: f64,
) -> Result<(), Error> {
    for (index, m) in measured.iter().enumerate() {
        let known = (0..index).any(|k| Arc::ptr_eq(&measured[k].setup, &m.setup));
        if known {
            continue;
        }
        let same: Vec<usize> = (index..measured.len())
            .filter(|&k| Arc::ptr_eq(&measured[k].setup, &m.setup))
            .collect();
        // What the blur is without the trial's.
        let share = trial_arcsec * trial_arcsec;
        let blurs: Vec<f64> = same
            .iter()
            .map(|&k| readings[k].blur - readings[k].per_own * share)
            .collect();
        let response = Response::new(session, m, &blurs, trial_arcsec)?;
        for (k, blur) in same.into_iter().zip(blurs) {
            let (own, edge) = response.at(blur);
            readings[k].per_own = own;
            readings[k].per_edge = edge;
        }
    }
    Ok(())
}

/// Variance of the displacement within a sector of this sequence.
fn within_sector_arcsec2(
    motion: &MotionSeeing,
    r0_los_m: f64,
    aperture: &Aperture,
    m: &MeasuredSequence,
) -> Result<f64, SeeingError> {
    let view = View {
        zenith_rad: m.middle.sun.zenith_true_rad,
        limb_radius_rad: REFERENCE_RADIUS_MAS * MAS_RAD / m.middle.sun.distance_au,
        sector_rad: m.setup.annulus.sector_rad(),
        drift_m: 0.0,
    };
    let zenith_m = r0_los_m * zenith_factor(m);
    let strength = (zenith_m / motion.r0_zenith_500nm_m).powf(-5.0 / 3.0);
    let variance = within_sector_variance_mas2(&motion.profile, aperture, Tilt::Gradient, &view)?;
    Ok(1e-6 * strength * variance)
}

/// Mean blur of a sequence's frames.
fn reading(measured: &MeasuredSequence, by_motion: Option<(f64, f64)>) -> BlurReading {
    let blurs: Vec<f64> = measured
        .frames
        .iter()
        .map(|it| it.limb.mean_blur())
        .filter(|it| it.is_finite())
        .collect();
    let n = blurs.len() as f64;
    let mean = blurs.iter().sum::<f64>() / n;
    let scatter = blurs.iter().map(|it| (it - mean).powi(2)).sum::<f64>();
    BlurReading {
        blur: mean,
        // One frame alone: a third of itself, from the scatter of single exposures.
        blur_sigma: if n > 1.0 {
            (scatter / (n - 1.0) / n).sqrt()
        } else {
            0.33 * mean.abs()
        },
        frames: blurs.len(),
        wavelength_nm: measured.setup.optics.wavelength_nm,
        zenith_rad: measured.middle.sun.zenith_true_rad,
        by_motion,
        per_own: 0.0,
        per_edge: 0.0,
        within_arcsec2: 0.0,
    }
}

/// What the extraction reads for another edge and another instrument, at a few blurs.
struct Response {
    /// Blur, change by the square of the instrument's blur, change by one sigma of the edge.
    nodes: Vec<(f64, f64, f64)>,
}

impl Response {
    fn new(
        session: &Session,
        m: &MeasuredSequence,
        blurs: &[f64],
        trial_arcsec: f64,
    ) -> Result<Self, Error> {
        let setup: &Setup = &m.setup;
        let (model, slope) = predicted(setup, &m.middle);
        let (mut low, mut high) = (f64::INFINITY, LEAST_BLUR);
        for &it in blurs {
            let it = if it > LEAST_BLUR { it } else { LEAST_BLUR };
            low = if it < low { it } else { low };
            high = if it > high { it } else { high };
        }
        let extraction = Extraction {
            table: &setup.table,
            annulus: &setup.annulus,
            calibration: &setup.calibration,
            detector: setup.detector,
            model_arcsec: &model,
            model_slope: &slope,
            blur_start: 0.5 * (low + high),
        };
        let angles: Vec<f64> = (0..setup.annulus.sectors())
            .map(|s| setup.annulus.angle_rad(s))
            .collect();
        let sequence = &session.sequences[m.index];
        let km = session.limb.edge_scale_km + session.limb.edge_scale_sigma_km;
        let thicker = limb_optics(session, sequence, &m.middle, km)?;
        let pixel = setup.scale_arcsec_px;
        let edge = EdgeTable::new(&thicker, 0.0, pixel, &angles)?;
        let wider = EdgeTable::new(&setup.optics, trial_arcsec, pixel, &angles)?;
        let count = if high > 1.2 * low { 3 } else { 1 };
        let nodes = (0..count)
            .map(|k| {
                let blur = low + (high - low) * f64::from(k) / 2.0;
                let read = |table: &EdgeTable| -> Result<f64, Error> {
                    Ok(blur * budget::displacement(table, blur, &extraction)?.blur_ratio)
                };
                let own = read(&setup.table)?;
                let by_own = (read(&wider)? - own) / (trial_arcsec * trial_arcsec);
                Ok((blur, by_own, read(&edge)? - own))
            })
            .collect::<Result<_, Error>>()?;
        Ok(Self { nodes })
    }

    /// Both changes at a blur, in straight lines between the nodes and held beyond.
    fn at(&self, blur: f64) -> (f64, f64) {
        let last = self.nodes[self.nodes.len() - 1];
        if blur <= self.nodes[0].0 {
            return (self.nodes[0].1, self.nodes[0].2);
        }
        for pair in self.nodes.windows(2) {
            if blur <= pair[1].0 {
                let share = (blur - pair[0].0) / (pair[1].0 - pair[0].0);
                let between = |a: f64, b: f64| a + share * (b - a);
                return (between(pair[0].1, pair[1].1), between(pair[0].2, pair[1].2));
            }
        }
        (last.1, last.2)
    }
}

/// A word where the noise is not what photons and read noise let expect.
pub(super) fn noise_warning(it: &NoiseRatio) -> Option<String> {
    let off = it.value < 0.7 - 3.0 * it.sigma || it.value > 1.5 + 3.0 * it.sigma;
    off.then(|| {
        format!(
            "the noise of the limb is {:.2} +- {:.2} of what photons and read noise let expect (variance, by halves of the pixels); are camera.gain_e_adu and camera.read_noise_e right?",
            it.value, it.sigma
        )
    })
}
