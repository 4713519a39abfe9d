//! The day of a plan: the Sun's height, the air's flattening, the error after an hour.

use super::{Plate, Room, Words};
use crate::report::axis::{self, Axis};
use crate::report::html::{Column, Table};
use crate::report::numbers;
use crate::report::svg::{Anchor, Canvas, polyline};
use crate::result::plan::{Plan, PlanRow};

/// Height of each of the three plots.
const PLOT_PX: f64 = 130.0;

/// The figure of the day.
pub(crate) fn plate(plan: &Plan) -> Option<Plate> {
    let words = Words {
        title: "The day by quarters of an hour",
        finding: plan.summary.clone(),
        reading: "From above: true zenith distance of the Sun; flattening of the disk by the air with its \
                  error; error of the oblateness after an hour like this, random (blue), systematic (red \
                  dashes). The tinted stretch is the window, and the lines in it are turns of the instrument."
            .to_owned(),
        table: table(plan),
    };
    super::plate("plan", super::WIDE_PX, words, |room| draw(plan, room))
}

fn table(plan: &Plan) -> String {
    let mut table = Table::new(
        "The day by quarters of an hour",
        &[
            Column::Text("From, UTC"),
            Column::Number("Zenith distance, deg"),
            Column::Number("Azimuth, deg"),
            Column::Number("Parallactic angle, deg"),
            Column::Number("Axis from the vertical, deg"),
            Column::Number("Flattening, mas"),
            Column::Number("m = 2 of a frame, mas"),
            Column::Number("Independent frames a second"),
            Column::Number("Random, mas"),
            Column::Number("Systematic, mas"),
            Column::Text("Note"),
        ],
    );
    let some = |it: Option<f64>| {
        it.map_or(numbers::MISSING.to_owned(), |it| {
            numbers::significant(it, 3)
        })
    };
    for it in &plan.quarters {
        table.row([
            it.time_utc.clone(),
            numbers::significant(it.zenith_true_deg, 4),
            numbers::significant(it.azimuth_deg, 4),
            numbers::significant(it.parallactic_deg, 4),
            numbers::significant(it.axis_from_vertical_deg, 4),
            numbers::plus_minus(it.flattening_mas, Some(it.flattening_sigma_mas)),
            some(it.frame_mas),
            some(it.frames_per_s),
            some(it.sigma_random_mas),
            some(it.sigma_systematic_mas),
            it.note.clone().unwrap_or_default(),
        ]);
    }
    table.folded("Numbers of the day")
}

/// Seconds of the day of a time, running on over midnight from the first quarter.
fn seconds(text: &str, first: &str) -> Option<f64> {
    let of = |text: &str| {
        let clock = text.split_once('T')?.1;
        let mut parts = clock.split(':').map(|it| it.parse::<f64>().ok());
        Some(3600.0 * parts.next()?? + 60.0 * parts.next()?? + parts.next()??)
    };
    let day = |text: &str| text.split_once('T').map(|it| it.0.to_owned());
    let next = if day(text)? == day(first)? {
        0.0
    } else {
        86_400.0
    };
    Some(of(text)? + next)
}

fn draw(plan: &Plan, room: Room) -> Option<Canvas> {
    let first = &plan.quarters.first()?.time_utc;
    let hour = |text: &str| seconds(text, first).map(|it| it / 3600.0);
    // The numbers of a row hold at its middle.
    let points: Vec<(f64, &PlanRow)> = plan
        .quarters
        .iter()
        .filter_map(|it| Some((hour(&it.time_utc)? + 0.125, it)))
        .collect();
    let (left, right) = (64.0, room.width_px - 8.0);
    let tops = [26.0, 26.0 + PLOT_PX + 34.0, 26.0 + 2.0 * (PLOT_PX + 34.0)];
    let mut canvas = Canvas::new(room.id, room.width_px, tops[2] + PLOT_PX + 44.0);
    let ends = (points.first()?.0 - 0.125, points.last()?.0 + 0.125);
    let across = Axis::linear(ends, left, right);
    if let Some(window) = &plan.window {
        let (from, to) = (hour(&window.time_utc[0])?, hour(&window.time_utc[1])?);
        for top in tops {
            let width = across.px(to) - across.px(from);
            canvas.rect((across.px(from), top), (width, PLOT_PX), "green-tint");
            for roll in window.rolls.iter().skip(1) {
                let x = across.px(hour(&roll.from_utc)?);
                canvas.line((x, top), (x, top + PLOT_PX), "dash");
            }
        }
    }
    let mut plot = |top: f64, label: &str, range: (f64, f64), upright: bool| {
        let (low_px, high_px) = (top + PLOT_PX, top);
        let axis = if upright {
            Axis::linear(range, low_px, high_px)
        } else {
            Axis::linear(range, high_px, low_px)
        };
        canvas.text((0.0, top - 10.0), Anchor::Start, "label", label);
        axis::draw_left(&mut canvas, &axis, (left, right), 4);
        axis
    };
    let of = |f: &dyn Fn(&PlanRow) -> Option<f64>| -> Vec<(f64, f64)> {
        points
            .iter()
            .filter_map(|(x, it)| Some((*x, f(it)?)))
            .collect()
    };
    let zenith = of(&|it| Some(it.zenith_true_deg));
    let flattening = of(&|it| Some(it.flattening_mas));
    let random = of(&|it| it.sigma_random_mas);
    let systematic = of(&|it| it.sigma_systematic_mas);
    let up = plot(tops[0], "true zenith distance, degrees", (0.0, 90.0), false);
    let flat = plot(
        tops[1],
        "flattening by the air, mas",
        axis::range_of(flattening.iter().map(|it| it.1).chain([0.0]), 0.05),
        true,
    );
    let most = random.iter().chain(&systematic).map(|it| it.1).chain([0.0]);
    let error = plot(
        tops[2],
        "error of the oblateness after an hour, mas",
        axis::range_of(most, 0.05),
        true,
    );
    let path = |axis: &Axis, points: &[(f64, f64)]| {
        polyline(points.iter().map(|it| (across.px(it.0), axis.px(it.1))))
    };
    canvas.path(&path(&up, &zenith), "blue-line");
    canvas.path(&path(&flat, &flattening), "blue-line");
    for (x, it) in &points {
        let (y, sigma) = (it.flattening_mas, it.flattening_sigma_mas);
        let bar = (flat.px(y - sigma), flat.px(y + sigma));
        axis::draw_error(&mut canvas, across.px(*x), bar, "grey-thin");
    }
    canvas.path(&path(&error, &random), "blue-line");
    canvas.path(&path(&error, &systematic), "red-dash");
    let ticks = if room.narrow { 4 } else { 9 };
    let span = (tops[2], tops[2] + PLOT_PX);
    axis::draw_bottom(&mut canvas, &across, span, ticks, "hour of the day, UTC");
    Some(canvas)
}
