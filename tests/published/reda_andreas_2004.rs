//! Source: I. Reda & A. Andreas, "Solar position algorithm for solar radiation applications", Solar
//! Energy 76, 577 (2004), NREL/TP-560-34302, appendix A.5: 2003-10-17 12:30:30 at UTC - 7 h, 105.1786
//! W, 39.742476 N, 1830.14 m, TT - UT1 = 67 s.

use truelimb::sky::{Place, SunPlace, Utc, sun};
use truelimb::units::DEG_RAD;

/// The method's own stated uncertainty.
const STATED_DEG: f64 = 3e-4;

/// The example's 67 s are 2.5 s more than the true TT - UT1, which UT1 - UTC within 1 s cannot give.
/// UT1 is kept, and the Sun stands where it stood 1.9 s earlier: 2e-5 deg along the ecliptic.
fn golden() -> SunPlace {
    let place = Place {
        latitude_rad: 39.742476 * DEG_RAD,
        longitude_rad: -105.1786 * DEG_RAD,
        height_m: 1830.14,
        ..Place::default()
    };
    sun(Utc::parse("2003-10-17T19:30:30.9Z").unwrap(), &place, -0.9).unwrap()
}

#[test]
fn topocentric_place() {
    let sun = golden();
    let printed = [
        (sun.right_ascension_rad, 202.22704),
        (sun.declination_rad, -9.316179),
        (sun.hour_angle_rad, 11.10629),
        (sun.altitude_true_rad(), 39.872046),
        (sun.azimuth_rad, 194.340241),
    ];
    for (found_rad, printed_deg) in printed {
        let found_deg = found_rad / DEG_RAD;
        assert!(
            (found_deg - printed_deg).abs() < STATED_DEG,
            "{found_deg} vs {printed_deg}"
        );
    }
}

/// The printed distance is that of the Earth's centre: the observer is nearer by the part of the
/// Earth's radius that points to the Sun.
#[test]
fn distance() {
    let sun = golden();
    let earth_radius_au = 4.2635e-5;
    let geocentric_au = sun.distance_au + earth_radius_au * sun.zenith_true_rad.cos();
    // The example's series has 40 terms: 1e-6 au.
    assert!(
        (geocentric_au - 0.9965422974).abs() < 1e-6,
        "{geocentric_au}"
    );
}
