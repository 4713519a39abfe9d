//! What the observer is told: `session.toml` and the weather log.

use std::fmt::Write;

use super::scenario::{MountKind, SequenceKind};
use super::sky_above::conditions;
use super::truth::KnowledgeErrors;
use super::{Scenario, SynthError};
use crate::sky::Utc;

/// Time between two rows of the weather log, s.
const LOG_STEP_S: f64 = 300.0;

/// The session file, as the observer would write it.
pub(super) fn session_toml(s: &Scenario, errors: &KnowledgeErrors, files: &[String]) -> String {
    let name = toml::Value::String(s.site.name.clone());
    let mount = match s.mount {
        MountKind::Equatorial => "equatorial",
        MountKind::Coelostat => "coelostat",
        MountKind::Altazimuth => "altazimuth",
        MountKind::Fixed => "fixed",
    };
    let scale = s.scale_arcsec_px * (1.0 + errors.scale_rel);
    let angle = s.camera_angle_deg + errors.angle_deg;
    let w = &s.weather;
    let mut out = format!(
        "# Made by `truelimb simulate`; what is true of it is in truth.json.\n\n\
         [site]\nname = {name}\nlatitude_deg = {:?}\nlongitude_deg = {:?}\nheight_m = {:?}\n\n\
         [telescope]\naperture_m = {:?}\ncentral_obstruction = {:?}\nmount = \"{mount}\"\n\n\
         [filter]\ncentre_nm = {:?}\nwidth_nm = {:?}\n\n\
         [camera]\nscale_arcsec_px = {scale:.8}\nscale_sigma_rel = {:?}\nscale_of = \"apparent\"\n\
         angle_deg = {angle:.6}\nangle_sigma_deg = {:?}\nprojection = \"tan\"\nparity = \"sky\"\n\
         gain_e_adu = {:?}\nread_noise_e = {:?}\nsaturation_adu = {}\n\n\
         [calibration]\ndark = [\"dark.fits\"]\nflat = [\"flat.fits\"]\n\n\
         [weather]\nlog = \"weather.csv\"\npressure_sigma_hpa = {:?}\ntemperature_sigma_c = {:?}\n\
         humidity_sigma = {:?}\n\n\
         [refractivity]\nlayer_tilt_sigma_arcmin = {:?}\nlayer_tilt_tau_min = {:?}\n",
        s.site.latitude_deg,
        s.site.longitude_deg,
        s.site.height_m,
        s.aperture_m,
        s.central_obstruction,
        s.wavelength_nm,
        s.width_nm,
        s.scale_sigma_rel,
        s.angle_sigma_deg,
        s.gain_e_adu,
        s.read_noise_e,
        s.saturation_adu,
        w.pressure_sigma_hpa,
        w.temperature_sigma_c,
        w.humidity_sigma,
        s.layer_tilt_sigma_arcmin,
        s.layer_tilt_tau_min,
    );
    for (plan, file) in s.sequences.iter().zip(files) {
        let kind = plan.kind.word();
        // Writing into a String cannot fail.
        let _ = write!(
            out,
            "\n[[sequence]]\nkind = \"{kind}\"\nfiles = [\"{file}\"]\nroll_deg = {:?}\n",
            plan.roll_deg
        );
        if plan.kind == SequenceKind::Scan {
            let _ = write!(
                out,
                "line_s = {:?}\ndark = [\"line_dark.fits\"]\nflat = [\"line_flat.fits\"]\n",
                plan.line_s
            );
        }
    }
    out
}

/// The weather log over the session, its constant errors in it.
pub(super) fn weather_csv(s: &Scenario, errors: &KnowledgeErrors) -> Result<String, SynthError> {
    let start = Utc::parse(&s.start_utc)?;
    let last_s = s.sequences.last().map_or(0.0, |it| it.start_s(it.frames));
    let mut out = "time_utc,pressure_hpa,temperature_c,relative_humidity\n".to_owned();
    let rows = (last_s / LOG_STEP_S).ceil() as usize + 1;
    for row in 0..=rows {
        let after_s = LOG_STEP_S * (row as f64 - 1.0) + LOG_STEP_S * 0.5;
        let air = conditions(s, after_s);
        let _ = writeln!(
            out,
            "{},{:.3},{:.3},{:.4}",
            start.plus_s(after_s).to_iso(),
            air.pressure_hpa + errors.pressure_hpa,
            air.temperature_c + errors.temperature_c,
            air.relative_humidity + errors.relative_humidity,
        );
    }
    Ok(out)
}
