//! Where a camera that is fixed to the ground sees the Sun.
//!
//! # Model
//!
//! The optical axis points at an apparent direction `(A, z)` of the horizon. A direction seen is
//! projected about it; its bearing `b` from the zenith runs as position angles do, against azimuth:
//!
//! ```text
//! angle and bearing -> plate (tan or arc) -> pixels
//! theta = 90 deg + (b - y)     parity Sky        y: bearing of the detector's +y from the zenith
//! theta = 90 deg - (b - y)     parity Mirrored   theta: from +x towards +y
//! ```
//!
//! # Valid for
//!
//! Fields up to a degree, pointings more than a degree from the zenith.
//!
//! # Accuracy
//!
//! Exact to rounding for the direction given; the optical axis is taken at the detector's middle.
//!
//! # Source
//!
//! Gnomonic and zenithal equidistant projection (FITS WCS paper II, TAN and ARC).

use crate::refraction::Plate;
use crate::sky::Parity;
use std::f64::consts::FRAC_PI_2;

/// An apparent direction.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Seen {
    /// Azimuth from north through east, rad.
    pub azimuth_rad: f64,
    /// Apparent zenith distance, rad.
    pub zenith_rad: f64,
}

/// What is known of the camera.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct FixedCamera {
    /// The plate.
    pub plate: Plate,
    /// Refractivity at the telescope.
    pub refractivity: f64,
    /// Whether the detector shows the sky or its mirror image.
    pub parity: Parity,
    /// Middle of the detector, 0-based pixel centres, `(x, y)`.
    pub middle_px: (f64, f64),
}

/// What a drift finds out.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Mounting {
    /// Plate scale, arcsec a pixel.
    pub scale_arcsec_px: f64,
    /// Bearing of the detector's +y from the zenith at the optical axis, rad.
    pub up_rad: f64,
    /// Where the optical axis points.
    pub axis: Seen,
}

impl Seen {
    fn unit(&self) -> [f64; 3] {
        let (sin_z, cos_z) = self.zenith_rad.sin_cos();
        let (sin_a, cos_a) = self.azimuth_rad.sin_cos();
        [sin_z * cos_a, sin_z * sin_a, cos_z]
    }

    /// Angle to another direction and its bearing from the zenith here, against azimuth, rad.
    pub fn towards(&self, other: &Self) -> (f64, f64) {
        let (sin_z, cos_z) = self.zenith_rad.sin_cos();
        let (sin_a, cos_a) = self.azimuth_rad.sin_cos();
        let [n, e, u] = other.unit();
        let along = sin_z * (cos_a * n + sin_a * e) + cos_z * u;
        let up = -cos_z * (cos_a * n + sin_a * e) + sin_z * u;
        let left = sin_a * n - cos_a * e;
        (up.hypot(left).atan2(along), left.atan2(up))
    }

    /// The direction at an angle and bearing from here, rad.
    #[must_use]
    pub fn offset(&self, angle_rad: f64, bearing_rad: f64) -> Self {
        let (sin_z, cos_z) = self.zenith_rad.sin_cos();
        let (sin_r, cos_r) = angle_rad.sin_cos();
        let (up, left) = (sin_r * bearing_rad.cos(), sin_r * bearing_rad.sin());
        let horizontal = sin_z * cos_r - cos_z * up;
        let vertical = cos_z * cos_r + sin_z * up;
        Self {
            azimuth_rad: self.azimuth_rad + (-left).atan2(horizontal),
            zenith_rad: horizontal.hypot(left).atan2(vertical),
        }
    }
}

impl FixedCamera {
    /// Where a direction falls on the detector, px.
    pub fn place_px(&self, mounting: &Mounting, seen: &Seen) -> (f64, f64) {
        let (angle, bearing) = mounting.axis.towards(seen);
        let plate = self.plate.of_angle_arcsec(angle, self.refractivity);
        let r = plate / mounting.scale_arcsec_px;
        let theta = self.detector_angle_rad(mounting.up_rad, bearing);
        (
            self.middle_px.0 + r * theta.cos(),
            self.middle_px.1 + r * theta.sin(),
        )
    }

    /// The direction that falls on a place of the detector.
    pub fn seen_at(&self, mounting: &Mounting, (x_px, y_px): (f64, f64)) -> Seen {
        let (dx, dy) = (x_px - self.middle_px.0, y_px - self.middle_px.1);
        let plate = dx.hypot(dy) * mounting.scale_arcsec_px;
        let angle = self.plate.angle_rad(plate, self.refractivity);
        let from_y = dy.atan2(dx) - FRAC_PI_2;
        let bearing = mounting.up_rad
            + match self.parity {
                Parity::Sky => from_y,
                Parity::Mirrored => -from_y,
            };
        mounting.axis.offset(angle, bearing)
    }

    /// Angle on the detector from +x towards +y of a bearing from the zenith.
    pub fn detector_angle_rad(&self, up_rad: f64, bearing_rad: f64) -> f64 {
        match self.parity {
            Parity::Sky => FRAC_PI_2 + (bearing_rad - up_rad),
            Parity::Mirrored => FRAC_PI_2 - (bearing_rad - up_rad),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::session::{Projection, ScaleOf};

    fn camera(parity: Parity, projection: Projection) -> FixedCamera {
        FixedCamera {
            plate: Plate {
                projection,
                scale_of: ScaleOf::Sky,
            },
            refractivity: 2.1e-4,
            parity,
            middle_px: (511.5, 500.0),
        }
    }

    #[test]
    fn there_and_back() {
        let mounting = Mounting {
            scale_arcsec_px: 2.0,
            up_rad: 0.7,
            axis: Seen {
                azimuth_rad: 3.0,
                zenith_rad: 0.6,
            },
        };
        for parity in [Parity::Sky, Parity::Mirrored] {
            for projection in [Projection::Tan, Projection::Arc] {
                let it = camera(parity, projection);
                for place in [(500.0, 510.0), (20.0, 900.0), (1000.0, 3.0)] {
                    let (x, y) = it.place_px(&mounting, &it.seen_at(&mounting, place));
                    assert!((x - place.0).abs() < 1e-6 && (y - place.1).abs() < 1e-6);
                }
            }
        }
    }

    /// North of the zenith's meridian: looking south with the zenith up, west (larger azimuth) is
    /// to the right, and +x is to the right in the sky's own parity.
    #[test]
    fn larger_azimuth_is_to_the_right() {
        let mounting = Mounting {
            scale_arcsec_px: 2.0,
            up_rad: 0.0,
            axis: Seen {
                azimuth_rad: std::f64::consts::PI,
                zenith_rad: 0.6,
            },
        };
        let west = Seen {
            azimuth_rad: std::f64::consts::PI + 1e-3,
            zenith_rad: 0.6,
        };
        let (x, y) = camera(Parity::Sky, Projection::Tan).place_px(&mounting, &west);
        assert!(x > 520.0 && (y - 500.0).abs() < 1.0, "{x} {y}");
    }
}
