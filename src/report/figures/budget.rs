//! The error budget as bars: oblateness and radius side by side, random and systematic.

use super::{Plate, Room, Words};
use crate::report::axis::{self, Axis};
use crate::report::html::{Column, Table};
use crate::report::numbers;
use crate::report::svg::{Anchor, Canvas, fitted};
use crate::result::record::{BudgetLine, Record, ShapeQuantity};

/// From one term to the next.
const PITCH_PX: f64 = 37.0;

/// Height of a bar.
const BAR_PX: f64 = 11.0;

pub(super) fn plate(record: &Record) -> Option<Plate> {
    let lines = sorted(record);
    let largest = lines.first()?;
    let share = |line: &BudgetLine| match (line.sigma_mas, record.shape.oblateness.sigma) {
        (Some(sigma), Some(total)) if total > 0.0 => Some((sigma / total).powi(2)),
        _ => None,
    };
    let finding = match share(largest) {
        Some(part) => format!(
            "The largest term of the oblateness is “{}”: {} mas, {} percent of the variance.",
            largest.term,
            numbers::sigma(largest.sigma_mas.unwrap_or(0.0)),
            numbers::percent(part)
        ),
        None => format!(
            "The oblateness has no error, as it was not separated. The largest term of the radius \
             is “{}”: {} mas.",
            largest.term,
            numbers::sigma(largest.sigma_radius_mas)
        ),
    };
    let words = Words {
        title: "Where the error comes from",
        finding,
        reading: "One standard uncertainty for each source. Solid bars are random and shrink with \
                  more frames; hatched bars are systematic and do not."
            .to_owned(),
        table: table(&lines),
    };
    super::plate("budget", super::WIDE_PX, words, |room| {
        Some(draw(record, &lines, room))
    })
}

/// Largest first: by the oblateness where it has errors, else by the radius.
fn sorted(record: &Record) -> Vec<&BudgetLine> {
    let mut lines: Vec<&BudgetLine> = record.budget.iter().collect();
    let separated = lines.iter().any(|line| line.sigma_mas.is_some());
    let key = |line: &BudgetLine| {
        if separated {
            line.sigma_mas.unwrap_or(0.0)
        } else {
            line.sigma_radius_mas
        }
    };
    lines.sort_by(|a, b| key(b).total_cmp(&key(a)).then_with(|| a.term.cmp(&b.term)));
    lines
}

fn table(lines: &[&BudgetLine]) -> String {
    let mut table = Table::new(
        "Error budget, standard uncertainties",
        &[
            Column::Text("Term"),
            Column::Number("Oblateness, mas"),
            Column::Number("Radius, mas"),
            Column::Text("Kind"),
            Column::Text("Scope"),
            Column::Text("How it was obtained"),
        ],
    );
    for line in lines {
        table.row([
            line.term.clone(),
            line.sigma_mas
                .map_or(numbers::MISSING.to_owned(), numbers::sigma),
            numbers::sigma(line.sigma_radius_mas),
            line.kind.clone(),
            line.scope.clone(),
            line.how.clone(),
        ]);
    }
    table.folded("Budget with scopes and how each term was obtained")
}

/// One bar of a row.
#[derive(Clone, Copy)]
struct Bar {
    value_mas: Option<f64>,
    kind: Kind,
}

/// How a bar is filled.
#[derive(Clone, Copy)]
enum Kind {
    Random,
    Systematic,
    Total,
}

fn kind_of(line: &BudgetLine) -> Kind {
    if line.kind == "random" {
        Kind::Random
    } else {
        Kind::Systematic
    }
}

fn draw(record: &Record, lines: &[&BudgetLine], room: Room) -> Canvas {
    let mut rows: Vec<(String, [Bar; 2])> = lines
        .iter()
        .map(|line| {
            let kind = kind_of(line);
            let bars = [
                Bar {
                    value_mas: line.sigma_mas,
                    kind,
                },
                Bar {
                    value_mas: Some(line.sigma_radius_mas),
                    kind,
                },
            ];
            (format!("{} · {}", line.term, line.scope), bars)
        })
        .collect();
    let radius_mas = if record.shape.radius.unit == "arcsec" {
        1000.0
    } else {
        1.0
    };
    let total = |name: &str, kind: Kind, of: fn(&ShapeQuantity) -> Option<f64>| {
        let oblateness = Bar {
            value_mas: of(&record.shape.oblateness),
            kind,
        };
        let radius = of(&record.shape.radius).map(|value| value * radius_mas);
        (
            name.to_owned(),
            [
                oblateness,
                Bar {
                    value_mas: radius,
                    kind,
                },
            ],
        )
    };
    let terms = rows.len();
    rows.push(total("all random", Kind::Random, |it| it.sigma_random));
    rows.push(total("all systematic", Kind::Systematic, |it| {
        it.sigma_systematic
    }));
    rows.push(total("together", Kind::Total, |it| it.sigma));

    let gap = if room.narrow { 14.0 } else { 40.0 };
    let sides: &[(usize, &str)] = if rows.iter().any(|row| row.1[0].value_mas.is_some()) {
        &[(0, "oblateness"), (1, "radius")]
    } else {
        &[(1, "radius; the oblateness was not separated")]
    };
    let count = sides.len() as f64;
    let panel = (room.width_px - gap * (count - 1.0)) / count;
    let top = if room.narrow { 50.0 } else { 46.0 };
    let bottom = top + PITCH_PX * rows.len() as f64 + 14.0;
    let mut canvas = Canvas::new(room.id, room.width_px, bottom + 46.0);
    canvas.define_hatch("hatch", "red-hatch");
    legend(&mut canvas);
    for (place, &(side, name)) in sides.iter().enumerate() {
        let left = place as f64 * (panel + gap) + 10.0;
        let largest = axis::range_of(rows.iter().filter_map(|row| row.1[side].value_mas), 0.0).1;
        let right = left + panel - 52.0;
        let axis = Axis::linear((0.0, largest.max(1e-6)), left, right);
        canvas.text((left - 10.0, top - 12.0), Anchor::Start, "head", name);
        let ticks = if room.narrow { 2 } else { 5 };
        axis::draw_bottom(&mut canvas, &axis, (top, bottom), ticks, "sigma, mas");
        for (place, (_, bars)) in rows.iter().enumerate() {
            let y = row_top(top, place, terms) + 18.0;
            draw_bar(&mut canvas, &axis, (left, y), bars[side]);
        }
    }
    for (place, (label, _)) in rows.iter().enumerate() {
        let y = row_top(top, place, terms) + 12.0;
        if place == terms {
            canvas.line((0.0, y - 15.0), (room.width_px, y - 15.0), "fine");
        }
        let label = fitted(label, room.width_px - 14.0);
        canvas.text((14.0, y), Anchor::Start, "halo", &label);
    }
    canvas
}

/// Top of a row; the totals stand a little apart.
fn row_top(top: f64, place: usize, terms: usize) -> f64 {
    top + PITCH_PX * place as f64 + if place >= terms { 8.0 } else { 0.0 }
}

fn draw_bar(canvas: &mut Canvas, axis: &Axis, at: (f64, f64), bar: Bar) {
    let Some(value) = bar.value_mas.filter(|value| value.is_finite()) else {
        canvas.text(
            (at.0 + 2.0, at.1 + 10.0),
            Anchor::Start,
            "small halo",
            "no value",
        );
        return;
    };
    let end = axis.px(value).max(at.0 + 0.8);
    let size = (end - at.0, BAR_PX);
    match bar.kind {
        Kind::Random => canvas.rect(at, size, "blue-fill"),
        Kind::Systematic => {
            canvas.rect_with(at, size, "hatch");
            canvas.rect(at, size, "red-thin");
        }
        Kind::Total => canvas.rect(at, size, "ink-fill"),
    }
    let text = numbers::sigma(value);
    canvas.text((end + 5.0, at.1 + 10.0), Anchor::Start, "small halo", &text);
}

fn legend(canvas: &mut Canvas) {
    canvas.rect((0.0, 2.0), (22.0, BAR_PX), "blue-fill");
    canvas.text((28.0, 12.0), Anchor::Start, "small", "random");
    canvas.rect_with((90.0, 2.0), (22.0, BAR_PX), "hatch");
    canvas.rect((90.0, 2.0), (22.0, BAR_PX), "red-thin");
    canvas.text((118.0, 12.0), Anchor::Start, "small", "systematic");
    canvas.rect((200.0, 2.0), (22.0, BAR_PX), "ink-fill");
    canvas.text((228.0, 12.0), Anchor::Start, "small", "together");
}
