//! The day before it begins: where the Sun will stand, what the air will do, when to observe, how to turn the
//! instrument, and what error to expect.
//!
//! # Model
//!
//! Every quarter of an hour is three stretches of frames. The variance of a stretch's mean harmonics is that
//! of the turbulence floor ([`crate::seeing::floor_variance_mas2`]) as a first-order process of the floor's
//! correlation time, and of photons; then blocks, design matrix, prior knowledge and fit are those of
//! [`crate::pipeline::reduce`].
//!
//! ```text
//! var(mean of n frames, step t) = [ V_m coth(t / T_m) + photons ] / n
//! hours to a goal               = hours of the window  random^2 / (goal^2 - systematic^2)
//! ```
//!
//! # Valid for
//!
//! The mean over the layers of [`crate::seeing::ProfilePrior`], scaled to one Fried's parameter at the
//! zenith; one wind in all layers; zenith distances up to 75 degrees. Systematic errors of the limb's model
//! (its edge, its blur, the flat) are not in it.
//!
//! # Accuracy
//!
//! Of the random error: the spread of profiles from day to day, about 10 percent; `tests/reach_plan.rs`
//! compares with sessions of an independent model. Frames weighed by a flickering seeing do better by a few
//! percent, which is promised only where the flicker is given.
//!
//! # Source
//!
//! As the stages; variance of the mean of a first-order process: any textbook on time series.

mod air;
mod advice;
mod expected;
mod quarters;
mod window;

use crate::air::AirError;
use crate::pipeline::Error;
use crate::pipeline::ahead::Ahead;
use crate::result::plan::{
    PLAN_SCHEMA_VERSION, Plan, PlannedGoal, PlannedLayer, PlannedSeeing, PlannedWindow,
};
use crate::result::record::{Quantity, SourceFile, WarningRecord};
use crate::seeing::SeeingError;
use crate::session::{Session, WeatherSource, resolved};
use crate::shape::LARGEST_ZENITH_DEG;
use crate::sky::Utc;
use quarters::{QUARTER_S, Quarter};

pub use advice::CAUTIONS;
pub use air::{Seeing, TYPICAL_R0_M};
pub use expected::{Expected, Visit, expected};

/// Flattening by dispersion that a filter may leave, mas.
pub(crate) const SMEAR_LIMIT_MAS: f64 = 0.05;

/// Hours of a window unless others are asked for.
pub const WINDOW_H: f64 = 2.0;

/// What is asked.
#[derive(Clone, Debug, PartialEq)]
pub struct Request {
    /// 0 h UTC of the date.
    pub date: Utc,
    /// Fried's parameter at 500 nm, zenith; the typical one without it.
    pub r0_m: Option<f64>,
    /// Hours to observe; [`WINDOW_H`] without.
    pub hours: Option<f64>,
    /// Error of the oblateness that is wanted, mas; 1 and 0.5 without.
    pub goal_mas: Option<f64>,
    /// Frames a second of the camera; as fast as frames are independent without.
    pub frames_per_s: Option<f64>,
}

/// Why there is no plan.
#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum PlanError {
    /// A number that was asked for cannot be used.
    #[error("{what} is {found} {unit}; allowed are {least} to {most} {unit}")]
    OutOfRange {
        /// Which number.
        what: &'static str,
        /// Value found.
        found: f64,
        /// Least allowed.
        least: f64,
        /// Most allowed.
        most: f64,
        /// Unit.
        unit: &'static str,
    },
    /// The Sun does not rise enough.
    #[error(
        "on {date} the Sun does not stand 5 deg above the horizon of {site} at any time; choose another date"
    )]
    SunDown {
        /// The day.
        date: String,
        /// The station.
        site: String,
    },
    /// A camera above the air has nothing to plan for.
    #[error(
        "the session stands above the air (weather.none = true): a plan is about the air; leave it out, or give the weather of a station"
    )]
    AboveTheAir,
    /// Nothing to expect anything from.
    #[error("no visit was given; at least one stretch of frames is needed")]
    Empty,
    /// The turbulence has no answer.
    #[error("seeing: {0}")]
    Seeing(#[from] SeeingError),
    /// The stages refused.
    #[error(transparent)]
    Run(Box<Error>),
}

impl From<Error> for PlanError {
    fn from(it: Error) -> Self {
        Self::Run(Box::new(it))
    }
}

impl From<AirError> for PlanError {
    fn from(it: AirError) -> Self {
        Error::from(it).into()
    }
}

/// Plans a day; `created_from` names the files behind the session.
///
/// # Errors
///
/// [`PlanError`] for numbers out of range, a Sun that stays down, a session above the air, and whatever the
/// stages refuse.
pub fn plan(
    session: &Session,
    request: &Request,
    created_from: Vec<SourceFile>,
) -> Result<Plan, PlanError> {
    request.check()?;
    if session.weather.source == WeatherSource::None {
        return Err(PlanError::AboveTheAir);
    }
    let mut warnings = Vec::new();
    let given = session;
    let session = &with_weather(session, request.date, &mut warnings);
    let seeing = Seeing::typical(request.r0_m);
    let quarters = quarters::quarters(session, request.date, &seeing)?;
    let date: String = request.date.to_iso().chars().take(10).collect();
    if quarters.is_empty() {
        return Err(PlanError::SunDown {
            date,
            site: session.site.name.clone(),
        });
    }
    let rows = quarters
        .iter()
        .map(|it| quarters::row(session, it, request.frames_per_s))
        .collect::<Result<Vec<_>, _>>()?;
    let usable = quarters.iter().filter(|it| it.noise.is_some()).count();
    let usable_hours = usable as f64 * QUARTER_S / 3600.0;
    let wanted = (request.hours.unwrap_or(WINDOW_H) * 3600.0 / QUARTER_S).round() as usize;
    let length = wanted.clamp(1, usable.max(1));
    if length < wanted {
        warnings.push(WarningRecord {
            code: "short-day".to_owned(),
            text: format!(
                "the Sun stands within {LARGEST_ZENITH_DEG} deg of the zenith for {usable_hours} h only: the window is so long, not {} h",
                wanted as f64 * QUARTER_S / 3600.0
            ),
        });
    }
    if session.environment.is_some() {
        warnings.push(WarningRecord {
            code: "readings-to-come".to_owned(),
            text: "the instrument's drift against the readings of [environment] is not in the error: the readings are still to come".to_owned(),
        });
    }
    if !seeing.given {
        warnings.push(WarningRecord {
            code: "typical-seeing".to_owned(),
            text: format!(
                "no r0 was given: {:.0} cm stand for a typical day; the random error goes with r0 to the power -5/6",
                100.0 * seeing.r0_m
            ),
        });
    }
    let found = window::best(session, &quarters, length, request.frames_per_s)?;
    let camera = match lowest(&quarters[found.quarters.clone()]) {
        Some((moment, noise)) => Some(advice::camera(session, &seeing, moment, noise)?),
        None => None,
    };
    Ok(Plan {
        schema_version: PLAN_SCHEMA_VERSION,
        program_version: env!("CARGO_PKG_VERSION").to_owned(),
        site_name: session.site.name.clone(),
        summary: summary(&session.site.name, &date, found.window.as_ref()),
        date,
        created_from,
        settings: resolved(given),
        seeing: seeing_record(&seeing),
        quarters: rows,
        usable_hours,
        goals: goals(request, found.window.as_ref(), usable_hours),
        window: found.window,
        choices: found.choices,
        camera,
        cautions: CAUTIONS.map(str::to_owned).to_vec(),
        warnings,
    })
}

impl Request {
    /// Refuses numbers that cannot be meant.
    fn check(&self) -> Result<(), PlanError> {
        for (what, found, least, most, unit) in [
            ("r0", self.r0_m, 0.005, 1.0, "m"),
            ("the length of the window", self.hours, 0.25, 16.0, "h"),
            ("the goal", self.goal_mas, 0.01, 1000.0, "mas"),
            (
                "the frame rate",
                self.frames_per_s,
                0.001,
                10_000.0,
                "frames/s",
            ),
        ] {
            if let Some(found) = found.filter(|it| !(least..=most).contains(it)) {
                return Err(PlanError::OutOfRange {
                    what,
                    found,
                    least,
                    most,
                    unit,
                });
            }
        }
        Ok(())
    }
}

/// The session with weather for the day: its own where the log covers a day's Sun, else the log's mean.
fn with_weather(session: &Session, date: Utc, warnings: &mut Vec<WarningRecord>) -> Session {
    let mut out = session.clone();
    if let WeatherSource::Log(log) = &session.weather.source {
        let mean = log.mean();
        warnings.push(WarningRecord {
            code: "mean-weather".to_owned(),
            text: format!(
                "weather of {}: the mean of the {} readings of {}, {:.1} hPa, {:.1} C, humidity {:.2}",
                date.to_iso().chars().take(10).collect::<String>(),
                log.rows(),
                log.path().display(),
                mean.pressure_hpa,
                mean.temperature_c,
                mean.relative_humidity
            ),
        });
        out.weather.source = WeatherSource::Constant(mean);
    }
    out
}

/// The moment of a window when the Sun stands lowest, with its noise.
fn lowest(window: &[Quarter]) -> Option<(&Ahead, &air::FrameNoise)> {
    window
        .iter()
        .flat_map(|it| it.moments.iter().zip(it.noise.iter().cycle()))
        .max_by(|a, b| a.0.sun.zenith_true_rad.total_cmp(&b.0.sun.zenith_true_rad))
}

fn seeing_record(it: &Seeing) -> PlannedSeeing {
    PlannedSeeing {
        r0_m: it.r0_m,
        given: it.given,
        wind_m_s: it.wind_m_s,
        outer_scale_m: it.profile.outer_scale_m,
        layers: it
            .profile
            .layers
            .iter()
            .map(|it| PlannedLayer {
                height_m: it.height_m,
                share: it.share,
            })
            .collect(),
    }
}

/// Hours to each goal, or why it cannot be reached.
fn goals(request: &Request, window: Option<&PlannedWindow>, usable_hours: f64) -> Vec<PlannedGoal> {
    let wanted = request.goal_mas.map_or(vec![1.0, 0.5], |it| vec![it]);
    wanted
        .into_iter()
        .map(|goal_mas| {
            let hours = match window {
                None => Quantity::missing("h", "the oblateness cannot be measured that day"),
                Some(it) if it.sigma_systematic_mas >= goal_mas => Quantity::missing(
                    "h",
                    &format!(
                        "systematics alone are {:.2} mas, above {goal_mas} mas: {} is the largest; more hours do not lower it",
                        it.sigma_systematic_mas,
                        largest_systematic(it)
                    ),
                ),
                Some(it) => Quantity::computed(
                    it.hours * it.sigma_random_mas.powi(2)
                        / (goal_mas * goal_mas - it.sigma_systematic_mas.powi(2)),
                    "h",
                ),
            };
            PlannedGoal {
                goal_mas,
                days: hours.value.map(|it| it / usable_hours),
                hours,
            }
        })
        .collect()
}

fn largest_systematic(window: &PlannedWindow) -> String {
    window
        .budget
        .iter()
        .filter(|it| it.kind == "systematic")
        .max_by(|a, b| a.sigma_mas.total_cmp(&b.sigma_mas))
        .map_or_else(
            || "nothing".to_owned(),
            |it| format!("\"{}\", {:.2} mas,", it.term, it.sigma_mas),
        )
}

fn summary(site: &str, date: &str, window: Option<&PlannedWindow>) -> String {
    let clock = |text: &str| text.chars().skip(11).take(5).collect::<String>();
    match window {
        None => format!(
            "On {date} the oblateness cannot be measured from {site}: no stretch of the day separates it."
        ),
        Some(it) => format!(
            "On {date} from {site} the best {} h are {} to {} UTC: error of the oblateness {:.1} mas, {:.1} of it random and {:.2} systematic, {}.",
            it.hours,
            clock(&it.time_utc[0]),
            clock(&it.time_utc[1]),
            it.sigma_random_mas.hypot(it.sigma_systematic_mas),
            it.sigma_random_mas,
            it.sigma_systematic_mas,
            match it.moves {
                0 => "without a turn of the instrument".to_owned(),
                1 => "with one turn of the instrument".to_owned(),
                n => format!("with {n} turns of the instrument"),
            }
        ),
    }
}
