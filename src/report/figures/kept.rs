//! Oblateness and radius against the share of frames kept.

use super::{Plate, Room, Words};
use crate::report::axis::{self, Axis};
use crate::report::html::{Column, Table};
use crate::report::numbers;
use crate::report::svg::{Anchor, Canvas};
use crate::result::record::Record;

/// Height of one plot.
const PLOT_PX: f64 = 140.0;

/// From one plot to the next.
const PITCH_PX: f64 = 182.0;

/// A point of a curve: kept share, value, standard uncertainty.
type Point = (f64, f64, f64);

pub(super) fn plate(record: &Record) -> Option<Plate> {
    let words = Words {
        title: "Does the answer depend on the frames kept?",
        finding: finding(record),
        reading: "A criterion that is blind to the shape gives a flat curve. Bars are the random \
                  part only; neighbouring points share frames, so they move together; the slope's \
                  error allows for that. The band is the answer with its full error."
            .to_owned(),
        table: table(record),
    };
    super::plate("kept", super::WIDE_PX, words, |room| draw(record, room))
}

fn finding(record: &Record) -> String {
    let curve = &record.shape.kept_curve;
    let values = || {
        curve
            .iter()
            .filter_map(|it| it.oblateness_mas)
            .filter(|it| it.is_finite())
    };
    let (Some(low), Some(high)) = (values().reduce(f64::min), values().reduce(f64::max)) else {
        return "The oblateness was not separated at any kept fraction; the radius was.".to_owned();
    };
    let sigma = record.shape.oblateness.sigma;
    format!(
        "Over the {} kept fractions the oblateness runs from {} to {} mas.",
        curve.len(),
        numbers::beside(low, sigma),
        numbers::beside(high, sigma)
    ) + &slope_clause(record)
}

/// One sentence on the slope of the oblateness; nothing where it was not tested.
fn slope_clause(record: &Record) -> String {
    let slope = &record.shape.kept_slope;
    let Some(it) = &slope.oblateness else {
        return String::new();
    };
    let verdict = if it.chance < 0.01 {
        "chance does not explain it"
    } else {
        "no slope beyond chance"
    };
    format!(
        " From none to all of the frames a line through {} of them changes by {} mas, {} sigma: {verdict}.",
        slope.fractions.len(),
        numbers::plus_minus(it.slope_mas, Some(it.sigma_mas)),
        numbers::significant(it.pull, 2),
    )
}

fn table(record: &Record) -> String {
    let mut table = Table::new(
        "Shape against the kept fraction, random errors",
        &[
            Column::Number("Kept, percent"),
            Column::Number("Frames"),
            Column::Number("Oblateness, mas"),
            Column::Number("Radius at 1 AU, arcsec"),
            Column::Number("Sigma of the radius, mas"),
        ],
    );
    for point in &record.shape.kept_curve {
        let oblateness = point
            .oblateness_mas
            .map_or(numbers::MISSING.to_owned(), |value| {
                numbers::plus_minus(value, point.oblateness_sigma_mas)
            });
        table.row([
            numbers::percent(point.fraction),
            point.frames.to_string(),
            oblateness,
            numbers::beside(point.radius_arcsec, Some(point.radius_sigma_mas / 1000.0)),
            numbers::sigma(point.radius_sigma_mas),
        ]);
    }
    table.folded("Numbers behind the curves") + &slopes(record)
}

/// The slopes and what chance makes of them; empty where none was tested.
fn slopes(record: &Record) -> String {
    let slope = &record.shape.kept_slope;
    let mut table = Table::new(
        "Slopes against the kept fraction, from none to all of the frames",
        &[
            Column::Text("Quantity"),
            Column::Number("Slope, mas"),
            Column::Number("Slope over its sigma"),
            Column::Number("Probability by chance"),
            Column::Number("Degrees of freedom"),
        ],
    );
    for (name, test) in [("Oblateness", &slope.oblateness), ("Radius", &slope.radius)] {
        if let Some(it) = test {
            table.row([
                name.to_owned(),
                numbers::plus_minus(it.slope_mas, Some(it.sigma_mas)),
                numbers::significant(it.pull, 2),
                numbers::significant(it.chance, 2),
                numbers::significant(it.degrees, 3),
            ]);
        }
    }
    if table.is_empty() {
        return String::new();
    }
    table.folded("Numbers behind the slopes")
}

fn draw(record: &Record, room: Room) -> Option<Canvas> {
    let curve = &record.shape.kept_curve;
    if curve.is_empty() {
        return None;
    }
    let shape = &record.shape;
    let oblateness: Vec<Point> = curve
        .iter()
        .filter_map(|it| Some((it.fraction, it.oblateness_mas?, it.oblateness_sigma_mas?)))
        .collect();
    let reference_arcsec = shape
        .radius
        .value
        .unwrap_or(curve[curve.len() - 1].radius_arcsec);
    let radius: Vec<Point> = curve
        .iter()
        .map(|it| {
            (
                it.fraction,
                (it.radius_arcsec - reference_arcsec) * 1000.0,
                it.radius_sigma_mas,
            )
        })
        .collect();
    let answer = shape.oblateness.value.zip(shape.oblateness.sigma);
    let radius_answer = shape.radius.sigma.map(|sigma| (0.0, sigma * 1000.0));
    let mut plots = Vec::new();
    if !oblateness.is_empty() {
        plots.push(("oblateness, mas at 1 AU", oblateness, answer, "blue"));
    }
    plots.push((
        "radius minus the answer, mas at 1 AU",
        radius,
        radius_answer,
        "green",
    ));

    let (left, right) = (44.0, room.width_px - 8.0);
    let mut canvas = Canvas::new(room.id, room.width_px, PITCH_PX * plots.len() as f64 + 36.0);
    let across = Axis::linear((0.0, 104.0), left, right);
    let foot = PITCH_PX * plots.len() as f64 - 10.0;
    for (place, (label, points, answer, colour)) in plots.iter().enumerate() {
        let top = PITCH_PX * place as f64 + 32.0;
        let bottom = top + PLOT_PX;
        draw_plot(
            &mut canvas,
            &across,
            (top, bottom),
            (points, *answer),
            colour,
        );
        canvas.text((0.0, top - 14.0), Anchor::Start, "label", label);
    }
    for (value, label) in across.ticks(6) {
        canvas.text(
            (across.px(value), foot + 16.0),
            Anchor::Middle,
            "tick",
            &label,
        );
    }
    let middle = 0.5 * (left + right);
    let label = "usable frames kept, percent";
    canvas.text((middle, foot + 35.0), Anchor::Middle, "label", label);
    let kept = across.px(100.0 * record.selection.kept_fraction);
    if kept.is_finite() {
        canvas.line((kept, 32.0), (kept, foot), "dash");
        let anchor = if kept > 0.7 * right {
            Anchor::End
        } else {
            Anchor::Start
        };
        let aside = if kept > 0.7 * right { -5.0 } else { 5.0 };
        canvas.text((kept + aside, 43.0), anchor, "small halo", "this session");
    }
    Some(canvas)
}

fn draw_plot(
    canvas: &mut Canvas,
    across: &Axis,
    span: (f64, f64),
    (points, answer): (&[Point], Option<(f64, f64)>),
    colour: &str,
) {
    let (left, right) = (across.px(0.0), across.px(104.0));
    // The band may be far wider than the curve; it is then cut off, not the curve flattened.
    let inside = points.iter().flat_map(|it| [it.1 - it.2, it.1 + it.2]);
    let extra = answer.into_iter().flat_map(|(value, sigma)| {
        let widest = points.iter().map(|it| it.2).fold(0.0, f64::max);
        let half = sigma.min(2.0 * widest);
        [value - half, value + half]
    });
    let up = Axis::linear(axis::range_of(inside.chain(extra), 0.05), span.1, span.0);
    for (value, _) in across.ticks(6) {
        canvas.line(
            (across.px(value), span.0),
            (across.px(value), span.1),
            "grid",
        );
    }
    axis::draw_left(canvas, &up, (left, right), 5);
    if let Some((value, sigma)) = answer {
        let (high, low) = (up.px_inside(value + sigma), up.px_inside(value - sigma));
        canvas.rect(
            (left, high),
            (right - left, low - high),
            &format!("{colour}-tint"),
        );
        canvas.line(
            (left, up.px_inside(value)),
            (right, up.px_inside(value)),
            &format!("{colour}-dash"),
        );
    }
    for &(share, value, sigma) in points
        .iter()
        .filter(|it| it.1.is_finite() && it.2.is_finite())
    {
        let x = across.px(100.0 * share);
        axis::draw_error(
            canvas,
            x,
            (up.px(value - sigma), up.px(value + sigma)),
            &format!("{colour}-thin"),
        );
        if colour == "blue" {
            canvas.circle((x, up.px(value)), 4.2, "blue-mark");
        } else {
            canvas.square((x, up.px(value)), 3.8, &format!("{colour}-mark"));
        }
    }
}
