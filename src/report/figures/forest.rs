//! The forest plot of a comparison: every value on the common footing, each platform's mean, the mean
//! of all.

use super::{Plate, Room, Words};
use crate::report::axis::{self, Axis};
use crate::report::numbers;
use crate::report::svg::{Anchor, Canvas, fitted, polyline};
use crate::result::comparison::{Comparison, QuantityComparison};

/// Stem of the figure.
pub(crate) const STEM: &str = "forest";

/// From one row to the next.
const PITCH_PX: f64 = 34.0;

/// Above the first row of a panel.
const HEAD_PX: f64 = 26.0;

/// Below the last row: axis and its name.
const FOOT_PX: f64 = 62.0;

/// The figure; none without values.
pub(crate) fn plate(comparison: &Comparison) -> Option<Plate> {
    let words = Words {
        title: "Values on one footing",
        finding: finding(comparison),
        reading: "Thick lines are one standard uncertainty, thin ones two. Circles: ground; squares: \
                  balloon; diamonds: space; filled: results of this program. A grey ring is the same \
                  value by geometry alone, before the model of the limb. Lozenges are means, as wide as \
                  their 95 percent interval, cut at the frame; the band is that of the mean of all."
            .to_owned(),
        table: String::new(),
    };
    super::plate(STEM, super::WIDE_PX, words, |room| draw(comparison, room))
}

/// The mean of all, a quantity a sentence.
fn finding(comparison: &Comparison) -> String {
    let sentences = comparison.quantities.iter().filter_map(|it| {
        let all = it.consensus.last()?;
        let dark = all.dark_mas.map_or(String::new(), |it| {
            format!(", dark uncertainty {} mas", numbers::significant(it, 2))
        });
        Some(format!(
            "Mean {} of {}: {}{dark}.",
            it.quantity,
            numbers::plural(it.places.len(), "value"),
            numbers::quantity(&all.mean)?
        ))
    });
    sentences.collect::<Vec<_>>().join(" ")
}

/// One row of a panel.
struct Row {
    text: String,
    value: f64,
    /// One and two standard uncertainties, or the interval of a mean twice.
    spans: [[f64; 2]; 2],
    geometric: Option<f64>,
    mark: Mark,
}

/// What stands at a value.
enum Mark {
    Ground { own: bool },
    Balloon { own: bool },
    Space { own: bool },
    Mean,
}

fn rows(comparison: &Comparison, of: &QuantityComparison) -> Vec<Row> {
    let mut rows = Vec::new();
    for platform in &of.platforms {
        for &place in &platform.places {
            let it = &comparison.values[place];
            let common = &it.common;
            let own = it.kind == "result";
            let (value, sigma) = (common.value, common.sigma);
            let text = numbers::with_unit(&numbers::plus_minus(value, Some(sigma)), &common.unit);
            // What geometry alone gives is worth a mark only where the limb's model moved it.
            let moved = (common.value - common.geometric).abs() > 0.02 * sigma;
            rows.push(Row {
                text: format!("{}: {text}", it.label),
                value,
                spans: [
                    [value - sigma, value + sigma],
                    [value - 2.0 * sigma, value + 2.0 * sigma],
                ],
                geometric: moved.then_some(common.geometric),
                mark: match it.platform.as_str() {
                    "ground" => Mark::Ground { own },
                    "balloon" => Mark::Balloon { own },
                    _ => Mark::Space { own },
                },
            });
        }
        if platform.places.len() > 1 {
            let name = format!("mean, {}", platform.platform);
            rows.extend(mean_row(&name, &platform.consensus));
        }
    }
    if of.places.len() > 1
        && let Some(all) = of.consensus.last()
    {
        rows.extend(mean_row("mean of all", all));
    }
    rows
}

fn mean_row(name: &str, it: &crate::result::comparison::ConsensusRecord) -> Option<Row> {
    let (value, interval) = (it.mean.value?, it.interval_95?);
    let text = numbers::with_unit(&numbers::plus_minus(value, it.mean.sigma), &it.mean.unit);
    Some(Row {
        text: format!("{name}: {text}"),
        value,
        spans: [interval, interval],
        geometric: None,
        mark: Mark::Mean,
    })
}

fn draw(comparison: &Comparison, room: Room) -> Option<Canvas> {
    let panels: Vec<(&QuantityComparison, Vec<Row>)> = comparison
        .quantities
        .iter()
        .map(|it| (it, rows(comparison, it)))
        .filter(|it| !it.1.is_empty())
        .collect();
    if panels.is_empty() {
        return None;
    }
    let height_px: f64 = panels
        .iter()
        .map(|it| HEAD_PX + PITCH_PX * it.1.len() as f64 + FOOT_PX)
        .sum();
    let mut canvas = Canvas::new(room.id, room.width_px, height_px);
    let mut top_px = 0.0;
    for (quantity, rows) in &panels {
        panel(&mut canvas, quantity, rows, top_px, room);
        top_px += HEAD_PX + PITCH_PX * rows.len() as f64 + FOOT_PX;
    }
    Some(canvas)
}

fn panel(canvas: &mut Canvas, of: &QuantityComparison, rows: &[Row], top_px: f64, room: Room) {
    let (left, right) = (10.0, room.width_px - 10.0);
    let from = top_px + HEAD_PX;
    let bottom = from + PITCH_PX * rows.len() as f64;
    // Means of two values have intervals that would leave no room for the values.
    let ends = rows
        .iter()
        .filter(|it| !matches!(it.mark, Mark::Mean))
        .flat_map(|it| it.spans[1].into_iter().chain(it.geometric));
    let axis = Axis::linear(axis::range_of(ends, 0.04), left, right);
    let name = if of.quantity == "radius" {
        "Radius at 1 AU"
    } else {
        "Oblateness: equatorial minus polar radius at 1 AU"
    };
    canvas.text((left, top_px + 14.0), Anchor::Start, "head", name);
    if let Some([low, high]) = of.consensus.last().and_then(|it| it.interval_95)
        && of.places.len() > 1
    {
        let (low, high) = (axis.px_inside(low), axis.px_inside(high));
        canvas.rect((low, from), (high - low, bottom - from), "grey-tint");
    }
    let ticks = if room.narrow { 4 } else { 7 };
    axis::draw_bottom(canvas, &axis, (from, bottom), ticks, &of.unit);
    for (place, row) in rows.iter().enumerate() {
        let y = from + PITCH_PX * place as f64 + 25.0;
        let text = fitted(&row.text, right - left);
        canvas.text((left, y - 11.0), Anchor::Start, "halo", &text);
        mark(canvas, row, &axis, y);
    }
}

fn mark(canvas: &mut Canvas, row: &Row, axis: &Axis, y: f64) {
    let x = axis.px(row.value);
    let colour = match row.mark {
        Mark::Ground { .. } => "blue",
        Mark::Balloon { .. } => "green",
        Mark::Space { .. } => "purple",
        Mark::Mean => {
            let [low, high] = row.spans[0].map(|it| axis.px_inside(it));
            let mut path = polyline([(low, y), (x, y - 6.0), (high, y), (x, y + 6.0)]);
            path.push('Z');
            canvas.path(&path, "ink-fill");
            return;
        }
    };
    for (span, class) in [(row.spans[1], "thin"), (row.spans[0], "line")] {
        let [low, high] = span.map(|it| axis.px(it));
        canvas.line((low, y), (high, y), &format!("{colour}-{class}"));
    }
    if let Some(it) = row.geometric {
        canvas.circle((axis.px(it), y), 3.6, "grey-open");
    }
    let class = |own: bool| format!("{colour}-{}", if own { "mark" } else { "open" });
    match row.mark {
        Mark::Ground { own } => canvas.circle((x, y), 4.6, &class(own)),
        Mark::Balloon { own } => canvas.square((x, y), 4.2, &class(own)),
        Mark::Space { own } => canvas.diamond((x, y), 5.6, &class(own)),
        Mark::Mean => {}
    }
}
