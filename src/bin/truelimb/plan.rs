//! `truelimb plan`: a day before it begins, as a table, JSON, a page and a figure.

use crate::Ending;
use crate::commands::{Failure, header_number, json, print};
use crate::progress::say;
use clap::Args;
use std::path::{Path, PathBuf};
use truelimb::frames::write_whole;
use truelimb::pipeline::products;
use truelimb::plan::{self, Request};
use truelimb::report::render_plan;
use truelimb::result::plan::{Plan, PlanRow};
use truelimb::session::{self, Calibration, Session};
use truelimb::sky::Utc;

/// `truelimb plan`.
#[derive(Args, Debug)]
pub(crate) struct PlanArguments {
    /// The session file; its frames need not be there, nor any [[sequence]].
    #[arg(value_name = "SESSION")]
    pub(crate) session: PathBuf,
    /// The day, YYYY-MM-DD, by the Sun at the station.
    #[arg(long, value_name = "DATE")]
    pub(crate) date: String,
    /// Fried's parameter at 500 nm, zenith, as `truelimb seeing` gives it; a typical one by default.
    #[arg(long, value_name = "M")]
    pub(crate) r0_m: Option<f64>,
    /// Hours to observe in one go.
    #[arg(long, value_name = "H")]
    pub(crate) hours: Option<f64>,
    /// Error of the oblateness that is wanted; 1 and 0.5 mas by default.
    #[arg(long, value_name = "MAS")]
    pub(crate) goal: Option<f64>,
    /// Frames a second that the camera keeps up; as fast as frames are independent by default.
    #[arg(long, value_name = "N")]
    pub(crate) frames_per_s: Option<f64>,
    /// Folder for plan.json, plan.html and figures; made when it is not there.
    #[arg(short, long, value_name = "DIR")]
    pub(crate) output: Option<PathBuf>,
    /// Print plan.json on stdout.
    #[arg(long)]
    pub(crate) json: bool,
}

/// Runs the command.
pub(crate) fn plan(it: &PlanArguments, quiet: bool) -> Result<Ending, Failure> {
    let request = Request {
        date: date(&it.date)?,
        r0_m: it.r0_m,
        hours: it.hours,
        goal_mas: it.goal,
        frames_per_s: it.frames_per_s,
    };
    let session = session::read_without_frames(&it.session, &header_number)?;
    let sources = products::sources(&without_files(&session))?;
    let found =
        plan::plan(&session, &request, sources).map_err(|it| Failure::Plan(Box::new(it)))?;
    let text = json(&found)?;
    if let Some(folder) = &it.output {
        write(&found, &text, folder)?;
    }
    if it.json {
        print(&text);
    } else {
        print(&table(&found));
        print("");
        for it in &found.cautions {
            print(it);
        }
    }
    if !quiet {
        for warning in &found.warnings {
            say(&format!("warning: {}", warning.text));
        }
        if it.json {
            for it in &found.cautions {
                say(it);
            }
        }
    }
    Ok(if found.window.is_some() {
        Ending::Done
    } else {
        Ending::Refused
    })
}

/// 0 h UTC of a date.
fn date(text: &str) -> Result<Utc, Failure> {
    let told = |why: &str| {
        Failure::Usage(format!(
            "--date is \"{text}\"{why}; give a day as YYYY-MM-DD, such as 2026-06-21"
        ))
    };
    if text.len() != 10 {
        return Err(told(""));
    }
    Utc::parse(&format!("{text}T00:00:00")).map_err(|it| told(&format!(": {it}")))
}

/// The session without its frames: they are not what a plan is made from.
fn without_files(session: &Session) -> Session {
    let mut out = session.clone();
    for it in &mut out.sequences {
        it.files.clear();
        it.calibration = Calibration::default();
        it.camera.bad_pixels = None;
    }
    out
}

/// Writes everything, plan.json last.
fn write(found: &Plan, text: &str, folder: &Path) -> Result<(), Failure> {
    let figures = folder.join("figures");
    std::fs::create_dir_all(&figures).map_err(|it| truelimb::Error::File {
        path: figures.clone(),
        what: "the folder could not be made",
        reason: it.to_string(),
    })?;
    let rendered = render_plan(found);
    for (stem, svg) in &rendered.figures {
        write_whole(&figures.join(format!("{stem}.svg")), svg.as_bytes())?;
    }
    write_whole(&folder.join("plan.html"), rendered.html.as_bytes())?;
    write_whole(&folder.join("plan.json"), format!("{text}\n").as_bytes())?;
    Ok(())
}

/// Hour and minute of a time.
fn clock(text: &str) -> String {
    text.chars().skip(11).take(5).collect()
}

fn table(it: &Plan) -> String {
    let mut out = vec![it.summary.clone(), String::new()];
    out.push(format!(
        "{:<5}  {:>5}  {:>5}  {:>7}  {:>7}  {:>9}  {:>7}  {:>7}  {:>7}  {:>8}  {:>7}",
        "UTC", "z deg", "q deg", "axis", "flat", "+-", "frame", "1/s", "random", "system.", "sigma"
    ));
    out.extend(it.quarters.iter().map(row));
    out.push(String::new());
    out.push("axis: solar axis from the vertical, deg; flat: flattening by the air and its error, mas; frame: m = 2 of a frame by turbulence, mas;".to_owned());
    out.push("1/s: frames a second beyond which they are no longer independent; random, system., sigma: error of the oblateness after an hour like this, mas".to_owned());
    out.push(String::new());
    out.push(format!(
        "seeing: r0 {:.1} cm at 500 nm, zenith{}; wind {:.0} m/s",
        100.0 * it.seeing.r0_m,
        if it.seeing.given { "" } else { " (typical)" },
        it.seeing.wind_m_s
    ));
    if let Some(window) = &it.window {
        out.push(format!(
            "window: {} to {} UTC, {:.0} to {:.0} deg from the zenith; {:.0} frames at {:.2} a second",
            clock(&window.time_utc[0]),
            clock(&window.time_utc[1]),
            window.zenith_true_deg[1],
            window.zenith_true_deg[0],
            window.frames,
            window.frames_per_s
        ));
        for it in &window.rolls {
            out.push(format!(
                "  roll {:>5.1} deg  {} to {}",
                it.roll_deg,
                clock(&it.from_utc),
                clock(&it.to_utc)
            ));
        }
        out.push(format!(
            "expected: oblateness +- {:.2} mas ({:.2} random, {:.2} systematic), P4 +- {:.2} mas, radius +- {:.1} mas; Sun against instrument: condition number {}",
            window.sigma_random_mas.hypot(window.sigma_systematic_mas),
            window.sigma_random_mas,
            window.sigma_systematic_mas,
            window.sigma_p4_mas,
            window.sigma_radius_mas,
            window
                .condition_number
                .map_or_else(|| "-".to_owned(), |it| format!("{it:.2}"))
        ));
    }
    out.push("turns of the instrument, each number at its best:".to_owned());
    for it in &it.choices {
        let error = match (it.sigma_random_mas, it.sigma_systematic_mas) {
            (Some(random), Some(systematic)) => format!(
                "{:.2} mas, condition number {}",
                random.hypot(systematic),
                it.condition_number
                    .map_or_else(|| "-".to_owned(), |it| format!("{it:.2}"))
            ),
            _ => "the oblateness is not told apart from the instrument".to_owned(),
        };
        out.push(format!(
            "  {} by {:.0} deg from {}: {error}",
            it.moves,
            it.step_deg,
            clock(&it.from_utc)
        ));
    }
    for it in &it.goals {
        out.push(match (it.hours.value, it.days) {
            (Some(hours), Some(days)) => format!(
                "goal {} mas: {hours:.1} h like these, {days:.1} days",
                it.goal_mas
            ),
            _ => format!(
                "goal {} mas: not to be reached: {}",
                it.goal_mas,
                it.hours.reason.as_deref().unwrap_or("no reason")
            ),
        });
    }
    if let Some(camera) = &it.camera {
        out.extend(camera.advice.iter().cloned());
    }
    out.join("\n")
}

fn row(it: &PlanRow) -> String {
    let one = |it: Option<f64>, digits: usize| {
        it.map_or_else(|| "-".to_owned(), |it| format!("{it:.digits$}"))
    };
    format!(
        "{:<5}  {:>5.1}  {:>5.0}  {:>7.1}  {:>7.1}  {:>9.2}  {:>7}  {:>7}  {:>7}  {:>8}  {:>7}{}",
        clock(&it.time_utc),
        it.zenith_true_deg,
        it.parallactic_deg,
        it.axis_from_vertical_deg,
        it.flattening_mas,
        it.flattening_sigma_mas,
        one(it.frame_mas, 1),
        one(it.frames_per_s, 2),
        one(it.sigma_random_mas, 2),
        one(it.sigma_systematic_mas, 2),
        one(it.sigma_mas, 2),
        it.note
            .as_ref()
            .map_or_else(String::new, |it| format!("  {it}"))
    )
}
