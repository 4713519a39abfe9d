//! Which pixels belong to which sector of the annulus, and where they lie about the disk's centre.
//!
//! The pixels are listed once a sequence, about a whole-pixel centre; a frame's own centre moves the
//! list by whole pixels and the rest is arithmetic, so that a frame costs no search and no angle.

use super::Extraction;
use ndarray::{Array2, ArrayView2};
use std::f64::consts::TAU;

/// Offsets of one sector's pixels from a whole-pixel centre.
#[derive(Clone, Debug, Default)]
struct Offsets {
    dx: Vec<i32>,
    dy: Vec<i32>,
    /// Detector angle about the whole-pixel centre, rad.
    theta: Vec<f32>,
}

/// The annulus about the limb, cut in equal sectors.
#[derive(Clone, Debug)]
pub struct Annulus {
    offsets: Vec<Offsets>,
    directions: Vec<(f64, f64)>,
    first_rad: f64,
    scale_arcsec_px: f64,
    inside_arcsec: f64,
    outside_arcsec: f64,
}

/// One sector's usable pixels of one frame.
#[derive(Clone, Debug, Default)]
pub struct Pixels {
    /// Distance from the predicted limb, arcsec, outward.
    pub x_arcsec: Vec<f64>,
    /// Dark-subtracted, flat-fielded value, ADU.
    pub value_adu: Vec<f64>,
    /// Inverse of the normalised flat there.
    pub flat_inverse: Vec<f64>,
    /// Pixels that the sector would have in an unlimited field without blemishes.
    pub expected: usize,
}

impl Annulus {
    /// Lists the pixels between `inside_arcsec` inside and `outside_arcsec` outside a limb whose
    /// radius runs from `smallest_arcsec` to `largest_arcsec`.
    pub fn new(
        sectors: usize,
        first_rad: f64,
        scale_arcsec_px: f64,
        (smallest_arcsec, largest_arcsec): (f64, f64),
        (inside_arcsec, outside_arcsec): (f64, f64),
    ) -> Self {
        let margin_px = 2.0;
        let low = (smallest_arcsec - inside_arcsec) / scale_arcsec_px - margin_px;
        let high = (largest_arcsec + outside_arcsec) / scale_arcsec_px + margin_px;
        let mut offsets = vec![Offsets::default(); sectors];
        let reach = high.ceil() as i32;
        let width_rad = TAU / sectors as f64;
        for dy in -reach..=reach {
            for dx in -reach..=reach {
                let r = f64::from(dx).hypot(f64::from(dy));
                if r < low || r > high {
                    continue;
                }
                let theta = f64::from(dy).atan2(f64::from(dx));
                let turn = (theta - first_rad) / width_rad + 0.5;
                let s = turn.floor().rem_euclid(sectors as f64) as usize;
                offsets[s].dx.push(dx);
                offsets[s].dy.push(dy);
                offsets[s].theta.push(theta as f32);
            }
        }
        let directions = (0..sectors)
            .map(|s| {
                let theta = first_rad + width_rad * s as f64;
                (theta.cos(), theta.sin())
            })
            .collect();
        Self {
            offsets,
            directions,
            first_rad,
            scale_arcsec_px,
            inside_arcsec,
            outside_arcsec,
        }
    }

    /// Every other pixel of a chequerboard: two halves whose noise is independent.
    #[must_use]
    pub fn half(&self, odd: bool) -> Self {
        let parity = i32::from(odd);
        let offsets = self
            .offsets
            .iter()
            .map(|it| {
                let kept: Vec<usize> = (0..it.dx.len())
                    .filter(|&k| (it.dx[k] + it.dy[k]).rem_euclid(2) == parity)
                    .collect();
                Offsets {
                    dx: kept.iter().map(|&k| it.dx[k]).collect(),
                    dy: kept.iter().map(|&k| it.dy[k]).collect(),
                    theta: kept.iter().map(|&k| it.theta[k]).collect(),
                }
            })
            .collect();
        Self {
            offsets,
            directions: self.directions.clone(),
            ..*self
        }
    }

    /// Number of sectors.
    pub fn sectors(&self) -> usize {
        self.offsets.len()
    }

    /// Angle of a sector's middle from +x towards +y, rad.
    pub fn angle_rad(&self, sector: usize) -> f64 {
        self.first_rad + TAU * sector as f64 / self.sectors() as f64
    }

    /// Cosine and sine of that angle.
    pub fn direction(&self, sector: usize) -> (f64, f64) {
        self.directions[sector]
    }

    /// Width of a sector, rad.
    pub fn sector_rad(&self) -> f64 {
        TAU / self.sectors() as f64
    }

    /// Plate scale, arcsec a pixel.
    pub fn scale_arcsec_px(&self) -> f64 {
        self.scale_arcsec_px
    }

    /// A frame made of `value(sector, distance from the predicted limb)` over the annulus, zero
    /// elsewhere, with the disk at `centre_px`: for working out what another model of the limb does.
    pub fn synthetic(
        &self,
        centre_px: (f64, f64),
        (height, width): (usize, usize),
        model_arcsec: &[f64],
        model_slope: &[f64],
        value: impl Fn(usize, f64) -> f64,
    ) -> Array2<f32> {
        let mut out = Array2::zeros((height, width));
        let (whole_x, whole_y) = (centre_px.0.round(), centre_px.1.round());
        let (ex, ey) = (centre_px.0 - whole_x, centre_px.1 - whole_y);
        for (s, offsets) in self.offsets.iter().enumerate() {
            let (ct, st) = self.directions[s];
            for (&dx, &dy) in offsets.dx.iter().zip(&offsets.dy) {
                let (vx, vy) = (f64::from(dx) - ex, f64::from(dy) - ey);
                let r = vx.hypot(vy);
                let along = (vy * ct - vx * st) / r;
                let x = r * self.scale_arcsec_px - model_arcsec[s] - model_slope[s] * along;
                let (px, py) = (
                    whole_x as i64 + i64::from(dx),
                    whole_y as i64 + i64::from(dy),
                );
                if px >= 0 && py >= 0 && px < width as i64 && py < height as i64 {
                    out[[py as usize, px as usize]] = value(s, x) as f32;
                }
            }
        }
        out
    }

    /// How far inside the limb the annulus begins, arcsec.
    pub fn inside_arcsec(&self) -> f64 {
        self.inside_arcsec
    }

    /// What a sector lacks with the disk at a centre: share of its pixels outside a field of
    /// `(height, width)`, share of them for which `bad` holds, and of these the share in the column or
    /// row that has most.
    pub fn lacks(
        &self,
        sector: usize,
        centre_px: (f64, f64),
        (height, width): (usize, usize),
        bad: impl Fn([usize; 2]) -> bool,
    ) -> (f64, f64, f64) {
        let (cx, cy) = (centre_px.0.round() as i64, centre_px.1.round() as i64);
        let offsets = &self.offsets[sector];
        let all = offsets.dx.len() as f64;
        let mut outside = 0.0;
        let mut at_bad: Vec<[usize; 2]> = Vec::new();
        for (&dx, &dy) in offsets.dx.iter().zip(&offsets.dy) {
            let (px, py) = (cx + i64::from(dx), cy + i64::from(dy));
            if px < 0 || py < 0 || px >= width as i64 || py >= height as i64 {
                outside += 1.0;
            } else if bad([py as usize, px as usize]) {
                at_bad.push([py as usize, px as usize]);
            }
        }
        let mut most = 0;
        for it in &at_bad {
            for axis in 0..2 {
                most = most.max(at_bad.iter().filter(|o| o[axis] == it[axis]).count());
            }
        }
        let bad_count = at_bad.len() as f64;
        let in_line = if at_bad.is_empty() {
            0.0
        } else {
            most as f64 / bad_count
        };
        (outside / all, bad_count / all, in_line)
    }

    /// Pixels a side that hold the whole annulus.
    pub fn size_px(&self) -> usize {
        let reach = self
            .offsets
            .iter()
            .flat_map(|it| &it.dx)
            .map(|it| it.unsigned_abs())
            .max();
        2 * (reach.unwrap_or(0) as usize + 2) + 1
    }

    /// Collects the calibrated pixels of one sector about the frame's centre.
    pub(super) fn gather(
        &self,
        sector: usize,
        raw: ArrayView2<'_, f32>,
        centre_px: (f64, f64),
        setup: &Extraction<'_>,
        into: &mut Pixels,
    ) {
        into.x_arcsec.clear();
        into.value_adu.clear();
        into.flat_inverse.clear();
        into.expected = self.visit(sector, raw, centre_px, setup, |_, x, value, flat| {
            into.x_arcsec.push(x);
            into.value_adu.push(value);
            into.flat_inverse.push(flat);
        });
    }

    /// Shows every usable pixel of one sector: detector angle (rad, to half a pixel), distance from the
    /// predicted limb (arcsec), calibrated value (ADU), inverse of the flat. Returns how many pixels the
    /// sector would have in an unlimited field without blemishes.
    #[inline(always)]
    pub(super) fn visit(
        &self,
        sector: usize,
        raw: ArrayView2<'_, f32>,
        centre_px: (f64, f64),
        setup: &Extraction<'_>,
        mut show: impl FnMut(f64, f64, f64, f64),
    ) -> usize {
        let mut expected = 0;
        let (height, width) = raw.dim();
        let (whole_x, whole_y) = (centre_px.0.round(), centre_px.1.round());
        let (ex, ey) = (centre_px.0 - whole_x, centre_px.1 - whole_y);
        let (cx, cy) = (whole_x as i64, whole_y as i64);
        let (ct, st) = self.directions[sector];
        let model = setup.model_arcsec[sector];
        let slope = setup.model_slope[sector];
        // Curvature of the limb across the sector's own tangential extent is exact in `r`; the
        // predicted radius is a straight line in angle.
        let offsets = &self.offsets[sector];
        for ((&dx, &dy), &theta) in offsets.dx.iter().zip(&offsets.dy).zip(&offsets.theta) {
            let vx = f64::from(dx) - ex;
            let vy = f64::from(dy) - ey;
            // The plain root: numbers of some hundred pixels cannot overflow.
            let r = (vx * vx + vy * vy).sqrt();
            let along = (vy * ct - vx * st) / r;
            let x = r * self.scale_arcsec_px - model - slope * along;
            if x < -self.inside_arcsec || x > self.outside_arcsec {
                continue;
            }
            expected += 1;
            let (px, py) = (cx + i64::from(dx), cy + i64::from(dy));
            if px < 0 || py < 0 || px >= width as i64 || py >= height as i64 {
                continue;
            }
            let at = [py as usize, px as usize];
            let raw_adu = raw[at];
            if setup
                .detector
                .saturation_adu
                .is_some_and(|it| f64::from(raw_adu) >= it)
            {
                continue;
            }
            // Bad pixels have no flat, missing ones no value: both end as NaN.
            let flat_inverse = setup.calibration.flat_inverse()[at];
            let value = (raw_adu - setup.calibration.dark_adu()[at]) * flat_inverse;
            if !value.is_finite() {
                continue;
            }
            show(
                f64::from(theta),
                x,
                f64::from(value),
                f64::from(flat_inverse),
            );
        }
        expected
    }
}
