//! Power of the limb's motion by harmonic, observed and modelled.

use super::{Plate, Room, Words};
use crate::report::axis::{self, Axis};
use crate::report::html::{Column, Table};
use crate::report::numbers;
use crate::report::svg::{Anchor, Canvas, polyline};
use crate::result::record::{PowerRecord, Record};

pub(super) fn plate(record: &Record) -> Option<Plate> {
    let seeing = &record.seeing;
    let spread = numbers::quantity(&record.turbulence.observed_over_predicted)
        .unwrap_or_else(|| "not known".to_owned());
    let words = Words {
        title: "Turbulence along the limb",
        finding: format!(
            "Variance of one coefficient from frame to frame, by harmonic. Observed over predicted \
             scatter at m = 2: {spread}."
        ),
        reading: "Points are observed, the line is the fitted model with the photon noise in it, \
                  the broken line the noise alone."
            .to_owned(),
        table: table(&seeing.independent_frames),
    };
    super::plate("power", super::WIDE_PX, words, |room| {
        draw(&seeing.independent_frames, room)
    })
}

fn table(powers: &[PowerRecord]) -> String {
    let mut table = Table::new(
        "Power by harmonic, and how many frames count as independent",
        &[
            Column::Number("m"),
            Column::Number("Observed, mas²"),
            Column::Number("Modelled, mas²"),
            Column::Number("Noise, mas²"),
            Column::Number("Independent frames"),
        ],
    );
    for it in powers {
        table.row([
            it.m.to_string(),
            numbers::significant(it.observed_mas2, 4),
            numbers::significant(it.modelled_mas2, 4),
            numbers::significant(it.noise_mas2, 4),
            numbers::significant(it.independent_frames, 3),
        ]);
    }
    table.folded("Numbers behind the power")
}

fn draw(powers: &[PowerRecord], room: Room) -> Option<Canvas> {
    type Of = fn(&PowerRecord) -> f64;
    let series: [(Of, &str); 3] = [
        (|it| it.observed_mas2, "observed"),
        (|it| it.modelled_mas2, "modelled"),
        (|it| it.noise_mas2, "noise"),
    ];
    let positive = |of: Of| {
        let values = powers.iter().map(move |it| (it.m as f64, of(it)));
        values.filter(|point| point.1 > 0.0 && point.1.is_finite())
    };
    let logs = series
        .iter()
        .flat_map(|(of, _)| positive(*of))
        .map(|point| point.1.log10());
    let (low, high) = axis::range_of(logs, 0.06);
    if powers.is_empty() || series.iter().all(|(of, _)| positive(*of).next().is_none()) {
        return None;
    }
    let (left, right) = (52.0, room.width_px - 8.0);
    let (top, bottom) = (44.0, 250.0);
    let mut canvas = Canvas::new(room.id, room.width_px, bottom + 44.0);
    let orders = axis::range_of(powers.iter().map(|it| it.m as f64), 0.04);
    let across = Axis::linear(orders, left, right);
    let up = Axis::logarithmic((10f64.powf(low), 10f64.powf(high)), bottom, top);
    canvas.text(
        (0.0, 12.0),
        Anchor::Start,
        "label",
        "variance of a coefficient, mas²",
    );
    let y = if room.narrow { 31.0 } else { 12.0 };
    let start = if room.narrow { 0.0 } else { 330.0 };
    canvas.circle((start + 5.0, y - 4.0), 4.2, "blue-mark");
    canvas.text((start + 15.0, y), Anchor::Start, "small", "observed");
    canvas.line(
        (start + 86.0, y - 4.0),
        (start + 108.0, y - 4.0),
        "red-line",
    );
    canvas.text((start + 114.0, y), Anchor::Start, "small", "modelled");
    canvas.line((start + 188.0, y - 4.0), (start + 210.0, y - 4.0), "dash");
    canvas.text((start + 216.0, y), Anchor::Start, "small", "noise");
    axis::draw_bottom(&mut canvas, &across, (top, bottom), 8, "harmonic m");
    axis::draw_left(&mut canvas, &up, (left, right), 5);
    let path = |of: Of| polyline(positive(of).map(|point| (across.px(point.0), up.px(point.1))));
    canvas.path(&path(series[2].0), "dash");
    canvas.path(&path(series[1].0), "red-line");
    for (m, value) in positive(series[0].0) {
        canvas.circle((across.px(m), up.px(value)), 4.2, "blue-mark");
    }
    Some(canvas)
}
