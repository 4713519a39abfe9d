//! The settings of a session as they were used, defaults included, for the result.

use std::path::{Path, PathBuf};

use serde_json::{Value, json};

use super::facts::{
    Calibration, Camera, Filter, Kind, Moment, Projection, ScaleOf, Session, Weather, WeatherSource,
};
use super::tables;
use crate::sky::{Mount, Parity};

/// The settings as resolved: the keys of the session file with their values, defaults filled in;
/// `assumed` lists those that are defaults, `from_headers` those found in the frames. Paths are
/// given relative to the session file's folder where they are in it.
pub fn resolved(session: &Session) -> Value {
    let folder = session.path.parent().unwrap_or(Path::new(""));
    let site = &session.site;
    let refractivity = &session.refractivity;
    let limb = &session.limb;
    let frames = session.has_frames();
    let telescope = &session.telescope;
    json!({
        "site": {
            "name": site.name,
            "latitude_deg": site.latitude_deg,
            "longitude_deg": site.longitude_deg,
            "height_m": site.height_m,
            "deflection_north_arcsec": site.deflection_north_arcsec,
            "deflection_east_arcsec": site.deflection_east_arcsec,
        },
        "telescope": frames.then(|| json!({
            "aperture_m": telescope.aperture_m,
            "central_obstruction": telescope.central_obstruction,
            "mount": mount(telescope.mount),
        })),
        "filter": filter(&session.filter, folder),
        "camera": frames.then(|| camera(&session.camera, folder)),
        "instrument": {
            "distortion_sigma_mas": session.instrument.distortion_sigma_mas,
            "drift_sigma_mas_per_hour": session.instrument.drift_sigma_mas_per_hour,
        },
        "calibration": calibration(&session.calibration, folder),
        "weather": weather(&session.weather, folder),
        "refractivity": {
            "formula": refractivity.formula.name(),
            "vapour": refractivity.vapour.name(),
            "co2_ppm": refractivity.co2_ppm,
            "lapse_k_per_km": refractivity.lapse_k_per_km,
            "tropopause_m": refractivity.tropopause_m,
            "wavelength_sigma_nm": refractivity.wavelength_sigma_nm,
            "layer_tilt_sigma_arcmin": refractivity.layer_tilt_sigma_arcmin,
            "layer_tilt_tau_min": refractivity.layer_tilt_tau_min,
        },
        "time": {
            "date_obs": match session.time.date_obs {
                Moment::Start => "start",
                Moment::Middle => "middle",
                Moment::End => "end",
            },
            "clock_offset_s": session.time.clock_offset_s,
            "clock_sigma_s": session.time.clock_sigma_s,
            "clock_rate_sigma_ppm": session.time.clock_rate_sigma_ppm,
            "ut1_minus_utc_s": session.time.ut1_minus_utc_s,
        },
        "limb": {
            "edge_scale_km": limb.edge_scale_km,
            "edge_scale_sigma_km": limb.edge_scale_sigma_km,
            "sectors": limb.sectors,
            "window_inside_arcsec": limb.window_inside_arcsec,
            "window_outside_arcsec": limb.window_outside_arcsec,
        },
        "gravity": { "rotation": session.rotation.name() },
        "mask": session.mask.as_ref().map(|it| json!({
            "image": shown(&it.image, folder),
            "centre_x_px": it.centre_px.0,
            "centre_y_px": it.centre_px.1,
            "radius_px": it.radius_px,
            "angle_deg": it.angle_deg,
            "parity": match it.parity {
                Parity::Sky => "sky",
                Parity::Mirrored => "mirrored",
            },
            "brighter_than": it.brighter_than,
            "darker_than": it.darker_than,
        })),
        "headers": session.headers,
        "environment": session.environment.as_ref().map(|it| json!({
            "log": shown(&it.path, folder),
            "columns": it.columns,
        })),
        "sequence": session.sequences.iter().map(|it| json!({
            "name": it.name,
            "kind": tables::KINDS[it.kind as usize],
            "files": all_shown(&it.files, folder),
            "roll_deg": it.roll_deg,
            "line_s": it.line_s,
            "dark": all_shown(&it.calibration.dark, folder),
            "flat": all_shown(&it.calibration.flat, folder),
            "camera": (it.kind != Kind::Limbs).then(|| camera(&it.camera, folder)),
            "filter": filter(&it.filter, folder),
        })).collect::<Vec<_>>(),
        "assumed": session.assumed,
        "from_headers": session.from_headers,
    })
}

fn mount(mount: Mount) -> &'static str {
    match mount {
        Mount::Equatorial => "equatorial",
        Mount::Coelostat => "coelostat",
        Mount::Altazimuth => "altazimuth",
        Mount::Fixed => "fixed",
    }
}

fn filter(it: &Filter, folder: &Path) -> Value {
    json!({
        "centre_nm": it.centre_nm,
        "width_nm": it.width_nm,
        "curve": it.curve.as_ref().map(|curve| shown(&curve.path, folder)),
    })
}

fn camera(it: &Camera, folder: &Path) -> Value {
    json!({
        "scale_arcsec_px": it.scale_arcsec_px,
        "scale_sigma_rel": it.scale_sigma_rel,
        "scale_of": match it.scale_of {
            ScaleOf::Apparent => "apparent",
            ScaleOf::Sky => "sky",
        },
        "angle_deg": it.angle_deg,
        "angle_sigma_deg": it.angle_sigma_deg,
        "projection": match it.projection {
            Projection::Tan => "tan",
            Projection::Arc => "arc",
        },
        "parity": match it.parity {
            Parity::Sky => "sky",
            Parity::Mirrored => "mirrored",
        },
        "gain_e_adu": it.gain_e_adu,
        "read_noise_e": it.read_noise_e,
        "saturation_adu": it.saturation_adu,
        "readout_s": it.readout_s,
        "bad_pixels": it.bad_pixels.as_ref().map(|path| shown(path, folder)),
    })
}

fn calibration(it: &Calibration, folder: &Path) -> Value {
    json!({ "dark": all_shown(&it.dark, folder), "flat": all_shown(&it.flat, folder) })
}

fn weather(it: &Weather, folder: &Path) -> Value {
    let mut weather = match &it.source {
        WeatherSource::None => json!({ "none": true }),
        WeatherSource::Constant(air) => json!({
            "pressure_hpa": air.pressure_hpa,
            "temperature_c": air.temperature_c,
            "relative_humidity": air.relative_humidity,
        }),
        WeatherSource::Log(log) => {
            let columns = log.columns();
            json!({
                "log": shown(log.path(), folder),
                "columns": {
                    "time_utc": columns.time_utc,
                    "pressure_hpa": columns.pressure_hpa,
                    "temperature_c": columns.temperature_c,
                    "relative_humidity": columns.relative_humidity,
                },
            })
        }
    };
    if let Value::Object(map) = &mut weather {
        map.insert(
            "profile".to_owned(),
            json!(it.profile.as_ref().map(|p| shown(&p.path, folder))),
        );
        map.insert(
            "pressure_sigma_hpa".to_owned(),
            json!(it.pressure_sigma_hpa),
        );
        map.insert(
            "temperature_sigma_c".to_owned(),
            json!(it.temperature_sigma_c),
        );
        map.insert("humidity_sigma".to_owned(), json!(it.humidity_sigma));
    }
    weather
}

/// A path relative to the folder where it is in it, so that a session may be moved.
fn shown(path: &Path, folder: &Path) -> String {
    path.strip_prefix(folder)
        .unwrap_or(path)
        .display()
        .to_string()
}

fn all_shown(paths: &[PathBuf], folder: &Path) -> Vec<String> {
    paths.iter().map(|path| shown(path, folder)).collect()
}
