//! Radius and second harmonic of each frame in time.

use super::{Plate, Room, Words};
use crate::report::axis::{self, Axis, thinned};
use crate::report::numbers;
use crate::report::svg::{Anchor, Canvas, dots, strokes};
use crate::report::timeline::Timeline;
use crate::result::record::{FrameTrace, Record, Traces};

/// Height of one plot.
const PLOT_PX: f64 = 104.0;

/// From one plot to the next.
const PITCH_PX: f64 = 140.0;

/// What a plot shows: its label and the value of a frame, mas.
type Row = (&'static str, fn(&FrameTrace) -> f64);

/// The plots from the top.
const ROWS: [Row; 3] = [
    ("radius minus the session's mean, mas at 1 AU", |frame| {
        frame.radius_mas
    }),
    ("cos 2θ on the detector, mas", |frame| frame.cos2_mas),
    ("sin 2θ on the detector, mas", |frame| frame.sin2_mas),
];

pub(super) fn plate(record: &Record, traces: &Traces) -> Option<Plate> {
    let scatter = |of: fn(&FrameTrace) -> f64| {
        let values: Vec<f64> = traces
            .frames
            .iter()
            .filter(|frame| frame.kept)
            .map(of)
            .filter(|v| v.is_finite())
            .collect();
        let mean = values.iter().sum::<f64>() / values.len() as f64;
        let square = values
            .iter()
            .map(|value| (value - mean).powi(2))
            .sum::<f64>();
        numbers::significant((square / values.len() as f64).sqrt(), 2)
    };
    let words = Words {
        title: "What the air does to single frames",
        finding: format!(
            "The kept frames scatter by {} mas in radius and by {} and {} mas in cos 2θ and sin 2θ: \
             that is what averaging has to beat down.",
            scatter(ROWS[0].1),
            scatter(ROWS[1].1),
            scatter(ROWS[2].1)
        ),
        reading: "Refraction is taken out of each frame; dots were kept, strokes set aside. The \
                  numbers are in the table of frames above."
            .to_owned(),
        table: String::new(),
    };
    super::plate("frames", super::WIDE_PX, words, |room| {
        draw(record, traces, room)
    })
}

fn draw(record: &Record, traces: &Traces, room: Room) -> Option<Canvas> {
    let (left, right) = (44.0, room.width_px - 6.0);
    let line = Timeline::new(record, traces, (left, right))?;
    let height = PITCH_PX * ROWS.len() as f64;
    let mut canvas = Canvas::new(room.id, room.width_px, height + 46.0);
    for (place, (label, value)) in ROWS.into_iter().enumerate() {
        let top = PITCH_PX * place as f64 + 26.0;
        let bottom = top + PLOT_PX;
        let range = axis::range_of(traces.frames.iter().map(value), 0.06);
        let axis = Axis::linear(range, bottom, top);
        canvas.text((0.0, top - 12.0), Anchor::Start, "label", label);
        line.draw_grounds(&mut canvas, (top, bottom));
        axis::draw_left(&mut canvas, &axis, (left, right), 4);
        let points = |kept: bool| {
            let frames = traces.frames.iter().filter(|frame| frame.kept == kept);
            let placed = frames.filter_map(|frame| {
                let x = line.px(frame.sequence, frame.time_s)?;
                value(frame).is_finite().then(|| (x, axis.px(value(frame))))
            });
            thinned(&placed.collect::<Vec<_>>())
        };
        canvas.path(&strokes(points(false)), "unkept");
        canvas.path(&dots(points(true)), "blue-dots");
    }
    let foot = PITCH_PX * (ROWS.len() - 1) as f64 + 26.0 + PLOT_PX;
    line.draw_labels(&mut canvas, foot);
    Some(canvas)
}
