//! The seeing in time, with the frames that were kept.

use super::{Plate, Room, Words};
use crate::report::axis::{self, Axis, thinned};
use crate::report::numbers;
use crate::report::sections::frame_table;
use crate::report::svg::{Anchor, Canvas, dots, strokes};
use crate::report::timeline::Timeline;
use crate::result::record::{FrameTrace, Record, Traces};

/// Height of the plot of r0.
const PLOT_PX: f64 = 210.0;

/// Height of the strip of kept shares.
const STRIP_PX: f64 = 34.0;

/// Width of one bin of the strip.
const BIN_PX: f64 = 9.0;

pub(super) fn plate(record: &Record, traces: &Traces) -> Option<Plate> {
    let kept = traces.frames.iter().filter(|frame| frame.kept).count();
    let total = traces.frames.len();
    let words = Words {
        title: "Sharpness in time, and the frames kept",
        finding: format!(
            "Of {} measured frames {} were kept, {} percent.{}",
            numbers::count(total),
            numbers::count(kept),
            numbers::percent(kept as f64 / total as f64),
            match traces.frames.iter().filter(|it| is_off(it)).count() {
                0 => String::new(),
                off => format!(
                    " {} were sharper than the pixels can tell and stand at the upper edge.",
                    numbers::count(off)
                ),
            }
        ),
        reading:
            "Above: Fried's parameter from the width of each frame's limb, towards the Sun at \
                  500 nm; the line and band are the session's own value, from the limb's \
                  motion. Below: the mean weight of the frames along the same time, none where a \
                  frame was set aside. Time runs to the right; gaps between sequences are closed \
                  up."
            .to_owned(),
        table: frame_table(traces),
    };
    super::plate("seeing", super::WIDE_PX, words, |room| {
        draw(record, traces, room)
    })
}

/// Whether the width of a frame's limb gives no value: it is narrower than the pixels can tell.
fn is_off(frame: &FrameTrace) -> bool {
    !frame.r0_blur_m.is_finite()
}

fn draw(record: &Record, traces: &Traces, room: Room) -> Option<Canvas> {
    let (left, right) = (34.0, room.width_px - 6.0);
    let line = Timeline::new(record, traces, (left, right))?;
    let top = if room.narrow { 44.0 } else { 26.0 };
    let bottom = top + PLOT_PX;
    let strip = bottom + 38.0;
    let mut canvas = Canvas::new(room.id, room.width_px, strip + STRIP_PX + 58.0);
    let top_cm = traces.frames.iter().map(|frame| frame.r0_blur_m * 100.0);
    let high_cm = axis::range_of(top_cm, 0.0).1;
    let axis = Axis::linear((0.0, 1.06 * high_cm.max(0.1)), bottom, top);
    canvas.text(
        (0.0, 12.0),
        Anchor::Start,
        "label",
        "r0 towards the Sun at 500 nm, cm",
    );
    legend(&mut canvas, room);
    line.draw_grounds(&mut canvas, (top, bottom));
    axis::draw_left(&mut canvas, &axis, (left, right), 5);
    if let Some(value_m) = record
        .seeing
        .line_of_sight
        .value
        .filter(|value| value.is_finite())
    {
        let y = axis.px_inside(100.0 * value_m);
        if let Some(sigma_m) = record.seeing.line_of_sight.sigma {
            let high = axis.px_inside(100.0 * (value_m + sigma_m));
            let low = axis.px_inside(100.0 * (value_m - sigma_m));
            canvas.rect((left, high), (right - left, low - high), "red-tint");
        }
        canvas.line((left, y), (right, y), "red-dash");
    }
    let place = |frame: &FrameTrace| {
        let x = line.px(frame.sequence, frame.time_s)?;
        let y = if is_off(frame) {
            top
        } else {
            axis.px(frame.r0_blur_m * 100.0)
        };
        Some((x, y))
    };
    let chosen = |kept: bool| {
        let frames = traces.frames.iter().filter(move |frame| frame.kept == kept);
        thinned(&frames.filter_map(place).collect::<Vec<_>>())
    };
    canvas.path(&strokes(chosen(false)), "unkept");
    canvas.path(&dots(chosen(true)), "blue-dots");
    let highest = draw_strip(&mut canvas, &line, traces, strip);
    for (share, name) in [
        (1.0, numbers::significant(highest, 2)),
        (0.0, "0".to_owned()),
    ] {
        let y = strip + STRIP_PX * (1.0 - share);
        canvas.text((left - 4.0, y + 4.0), Anchor::End, "cap", &name);
    }
    canvas.text(
        (0.0, strip - 10.0),
        Anchor::Start,
        "label",
        "mean weight in the answer, 1 for a frame of the session's mean",
    );
    line.draw_labels(&mut canvas, strip + STRIP_PX);
    Some(canvas)
}

fn legend(canvas: &mut Canvas, room: Room) {
    let left = if room.narrow { 0.0 } else { 330.0 };
    let y = if room.narrow { 31.0 } else { 12.0 };
    canvas.path(&dots([(left + 4.0, y - 4.0)]), "blue-dots");
    canvas.text((left + 12.0, y), Anchor::Start, "small", "kept");
    canvas.path(&strokes([(left + 58.0, y - 4.0)]), "unkept");
    canvas.text((left + 66.0, y), Anchor::Start, "small", "set aside");
    canvas.line((left + 140.0, y - 4.0), (left + 162.0, y - 4.0), "red-dash");
    canvas.text((left + 168.0, y), Anchor::Start, "small", "session ± sigma");
}

/// Mean weight of the frames along time, nothing for those set aside; the weight at the top of the
/// strip.
fn draw_strip(canvas: &mut Canvas, line: &Timeline, traces: &Traces, top: f64) -> f64 {
    line.draw_grounds(canvas, (top, top + STRIP_PX));
    let mut bars = Vec::new();
    for panel in &line.panels {
        let width = panel.right_px - panel.left_px;
        let bins = (width / BIN_PX).floor().max(1.0) as usize;
        let mut sums = vec![(0.0, 0usize); bins];
        let length_s = panel.to_s - panel.from_s;
        for frame in traces
            .frames
            .iter()
            .filter(|frame| frame.sequence == panel.sequence)
        {
            let share = if length_s > 0.0 {
                (frame.time_s - panel.from_s) / length_s
            } else {
                0.0
            };
            let bin = ((share * bins as f64) as usize).min(bins - 1);
            sums[bin].0 += if frame.kept { frame.weight } else { 0.0 };
            sums[bin].1 += 1;
        }
        let step = width / bins as f64;
        for (bin, (weight, all)) in sums.into_iter().enumerate().filter(|bin| bin.1.1 > 0) {
            bars.push((
                panel.left_px + step * bin as f64,
                step - 1.0,
                weight / all as f64,
            ));
        }
    }
    let highest = bars.iter().map(|it| it.2).fold(1.0, f64::max);
    for (x, width, weight) in bars {
        let height = STRIP_PX * weight / highest;
        canvas.rect((x, top + STRIP_PX - height), (width, height), "blue-fill");
    }
    highest
}
