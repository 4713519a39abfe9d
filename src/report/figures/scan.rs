//! The limb by transits, and the radius of each from time alone.

use super::{Plate, Room, Words};
use crate::report::axis::{self, Axis};
use crate::report::html::{Column, Table};
use crate::report::numbers;
use crate::report::svg::{Anchor, Canvas};
use crate::result::record::{Record, ScanRecord, ShapeQuantity};

/// Height of one plot.
const PLOT_PX: f64 = 130.0;

/// From one plot to the next.
const PITCH_PX: f64 = 190.0;

pub(super) fn plate(record: &Record) -> Option<Plate> {
    if record.scans.is_empty() {
        return None;
    }
    let words = Words {
        title: "The limb by transits over a fixed slit",
        finding: finding(record),
        reading: "A line detector stood still while the Sun drifted over it. Above: the mean limb of \
                  the transits minus its own mean, round the slit’s frame (0 and 180 deg across the \
                  slit, 90 and 270 along it); a wrong slit scale shows as a wave along the slit, a \
                  turned slit as one at 45 deg. Below: each transit’s radius across the slit, which \
                  time alone gives, free of the plate scale and of refraction."
            .to_owned(),
        table: table(record),
    };
    super::plate("scan", super::WIDE_PX, words, |room| {
        draw(&record.scans, room)
    })
}

fn finding(record: &Record) -> String {
    let Some(it) = &record.by_scan else {
        return "The transits were not fitted.".to_owned();
    };
    let Some(radius) = numbers::shape(&it.radius) else {
        return it
            .reason
            .clone()
            .unwrap_or_else(|| "The transits gave no radius.".to_owned());
    };
    let apart = it.radius_difference_sigma.map_or(String::new(), |sigma| {
        format!(
            ", {} sigma from that of the frames",
            numbers::fixed(sigma, 1)
        )
    });
    format!(
        "{} give a radius of {radius} at 1 AU{apart}.",
        numbers::plural(it.transits, "transit")
    )
}

fn shape_cell(it: &ShapeQuantity) -> String {
    it.value.map_or(numbers::MISSING.to_owned(), |value| {
        numbers::plus_minus(value, it.sigma)
    })
}

fn table(record: &Record) -> String {
    let mut out = String::new();
    if let Some(it) = &record.by_scan {
        let mut routes = Table::new(
            "The two routes",
            &[
                Column::Text("Quantity"),
                Column::Number("By transits"),
                Column::Number("By frames"),
                Column::Number("Apart, sigma"),
            ],
        );
        let apart =
            |it: Option<f64>| it.map_or(numbers::MISSING.to_owned(), |it| numbers::fixed(it, 2));
        routes.row([
            "Radius at 1 AU, arcsec".to_owned(),
            shape_cell(&it.radius),
            shape_cell(&record.shape.radius),
            apart(it.radius_difference_sigma),
        ]);
        routes.row([
            "Oblateness, mas".to_owned(),
            shape_cell(&it.oblateness),
            shape_cell(&record.shape.oblateness),
            apart(it.oblateness_difference_sigma),
        ]);
        out.push_str(&routes.html());
        let mut budget = Table::new(
            "Errors of the transits",
            &[
                Column::Text("Term"),
                Column::Number("Radius, mas"),
                Column::Number("Oblateness, mas"),
                Column::Text("Kind"),
                Column::Text("How"),
            ],
        );
        for line in &it.budget {
            budget.row([
                line.term.clone(),
                numbers::sigma(line.sigma_radius_mas),
                line.sigma_mas
                    .map_or(numbers::MISSING.to_owned(), numbers::sigma),
                line.kind.clone(),
                line.how.clone(),
            ]);
        }
        if !budget.is_empty() {
            out.push_str(&budget.folded("Where the transits’ error comes from"));
        }
    }
    let mut transits = Table::new(
        "Transits",
        &[
            Column::Text("Sequence"),
            Column::Number("Transit"),
            Column::Text("Centre on the slit, UTC"),
            Column::Number("Contact to contact, s"),
            Column::Number("Radius across the slit, arcsec"),
            Column::Number("Radius along the slit, arcsec"),
        ],
    );
    for scan in &record.scans {
        for it in &scan.transits {
            transits.row([
                scan.sequence.to_string(),
                it.transit.to_string(),
                it.time_utc.clone(),
                numbers::fixed(it.duration_s, 4),
                numbers::fixed(it.across_slit_arcsec, 3),
                numbers::fixed(it.along_slit_arcsec, 3),
            ]);
        }
    }
    out + &transits.folded("Transit by transit")
}

fn draw(scans: &[ScanRecord], room: Room) -> Option<Canvas> {
    let first = scans.iter().find(|it| !it.transits.is_empty())?;
    let (left, right) = (52.0, room.width_px - 8.0);
    let mut canvas = Canvas::new(room.id, room.width_px, 2.0 * PITCH_PX + 24.0);
    limb(&mut canvas, first, (left, right), 32.0);
    radii(&mut canvas, scans, (left, right), 32.0 + PITCH_PX);
    Some(canvas)
}

/// The mean limb of a scan.
fn limb(canvas: &mut Canvas, scan: &ScanRecord, (left, right): (f64, f64), top: f64) {
    let points: Vec<(f64, f64, f64)> = scan
        .limb_angle_deg
        .iter()
        .zip(&scan.limb_mas)
        .zip(&scan.limb_sigma_mas)
        .map(|((a, r), s)| (a.rem_euclid(360.0), *r, *s))
        .filter(|it| it.0.is_finite() && it.1.is_finite() && it.2.is_finite())
        .collect();
    let span = (top, top + PLOT_PX);
    let across = Axis::linear((0.0, 360.0), left, right);
    let ends = points.iter().flat_map(|it| [it.1 - it.2, it.1 + it.2]);
    let up = Axis::linear(axis::range_of(ends.chain([0.0]), 0.05), span.1, span.0);
    let label = "limb minus its mean, mas at 1 AU";
    canvas.text((0.0, top - 14.0), Anchor::Start, "label", label);
    axis::draw_left(canvas, &up, (left, right), 4);
    axis::draw_bottom(canvas, &across, span, 5, "angle from across the slit, deg");
    for (angle, value, sigma) in points {
        let x = across.px(angle);
        let bar = (up.px(value - sigma), up.px(value + sigma));
        axis::draw_error(canvas, x, bar, "blue-thin");
        canvas.circle((x, up.px(value)), 3.0, "blue-mark");
    }
}

/// Radius across the slit, transit by transit.
fn radii(canvas: &mut Canvas, scans: &[ScanRecord], (left, right): (f64, f64), top: f64) {
    let values: Vec<f64> = scans
        .iter()
        .flat_map(|it| &it.transits)
        .map(|it| it.across_slit_arcsec)
        .filter(|it| it.is_finite())
        .collect();
    let mean = values.iter().sum::<f64>() / values.len().max(1) as f64;
    let span = (top, top + PLOT_PX);
    let across = Axis::linear((0.0, values.len() as f64 + 1.0), left, right);
    let mas: Vec<f64> = values.iter().map(|it| 1000.0 * (it - mean)).collect();
    let up = Axis::linear(
        axis::range_of(mas.iter().copied().chain([0.0]), 0.1),
        span.1,
        span.0,
    );
    let label = "radius across the slit minus the mean, mas at 1 AU";
    canvas.text((0.0, top - 14.0), Anchor::Start, "label", label);
    axis::draw_left(canvas, &up, (left, right), 4);
    axis::draw_bottom(canvas, &across, span, 8, "transit");
    for (k, value) in mas.iter().enumerate() {
        let at = (across.px(k as f64 + 1.0), up.px(*value));
        canvas.square(at, 3.8, "green-mark");
    }
}
