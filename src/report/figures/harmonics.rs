//! Harmonics of the limb by sequence, on the detector.

use super::{Plate, Room, Words};
use crate::report::axis::{self, Axis};
use crate::report::html::{Column, Table};
use crate::report::numbers;
use crate::report::svg::{Anchor, Canvas};
use crate::result::record::{HarmonicRecord, Record, SequenceRecord};

/// Height of one plot.
const PLOT_PX: f64 = 112.0;

/// From one plot to the next.
const PITCH_PX: f64 = 148.0;

/// Harmonics drawn at most; the table has them all.
const ROWS_MAX: usize = 3;

pub(super) fn plate(record: &Record) -> Option<Plate> {
    let orders = orders(record);
    let words = Words {
        title: "Harmonics by sequence",
        finding: format!(
            "{}, {} set aside; harmonics m = {} of each, air taken out.",
            numbers::plural(record.sequences.len(), "sequence"),
            record
                .sequences
                .iter()
                .filter(|known| known.set_aside.is_some())
                .count(),
            orders
                .iter()
                .map(ToString::to_string)
                .collect::<Vec<_>>()
                .join(", ")
        ),
        reading: "On the detector, from +x towards +y. A distortion of the instrument stays where \
                  it is; the Sun turns with the roll and the field. Bars are one sigma; open marks \
                  are sequences that were set aside."
            .to_owned(),
        table: table(record),
    };
    super::plate("harmonics", super::WIDE_PX, words, |room| {
        draw(record, &orders, room)
    })
}

/// The harmonic numbers that occur, in order.
fn orders(record: &Record) -> Vec<usize> {
    let all = record
        .sequences
        .iter()
        .flat_map(|known| known.harmonics.iter().map(|it| it.m));
    let mut orders: Vec<usize> = all.collect();
    orders.sort_unstable();
    orders.dedup();
    orders
}

fn table(record: &Record) -> String {
    let mut table = Table::new(
        "Harmonics on the detector, air taken out",
        &[
            Column::Text("Sequence"),
            Column::Number("Roll, deg"),
            Column::Number("m"),
            Column::Number("cos, mas"),
            Column::Number("sin, mas"),
            Column::Number("Sigma, mas"),
        ],
    );
    for known in &record.sequences {
        for it in &known.harmonics {
            let sigma = Some(it.sigma_mas);
            table.row([
                known.sequence.to_string(),
                numbers::significant(known.roll_deg, 4),
                it.m.to_string(),
                numbers::beside(it.cos_mas, sigma),
                numbers::beside(it.sin_mas, sigma),
                numbers::beside(it.sigma_mas, sigma),
            ]);
        }
    }
    table.folded("Numbers behind the harmonics")
}

fn of(known: &SequenceRecord, m: usize) -> Option<&HarmonicRecord> {
    known.harmonics.iter().find(|it| {
        it.m == m && it.cos_mas.is_finite() && it.sin_mas.is_finite() && it.sigma_mas.is_finite()
    })
}

fn draw(record: &Record, orders: &[usize], room: Room) -> Option<Canvas> {
    let shown = &orders[..orders.len().min(ROWS_MAX)];
    if shown.is_empty() {
        return None;
    }
    let (left, right) = (44.0, room.width_px - 6.0);
    let height = PITCH_PX * shown.len() as f64;
    let mut canvas = Canvas::new(room.id, room.width_px, height + 72.0);
    let step = (right - left) / record.sequences.len() as f64;
    let offset = (0.16 * step).min(7.0);
    legend(&mut canvas, room);
    for (row, &m) in shown.iter().enumerate() {
        let top = PITCH_PX * row as f64 + 50.0;
        let bottom = top + PLOT_PX;
        let ends = record
            .sequences
            .iter()
            .filter_map(|known| of(known, m))
            .flat_map(|it| {
                let ends = [-it.sigma_mas, it.sigma_mas];
                ends.into_iter()
                    .flat_map(|end| [it.cos_mas + end, it.sin_mas + end])
            });
        let axis = Axis::linear(axis::range_of(ends.chain([0.0]), 0.07), bottom, top);
        canvas.text(
            (0.0, top - 13.0),
            Anchor::Start,
            "label",
            &format!("m = {m}, mas"),
        );
        axis::draw_left(&mut canvas, &axis, (left, right), 4);
        for (place, known) in record.sequences.iter().enumerate() {
            let Some(it) = of(known, m) else { continue };
            let middle = left + step * (place as f64 + 0.5);
            let style = if known.set_aside.is_some() {
                "open"
            } else {
                "mark"
            };
            let bar = |value: f64| (axis.px(value - it.sigma_mas), axis.px(value + it.sigma_mas));
            axis::draw_error(&mut canvas, middle - offset, bar(it.cos_mas), "blue-thin");
            let point = (middle - offset, axis.px(it.cos_mas));
            canvas.circle(point, 4.2, &format!("blue-{style}"));
            axis::draw_error(&mut canvas, middle + offset, bar(it.sin_mas), "red-thin");
            let point = (middle + offset, axis.px(it.sin_mas));
            canvas.square(point, 3.8, &format!("red-{style}"));
        }
    }
    let foot = PITCH_PX * (shown.len() - 1) as f64 + 50.0 + PLOT_PX;
    let every = (44.0 / step).ceil().max(1.0) as usize;
    for (place, known) in record.sequences.iter().enumerate().step_by(every) {
        let middle = left + step * (place as f64 + 0.5);
        let clock = known.time_utc[0]
            .split_once('T')
            .map_or("", |parts| parts.1);
        let clock = clock.get(..5).unwrap_or(clock);
        canvas.text((middle, foot + 17.0), Anchor::Middle, "tick", clock);
        let roll = format!("{}°", numbers::significant(known.roll_deg, 3));
        canvas.text((middle, foot + 31.0), Anchor::Middle, "tick", &roll);
    }
    let label = "start of each sequence, UTC, and its roll";
    canvas.text(
        (0.5 * (left + right), foot + 50.0),
        Anchor::Middle,
        "label",
        label,
    );
    Some(canvas)
}

fn legend(canvas: &mut Canvas, room: Room) {
    let left = if room.narrow { 0.0 } else { 44.0 };
    canvas.circle((left + 5.0, 8.0), 4.2, "blue-mark");
    canvas.text((left + 15.0, 12.0), Anchor::Start, "small", "cos mθ");
    canvas.square((left + 80.0, 8.0), 3.8, "red-mark");
    canvas.text((left + 90.0, 12.0), Anchor::Start, "small", "sin mθ");
}
