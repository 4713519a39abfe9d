//! The Sun's apparent place, distance and axis, as seen from a place on the ground.
//!
//! # Model
//!
//! ```text
//! d      = S(t - tau) - O(t),   tau = |d| / c        S Sun, O observer, barycentric
//! p      = N A(d / |d|)                              A aberration, N bias-precession-nutation
//! H      = GAST + lambda - alpha(p)                  hour angle at the plumb line's meridian
//! P      = position angle at p of the pole's direction, after the same aberration
//! sin B0 = -d . e / |d|                              e solar north pole
//! L0     = longitude of -d from the node on the solar equator - W(t - tau)
//! W      = 84.176 deg + 14.1844 deg (JD - 2451545.0)
//! ```
//!
//! `O` is the Earth's centre plus the WGS 84 place turned by the apparent sidereal time; `e` points to
//! RA 286.13 deg, Dec 63.87 deg (ICRS). Polar motion is taken as zero and the light of the Sun's centre
//! is not bent by the Sun's own mass.
//!
//! # Valid for
//!
//! 1972 to 2035, as the leap seconds are; UT1 - UTC within 1 s; places as [`super::Place`] says.
//!
//! # Accuracy
//!
//! Earth's orbit: 11 km at most, 4 km rms (7e-8 au, 3e-8 au: 0.07 mas of the Sun's radius), 0.02 arcsec
//! in direction. UT1 - UTC unknown by 1 s moves the hour angle by 15 arcsec. Polar motion: up to
//! 0.6 arcsec. The axis is defined by its two numbers; the solar axis itself is known to 0.01 deg.
//!
//! # Source
//!
//! SOFA routines `epv00`, `pnm06a`, `gst06`, `pvtob`, `ab`, `hd2ae`, `hd2pa`, by the crate `sofars`.
//! Pole and meridian: B. A. Archinal et al., Celest. Mech. Dyn. Astron. 130, 22 (2018), table 1.
//! Checked in `tests/published/sun_place.rs`, `meeus_1998.rs` and `reda_andreas_2004.rs`.

use super::place::within;
use super::{Place, SkyError, Utc};
use crate::constants::{ASTRONOMICAL_UNIT, SOLAR_RADIUS_NOMINAL};
use crate::units::{DEG_RAD, wrapped_rad};
use sofars::consts::{CMPS, DAYSEC, DC, DJ00};
use sofars::vm::{c2s, pdp, pmp, pn, ppsp, pxp, rxp, s2c, trxpv};
use std::f64::consts::{FRAC_PI_2, TAU};

/// Right ascension of the solar north pole (ICRS), deg.
const POLE_RA_DEG: f64 = 286.13;
/// Declination of the solar north pole (ICRS), deg.
const POLE_DEC_DEG: f64 = 63.87;
/// Prime meridian at J2000.0, deg.
const MERIDIAN_DEG: f64 = 84.176;
/// Sidereal rotation of the prime meridian, deg per day.
const ROTATION_DEG_PER_DAY: f64 = 14.1844;
/// UT1 - UTC is kept within 0.9 s by definition; a rounded or predicted value may exceed that.
const LARGEST_UT1_MINUS_UTC_S: f64 = 1.0;

/// The Sun as seen from a place, without refraction.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct SunPlace {
    /// True zenith distance of the centre, from the plumb line's zenith, rad.
    pub zenith_true_rad: f64,
    /// Azimuth of the centre, from north through east, 0 to 2 pi, rad.
    pub azimuth_rad: f64,
    /// Hour angle, positive west, -pi to pi, rad.
    pub hour_angle_rad: f64,
    /// Topocentric apparent right ascension (true equator and equinox of date), 0 to 2 pi, rad.
    pub right_ascension_rad: f64,
    /// Topocentric apparent declination, rad.
    pub declination_rad: f64,
    /// Position angle of the zenith at the Sun, positive west of the meridian, rad.
    pub parallactic_rad: f64,
    /// Position angle `P` of the solar north pole, from the celestial north through east, rad.
    pub axis_rad: f64,
    /// Heliographic latitude `B0` of the disk's centre, rad.
    pub b0_rad: f64,
    /// Carrington longitude `L0` of the disk's centre, 0 to 2 pi, rad.
    pub l0_rad: f64,
    /// Distance from the observer to where the Sun was when the light left it, au.
    pub distance_au: f64,
    /// Rate of that distance, positive when it grows, m/s.
    pub radial_velocity_m_s: f64,
}

impl SunPlace {
    /// True altitude of the centre, rad.
    pub fn altitude_true_rad(&self) -> f64 {
        FRAC_PI_2 - self.zenith_true_rad
    }

    /// By what factor aberration enlarges the disk that `distance_au` alone predicts, `1 + v / c`:
    /// an observer who recedes sees it larger, by up to 1.6 mas.
    pub fn aberration_scale(&self) -> f64 {
        1.0 + self.radial_velocity_m_s / CMPS
    }
}

/// The Sun as an almanac lists it: from the centre of the Earth.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct GeocentricSun {
    /// Apparent right ascension (true equator and equinox of date), 0 to 2 pi, rad.
    pub right_ascension_rad: f64,
    /// Apparent declination, rad.
    pub declination_rad: f64,
    /// Position angle `P` of the solar north pole, rad.
    pub axis_rad: f64,
    /// Heliographic latitude `B0` of the disk's centre, rad.
    pub b0_rad: f64,
    /// Carrington longitude `L0` of the disk's centre, 0 to 2 pi, rad.
    pub l0_rad: f64,
    /// Distance, au.
    pub distance_au: f64,
}

/// The Sun at a time and place; `ut1_minus_utc_s` is that of the time.
///
/// # Errors
///
/// [`SkyError::DateOutOfRange`] and [`SkyError::ValueOutOfRange`]. A Sun below the horizon is no
/// error here: see [`require_above_horizon`].
pub fn sun(at: Utc, place: &Place, ut1_minus_utc_s: f64) -> Result<SunPlace, SkyError> {
    let ut1_minus_tai_s = ut1_minus_tai_s(at, ut1_minus_utc_s)?;
    place.require_possible()?;
    Ok(on_the_ground(
        &apparent(at, Some(place), ut1_minus_tai_s)?,
        place,
    ))
}

/// The Sun at a time, seen from the Earth's centre: for comparison with almanacs.
///
/// # Errors
///
/// [`SkyError::DateOutOfRange`].
pub fn geocentric_sun(at: Utc) -> Result<GeocentricSun, SkyError> {
    at.require_known_leap_seconds()?;
    let seen = apparent(at, None, -at.tai_minus_utc_s())?;
    Ok(GeocentricSun {
        right_ascension_rad: seen.right_ascension_rad.rem_euclid(TAU),
        declination_rad: seen.declination_rad,
        axis_rad: seen.axis_rad,
        b0_rad: seen.b0_rad,
        l0_rad: seen.l0_rad.rem_euclid(TAU),
        distance_au: seen.distance_au,
    })
}

/// Asks that the Sun's centre stand above the true horizon (refraction lifts it by half a degree more).
///
/// # Errors
///
/// [`SkyError::BelowHorizon`], with the altitude and the time.
pub fn require_above_horizon(at: Utc, sun: &SunPlace) -> Result<(), SkyError> {
    let altitude_deg = sun.altitude_true_rad() / DEG_RAD;
    if altitude_deg > 0.0 {
        return Ok(());
    }
    Err(SkyError::BelowHorizon {
        altitude_deg,
        time: at.to_iso(),
    })
}

/// Where the Sun is on the sky of date, before the place's horizon is brought in.
#[derive(Clone, Copy, Debug)]
pub(super) struct Apparent {
    pub(super) sidereal_rad: f64,
    pub(super) right_ascension_rad: f64,
    pub(super) declination_rad: f64,
    pub(super) axis_rad: f64,
    pub(super) b0_rad: f64,
    pub(super) l0_rad: f64,
    pub(super) distance_au: f64,
    pub(super) radial_velocity_m_s: f64,
}

/// UT1 - TAI, which unlike UT1 - UTC does not jump with a leap second.
pub(super) fn ut1_minus_tai_s(at: Utc, ut1_minus_utc_s: f64) -> Result<f64, SkyError> {
    at.require_known_leap_seconds()?;
    within("UT1 - UTC", ut1_minus_utc_s, LARGEST_UT1_MINUS_UTC_S, "s")?;
    Ok(ut1_minus_utc_s - at.tai_minus_utc_s())
}

/// The apparent Sun; without a place, from the Earth's centre.
pub(super) fn apparent(
    at: Utc,
    place: Option<&Place>,
    ut1_minus_tai_s: f64,
) -> Result<Apparent, SkyError> {
    let (tt1, tt2) = at.tt_jd();
    let (ut1, ut2) = at.jd_of_tai_plus(ut1_minus_tai_s);
    let to_date = sofars::pnp::pnm06a(tt1, tt2);
    let sidereal_rad = sofars::erst::gst06(ut1, ut2, tt1, tt2, &to_date);
    let Some((heliocentric, barycentric)) = sofars::eph::epv00(tt1, tt2) else {
        return Err(at.date_out_of_range());
    };

    let mut observer = barycentric;
    if let Some(place) = place {
        let (mut of_date, mut turned) = ([[0.0; 3]; 2], [[0.0; 3]; 2]);
        let (longitude, latitude) = (place.longitude_rad, place.latitude_rad);
        let (height, turn) = (place.height_m, sidereal_rad);
        sofars::astro::pvtob(
            longitude,
            latitude,
            height,
            0.0,
            0.0,
            0.0,
            turn,
            &mut of_date,
        );
        trxpv(&to_date, &of_date, &mut turned);
        observer[0] = ppsp(&observer[0], 1.0 / ASTRONOMICAL_UNIT.value, &turned[0]);
        observer[1] = ppsp(&observer[1], DAYSEC / ASTRONOMICAL_UNIT.value, &turned[1]);
    }

    // The Sun moves 13 m/s about the barycentre: its path over the light time is a straight line.
    let sun = sofars::vm::pvmpv(&barycentric, &heliocentric);
    let mut light_days = pn(&heliocentric[0]).0 / DC;
    let mut to_sun = [0.0; 3];
    for _ in 0..2 {
        to_sun = pmp(&ppsp(&sun[0], -light_days, &sun[1]), &observer[0]);
        light_days = pn(&to_sun).0 / DC;
    }
    let (distance_au, direction) = pn(&to_sun);

    let velocity_c = observer[1].map(|it| it / DC);
    let lorentz_inverse = (1.0 - pdp(&velocity_c, &velocity_c)).sqrt();
    let seen = |from: &[f64; 3]| {
        let mut of_date = [0.0; 3];
        let bent = sofars::astro::ab(from, &velocity_c, distance_au, lorentz_inverse);
        rxp(&to_date, &bent, &mut of_date);
        c2s(&of_date)
    };
    let centre = seen(&direction);
    let pole = s2c(POLE_RA_DEG * DEG_RAD, POLE_DEC_DEG * DEG_RAD);
    let radius_per_distance = SOLAR_RADIUS_NOMINAL.value / ASTRONOMICAL_UNIT.value / distance_au;
    let north = seen(&pn(&ppsp(&direction, radius_per_distance, &pole)).1);

    // The solar equator's ascending node on the ICRS equator is 90 degrees east of the pole.
    let node = s2c(POLE_RA_DEG * DEG_RAD + FRAC_PI_2, 0.0);
    let from_node_rad = (-pdp(&direction, &pxp(&pole, &node))).atan2(-pdp(&direction, &node));
    let days = (tt1 - DJ00) + tt2 - light_days;
    // Whole turns are dropped first, so that no digit is lost to them.
    let meridian_deg = (MERIDIAN_DEG + ROTATION_DEG_PER_DAY * days).rem_euclid(360.0);
    let receding_au_per_day = pdp(&pmp(&sun[1], &observer[1]), &direction);
    Ok(Apparent {
        sidereal_rad,
        right_ascension_rad: centre.0,
        declination_rad: centre.1,
        axis_rad: position_angle_rad(centre, north),
        b0_rad: (-pdp(&direction, &pole)).asin(),
        l0_rad: from_node_rad - meridian_deg * DEG_RAD,
        distance_au,
        radial_velocity_m_s: receding_au_per_day * ASTRONOMICAL_UNIT.value / DAYSEC,
    })
}

/// The apparent Sun over the place's horizon.
pub(super) fn on_the_ground(seen: &Apparent, place: &Place) -> SunPlace {
    let (longitude_rad, latitude_rad) = place.zenith_rad();
    let hour_angle_rad = wrapped_rad(seen.sidereal_rad + longitude_rad - seen.right_ascension_rad);
    let declination_rad = seen.declination_rad;
    let [azimuth_rad, altitude_rad] =
        sofars::coords::hd2ae(hour_angle_rad, declination_rad, latitude_rad);
    SunPlace {
        zenith_true_rad: FRAC_PI_2 - altitude_rad,
        azimuth_rad,
        hour_angle_rad,
        right_ascension_rad: seen.right_ascension_rad.rem_euclid(TAU),
        declination_rad,
        parallactic_rad: sofars::coords::hd2pa(hour_angle_rad, declination_rad, latitude_rad),
        axis_rad: wrapped_rad(seen.axis_rad),
        b0_rad: seen.b0_rad,
        l0_rad: seen.l0_rad.rem_euclid(TAU),
        distance_au: seen.distance_au,
        radial_velocity_m_s: seen.radial_velocity_m_s,
    }
}

/// Position angle, north through east, of `to` as seen from `from`; both longitude and latitude.
fn position_angle_rad(from: (f64, f64), to: (f64, f64)) -> f64 {
    let ((sin_from, cos_from), (sin_to, cos_to)) = (from.1.sin_cos(), to.1.sin_cos());
    let (sin_east, cos_east) = (to.0 - from.0).sin_cos();
    (sin_east * cos_to).atan2(sin_to * cos_from - cos_to * sin_from * cos_east)
}
