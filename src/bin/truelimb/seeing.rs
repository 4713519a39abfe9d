//! `truelimb seeing`: the air alone, as a table, as JSON, as a time series.

use crate::Ending;
use crate::arguments::Seeing;
use crate::commands::{Failure, header_number, json, print};
use crate::progress::{Bar, say};
use std::path::Path;
use truelimb::pipeline::air::{measure_air, write_time_series};
use truelimb::result::air::{AirReport, AirSequence};
use truelimb::result::record::Quantity;
use truelimb::{Error, frames, session};

/// `truelimb seeing`.
pub(crate) fn seeing(it: &Seeing, quiet: bool) -> Result<Ending, Failure> {
    let session = session::read_with_headers(&it.session, &header_number)?;
    let bar = Bar::new(quiet);
    let air = measure_air(&session, &bar);
    bar.finish();
    let air = air?;
    let text = json(&air.report)?;
    if let Some(folder) = &it.output {
        std::fs::create_dir_all(folder).map_err(|error| Error::File {
            path: folder.clone(),
            what: "the folder could not be made",
            reason: error.to_string(),
        })?;
        write_time_series(&air, &folder.join("seeing.ecsv"))?;
        // Last, so that a result is there only when its table is.
        write(&folder.join("seeing.json"), &text)?;
    }
    if it.json {
        print(&text);
    } else {
        print(&table(&air.report));
    }
    if !quiet {
        for warning in &air.report.warnings {
            say(&format!("warning: {}", warning.text));
        }
    }
    Ok(Ending::Done)
}

fn write(path: &Path, text: &str) -> Result<(), Failure> {
    frames::write_whole(path, format!("{text}\n").as_bytes())?;
    Ok(())
}

/// A line a sequence, and what the session as a whole says.
fn table(it: &AirReport) -> String {
    let mut out = vec![format!(
        "{:>8}  {:<19}  {:>6}  {:>6}  {:>15}  {:>15}  {:>13}  {:>8}  {:>8}",
        "sequence",
        "UTC",
        "frames",
        "z deg",
        "r0 motion cm",
        "r0 blur cm",
        "fwhm arcsec",
        "tau0 ms",
        "floor mas"
    )];
    out.extend(it.sequences.iter().map(row));
    out.push(String::new());
    let seeing = &it.seeing;
    for (name, quantity, factor, unit, digits) in [
        (
            "r0 by motion, 500 nm, zenith",
            &seeing.by_motion,
            100.0,
            "cm",
            2,
        ),
        (
            "r0 by blur, 500 nm, zenith",
            &seeing.by_blur,
            100.0,
            "cm",
            2,
        ),
        (
            "the instrument's own blur, rms on an axis",
            &seeing.own_blur,
            1.0,
            "arcsec",
            2,
        ),
        (
            "long-exposure image, towards the Sun",
            &seeing.fwhm,
            1.0,
            "arcsec",
            2,
        ),
        ("coherence time", &seeing.coherence_time, 1000.0, "ms", 2),
        ("outer scale", &seeing.outer_scale, 1.0, "m", 1),
        (
            "height of the turbulence",
            &seeing.height_proxy,
            1.0,
            "m",
            0,
        ),
    ] {
        out.push(format!("{name}: {}", words(quantity, factor, unit, digits)));
    }
    if !it.harmonics.is_empty() {
        out.push(String::new());
        out.push("floor by turbulence, one coefficient, mas at 1 AU: predicted from the seeing, observed".to_owned());
        for floor in &it.harmonics {
            let mean = floor
                .mean_observed_mas
                .map_or_else(|| "-".to_owned(), |v| format!("{v:.1}"));
            out.push(format!(
                "  m = {}: a frame {:.1}, {:.1}; the mean over {:.0} s {:.1}, {mean}",
                floor.m,
                floor.frame_predicted_mas,
                floor.frame_observed_mas,
                floor.time_s,
                floor.mean_predicted_mas
            ));
        }
    }
    out.join("\n")
}

fn row(it: &AirSequence) -> String {
    format!(
        "{:>8}  {:<19}  {:>6}  {:>6.1}  {:>15}  {:>15}  {:>13}  {:>8}  {:>8}",
        it.sequence + 1,
        it.time_utc[0].chars().take(19).collect::<String>(),
        it.frames_used,
        it.zenith_true_deg,
        cell(&it.r0_motion, 100.0, 2),
        cell(&it.r0_blur, 100.0, 2),
        cell(&it.fwhm, 1.0, 2),
        it.coherence_time
            .value
            .map_or_else(|| "-".to_owned(), |v| format!("{:.2}", 1000.0 * v)),
        it.floor
            .value
            .map_or_else(|| "-".to_owned(), |v| format!("{v:.1}")),
    )
}

fn cell(it: &Quantity, factor: f64, digits: usize) -> String {
    match (it.value, it.sigma) {
        (Some(value), Some(sigma)) => {
            format!("{:.digits$} +- {:.digits$}", factor * value, factor * sigma)
        }
        _ => "-".to_owned(),
    }
}

fn words(it: &Quantity, factor: f64, unit: &str, digits: usize) -> String {
    match (it.value, it.sigma) {
        (Some(_), Some(_)) => format!("{} {unit}", cell(it, factor, digits)),
        (Some(value), None) => format!("{:.digits$} {unit}", factor * value),
        _ => format!(
            "not measured ({})",
            it.reason.as_deref().unwrap_or("no reason")
        ),
    }
}
