//! The key numbers: what a reader asks for before reading on.

use std::fmt::Write as _;

use super::html::{escape, number};
use super::numbers;
use super::summary::{Halving, Verdict, halving, limited_by_scale, verdict};
use crate::result::record::{Quantity, Record, ShapeQuantity};

/// Name, value and notes of a key number.
type Key = (String, String, Vec<String>);

/// The numbers a reader asks for first.
pub(crate) fn list(record: &Record, class: &str) -> String {
    let mut out = format!("<dl class=\"{class}\">\n");
    for (name, value, notes) in key_numbers(record) {
        let _ = writeln!(
            out,
            "<div><dt>{}</dt><dd><p class=\"v\">{}</p>",
            escape(&name),
            set_unit(&value)
        );
        for note in notes {
            let _ = writeln!(out, "<p class=\"s\">{}</p>", number(&note));
        }
        out.push_str("</dd></div>\n");
    }
    out.push_str("</dl>\n");
    out
}

/// A key number with its unit set smaller.
fn set_unit(value: &str) -> String {
    match value.rsplit_once(' ') {
        Some((amount, unit)) if value.contains(" ± ") && unit.starts_with(char::is_alphabetic) => {
            format!(
                "{} <span class=\"u\">{}</span>",
                number(amount),
                escape(unit)
            )
        }
        _ => number(value),
    }
}

fn key_numbers(record: &Record) -> [Key; 6] {
    [
        shape_key(
            "Oblateness, equatorial minus polar",
            &record.shape.oblateness,
            None,
        ),
        shape_key(
            "Radius at 1 AU",
            &record.shape.radius,
            limited_by_scale(record).map(|_| "limited by the plate scale"),
        ),
        separation_key(record),
        air_key(record),
        seeing_key(record),
        halving_key(record),
    ]
}

fn shape_key(name: &str, quantity: &ShapeQuantity, limit: Option<&str>) -> Key {
    let Some(value) = numbers::shape(quantity) else {
        // What to do about it stands in the first sentence of the page.
        let reason = quantity.reason.as_deref().unwrap_or_default();
        let why = reason.split(". ").next().unwrap_or_default();
        return (
            name.to_owned(),
            "not separated".to_owned(),
            vec![why.to_owned()],
        );
    };
    let mut notes = Vec::new();
    for (share, interval) in [("68", quantity.interval_68), ("95", quantity.interval_95)] {
        if let Some(interval) = interval {
            notes.push(format!(
                "{share} %: {}",
                numbers::interval(interval, quantity.sigma)
            ));
        }
    }
    notes.extend(limit.map(str::to_owned));
    (name.to_owned(), value, notes)
}

fn separation_key(record: &Record) -> Key {
    let separation = &record.shape.separation;
    let value = match verdict(&record.shape.oblateness) {
        Verdict::NotSeparated => "not told apart",
        _ => "told apart",
    };
    let mut notes = vec![format!(
        "rank {} of {}",
        separation.rank, separation.unknowns
    )];
    for (name, value) in [
        ("instrument", separation.correlation_sun_instrument),
        ("air", separation.correlation_sun_air),
    ] {
        if let Some(value) = value.filter(|value| value.is_finite()) {
            notes.push(format!(
                "correlation with {name} {}",
                numbers::fixed(value, 2)
            ));
        }
    }
    (
        "Sun, instrument and air".to_owned(),
        value.to_owned(),
        notes,
    )
}

fn air_key(record: &Record) -> Key {
    let share = &record.turbulence.share;
    let value = share.value.filter(|value| value.is_finite()).map_or_else(
        || "not known".to_owned(),
        |value| format!("{} percent", numbers::percent(value)),
    );
    let mut notes: Vec<String> = share.reason.iter().cloned().collect();
    if let Some(floor) = numbers::quantity(&record.turbulence.floor) {
        notes.push(format!("turbulence alone: {floor}"));
    }
    ("The air’s share of the variance".to_owned(), value, notes)
}

fn seeing_key(record: &Record) -> Key {
    let seeing = &record.seeing;
    let value = numbers::quantity(&seeing.r0).unwrap_or_else(|| "not measured".to_owned());
    let mut notes: Vec<String> = seeing.r0.reason.iter().cloned().collect();
    if let Some(fwhm) = numbers::quantity(&seeing.fwhm) {
        notes.push(format!("long-exposure image {fwhm}"));
    }
    if let Some(time) = numbers::quantity(&seeing.coherence_time) {
        notes.push(format!("coherence time {time}"));
    }
    ("Fried’s r0, 500 nm, zenith".to_owned(), value, notes)
}

fn halving_key(record: &Record) -> Key {
    let (value, first) = match halving(&record.shape.oblateness) {
        Halving::Times(times) => (
            format!("{} times the frames", numbers::significant(times, 2)),
            "in all, like these and at this seeing".to_owned(),
        ),
        Halving::Forbidden(systematic_mas) => (
            "not by more frames".to_owned(),
            format!(
                "{} mas of it is systematic: work on the largest hatched bar of the budget",
                numbers::sigma(systematic_mas)
            ),
        ),
        Halving::Unknown => (
            "not known".to_owned(),
            "there is no error to halve".to_owned(),
        ),
    };
    let hours = &record.turbulence.hours_to;
    let goal = |goal: &str, quantity: &Quantity| match quantity.value {
        Some(hours) if hours.is_finite() => {
            format!("to {goal} mas: {} h", numbers::significant(hours, 2))
        }
        _ => format!("to {goal} mas: not by more hours"),
    };
    let notes = vec![
        first,
        goal("1", &hours.one_mas),
        goal("0.5", &hours.half_mas),
    ];
    ("To halve the oblateness’s error".to_owned(), value, notes)
}
