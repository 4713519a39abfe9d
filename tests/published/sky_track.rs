//! Source: the direct computation (`sky::sun`), which `sun_place.rs` holds against outside values; the
//! interpolated track must give the same. UT1 across a leap second: IERS Conventions, UT1 runs on.

use truelimb::sky::{Place, SkyError, SunPlace, SunTrack, Utc, require_above_horizon, sun};
use truelimb::units::{ARCSEC_RAD, wrapped_rad};

fn corrie_head() -> Place {
    let (latitude_deg, longitude_deg): (f64, f64) = (30.94, 57.38);
    Place {
        latitude_rad: latitude_deg.to_radians(),
        longitude_rad: longitude_deg.to_radians(),
        height_m: 2240.0,
        deflection_north_rad: 8.0 * ARCSEC_RAD,
        deflection_east_rad: -12.0 * ARCSEC_RAD,
    }
}

fn utc(text: &str) -> Utc {
    Utc::parse(text).unwrap()
}

/// Angles of the two, arcsec apart, those about the zenith as arcs on the sky.
fn apart_arcsec(a: &SunPlace, b: &SunPlace) -> f64 {
    let sin_z = b.zenith_true_rad.sin();
    let pairs = [
        (a.zenith_true_rad, b.zenith_true_rad, 1.0),
        (a.azimuth_rad, b.azimuth_rad, sin_z),
        (a.parallactic_rad, b.parallactic_rad, sin_z),
        (a.hour_angle_rad, b.hour_angle_rad, 1.0),
        (a.right_ascension_rad, b.right_ascension_rad, 1.0),
        (a.declination_rad, b.declination_rad, 1.0),
        (a.axis_rad, b.axis_rad, 1.0),
        (a.b0_rad, b.b0_rad, 1.0),
        (a.l0_rad, b.l0_rad, 1.0),
    ];
    pairs
        .map(|(x, y, weight)| wrapped_rad(x - y).abs() * weight / ARCSEC_RAD)
        .into_iter()
        .fold(0.0, f64::max)
}

fn worst(
    first: Utc,
    last: Utc,
    dut1_s: f64,
    dut1_after: impl Fn(Utc) -> f64,
    steps: usize,
) -> (f64, f64, f64) {
    let place = corrie_head();
    let track = SunTrack::new(first, last, &place, dut1_s).unwrap();
    let step_s = last.minus(first) / steps as f64;
    let mut worst = (0.0_f64, 0.0_f64, 0.0_f64);
    for step in 0..=steps {
        let at = if step == steps {
            last
        } else {
            first.plus_s(step_s * step as f64)
        };
        let direct = sun(at, &place, dut1_after(at)).unwrap();
        let quick = track.at(at).unwrap();
        worst.0 = worst.0.max(apart_arcsec(&quick, &direct));
        worst.1 = worst.1.max((quick.distance_au - direct.distance_au).abs());
        worst.2 = worst
            .2
            .max((quick.radial_velocity_m_s - direct.radial_velocity_m_s).abs());
    }
    worst
}

/// Three days about an equinox, so that right ascension, hour angle and azimuth run round.
#[test]
fn between_nodes() {
    let (first, last) = (utc("2027-09-21T22:01:02.5"), utc("2027-09-24T22:30:00"));
    let (arcsec, au, m_s) = worst(first, last, 0.1, |_| 0.1, 1733);
    assert!(arcsec < 1e-5, "{arcsec:e} arcsec");
    assert!(au < 1e-11, "{au:e} au");
    assert!(m_s < 1e-3, "{m_s:e} m/s");
}

/// At the nodes the direct values come back, to the rounding of angles of many turns.
#[test]
fn at_nodes() {
    let (first, last) = (utc("2027-06-21T05:00:00"), utc("2027-06-21T13:00:00"));
    let (arcsec, au, _) = worst(first, last, 0.0, |_| 0.0, 48);
    assert!(arcsec < 1e-8, "{arcsec:e} arcsec");
    assert!(au < 1e-15, "{au:e} au");
}

/// The prime meridian's angle passes through a whole turn at 2027-06-07T16:02:44.
#[test]
fn across_a_turn_of_the_sun() {
    let (first, last) = (utc("2027-06-07T15:40:00"), utc("2027-06-07T16:30:00"));
    let (arcsec, _, _) = worst(first, last, 0.0, |_| 0.0, 300);
    assert!(arcsec < 1e-5, "{arcsec:e} arcsec");
}

/// UT1 - UTC jumped from -0.41 s to +0.59 s; UT1 itself, and the Sun, did not.
#[test]
fn across_a_leap_second() {
    let (first, last) = (utc("2016-12-31T23:40:00"), utc("2017-01-01T00:20:00"));
    let midnight = utc("2017-01-01T00:00:00");
    let dut1_after = |at: Utc| if at < midnight { -0.41 } else { 0.59 };
    let (arcsec, _, _) = worst(first, last, -0.41, dut1_after, 977);
    assert!(arcsec < 1e-5, "{arcsec:e} arcsec");
}

#[test]
fn a_single_moment_is_a_track() {
    let at = utc("2027-06-21T09:00:00");
    let track = SunTrack::new(at, at, &corrie_head(), 0.0).unwrap();
    let direct = sun(at, &corrie_head(), 0.0).unwrap();
    assert!(apart_arcsec(&track.at(at).unwrap(), &direct) < 1e-8);
}

#[test]
fn refusals() {
    let (first, last) = (utc("2027-06-21T05:00:00"), utc("2027-06-21T13:00:00"));
    let place = corrie_head();
    let track = SunTrack::new(first, last, &place, 0.0).unwrap();
    for outside in [
        first.plus_s(-0.001),
        last.plus_s(0.001),
        first.plus_s(f64::NAN),
        last.plus_s(1e9),
    ] {
        assert!(
            matches!(track.at(outside), Err(SkyError::OutsideTrack { .. })),
            "{outside}"
        );
    }
    assert!(matches!(
        SunTrack::new(last, first, &place, 0.0),
        Err(SkyError::TrackReversed { .. })
    ));
    for dut1_s in [1.5, -1.5, f64::NAN] {
        let error = sun(first, &place, dut1_s).unwrap_err();
        assert!(matches!(error, SkyError::ValueOutOfRange { .. }), "{error}");
    }
    for bad in [
        Place {
            latitude_rad: 1.6,
            ..place
        },
        Place {
            longitude_rad: 57.38,
            ..place
        },
        Place {
            height_m: 2.24e6,
            ..place
        },
        Place {
            height_m: f64::NAN,
            ..place
        },
        Place {
            deflection_north_rad: 8.0,
            ..place
        },
    ] {
        assert!(
            matches!(sun(first, &bad, 0.0), Err(SkyError::ValueOutOfRange { .. })),
            "{bad:?}"
        );
    }
    let far = first.plus_s(1e9);
    assert!(matches!(
        sun(far, &place, 0.0),
        Err(SkyError::DateOutOfRange { .. })
    ));
    assert!(matches!(
        SunTrack::new(first, far, &place, 0.0),
        Err(SkyError::DateOutOfRange { .. })
    ));
}

#[test]
fn night_is_named() {
    let (noon, midnight) = (utc("2027-06-21T08:10:00"), utc("2027-06-21T20:10:00"));
    let place = corrie_head();
    require_above_horizon(noon, &sun(noon, &place, 0.0).unwrap()).unwrap();
    let error = require_above_horizon(midnight, &sun(midnight, &place, 0.0).unwrap()).unwrap_err();
    assert!(matches!(error, SkyError::BelowHorizon { altitude_deg, .. } if altitude_deg < -30.0));
    assert!(
        error.to_string().contains("2027-06-21T20:10:00.000"),
        "{error}"
    );
}
