//! How well Sun, instrument and air were told apart: the singular values of the scaled design.

use super::{Plate, Room, Words};
use crate::report::axis::{self, Axis};
use crate::report::html::{Column, Table};
use crate::report::numbers;
use crate::report::svg::{Anchor, Canvas};
use crate::result::record::Record;

pub(super) fn plate(record: &Record) -> Option<Plate> {
    let separation = &record.shape.separation;
    let condition = separation.condition_number.map_or_else(
        || "the design is singular".to_owned(),
        |number| format!("condition number {}", numbers::significant(number, 3)),
    );
    let words = Words {
        title: "Sun, instrument and air told apart",
        finding: format!(
            "Rank {} of {} unknowns, {condition}.",
            separation.rank, separation.unknowns
        ),
        reading: "Singular values of the scaled design without prior knowledge. A value near zero \
                  is a mixture of terms that these observations cannot see; open marks lie beyond \
                  the rank."
            .to_owned(),
        table: table(record),
    };
    super::plate("separation", super::WIDE_PX, words, |room| {
        draw(record, room)
    })
}

fn table(record: &Record) -> String {
    let mut table = Table::new(
        "Singular values of the scaled design",
        &[Column::Number("Number"), Column::Number("Singular value")],
    );
    for (place, value) in record.shape.separation.singular_values.iter().enumerate() {
        table.row([(place + 1).to_string(), numbers::significant(*value, 4)]);
    }
    table.folded("Numbers behind the singular values")
}

fn draw(record: &Record, room: Room) -> Option<Canvas> {
    let values = &record.shape.separation.singular_values;
    let largest = axis::range_of(values.iter().copied(), 0.0).1;
    if values.is_empty() || largest <= 0.0 {
        return None;
    }
    // What rounding leaves of a zero is drawn at the foot, not stretched over ten decades.
    let floor = largest * 1e-6;
    let shown = |value: f64| value.max(floor);
    let (left, right) = (52.0, room.width_px - 8.0);
    let (top, bottom) = (30.0, 200.0);
    let mut canvas = Canvas::new(room.id, room.width_px, bottom + 44.0);
    let least = values
        .iter()
        .map(|value| shown(*value))
        .fold(largest, f64::min);
    let up = Axis::logarithmic((0.6 * least.min(0.2 * largest), 1.6 * largest), bottom, top);
    let across = Axis::linear((0.4, values.len() as f64 + 0.6), left, right);
    canvas.text((0.0, 12.0), Anchor::Start, "label", "singular value");
    axis::draw_left(&mut canvas, &up, (left, right), 4);
    for (place, value) in values.iter().enumerate() {
        let (x, y) = (across.px((place + 1) as f64), up.px(shown(*value)));
        let inside = place < record.shape.separation.rank;
        canvas.line(
            (x, bottom),
            (x, y),
            if inside { "blue-thin" } else { "dash" },
        );
        canvas.circle((x, y), 4.5, if inside { "blue-mark" } else { "open" });
        canvas.text(
            (x, bottom + 16.0),
            Anchor::Middle,
            "tick",
            &(place + 1).to_string(),
        );
    }
    let middle = 0.5 * (left + right);
    canvas.text(
        (middle, bottom + 35.0),
        Anchor::Middle,
        "label",
        "number, largest first",
    );
    Some(canvas)
}
