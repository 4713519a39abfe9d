//! The page: the answer first, then what it rests on.

use std::fmt::Write as _;

use super::figures::{FIRST, Plate};
use super::html::{escape, number};
use super::preview::Preview;
use super::summary::summary_sentence;
use super::{keys, sections, theme};
use crate::result::record::{Record, Traces, WarningRecord};

/// Sections of the page: anchor, heading, stems of its figures.
const SECTIONS: [(&str, &str, &[&str]); 10] = [
    ("air-in-time", "Seeing in time", &["seeing", "power"]),
    (
        "shape-in-time",
        "The limb in time",
        &["frames", "harmonics"],
    ),
    ("errors", "Error budget", &["budget"]),
    ("bending", "Refraction", &["refraction"]),
    ("selection", "Selection and the kept fraction", &["kept"]),
    ("null-tests", "Null tests", &["nulls"]),
    (
        "parts",
        "Instrument, air and Sun",
        &["separation", "correlation"],
    ),
    ("motion", "Drifts and scans", &["drift", "scan"]),
    ("definitions", "Definitions and consequences", &[]),
    ("left-out", "What was left out, and why", &[]),
];

/// Sections without figures that close the page.
const CLOSING: [(&str, &str); 3] = [
    ("method", "Method"),
    ("provenance", "Provenance"),
    ("safety", "Safety at the telescope"),
];

/// The whole page.
pub(crate) fn document(
    record: &Record,
    traces: &Traces,
    plates: &[Plate],
    preview: Option<&Preview>,
) -> String {
    let title = format!(
        "Shape of the solar limb, {}, {}",
        record.site_name,
        day(record)
    );
    let mut out = head(&title);
    if let Some(preview) = preview {
        let _ = writeln!(
            out,
            "<svg class=\"shared\" aria-hidden=\"true\" focusable=\"false\">{}</svg>",
            preview.definition()
        );
    }
    out.push_str("<div class=\"page\">\n");
    let _ = write!(
        out,
        "<header class=\"mast\">\n<h1>{}</h1>\n<p class=\"when\">{}</p>\n</header>\n<main \
         id=\"main\">\n",
        escape(&format!(
            "Shape of the solar limb from {}",
            record.site_name
        )),
        escape(&when(record))
    );
    first_screen(&mut out, record, plates);
    notes(&mut out, &record.warnings, "notes-h");
    contents(&mut out, record);
    for (anchor, heading, stems) in SECTIONS {
        if !shown(anchor, record) {
            continue;
        }
        let _ = write!(
            out,
            "<section aria-labelledby=\"{anchor}-h\" id=\"{anchor}\">\n<h2 id=\"{anchor}-h\">{}</h2>\n",
            escape(heading)
        );
        for stem in stems {
            if let Some(plate) = plates.iter().find(|plate| plate.stem == *stem) {
                out.push_str(&plate.html("plate"));
            } else {
                out.push_str(sections::nothing_to_draw(stem));
            }
        }
        sections::write(&mut out, anchor, record, traces);
        out.push_str("</section>\n");
    }
    for (anchor, heading) in CLOSING {
        let _ = write!(
            out,
            "<section aria-labelledby=\"{anchor}-h\" id=\"{anchor}\">\n<h2 id=\"{anchor}-h\">{}</h2>\n",
            escape(heading)
        );
        sections::write(&mut out, anchor, record, traces);
        out.push_str("</section>\n");
    }
    let _ = write!(
        out,
        "</main>\n<footer><p>Made by truelimb {} from <code>result.json</code> (layout {}). Sigma is \
         half the width of the 68 percent interval.</p></footer>\n</div>\n</body>\n</html>\n",
        escape(&record.program_version),
        record.schema_version
    );
    out
}

/// Everything before the content of a page: no script, no outside file.
pub(crate) fn head(title: &str) -> String {
    format!(
        "<!DOCTYPE html>\n<html lang=\"en\">\n<head>\n\
         <meta http-equiv=\"Content-Security-Policy\" content=\"default-src 'none'; img-src data:; \
         style-src 'unsafe-inline'; base-uri 'none'; form-action 'none'\">\n<meta \
         charset=\"utf-8\">\n<meta name=\"viewport\" content=\"width=device-width, \
         initial-scale=1\">\n<meta name=\"color-scheme\" content=\"light dark\">\n<meta \
         name=\"referrer\" content=\"no-referrer\">\n<link rel=\"icon\" href=\"data:,\">\n\
         <title>{}</title>\n<style>\n{}</style>\n</head>\n<body>\n<a class=\"skip\" \
         href=\"#main\">Skip to the answer</a>\n",
        escape(title),
        theme::page_sheet()
    )
}

/// The day of the first exposure.
fn day(record: &Record) -> &str {
    record.time_utc[0]
        .split_once('T')
        .map_or(record.time_utc[0].as_str(), |parts| parts.0)
}

/// Day and time of the session, without fractions of a second.
fn when(record: &Record) -> String {
    let [first, last] = record.time_utc.each_ref().map(|text| {
        text.trim_end_matches('Z')
            .split_once('.')
            .map_or(text.as_str(), |parts| parts.0)
    });
    match (first.split_once('T'), last.split_once('T')) {
        (Some((day, from)), Some((same, to))) if day == same => {
            format!("{day}, {from} to {to} UTC")
        }
        _ => format!("{first} to {last} UTC"),
    }
}

/// The answer in one sentence, the intervals, the ring, and the numbers a reader asks for first.
fn first_screen(out: &mut String, record: &Record, plates: &[Plate]) {
    let computed;
    let sentence = if record.summary.trim().is_empty() {
        computed = summary_sentence(record);
        &computed
    } else {
        &record.summary
    };
    let _ = write!(
        out,
        "<div class=\"first\">\n<div><p class=\"sentence\">{}</p>\n",
        number(sentence)
    );
    let stem = |stem: &str| plates.iter().find(|plate| plate.stem == stem);
    if let Some(plate) = stem("oblateness") {
        out.push_str(&plate.html(FIRST));
    }
    // Without intervals to show, the key numbers take their place beside the ring.
    let beside = stem("oblateness").is_none() && stem("limb").is_some();
    if beside {
        out.push_str(&keys::list(record, "key pairs"));
    }
    out.push_str("</div>\n");
    if let Some(plate) = stem("limb") {
        let _ = writeln!(out, "<div class=\"ring\">{}</div>", plate.html(FIRST));
    }
    out.push_str("</div>\n");
    if !beside {
        out.push_str(&keys::list(record, "key"));
    }
}

/// What a reader must know before believing anything below; `id` is that of its heading on the page.
pub(crate) fn notes(out: &mut String, warnings: &[WarningRecord], id: &str) {
    if warnings.is_empty() {
        return;
    }
    let _ = write!(
        out,
        "<aside class=\"notes\" aria-labelledby=\"{id}\">\n<h2 id=\"{id}\">To keep in \
         mind</h2>\n<ul>\n",
    );
    for warning in warnings {
        let _ = writeln!(
            out,
            "<li>{} <code>{}</code></li>",
            number(&warning.text),
            escape(&warning.code)
        );
    }
    out.push_str("</ul>\n</aside>\n");
}

/// Whether a section belongs to this session.
fn shown(anchor: &str, record: &Record) -> bool {
    anchor != "motion" || !(record.drifts.is_empty() && record.scans.is_empty())
}

/// Links to the sections.
fn contents(out: &mut String, record: &Record) {
    out.push_str("<nav aria-label=\"Sections\"><ul>\n");
    let all = SECTIONS
        .iter()
        .map(|it| (it.0, it.1))
        .filter(|it| shown(it.0, record))
        .chain(CLOSING);
    for (anchor, heading) in all {
        let _ = writeln!(
            out,
            "<li><a href=\"#{anchor}\">{}</a></li>",
            escape(heading)
        );
    }
    out.push_str("</ul></nav>\n");
}
