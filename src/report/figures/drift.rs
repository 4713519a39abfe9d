//! What a drift left between the disk and an even scale, along its way.

use super::{Plate, Room, Words};
use crate::report::axis::{self, Axis};
use crate::report::html::{Column, Table};
use crate::report::numbers;
use crate::report::svg::{Anchor, Canvas, dots};
use crate::result::record::{CameraNumber, DriftRecord, Record};

/// Height of one plot.
const PLOT_PX: f64 = 130.0;

/// From one plot to the next.
const PITCH_PX: f64 = 172.0;

pub(super) fn plate(record: &Record) -> Option<Plate> {
    if record.drifts.is_empty() {
        return None;
    }
    let words = Words {
        title: "The Sun’s own motion as a ruler",
        finding: finding(record),
        reading: "Tracking was off, and the Sun crossed the field at a rate known to a part in a \
                  million. Dots: each disk’s centre minus where an even scale and a straight camera \
                  put it, along the way and across it. Squares: their means by part of the way; a \
                  pattern that stands out of its bars is the lens’s distortion."
            .to_owned(),
        table: table(record),
    };
    super::plate("drift", super::WIDE_PX, words, |room| {
        draw(&record.drifts, room)
    })
}

fn finding(record: &Record) -> String {
    let Some(camera) = &record.camera else {
        return format!(
            "{} measured.",
            numbers::plural(record.drifts.len(), "drift")
        );
    };
    let said = |name: &str, it: &CameraNumber| {
        let other = if it.used == "drift" {
            "better than the session’s"
        } else {
            "not better than the session’s, which is used"
        };
        numbers::quantity(&it.drift).map_or(String::new(), |value| {
            format!(
                "The {name} is {value}, {other} and {} sigma from it.",
                numbers::fixed(it.pull, 1)
            )
        })
    };
    [
        said("scale", &camera.scale),
        said("camera’s angle", &camera.angle),
    ]
    .join(" ")
}

fn cell(it: &crate::result::record::Quantity) -> String {
    it.value.map_or(numbers::MISSING.to_owned(), |value| {
        numbers::plus_minus(value, it.sigma)
    })
}

fn table(record: &Record) -> String {
    let mut camera = Table::new(
        "Scale and angle of the camera",
        &[
            Column::Text("Number"),
            Column::Number("Session"),
            Column::Number("Drift"),
            Column::Number("Pull, sigma"),
            Column::Text("Used"),
        ],
    );
    if let Some(it) = &record.camera {
        for (name, it) in [("Scale, arcsec/px", &it.scale), ("Angle, deg", &it.angle)] {
            camera.row([
                name.to_owned(),
                cell(&it.nominal),
                cell(&it.drift),
                numbers::fixed(it.pull, 2),
                it.used.clone(),
            ]);
        }
    }
    let mut drifts = Table::new(
        "Drifts",
        &[
            Column::Text("Sequence"),
            Column::Number("Disks used"),
            Column::Number("At the edge"),
            Column::Number("Way, arcsec"),
            Column::Number("Scale, arcsec/px"),
            Column::Number("Angle, deg"),
            Column::Number("Scatter along, arcsec"),
            Column::Number("Scatter across, arcsec"),
            Column::Number("Correlated share"),
            Column::Number("Correlation time, s"),
            Column::Number("Independent disks"),
        ],
    );
    for it in &record.drifts {
        drifts.row([
            it.sequence.to_string(),
            it.frames_used.to_string(),
            it.frames_at_edge.to_string(),
            numbers::significant(it.travel_arcsec, 5),
            cell(&it.scale),
            cell(&it.angle),
            numbers::significant(it.noise_arcsec[0], 3),
            numbers::significant(it.noise_arcsec[1], 3),
            numbers::significant(it.correlated_share, 2),
            numbers::significant(it.correlation_time_s, 2),
            numbers::significant(it.independent_frames, 3),
        ]);
    }
    camera.html() + &drifts.folded("Drift by drift")
}

fn draw(drifts: &[DriftRecord], room: Room) -> Option<Canvas> {
    let centres = || drifts.iter().flat_map(|it| &it.centres);
    let (left, right) = (52.0, room.width_px - 8.0);
    let across = Axis::linear(
        axis::range_of(centres().map(|it| it.along_px), 0.04),
        left,
        right,
    );
    centres().next()?;
    let mut canvas = Canvas::new(room.id, room.width_px, 2.0 * PITCH_PX + 42.0);
    for (place, along) in [true, false].into_iter().enumerate() {
        let top = PITCH_PX * place as f64 + 32.0;
        let span = (top, top + PLOT_PX);
        let points: Vec<(f64, f64)> = centres()
            .map(|it| {
                (
                    it.along_px,
                    if along { it.along_mas } else { it.across_mas },
                )
            })
            .filter(|it| it.0.is_finite() && it.1.is_finite())
            .collect();
        let up = Axis::linear(
            axis::range_of(points.iter().map(|it| it.1).chain([0.0]), 0.06),
            span.1,
            span.0,
        );
        axis::draw_left(&mut canvas, &up, (left, right), 4);
        let (colour, label) = if along {
            ("blue", "left over along the way, mas")
        } else {
            ("green", "left over across the way, mas")
        };
        canvas.text((0.0, top - 14.0), Anchor::Start, "label", label);
        let kept = axis::thinned(&points);
        canvas.path(
            &dots(kept.iter().map(|it| (across.px(it.0), up.px(it.1)))),
            &format!("{colour}-dots"),
        );
        for it in drifts.iter().flat_map(|it| &it.distortion) {
            let (value, sigma) = if along {
                (it.along_mas, it.along_sigma_mas)
            } else {
                (it.across_mas, it.across_sigma_mas)
            };
            if !(value.is_finite() && sigma.is_finite() && it.along_px.is_finite()) {
                continue;
            }
            let x = across.px(it.along_px);
            let ends = (up.px_inside(value - sigma), up.px_inside(value + sigma));
            axis::draw_error(&mut canvas, x, ends, "bar");
            canvas.square((x, up.px_inside(value)), 4.0, "open");
        }
        if !along {
            let label = "where the disk was along its way, px from the detector’s middle";
            axis::draw_bottom(&mut canvas, &across, span, 6, label);
        }
    }
    Some(canvas)
}
