//! `truelimb recover`: known shapes injected into sessions like this one.

use crate::Ending;
use crate::commands::{Failure, header_number, json, print};
use crate::progress::Bar;
use clap::Args;
use std::path::PathBuf;
use truelimb::frames::write_whole;
use truelimb::recover::{self, Settings};
use truelimb::result::record::Record;
use truelimb::result::recovery::{Coverage, Recovered, Recovery, Score};
use truelimb::session;

/// `truelimb recover`.
#[derive(Args, Debug)]
#[command(allow_negative_numbers = true)]
pub(crate) struct Recover {
    /// The session file; its frames tell times, exposure and light.
    #[arg(value_name = "SESSION")]
    pub(crate) session: PathBuf,
    /// Oblatenesses to inject, mas.
    #[arg(
        long,
        value_name = "MAS[,MAS]",
        value_delimiter = ',',
        default_value = "0,8"
    )]
    pub(crate) injected: Vec<f64>,
    /// Sessions made for each of them.
    #[arg(long, default_value_t = 20, value_parser = clap::value_parser!(u32).range(1..=100_000))]
    pub(crate) n: u32,
    /// Folder of a result of this session: its seeing and distortion are made.
    #[arg(long, value_name = "DIR")]
    pub(crate) result: Option<PathBuf>,
    /// Frames of each sequence at the most, for speed: the random error grows.
    #[arg(long, value_name = "N", value_parser = clap::value_parser!(u32).range(2..=100_000))]
    pub(crate) frames: Option<u32>,
    /// Seed of everything random.
    #[arg(long, default_value_t = 1)]
    pub(crate) seed: u64,
    /// Folder for recovery.json; made when it is not there.
    #[arg(short, long, value_name = "DIR")]
    pub(crate) output: Option<PathBuf>,
    /// Print recovery.json on stdout.
    #[arg(long)]
    pub(crate) json: bool,
}

/// Runs the command.
pub(crate) fn recover(it: &Recover, quiet: bool) -> Result<Ending, Failure> {
    if let Some(bad) = it.injected.iter().find(|it| !(it.abs() <= 5000.0)) {
        return Err(Failure::Usage(format!(
            "--injected has {bad}; allowed are numbers from -5000 to 5000 mas"
        )));
    }
    let session = session::read_with_headers(&it.session, &header_number)?;
    let result = match &it.result {
        None => None,
        Some(folder) => Some(record(folder)?),
    };
    let settings = Settings {
        injected_mas: it.injected.clone(),
        sessions: it.n as usize,
        seed: it.seed,
        frames: it.frames.map(|it| it as usize),
    };
    let bar = Bar::new(quiet);
    let recovery = recover::recover(&session, result.as_ref(), &settings, &bar);
    bar.finish();
    let recovery = recovery.map_err(|it| Failure::Recover(Box::new(it)))?;
    if let Some(folder) = &it.output {
        std::fs::create_dir_all(folder).map_err(|it| truelimb::Error::File {
            path: folder.clone(),
            what: "the folder could not be made",
            reason: it.to_string(),
        })?;
        let text = json(&recovery)?;
        write_whole(
            &folder.join("recovery.json"),
            format!("{text}\n").as_bytes(),
        )?;
    }
    if it.json {
        print(&json(&recovery)?);
    } else if !quiet {
        print(&text(&recovery));
    }
    Ok(if recovery.together.answered > 0 {
        Ending::Done
    } else {
        Ending::Refused
    })
}

fn record(folder: &std::path::Path) -> Result<Record, Failure> {
    let path = folder.join("result.json");
    let text = std::fs::read_to_string(&path)
        .map_err(|it| Failure::Usage(format!("{}: could not be read: {it}", path.display())))?;
    serde_json::from_str(&text).map_err(|it| {
        Failure::Usage(format!(
            "{}: not a result of this program ({it}); reduce the session again",
            path.display()
        ))
    })
}

fn text(it: &Recovery) -> String {
    let mut out = vec![format!(
        "{:<10} {:>5} {:>9} {:>8} {:>18} {:>9} {:>10} {:>22} {:>22}",
        "injected",
        "made",
        "answered",
        "failed",
        "bias",
        "scatter",
        "mean sigma",
        "in 68 percent",
        "in 95 percent"
    )];
    for one in &it.by_injected {
        out.push(row(one, "mas", 2));
    }
    if it.by_injected.len() > 1 {
        out.push(row(&it.together, "mas", 2));
    }
    out.push(radius_row(&it.together));
    if let (Some(value), Some(sigma)) = (it.gain.value, it.gain.sigma) {
        out.push(format!(
            "\nrecovered over injected difference: {value:.3} +- {sigma:.3}"
        ));
    }
    if let Some(one) = it.trials.iter().find_map(|it| it.failed.as_ref()) {
        out.push(format!("first failure: {one}"));
    }
    out.push(String::new());
    for note in &it.notes {
        out.push(format!("note: {note}"));
    }
    out.join("\n")
}

fn row(it: &Recovered, unit: &str, digits: usize) -> String {
    let name = it
        .injected_mas
        .map_or_else(|| "all".to_owned(), |it| format!("{it} mas"));
    format!(
        "{name:<10} {:>5} {:>9} {:>8} {}",
        it.made,
        it.answered,
        it.failed,
        cells(&it.oblateness, unit, digits)
    )
}

fn radius_row(it: &Recovered) -> String {
    format!(
        "{:<10} {:>5} {:>9} {:>8} {}",
        "radius",
        it.made,
        it.radius.coverage_68.of,
        it.failed,
        cells(&it.radius, "arcsec", 4)
    )
}

fn cells(it: &Score, unit: &str, digits: usize) -> String {
    let bias = match (it.bias.value, it.bias.sigma) {
        (Some(value), Some(sigma)) => format!("{value:.digits$} +- {sigma:.digits$}"),
        _ => "-".to_owned(),
    };
    let one = |it: Option<f64>| it.map_or("-".to_owned(), |it| format!("{it:.digits$}"));
    let share = |it: &Coverage| match (it.share, it.interval_95) {
        (Some(share), Some([low, high])) => format!(
            "{:.0} percent ({:.0} to {:.0})",
            100.0 * share,
            100.0 * low,
            100.0 * high
        ),
        _ => "-".to_owned(),
    };
    format!(
        "{bias:>18} {:>9} {:>10} {:>22} {:>22}  {unit}",
        one(it.scatter),
        one(it.mean_sigma),
        share(&it.coverage_68),
        share(&it.coverage_95)
    )
}
