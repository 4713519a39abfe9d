//! The ranges of a scenario's numbers.

use super::screens::longest_outer_scale_m;
use super::{Scenario, SequenceKind, SynthError};

/// Most frames of a session.
const MOST_FRAMES: usize = 100_000;

/// Refuses what cannot be simulated.
pub(super) fn check(s: &Scenario) -> Result<(), SynthError> {
    let n = |key: &str, found: f64, lowest: f64, highest: f64, unit: &'static str| {
        if (lowest..=highest).contains(&found) {
            return Ok(());
        }
        Err(SynthError::OutOfRange {
            key: key.to_owned(),
            found,
            lowest,
            highest,
            unit,
        })
    };
    n("site.latitude_deg", s.site.latitude_deg, -90.0, 90.0, "deg")?;
    n(
        "site.longitude_deg",
        s.site.longitude_deg,
        -180.0,
        360.0,
        "deg",
    )?;
    n("site.height_m", s.site.height_m, -400.0, 45_000.0, "m")?;
    n("aperture_m", s.aperture_m, 0.03, 1.0, "m")?;
    n(
        "central_obstruction",
        s.central_obstruction,
        0.0,
        0.6,
        "of the aperture",
    )?;
    n("wavelength_nm", s.wavelength_nm, 390.0, 1090.0, "nm")?;
    n("width_nm", s.width_nm, 0.001, 200.0, "nm")?;
    n("exposure_s", s.exposure_s, 1e-5, 1.0, "s")?;
    n("size_px", s.size_px as f64, 64.0, 8192.0, "px")?;
    n("scale_arcsec_px", s.scale_arcsec_px, 0.1, 10.0, "arcsec/px")?;
    n("scale_sigma_rel", s.scale_sigma_rel, 0.0, 0.02, "relative")?;
    n("camera_angle_deg", s.camera_angle_deg, -360.0, 360.0, "deg")?;
    n("angle_sigma_deg", s.angle_sigma_deg, 0.0, 10.0, "deg")?;
    n("gain_e_adu", s.gain_e_adu, 1e-3, 1e4, "e/ADU")?;
    n("read_noise_e", s.read_noise_e, 0.0, 1e4, "e")?;
    n(
        "saturation_adu",
        f64::from(s.saturation_adu),
        15.0,
        65535.0,
        "ADU",
    )?;
    let full = f64::from(s.saturation_adu);
    n("dark_adu", s.dark_adu, 0.0, 0.5 * full, "ADU")?;
    let room_e = (full - s.dark_adu) * s.gain_e_adu;
    n("peak_e", s.peak_e, 10.0, room_e, "e")?;
    let pixels = (s.size_px * s.size_px) as f64;
    n(
        "hot_pixels",
        s.hot_pixels as f64,
        0.0,
        0.01 * pixels,
        "pixels",
    )?;
    n("dust_spots", s.dust_spots as f64, 0.0, 500.0, "spots")?;
    n("vignetting", s.vignetting, 0.0, 0.5, "of the light")?;
    let response = s.pixel_response_sigma_rel;
    n("pixel_response_sigma_rel", response, 0.0, 0.05, "relative")?;
    n(
        "aureole_rel",
        s.aureole_rel,
        0.0,
        0.05,
        "of the disk's centre",
    )?;
    n(
        "pointing_sigma_arcsec",
        s.pointing_sigma_arcsec,
        0.0,
        30.0,
        "arcsec",
    )?;
    n("edge_scale_km", s.edge_scale_km, 0.0, 300.0, "km")?;
    n("r0_flicker_rel", s.r0_flicker_rel, 0.0, 0.5, "relative")?;
    n("r0_flicker_tau_s", s.r0_flicker_tau_s, 1e-3, 1e5, "s")?;
    let tilt = s.layer_tilt_sigma_arcmin;
    n("layer_tilt_sigma_arcmin", tilt, 0.0, 30.0, "arcmin")?;
    n("layer_tilt_tau_min", s.layer_tilt_tau_min, 1e-3, 1e4, "min")?;
    n(
        "shape.radius_arcsec",
        s.shape.radius_arcsec,
        940.0,
        980.0,
        "arcsec",
    )?;
    n(
        "shape.oblateness_mas",
        s.shape.oblateness_mas,
        -5000.0,
        5000.0,
        "mas",
    )?;
    n("shape.p4_mas", s.shape.p4_mas, -5000.0, 5000.0, "mas")?;
    let w = &s.weather;
    n(
        "weather.relative_humidity",
        w.relative_humidity,
        0.0,
        1.0,
        "as a fraction",
    )?;
    n("weather.temperature_c", w.temperature_c, -60.0, 50.0, "C")?;
    n("weather.pressure_hpa", w.pressure_hpa, 0.5, 1100.0, "hPa")?;
    n(
        "weather.pressure_rate_hpa_h",
        w.pressure_rate_hpa_h,
        -10.0,
        10.0,
        "hPa/h",
    )?;
    n(
        "weather.temperature_rate_c_h",
        w.temperature_rate_c_h,
        -20.0,
        20.0,
        "C/h",
    )?;
    n(
        "weather.pressure_sigma_hpa",
        w.pressure_sigma_hpa,
        0.0,
        20.0,
        "hPa",
    )?;
    n(
        "weather.temperature_sigma_c",
        w.temperature_sigma_c,
        0.0,
        10.0,
        "C",
    )?;
    n(
        "weather.humidity_sigma",
        w.humidity_sigma,
        0.0,
        0.5,
        "as a fraction",
    )?;
    for (i, it) in s.distortion.iter().enumerate() {
        n(&format!("distortion[{i}].m"), f64::from(it.m), 2.0, 8.0, "")?;
        let key = format!("distortion[{i}].amplitude_mas");
        n(&key, it.amplitude_mas, -5000.0, 5000.0, "mas")?;
        n(
            &format!("distortion[{i}].angle_deg"),
            it.angle_deg,
            -360.0,
            360.0,
            "deg",
        )?;
    }
    for (i, it) in s.layers.iter().enumerate() {
        n(
            &format!("layer[{i}].height_m"),
            it.height_m,
            0.0,
            20_000.0,
            "m",
        )?;
        n(&format!("layer[{i}].r0_m"), it.r0_m, 0.01, 10.0, "m")?;
        let longest_m = longest_outer_scale_m(s.aperture_m);
        n(
            &format!("layer[{i}].outer_scale_m"),
            it.outer_scale_m,
            0.5,
            longest_m,
            "m",
        )?;
        n(
            &format!("layer[{i}].wind_m_s"),
            it.wind_m_s,
            0.0,
            60.0,
            "m/s",
        )?;
    }
    if s.sequences.is_empty() {
        return Err(SynthError::Empty { key: "sequence" });
    }
    let mut before_min = 0.0;
    for (i, it) in s.sequences.iter().enumerate() {
        let most = MOST_FRAMES as f64;
        n(
            &format!("sequence[{i}].frames"),
            it.frames as f64,
            1.0,
            most,
            "frames",
        )?;
        n(
            &format!("sequence[{i}].step_s"),
            it.step_s,
            s.exposure_s,
            3600.0,
            "s",
        )?;
        n(
            &format!("sequence[{i}].at_min"),
            it.at_min,
            0.0,
            1440.0,
            "min",
        )?;
        n(
            &format!("sequence[{i}].roll_deg"),
            it.roll_deg,
            -360.0,
            360.0,
            "deg",
        )?;
        if it.kind == SequenceKind::Scan {
            let key = |name: &str| format!("sequence[{i}].{name}");
            n(&key("lines"), it.lines as f64, 16.0, 100_000.0, "lines")?;
            n(&key("line_s"), it.line_s, 1e-3, 60.0, "s")?;
            n(&key("step_s"), it.step_s, it.span_s(), 3600.0, "s")?;
        }
        if it.at_min < before_min {
            return Err(SynthError::Overlap {
                sequence: i + 1,
                at_min: it.at_min,
                before_min,
            });
        }
        before_min = it.start_s(it.frames) / 60.0;
    }
    Ok(())
}
