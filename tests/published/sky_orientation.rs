//! Source: definitions of position angle (FITS celestial conventions: north through east) and of the
//! plumb line's deflection, followed point by point on the sphere; SOFA test of `iauHd2pa`; the physics
//! of aberration (apex of the Earth's motion).

use std::f64::consts::{FRAC_PI_2, PI};
use truelimb::sky::{
    Mount, Orientation, Parity, Place, SunPlace, Utc, orientation, parallactic_at_zenith_rad,
    rates, sun,
};
use truelimb::units::{ARCSEC_RAD, DEG_RAD, wrapped_rad};

const STEP_RAD: f64 = ARCSEC_RAD;

fn place(latitude_deg: f64) -> Place {
    Place {
        latitude_rad: latitude_deg * DEG_RAD,
        longitude_rad: 57.38 * DEG_RAD,
        height_m: 2240.0,
        ..Place::default()
    }
}

fn at(text: &str) -> Utc {
    Utc::parse(text).unwrap()
}

/// Unit vector (south, east, up) of hour angle and declination: the definition, by three axes.
fn horizon(hour_angle_rad: f64, declination_rad: f64, latitude_rad: f64) -> [f64; 3] {
    let meridian = declination_rad.cos() * hour_angle_rad.cos();
    let north_pole = declination_rad.sin();
    [
        meridian * latitude_rad.sin() - north_pole * latitude_rad.cos(),
        -declination_rad.cos() * hour_angle_rad.sin(),
        meridian * latitude_rad.cos() + north_pole * latitude_rad.sin(),
    ]
}

/// Altitude and azimuth (north through east) of such a vector.
fn altitude_azimuth(v: [f64; 3]) -> (f64, f64) {
    (v[2].asin(), v[1].atan2(-v[0]))
}

#[test]
fn zenith_azimuth_and_parallactic_angle_agree_with_the_sphere() {
    for latitude_deg in [-54.0, -31.4, 0.5, 30.94, 60.0] {
        for time in [
            "2026-03-20T04:00:00",
            "2026-06-21T08:11:00",
            "2026-11-03T11:30:00",
        ] {
            let place = place(latitude_deg);
            let sun = sun(at(time), &place, 0.0).unwrap();
            let point = |east_rad: f64, north_rad: f64| {
                let hour_angle = sun.hour_angle_rad - east_rad / sun.declination_rad.cos();
                altitude_azimuth(horizon(
                    hour_angle,
                    sun.declination_rad + north_rad,
                    place.latitude_rad,
                ))
            };
            let here = point(0.0, 0.0);
            assert!((here.0 - sun.altitude_true_rad()).abs() < 1e-12);
            assert!(wrapped_rad(here.1 - sun.azimuth_rad).abs() < 1e-12);
            // A step towards the zenith, taken along its position angle, climbs and keeps its azimuth.
            let (east, north) = sun.parallactic_rad.sin_cos();
            let there = point(STEP_RAD * east, STEP_RAD * north);
            assert!(
                (there.0 - here.0 - STEP_RAD).abs() < 1e-4 * STEP_RAD,
                "{latitude_deg} {time}"
            );
            assert!(wrapped_rad(there.1 - here.1).abs() * here.0.cos() < 1e-4 * STEP_RAD);
            // West of the meridian it is positive.
            assert!(
                sun.parallactic_rad * sun.hour_angle_rad > 0.0,
                "{latitude_deg} {time}"
            );
        }
    }
}

fn upright() -> Orientation {
    Orientation {
        y_position_angle_rad: 0.0,
        parity: Parity::Sky,
    }
}

/// North up, as the sky is seen: west is right, east is left.
#[test]
fn north_up() {
    let deg = |it: Orientation, theta: f64| it.position_angle_rad(theta * DEG_RAD) / DEG_RAD;
    assert!((deg(upright(), 90.0) - 0.0).abs() < 1e-9, "+y is north");
    assert!((deg(upright(), 0.0) - 270.0).abs() < 1e-9, "+x is west");
    assert!((deg(upright(), 180.0) - 90.0).abs() < 1e-9, "-x is east");
    let mirrored = Orientation {
        parity: Parity::Mirrored,
        ..upright()
    };
    assert!((deg(mirrored, 90.0) - 0.0).abs() < 1e-9, "+y is north");
    assert!((deg(mirrored, 0.0) - 90.0).abs() < 1e-9, "+x is east");
    // A camera whose +y lies east of north.
    let turned = Orientation {
        y_position_angle_rad: 10.0 * DEG_RAD,
        ..upright()
    };
    assert!((deg(turned, 90.0) - 10.0).abs() < 1e-9);
    assert!((deg(turned, 0.0) - 280.0).abs() < 1e-9);
}

#[test]
fn there_and_back() {
    for parity in [Parity::Sky, Parity::Mirrored] {
        for y_deg in [-170.0, -3.2, 0.0, 45.0, 300.0] {
            let it = Orientation {
                y_position_angle_rad: y_deg * DEG_RAD,
                parity,
            };
            for theta_deg in [-179.0, -90.0, 0.0, 33.0, 180.0] {
                let theta_rad = theta_deg * DEG_RAD;
                let back = it.detector_angle_rad(it.position_angle_rad(theta_rad));
                assert!(
                    wrapped_rad(back - theta_rad).abs() < 1e-12,
                    "{parity:?} {y_deg} {theta_deg}"
                );
                assert!(back > -PI && back <= PI);
            }
        }
    }
}

fn afternoon() -> SunPlace {
    sun(at("2026-06-21T12:00:00"), &place(30.94), 0.0).unwrap()
}

#[test]
fn mounts() {
    let sun = afternoon();
    let (camera, roll) = (3.2 * DEG_RAD, 45.0 * DEG_RAD);
    let y = |mount| orientation(mount, camera, roll, Parity::Sky, &sun).y_position_angle_rad;
    for mount in [Mount::Equatorial, Mount::Coelostat] {
        assert!(wrapped_rad(y(mount) - camera - roll).abs() < 1e-12);
    }
    // An upright camera that follows in altitude and azimuth has the zenith at +y.
    for mount in [Mount::Altazimuth, Mount::Fixed] {
        let upright = orientation(mount, 0.0, 0.0, Parity::Sky, &sun);
        let zenith_rad = upright.detector_angle_rad(sun.parallactic_rad);
        assert!((zenith_rad - FRAC_PI_2).abs() < 1e-12);
        assert!(wrapped_rad(y(mount) - camera - roll - sun.parallactic_rad).abs() < 1e-12);
    }
}

/// On an upright equatorial camera the Sun drifts to +x, west.
#[test]
fn drift_goes_west() {
    let rates = rates(at("2026-03-20T12:00:00"), &place(30.94), 0.0).unwrap();
    let theta_rad = upright().detector_angle_rad(rates.drift_position_angle_rad());
    // Northward in March: +3.77 arcmin at most (atan of 0.0165 / 15.0035).
    assert!(
        theta_rad > 0.0 && theta_rad < 4.0 / 60.0 * DEG_RAD,
        "{theta_rad}"
    );
    assert!((rates.drift_rad_s() / ARCSEC_RAD - 15.0035).abs() < 1e-3);
}

/// SOFA test of `iauHd2pa`: hour angle 1.1, declination 1.2, latitude 0.3 rad; the Sun never stands
/// there, the triangle does not mind.
#[test]
#[expect(clippy::excessive_precision, reason = "digits as printed")]
fn parallactic_angle_on_a_vertical() {
    let place = Place {
        latitude_rad: 0.3,
        ..Place::default()
    };
    let v = horizon(1.1, 1.2, 0.3);
    let (altitude_rad, azimuth_rad) = altitude_azimuth(v);
    let sun = SunPlace {
        azimuth_rad,
        ..afternoon()
    };
    let found = parallactic_at_zenith_rad(&place, &sun, FRAC_PI_2 - altitude_rad);
    assert!((found - 1.906227428001995580).abs() < 1e-12, "{found}");
}

#[test]
fn refraction_turns_the_vertical_little() {
    let place = place(30.94);
    let sun = afternoon();
    let same = parallactic_at_zenith_rad(&place, &sun, sun.zenith_true_rad);
    assert!(wrapped_rad(same - sun.parallactic_rad).abs() < 1e-12);
    let lifted = parallactic_at_zenith_rad(&place, &sun, sun.zenith_true_rad - 60.0 * ARCSEC_RAD);
    let turned_arcmin = wrapped_rad(lifted - sun.parallactic_rad) / DEG_RAD * 60.0;
    // Along a vertical dq/dz = -sin q tan d, from tan d = (sin phi cos z + cos phi sin z cos A) / cos d.
    let expected = sun.parallactic_rad.sin() * sun.declination_rad.tan();
    assert!(
        (turned_arcmin - expected).abs() < 1e-3,
        "{turned_arcmin} vs {expected}"
    );
}

/// A zenith 10 arcsec further north brings a Sun in the south 10 arcsec further from it; one further
/// east brings a Sun in the west further from it.
#[test]
fn deflection_of_the_vertical() {
    let ten = 10.0 * ARCSEC_RAD;
    let plain = place(30.94);
    let north = Place {
        deflection_north_rad: ten,
        ..plain
    };
    let east = Place {
        deflection_east_rad: ten,
        ..plain
    };
    for time in [
        "2026-11-03T07:55:00",
        "2026-03-20T04:00:00",
        "2026-06-21T12:00:00",
    ] {
        let [plain, north, east] = [plain, north, east].map(|it| sun(at(time), &it, 0.0).unwrap());
        let (sin_a, cos_a) = plain.azimuth_rad.sin_cos();
        let off = (north.zenith_true_rad - plain.zenith_true_rad + ten * cos_a) / ARCSEC_RAD;
        assert!(off.abs() < 1e-3, "{time} north: {off} arcsec");
        let off = (east.zenith_true_rad - plain.zenith_true_rad + ten * sin_a) / ARCSEC_RAD;
        assert!(off.abs() < 1e-3, "{time} east: {off} arcsec");
        // The Sun itself does not move.
        assert!((north.declination_rad - plain.declination_rad).abs() < 1e-15);
        assert!((east.distance_au - plain.distance_au).abs() < 1e-15);
    }
}

/// The Earth recedes from January to July and the station turns towards the morning Sun: at most
/// 0.4986 km/s and 465.1 cos(latitude) m/s (orbit: eccentricity 0.0167 times 29.785 km/s).
#[test]
fn radial_velocity() {
    let receding_m_s = |date: &str| {
        let place = place(30.94);
        let at = at(date);
        let (a, b) = (
            sun(at.plus_s(-10.0), &place, 0.0).unwrap(),
            sun(at.plus_s(10.0), &place, 0.0).unwrap(),
        );
        let sun = sun(at, &place, 0.0).unwrap();
        let by_distance_m_s = (b.distance_au - a.distance_au) * 149_597_870_700.0 / 20.0;
        assert!(
            (by_distance_m_s - sun.radial_velocity_m_s).abs() < 0.1,
            "{by_distance_m_s} {sun:?}"
        );
        assert!(
            (sun.aberration_scale() - 1.0 - sun.radial_velocity_m_s / 299_792_458.0).abs() < 1e-15
        );
        sun.radial_velocity_m_s
    };
    assert!((receding_m_s("2026-04-03T08:14:00") - 497.0).abs() < 25.0);
    assert!((receding_m_s("2026-10-05T08:00:00") + 497.0).abs() < 25.0);
    // Six hours either side of the passage of the meridian, at the equinox.
    let (east, west) = (
        receding_m_s("2026-03-20T02:30:00"),
        receding_m_s("2026-03-20T14:00:00"),
    );
    assert!(
        (west - east - 2.0 * 465.1 * (30.94 * DEG_RAD).cos()).abs() < 20.0,
        "{east} {west}"
    );
}
