//! `truelimb refraction`: tables of the refraction without frames.

use crate::Ending;
use crate::arguments::Refraction;
use crate::commands::{Failure, json, print};
use crate::progress::say;
use serde::Serialize;
use truelimb::air::{
    self, AirError, AirWarning, Band, BandRow, RefractionRow, RefractivityFormula, Smear,
    StationAir, VapourConvention, ZenithArgument,
};
use truelimb::disk::{Darkening, DarkeningLaw, SolarEdge};
use truelimb::optics::definitions::inflection_arcsec;
use truelimb::optics::{Blur, Exposure, LimbOptics, OpticsError, ProfileMaker, Telescope};
use truelimb::session;
use truelimb::units::{ARCSEC_RAD, FWHM_PER_SIGMA};

/// A line of the table: the agreed names first, then what a band adds, then what must be known.
#[derive(Debug, Serialize)]
struct Line {
    #[serde(flatten)]
    row: RefractionRow,
    #[serde(flatten)]
    band: Option<BandColumns>,
    warnings: Vec<String>,
}

/// What a band adds.
#[derive(Debug, Serialize)]
struct BandColumns {
    effective_wavelength_nm: f64,
    centroid_wavelength_nm: f64,
    smear_mas: f64,
    smear_rms_mas: f64,
    smear_flattening_mas: Option<f64>,
}

/// `truelimb refraction`.
pub(crate) fn refraction(it: &Refraction, quiet: bool) -> Result<Ending, Failure> {
    let air = station(it)?;
    let lines = match it.width_nm {
        None => plain_lines(it, &air),
        Some(width_nm) => band_lines(it, &air, width_nm),
    }?;
    if it.json {
        print(&json(&lines)?);
    } else {
        print(&table(&lines));
    }
    if !quiet {
        let mut said: Vec<&str> = Vec::new();
        for warning in lines.iter().flat_map(|it| &it.warnings) {
            if !said.contains(&warning.as_str()) {
                said.push(warning);
                say(&format!("warning: {warning}"));
            }
        }
    }
    Ok(Ending::Done)
}

/// The station and its air as typed.
fn station(it: &Refraction) -> Result<StationAir, Failure> {
    let site = air::Site {
        latitude_rad: it.latitude_deg.to_radians(),
        height_m: it.height_m,
    };
    let conditions = air::Conditions {
        pressure_hpa: it.pressure_hpa,
        temperature_c: it.temperature_c,
        relative_humidity: it.humidity,
        co2_ppm: it.co2_ppm,
    };
    if !(-360.0..=360.0).contains(&it.azimuth_deg) {
        return Err(Failure::Usage(format!(
            "--azimuth-deg: azimuth is {} deg; allowed is -360 to 360 deg",
            it.azimuth_deg
        )));
    }
    if !(0.5..=10.0).contains(&it.seeing_arcsec) {
        return Err(Failure::Usage(format!(
            "--seeing-arcsec: seeing is {} arcsec; allowed is 0.5 to 10 arcsec",
            it.seeing_arcsec
        )));
    }
    let mut air = StationAir::new(site, conditions, it.azimuth_deg.to_radians());
    air.settings.lapse_k_per_m = it.lapse_k_per_km / 1000.0;
    air.settings.tropopause_m = it.tropopause_m;
    air.formula = RefractivityFormula::parse(&it.formula)
        .map_err(|error| Failure::Usage(format!("--formula: {error}")))?;
    air.convention = VapourConvention::parse(&it.humidity_over)
        .map_err(|error| Failure::Usage(format!("--humidity-over: {error}")))?;
    conditions.check_at(&site).map_err(refused)?;
    air.settings.check().map_err(refused)?;
    if let Some(path) = &it.profile {
        let sounding = session::Sounding::read(path).map_err(|faults| {
            Failure::from(session::SessionError {
                path: path.clone(),
                faults,
                more: 0,
            })
        })?;
        air.sounding = Some(sounding.levels);
        // At any wavelength the same: what the levels themselves get wrong.
        let any_nm = air.formula.wavelength_range_nm().1;
        air.profile(any_nm)
            .map_err(|error| Failure::Usage(format!("--profile {}: {error}", path.display())))?;
    }
    Ok(air)
}

fn zeniths(it: &Refraction) -> (Vec<f64>, ZenithArgument) {
    let argument = if it.is_true {
        ZenithArgument::True
    } else {
        ZenithArgument::Apparent
    };
    let zeniths = it.zenith_deg.iter().map(|it| it.to_radians()).collect();
    (zeniths, argument)
}

fn plain_lines(it: &Refraction, air: &StationAir) -> Result<Vec<Line>, Failure> {
    let (zeniths, argument) = zeniths(it);
    let rows =
        air::refraction_table(air, &zeniths, argument, &it.wavelength_nm).map_err(refused)?;
    Ok(rows
        .into_iter()
        .map(|row| Line {
            row,
            band: None,
            warnings: words(&warnings(
                air,
                row.zenith_apparent_deg,
                &[row.wavelength_nm],
            )),
        })
        .collect())
}

fn band_lines(it: &Refraction, air: &StationAir, width_nm: f64) -> Result<Vec<Line>, Failure> {
    let (zeniths, argument) = zeniths(it);
    // The formula first: a band about a wavelength that is out of reach is no question of its width.
    for &nm in &it.wavelength_nm {
        air.refractivity(nm).map_err(refused)?;
    }
    let mut lines = Vec::new();
    for &zenith in &zeniths {
        for &nm in &it.wavelength_nm {
            let band = Band::top_hat(nm, width_nm).map_err(refused)?;
            lines.push(band_line(it, air, &band, zenith, argument)?);
        }
    }
    Ok(lines)
}

fn band_line(
    it: &Refraction,
    air: &StationAir,
    band: &Band,
    zenith_rad: f64,
    argument: ZenithArgument,
) -> Result<Line, Failure> {
    let (low_nm, high_nm) = band.half_power_nm();
    let edge = |nm: f64| Darkening::new(DarkeningLaw::Neckel2005, nm).map(|it| it.at(0.0));
    // The law has its ends and a gap: it must hold at every wavelength or it is left out.
    let known = band
        .light(|nm| edge(nm).unwrap_or(f64::NAN))
        .and(band.light(air::solar_photons))
        .is_ok();
    let photons = |nm: f64| {
        let reddened = if known {
            edge(nm).unwrap_or(f64::NAN)
        } else {
            1.0
        };
        air::solar_photons(nm) * reddened
    };
    let rows = air::band_table(
        air,
        &[zenith_rad],
        argument,
        std::slice::from_ref(band),
        photons,
    )
    .map_err(refused)?;
    let Some(row) = rows.first() else {
        return Err(Failure::Usage("--zenith-deg: none is given".to_owned()));
    };
    let mut words = words(&warnings(
        air,
        row.row.zenith_apparent_deg,
        &[low_nm, high_nm],
    ));
    let smear_flattening_mas = if known {
        Some(smear_flattening_mas(row, it.seeing_arcsec)?)
    } else {
        words.push(format!(
            "the limb darkening is not known from {low_nm} to {high_nm} nm: it is left out of the effective wavelength, and the flattening by the smear is not given"
        ));
        None
    };
    Ok(Line {
        row: row.row,
        band: Some(BandColumns {
            effective_wavelength_nm: row.effective_wavelength_nm,
            centroid_wavelength_nm: row.centroid_wavelength_nm,
            smear_mas: row.smear_mas,
            smear_rms_mas: row.smear_rms_mas,
            smear_flattening_mas,
        }),
        warnings: words,
    })
}

/// Horizontal minus vertical radius of a limb's inflection that the smear makes of a round disk in
/// seeing of a full width: the blur along the vertical is the larger by the smear's variance.
fn smear_flattening_mas(row: &BandRow, seeing_arcsec: f64) -> Result<f64, Failure> {
    const STEPS_PER_SIGMA: f64 = 40.0;
    let sigma_arcsec = seeing_arcsec / FWHM_PER_SIGMA;
    let smear = Smear {
        spread_mas: row.smear_mas,
        rms_mas: row.smear_rms_mas,
        variance_arcsec2: (row.smear_rms_mas / 1000.0).powi(2),
    };
    let vertical_arcsec = (sigma_arcsec.powi(2) + smear.variance_arcsec2).sqrt();
    let nm = row.effective_wavelength_nm;
    let optics = LimbOptics {
        edge: SolarEdge {
            radius_arcsec: air::TABLE_RADIUS_ARCSEC,
            scale_arcsec: 0.0,
            darkening: Darkening::new(DarkeningLaw::Neckel2005, nm)?,
        },
        telescope: Telescope {
            aperture_m: f64::INFINITY,
            central_obstruction: 0.0,
        },
        wavelength_nm: nm,
        exposure: Exposure::Long,
    };
    let span_arcsec = 4.0 * vertical_arcsec + 1.0;
    let maker = ProfileMaker::new(&optics, span_arcsec, sigma_arcsec / STEPS_PER_SIGMA, 0.0)?;
    let place = |gaussian_sigma_arcsec: f64| -> Result<f64, OpticsError> {
        let blur = Blur {
            r0_m: f64::INFINITY,
            gaussian_sigma_arcsec,
        };
        inflection_arcsec(&maker.profile(&blur, 0.0), &maker.grid())
    };
    Ok(1000.0 * (place(sigma_arcsec)? - place(vertical_arcsec)?))
}

/// What a reader of a line must know.
fn warnings(air: &StationAir, zenith_deg: f64, wavelengths_nm: &[f64]) -> Vec<AirWarning> {
    let mut all: Vec<AirWarning> = Vec::new();
    for &nm in wavelengths_nm {
        for it in air::refractivity_warnings(&air.conditions, nm, air.formula) {
            if !all.contains(&it) {
                all.push(it);
            }
        }
    }
    all.extend(air::zenith_warning(zenith_deg.to_radians()));
    all
}

fn words(warnings: &[AirWarning]) -> Vec<String> {
    warnings.iter().map(ToString::to_string).collect()
}

/// The refusal of the air model, with the argument that it is about.
fn refused(error: AirError) -> Failure {
    match flag(&error) {
        Some(flag) => Failure::Usage(format!("{flag}: {error}")),
        None => error.into(),
    }
}

fn flag(error: &AirError) -> Option<&'static str> {
    Some(match error {
        AirError::BelowAbsoluteZero { .. } | AirError::TemperatureInKelvin { .. } => {
            "--temperature-c"
        }
        AirError::HumidityInPercent { .. } => "--humidity",
        AirError::PressureUnit { .. }
        | AirError::PressureReduced { .. }
        | AirError::PressureForHeight { .. } => "--pressure-hpa",
        AirError::SoundingTooShort { .. }
        | AirError::SoundingStartsAbove { .. }
        | AirError::SoundingOrder { .. }
        | AirError::SoundingPressure { .. }
        | AirError::Ducting { .. } => "--profile",
        AirError::DispersionTurns { .. } => "--width-nm",
        AirError::OutOfRange { quantity, .. } => match *quantity {
            "temperature" => "--temperature-c",
            "relative humidity" | "vapour pressure" => "--humidity",
            "carbon dioxide" => "--co2-ppm",
            "pressure" => "--pressure-hpa",
            "latitude" => "--latitude-deg",
            "station height" => "--height-m",
            "wavelength" | "band centre" => "--wavelength-nm",
            "band width" => "--width-nm",
            "zenith distance" | "true zenith distance" | "apparent zenith distance" => {
                "--zenith-deg"
            }
            "lapse rate" => "--lapse-k-per-km",
            "tropopause" => "--tropopause-m",
            _ => return None,
        },
        _ => return None,
    })
}

/// A column: two lines of head, digits, and the number in a line.
type Column = (&'static str, &'static str, usize, fn(&Line) -> Option<f64>);

/// The table for people: refraction and shape above, what the flattening is sensitive to below.
fn table(lines: &[Line]) -> String {
    let place: [Column; 3] = [
        ("apparent", "zenith, deg", 4, |it| {
            Some(it.row.zenith_apparent_deg)
        }),
        ("true", "zenith, deg", 4, |it| Some(it.row.zenith_true_deg)),
        ("wavelength", "nm", 2, |it| Some(it.row.wavelength_nm)),
    ];
    let shape: [Column; 7] = [
        ("n - 1", "1e-6", 4, |it| Some(1e6 * it.row.refractivity)),
        ("refraction", "arcsec", 4, |it| {
            Some(it.row.refraction_arcsec)
        }),
        ("by zenith", "arcsec/deg", 4, |it| {
            Some(it.row.dr_dz.to_radians() / ARCSEC_RAD)
        }),
        ("mean radius", "mas", 3, |it| Some(it.row.radius_change_mas)),
        ("flattening", "mas", 3, |it| Some(it.row.flattening_mas)),
        ("P4", "mas", 4, |it| Some(it.row.p4_mas)),
        ("cos 3", "mas", 4, |it| Some(it.row.m3_mas)),
    ];
    let band: [Column; 4] = [
        ("effective", "nm", 3, |it| {
            it.band.as_ref().map(|it| it.effective_wavelength_nm)
        }),
        ("smear", "mas", 2, |it| {
            it.band.as_ref().map(|it| it.smear_mas)
        }),
        ("rms", "mas", 2, |it| {
            it.band.as_ref().map(|it| it.smear_rms_mas)
        }),
        ("flattening", "by it, mas", 4, |it| {
            it.band.as_ref().and_then(|it| it.smear_flattening_mas)
        }),
    ];
    let sensitivity: [Column; 6] = [
        ("pressure", "mas/hPa", 4, |it| {
            Some(it.row.sensitivity.pressure_hpa)
        }),
        ("temperature", "mas/K", 4, |it| {
            Some(it.row.sensitivity.temperature_c)
        }),
        ("humidity", "mas/0.1", 4, |it| {
            Some(0.1 * it.row.sensitivity.humidity)
        }),
        ("wavelength", "mas/nm", 4, |it| {
            Some(it.row.dispersion_mas_per_nm)
        }),
        ("true zenith", "mas/arcmin", 4, |it| {
            Some(it.row.sensitivity.zenith_arcmin)
        }),
        ("vertical", "mas/arcmin", 4, |it| {
            Some(it.row.sensitivity.vertical_arcmin)
        }),
    ];
    let with_band = lines.iter().any(|it| it.band.is_some());
    let mut upper: Vec<Column> = place.to_vec();
    upper.extend(shape);
    if with_band {
        upper.extend(band);
    }
    let lower: Vec<Column> = place.into_iter().chain(sensitivity).collect();
    format!(
        "refraction, and the change of a disk of {} arcsec (apparent minus true; flattening is horizontal minus vertical)\n\n{}\n\nchange of the flattening by one unit of\n\n{}",
        air::TABLE_RADIUS_ARCSEC,
        block(&upper, lines),
        block(&lower, lines)
    )
}

/// Columns to the right, as wide as their widest entry.
fn block(columns: &[Column], lines: &[Line]) -> String {
    let mut cells: Vec<Vec<String>> = columns
        .iter()
        .map(|it| vec![it.0.to_owned(), it.1.to_owned()])
        .collect();
    for line in lines {
        for (cells, (_, _, digits, number)) in cells.iter_mut().zip(columns) {
            cells.push(number(line).map_or_else(|| "-".to_owned(), |it| printed(it, *digits)));
        }
    }
    let widths: Vec<usize> = cells
        .iter()
        .map(|it| it.iter().map(String::len).max().unwrap_or(0))
        .collect();
    let rows: Vec<String> = (0..lines.len() + 2)
        .map(|row| {
            let entries: Vec<String> = cells
                .iter()
                .zip(&widths)
                .map(|(column, &width)| format!("{:>width$}", column[row]))
                .collect();
            entries.join("  ")
        })
        .collect();
    rows.join("\n")
}

/// A number with so many digits, without the sign of a zero.
fn printed(number: f64, digits: usize) -> String {
    let text = format!("{number:.digits$}");
    let is_zero = text.bytes().all(|it| matches!(it, b'-' | b'0' | b'.'));
    text.strip_prefix('-')
        .filter(|_| is_zero)
        .map_or_else(|| text.clone(), ToOwned::to_owned)
}
