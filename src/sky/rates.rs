//! How fast the Sun moves: over the horizon, across a telescope that stands still, and on its own.
//!
//! # Model
//!
//! Hour angle, declination and the geocentric place are differenced over +-30 s; the horizon's
//! angles follow from them:
//!
//! ```text
//! q = atan2(cos(phi) sin H, sin(phi) cos d - cos(phi) sin d cos H)
//! A = atan2(-cos d sin H, sin d cos(phi) - cos d sin(phi) cos H)
//! z' = cos d sin q H' - cos q d'
//! motion: position angle 270 deg + atan(d' / (H' cos d)), speed hypot(H' cos d, d')
//! ```
//!
//! # Valid for
//!
//! As [`sun()`](super::sun()); at least 1 arcsec from the zenith, where `A` and `q` have no rate.
//!
//! # Accuracy
//!
//! Parts in 1e10 of the hour angle's rate (differencing). UT1 is taken to tick SI seconds: 3e-8.
//! Refraction is not in them. Checked in `tests/published/sun_place.rs`.
//!
//! # Source
//!
//! Spherical triangle pole-zenith-Sun, differentiated.

use super::sun::{apparent, on_the_ground, ut1_minus_tai_s};
use super::{Place, SkyError, Utc};
use crate::units::{ARCSEC_RAD, wrapped_rad};
use std::f64::consts::{FRAC_PI_2, TAU};

/// Half the base of the differences, s: the diurnal parallax bends the rates by 5e-10 arcsec/s.
const HALF_BASE_S: f64 = 30.0;

/// Rates of the Sun's true place, rad/s.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Rates {
    /// Topocentric declination, rad.
    pub declination_rad: f64,
    /// Rate of the topocentric hour angle (drift of a fixed telescope, as an angle about the pole).
    pub hour_angle_rad_s: f64,
    /// Rate of the topocentric declination.
    pub declination_rad_s: f64,
    /// The Sun's own motion in right ascension, geocentric.
    pub own_right_ascension_rad_s: f64,
    /// The Sun's own motion in declination, geocentric.
    pub own_declination_rad_s: f64,
    /// Rate of the true zenith distance.
    pub zenith_rad_s: f64,
    /// Rate of the azimuth.
    pub azimuth_rad_s: f64,
    /// Rate of the parallactic angle: how fast the sky turns in an altazimuth camera.
    pub parallactic_rad_s: f64,
}

impl Rates {
    /// Speed with which the Sun drifts through a telescope that stands still, rad/s on the sky.
    pub fn drift_rad_s(&self) -> f64 {
        self.westward_rad_s().hypot(self.declination_rad_s)
    }

    /// Position angle of that drift, north through east, 0 to 2 pi, rad: near 270 deg.
    pub fn drift_position_angle_rad(&self) -> f64 {
        let north_of_west_rad = self.declination_rad_s.atan2(self.westward_rad_s());
        (north_of_west_rad - FRAC_PI_2).rem_euclid(TAU)
    }

    fn westward_rad_s(&self) -> f64 {
        self.hour_angle_rad_s * self.declination_rad.cos()
    }
}

/// The Sun's rates at a time and place.
///
/// # Errors
///
/// Those of [`sun()`](super::sun()), and [`SkyError::InZenith`].
pub fn rates(at: Utc, place: &Place, ut1_minus_utc_s: f64) -> Result<Rates, SkyError> {
    let ut1_minus_tai_s = ut1_minus_tai_s(at, ut1_minus_utc_s)?;
    place.require_possible()?;
    let on_ground = |seconds: f64| {
        let seen = apparent(at.plus_s(seconds), Some(place), ut1_minus_tai_s)?;
        Ok(on_the_ground(&seen, place))
    };
    let from_centre = |seconds: f64| apparent(at.plus_s(seconds), None, ut1_minus_tai_s);
    let (before, now, after) = (
        on_ground(-HALF_BASE_S)?,
        on_ground(0.0)?,
        on_ground(HALF_BASE_S)?,
    );
    let (own_before, own_after) = (from_centre(-HALF_BASE_S)?, from_centre(HALF_BASE_S)?);
    let per_second = |change_rad: f64| wrapped_rad(change_rad) / (2.0 * HALF_BASE_S);
    let hour_angle_rad_s = per_second(after.hour_angle_rad - before.hour_angle_rad);
    let declination_rad_s = per_second(after.declination_rad - before.declination_rad);

    let zenith_arcsec = now.zenith_true_rad / ARCSEC_RAD;
    if zenith_arcsec < 1.0 {
        return Err(SkyError::InZenith { zenith_arcsec });
    }
    let (sin_h, cos_h) = now.hour_angle_rad.sin_cos();
    let (sin_d, cos_d) = now.declination_rad.sin_cos();
    let (sin_phi, cos_phi) = place.zenith_rad().1.sin_cos();
    let (sin_q, cos_q) = now.parallactic_rad.sin_cos();
    let (h_rate, d_rate) = (hour_angle_rad_s, declination_rad_s);
    let parallactic_rad_s = atan2_rate(
        (cos_phi * sin_h, cos_phi * cos_h * h_rate),
        (
            sin_phi * cos_d - cos_phi * sin_d * cos_h,
            cos_phi * sin_d * sin_h * h_rate - (sin_phi * sin_d + cos_phi * cos_d * cos_h) * d_rate,
        ),
    );
    let azimuth_rad_s = atan2_rate(
        (
            -cos_d * sin_h,
            sin_d * sin_h * d_rate - cos_d * cos_h * h_rate,
        ),
        (
            sin_d * cos_phi - cos_d * sin_phi * cos_h,
            (cos_d * cos_phi + sin_d * sin_phi * cos_h) * d_rate + cos_d * sin_phi * sin_h * h_rate,
        ),
    );
    Ok(Rates {
        declination_rad: now.declination_rad,
        hour_angle_rad_s,
        declination_rad_s,
        own_right_ascension_rad_s: per_second(
            own_after.right_ascension_rad - own_before.right_ascension_rad,
        ),
        own_declination_rad_s: per_second(own_after.declination_rad - own_before.declination_rad),
        zenith_rad_s: cos_d * sin_q * h_rate - cos_q * d_rate,
        azimuth_rad_s,
        parallactic_rad_s,
    })
}

/// Rate of `atan2(y, x)`, each given with its own rate.
fn atan2_rate((y, y_rate): (f64, f64), (x, x_rate): (f64, f64)) -> f64 {
    (x * y_rate - y * x_rate) / (x * x + y * y)
}
