//! The files of a result: each whole under its name, or not there.

mod provenance;
mod rebuild;

use super::{Error, Outcome, limb_table};
use crate::frames::{self, Card, Column, FitsWriter, Value, Values, write_ecsv, write_whole};
use crate::report;
use crate::result::record::{Record, SourceFile, Traces};
use crate::session::Session;
use crate::sky::observer_itrs_m;
use rayon::prelude::*;
use std::path::{Path, PathBuf};

pub use rebuild::{Rebuilt, rebuild};

/// Checksums of every file that goes into a result: the session's own and the frames.
///
/// # Errors
///
/// When a file cannot be read.
pub fn sources(session: &Session) -> Result<Vec<SourceFile>, Error> {
    let mut paths: Vec<&PathBuf> = session.sources.iter().collect();
    for it in &session.sequences {
        paths.extend(
            it.files
                .iter()
                .chain(&it.calibration.dark)
                .chain(&it.calibration.flat),
        );
        paths.extend(&it.camera.bad_pixels);
    }
    let mut seen = std::collections::BTreeSet::new();
    paths.retain(|it| seen.insert(*it));
    let folder = session.path.parent().unwrap_or_else(|| Path::new(""));
    paths
        .par_iter()
        .map(|path| {
            let bytes = std::fs::metadata(path)
                .map_err(|it| Error::File {
                    path: (*path).clone(),
                    what: "could not be read",
                    reason: it.to_string(),
                })?
                .len();
            let shown = path.strip_prefix(folder).unwrap_or(path);
            Ok(SourceFile {
                path: shown.to_string_lossy().into_owned(),
                bytes,
                sha256: frames::sha256(path)?,
            })
        })
        .collect()
}

/// The files of a result, in the order in which they are written.
pub const NAMES: [&str; 9] = [
    "limbs.fits",
    "stack.fits",
    "seeing.ecsv",
    "budget.ecsv",
    "traces.json",
    "figures/",
    "report.html",
    "provenance.json",
    "result.json",
];

/// Writes every product of a run into a folder, which is made when it is not there.
///
/// # Errors
///
/// When the folder or a file cannot be written; what was there before under a name stays whole.
pub fn write(outcome: &Outcome, session: &Session, folder: &Path) -> Result<(), Error> {
    let figures = folder.join("figures");
    std::fs::create_dir_all(&figures).map_err(|it| Error::File {
        path: figures.clone(),
        what: "the folder could not be made",
        reason: it.to_string(),
    })?;
    let cards = common(outcome, session);
    limb_table::write(outcome, session, cards, &folder.join("limbs.fits"))?;
    stack(outcome, session, &folder.join("stack.fits"))?;
    seeing_table(outcome, &folder.join("seeing.ecsv"))?;
    budget_table(outcome, &folder.join("budget.ecsv"))?;
    let traces = json("traces.json", &outcome.traces)?;
    write_whole(&folder.join("traces.json"), traces.as_bytes())?;
    let mut names: Vec<String> = ["limbs.fits", "stack.fits", "seeing.ecsv", "budget.ecsv"]
        .iter()
        .map(|it| (*it).to_owned())
        .filter(|it| it != "stack.fits" || outcome.stack.is_some())
        .collect();
    names.push("traces.json".to_owned());
    names.extend(page(&outcome.record, &outcome.traces, folder)?);
    let result = json("result.json", &outcome.record)?;
    let products = provenance::products(folder, &names, &result)?;
    let origin = json(
        "provenance.json",
        &provenance::document(&outcome.record, &products),
    )?;
    write_whole(&folder.join("provenance.json"), origin.as_bytes())?;
    // Last, so that a result is there only when everything it stands on is.
    write_whole(&folder.join("result.json"), result.as_bytes())?;
    Ok(())
}

/// Writes report and figures; gives the names of the files.
fn page(record: &Record, traces: &Traces, folder: &Path) -> Result<Vec<String>, Error> {
    let rendered = report::render(record, traces)?;
    let mut names = Vec::new();
    for (stem, svg) in &rendered.figures {
        let name = format!("figures/{stem}.svg");
        write_whole(&folder.join(&name), svg.as_bytes())?;
        names.push(name);
    }
    write_whole(&folder.join("report.html"), rendered.html.as_bytes())?;
    names.push("report.html".to_owned());
    Ok(names)
}

/// A record as the text of a file.
fn json<T: serde::Serialize>(what: &'static str, value: &T) -> Result<String, Error> {
    serde_json::to_string_pretty(value)
        .map(|it| it + "\n")
        .map_err(|source| Error::Record { what, source })
}

/// A text for a header: what is not ASCII becomes a question mark.
fn ascii(text: &str) -> String {
    text.chars()
        .map(|it| if (' '..='~').contains(&it) { it } else { '?' })
        .collect()
}

/// Cards that every FITS product carries.
fn common(outcome: &Outcome, session: &Session) -> Vec<Card> {
    let [x, y, z] = observer_itrs_m(&super::measure::place(session));
    let version = outcome.record.program_version.as_str();
    let settings = frames::sha256_of(outcome.record.settings.to_string().as_bytes());
    vec![
        Card::text(
            "CREATOR",
            format!("truelimb {}", outcome.record.program_version),
            "program",
        ),
        Card::text("OBJECT", "Sun", ""),
        Card::text("TIMESYS", "UTC", "time scale"),
        Card::text(
            "DATE-BEG",
            outcome.record.time_utc[0].clone(),
            "first mid-exposure",
        ),
        Card::text(
            "DATE-END",
            outcome.record.time_utc[1].clone(),
            "last mid-exposure",
        ),
        Card::text("TREFPOS", "TOPOCENTER", ""),
        Card::real("OBSGEO-X", x, "[m] ITRS"),
        Card::real("OBSGEO-Y", y, "[m] ITRS"),
        Card::real("OBSGEO-Z", z, "[m] ITRS"),
        Card::text("OBSRVTRY", ascii(&outcome.record.site_name), "station"),
        Card::text("VERS_SW", version, "version of the program"),
        Card::text(
            "PRSTEP1",
            "LIMB-EXTRACTION",
            "limb of each frame by a template",
        ),
        Card::text("PRPROC1", "limb::extract", "procedure"),
        Card::text("PRPVER1", version, ""),
        Card::text(
            "PRSTEP2",
            "REFRACTION-REMOVAL",
            "the air's bending taken out",
        ),
        Card::text("PRPROC2", "refraction::remove", "procedure"),
        Card::text("PRPVER2", version, ""),
        Card::text(
            "TL_SETT",
            settings,
            "SHA-256 of the settings in result.json",
        ),
        Card::text("TL_PROV", "provenance.json", "inputs and products"),
    ]
}

/// `stack.fits`: image, variance and weight, helioprojective.
fn stack(outcome: &Outcome, session: &Session, path: &Path) -> Result<(), Error> {
    let Some(stack) = &outcome.stack else {
        return Ok(());
    };
    let middle = &outcome.measured[outcome.measured.len() / 2];
    let sun = &middle.middle.sun;
    let au_m = crate::constants::ASTRONOMICAL_UNIT.value;
    let radius_m = crate::constants::SOLAR_RADIUS_NOMINAL.value;
    let radius_arcsec = (radius_m / (sun.distance_au * au_m)).asin() / crate::units::ARCSEC_RAD;
    let centre = stack.centre_px() + 1.0;
    // Every plane says where it is, so that each of them opens as a map.
    let place = [
        Card::text(
            "DATE-OBS",
            middle.middle_utc.to_iso(),
            "middle of the session",
        ),
        Card::text("DATE-AVG", middle.middle_utc.to_iso(), ""),
        Card::text("WCSNAME", "Helioprojective-cartesian", ""),
        Card::text("CTYPE1", "HPLN-TAN", "to solar west"),
        Card::text("CTYPE2", "HPLT-TAN", "to solar north"),
        Card::text("CUNIT1", "arcsec", ""),
        Card::text("CUNIT2", "arcsec", ""),
        Card::real("CRPIX1", centre, ""),
        Card::real("CRPIX2", centre, ""),
        Card::real("CRVAL1", 0.0, ""),
        Card::real("CRVAL2", 0.0, ""),
        Card::real("CDELT1", stack.scale_arcsec_px, ""),
        Card::real("CDELT2", stack.scale_arcsec_px, ""),
        Card::real("PC1_1", 1.0, ""),
        Card::real("PC1_2", 0.0, ""),
        Card::real("PC2_1", 0.0, ""),
        Card::real("PC2_2", 1.0, ""),
        Card::real("LONPOLE", 180.0, ""),
        Card::real("DSUN_OBS", sun.distance_au * au_m, "[m]"),
        Card::real("HGLN_OBS", 0.0, "[deg]"),
        Card::real("HGLT_OBS", sun.b0_rad.to_degrees(), "[deg] B0"),
        Card::real("CRLN_OBS", sun.l0_rad.to_degrees(), "[deg] L0"),
        Card::real("CRLT_OBS", sun.b0_rad.to_degrees(), "[deg]"),
        Card::real("RSUN_REF", radius_m, "[m] IAU 2015 nominal"),
        Card::real("RSUN_OBS", radius_arcsec, "[arcsec] predicted, not fitted"),
        Card::real("WAVELNTH", middle.setup.optics.wavelength_nm, "[nm]"),
        Card::text("WAVEUNIT", "nm", ""),
    ];
    let mut cards = common(outcome, session);
    cards.extend(place.clone());
    cards.extend([
        Card::text("BUNIT", "adu", ""),
        Card::real(
            "TL_RADIU",
            outcome.record.shape.radius.value.unwrap_or(f64::NAN),
            "[arcsec] fitted, at 1 AU",
        ),
        Card::integer("NSUMEXP", stack.frames as i64, "frames"),
    ]);
    if let Some(r0) = outcome.record.seeing.line_of_sight.value {
        cards.push(Card::real("ATMOS_R0", r0, "[m] 500 nm, towards the Sun"));
    }
    let mut file = FitsWriter::create(path)?;
    file.image_f32(None, &stack.image.mapv(|it| it as f32), &cards)?;
    let mut squared = place.to_vec();
    squared.push(Card::text("BUNIT", "adu2", "variance of the mean"));
    file.image_f32(
        Some("VARIANCE"),
        &stack.variance.mapv(|it| it as f32),
        &squared,
    )?;
    file.image_f32(Some("WEIGHT"), &stack.weight.mapv(|it| it as f32), &place)?;
    file.finish()?;
    Ok(())
}

/// `seeing.ecsv`: a row for every frame.
fn seeing_table(outcome: &Outcome, path: &Path) -> Result<(), Error> {
    let frames = &outcome.traces.frames;
    let of = |f: &dyn Fn(&crate::result::record::FrameTrace) -> f64| {
        Values::F64(frames.iter().map(f).collect())
    };
    let gaps = Values::Gaps(
        frames
            .iter()
            .map(|it| Some(it.r0_blur_m).filter(|it| it.is_finite()))
            .collect(),
    );
    let columns = [
        Column::new(
            "sequence",
            Values::I32(frames.iter().map(|it| it.sequence as i32).collect()),
        )
        .describe("index in the session file, from 0")
        .ucd("meta.id"),
        Column::new(
            "frame",
            Values::I32(frames.iter().map(|it| it.frame as i32).collect()),
        )
        .describe("index in the sequence, from 0")
        .ucd("meta.id"),
        Column::new("time", of(&|it| it.time_s))
            .unit("s")
            .describe("mid-exposure after the session's first")
            .ucd("time.epoch"),
        Column::new(
            "kept",
            Values::U8(frames.iter().map(|it| u8::from(it.kept)).collect()),
        )
        .describe("1 where it went to the fit")
        .ucd("meta.code.qual"),
        Column::new("weight", of(&|it| it.weight))
            .describe("weight from the seeing")
            .ucd("stat.weight"),
        Column::new("r0_blur", gaps)
            .unit("m")
            .describe("Fried's parameter, 500 nm, towards the Sun, from the limb's width")
            .ucd("instr.obsty.seeing"),
        Column::new("radius", of(&|it| it.radius_mas))
            .unit("mas")
            .describe("minus the session's mean, at 1 AU")
            .ucd("phys.angSize"),
        Column::new("cos2", of(&|it| it.cos2_mas))
            .unit("mas")
            .describe("on the detector, air taken out")
            .ucd("stat.Fourier"),
        Column::new("sin2", of(&|it| it.sin2_mas))
            .unit("mas")
            .describe("on the detector, air taken out")
            .ucd("stat.Fourier"),
    ];
    let facts = [(
        "reference".to_owned(),
        Value::Text(outcome.record.time_utc[0].clone()),
    )];
    write_ecsv(path, &columns, &facts)?;
    Ok(())
}

/// `budget.ecsv`: the budget as a table.
fn budget_table(outcome: &Outcome, path: &Path) -> Result<(), Error> {
    let lines = &outcome.record.budget;
    let text = |f: &dyn Fn(&crate::result::record::BudgetLine) -> &String| {
        Values::Text(lines.iter().map(|it| f(it).clone()).collect())
    };
    let columns = [
        Column::new("term", text(&|it| &it.term))
            .describe("what it is")
            .ucd("meta.id"),
        Column::new(
            "sigma",
            Values::Gaps(lines.iter().map(|it| it.sigma_mas).collect()),
        )
        .unit("mas")
        .describe("standard uncertainty of the oblateness")
        .ucd("stat.error;src.ellipticity"),
        Column::new(
            "sigma_radius",
            Values::F64(lines.iter().map(|it| it.sigma_radius_mas).collect()),
        )
        .unit("mas")
        .describe("standard uncertainty of the radius")
        .ucd("stat.error;phys.angSize"),
        Column::new("kind", text(&|it| &it.kind))
            .describe("random or systematic")
            .ucd("meta.code.class"),
        Column::new("scope", text(&|it| &it.scope))
            .describe("common to a frame, burst, session, instrument or model")
            .ucd("meta.code.class"),
        Column::new("how", text(&|it| &it.how))
            .describe("how it was obtained")
            .ucd("meta.note"),
    ];
    write_ecsv(path, &columns, &[])?;
    Ok(())
}
