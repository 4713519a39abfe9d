//! The stacked disk with the limb's residuals around it, magnified.

use super::{Plate, Room, Words, ring_marks as marks};
use crate::report::axis::round_step;
use crate::report::html::{Column, Table};
use crate::report::numbers;
use crate::report::preview::Preview;
use crate::report::svg::{Canvas, dots, polyline};
use crate::result::record::{LimbTrace, Record, Traces};

/// File stem.
pub(super) const STEM: &str = "limb";

/// Natural width on wide screens.
const WIDTH_PX: f64 = 490.0;

/// Points above which errors are drawn as a band.
pub(super) const BARS_MAX: usize = 120;

pub(super) fn plate(record: &Record, traces: &Traces, preview: Option<&Preview>) -> Option<Plate> {
    let limb = &traces.limb;
    let words = Words {
        title: "The limb about a circle",
        finding: finding(limb, preview.is_some()),
        reading:
            "Solar north is up and east to the left, as on the sky; the ring shows the radius \
                  minus the fitted circle at 1 AU, instrument and air taken out, outwards where \
                  the limb stands out. Angles are position angles from celestial north through \
                  east."
                .to_owned(),
        table: table(limb),
    };
    super::plate(STEM, WIDTH_PX, words, |room| {
        draw(record, limb, preview, room)
    })
}

fn finding(limb: &LimbTrace, pictured: bool) -> String {
    let ground = if pictured {
        "The stacked disk"
    } else {
        "The disk (no picture was kept)"
    };
    let count = limb.residual_mas.len();
    if count == 0 {
        return format!("{ground}; no mean limb was measured.");
    }
    let rms = |values: &[f64]| {
        let finite = || values.iter().filter(|value| value.is_finite());
        (finite().map(|value| value * value).sum::<f64>() / finite().count() as f64).sqrt()
    };
    format!(
        "{ground}, and around it the mean limb in {count} sectors: the residuals have an rms of {} \
         mas, their errors one of {} mas.",
        numbers::significant(rms(&limb.residual_mas), 2),
        numbers::significant(rms(&limb.sigma_mas), 2)
    )
}

fn table(limb: &LimbTrace) -> String {
    let mut table = Table::new(
        "Mean limb about the fitted circle",
        &[
            Column::Number("Position angle, deg"),
            Column::Number("Residual, mas"),
            Column::Number("Sigma, mas"),
            Column::Number("Fitted shape, mas"),
        ],
    );
    for place in 0..limb.position_angle_deg.len() {
        let sigma = limb.sigma_mas[place];
        table.row([
            numbers::significant(limb.position_angle_deg[place], 5),
            numbers::beside(limb.residual_mas[place], Some(sigma)),
            numbers::beside(sigma, Some(sigma)),
            numbers::beside(limb.model_mas[place], Some(sigma)),
        ]);
    }
    table.folded("Numbers behind the ring")
}

/// Polar layout of the drawing.
pub(super) struct Ring {
    pub(super) centre: (f64, f64),
    pub(super) disk_px: f64,
    pub(super) zero_px: f64,
    pub(super) px_per_mas: f64,
    pub(super) axis_deg: f64,
}

impl Ring {
    /// A point at an angle counter-clockwise from the top, degrees.
    pub(super) fn at(&self, up_deg: f64, radius_px: f64) -> (f64, f64) {
        let angle_rad = up_deg.to_radians();
        (
            self.centre.0 - radius_px * angle_rad.sin(),
            self.centre.1 - radius_px * angle_rad.cos(),
        )
    }

    /// A point of the magnified limb.
    fn limb(&self, position_angle_deg: f64, residual_mas: f64) -> (f64, f64) {
        self.at(
            position_angle_deg - self.axis_deg,
            self.zero_px + residual_mas * self.px_per_mas,
        )
    }
}

fn draw(
    record: &Record,
    limb: &LimbTrace,
    preview: Option<&Preview>,
    room: Room,
) -> Option<Canvas> {
    let width = room.width_px;
    let (side_px, top_px) = if room.narrow {
        (34.0, 26.0)
    } else {
        (48.0, 26.0)
    };
    let outer = 0.5 * width - side_px;
    let half = 0.165 * outer;
    let reach_mas = reach(limb)?;
    let axis_deg = if limb.axis_deg.is_finite() {
        limb.axis_deg
    } else {
        0.0
    };
    let ring = Ring {
        centre: (0.5 * width, top_px + outer),
        disk_px: 0.6 * outer,
        zero_px: outer - half,
        px_per_mas: half / reach_mas,
        axis_deg,
    };
    let mut canvas = Canvas::new(room.id, width, 2.0 * (outer + top_px) + 46.0);
    draw_disk(&mut canvas, &ring, preview);
    let step_mas = step(reach_mas);
    marks::draw_rings(&mut canvas, &ring, step_mas, reach_mas);
    draw_limb(&mut canvas, &ring, limb);
    marks::draw_directions(&mut canvas, &ring, limb, outer, room.narrow);
    marks::draw_scale(&mut canvas, &ring, step_mas, reach_mas);
    marks::draw_legend(&mut canvas, &ring, record, limb, room.narrow);
    Some(canvas)
}

/// The largest round step that fits between the circle and the edge of the ring.
fn step(reach_mas: f64) -> f64 {
    let steps = (1..=3).map(|parts| round_step(reach_mas, parts));
    steps
        .into_iter()
        .find(|step_mas| *step_mas <= reach_mas)
        .unwrap_or(reach_mas)
}

/// Half the height of the ring, mas: the largest of what is drawn, with some room.
fn reach(limb: &LimbTrace) -> Option<f64> {
    let mut ends: Vec<f64> = (0..limb.residual_mas.len())
        .map(|k| {
            (limb.residual_mas[k].abs() + limb.sigma_mas[k].abs()).max(limb.model_mas[k].abs())
        })
        .filter(|end| end.is_finite())
        .collect();
    ends.sort_by(f64::total_cmp);
    let largest = *ends.last()?;
    Some(if largest > 0.0 { 1.06 * largest } else { 1.0 })
}

fn draw_disk(canvas: &mut Canvas, ring: &Ring, preview: Option<&Preview>) {
    match preview {
        Some(preview) => canvas.raw(&preview.placed(ring.centre, ring.disk_px)),
        None => canvas.circle(ring.centre, ring.disk_px, "open"),
    }
    // The solar axis: drawn beyond both poles, so that it never hides the disk.
    for up_deg in [0.0, 180.0] {
        let (from, to) = (
            ring.at(up_deg, 0.9 * ring.disk_px),
            ring.at(up_deg, ring.zero_px),
        );
        canvas.line(from, to, "axis");
    }
}

fn draw_limb(canvas: &mut Canvas, ring: &Ring, limb: &LimbTrace) {
    let mut order: Vec<usize> = (0..limb.position_angle_deg.len())
        .filter(|&k| {
            limb.position_angle_deg[k].is_finite()
                && limb.residual_mas[k].is_finite()
                && limb.sigma_mas[k].is_finite()
        })
        .collect();
    order.sort_by(|&a, &b| limb.position_angle_deg[a].total_cmp(&limb.position_angle_deg[b]));
    let edge = |sign: f64| {
        order.iter().map(move |&k| {
            let value_mas = limb.residual_mas[k] + sign * limb.sigma_mas[k];
            ring.limb(limb.position_angle_deg[k], value_mas)
        })
    };
    if order.len() > BARS_MAX {
        let mut band = polyline(edge(1.0));
        band.push('Z');
        band.push_str(&polyline(edge(-1.0).rev()));
        band.push('Z');
        canvas.path(&band, "blue-tint");
    } else {
        let bars: String = edge(1.0)
            .zip(edge(-1.0))
            .map(|(high, low)| polyline([low, high]))
            .collect();
        canvas.path(&bars, "blue-thin");
    }
    let points = order
        .iter()
        .map(|&k| ring.limb(limb.position_angle_deg[k], limb.residual_mas[k]));
    canvas.path(&dots(points), "blue-bold");
    let model = order
        .iter()
        .filter(|&&k| limb.model_mas[k].is_finite())
        .map(|&k| ring.limb(limb.position_angle_deg[k], limb.model_mas[k]));
    let mut path = polyline(model);
    if !path.is_empty() {
        path.push('Z');
        canvas.path(&path, "red-line");
    }
}
