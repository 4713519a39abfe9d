//! Axes: a scale from values to pixels, round ticks, and the frame around a plot.

use super::numbers;
use super::svg::{Anchor, Canvas};

/// Largest number of points drawn of one series.
pub(crate) const POINTS_MAX: usize = 2000;

/// A scale from values to pixels.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Axis {
    low: f64,
    high: f64,
    from_px: f64,
    to_px: f64,
    logarithmic: bool,
}

impl Axis {
    /// A linear scale.
    pub(crate) fn linear(range: (f64, f64), from_px: f64, to_px: f64) -> Self {
        Self {
            low: range.0,
            high: range.1,
            from_px,
            to_px,
            logarithmic: false,
        }
    }

    /// A logarithmic scale; both ends must be positive.
    pub(crate) fn logarithmic(range: (f64, f64), from_px: f64, to_px: f64) -> Self {
        Self {
            low: range.0.log10(),
            high: range.1.log10(),
            from_px,
            to_px,
            logarithmic: true,
        }
    }

    /// Where a value lies.
    pub(crate) fn px(&self, value: f64) -> f64 {
        let value = if self.logarithmic {
            value.log10()
        } else {
            value
        };
        self.from_px + (value - self.low) / (self.high - self.low) * (self.to_px - self.from_px)
    }

    /// Where a value lies, held inside the plot.
    pub(crate) fn px_inside(&self, value: f64) -> f64 {
        let (low_px, high_px) = (self.from_px.min(self.to_px), self.from_px.max(self.to_px));
        self.px(value).clamp(low_px, high_px)
    }

    /// Round values with their labels, about `target` of them.
    pub(crate) fn ticks(&self, target: usize) -> Vec<(f64, String)> {
        if self.logarithmic {
            return self.log_ticks(target);
        }
        let step = round_step(self.high - self.low, target);
        let decimals = (-step.log10().floor()).max(0.0) as i32;
        let first = (self.low / step - 1e-9).ceil() as i64;
        let last = (self.high / step + 1e-9).floor() as i64;
        (first..=last)
            .map(|place| {
                let value = place as f64 * step;
                (value, numbers::fixed(value, decimals))
            })
            .collect()
    }

    /// Decades, every so many, and 2 and 5 between them where there are few.
    fn log_ticks(&self, target: usize) -> Vec<(f64, String)> {
        let decades = self.high - self.low;
        let every = (decades / target.max(1) as f64).ceil().max(1.0) as i32;
        let mantissas: &[f64] = if decades < 2.5 {
            &[1.0, 2.0, 5.0]
        } else {
            &[1.0]
        };
        let mut ticks = Vec::new();
        for decade in (self.low.floor() as i32)..=(self.high.ceil() as i32) {
            if decade.rem_euclid(every) != 0 {
                continue;
            }
            for mantissa in mantissas {
                let value = mantissa * 10f64.powi(decade);
                let place = value.log10();
                if place < self.low - 1e-9 || place > self.high + 1e-9 {
                    continue;
                }
                let label = if (-3..=4).contains(&decade) || mantissas.len() > 1 {
                    numbers::significant(value, 3)
                } else {
                    numbers::power_of_ten(decade)
                };
                ticks.push((value, label));
            }
        }
        ticks
    }
}

/// A round step that cuts `span` into about `target` parts: 1, 2 or 5 times a power of ten.
pub(crate) fn round_step(span: f64, target: usize) -> f64 {
    let raw = span / target.max(1) as f64;
    let unit = 10f64.powf(raw.log10().floor());
    let step = [1.0, 2.0, 5.0, 10.0]
        .into_iter()
        .find(|step| step * unit >= raw * 0.999);
    step.unwrap_or(10.0) * unit
}

/// The range of the finite values, widened by a share of itself; never empty.
pub(crate) fn range_of(values: impl IntoIterator<Item = f64>, margin: f64) -> (f64, f64) {
    let (low, high) = values
        .into_iter()
        .filter(|value| value.is_finite())
        .fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), value| {
            (low.min(value), high.max(value))
        });
    if low > high {
        return (0.0, 1.0);
    }
    let span = high - low;
    if span <= 0.0 {
        let half = if low == 0.0 { 1.0 } else { low.abs() * 0.1 };
        return (low - half, high + half);
    }
    (low - margin * span, high + margin * span)
}

/// At most [`POINTS_MAX`] of the points: the lowest and the highest of each run of equal length.
pub(crate) fn thinned(points: &[(f64, f64)]) -> Vec<(f64, f64)> {
    if points.len() <= POINTS_MAX {
        return points.to_vec();
    }
    let bins = POINTS_MAX / 2;
    let mut kept = Vec::with_capacity(POINTS_MAX);
    for bin in 0..bins {
        let run = &points[bin * points.len() / bins..(bin + 1) * points.len() / bins];
        let low = (0..run.len()).min_by(|&a, &b| run[a].1.total_cmp(&run[b].1));
        let high = (0..run.len()).max_by(|&a, &b| run[a].1.total_cmp(&run[b].1));
        if let (Some(low), Some(high)) = (low, high) {
            kept.push(run[low.min(high)]);
            if low != high {
                kept.push(run[low.max(high)]);
            }
        }
    }
    kept
}

/// Draws the ruled lines and numbers of an upright axis at the left of a plot.
pub(crate) fn draw_left(canvas: &mut Canvas, axis: &Axis, span_px: (f64, f64), ticks: usize) {
    for (value, label) in axis.ticks(ticks) {
        let y = axis.px(value);
        let class = if value == 0.0 && !axis.logarithmic {
            "zero"
        } else {
            "grid"
        };
        canvas.line((span_px.0, y), (span_px.1, y), class);
        canvas.text((span_px.0 - 7.0, y + 4.0), Anchor::End, "tick", &label);
    }
}

/// Draws the ruled lines and numbers of a level axis below a plot, and what it shows.
pub(crate) fn draw_bottom(
    canvas: &mut Canvas,
    axis: &Axis,
    span_px: (f64, f64),
    ticks: usize,
    label: &str,
) {
    for (value, text) in axis.ticks(ticks) {
        let x = axis.px(value);
        let class = if value == 0.0 && !axis.logarithmic {
            "zero"
        } else {
            "grid"
        };
        canvas.line((x, span_px.0), (x, span_px.1), class);
        canvas.text((x, span_px.1 + 16.0), Anchor::Middle, "tick", &text);
    }
    let middle = 0.5 * (axis.from_px + axis.to_px);
    canvas.text((middle, span_px.1 + 35.0), Anchor::Middle, "label", label);
}

/// An upright error bar with its ends.
pub(crate) fn draw_error(canvas: &mut Canvas, x_px: f64, ends_px: (f64, f64), class: &str) {
    canvas.line((x_px, ends_px.0), (x_px, ends_px.1), class);
    canvas.line((x_px - 3.0, ends_px.0), (x_px + 3.0, ends_px.0), class);
    canvas.line((x_px - 3.0, ends_px.1), (x_px + 3.0, ends_px.1), class);
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn thinning_keeps_the_extremes() {
        let points: Vec<(f64, f64)> = (0..50_000)
            .map(|k| {
                (
                    f64::from(k),
                    if k == 12_345 { 99.0 } else { f64::from(k % 7) },
                )
            })
            .collect();
        let kept = thinned(&points);
        assert!(kept.len() <= POINTS_MAX);
        assert!(kept.contains(&(12_345.0, 99.0)));
        assert!(kept.is_sorted_by(|a, b| a.0 <= b.0));
    }

    #[test]
    fn ticks_are_round_and_inside() {
        let axis = Axis::linear((-13.0, 34.0), 0.0, 100.0);
        let labels: Vec<String> = axis.ticks(5).into_iter().map(|tick| tick.1).collect();
        assert_eq!(labels, ["-10", "0", "10", "20", "30"]);
        let axis = Axis::logarithmic((2e-7, 3.0), 0.0, 100.0);
        assert!(
            axis.ticks(5)
                .iter()
                .all(|tick| (0.0..=100.0).contains(&axis.px(tick.0)))
        );
    }
}
