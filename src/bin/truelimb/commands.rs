//! What each command does.

use crate::Ending;
use crate::arguments::{Demo, Limb, Reduce, Simulate};
use crate::dry_run;
use crate::progress::{Bar, say};
use std::io::Write;
use std::path::Path;
use truelimb::pipeline::single::{self, Definition, SingleSettings};
use truelimb::pipeline::{self, Options, Outcome, Progress};
use truelimb::result::record::{Quantity, Record, ShapeQuantity, Status};
use truelimb::session::{RotationLaw, Session};
use truelimb::synth::SynthError;
use truelimb::{Error, session, synth};

/// Why a command failed.
#[derive(Debug, thiserror::Error)]
pub(crate) enum Failure {
    /// What was typed cannot be used.
    #[error("{0}")]
    Usage(String),
    /// The library refused.
    #[error(transparent)]
    Run(Box<Error>),
    /// A session could not be made.
    #[error("simulation: {0}")]
    Synth(SynthError),
    /// Sessions like this one could not be made.
    #[error(transparent)]
    Recover(Box<truelimb::recover::RecoverError>),
    /// The day could not be planned.
    #[error(transparent)]
    Plan(Box<truelimb::plan::PlanError>),
}

impl<E: Into<Error>> From<E> for Failure {
    fn from(it: E) -> Self {
        Self::Run(Box::new(it.into()))
    }
}

impl Failure {
    /// What to do, where the sentence does not say it.
    pub(crate) fn cure(&self) -> Option<&'static str> {
        match self {
            Self::Run(it) => match it.as_ref() {
                Error::Fits(it) => it.cure(),
                _ => None,
            },
            _ => None,
        }
    }
}

/// Prints on stdout; a closed pipe is no failure.
pub(crate) fn print(text: &str) {
    let _ = writeln!(std::io::stdout().lock(), "{text}");
}

const CAUTION: &str = "Sunlight through optics blinds and burns. A certified full-aperture filter stands before the optics (larger telescopes: a heat-rejecting entrance made for them); never look through an unfiltered finder, cover what is not in use, never leave it unattended. Local codes, the station's rules and its trained staff come first.";

/// `truelimb demo`.
pub(crate) fn demo(it: &Demo, quiet: bool) -> Result<Ending, Failure> {
    let folder = it.output.join("session");
    make(&synth::Scenario::default(), it.seed, &folder, quiet)?;
    let result = it.output.join("result");
    let options = Options {
        seed: it.seed,
        stack: true,
    };
    let outcome = run(
        &folder.join("session.toml"),
        &result,
        &options,
        &Bar::new(quiet),
    )?;
    if it.json {
        print(&json(&outcome.record)?);
    } else {
        print(&summary(&outcome.record));
        print(&format!(
            "\nreport: {}",
            result.join("report.html").display()
        ));
    }
    if !quiet {
        say(CAUTION);
    }
    Ok(ending(&outcome.record))
}

/// `truelimb reduce`.
pub(crate) fn reduce(it: &Reduce, quiet: bool, verbose: bool) -> Result<Ending, Failure> {
    let options = Options {
        seed: it.seed,
        stack: !it.no_stack,
    };
    if it.dry_run {
        return dry_run::dry_run(it, &options, quiet);
    }
    let mut session = match &it.limbs {
        None => session::read_with_headers(&it.session, &header_number)?,
        // The frames may be gone; what only their headers said must be in the session file.
        Some(_) => session::read_without_frames(&it.session, &header_number)?,
    };
    if let Some(name) = &it.rotation {
        session.rotation = rotation(name)?;
        session.assumed.retain(|it| it != "gravity.rotation");
    }
    let bar = Bar::new(quiet).verbose(verbose);
    let outcome = reduced(&session, it.limbs.as_deref(), &it.output, &options, &bar)?;
    if it.json {
        print(&json(&outcome.record)?);
    } else if !quiet {
        print(&summary(&outcome.record));
        print(&format!(
            "\nreport: {}",
            it.output.join("report.html").display()
        ));
    }
    Ok(ending(&outcome.record))
}

fn ending(record: &Record) -> Ending {
    match record.shape.oblateness.status {
        Status::Measured => Ending::Done,
        Status::NotSeparated => Ending::Refused,
    }
}

fn run(path: &Path, output: &Path, options: &Options, bar: &Bar) -> Result<Outcome, Failure> {
    let session = session::read_with_headers(path, &header_number)?;
    reduced(&session, None, output, options, bar)
}

fn reduced(
    session: &Session,
    limbs: Option<&Path>,
    output: &Path,
    options: &Options,
    bar: &Bar,
) -> Result<Outcome, Failure> {
    for (what, keys) in [
        ("default taken", &session.assumed),
        ("from the headers", &session.from_headers),
    ] {
        if !keys.is_empty() {
            bar.detail(&format!("{what}: {}", keys.join(", ")));
        }
    }
    let outcome = match limbs {
        None => pipeline::reduce(session, options, bar),
        Some(limbs) => pipeline::refit(session, limbs, options, bar),
    };
    bar.finish();
    let outcome = outcome?;
    pipeline::products::write(&outcome, session, output)?;
    Ok(outcome)
}

/// The rotation law of this name.
fn rotation(name: &str) -> Result<RotationLaw, Failure> {
    RotationLaw::ALL
        .into_iter()
        .find(|it| it.name() == name)
        .ok_or_else(|| {
            let allowed: Vec<&str> = RotationLaw::ALL.iter().map(|it| it.name()).collect();
            Failure::Usage(format!(
                "--rotation is \"{name}\"; allowed are {}",
                allowed.join(", ")
            ))
        })
}

/// A number from a frame's header, for a fact that the session leaves out.
pub(crate) fn header_number(frame: &Path, keyword: &str) -> Option<f64> {
    truelimb::frames::ImageFile::open(frame)
        .ok()?
        .key_f64(keyword)
        .ok()
        .flatten()
}

/// A result as JSON.
pub(crate) fn json<T: serde::Serialize>(value: &T) -> Result<String, Failure> {
    serde_json::to_string_pretty(value).map_err(|source| {
        Failure::Run(Box::new(Error::Record {
            what: "the result",
            source,
        }))
    })
}

/// What a person wants to know first.
fn summary(record: &Record) -> String {
    let shape = &record.shape;
    let seeing = &record.seeing;
    let mut out = vec![
        record.summary.clone(),
        String::new(),
        shape_line(
            "oblateness, equatorial minus polar radius",
            &shape.oblateness,
            2,
        ),
        shape_line("radius at 1 AU", &shape.radius, 4),
        shape_line("P4", &shape.p4, 2),
        quantity_line("r0 at 500 nm, zenith", &seeing.r0, 4),
        format!(
            "frames: {} read, {} usable, {} used; turbulence makes {} of the variance of the oblateness",
            record.selection.read,
            record.selection.usable,
            record.selection.used,
            record.turbulence.share.value.map_or_else(
                || "an unknown part".to_owned(),
                |it| format!("{:.0} percent", 100.0 * it)
            ),
        ),
    ];
    if !record.warnings.is_empty() {
        out.push(format!("{}:", counted(record.warnings.len(), "warning")));
    }
    for it in &record.warnings {
        out.push(format!("warning: {}", it.text));
    }
    out.join("\n")
}

/// A number of things in words.
pub(crate) fn counted(count: usize, thing: &str) -> String {
    format!("{count} {thing}{}", if count == 1 { "" } else { "s" })
}

fn shape_line(name: &str, it: &ShapeQuantity, digits: usize) -> String {
    match (it.value, it.sigma) {
        (Some(value), Some(sigma)) => {
            format!("{name}: {value:.digits$} +- {sigma:.digits$} {}", it.unit)
        }
        _ => format!("{name}: not separated"),
    }
}

fn quantity_line(name: &str, it: &Quantity, digits: usize) -> String {
    match (it.value, it.sigma) {
        (Some(value), Some(sigma)) => {
            format!("{name}: {value:.digits$} +- {sigma:.digits$} {}", it.unit)
        }
        _ => format!(
            "{name}: not measured ({})",
            it.reason.as_deref().unwrap_or("no reason")
        ),
    }
}

/// `truelimb simulate`.
pub(crate) fn simulate(it: &Simulate, quiet: bool) -> Result<Ending, Failure> {
    let scenario = match &it.scenario {
        None => synth::Scenario::default(),
        Some(path) => {
            let text = std::fs::read_to_string(path).map_err(|it| {
                Failure::Usage(format!("{}: could not be read: {it}", path.display()))
            })?;
            synth::read_scenario(&text)
                .map_err(|it| Failure::Usage(format!("{}: {it}", path.display())))?
        }
    };
    make(&scenario, it.seed, &it.output, quiet)?;
    let path = it.output.join("session.toml");
    if it.json {
        print(&json(&serde_json::json!({
            "session": path,
            "truth": it.output.join("truth.json"),
            "seed": it.seed,
        }))?);
    } else {
        print(&path.display().to_string());
    }
    Ok(Ending::Done)
}

fn make(scenario: &synth::Scenario, seed: u64, folder: &Path, quiet: bool) -> Result<(), Failure> {
    let bar = Bar::new(quiet);
    let frames = scenario.sequences.iter().map(|it| it.frames as u64).sum();
    bar.stage("making frames", frames);
    let made = synth::make(scenario, seed, folder, &|| bar.tick());
    bar.finish();
    made.map(|_| ()).map_err(Failure::Synth)
}

/// `truelimb limb`.
pub(crate) fn limb(it: &Limb) -> Result<Ending, Failure> {
    let settings = SingleSettings {
        wavelength_nm: it.wavelength_nm,
        aperture_m: it.aperture_m,
        plane: it.plane,
        definition: definition(&it.definition)?,
    };
    let found = single::limb_of_file(&it.image, &settings).map_err(|error| {
        // A limb that cannot be measured names no file of its own.
        let own = matches!(error, Error::Fits(_));
        if own {
            error.into()
        } else {
            Failure::Usage(format!("{}: {error}", it.image.display()))
        }
    })?;
    if it.json {
        print(&json(&found)?);
        return Ok(Ending::Done);
    }
    print(&format!(
        "centre   {:.4} {:.4} +- {:.4} px (0-based)\nradius   {:.4} +- {:.4} px\ncos 2    {:+.4}   sin 2 {:+.4} px\ncos 3    {:+.4}   sin 3 {:+.4} px\ncos 4    {:+.4}   sin 4 {:+.4} +- {:.4} px\nblur     {:.2} px\nsectors  {} used, {} left out\nlimb     {}",
        found.centre_px[0],
        found.centre_px[1],
        found.centre_sigma_px,
        found.radius_px,
        found.radius_sigma_px,
        found.cos2_px,
        found.sin2_px,
        found.cos3_px,
        found.sin3_px,
        found.cos4_px,
        found.sin4_px,
        found.harmonic_sigma_px,
        found.width_px,
        found.sectors_used,
        found.sectors_rejected,
        found.definition,
    ));
    for it in &found.warnings {
        say(&format!("warning: {it}"));
    }
    Ok(Ending::Done)
}

fn definition(text: &str) -> Result<Definition, Failure> {
    let refused = || {
        Failure::Usage(format!(
            "--definition is \"{text}\"; allowed are template, inflection, half-intensity, and fourier:WINDOW with a window of 2 to 25 arcsec, such as fourier:10"
        ))
    };
    match text.split_once(':') {
        None if text == "template" => Ok(Definition::Template),
        None if text == "inflection" => Ok(Definition::Inflection),
        None if text == "half-intensity" => Ok(Definition::HalfIntensity),
        Some(("fourier", window)) => window
            .parse()
            .ok()
            .filter(|it| (2.0..=25.0).contains(it))
            .map(Definition::Fourier)
            .ok_or_else(refused),
        _ => Err(refused()),
    }
}
