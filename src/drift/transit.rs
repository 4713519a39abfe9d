//! Contacts with a slit, the way of the Sun through a field, and a shutter that rolls.
//!
//! # Model
//!
//! ```text
//! T  = 2 asin(sin R / cos d) / w          slit along an hour circle, first to second contact
//! R  = asin(cos d sin(w T / 2))
//! motion: position angle 270 deg + atan(d' / (w cos d)); over x along it the direction turns by
//! x tan d and the path leaves its tangent by x^2 tan d / 2
//!
//! rolling shutter, v the velocity on the detector, T_r the readout over the disk's diameter:
//! r(theta) = R + v_y T_r / 4 - v_y T_r / 4 cos 2 theta + v_x T_r / 4 sin 2 theta
//! ```
//!
//! | symbol | meaning | unit |
//! |--------|---------|------|
//! | `T` | seconds between the contacts | s |
//! | `R` | true angular radius | rad |
//! | `d`, `d'` | topocentric declination and its rate | rad, rad/s |
//! | `w` | rate of the topocentric hour angle: the Sun's own motion and the observer's are in it | rad/s |
//!
//! Refraction does not enter: both limbs meet a fixed slit at one apparent, so at one true direction.
//!
//! # Valid for
//!
//! Declinations of the Sun; a slit along the hour circle. Another slit needs the geometry of a scan.
//!
//! # Accuracy
//!
//! Exact for the motion in hour angle; `d'` and the change of `w` over a transit are left out (below
//! 0.01 mas of radius). The plane formula `w T cos d / 2` would be 0.65 mas off at 23.4 deg.
//!
//! # Source
//!
//! Right spherical triangle pole-centre-slit. Checked in `tests/published/drift_transits.rs`.

use std::f64::consts::{FRAC_PI_2, TAU};

/// Seconds between the contacts of a Sun of a true radius with a slit along the hour circle.
pub fn transit_s(radius_rad: f64, declination_rad: f64, hour_angle_rad_s: f64) -> f64 {
    2.0 * (radius_rad.sin() / declination_rad.cos()).asin() / hour_angle_rad_s
}

/// True radius from the seconds between the contacts.
pub fn semidiameter_rad(duration_s: f64, declination_rad: f64, hour_angle_rad_s: f64) -> f64 {
    (declination_rad.cos() * (0.5 * hour_angle_rad_s * duration_s).sin()).asin()
}

/// Position angle of the motion, north through east, 0 to 2 pi, rad.
pub fn motion_position_angle_rad(
    declination_rad: f64,
    hour_angle_rad_s: f64,
    declination_rad_s: f64,
) -> f64 {
    let north_of_west = declination_rad_s.atan2(hour_angle_rad_s * declination_rad.cos());
    (north_of_west - FRAC_PI_2).rem_euclid(TAU)
}

/// By how much the direction of the diurnal path turns over a distance along it, rad.
pub fn path_turn_rad(along_rad: f64, declination_rad: f64) -> f64 {
    along_rad * declination_rad.tan()
}

/// How far the diurnal path has left its tangent at a distance along it, rad.
pub fn sagitta_rad(along_rad: f64, declination_rad: f64) -> f64 {
    0.5 * along_rad * along_rad * declination_rad.tan()
}

/// What a rolling shutter makes of a round disk, in the unit of velocity times time.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct RollingShutter {
    /// Change of the mean radius.
    pub mean: f64,
    /// Coefficient of `cos 2 theta`, `theta` from +x (along the rows) towards +y.
    pub cos2: f64,
    /// Coefficient of `sin 2 theta`.
    pub sin2: f64,
}

impl RollingShutter {
    /// Largest minus smallest radius.
    pub fn out_of_round(&self) -> f64 {
        2.0 * self.cos2.hypot(self.sin2)
    }
}

/// The disk's figure under a rolling shutter whose rows are read from low to high y; `readout_s` is
/// the time over the disk's diameter, the velocity that of the image on the detector.
pub fn rolling_shutter(velocity_x: f64, velocity_y: f64, readout_s: f64) -> RollingShutter {
    RollingShutter {
        mean: 0.25 * velocity_y * readout_s,
        cos2: -0.25 * velocity_y * readout_s,
        sin2: 0.25 * velocity_x * readout_s,
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::units::{ARCSEC_RAD, DEG_RAD};

    #[test]
    fn duration_and_radius_are_inverse() {
        let rate = 15.002 * ARCSEC_RAD;
        for declination_deg in [-23.4, 0.0, 14.0] {
            let declination = declination_deg * DEG_RAD;
            let radius = 950.0 * ARCSEC_RAD;
            let back = semidiameter_rad(transit_s(radius, declination, rate), declination, rate);
            assert!((back - radius).abs() < 1e-16);
        }
    }

    /// A disk of points, each exposed at the time of the row on which it is seen.
    #[test]
    fn a_rolling_shutter_shears_the_disk_as_its_rows_say() {
        let (radius, readout_s, velocity) = (1000.0, 0.03, (11.0, -7.0));
        let per_unit_s = readout_s / (2.0 * radius);
        let figure = rolling_shutter(velocity.0, velocity.1, readout_s);
        for k in 0..36 {
            let theta = f64::from(k) * TAU / 36.0;
            let (x, y) = (radius * theta.cos(), radius * theta.sin());
            let (x, y) = (
                x + velocity.0 * per_unit_s * y,
                y + velocity.1 * per_unit_s * y,
            );
            let series =
                figure.mean + figure.cos2 * (2.0 * theta).cos() + figure.sin2 * (2.0 * theta).sin();
            assert!((x.hypot(y) - radius - series).abs() < 1e-4);
        }
    }
}
