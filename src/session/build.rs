//! From the tree to the checked session, table by table.

use std::path::{Path, PathBuf};

use super::document::{Value, folder};
use super::environment::Environment;
use super::facts::{
    Calibration, Camera, Filter, Instrument, LimbSettings, MaskImage, Moment, Projection,
    Refractivity, RotationLaw, ScaleOf, Session, Site, Telescope, Time, Weather, WeatherSource,
};
use super::fault::{Fault, FaultKind, Finding};
use super::filter_curve::FilterCurve;
use super::guards::pressure_finding;
use super::reader::{Reader, View};
use super::sounding::Sounding;
use super::source::Source;
use super::tables;
use super::weather::{SurfaceAir, WeatherColumns, WeatherLog};
use crate::air::{RefractivityFormula, VapourConvention};
use crate::sky::{Mount, Parity};

/// Heights of stations in the air, in metres.
const IN_AIR_M: (f64, f64) = (-400.0, 45_000.0);

/// The place.
pub(super) fn site(reader: &mut Reader<'_>, root: &View) -> Option<Site> {
    let view = root.inner("site");
    let name = reader.text(&view, "name");
    let latitude_deg = reader.number(&view, "latitude_deg");
    let longitude_deg = reader.number(&view, "longitude_deg");
    let height_m = reader.number(&view, "height_m");
    let deflection_north_arcsec = reader.number(&view, "deflection_north_arcsec");
    let deflection_east_arcsec = reader.number(&view, "deflection_east_arcsec");
    Some(Site {
        name: name?,
        latitude_deg: latitude_deg?,
        longitude_deg: longitude_deg?,
        height_m: height_m?,
        deflection_north_arcsec: deflection_north_arcsec?,
        deflection_east_arcsec: deflection_east_arcsec?,
    })
}

/// The telescope; neutral where there are no frames and the file is silent.
pub(super) fn telescope(reader: &mut Reader<'_>, root: &View, frames: bool) -> Option<Telescope> {
    let view = root.inner("telescope");
    let aperture_m = if frames || view.has("aperture_m") {
        reader.number(&view, "aperture_m")
    } else {
        Some(1.0)
    };
    let central_obstruction = reader.number(&view, "central_obstruction");
    let mounts = [
        Mount::Equatorial,
        Mount::Coelostat,
        Mount::Altazimuth,
        Mount::Fixed,
    ];
    let mount = if frames || view.has("mount") {
        reader.choice(&view, "mount", tables::MOUNTS, &mounts)
    } else {
        Some(Mount::Equatorial)
    };
    Some(Telescope {
        aperture_m: aperture_m?,
        central_obstruction: central_obstruction?,
        mount: mount?,
    })
}

/// A camera; neutral where there are no frames and the file is silent.
pub(super) fn camera(reader: &mut Reader<'_>, view: &View, frames: bool) -> Option<Camera> {
    let mut needed = |name: &str, neutral: f64| {
        if frames || view.has(name) {
            reader.number(view, name)
        } else {
            Some(neutral)
        }
    };
    let scale_arcsec_px = needed("scale_arcsec_px", 1.0);
    let angle_deg = needed("angle_deg", 0.0);
    let gain_e_adu = needed("gain_e_adu", 1.0);
    let scale_sigma_rel = reader.number(view, "scale_sigma_rel");
    let angle_sigma_deg = reader.number(view, "angle_sigma_deg");
    let read_noise_e = reader.number(view, "read_noise_e");
    let saturation_adu = reader.open_number(view, "saturation_adu");
    let readout_s = reader.open_number(view, "readout_s");
    let bad_pixels = reader.file(view, "bad_pixels");
    let scales = [ScaleOf::Apparent, ScaleOf::Sky];
    let scale_of = reader.choice(view, "scale_of", tables::SCALES_OF, &scales);
    let projections = [Projection::Tan, Projection::Arc];
    let projection = reader.choice(view, "projection", tables::PROJECTIONS, &projections);
    let parities = [Parity::Sky, Parity::Mirrored];
    let parity = reader.choice(view, "parity", tables::PARITIES, &parities);
    Some(Camera {
        scale_arcsec_px: scale_arcsec_px?,
        scale_sigma_rel: scale_sigma_rel?,
        scale_of: scale_of?,
        angle_deg: angle_deg?,
        angle_sigma_deg: angle_sigma_deg?,
        projection: projection?,
        parity: parity?,
        gain_e_adu: gain_e_adu?,
        read_noise_e: read_noise_e?,
        saturation_adu: saturation_adu?,
        readout_s: readout_s?,
        bad_pixels: bad_pixels?,
    })
}

/// A band; its curve is among the files read.
pub(super) fn filter(
    reader: &mut Reader<'_>,
    view: &View,
    read: &mut Vec<PathBuf>,
) -> Option<Filter> {
    reader.rules(view);
    if view.has("curve") {
        let path = reader.file(view, "curve")??;
        read.push(path.clone());
        let curve = noted(reader, FilterCurve::read(&path))?;
        let (centre_nm, width_nm) = (curve.centre_nm(), curve.width_nm());
        return Some(Filter {
            centre_nm,
            width_nm,
            curve: Some(curve),
        });
    }
    let centre_nm = reader.open_number(view, "centre_nm");
    let width_nm = reader.open_number(view, "width_nm");
    Some(Filter {
        centre_nm: centre_nm??,
        width_nm: width_nm??,
        curve: None,
    })
}

/// What is known of the optics.
pub(super) fn instrument(reader: &mut Reader<'_>, root: &View) -> Option<Instrument> {
    let view = root.inner("instrument");
    Some(Instrument {
        distortion_sigma_mas: reader.open_number(&view, "distortion_sigma_mas")?,
        drift_sigma_mas_per_hour: reader.open_number(&view, "drift_sigma_mas_per_hour")?,
    })
}

/// The dark and flat of a table.
pub(super) fn calibration(
    reader: &mut Reader<'_>,
    view: &View,
    session: &Calibration,
) -> Option<Calibration> {
    let dark = reader.files(view, "dark");
    let flat = reader.files(view, "flat");
    Some(Calibration {
        dark: dark?.unwrap_or_else(|| session.dark.clone()),
        flat: flat?.unwrap_or_else(|| session.flat.clone()),
    })
}

/// The air at the station.
pub(super) fn weather(
    reader: &mut Reader<'_>,
    root: &View,
    height_m: Option<f64>,
    read: &mut Vec<PathBuf>,
) -> Option<Weather> {
    let view = root.inner("weather");
    reader.rules(&view);
    let none = matches!(
        view.branch.get("none").map(|it| &it.value),
        Some(Value::Flag(true))
    );
    let in_air = |it: &f64| (IN_AIR_M.0..=IN_AIR_M.1).contains(it);
    let known_m = height_m.filter(in_air);
    if !none && height_m.is_some() && known_m.is_none() {
        let site = root.inner("site");
        if let Some(node) = site.branch.get("height_m") {
            let finding = Finding::new(
                FaultKind::OutOfRange,
                format!("{} m", height_m.unwrap_or_default()),
                format!("{} to {} m, where there is air", IN_AIR_M.0, IN_AIR_M.1),
                "correct the height, or set weather.none = true above the air",
            );
            reader.fault(&node.place.clone(), "site.height_m", finding);
        }
    }
    let pressure_sigma_hpa = reader.number(&view, "pressure_sigma_hpa");
    let temperature_sigma_c = reader.number(&view, "temperature_sigma_c");
    let humidity_sigma = reader.number(&view, "humidity_sigma");
    let profile = match reader.file(&view, "profile") {
        None => None,
        Some(None) => Some(None),
        Some(Some(path)) => {
            read.push(path.clone());
            noted(reader, Sounding::read(&path)).map(Some)
        }
    };
    let source = if none {
        Some(WeatherSource::None)
    } else if view.has("log") {
        log(reader, &view, known_m, read).map(WeatherSource::Log)
    } else {
        constants(reader, &view, known_m).map(WeatherSource::Constant)
    };
    Some(Weather {
        source: source?,
        profile: profile?,
        pressure_sigma_hpa: pressure_sigma_hpa?,
        temperature_sigma_c: temperature_sigma_c?,
        humidity_sigma: humidity_sigma?,
    })
}

fn log(
    reader: &mut Reader<'_>,
    view: &View,
    height_m: Option<f64>,
    read: &mut Vec<PathBuf>,
) -> Option<WeatherLog> {
    let named = view.inner("columns");
    let columns = WeatherColumns {
        time_utc: reader.text(&named, "time_utc")?,
        pressure_hpa: reader.text(&named, "pressure_hpa")?,
        temperature_c: reader.text(&named, "temperature_c")?,
        relative_humidity: reader.text(&named, "relative_humidity")?,
    };
    let path = reader.file(view, "log")??;
    read.push(path.clone());
    noted(reader, WeatherLog::read(&path, &columns, height_m))
}

fn constants(reader: &mut Reader<'_>, view: &View, height_m: Option<f64>) -> Option<SurfaceAir> {
    let pressure_hpa = reader.open_number(view, "pressure_hpa");
    let temperature_c = reader.open_number(view, "temperature_c");
    let relative_humidity = reader.open_number(view, "relative_humidity");
    let air = SurfaceAir {
        pressure_hpa: pressure_hpa??,
        temperature_c: temperature_c??,
        relative_humidity: relative_humidity??,
    };
    if let (Some(finding), Some(node)) = (
        pressure_finding(air.pressure_hpa, height_m),
        view.branch.get("pressure_hpa"),
    ) {
        reader.fault(&node.place.clone(), "weather.pressure_hpa", finding);
        return None;
    }
    Some(air)
}

/// How the air bends light.
pub(super) fn refractivity(reader: &mut Reader<'_>, root: &View) -> Option<Refractivity> {
    let view = root.inner("refractivity");
    let formulas = &RefractivityFormula::ALL;
    let formula = reader.choice(&view, "formula", tables::FORMULAS, formulas);
    let vapour = reader.choice(&view, "vapour", tables::VAPOURS, &VapourConvention::ALL);
    let co2_ppm = reader.number(&view, "co2_ppm");
    let lapse_k_per_km = reader.number(&view, "lapse_k_per_km");
    let tropopause_m = reader.number(&view, "tropopause_m");
    let wavelength_sigma_nm = reader.number(&view, "wavelength_sigma_nm");
    let layer_tilt_sigma_arcmin = reader.number(&view, "layer_tilt_sigma_arcmin");
    let layer_tilt_tau_min = reader.number(&view, "layer_tilt_tau_min");
    Some(Refractivity {
        formula: formula?,
        vapour: vapour?,
        co2_ppm: co2_ppm?,
        lapse_k_per_km: lapse_k_per_km?,
        tropopause_m: tropopause_m?,
        wavelength_sigma_nm: wavelength_sigma_nm?,
        layer_tilt_sigma_arcmin: layer_tilt_sigma_arcmin?,
        layer_tilt_tau_min: layer_tilt_tau_min?,
    })
}

/// What the times mean.
pub(super) fn time(reader: &mut Reader<'_>, root: &View) -> Option<Time> {
    let view = root.inner("time");
    let moments = [Moment::Start, Moment::Middle, Moment::End];
    let date_obs = reader.choice(&view, "date_obs", tables::MOMENTS, &moments);
    let clock_offset_s = reader.number(&view, "clock_offset_s");
    let clock_sigma_s = reader.number(&view, "clock_sigma_s");
    let clock_rate_sigma_ppm = reader.number(&view, "clock_rate_sigma_ppm");
    let ut1_minus_utc_s = reader.number(&view, "ut1_minus_utc_s");
    Some(Time {
        date_obs: date_obs?,
        clock_offset_s: clock_offset_s?,
        clock_sigma_s: clock_sigma_s?,
        clock_rate_sigma_ppm: clock_rate_sigma_ppm?,
        ut1_minus_utc_s: ut1_minus_utc_s?,
    })
}

/// How the limb is measured.
pub(super) fn limb(reader: &mut Reader<'_>, root: &View) -> Option<LimbSettings> {
    let view = root.inner("limb");
    let edge_scale_km = reader.number(&view, "edge_scale_km");
    let edge_scale_sigma_km = reader.number(&view, "edge_scale_sigma_km");
    let sectors = reader.whole_number(&view, "sectors");
    let window_inside_arcsec = reader.open_number(&view, "window_inside_arcsec");
    let window_outside_arcsec = reader.open_number(&view, "window_outside_arcsec");
    Some(LimbSettings {
        edge_scale_km: edge_scale_km?,
        edge_scale_sigma_km: edge_scale_sigma_km?,
        sectors: usize::try_from(sectors?).ok()?,
        window_inside_arcsec: window_inside_arcsec?,
        window_outside_arcsec: window_outside_arcsec?,
    })
}

/// The law of the surface's rotation.
pub(super) fn rotation(reader: &mut Reader<'_>, root: &View) -> Option<RotationLaw> {
    let view = root.inner("gravity");
    reader.choice(&view, "rotation", tables::ROTATIONS, &RotationLaw::ALL)
}

/// The mask image. The outer none means that a fault was noted.
#[expect(
    clippy::option_option,
    reason = "the outer none is a fault, the inner one a silence"
)]
pub(super) fn mask(
    reader: &mut Reader<'_>,
    root: &View,
    read: &mut Vec<PathBuf>,
) -> Option<Option<MaskImage>> {
    if !root.has("mask") {
        return Some(None);
    }
    let view = root.inner("mask");
    reader.rules(&view);
    let image = reader.file(&view, "image");
    let x = reader.number(&view, "centre_x_px");
    let y = reader.number(&view, "centre_y_px");
    let radius_px = reader.number(&view, "radius_px");
    let angle_deg = reader.number(&view, "angle_deg");
    let parities = [Parity::Sky, Parity::Mirrored];
    let parity = reader.choice(&view, "parity", tables::PARITIES, &parities);
    let brighter_than = reader.open_number(&view, "brighter_than");
    let darker_than = reader.open_number(&view, "darker_than");
    let image = image??;
    read.push(image.clone());
    Some(Some(MaskImage {
        image,
        centre_px: (x?, y?),
        radius_px: radius_px?,
        angle_deg: angle_deg?,
        parity: parity?,
        brighter_than: brighter_than?,
        darker_than: darker_than?,
    }))
}

/// Readings beside the weather. The outer none means that a fault was noted.
#[expect(
    clippy::option_option,
    reason = "the outer none is a fault, the inner one a silence"
)]
pub(super) fn environment(
    reader: &mut Reader<'_>,
    root: &View,
    read: &mut Vec<PathBuf>,
) -> Option<Option<Environment>> {
    if !root.has("environment") {
        return Some(None);
    }
    let view = root.inner("environment");
    reader.rules(&view);
    let columns = reader.texts(&view, "columns");
    let path = reader.file(&view, "log")??;
    read.push(path.clone());
    noted(reader, Environment::read(&path, &columns)).map(Some)
}

/// The keywords of the headers.
pub(super) fn keywords(reader: &mut Reader<'_>, root: &View) {
    let view = root.inner("headers");
    for key in view.spec.keys {
        if let Some(keyword) = reader.text(&view, key.name) {
            reader.keywords.insert(key.name.to_owned(), keyword);
        }
    }
}

/// The value, or its faults noted.
fn noted<T>(reader: &mut Reader<'_>, result: Result<T, Vec<Fault>>) -> Option<T> {
    result.map_err(|faults| reader.faults.extend(faults)).ok()
}

/// Two paths of one file are one.
pub(super) fn identity(path: &Path) -> PathBuf {
    let folder = folder(path);
    let folder = if folder.as_os_str().is_empty() {
        Path::new(".")
    } else {
        folder
    };
    match (folder.canonicalize(), path.file_name()) {
        (Ok(folder), Some(name)) => folder.join(name),
        _ => path.to_owned(),
    }
}

/// A band outside the wavelengths for which the formula of refractivity holds.
pub(super) fn out_of_formula(session: &Session, root: &View, sources: &[Source]) -> Option<Fault> {
    if session.weather.source == WeatherSource::None {
        return None;
    }
    let formula = session.refractivity.formula;
    let (low_nm, high_nm) = formula.wavelength_range_nm();
    let bands = session
        .sequences
        .iter()
        .map(|it| &it.filter)
        .chain([&session.filter]);
    let bad = bands
        .map(|it| it.centre_nm)
        .find(|it| !(low_nm..=high_nm).contains(it))?;
    let finding = Finding::new(
        FaultKind::Contradictory,
        format!("a band at {bad:.1} nm with the formula {}", formula.name()),
        format!("{low_nm} to {high_nm} nm with this formula"),
        "choose another `formula` in [refractivity], or correct the band",
    );
    let view = [root.inner("refractivity"), root.inner("filter")];
    let place = view.iter().find_map(|it| it.place.clone());
    Some(match place {
        Some(place) => Fault::at(
            &sources[place.source],
            &place.span,
            "refractivity.formula",
            finding,
        ),
        None => Fault::of_file(&session.path, "refractivity.formula", finding),
    })
}
