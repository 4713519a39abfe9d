//! Many sessions as one value and as a series.
//!
//! # Model
//!
//! ```text
//! cov_ij = u_i^2 (i = j),  sum over common lines of s_i s_j (i != j)
//! mean: generalised least squares with cov + tau^2 1, tau the dark uncertainty
//! u^2 = u(own)^2 + u(shared)^2,   shared = w' S w over the common lines alone
//! ```
//!
//! Lines of the budgets with the same name are common where their scope is `model`, and where it is
//! `instrument` among the sessions of one station; others that are declared so. A common error moves
//! all values in one sense.
//!
//! # Valid for
//!
//! Sessions whose own errors are independent. A shift where an instrument changed is no trend.
//!
//! # Accuracy
//!
//! That of the sessions' budgets. Scatter shows what is not shared; what is shared it cannot show.
//!
//! # Source
//!
//! As in [`crate::consensus`]; degrees of freedom of the sum after Welch and Satterthwaite (JCGM
//! 100:2008, G.4.1): the shared part is taken as known.

mod covariate;
mod series;
mod shared;

pub use covariate::{Covariate, CovariateError};

use crate::consensus::{self, ConsensusError, Method, Value, correlated, student};
use crate::gravity;
use crate::result::combined::{
    COMBINED_VERSION, Combined, CombinedQuantity, Heterogeneity, MeanBy, SeriesPoint, SessionEntry,
};
use crate::result::record::{ByLaw, Quantity, Record, ShapeQuantity, Status, WarningRecord};
use crate::session::RotationLaw;
use crate::sky::{SkyError, Utc};
use shared::Shared;

/// How to combine.
#[derive(Clone, Debug, Default)]
pub struct Settings {
    /// Lines of the budget that are common whatever their scope, by name.
    pub common: Vec<String>,
    /// A covariate in time.
    pub covariate: Option<Covariate>,
}

/// Why sessions cannot be combined.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum SeasonError {
    /// Too few results.
    #[error("{found} results; a combination needs at least 2")]
    TooFew {
        /// Results found.
        found: usize,
    },
    /// The same session twice would count twice.
    #[error(
        "the session of {site} from {from} is given twice: the same input files; leave one out"
    )]
    Twice {
        /// Station.
        site: String,
        /// Its first exposure.
        from: String,
    },
    /// A line that was declared common is in no budget.
    #[error("no budget has a line \"{term}\"; the lines are: {lines}")]
    NoLine {
        /// What was asked.
        term: String,
        /// What there is.
        lines: String,
    },
    /// A time that cannot be read.
    #[error("the time of a result: {0}")]
    Time(#[from] SkyError),
    /// The covariate does not cover the season.
    #[error(transparent)]
    Covariate(#[from] CovariateError),
    /// The statistics refused.
    #[error("the mean: {0}")]
    Consensus(#[from] ConsensusError),
}

/// Combines the results of sessions; their order does not matter.
///
/// # Errors
///
/// [`SeasonError`] for fewer than two results, one given twice, or settings that do not fit them.
pub fn combine(records: &[Record], settings: &Settings) -> Result<Combined, SeasonError> {
    if records.len() < 2 {
        let found = records.len();
        return Err(SeasonError::TooFew { found });
    }
    let mut sorted: Vec<(SessionEntry, &Record)> = Vec::new();
    for it in records {
        sorted.push((entry(it, settings)?, it));
    }
    sorted.sort_by(|(a, _), (b, _)| {
        let key = |it: &SessionEntry| {
            (
                it.time_utc.clone(),
                it.site_name.clone(),
                it.input_sha256.clone(),
            )
        };
        key(a).cmp(&key(b))
    });
    for (k, (a, _)) in sorted.iter().enumerate() {
        if sorted[..k]
            .iter()
            .any(|(b, _)| a.input_sha256 == b.input_sha256)
        {
            return Err(SeasonError::Twice {
                site: a.site_name.clone(),
                from: a.time_utc[0].clone(),
            });
        }
    }
    for term in &settings.common {
        let mut lines: Vec<&str> = records
            .iter()
            .flat_map(|it| &it.budget)
            .map(|it| it.term.as_str())
            .collect();
        lines.sort_unstable();
        lines.dedup();
        if !lines.contains(&term.as_str()) {
            return Err(SeasonError::NoLine {
                term: term.clone(),
                lines: lines.join(", "),
            });
        }
    }
    let (sessions, sorted): (Vec<SessionEntry>, Vec<&Record>) = sorted.into_iter().unzip();
    let of = |which| quantity(which, &sessions, &sorted, settings);
    let (oblateness, radius) = (of(Which::Oblateness)?, of(Which::Radius)?);
    let mut out = Combined {
        schema_version: COMBINED_VERSION,
        program_version: env!("CARGO_PKG_VERSION").to_owned(),
        summary: String::new(),
        excess_by_law: excess(&oblateness),
        warnings: warnings(&sessions, &oblateness, &radius),
        sessions,
        oblateness,
        radius,
    };
    out.summary = summary(&out);
    Ok(out)
}

/// Which quantity of a record.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) enum Which {
    /// Oblateness, mas.
    Oblateness,
    /// Radius, arcsec.
    Radius,
}

impl Which {
    fn unit(self) -> &'static str {
        match self {
            Self::Oblateness => "mas",
            Self::Radius => "arcsec",
        }
    }

    fn of(self, record: &Record) -> &ShapeQuantity {
        match self {
            Self::Oblateness => &record.shape.oblateness,
            Self::Radius => &record.shape.radius,
        }
    }
}

fn entry(record: &Record, settings: &Settings) -> Result<SessionEntry, SeasonError> {
    let [first, last] = [&record.time_utc[0], &record.time_utc[1]].map(|it| Utc::parse(it));
    let (first, last) = (first?, last?);
    let middle = first.plus_s(0.5 * last.minus(first));
    let (day, fraction) = middle.tt_jd();
    // Julian year, J2000.0 at JD 2451545.0.
    let epoch_year = 2000.0 + ((day - 2_451_545.0) + fraction) / 365.25;
    let mut files: Vec<&str> = record
        .created_from
        .iter()
        .map(|it| it.sha256.as_str())
        .collect();
    files.sort_unstable();
    Ok(SessionEntry {
        site_name: record.site_name.clone(),
        time_utc: record.time_utc.clone(),
        epoch_year,
        program_version: record.program_version.clone(),
        input_sha256: crate::frames::sha256_of(files.join("\n").as_bytes()),
        covariate: match &settings.covariate {
            Some(it) => Some(it.at(epoch_year)?),
            None => None,
        },
    })
}

/// Degrees of freedom of a sum of an own part with its own and a part that is taken as known.
fn effective_degrees(own: f64, total: f64, degrees: f64) -> f64 {
    if own > 0.0 {
        degrees * (total / own).powi(4)
    } else {
        f64::INFINITY
    }
}

/// Share of a normal distribution within one standard deviation.
const ONE_SIGMA: f64 = 0.682_689_492;

fn quantity(
    which: Which,
    sessions: &[SessionEntry],
    records: &[&Record],
    settings: &Settings,
) -> Result<CombinedQuantity, SeasonError> {
    let unit = which.unit();
    let mut series: Vec<SeriesPoint> = records
        .iter()
        .zip(sessions)
        .enumerate()
        .map(|(session, (record, entry))| {
            let it = which.of(record);
            SeriesPoint {
                session,
                epoch_year: entry.epoch_year,
                value: it.value,
                sigma: it.sigma,
                sigma_own: None,
                weight: None,
                residual: None,
                status: it.status,
                reason: it.reason.clone(),
            }
        })
        .collect();
    let used: Vec<usize> = (0..series.len())
        .filter(|&k| series[k].value.is_some() && series[k].sigma.is_some_and(|it| it > 0.0))
        .collect();
    let picked: Vec<&Record> = used.iter().map(|&k| records[k]).collect();
    let shared = Shared::new(which, &picked, &settings.common);
    let pairs: Vec<(f64, f64)> = used
        .iter()
        .filter_map(|&k| series[k].value.zip(series[k].sigma))
        .collect();
    let values: Vec<f64> = pairs.iter().map(|it| it.0).collect();
    let sigmas: Vec<f64> = pairs.iter().map(|it| it.1).collect();
    for (&k, own) in used.iter().zip(shared.own(&sigmas)) {
        series[k].sigma_own = Some(own);
    }
    if used.len() < 2 {
        let reason = format!(
            "{} of {} sessions measured it; a mean needs at least 2",
            used.len(),
            series.len()
        );
        return Ok(CombinedQuantity {
            mean: Quantity::missing(unit, &reason),
            sigma_own: None,
            sigma_shared: None,
            interval_68: None,
            interval_95: None,
            sessions_used: used.len(),
            heterogeneity: None,
            by_method: Vec::new(),
            shared: Vec::new(),
            trend: series::none("time, Julian years", unit, &reason),
            covariate: None,
            series,
        });
    }
    let covariance = shared.covariance(&sigmas);
    let fit = correlated::mean(&values, &covariance)?;
    let weights: Vec<f64> = fit.weights.row(0).iter().copied().collect();
    let common = shared.in_mean(&weights);
    let total = fit.se(&[1.0]);
    let own = {
        let it = total * total - common * common;
        fit.scatter * if it > 0.0 { it.sqrt() } else { 0.0 }
    };
    let sigma = own.hypot(common);
    let degrees = effective_degrees(own, sigma, fit.degrees as f64);
    let half = |coverage: f64| student::quantile(coverage, degrees) * sigma;
    let value = fit.values[0];
    for (place, &k) in used.iter().enumerate() {
        series[k].weight = Some(weights[place]);
        series[k].residual = Some(values[place] - value);
    }
    let about = series::About {
        values: &values,
        covariance: &covariance,
        unit,
    };
    let epochs: Vec<f64> = used.iter().map(|&k| sessions[k].epoch_year).collect();
    let trend = about.slope("time, Julian years", "year", &epochs);
    let covariate = settings.covariate.as_ref().map(|it| {
        let at: Vec<f64> = used
            .iter()
            .map(|&k| sessions[k].covariate.unwrap_or(f64::NAN))
            .collect();
        about.slope(&it.name, &it.name, &at)
    });
    Ok(CombinedQuantity {
        mean: Quantity::measured(value, half(ONE_SIGMA), unit),
        sigma_own: Some(own),
        sigma_shared: Some(common),
        interval_68: Some([value - half(ONE_SIGMA), value + half(ONE_SIGMA)]),
        interval_95: Some([value - half(0.95), value + half(0.95)]),
        sessions_used: used.len(),
        heterogeneity: Some(Heterogeneity {
            q: fit.q,
            degrees: fit.degrees,
            p: fit.p,
            birge: fit.birge,
            dark: fit.tau,
        }),
        by_method: by_method(&values, &shared.own(&sigmas))?,
        shared: shared.lines(&weights),
        trend,
        covariate,
        series,
    })
}

/// The mean by the methods that a reader may know, from what the sessions do not share.
fn by_method(values: &[f64], own: &[f64]) -> Result<Vec<MeanBy>, SeasonError> {
    let list: Vec<Value> = values
        .iter()
        .zip(own)
        .map(|(&value, &u)| Value::new(value, u))
        .collect();
    let plain = consensus::weighted_mean(&list)?;
    let enlarged = plain.birge.filter(|it| *it > 1.0).unwrap_or(1.0);
    let mut out = vec![
        MeanBy {
            method: "weighted mean".to_owned(),
            value: plain.value,
            sigma: plain.u_internal,
            dark: None,
        },
        MeanBy {
            method: "weighted mean, enlarged by the Birge ratio".to_owned(),
            value: plain.value,
            sigma: enlarged * plain.u_internal,
            dark: None,
        },
    ];
    for method in [Method::DerSimonianLaird, Method::PauleMandel] {
        let it = consensus::random_effects(&list, method)?;
        let line = |name: String, sigma| MeanBy {
            method: name,
            value: it.value,
            sigma,
            dark: Some(it.tau),
        };
        out.push(line(method.name().to_owned(), it.se));
        if let Some(sigma) = it.se_hartung_knapp {
            out.push(line(format!("{}, Hartung-Knapp", method.name()), sigma));
        }
    }
    Ok(out)
}

/// The combined oblateness beyond the figure of each rotation law.
fn excess(oblateness: &CombinedQuantity) -> Vec<ByLaw> {
    let (Some(value), Some(sigma)) = (oblateness.mean.value, oblateness.mean.sigma) else {
        return Vec::new();
    };
    let measured = gravity::Measured {
        oblateness_mas: (value, sigma),
        p4_mas: None,
        correlation: 0.0,
    };
    RotationLaw::ALL
        .into_iter()
        .map(|law| {
            // The middle of the laws carries their spread; a law by itself does not.
            let it = gravity::interior(&measured, law, law != RotationLaw::Middle);
            ByLaw {
                law: law.name().to_owned(),
                rotation_figure_mas: it.rotation_mas.0,
                excess: Quantity::measured(it.excess_mas.0, it.excess_mas.1, "mas"),
                j2: Quantity::measured(it.j2.0, it.j2.1, "1"),
                j4: Quantity::missing("1", "P4 is not combined"),
            }
        })
        .collect()
}

/// Probability below which sessions are said to disagree.
const DISAGREE: f64 = 0.05;

fn warnings(
    sessions: &[SessionEntry],
    oblateness: &CombinedQuantity,
    radius: &CombinedQuantity,
) -> Vec<WarningRecord> {
    let mut out = Vec::new();
    let mut say = |code: &str, text: String| {
        out.push(WarningRecord {
            code: code.to_owned(),
            text,
        });
    };
    let left_out = oblateness
        .series
        .iter()
        .filter(|it| it.status == Status::NotSeparated)
        .count();
    if left_out > 0 {
        say(
            "not-separated",
            format!(
                "{left_out} of {} sessions could not tell the oblateness from the instrument and are not in its mean",
                sessions.len()
            ),
        );
    }
    for (name, it) in [("oblateness", oblateness), ("radius", radius)] {
        let Some(found) = &it.heterogeneity else {
            continue;
        };
        if found.p.is_some_and(|p| p < DISAGREE) {
            say(
                "heterogeneous",
                format!(
                    "the sessions disagree in the {name} beyond their errors (Birge ratio {:.2}); the scatter is in the error of the mean as a dark uncertainty",
                    found.birge.unwrap_or(f64::NAN)
                ),
            );
        }
        if it
            .series
            .iter()
            .any(|it| it.weight.is_some_and(|w| w < 0.0))
        {
            say(
                "negative-weight",
                format!(
                    "a session has a negative weight in the {name}: its shared error is much larger than that of others"
                ),
            );
        }
    }
    let versions = |it: &SessionEntry| it.program_version.clone();
    if sessions
        .iter()
        .any(|it| versions(it) != versions(&sessions[0]))
    {
        say(
            "versions",
            "the sessions were reduced by different versions of the program".to_owned(),
        );
    }
    out
}

fn summary(it: &Combined) -> String {
    let number =
        |name: &str, q: &CombinedQuantity, digits: usize| match (q.mean.value, q.mean.sigma) {
            (Some(value), Some(sigma)) => format!(
                "{name} {value:.digits$} \u{b1} {sigma:.digits$} {} from {} sessions",
                q.mean.unit, q.sessions_used
            ),
            _ => format!(
                "{name} not combined: {}",
                q.mean.reason.as_deref().unwrap_or("no value")
            ),
        };
    format!(
        "{}; {}.",
        number("Oblateness", &it.oblateness, 2),
        number("radius at 1 AU", &it.radius, 4)
    )
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_known_part_raises_the_degrees_of_freedom() {
        assert!((effective_degrees(1.0, 1.0, 4.0) - 4.0).abs() < 1e-12);
        assert!((effective_degrees(1.0, 2.0_f64.sqrt(), 4.0) - 16.0).abs() < 1e-12);
        assert!(effective_degrees(0.0, 1.0, 4.0).is_infinite());
    }
}
