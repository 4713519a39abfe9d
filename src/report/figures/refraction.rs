//! What the air's bending did: the disk as the air shows it, and its flattening by zenith distance.

use super::{Plate, Room, Words};
use crate::report::axis::{self, Axis, round_step};
use crate::report::html::{Column, Table};
use crate::report::numbers;
use crate::report::svg::{Anchor, Canvas, polyline};
use crate::result::record::{Record, RefractionRecord};

/// Share of the drawn radius that the largest deviation takes.
const DEVIATION: f64 = 0.3;

/// Points of a drawn outline.
const OUTLINE: usize = 120;

pub(super) fn plate(record: &Record) -> Option<Plate> {
    let high = extreme(record, |a, b| a < b)?;
    let low = extreme(record, |a, b| a > b)?;
    let named = |it: &RefractionRecord| {
        format!(
            "{} mas at {} degrees from the zenith (sequence {})",
            numbers::plus_minus(it.flattening_mas, Some(it.flattening_sigma_mas)),
            numbers::significant(it.zenith_true_deg, 4),
            it.sequence
        )
    };
    let span = if high.sequence == low.sequence {
        format!("Refraction flattened the disk by {}.", named(high))
    } else {
        format!(
            "Refraction flattened the disk by {} to {}.",
            named(high),
            named(low)
        )
    };
    let words = Words {
        title: "Refraction of the session",
        finding: format!("{span} All of it was taken out frame by frame."),
        reading: "The drawn outlines are true to each other and exaggerated against the dashed \
                  disk without air; up is the zenith. Flattening is horizontal minus vertical \
                  radius; the radius change is the mean apparent minus the mean true radius."
            .to_owned(),
        table: table(record),
    };
    super::plate("refraction", super::WIDE_PX, words, |room| {
        Some(draw(record, high, low, room))
    })
}

/// The sequence whose zenith distance comes first by `before`.
fn extreme(record: &Record, before: fn(f64, f64) -> bool) -> Option<&RefractionRecord> {
    record
        .refraction
        .iter()
        .filter(|it| drawable(it))
        .reduce(|best, it| {
            if before(it.zenith_true_deg, best.zenith_true_deg) {
                it
            } else {
                best
            }
        })
}

fn drawable(it: &RefractionRecord) -> bool {
    it.zenith_true_deg.is_finite()
        && it.flattening_mas.is_finite()
        && it.radius_change_mas.is_finite()
}

fn table(record: &Record) -> String {
    let mut table = Table::new(
        "Refraction by sequence, at mid sequence",
        &[
            Column::Text("Sequence"),
            Column::Number("True zenith distance, deg"),
            Column::Number("Apparent, deg"),
            Column::Number("Refraction, arcsec"),
            Column::Number("Radius change, mas"),
            Column::Number("Flattening, mas"),
            Column::Number("Refractivity n - 1"),
            Column::Number("Pressure, hPa"),
            Column::Number("Temperature, °C"),
            Column::Number("Humidity, 0 to 1"),
        ],
    );
    for it in &record.refraction {
        table.row([
            it.sequence.to_string(),
            numbers::significant(it.zenith_true_deg, 6),
            numbers::significant(it.zenith_apparent_deg, 6),
            numbers::significant(it.refraction_arcsec, 5),
            numbers::beside(it.radius_change_mas, Some(it.flattening_sigma_mas)),
            numbers::plus_minus(it.flattening_mas, Some(it.flattening_sigma_mas)),
            numbers::significant(it.refractivity, 6),
            numbers::significant(it.pressure_hpa, 5),
            numbers::significant(it.temperature_c, 3),
            numbers::significant(it.relative_humidity, 2),
        ]);
    }
    table.folded("Refraction and weather by sequence")
}

fn draw(record: &Record, high: &RefractionRecord, low: &RefractionRecord, room: Room) -> Canvas {
    let (disk, plot_left, plot_top) = if room.narrow {
        (room.width_px, 44.0, 390.0)
    } else {
        (300.0, 384.0, 34.0)
    };
    let height = if room.narrow { 690.0 } else { 350.0 };
    let mut canvas = Canvas::new(room.id, room.width_px, height);
    draw_disk(&mut canvas, high, low, disk);
    draw_plot(
        &mut canvas,
        record,
        (plot_left, room.width_px - 8.0),
        plot_top,
    );
    canvas
}

/// Largest deviation of an outline from the true disk, mas.
fn largest_mas(it: &RefractionRecord) -> f64 {
    it.radius_change_mas.abs() + 0.5 * it.flattening_mas.abs()
}

fn draw_disk(canvas: &mut Canvas, high: &RefractionRecord, low: &RefractionRecord, size: f64) {
    let radius = 112.0;
    let (x, y) = (0.5 * size, 160.0);
    let most_mas = largest_mas(high).max(largest_mas(low)).max(1e-6);
    let px_per_mas = DEVIATION * radius / most_mas;
    canvas.line((x, y - radius - 4.0), (x, y - radius - 22.0), "fine");
    canvas.path(
        &format!(
            "{}Z",
            polyline([
                (x, y - radius - 28.0),
                (x - 4.0, y - radius - 19.0),
                (x + 4.0, y - radius - 19.0)
            ])
        ),
        "ink-fill",
    );
    canvas.text(
        (x + 10.0, y - radius - 18.0),
        Anchor::Start,
        "head",
        "zenith",
    );
    canvas.line((x - radius - 14.0, y), (x + radius + 14.0, y), "grid");
    canvas.line((x, y - radius - 2.0), (x, y + radius + 14.0), "grid");
    canvas.circle((x, y), radius, "dash");
    let outline = |it: &RefractionRecord| {
        let points = (0..OUTLINE).map(|k| {
            let angle_rad = std::f64::consts::TAU * k as f64 / OUTLINE as f64;
            // Horizontal minus vertical radius, measured from the zenith direction.
            let change_mas =
                it.radius_change_mas - 0.5 * it.flattening_mas * (2.0 * angle_rad).cos();
            let here = radius + px_per_mas * change_mas;
            (x - here * angle_rad.sin(), y - here * angle_rad.cos())
        });
        format!("{}Z", polyline(points))
    };
    canvas.path(&outline(high), "blue-line");
    if high.sequence != low.sequence {
        canvas.path(&outline(low), "red-dash");
    }
    let mut row = y + radius + 34.0;
    let mut legend = |class: &str, text: &str| {
        canvas.line((x - 118.0, row - 4.0), (x - 94.0, row - 4.0), class);
        canvas.text((x - 88.0, row), Anchor::Start, "small", text);
        row += 17.0;
    };
    let named = |it: &RefractionRecord| {
        format!(
            "{}° from the zenith",
            numbers::significant(it.zenith_true_deg, 3)
        )
    };
    legend("blue-line", &named(high));
    if high.sequence != low.sequence {
        legend("red-dash", &named(low));
    }
    let step_mas = round_step(most_mas, 2);
    let length = step_mas * px_per_mas;
    canvas.line(
        (x + 118.0 - length, y + radius + 30.0),
        (x + 118.0, y + radius + 30.0),
        "bar",
    );
    let text = format!("{} mas", numbers::significant(step_mas, 2));
    canvas.text((x + 118.0, y + radius + 47.0), Anchor::End, "small", &text);
}

fn draw_plot(canvas: &mut Canvas, record: &Record, span: (f64, f64), top: f64) {
    let bottom = top + 226.0;
    let shown: Vec<&RefractionRecord> =
        record.refraction.iter().filter(|it| drawable(it)).collect();
    let zenith = axis::range_of(shown.iter().map(|it| it.zenith_true_deg), 0.08);
    let ends = shown
        .iter()
        .flat_map(|it| [it.flattening_mas, it.radius_change_mas, 0.0]);
    let across = Axis::linear(zenith, span.0, span.1);
    let up = Axis::linear(axis::range_of(ends, 0.06), bottom, top);
    canvas.text(
        (span.0 - 44.0, top - 22.0),
        Anchor::Start,
        "label",
        "change of the disk, mas",
    );
    axis::draw_bottom(
        canvas,
        &across,
        (top, bottom),
        5,
        "true zenith distance, degrees",
    );
    axis::draw_left(canvas, &up, span, 6);
    for it in shown {
        let x = across.px(it.zenith_true_deg);
        let sigma = it.flattening_sigma_mas;
        if sigma.is_finite() {
            let bar = (
                up.px(it.flattening_mas - sigma),
                up.px(it.flattening_mas + sigma),
            );
            axis::draw_error(canvas, x, bar, "blue-thin");
        }
        canvas.circle((x, up.px(it.flattening_mas)), 4.2, "blue-mark");
        canvas.square((x, up.px(it.radius_change_mas)), 3.8, "green-mark");
    }
    let y = bottom + 58.0;
    canvas.circle((span.0 + 5.0, y - 4.0), 4.2, "blue-mark");
    canvas.text((span.0 + 15.0, y), Anchor::Start, "small", "flattening");
    canvas.square((span.0 + 110.0, y - 4.0), 3.8, "green-mark");
    canvas.text((span.0 + 120.0, y), Anchor::Start, "small", "radius change");
}
