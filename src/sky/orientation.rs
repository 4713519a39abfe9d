//! How the camera hangs under the sky.
//!
//! # Model
//!
//! ```text
//! y   = camera angle + roll          equatorial mount, two-mirror coelostat: the field stands still
//! y   = camera angle + roll + q      altazimuth, fixed to the ground: it turns with the zenith
//! psi = y - 90 deg + theta           parity Sky:      +x is 90 deg clockwise of +y on the sky
//! psi = y + 90 deg - theta           parity Mirrored
//! ```
//!
//! `y` is the position angle of the detector's +y and `psi` that of the direction `theta`, both from
//! the celestial north through east; `theta` runs from the detector's +x towards +y; `q` is the
//! parallactic angle. All in rad.
//!
//! # Valid for
//!
//! Fields so small that north is one direction over them. A siderostat or heliostat with one mirror
//! turns the field by its own law and is none of these mounts.
//!
//! # Accuracy
//!
//! Exact. Refraction lifts the Sun along the vertical, and at the lifted place the zenith has another
//! position angle than at the true one: by up to 1 arcmin at 60 deg from the zenith. A camera whose
//! angle is that of its own mount's north sees the vertical at [`parallactic_at_zenith_rad`].
//!
//! # Source
//!
//! Definitions; position angle as in the FITS celestial conventions (north through east).

use super::{Place, SunPlace};
use crate::units::wrapped_rad;
use std::f64::consts::{FRAC_PI_2, TAU};

/// What carries the camera.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Mount {
    /// A mount with a polar axis: the field does not turn.
    Equatorial,
    /// A two-mirror coelostat: the field does not turn.
    Coelostat,
    /// A mount with a vertical axis: the field turns with the parallactic angle.
    Altazimuth,
    /// Fixed to the ground: the field turns with the parallactic angle.
    Fixed,
}

/// Whether the detector shows the sky or its mirror image.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Parity {
    /// +x is 90 deg clockwise of +y on the sky.
    Sky,
    /// +x is 90 deg anticlockwise of +y on the sky.
    Mirrored,
}

/// The camera's orientation at a moment.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Orientation {
    /// Position angle of the detector's +y, rad.
    pub y_position_angle_rad: f64,
    /// Whether the detector shows the sky or its mirror image.
    pub parity: Parity,
}

impl Orientation {
    /// Position angle, 0 to 2 pi, of the detector's direction `theta_rad` (from +x towards +y).
    pub fn position_angle_rad(&self, theta_rad: f64) -> f64 {
        let angle_rad = match self.parity {
            Parity::Sky => self.y_position_angle_rad - FRAC_PI_2 + theta_rad,
            Parity::Mirrored => self.y_position_angle_rad + FRAC_PI_2 - theta_rad,
        };
        angle_rad.rem_euclid(TAU)
    }

    /// Direction on the detector (from +x towards +y, -pi to pi) of a position angle.
    pub fn detector_angle_rad(&self, position_angle_rad: f64) -> f64 {
        let from_y_rad = position_angle_rad - self.y_position_angle_rad;
        wrapped_rad(match self.parity {
            Parity::Sky => FRAC_PI_2 + from_y_rad,
            Parity::Mirrored => FRAC_PI_2 - from_y_rad,
        })
    }
}

/// The camera's orientation, from its angle in the mount, the roll of the instrument, and the Sun.
pub fn orientation(
    mount: Mount,
    camera_angle_rad: f64,
    roll_rad: f64,
    parity: Parity,
    sun: &SunPlace,
) -> Orientation {
    let field_rad = match mount {
        Mount::Equatorial | Mount::Coelostat => 0.0,
        Mount::Altazimuth | Mount::Fixed => sun.parallactic_rad,
    };
    let y_position_angle_rad = wrapped_rad(camera_angle_rad + roll_rad + field_rad);
    Orientation {
        y_position_angle_rad,
        parity,
    }
}

/// Position angle of the zenith at a point on the Sun's vertical, `zenith_rad` from the zenith: with
/// the apparent zenith distance, the parallactic angle where refraction shows the Sun.
pub fn parallactic_at_zenith_rad(place: &Place, sun: &SunPlace, zenith_rad: f64) -> f64 {
    let latitude_rad = place.zenith_rad().1;
    let altitude_rad = FRAC_PI_2 - zenith_rad;
    let [hour_angle_rad, declination_rad] =
        sofars::coords::ae2hd(sun.azimuth_rad, altitude_rad, latitude_rad);
    sofars::coords::hd2pa(hour_angle_rad, declination_rad, latitude_rad)
}
