//! Words and tables of the sections, beside their figures.

mod closing;
mod masking;
mod shape;

use super::axis::POINTS_MAX;
use super::html::{Column, Table, paragraph};
use super::numbers;
use super::summary::selection_clause;
use crate::result::record::{Quantity, Record, Traces};

/// Writes what a section says beyond its figures.
pub(crate) fn write(out: &mut String, anchor: &str, record: &Record, traces: &Traces) {
    match anchor {
        "air-in-time" => seeing(out, record),
        "selection" => selection(out, record),
        "parts" => shape::parts(out, record),
        "definitions" => shape::definitions(out, record),
        "left-out" => left_out(out, record, traces),
        "method" => closing::method(out),
        "provenance" => closing::provenance(out, record),
        "safety" => closing::safety(out),
        _ => {}
    }
}

/// What stands in the place of a figure that has no numbers.
pub(crate) fn nothing_to_draw(stem: &str) -> &'static str {
    match stem {
        "seeing" | "frames" => {
            "<p>No frame was measured, so there is nothing to draw in time.</p>\n"
        }
        "power" => "<p>The power by harmonic was not measured.</p>\n",
        "harmonics" => "<p>No sequence has measured harmonics.</p>\n",
        "budget" => "<p>There is no error budget.</p>\n",
        "refraction" => "<p>No refraction was applied: the session has no air in it.</p>\n",
        "kept" => "<p>The shape was not followed against the kept fraction.</p>\n",
        "nulls" => "<p>No null test was made.</p>\n",
        "separation" => "<p>The design has no singular values.</p>\n",
        "correlation" => "<p>There is no covariance of the fitted terms to show.</p>\n",
        _ => "",
    }
}

/// Value of a quantity for a table, without its unit, and its reason where it has none.
fn cells(name: &str, quantity: &Quantity) -> [String; 4] {
    let value = quantity.value.map_or(numbers::MISSING.to_owned(), |value| {
        numbers::plus_minus(value, quantity.sigma)
    });
    let note = quantity.reason.clone().unwrap_or_default();
    let unit = if quantity.unit == "1" {
        String::new()
    } else {
        quantity.unit.clone()
    };
    [name.to_owned(), value, unit, note]
}

/// Columns of a table of quantities.
const QUANTITY: [Column; 4] = [
    Column::Text("Quantity"),
    Column::Number("Value"),
    Column::Text("Unit"),
    Column::Text("Why there is no value"),
];

fn seeing(out: &mut String, record: &Record) {
    let seeing = &record.seeing;
    let turbulence = &record.turbulence;
    let mut table = Table::new("Seeing of the session", &QUANTITY);
    for (name, quantity) in [
        ("r0 at 500 nm, zenith", &seeing.r0),
        ("r0 at 500 nm, towards the Sun", &seeing.line_of_sight),
        ("r0 by the limb’s motion, zenith", &seeing.by_motion),
        ("r0 by the limb’s width, zenith", &seeing.by_blur),
        ("Long-exposure image size, towards the Sun", &seeing.fwhm),
        ("Coherence time", &seeing.coherence_time),
        ("Outer scale", &seeing.outer_scale),
        (
            "Height that stands for the turbulence",
            &seeing.height_proxy,
        ),
        (
            "Error of the oblateness from turbulence alone",
            &turbulence.floor,
        ),
        (
            "Turbulence’s share of the variance, 0 to 1",
            &turbulence.share,
        ),
        (
            "Observed over predicted scatter, m = 2",
            &turbulence.observed_over_predicted,
        ),
        ("Time to an error of 1 mas", &turbulence.hours_to.one_mas),
        ("Time to an error of 0.5 mas", &turbulence.hours_to.half_mas),
    ] {
        table.row(cells(name, quantity));
    }
    out.push_str(&table.html());
    let mut layers = Table::new(
        "Layers of the fit",
        &[
            Column::Number("Height above the telescope, m"),
            Column::Number("Share, 0 to 1"),
        ],
    );
    for layer in &seeing.layers {
        layers.row([
            numbers::significant(layer.height_m, 4),
            numbers::significant(layer.share, 2),
        ]);
    }
    if !layers.is_empty() {
        out.push_str(&layers.folded("Turbulent layers of the fit"));
    }
}

fn selection(out: &mut String, record: &Record) {
    let selection = &record.selection;
    let mut clause = selection_clause(record);
    if let Some(first) = clause.get(..1) {
        let first = first.to_uppercase();
        clause.replace_range(..1, &first);
    }
    out.push_str(&paragraph(&format!(
        "{clause}. Criterion: {}. How it is kept blind to the shape: {}.",
        selection.criterion.trim_end_matches('.'),
        selection.blind_to_shape.trim_end_matches('.')
    )));
    if let Some([all, kept]) = selection.sigma_all_and_kept_mas {
        let weighed = selection.weighting_gain.map_or_else(String::new, |it| {
            format!(
                "; at equal weights it would be {} times as large",
                numbers::significant(it, 3)
            )
        });
        out.push_str(&paragraph(&format!(
            "Random error of the oblateness: {} mas with all usable frames, {} mas with the kept \
             ones{weighed}.",
            numbers::sigma(all),
            numbers::sigma(kept)
        )));
    }
}

fn left_out(out: &mut String, record: &Record, traces: &Traces) {
    let selection = &record.selection;
    out.push_str(&paragraph(&format!(
        "{} frames were read, {} had a usable limb, {} went to the fit and the stack.",
        numbers::count(selection.read),
        numbers::count(selection.usable),
        numbers::count(selection.used)
    )));
    let mut reasons = Table::new(
        "Frames set aside",
        &[Column::Text("Reason"), Column::Number("Frames")],
    );
    for rejection in &selection.rejected {
        reasons.row([rejection.reason.clone(), rejection.frames.to_string()]);
    }
    if reasons.is_empty() {
        out.push_str("<p>No frame was set aside.</p>\n");
    } else {
        out.push_str(&reasons.html());
    }
    let mut sequences = Table::new(
        "Sequences",
        &[
            Column::Text("Sequence"),
            Column::Text("Kind"),
            Column::Number("First exposure, UTC"),
            Column::Number("Roll, deg"),
            Column::Number("Read"),
            Column::Number("Used"),
            Column::Number("Zenith distance, deg"),
            Column::Number("Parallactic angle, deg"),
            Column::Number("Solar axis, deg"),
            Column::Number("B0, deg"),
            Column::Number("r0, m"),
            Column::Number("Radius at 1 AU, arcsec"),
            Column::Text("Set aside because"),
        ],
    );
    for it in &record.sequences {
        let [_, r0, _, _] = cells("", &it.r0);
        let [_, radius, _, _] = cells("", &it.radius);
        sequences.row([
            it.sequence.to_string(),
            it.kind.clone(),
            it.time_utc[0].clone(),
            numbers::significant(it.roll_deg, 5),
            it.frames_read.to_string(),
            it.frames_used.to_string(),
            numbers::significant(it.zenith_true_deg, 5),
            numbers::significant(it.parallactic_deg, 5),
            numbers::significant(it.axis_deg, 5),
            numbers::significant(it.b0_deg, 4),
            r0,
            radius,
            it.set_aside.clone().unwrap_or_default(),
        ]);
    }
    if !sequences.is_empty() {
        out.push_str(&sequences.html());
    }
    let mut arcs = Table::new(
        "Parts of the limb left out, detector angles from +x towards +y",
        &[
            Column::Text("Sequence"),
            Column::Number("From, deg"),
            Column::Number("To, deg"),
            Column::Number("Share of the frames, 0 to 1"),
            Column::Text("Reason"),
        ],
    );
    for arc in &record.masked {
        arcs.row([
            arc.sequence.to_string(),
            numbers::significant(arc.from_deg, 4),
            numbers::significant(arc.to_deg, 4),
            numbers::significant(arc.frames, 3),
            arc.reason.clone(),
        ]);
    }
    if arcs.is_empty() {
        out.push_str("<p>No part of the limb was left out.</p>\n");
    } else {
        out.push_str(&arcs.html());
    }
    masking::write(out, record);
    if traces.preview.is_none() {
        out.push_str("<p>No picture of the stacked disk was kept.</p>\n");
    }
}

/// Every measured frame, thinned evenly where they are too many for a page.
pub(crate) fn frame_table(traces: &Traces) -> String {
    let every = traces.frames.len().div_ceil(POINTS_MAX).max(1);
    let caption = if every == 1 {
        "Frames: weight relative to the mean, r0 towards the Sun, radius minus the session's mean"
            .to_owned()
    } else {
        format!("One frame in {every}; all of them are in limbs.fits")
    };
    let mut table = Table::new(
        &caption,
        &[
            Column::Text("Sequence"),
            Column::Number("Frame"),
            Column::Number("Time, s"),
            Column::Text("Kept"),
            Column::Number("Weight"),
            Column::Number("r0, m"),
            Column::Number("Radius, mas"),
            Column::Number("cos 2θ, mas"),
            Column::Number("sin 2θ, mas"),
        ],
    );
    for frame in traces.frames.iter().step_by(every) {
        table.row([
            frame.sequence.to_string(),
            frame.frame.to_string(),
            numbers::fixed(frame.time_s, 2),
            if frame.kept { "yes" } else { "no" }.to_owned(),
            numbers::fixed(frame.weight, 3),
            numbers::significant(frame.r0_blur_m, 3),
            numbers::fixed(frame.radius_mas, 1),
            numbers::fixed(frame.cos2_mas, 1),
            numbers::fixed(frame.sin2_mas, 1),
        ]);
    }
    table.folded("Frames, one by one")
}
