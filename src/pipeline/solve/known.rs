//! What is known before the fit: the air's refractivity, the camera, the clock, the instrument.

use super::above_the_air;
use super::drivers::{drift, drivers};
use crate::pipeline::Error;
use crate::pipeline::measure::MeasuredSequence;
use crate::session::Session;
use crate::shape::{Driver, Known, RefractivityInput};
use crate::units::DEG_RAD;

/// Residual fixed to the vertical that the fit allows for, mas.
const VERTICAL_SIGMA_MAS: f64 = 0.3;

/// Standard uncertainty of the refractivity formula, in `n - 1`: 2e-8 stated for laboratory
/// pressures, doubled for mountain stations outside the stated range.
const FORMULA_SIGMA: f64 = 4e-8;

/// What is known before the fit.
///
/// # Errors
///
/// When the readings of [environment] do not cover the frames.
pub(in crate::pipeline) fn known(
    session: &Session,
    measured: &[MeasuredSequence],
) -> Result<Known, Error> {
    let air: Vec<AirInput> = measured.iter().map(AirInput::of).collect();
    Ok(with_drivers(session, &air, drivers(session, measured)?))
}

/// What is known before a fit of frames that are still to come, at these seconds after the first; the
/// readings of [environment] are not there yet.
pub(in crate::pipeline) fn known_ahead(
    session: &Session,
    air: &[AirInput],
    seconds: &[f64],
) -> Known {
    with_drivers(session, air, drift(session, seconds).into_iter().collect())
}

/// What the refractivity of one stretch of frames rests on.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(in crate::pipeline) struct AirInput {
    /// Refractivity at the telescope.
    pub refractivity: f64,
    /// Relative change of it by pressure, temperature, humidity, wavelength.
    pub sensitivities: [f64; 4],
}

impl AirInput {
    fn of(measured: &MeasuredSequence) -> Self {
        Self {
            refractivity: measured.middle.refractivity,
            sensitivities: measured.sensitivities,
        }
    }
}

fn with_drivers(session: &Session, air: &[AirInput], drivers: Vec<Driver>) -> Known {
    let refractivity = if above_the_air(session) {
        Vec::new()
    } else {
        refractivity_inputs(session, air)
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
        vertical_direction_sigma_arcmin: plumb_sigma_arcmin(session),
        clock_sigma_s: session.time.clock_sigma_s,
        tilt_sigma_arcmin: if above_the_air(session) {
            0.0
        } else {
            session.refractivity.layer_tilt_sigma_arcmin
        },
        tilt_tau_s: 60.0 * session.refractivity.layer_tilt_tau_min,
        distortion_sigma_mas: session.instrument.distortion_sigma_mas,
        drivers,
    }
}

/// Deflection of the vertical where the session gives none, and what is left where it does: common
/// practice, no source (10 to 60 arcsec in mountains), arcmin.
const PLUMB_SIGMA_ARCMIN: (f64, f64) = (0.25, 0.03);

/// How well the station's vertical is known, each axis.
fn plumb_sigma_arcmin(session: &Session) -> f64 {
    let site = &session.site;
    if site.deflection_north_arcsec == 0.0 && site.deflection_east_arcsec == 0.0 {
        PLUMB_SIGMA_ARCMIN.0
    } else {
        PLUMB_SIGMA_ARCMIN.1
    }
}

/// Relative standard uncertainty of one sequence's refractivity; zero above the air.
pub(in crate::pipeline) fn refractivity_sigma_rel(
    session: &Session,
    measured: &MeasuredSequence,
) -> f64 {
    if above_the_air(session) {
        return 0.0;
    }
    refractivity_inputs(session, &[AirInput::of(measured)])
        .iter()
        .map(|it| it.sigma_rel.powi(2))
        .sum::<f64>()
        .sqrt()
}

/// What makes the air's refractivity uncertain, each with its relative standard uncertainty.
fn refractivity_inputs(session: &Session, air: &[AirInput]) -> Vec<RefractivityInput> {
    let n = air.len() as f64;
    let mean = |k: usize| (air.iter().map(|it| it.sensitivities[k]).sum::<f64>() / n).abs();
    let refractivity = air.iter().map(|it| it.refractivity).sum::<f64>() / n;
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
