//! A quantity of many sessions in time, with its mean.

use super::{Plate, Room, Words};
use crate::report::axis::{self, Axis};
use crate::report::html::{Column, Table};
use crate::report::numbers;
use crate::report::svg::{Anchor, Canvas};
use crate::result::combined::{Combined, CombinedQuantity};

/// Height of the plot.
const PLOT_PX: f64 = 230.0;

/// The series of one quantity; none where no session measured it.
pub(crate) fn plate(combined: &Combined, radius: bool) -> Option<Plate> {
    let (stem, title, label, quantity) = if radius {
        (
            "radius-series",
            "Radius by session",
            "radius at 1 AU, arcsec",
            &combined.radius,
        )
    } else {
        (
            "oblateness-series",
            "Oblateness by session",
            "equatorial minus polar radius, mas at 1 AU",
            &combined.oblateness,
        )
    };
    let finding = match (quantity.mean.value, &quantity.heterogeneity) {
        (Some(value), Some(found)) => format!(
            "{} {} from {}; Birge ratio {}.",
            numbers::plus_minus(value, quantity.mean.sigma),
            quantity.mean.unit,
            numbers::plural(quantity.sessions_used, "session"),
            found
                .birge
                .map_or(numbers::MISSING.to_owned(), |it| numbers::significant(
                    it, 3
                ))
        ),
        _ => quantity.mean.reason.clone().unwrap_or_default(),
    };
    let words = Words {
        title,
        finding,
        reading: "Thick bars are what a session shares with no other, thin bars its whole error, \
                  each one sigma. The band is the mean with its whole error; the dashed line, where \
                  there is one, the trend."
            .to_owned(),
        table: table(combined, quantity),
    };
    super::plate(stem, super::WIDE_PX, words, |room| {
        draw(quantity, label, room)
    })
}

fn table(combined: &Combined, quantity: &CombinedQuantity) -> String {
    let mut table = Table::new(
        "The series",
        &[
            Column::Text("Session"),
            Column::Text("Station"),
            Column::Number("Value"),
            Column::Number("Own error"),
            Column::Number("Weight"),
            Column::Number("Minus the mean"),
            Column::Text("Why it is not in the mean"),
        ],
    );
    for it in &quantity.series {
        let session = &combined.sessions[it.session];
        let value = it.value.map_or(numbers::MISSING.to_owned(), |value| {
            numbers::plus_minus(value, it.sigma)
        });
        let beside = |value: Option<f64>| {
            value.map_or(numbers::MISSING.to_owned(), |value| {
                numbers::beside(value, it.sigma)
            })
        };
        table.row([
            session.time_utc[0].clone(),
            session.site_name.clone(),
            value,
            beside(it.sigma_own),
            it.weight.map_or(numbers::MISSING.to_owned(), |it| {
                numbers::significant(it, 3)
            }),
            beside(it.residual),
            it.reason.clone().unwrap_or_default(),
        ]);
    }
    table.folded("Numbers behind the series")
}

fn draw(quantity: &CombinedQuantity, label: &str, room: Room) -> Option<Canvas> {
    let points: Vec<(f64, f64, f64, f64)> = quantity
        .series
        .iter()
        .filter_map(|it| {
            let sigma = it.sigma?;
            Some((
                it.epoch_year,
                it.value?,
                sigma,
                it.sigma_own.unwrap_or(sigma),
            ))
        })
        .collect();
    if points.is_empty() {
        return None;
    }
    let (left, right, top) = (64.0, room.width_px - 8.0, 26.0);
    let bottom = top + PLOT_PX;
    let mut canvas = Canvas::new(room.id, room.width_px, bottom + 44.0);
    let across = Axis::linear(
        axis::range_of(points.iter().map(|it| it.0), 0.06),
        left,
        right,
    );
    let mean = quantity.mean.value.zip(quantity.mean.sigma);
    let ends = points
        .iter()
        .flat_map(|it| [it.1 - it.2, it.1 + it.2])
        .chain(mean.into_iter().flat_map(|(v, s)| [v - s, v + s]));
    let up = Axis::linear(axis::range_of(ends, 0.06), bottom, top);
    canvas.text((0.0, top - 12.0), Anchor::Start, "label", label);
    axis::draw_left(&mut canvas, &up, (left, right), 5);
    let ticks = if room.narrow { 3 } else { 6 };
    axis::draw_bottom(&mut canvas, &across, (top, bottom), ticks, "Julian year");
    if let Some((value, sigma)) = mean {
        let (high, low) = (up.px_inside(value + sigma), up.px_inside(value - sigma));
        canvas.rect((left, high), (right - left, low - high), "blue-tint");
        let y = up.px(value);
        canvas.line((left, y), (right, y), "blue-line");
    }
    if let (Some(value), Some(slope)) = (quantity.trend.value.value, quantity.trend.slope.value) {
        let first = points.iter().map(|it| it.0).fold(f64::INFINITY, f64::min);
        let last = points
            .iter()
            .map(|it| it.0)
            .fold(f64::NEG_INFINITY, f64::max);
        let at = |year: f64| {
            let y = value + slope * (year - quantity.trend.at);
            (across.px(year), up.px_inside(y))
        };
        canvas.line(at(first), at(last), "red-dash");
    }
    for (year, value, sigma, own) in points {
        let x = across.px(year);
        axis::draw_error(
            &mut canvas,
            x,
            (up.px(value + sigma), up.px(value - sigma)),
            "grey-thin",
        );
        canvas.line(
            (x, up.px(value + own)),
            (x, up.px(value - own)),
            "blue-bold",
        );
        canvas.circle((x, up.px(value)), 4.0, "blue-mark");
    }
    Some(canvas)
}
