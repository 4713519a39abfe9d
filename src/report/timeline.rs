//! A time axis with the gaps between sequences closed up.
//!
//! Sequences last minutes and lie hours apart. Each gets a panel as wide as it is long; between
//! panels stands a narrow gap. Clock times come from the record's own UTC texts.

use super::axis::round_step;
use super::svg::{Anchor, Canvas};
use crate::result::record::{Record, Traces};

/// One sequence on the axis.
#[derive(Clone, Debug)]
pub(crate) struct Panel {
    /// Index of the sequence.
    pub(crate) sequence: usize,
    /// First frame, seconds after the first frame of the session.
    pub(crate) from_s: f64,
    /// Last frame.
    pub(crate) to_s: f64,
    /// Left edge.
    pub(crate) left_px: f64,
    /// Right edge.
    pub(crate) right_px: f64,
    start_of_day_s: Option<f64>,
    roll_deg: Option<f64>,
}

/// All sequences on the axis, in the order of time.
#[derive(Clone, Debug)]
pub(crate) struct Timeline {
    /// The panels.
    pub(crate) panels: Vec<Panel>,
}

/// Seconds of the day in a text such as `2026-06-21T09:12:30.5`.
fn seconds_of_day(utc: &str) -> Option<f64> {
    let (_, clock) = utc.split_once(['T', ' '])?;
    let mut parts = clock.trim_end_matches('Z').split(':');
    let hours: f64 = parts.next()?.parse().ok()?;
    let minutes: f64 = parts.next()?.parse().ok()?;
    let seconds: f64 = parts.next().unwrap_or("0").parse().ok()?;
    Some(3600.0 * hours + 60.0 * minutes + seconds)
}

/// A clock time, with seconds where the step asks for them.
fn clock(seconds: f64, with_seconds: bool) -> String {
    let whole = seconds.round() as i64;
    let (h, m, s) = (whole / 3600 % 24, whole / 60 % 60, whole % 60);
    if with_seconds {
        format!("{h:02}:{m:02}:{s:02}")
    } else {
        format!("{h:02}:{m:02}")
    }
}

impl Timeline {
    /// Lays the sequences out between two edges. `None` without frames.
    pub(crate) fn new(record: &Record, traces: &Traces, edges_px: (f64, f64)) -> Option<Self> {
        let mut spans: Vec<(usize, f64, f64)> = Vec::new();
        for frame in traces
            .frames
            .iter()
            .filter(|frame| frame.time_s.is_finite())
        {
            match spans.iter_mut().rev().find(|span| span.0 == frame.sequence) {
                Some(span) => {
                    span.1 = span.1.min(frame.time_s);
                    span.2 = span.2.max(frame.time_s);
                }
                None => spans.push((frame.sequence, frame.time_s, frame.time_s)),
            }
        }
        spans.sort_by(|a, b| a.1.total_cmp(&b.1).then(a.0.cmp(&b.0)));
        if spans.is_empty() {
            return None;
        }
        let width_px = edges_px.1 - edges_px.0;
        let gap_px = (0.25 * width_px / spans.len() as f64).min(10.0);
        let total_s: f64 = spans.iter().map(|span| span.2 - span.1).sum();
        let least_s = if total_s > 0.0 { 0.02 * total_s } else { 1.0 };
        let length = |span: &(usize, f64, f64)| (span.2 - span.1).max(least_s);
        let lengths_s: f64 = spans.iter().map(length).sum();
        let px_per_s = (width_px - gap_px * (spans.len() - 1) as f64) / lengths_s;
        let mut left_px = edges_px.0;
        let mut panels = Vec::with_capacity(spans.len());
        for span in &spans {
            let right_px = left_px + length(span) * px_per_s;
            let known = record
                .sequences
                .iter()
                .find(|known| known.sequence == span.0);
            panels.push(Panel {
                sequence: span.0,
                from_s: span.1,
                to_s: span.2,
                left_px,
                right_px,
                start_of_day_s: known.and_then(|known| seconds_of_day(&known.time_utc[0])),
                roll_deg: known
                    .map(|known| known.roll_deg)
                    .filter(|roll| roll.is_finite()),
            });
            left_px = right_px + gap_px;
        }
        Some(Self { panels })
    }

    /// Where a frame lies, a little inside its panel.
    pub(crate) fn px(&self, sequence: usize, time_s: f64) -> Option<f64> {
        let panel = self
            .panels
            .iter()
            .find(|panel| panel.sequence == sequence)?;
        Some(panel.px(time_s))
    }

    /// Draws the panels' grounds.
    pub(crate) fn draw_grounds(&self, canvas: &mut Canvas, span_px: (f64, f64)) {
        for panel in &self.panels {
            canvas.rect(
                (panel.left_px, span_px.0),
                (panel.right_px - panel.left_px, span_px.1 - span_px.0),
                "panel",
            );
        }
    }

    /// Writes clock times and rolls under the panels, as many as find room.
    pub(crate) fn draw_labels(&self, canvas: &mut Canvas, y_px: f64) {
        let mut free_from_px = f64::NEG_INFINITY;
        for panel in &self.panels {
            let width_px = panel.right_px - panel.left_px;
            if let Some(start_s) = panel.start_of_day_s
                && width_px > 190.0
                && panel.to_s > panel.from_s
            {
                let step_s = clock_step_s((panel.to_s - panel.from_s) * 85.0 / width_px);
                let mut time_s = (start_s / step_s).ceil() * step_s;
                while time_s <= start_s + panel.to_s - panel.from_s {
                    let x = panel.px(panel.from_s + time_s - start_s);
                    canvas.line((x, y_px), (x, y_px + 4.0), "fine");
                    if x - 30.0 > free_from_px {
                        let text = clock(time_s, step_s < 60.0);
                        // The last label must not run over the edge of the picture.
                        let (at, anchor) = if x + 26.0 > panel.right_px {
                            (panel.right_px, Anchor::End)
                        } else {
                            (x, Anchor::Middle)
                        };
                        canvas.text((at, y_px + 17.0), anchor, "tick", &text);
                        free_from_px = x + 30.0;
                    }
                    time_s += step_s;
                }
            } else if panel.left_px > free_from_px {
                canvas.line((panel.left_px, y_px), (panel.left_px, y_px + 4.0), "fine");
                let text = panel
                    .start_of_day_s
                    .map_or_else(|| format!("#{}", panel.sequence), |time| clock(time, false));
                canvas.text((panel.left_px, y_px + 17.0), Anchor::Start, "tick", &text);
                if let Some(roll_deg) = panel.roll_deg {
                    let roll = format!("{}°", super::numbers::significant(roll_deg, 3));
                    canvas.text((panel.left_px, y_px + 31.0), Anchor::Start, "tick", &roll);
                }
                free_from_px = panel.left_px + 40.0;
            }
        }
        let (Some(first), Some(last)) = (self.panels.first(), self.panels.last()) else {
            return;
        };
        let alone = self.panels.len() == 1;
        let label = if alone {
            "time, UTC"
        } else {
            "start of each sequence, UTC, and its roll"
        };
        let middle = 0.5 * (first.left_px + last.right_px);
        canvas.text((middle, y_px + 50.0), Anchor::Middle, "label", label);
    }
}

impl Panel {
    /// Where a time of this panel lies.
    fn px(&self, time_s: f64) -> f64 {
        let inset_px = (0.1 * (self.right_px - self.left_px)).min(3.0);
        let length_s = self.to_s - self.from_s;
        let share = if length_s > 0.0 {
            (time_s - self.from_s) / length_s
        } else {
            0.5
        };
        self.left_px + inset_px + share * (self.right_px - self.left_px - 2.0 * inset_px)
    }
}

/// A step that a clock shows well, at least as long as asked for.
fn clock_step_s(least_s: f64) -> f64 {
    const STEPS_S: [f64; 13] = [
        1.0, 2.0, 5.0, 10.0, 20.0, 60.0, 120.0, 300.0, 600.0, 1200.0, 1800.0, 3600.0, 7200.0,
    ];
    let known = STEPS_S.into_iter().find(|step| *step >= least_s);
    known.unwrap_or_else(|| 3600.0 * round_step(least_s / 3600.0, 1))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn clocks_are_read_and_written() {
        assert_eq!(seconds_of_day("2026-06-21T09:12:30.5"), Some(33150.5));
        assert_eq!(seconds_of_day("2026-06-21T23:59:60Z"), Some(86400.0));
        assert_eq!(seconds_of_day("noon"), None);
        assert_eq!(clock(33150.4, false), "09:12");
        assert_eq!(clock(86400.0 + 61.0, true), "00:01:01");
    }
}
