//! The null tests, in units of their own errors.

use super::{Plate, Room, Words};
use crate::report::axis::{self, Axis};
use crate::report::html::{Column, Table};
use crate::report::numbers;
use crate::report::svg::{Anchor, Canvas, fitted};
use crate::result::record::{NullTest, Record};

/// From one test to the next.
const PITCH_PX: f64 = 40.0;

pub(super) fn plate(record: &Record) -> Option<Plate> {
    let tests = &record.shape.null_tests;
    let pulls: Vec<f64> = tests.iter().filter_map(pull).collect();
    let within = pulls.iter().filter(|pull| pull.abs() <= 2.0).count();
    let words = Words {
        title: "Numbers that the Sun does not have",
        finding: if pulls.is_empty() {
            "No null test has a value in this session.".to_owned()
        } else {
            format!(
                "{within} of {} null tests with a value lie within two sigma of zero.",
                pulls.len()
            )
        },
        reading: "Each is zero for the Sun; a value away from zero would betray the instrument or \
                  the air. In units of its own sigma; bands at one and two sigma."
            .to_owned(),
        table: table(tests),
    };
    super::plate("nulls", super::WIDE_PX, words, |room| draw(tests, room))
}

/// The value in units of its error.
fn pull(test: &NullTest) -> Option<f64> {
    let pull = test.value? / test.sigma.filter(|sigma| *sigma > 0.0)?;
    pull.is_finite().then_some(pull)
}

fn table(tests: &[NullTest]) -> String {
    let mut table = Table::new(
        "What is zero for the Sun, with its error",
        &[
            Column::Text("Test"),
            Column::Number("Value"),
            Column::Text("Unit"),
            Column::Text("Why there is no value"),
        ],
    );
    for test in tests {
        let value = test.value.map_or(numbers::MISSING.to_owned(), |value| {
            numbers::plus_minus(value, test.sigma)
        });
        let reason = test.reason.clone().unwrap_or_default();
        table.row([test.test.clone(), value, test.unit.clone(), reason]);
    }
    table.folded("Numbers behind the null tests")
}

fn draw(tests: &[NullTest], room: Room) -> Option<Canvas> {
    if tests.is_empty() {
        return None;
    }
    let (left, right) = (8.0, room.width_px - 8.0);
    let (top, bottom) = (4.0, 4.0 + PITCH_PX * tests.len() as f64);
    let mut canvas = Canvas::new(room.id, room.width_px, bottom + 44.0);
    let reach = tests
        .iter()
        .filter_map(pull)
        .map(f64::abs)
        .fold(3.0, f64::max)
        * 1.06;
    let axis = Axis::linear((-reach, reach), left, right);
    for (half, class) in [(2.0, "blue-faint"), (1.0, "blue-faint")] {
        let (from, to) = (axis.px(-half), axis.px(half));
        canvas.rect((from, top), (to - from, bottom - top), class);
    }
    axis::draw_bottom(&mut canvas, &axis, (top, bottom), 6, "value over its sigma");
    for (place, test) in tests.iter().enumerate() {
        let y = top + PITCH_PX * place as f64 + 28.0;
        let value = match test.value {
            Some(value) => numbers::with_unit(&numbers::plus_minus(value, test.sigma), &test.unit),
            None => "no value".to_owned(),
        };
        let value = format!(": {value}");
        let taken_px = 6.7 * value.chars().count() as f64;
        let text = fitted(&test.test, right - left - taken_px) + &value;
        canvas.text((left, y - 14.0), Anchor::Start, "", &text);
        if let Some(pull) = pull(test) {
            canvas.line(
                (axis.px(pull - 1.0), y),
                (axis.px(pull + 1.0), y),
                "blue-line",
            );
            canvas.circle((axis.px(pull), y), 4.5, "blue-mark");
        }
    }
    Some(canvas)
}
