//! What the pixels just inside the limb leave over beside the fitted disk, summed over the frames of a
//! sequence by angle and distance.
//!
//! # Model
//!
//! ```text
//! q = (v - g E(x - shift_s ; J) - b) / g,      held to +-0.15
//! ```
//!
//! | symbol | meaning | unit |
//! |--------|---------|------|
//! | `v` | calibrated pixel | ADU |
//! | `g`, `b`, `J` | gain, background and blur of the frame: medians over its sectors | ADU, arcsec^(5/3) |
//! | `shift_s` | the sector's own shift: where the limb is does not show in `q` | arcsec |
//! | `x` | distance from the predicted limb, inside only | arcsec |
//!
//! The sums are kept twice: by the angle on the detector, where dust and dead columns stay, and by the
//! position angle from solar north, where spots and faculae stay through rolls and a turning field. A
//! particle hit moves no sum by more than the bound. The sums are whole numbers, so their order, and
//! with it the number of threads, does not matter; their size does not grow with the frames.
//!
//! # Valid for
//!
//! Limbs measured by [`super::extract`].
//!
//! # Accuracy
//!
//! The bound is reached by structures of more than 15 percent: they are found, their contrast is a
//! lower limit.
//!
//! # Source
//!
//! Bounded influence: P. J. Huber, Ann. Math. Stat. 35, 73 (1964), from memory.

use super::blemish::median;
use super::template::width_of_blur_arcsec;
use super::{Extraction, Flag, ObservedLimb};
use ndarray::ArrayView2;
use std::f64::consts::TAU;

/// Parts of a sector that are told apart.
pub const PARTS: usize = 4;

/// Rings inside the limb.
pub const RINGS: usize = 4;

/// Largest residual that is summed, in units of the disk's centre.
const BOUND: f64 = 0.15;

/// One unit of the disk's centre in the whole numbers of the sums.
const UNIT: f64 = (1_u64 << 32) as f64;

/// Beyond these a pixel is counted as a hit: standard deviations, share of the disk's centre.
const HIT: (f64, f64) = (7.0, 0.08);

/// Sums of one sequence about one kind of angle.
#[derive(Clone, Debug, PartialEq, Eq)]
struct Sums {
    total: Vec<i64>,
    pixels: Vec<u64>,
}

impl Sums {
    fn new(cells: usize) -> Self {
        Self {
            total: vec![0; cells],
            pixels: vec![0; cells],
        }
    }

    fn merge(&mut self, other: &Self) {
        for (a, b) in self.total.iter_mut().zip(&other.total) {
            *a += b;
        }
        for (a, b) in self.pixels.iter_mut().zip(&other.pixels) {
            *a += b;
        }
    }
}

/// The residuals of a sequence's frames.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Residuals {
    bins: usize,
    detector: Sums,
    sun: Sums,
    /// Pixels hit by particles, all frames together.
    hits: u64,
    frames: u64,
}

/// Mean residual by bin of angle and ring, in units of the disk's centre; NaN where there was no pixel.
#[derive(Clone, Debug, PartialEq)]
pub struct ResidualMap {
    /// By bin, then ring from the inside outward.
    pub mean: Vec<[f64; RINGS]>,
}

/// How a frame's detector lies on the Sun: the angle of solar north, and whether position angles run
/// with the detector's angles.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Facing {
    /// Position angle from solar north of detector angle zero, rad.
    pub zero_rad: f64,
    /// Whether position angles grow with detector angles.
    pub forward: bool,
}

impl Facing {
    /// Position angle from solar north of a detector angle, rad.
    pub fn solar_rad(self, theta_rad: f64) -> f64 {
        if self.forward {
            self.zero_rad + theta_rad
        } else {
            self.zero_rad - theta_rad
        }
    }
}

/// The bin of a full turn cut in `bins` in which an angle lies.
pub fn bin_of(angle_rad: f64, bins: usize) -> usize {
    ((angle_rad.rem_euclid(TAU) / TAU * bins as f64) as usize).min(bins - 1)
}

impl Residuals {
    /// Empty sums for a limb of so many sectors.
    pub fn new(sectors: usize) -> Self {
        let bins = PARTS * sectors;
        Self {
            bins,
            detector: Sums::new(bins * RINGS),
            sun: Sums::new(bins * RINGS),
            hits: 0,
            frames: 0,
        }
    }

    /// Bins of a full turn.
    pub fn bins(&self) -> usize {
        self.bins
    }

    /// Frames in the sums.
    pub fn frames(&self) -> u64 {
        self.frames
    }

    /// Pixels hit by particles in a frame, on average: those of the annulus that are clear of the edge.
    pub fn hits_per_frame(&self) -> f64 {
        self.hits as f64 / self.frames as f64
    }

    /// Adds another part of the same sequence.
    pub fn merge(&mut self, other: &Self) {
        self.detector.merge(&other.detector);
        self.sun.merge(&other.sun);
        self.hits += other.hits;
        self.frames += other.frames;
    }

    /// Mean residuals by detector angle: bins run from +x towards +y.
    pub fn by_detector(&self) -> ResidualMap {
        mean(&self.detector)
    }

    /// Mean residuals by position angle from solar north through east.
    pub fn by_sun(&self) -> ResidualMap {
        mean(&self.sun)
    }

    /// Adds one frame's limb.
    pub fn add(
        &mut self,
        raw: ArrayView2<'_, f32>,
        limb: &ObservedLimb,
        facing: Facing,
        setup: &Extraction<'_>,
    ) {
        let good = || limb.sectors.iter().filter(|it| it.flag == Flag::Good);
        let gain = median(good().map(|it| it.gain_adu));
        let background = median(good().map(|it| it.background_adu));
        let blur = median(good().map(|it| it.blur));
        if !(gain > 0.0) {
            return;
        }
        self.frames += 1;
        let read_adu2 = (setup.detector.read_noise_e / setup.detector.gain_e_adu).powi(2);
        // Clear of the edge itself, whose place and width change from sector to sector.
        let outer = -(1.5 + 0.5 * setup.annulus.scale_arcsec_px());
        let inner = -setup.annulus.inside_arcsec();
        // Where the limb is torn within a sector, pixels of the edge itself are far off without a hit.
        let clear = width_of_blur_arcsec(blur) - outer;
        let per_arcsec = RINGS as f64 / (outer - inner);
        let width_rad = TAU / self.bins as f64;
        let by_angle: Vec<usize> = (0..self.bins)
            .map(|k| bin_of(facing.solar_rad((k as f64 + 0.5) * width_rad), self.bins))
            .collect();
        for (s, sector) in limb.sectors.iter().enumerate() {
            if sector.flag != Flag::Good {
                continue;
            }
            let shift = sector.radius_arcsec - setup.model_arcsec[s];
            let rows = setup.table.rows(s, blur);
            setup
                .annulus
                .visit(s, raw, limb.centre_px, setup, |theta, x, value, flat| {
                    let model = gain * rows.at(x - shift).value + background;
                    let off = value - model;
                    let signal = if model > 0.0 { model } else { 0.0 };
                    let variance = flat * (signal / setup.detector.gain_e_adu + flat * read_adu2);
                    let far_off = off > HIT.1 * gain && off * off > HIT.0 * HIT.0 * variance;
                    if far_off && x.abs() > clear {
                        self.hits += 1;
                    }
                    if x >= outer {
                        return;
                    }
                    let ring = (((x - inner) * per_arcsec) as usize).min(RINGS - 1);
                    let residual = (off / gain).clamp(-BOUND, BOUND);
                    let whole = (residual * UNIT).round() as i64;
                    let bin = bin_of(theta, self.bins);
                    for (sums, bin) in [(&mut self.detector, bin), (&mut self.sun, by_angle[bin])] {
                        sums.total[bin * RINGS + ring] += whole;
                        sums.pixels[bin * RINGS + ring] += 1;
                    }
                });
        }
    }
}

fn mean(sums: &Sums) -> ResidualMap {
    let cells: Vec<f64> = sums
        .total
        .iter()
        .zip(&sums.pixels)
        .map(|(&total, &pixels)| {
            if pixels == 0 {
                f64::NAN
            } else {
                total as f64 / UNIT / pixels as f64
            }
        })
        .collect();
    ResidualMap {
        mean: cells
            .chunks_exact(RINGS)
            .map(|it| std::array::from_fn(|k| it[k]))
            .collect(),
    }
}
