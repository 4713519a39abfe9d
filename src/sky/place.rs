//! The observer's place on the Earth.
//!
//! # Model
//!
//! ```text
//! X = (N + h) cos(phi) cos(lambda)        N = a / sqrt(1 - e2 sin(phi)^2)
//! Y = (N + h) cos(phi) sin(lambda)        e2 = f (2 - f)
//! Z = (N (1 - e2) + h) sin(phi)
//! ```
//!
//! `phi`, `lambda`, `h`: geodetic latitude, east longitude (rad) and height above the ellipsoid (m);
//! `a` = 6378137 m, `f` = 1 / 298.257223563. The plumb line departs from the ellipsoid's normal by the
//! deflection of the vertical: the zenith lies `deflection_north` and `deflection_east` from the normal.
//!
//! # Valid for
//!
//! Heights from -1 to +100 km, deflections up to 5 arcmin; outside is an error of [`sun()`](super::sun()).
//!
//! # Accuracy
//!
//! Exact to rounding. A height above the geoid (GPS receivers show both) instead of the ellipsoid
//! moves the Sun by less than 0.2 mas. Polar motion is not asked for: up to 0.6 arcsec of the zenith's
//! place; it may be entered as a deflection.
//!
//! # Source
//!
//! WGS 84 (NIMA TR8350.2). Checked in `tests/published/sun_place.rs` on the SOFA test value.

use super::SkyError;
use crate::units::ARCMIN_RAD;
use std::f64::consts::{FRAC_PI_2, TAU};

/// Equatorial radius of WGS 84, m.
const WGS84_EQUATOR_M: f64 = 6_378_137.0;

/// Flattening of WGS 84.
const WGS84_FLATTENING: f64 = 1.0 / 298.257_223_563;

/// Where the telescope stands.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct Place {
    /// Geodetic latitude (WGS 84), north positive, rad.
    pub latitude_rad: f64,
    /// Longitude, east positive, rad.
    pub longitude_rad: f64,
    /// Height above the ellipsoid, m.
    pub height_m: f64,
    /// How far north of the ellipsoid's normal the plumb line's zenith lies, rad.
    pub deflection_north_rad: f64,
    /// How far east of the ellipsoid's normal the plumb line's zenith lies, rad.
    pub deflection_east_rad: f64,
}

impl Place {
    /// Direction of the plumb line's zenith: astronomical longitude and latitude, rad.
    pub(super) fn zenith_rad(&self) -> (f64, f64) {
        let (sin_lat, cos_lat) = self.latitude_rad.sin_cos();
        let (north, east) = (self.deflection_north_rad, self.deflection_east_rad);
        let outward = cos_lat - north * sin_lat;
        let up = sin_lat + north * cos_lat;
        let longitude_rad = self.longitude_rad + east.atan2(outward);
        (longitude_rad, up.atan2(outward.hypot(east)))
    }

    /// Refuses what cannot be a place on the ground.
    pub(super) fn require_possible(&self) -> Result<(), SkyError> {
        let largest_deflection = 5.0 * ARCMIN_RAD;
        within("latitude", self.latitude_rad, FRAC_PI_2, "rad")?;
        within("longitude", self.longitude_rad, TAU, "rad")?;
        within(
            "deflection north",
            self.deflection_north_rad,
            largest_deflection,
            "rad",
        )?;
        within(
            "deflection east",
            self.deflection_east_rad,
            largest_deflection,
            "rad",
        )?;
        let (lowest, highest) = (-1000.0, 100_000.0);
        if (lowest..=highest).contains(&self.height_m) {
            return Ok(());
        }
        let (quantity, found, unit) = ("height", self.height_m, "m");
        Err(SkyError::ValueOutOfRange {
            quantity,
            found,
            lowest,
            highest,
            unit,
        })
    }
}

/// Refuses a value beyond `limit` on either side of zero, or none.
pub(super) fn within(
    quantity: &'static str,
    found: f64,
    limit: f64,
    unit: &'static str,
) -> Result<(), SkyError> {
    if found.abs() <= limit {
        return Ok(());
    }
    Err(SkyError::ValueOutOfRange {
        quantity,
        found,
        lowest: -limit,
        highest: limit,
        unit,
    })
}

/// The place in the terrestrial reference frame (ITRS), m: the FITS keywords OBSGEO-X, -Y, -Z.
pub fn observer_itrs_m(place: &Place) -> [f64; 3] {
    let (sin_lat, cos_lat) = place.latitude_rad.sin_cos();
    let (sin_lon, cos_lon) = place.longitude_rad.sin_cos();
    let e2 = WGS84_FLATTENING * (2.0 - WGS84_FLATTENING);
    let normal_m = WGS84_EQUATOR_M / (1.0 - e2 * sin_lat * sin_lat).sqrt();
    let outward_m = (normal_m + place.height_m) * cos_lat;
    let z_m = (normal_m * (1.0 - e2) + place.height_m) * sin_lat;
    [outward_m * cos_lon, outward_m * sin_lon, z_m]
}
