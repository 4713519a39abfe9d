//! The oblateness with its intervals, beside the stack's and the one rotation alone would give.

use super::{Plate, Room, Words};
use crate::report::axis::{self, Axis};
use crate::report::html::{Column, Table};
use crate::report::numbers;
use crate::report::summary::{Verdict, verdict};
use crate::report::svg::{Anchor, Canvas};
use crate::result::record::{Quantity, Record, ShapeQuantity, Status};

/// Natural width on wide screens.
const WIDTH_PX: f64 = 540.0;

/// Height of a row.
const ROW_PX: f64 = 42.0;

pub(super) fn plate(record: &Record) -> Option<Plate> {
    let shape = &record.shape;
    let finding = match verdict(&shape.oblateness) {
        Verdict::Clear { .. } => "The 95 percent interval stands clear of zero.",
        Verdict::UpperLimit { .. } => "The 95 percent interval reaches zero: an upper limit.",
        Verdict::BelowZero => "The 95 percent interval lies below zero.",
        Verdict::NoError => "The estimate has no stated error.",
        Verdict::NotSeparated => "No oblateness was separated in this session.",
    };
    let words = Words {
        title: "Oblateness and its intervals",
        finding: finding.to_owned(),
        reading: "Thick bar: 68 percent; thin bar: 95 percent. The headline is always the \
                  frame-by-frame route; the stack's limb is its check. Rotation alone: the figure \
                  that the surface rotation gives, with the spread of the published laws."
            .to_owned(),
        table: table(record),
    };
    super::plate("oblateness", WIDTH_PX, words, |room| draw(record, room))
}

fn table(record: &Record) -> String {
    let mut table = Table::new(
        "Oblateness, equatorial minus polar radius at 1 AU",
        &[
            Column::Text("Route"),
            Column::Number("Value, mas"),
            Column::Number("Random, mas"),
            Column::Number("Systematic, mas"),
            Column::Number("68 percent, mas"),
            Column::Number("95 percent, mas"),
        ],
    );
    for (name, quantity) in [
        ("Frame by frame", &record.shape.oblateness),
        ("Stack", &record.shape.by_stack.oblateness),
    ] {
        let part = |part: Option<f64>| {
            part.map_or(numbers::MISSING.to_owned(), |part| {
                numbers::beside(part, quantity.sigma)
            })
        };
        let ends = |ends: Option<[f64; 2]>| {
            ends.map_or(numbers::MISSING.to_owned(), |ends| {
                numbers::interval(ends, quantity.sigma)
            })
        };
        let value = quantity.value.map_or(numbers::MISSING.to_owned(), |value| {
            numbers::plus_minus(value, quantity.sigma)
        });
        table.row([
            name.to_owned(),
            value,
            part(quantity.sigma_random),
            part(quantity.sigma_systematic),
            ends(quantity.interval_68),
            ends(quantity.interval_95),
        ]);
    }
    table.folded("Numbers behind the intervals")
}

/// Everything that must lie inside the plot.
fn reach(record: &Record) -> impl Iterator<Item = f64> {
    let of = |quantity: &ShapeQuantity| {
        let value = quantity.value;
        let ends = quantity.interval_95.or(quantity.interval_68);
        [value, ends.map(|ends| ends[0]), ends.map(|ends| ends[1])]
    };
    let rotation = &record.shape.quadrupole.rotation_figure;
    of(&record.shape.oblateness)
        .into_iter()
        .chain(of(&record.shape.by_stack.oblateness))
        .chain([rotation.value, Some(0.0)])
        .flatten()
}

fn draw(record: &Record, room: Room) -> Option<Canvas> {
    let shape = &record.shape;
    let rows: [(&str, &ShapeQuantity, &str); 2] = [
        ("frame by frame", &shape.oblateness, "blue"),
        ("limb of the stack", &shape.by_stack.oblateness, "purple"),
    ];
    if rows.iter().all(|row| row.1.value.is_none()) {
        return None;
    }
    let rotation = &shape.quadrupole.rotation_figure;
    let count = rows.len() + usize::from(rotation.value.is_some());
    let bottom = ROW_PX * count as f64 + 6.0;
    let mut canvas = Canvas::new(room.id, room.width_px, bottom + 44.0);
    let axis = Axis::linear(
        axis::range_of(reach(record), 0.05),
        8.0,
        room.width_px - 8.0,
    );
    axis::draw_bottom(
        &mut canvas,
        &axis,
        (4.0, bottom),
        6,
        "equatorial minus polar radius, mas at 1 AU",
    );
    for (place, (name, quantity, colour)) in rows.into_iter().enumerate() {
        draw_row(&mut canvas, &axis, place, name, quantity, colour);
    }
    draw_rotation(&mut canvas, &axis, rows.len(), rotation);
    Some(canvas)
}

fn draw_row(
    canvas: &mut Canvas,
    axis: &Axis,
    place: usize,
    name: &str,
    quantity: &ShapeQuantity,
    colour: &str,
) {
    let y = ROW_PX * place as f64 + 34.0;
    let text = match (quantity.status, quantity.value) {
        (Status::Measured, Some(value)) => {
            let text = numbers::plus_minus(value, quantity.sigma);
            format!("{name}: {}", numbers::with_unit(&text, &quantity.unit))
        }
        _ => format!("{name}: not separated"),
    };
    canvas.text((8.0, y - 15.0), Anchor::Start, "halo", &text);
    let Some(value) = quantity.value.filter(|value| value.is_finite()) else {
        return;
    };
    let mut bar = |ends: Option<[f64; 2]>, class: &str| {
        if let Some([low, high]) = ends {
            canvas.line((axis.px_inside(low), y), (axis.px_inside(high), y), class);
        }
    };
    bar(quantity.interval_95, &format!("{colour}-line"));
    bar(quantity.interval_68, &format!("{colour}-thick"));
    if place == 0 {
        canvas.circle((axis.px(value), y), 6.0, &format!("{colour}-open"));
    } else {
        canvas.square((axis.px(value), y), 5.0, &format!("{colour}-open"));
    }
}

fn draw_rotation(canvas: &mut Canvas, axis: &Axis, place: usize, rotation: &Quantity) {
    let (Some(value), Some(text)) = (rotation.value, numbers::quantity(rotation)) else {
        return;
    };
    let y = ROW_PX * place as f64 + 34.0;
    canvas.text(
        (8.0, y - 15.0),
        Anchor::Start,
        "halo",
        &format!("rotation alone: {text}"),
    );
    if let Some(sigma) = rotation.sigma {
        let (low, high) = (axis.px_inside(value - sigma), axis.px_inside(value + sigma));
        canvas.line((low, y), (high, y), "green-thick");
    }
    canvas.diamond((axis.px(value), y), 6.0, "green-open");
}
