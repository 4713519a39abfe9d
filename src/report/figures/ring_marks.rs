//! Marks of the ring: circles of equal radius, directions, legend.

use super::ring::{BARS_MAX, Ring};
use crate::report::numbers;
use crate::report::svg::{Anchor, Canvas, dots, polyline};
use crate::result::record::{LimbTrace, Record};

/// Angle at which the rings are labelled, counter-clockwise from the top, degrees.
const SCALE_DEG: f64 = 225.0;

pub(super) fn draw_rings(canvas: &mut Canvas, ring: &Ring, step_mas: f64, reach_mas: f64) {
    let places = (reach_mas / step_mas + 1e-9).floor() as i64;
    for place in -places..=places {
        let value_mas = place as f64 * step_mas;
        let class = if place == 0 { "zero" } else { "grid" };
        canvas.circle(
            ring.centre,
            ring.zero_px + value_mas * ring.px_per_mas,
            class,
        );
    }
}

/// Rings closer than this, px, would have their labels run into each other.
const LABEL_PX: f64 = 22.0;

/// Labels on the rings, over everything else: the outer ones and zero where all find no room.
pub(super) fn draw_scale(canvas: &mut Canvas, ring: &Ring, step_mas: f64, reach_mas: f64) {
    let places = (reach_mas / step_mas + 1e-9).floor() as i64;
    let decimals = (-step_mas.log10().floor()).max(0.0) as i32;
    let crowded = step_mas * ring.px_per_mas < LABEL_PX;
    for place in -places..=places {
        if crowded && place != 0 && place.abs() != places {
            continue;
        }
        let value_mas = place as f64 * step_mas;
        let (x, y) = ring.at(SCALE_DEG, ring.zero_px + value_mas * ring.px_per_mas);
        let sign = if place > 0 { "+" } else { "" };
        let label = format!("{sign}{}", numbers::fixed(value_mas, decimals));
        canvas.text((x, y + 4.0), Anchor::Middle, "cap halo", &label);
    }
}

/// Marks north, east, zenith and the axis outside the ring, labels held apart.
pub(super) fn draw_directions(
    canvas: &mut Canvas,
    ring: &Ring,
    limb: &LimbTrace,
    outer_px: f64,
    narrow: bool,
) {
    let mut marks = vec![
        (0.0, if narrow { "solar N" } else { "solar north" }, false),
        (-ring.axis_deg, if narrow { "N" } else { "north" }, true),
        (
            90.0 - ring.axis_deg,
            if narrow { "E" } else { "east" },
            true,
        ),
    ];
    if limb.zenith_deg.is_finite() {
        marks.push((limb.zenith_deg - ring.axis_deg, "zenith", true));
    }
    for mark in &mut marks {
        mark.0 = mark.0.rem_euclid(360.0);
    }
    marks.sort_by(|a, b| a.0.total_cmp(&b.0));
    let apart_deg = if narrow { 28.0 } else { 20.0 };
    let labels = spread(
        &marks.iter().map(|mark| mark.0).collect::<Vec<_>>(),
        apart_deg,
    );
    for ((up_deg, name, arrow), label_deg) in marks.into_iter().zip(labels) {
        let (tip, left, right) = (
            ring.at(up_deg, outer_px + 8.0),
            ring.at(up_deg - 1.4, outer_px - 1.0),
            ring.at(up_deg + 1.4, outer_px - 1.0),
        );
        if arrow {
            let start = ring.at(up_deg, 1.03 * ring.disk_px);
            canvas.line(start, ring.at(up_deg, outer_px), "fine");
        } else {
            canvas.line(ring.at(up_deg, ring.zero_px), tip, "axis");
        }
        let mut head = polyline([tip, left, right]);
        head.push('Z');
        canvas.path(&head, "ink-fill");
        let (x, y) = ring.at(label_deg, outer_px + 13.0);
        let across = label_deg.to_radians().sin();
        let anchor = if across > 0.35 {
            Anchor::End
        } else if across < -0.35 {
            Anchor::Start
        } else {
            Anchor::Middle
        };
        let drop = 4.0 - 5.0 * label_deg.to_radians().cos();
        canvas.text((x, y + drop), anchor, "head halo", name);
    }
}

/// Moves sorted angles apart until neighbours differ enough; the circle closes.
fn spread(angles_deg: &[f64], apart_deg: f64) -> Vec<f64> {
    let mut moved = angles_deg.to_vec();
    let count = moved.len();
    for _ in 0..60 {
        for here in 0..count {
            let next = (here + 1) % count;
            let turn = if next == 0 { 360.0 } else { 0.0 };
            let lack = apart_deg - (moved[next] + turn - moved[here]);
            if next != here && lack > 0.0 {
                moved[here] -= 0.5 * lack;
                moved[next] += 0.5 * lack;
            }
        }
    }
    moved
}

pub(super) fn draw_legend(
    canvas: &mut Canvas,
    ring: &Ring,
    record: &Record,
    limb: &LimbTrace,
    narrow: bool,
) {
    let y = canvas.height_px - 38.0;
    let left = if narrow {
        6.0
    } else {
        0.5 * canvas.width_px - 205.0
    };
    canvas.line((left, y - 4.0), (left + 18.0, y - 4.0), "blue-thin");
    canvas.path(&dots([(left + 9.0, y - 4.0)]), "blue-bold");
    let band = if limb.residual_mas.len() > BARS_MAX {
        "limb, ±1 sigma"
    } else {
        "limb ± sigma"
    };
    canvas.text((left + 24.0, y), Anchor::Start, "small", band);
    let second = left + if narrow { 118.0 } else { 150.0 };
    canvas.line((second, y - 4.0), (second + 18.0, y - 4.0), "red-line");
    canvas.text((second + 24.0, y), Anchor::Start, "small", "fitted shape");
    let third = second + if narrow { 112.0 } else { 135.0 };
    canvas.line((third, y - 4.0), (third + 18.0, y - 4.0), "axis");
    canvas.text(
        (third + 24.0, y),
        Anchor::Start,
        "small",
        if narrow { "axis" } else { "solar axis" },
    );
    let Some(radius_arcsec) = record.shape.radius.value.filter(|radius| *radius > 0.0) else {
        canvas.text(
            (0.5 * canvas.width_px, y + 22.0),
            Anchor::Middle,
            "small",
            "ring: radius minus circle, mas at 1 AU",
        );
        return;
    };
    let magnified = ring.px_per_mas / (ring.disk_px / (1000.0 * radius_arcsec));
    let text = format!(
        "ring: radius minus circle, mas at 1 AU, magnified {} times",
        numbers::count(magnified.round() as usize / 100 * 100)
    );
    let text = if narrow {
        text.replace("radius minus circle, ", "")
    } else {
        text
    };
    canvas.text(
        (0.5 * canvas.width_px, y + 22.0),
        Anchor::Middle,
        "small",
        &text,
    );
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn labels_are_held_apart() {
        let moved = spread(&[0.0, 3.0, 90.0, 358.0], 16.0);
        for k in 0..4 {
            let next = if k == 3 {
                moved[0] + 360.0
            } else {
                moved[k + 1]
            };
            assert!(next - moved[k] > 15.9, "{moved:?}");
        }
    }
}
