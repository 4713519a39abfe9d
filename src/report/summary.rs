//! The first sentence: it never promises more than was measured.

use super::numbers;
use crate::result::record::{Record, ShapeQuantity, Status};

/// Share of the radius's variance above which one budget term is said to limit it.
const LIMITING_SHARE: f64 = 0.5;

/// Change of the error, relative, below which selection is said to have changed nothing.
const SELECTION_TOLERANCE: f64 = 0.01;

/// Times the frames of a session beyond which more frames are no advice.
const TIMES_MAX: f64 = 100.0;

/// What the oblateness allows to be said.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) enum Verdict {
    /// The 95 percent interval stands clear of zero on the positive side.
    Clear {
        /// Estimate over standard uncertainty.
        ratio: f64,
    },
    /// The 95 percent interval reaches zero: only an upper limit.
    UpperLimit {
        /// Upper end of the 95 percent interval, mas.
        limit_mas: f64,
    },
    /// The 95 percent interval lies below zero, which the Sun's rotation does not allow.
    BelowZero,
    /// An estimate whose error is not known.
    NoError,
    /// No estimate.
    NotSeparated,
}

/// Judges the oblateness by its 95 percent interval.
pub(crate) fn verdict(oblateness: &ShapeQuantity) -> Verdict {
    let value = oblateness.value.filter(|value| value.is_finite());
    let (Status::Measured, Some(value)) = (oblateness.status, value) else {
        return Verdict::NotSeparated;
    };
    let Some(sigma) = oblateness
        .sigma
        .filter(|sigma| sigma.is_finite() && *sigma > 0.0)
    else {
        return Verdict::NoError;
    };
    let Some([low, high]) = oblateness.interval_95 else {
        return Verdict::NoError;
    };
    if high < 0.0 {
        Verdict::BelowZero
    } else if low > 0.0 && sigma < value {
        Verdict::Clear {
            ratio: value / sigma,
        }
    } else {
        Verdict::UpperLimit { limit_mas: high }
    }
}

/// The budget term that makes most of the radius's variance, if one does.
pub(crate) fn radius_limit(record: &Record) -> Option<&str> {
    let total: f64 = record
        .budget
        .iter()
        .map(|line| line.sigma_radius_mas.powi(2))
        .sum();
    let largest = record.budget.iter().max_by(|a, b| {
        a.sigma_radius_mas
            .abs()
            .total_cmp(&b.sigma_radius_mas.abs())
    })?;
    let share = largest.sigma_radius_mas.powi(2) / total;
    (share > LIMITING_SHARE).then_some(largest.term.as_str())
}

/// The answer in one sentence, from everything in the record but its own summary.
pub fn summary_sentence(record_without_summary: &Record) -> String {
    let record = record_without_summary;
    let oblateness = &record.shape.oblateness;
    let mut sentence = match verdict(oblateness) {
        Verdict::Clear { ratio } => clear(record, ratio),
        Verdict::UpperLimit { limit_mas } => upper_limit(record, limit_mas),
        Verdict::BelowZero => format!(
            "The oblateness comes out below zero, {}, which a rotating Sun does not allow: a \
             distortion or a part of the refraction is left in it, so take neither a value nor a \
             limit from this session; {}",
            numbers::shape(oblateness).unwrap_or_default(),
            radius_clause(record)
        ),
        Verdict::NoError => format!(
            "The oblateness is {} with no stated error, so it bounds nothing; {}",
            numbers::shape(oblateness).unwrap_or_default(),
            radius_clause(record)
        ),
        Verdict::NotSeparated => not_separated(record),
    };
    sentence.push_str("; ");
    sentence.push_str(&selection_clause(record));
    sentence.push('.');
    sentence
}

/// The sentence's start where the oblateness stands clear of zero.
fn clear(record: &Record, ratio: f64) -> String {
    let oblateness = &record.shape.oblateness;
    let interval = oblateness.interval_95.map_or_else(String::new, |interval| {
        let text = numbers::interval(interval, oblateness.sigma);
        format!(
            " (95 percent interval {})",
            numbers::with_unit(&text, &oblateness.unit)
        )
    });
    format!(
        "The equatorial radius exceeds the polar radius by {}{interval}, {} times the error; {}",
        numbers::shape(oblateness).unwrap_or_default(),
        numbers::significant(ratio, 2),
        radius_clause(record)
    )
}

/// The sentence's start where only an upper limit can be given.
fn upper_limit(record: &Record, limit_mas: f64) -> String {
    let oblateness = &record.shape.oblateness;
    let value = oblateness.value.unwrap_or(f64::NAN);
    let sigma = oblateness.sigma.unwrap_or(f64::NAN);
    let limit = numbers::with_unit(
        &numbers::beside(limit_mas, oblateness.sigma),
        &oblateness.unit,
    );
    let why = if sigma >= value {
        "the error exceeds the value"
    } else {
        "the 95 percent interval reaches zero"
    };
    format!(
        "The equatorial radius exceeds the polar radius by less than {limit} (upper end of the 95 \
         percent interval): {why}, {}, so this session does not measure the oblateness; it is good \
         for {}",
        numbers::shape(oblateness).unwrap_or_default(),
        good_for(record)
    )
}

/// The sentence's start where the oblateness could not be told apart.
fn not_separated(record: &Record) -> String {
    let reason = clause(record.shape.oblateness.reason.as_deref());
    format!(
        "No oblateness can be given{reason}; this session is good for {}",
        good_for(record)
    )
}

/// A reason as a clause: its sentences made one, without the full stop.
fn clause(reason: Option<&str>) -> String {
    let Some(text) = reason.map(|text| text.trim().trim_end_matches('.')) else {
        return String::new();
    };
    if text.is_empty() {
        return String::new();
    }
    let mut out = String::from(": ");
    for (index, part) in text.split(". ").enumerate() {
        let mut letters = part.chars();
        match (index, letters.next()) {
            (0, _) | (_, None) => out.push_str(part),
            (_, Some(first)) => {
                out.push_str("; ");
                out.extend(first.to_lowercase());
                out.push_str(letters.as_str());
            }
        }
    }
    out
}

/// What a session without an oblateness still gives.
fn good_for(record: &Record) -> String {
    let mut parts = Vec::new();
    if let Some(r0) = numbers::quantity(&record.seeing.r0) {
        parts.push(format!("the seeing (r0 {r0} at 500 nm towards the zenith)"));
    }
    if let Some(radius) = numbers::shape(&record.shape.radius) {
        let limit = limited_by_scale(record).map_or("", |_| ", which the plate scale limits");
        parts.push(format!("the radius, {radius} at 1 AU{limit}"));
    }
    if parts.is_empty() {
        "neither radius nor seeing, as neither was measured".to_owned()
    } else {
        parts.join(" and ")
    }
}

/// The radius, and what limits it.
fn radius_clause(record: &Record) -> String {
    let radius = &record.shape.radius;
    match numbers::shape(radius) {
        None => format!(
            "the radius was not measured{}",
            clause(radius.reason.as_deref())
        ),
        Some(text) => {
            let limit = limited_by_scale(record).map_or("", |_| ", limited by the plate scale");
            format!("the radius is {text} at 1 AU{limit}")
        }
    }
}

/// The radius's limiting term where that is the plate scale.
pub(crate) fn limited_by_scale(record: &Record) -> Option<&str> {
    radius_limit(record).filter(|term| {
        let term = term.to_lowercase();
        ["plate scale", "pixel scale", "camera scale", "image scale"]
            .iter()
            .any(|name| term.contains(name))
            || term == "scale"
    })
}

/// Whether selection helped.
pub(crate) fn selection_clause(record: &Record) -> String {
    let selection = &record.selection;
    let kept = numbers::percent(selection.kept_fraction);
    let change = (1.0 / selection.gain - 1.0).abs();
    let percent = numbers::percent(change);
    if selection.usable == 0 {
        "no frame had a usable limb".to_owned()
    } else if !change.is_finite() {
        "what selection gained is not known".to_owned()
    } else if selection.kept_fraction >= 1.0 {
        "all usable frames count, as keeping fewer would not lower the error".to_owned()
    } else if change < SELECTION_TOLERANCE {
        format!(
            "selection (kept: {kept} percent of the usable frames) changed the error by less \
             than 1 percent"
        )
    } else if selection.gain > 1.0 {
        format!(
            "keeping {kept} percent of the usable frames lowered the error by {percent} percent"
        )
    } else {
        format!("keeping {kept} percent of the usable frames raised the error by {percent} percent")
    }
}

/// What it takes to halve the error of the oblateness.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) enum Halving {
    /// So many times the frames of this session, at the same seeing.
    Times(f64),
    /// More frames cannot do it, or not in a lifetime: this systematic part, mas, is half the error or
    /// more.
    Forbidden(f64),
    /// The parts of the error are not known.
    Unknown,
}

/// More frames at this seeing beat down the random part alone: `sqrt(random^2 / k + systematic^2)`
/// equals half the error at `k = random^2 / (sigma^2 / 4 - systematic^2)`.
pub(crate) fn halving(oblateness: &ShapeQuantity) -> Halving {
    let (Some(random), Some(systematic)) = (oblateness.sigma_random, oblateness.sigma_systematic)
    else {
        return Halving::Unknown;
    };
    let variance = random.powi(2) + systematic.powi(2);
    let left = variance / 4.0 - systematic.powi(2);
    let times = random.powi(2) / left;
    if !variance.is_finite() || variance <= 0.0 {
        Halving::Unknown
    } else if left > 0.0 && times <= TIMES_MAX {
        Halving::Times(times)
    } else {
        Halving::Forbidden(systematic)
    }
}
