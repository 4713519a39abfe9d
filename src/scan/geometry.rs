//! Where each pixel of each line looks, about the Sun.
//!
//! # Model
//!
//! ```text
//! pixel of the slit -> apparent direction of the horizon -> true direction, constant in time
//! line -> the Sun's true direction at the middle of its exposure
//! angle and bearing between the two -> true radius and position angle about the Sun's centre
//! ```
//!
//! The air bends the light of a pixel that stands still always alike: it stretches the slit, and leaves the
//! time between two contacts alone.
//!
//! # Valid for
//!
//! Pointings more than a degree from the zenith, slits up to 0.9 degrees.
//!
//! # Accuracy
//!
//! Exact for directions and times given. Within the seconds of a transit the air's change is left out: 1e-3
//! of the refractivity an hour is below 0.01 mas.
//!
//! # Source
//!
//! Spherical trigonometry.

use crate::air::Bending;
use crate::drift::{FixedCamera, Mounting};
use crate::limb::lines::LinePixel;
use crate::sky::{Orientation, SunPlace};
use crate::units::ARCSEC_RAD;

/// The true directions of a slit's pixels.
#[derive(Clone, Debug)]
pub struct Slit {
    directions: Vec<[f64; 3]>,
}

/// The Sun as one line sees it.
#[derive(Clone, Copy, Debug)]
pub struct LineSky {
    /// Towards the Sun, towards the zenith there, and to the left of it (against azimuth).
    axes: [[f64; 3]; 3],
    parallactic_rad: f64,
}

fn unit(azimuth_rad: f64, zenith_rad: f64) -> [f64; 3] {
    let (sin_z, cos_z) = zenith_rad.sin_cos();
    let (sin_a, cos_a) = azimuth_rad.sin_cos();
    [sin_z * cos_a, sin_z * sin_a, cos_z]
}

fn dot(a: &[f64; 3], b: &[f64; 3]) -> f64 {
    a[0] * b[0] + a[1] * b[1] + a[2] * b[2]
}

impl Slit {
    /// The slit of a camera whose `middle_px` is `(0, middle of the slit)`; no bending above the air.
    pub fn new(
        camera: &FixedCamera,
        mounting: &Mounting,
        bending: Option<&Bending>,
        pixels: usize,
    ) -> Self {
        let directions = (0..pixels)
            .map(|column| {
                let seen = camera.seen_at(mounting, (0.0, column as f64));
                let refraction = bending.map_or(0.0, |it| it.refraction_rad(seen.zenith_rad));
                unit(seen.azimuth_rad, seen.zenith_rad + refraction)
            })
            .collect();
        Self { directions }
    }
}

impl LineSky {
    /// The sky of one line.
    pub fn new(sun: &SunPlace) -> Self {
        let (sin_z, cos_z) = sun.zenith_true_rad.sin_cos();
        let (sin_a, cos_a) = sun.azimuth_rad.sin_cos();
        Self {
            axes: [
                unit(sun.azimuth_rad, sun.zenith_true_rad),
                [-cos_z * cos_a, -cos_z * sin_a, sin_z],
                [sin_a, -cos_a, 0.0],
            ],
            parallactic_rad: sun.parallactic_rad,
        }
    }
}

/// The pixels whose true distance from the Sun's centre is between two radii, arcsec.
pub fn near_limb(
    slit: &Slit,
    lines: &[LineSky],
    orientation: &Orientation,
    (smallest_arcsec, largest_arcsec): (f64, f64),
) -> Vec<LinePixel> {
    // Chords are compared first: most pixels are far from the limb.
    let chord2 = |arcsec: f64| 2.0 * (1.0 - (arcsec * ARCSEC_RAD).cos());
    let (low, high) = (chord2(smallest_arcsec), chord2(largest_arcsec));
    let mut out = Vec::new();
    for (row, line) in lines.iter().enumerate() {
        for (column, direction) in slit.directions.iter().enumerate() {
            let to_sun = &line.axes[0];
            let apart: f64 = (0..3).map(|i| (direction[i] - to_sun[i]).powi(2)).sum();
            if !(apart > low && apart < high) {
                continue;
            }
            let (up, left) = (dot(direction, &line.axes[1]), dot(direction, &line.axes[2]));
            let radius = 2.0 * (0.5 * apart.sqrt()).asin();
            let position_angle = left.atan2(up) + line.parallactic_rad;
            out.push(LinePixel {
                row: row as u32,
                column: column as u32,
                radius_arcsec: radius / ARCSEC_RAD,
                theta_rad: orientation.detector_angle_rad(position_angle),
            });
        }
    }
    out
}
