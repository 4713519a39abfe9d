//! `truelimb combine`: the results of many sessions into one value and a series.

use crate::Ending;
use crate::commands::{Failure, json, print};
use crate::progress::say;
use clap::Args;
use std::path::{Path, PathBuf};
use truelimb::Error;
use truelimb::frames::write_whole;
use truelimb::report::render_combined;
use truelimb::result::combined::{Combined, CombinedQuantity, SlopeRecord};
use truelimb::result::record::{Quantity, Record};
use truelimb::season::{self, Covariate, Settings};

/// `truelimb combine`.
#[derive(Args, Debug)]
pub(crate) struct Combine {
    /// Folders with a result.json, or folders of such folders; in any order.
    #[arg(value_name = "DIR", required = true)]
    pub(crate) folders: Vec<PathBuf>,
    /// Folder for combined.json, combined.html and the figures; made when it is not there.
    #[arg(short, long, value_name = "DIR")]
    pub(crate) output: Option<PathBuf>,
    /// A line of the budgets that the sessions share whatever its scope, such as "plate scale" where
    /// one calibration serves the whole season. May be repeated.
    #[arg(long, value_name = "TERM")]
    pub(crate) common: Vec<String>,
    /// CSV of epoch,value (a Julian year or a date, and a number): the slope against it is fitted.
    #[arg(long, value_name = "FILE")]
    pub(crate) covariate: Option<PathBuf>,
    /// Print combined.json on stdout.
    #[arg(long)]
    pub(crate) json: bool,
}

/// Runs the command.
pub(crate) fn combine(it: &Combine, quiet: bool) -> Result<Ending, Failure> {
    let mut records = Vec::new();
    for folder in &it.folders {
        for path in results_in(folder)? {
            records.push(record(&path)?);
        }
    }
    let covariate = match &it.covariate {
        None => None,
        Some(path) => {
            let text = std::fs::read_to_string(path)
                .map_err(|it| usage(path, &format!("could not be read: {it}")))?;
            Some(Covariate::read(&text).map_err(|it| usage(path, &it.to_string()))?)
        }
    };
    let settings = Settings {
        common: it.common.clone(),
        covariate,
    };
    let combined =
        season::combine(&records, &settings).map_err(|it| Failure::Usage(it.to_string()))?;
    if let Some(output) = &it.output {
        write(&combined, output)?;
    }
    if it.json {
        print(&json(&combined)?);
    } else if !quiet {
        print(&text(&combined));
    }
    if !quiet {
        for it in &combined.warnings {
            say(&format!("warning: {}", it.text));
        }
    }
    Ok(if combined.oblateness.mean.value.is_some() {
        Ending::Done
    } else {
        Ending::Refused
    })
}

fn usage(path: &Path, what: &str) -> Failure {
    Failure::Usage(format!("{}: {what}", path.display()))
}

/// The result.json of a folder, or those of the folders in it.
fn results_in(folder: &Path) -> Result<Vec<PathBuf>, Failure> {
    let own = folder.join("result.json");
    if own.is_file() {
        return Ok(vec![own]);
    }
    if folder.is_file() {
        return Ok(vec![folder.to_owned()]);
    }
    let entries = std::fs::read_dir(folder)
        .map_err(|it| usage(folder, &format!("the folder could not be read: {it}")))?;
    let mut found = Vec::new();
    for entry in entries {
        let entry = entry.map_err(|it| usage(folder, &it.to_string()))?;
        let path = entry.path().join("result.json");
        if path.is_file() {
            found.push(path);
        }
    }
    found.sort();
    if found.is_empty() {
        return Err(usage(
            folder,
            "no result.json in it or in a folder of it; give the folders that `truelimb reduce -o` wrote",
        ));
    }
    Ok(found)
}

fn record(path: &Path) -> Result<Record, Failure> {
    let text = std::fs::read_to_string(path)
        .map_err(|it| usage(path, &format!("could not be read: {it}")))?;
    serde_json::from_str(&text).map_err(|it| {
        usage(
            path,
            &format!("not a result of this program ({it}); reduce the session again"),
        )
    })
}

/// Writes everything, combined.json last.
fn write(combined: &Combined, folder: &Path) -> Result<(), Failure> {
    let figures = folder.join("figures");
    std::fs::create_dir_all(&figures).map_err(|it| {
        Failure::Run(Box::new(Error::File {
            path: figures.clone(),
            what: "the folder could not be made",
            reason: it.to_string(),
        }))
    })?;
    let rendered = render_combined(combined);
    for (stem, svg) in &rendered.figures {
        write_whole(&figures.join(format!("{stem}.svg")), svg.as_bytes())?;
    }
    write_whole(&folder.join("combined.html"), rendered.html.as_bytes())?;
    let text = json(combined)?;
    write_whole(
        &folder.join("combined.json"),
        format!("{text}\n").as_bytes(),
    )?;
    Ok(())
}

fn text(it: &Combined) -> String {
    let mut out = vec![it.summary.clone()];
    for (name, quantity, digits) in [("oblateness", &it.oblateness, 2), ("radius", &it.radius, 4)] {
        out.push(String::new());
        lines(name, quantity, digits, &mut out);
    }
    if let Some(middle) = it.excess_by_law.first() {
        out.push(String::new());
        out.push(format!(
            "beyond surface rotation ({} of the laws): {}; J2 {}",
            middle.law,
            shown(&middle.excess, 2),
            middle.j2.value.zip(middle.j2.sigma).map_or_else(
                || "not known".to_owned(),
                |(value, sigma)| format!("{value:.2e} +- {sigma:.1e}")
            )
        ));
    }
    out.join("\n")
}

fn shown(it: &Quantity, digits: usize) -> String {
    match (it.value, it.sigma) {
        (Some(value), Some(sigma)) => {
            format!("{value:.digits$} +- {sigma:.digits$} {}", it.unit)
        }
        _ => format!("not known ({})", it.reason.as_deref().unwrap_or("no value")),
    }
}

fn lines(name: &str, it: &CombinedQuantity, digits: usize, out: &mut Vec<String>) {
    out.push(format!("{name}: {}", shown(&it.mean, digits)));
    if let (Some(own), Some(shared)) = (it.sigma_own, it.sigma_shared) {
        out.push(format!(
            "  own to the sessions {own:.digits$}, shared by them {shared:.digits$} {}",
            it.mean.unit
        ));
    }
    if let Some(found) = &it.heterogeneity {
        out.push(format!(
            "  agreement: chi square {:.2} for {} degrees of freedom, p = {}, Birge ratio {}, dark uncertainty {:.digits$}",
            found.q,
            found.degrees,
            found.p.map_or("-".to_owned(), |it| format!("{it:.3}")),
            found.birge.map_or("-".to_owned(), |it| format!("{it:.2}")),
            found.dark
        ));
    }
    for slope in [Some(&it.trend), it.covariate.as_ref()]
        .into_iter()
        .flatten()
    {
        out.push(slope_line(slope, digits));
    }
}

fn slope_line(it: &SlopeRecord, digits: usize) -> String {
    match (it.limit_95, it.found_in_95_percent) {
        (Some(limit), Some(found)) => format!(
            "  against {}: {}; differs from 0 at 95 percent from {limit:.digits$}, found in 95 percent of cases from {found:.digits$}",
            it.against,
            shown(&it.slope, digits + 1)
        ),
        _ => format!(
            "  against {}: no slope ({})",
            it.against,
            it.reason.as_deref().unwrap_or("no reason")
        ),
    }
}
