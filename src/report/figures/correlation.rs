//! Correlations of the fitted terms as a map.

use super::{Plate, Room, Words};
use crate::report::html::{Column, Table};
use crate::report::numbers;
use crate::report::svg::{Anchor, Canvas, fitted};
use crate::result::record::{Covariance, Record};

/// Largest number of terms that a map can show.
const TERMS_MAX: usize = 24;

pub(super) fn plate(record: &Record) -> Option<Plate> {
    let covariance = &record.shape.covariance;
    let finding = strongest(covariance).map_or_else(
        || "No two terms could be compared.".to_owned(),
        |(a, b, value)| {
            format!(
                "The strongest correlation is {} between {} and {}.",
                numbers::fixed(value, 2),
                covariance.terms[a],
                covariance.terms[b]
            )
        },
    );
    let words = Words {
        title: "Correlations of the fitted terms",
        finding,
        reading: "Blue is positive, orange negative, deeper is stronger; numbers are tenths where \
                  they fit. The covariance itself is in the table."
            .to_owned(),
        table: table(covariance),
    };
    super::plate("correlation", super::WIDE_PX, words, |room| {
        draw(covariance, room)
    })
}

/// The correlation of two terms, where both have a variance.
fn correlation(covariance: &Covariance, a: usize, b: usize) -> Option<f64> {
    let of = |a: usize, b: usize| covariance.matrix.get(a)?.get(b).copied();
    let value = of(a, b)? / (of(a, a)? * of(b, b)?).sqrt();
    value.is_finite().then_some(value)
}

fn strongest(covariance: &Covariance) -> Option<(usize, usize, f64)> {
    let count = covariance.terms.len();
    (0..count)
        .flat_map(|a| (0..a).map(move |b| (b, a)))
        .filter_map(|(a, b)| Some((a, b, correlation(covariance, a, b)?)))
        .max_by(|x, y| x.2.abs().total_cmp(&y.2.abs()))
}

fn table(covariance: &Covariance) -> String {
    let mut columns = vec![Column::Text("Term"), Column::Text("Unit")];
    columns.extend((1..=covariance.terms.len()).map(Column::OfRow));
    let mut table = Table::new(
        "Covariance of the fitted terms, in products of their units; columns by the number of the term",
        &columns,
    );
    for (place, term) in covariance.terms.iter().enumerate() {
        let mut row = vec![
            format!("{}  {term}", place + 1),
            covariance.units.get(place).cloned().unwrap_or_default(),
        ];
        let values = covariance.matrix.get(place).map_or(&[][..], Vec::as_slice);
        row.extend(values.iter().map(|value| numbers::significant(*value, 3)));
        table.row(row);
    }
    table.folded("Covariance")
}

fn draw(covariance: &Covariance, room: Room) -> Option<Canvas> {
    let count = covariance.terms.len();
    if count == 0 || count > TERMS_MAX {
        return None;
    }
    let labels = if room.narrow { 124.0 } else { 230.0 };
    let size = ((room.width_px - labels) / count as f64).min(36.0);
    let top = 22.0;
    let mut canvas = Canvas::new(room.id, room.width_px, top + size * count as f64 + 6.0);
    for (row, term) in covariance.terms.iter().enumerate() {
        let y = top + size * row as f64;
        let text = format!("{}  {term}", row + 1);
        let text = fitted(&text, labels - 8.0);
        let class = if room.narrow { "cap" } else { "" };
        canvas.text((0.0, y + 0.5 * size + 4.0), Anchor::Start, class, &text);
        let x = labels + size * (row as f64 + 0.5);
        canvas.text(
            (x, top - 7.0),
            Anchor::Middle,
            "tick",
            &(row + 1).to_string(),
        );
        for column in 0..count {
            let corner = (labels + size * column as f64, y);
            draw_cell(
                &mut canvas,
                corner,
                size,
                correlation(covariance, row, column),
            );
        }
    }
    Some(canvas)
}

fn draw_cell(canvas: &mut Canvas, corner: (f64, f64), size: f64, value: Option<f64>) {
    let inner = (size - 1.5, size - 1.5);
    canvas.rect(corner, inner, "panel");
    let Some(value) = value else {
        return;
    };
    let class = if value > 0.0 { "blue-fill" } else { "red-fill" };
    // At most 0.6, so that the number on it stays legible in light and dark.
    canvas.cell(corner, inner, class, 0.6 * value.abs().min(1.0));
    if size >= 26.0 && value.abs() >= 0.05 {
        let at = (corner.0 + 0.5 * inner.0, corner.1 + 0.5 * inner.1 + 4.0);
        canvas.text(at, Anchor::Middle, "cap", &numbers::fixed(value, 1));
    }
}
