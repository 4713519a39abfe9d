//! Source: J. Meeus, "Astronomical Algorithms" (2nd ed. 1998), examples 25.b (apparent Sun by the
//! complete theory) and 29.a (physical ephemeris), both for 1992 October 13.0 TD. From memory.

use truelimb::sky::{Utc, geocentric_sun};
use truelimb::units::{ARCSEC_RAD, DEG_RAD};

/// 0h of dynamical time: TT - UTC was 32.184 s + 27 s.
const TIME: &str = "1992-10-12T23:59:00.816";

#[test]
fn example_25b_apparent_place() {
    let sun = geocentric_sun(Utc::parse(TIME).unwrap()).unwrap();
    let right_ascension_rad = (13.0 * 3600.0 + 13.0 * 60.0 + 30.749) * 15.0 * ARCSEC_RAD;
    let declination_rad = -(7.0 * 3600.0 + 47.0 * 60.0 + 1.74) * ARCSEC_RAD;
    // The example leaves out frame bias and uses the nutation of 1980: 0.05 arcsec.
    let off = (sun.right_ascension_rad - right_ascension_rad) / ARCSEC_RAD;
    assert!(off.abs() < 0.06, "{off} arcsec");
    let off = (sun.declination_rad - declination_rad) / ARCSEC_RAD;
    assert!(off.abs() < 0.06, "{off} arcsec");
    let off_au = sun.distance_au - 0.99760853;
    assert!(off_au.abs() < 1e-7, "{off_au:e} au");
}

#[test]
fn example_29a_axis() {
    let sun = geocentric_sun(Utc::parse(TIME).unwrap()).unwrap();
    // Printed to 0.01 deg; the example's axis is Carrington's (inclination 7.25 deg, node 73.67 deg in
    // 1850), that used here was rounded to 0.01 deg from the same.
    let printed = [
        (sun.axis_rad, 26.27),
        (sun.b0_rad, 5.99),
        (sun.l0_rad, 238.63),
    ];
    for (found_rad, printed_deg) in printed {
        let found_deg = found_rad / DEG_RAD;
        assert!(
            (found_deg - printed_deg).abs() <= 0.01,
            "{found_deg} vs {printed_deg}"
        );
    }
}
