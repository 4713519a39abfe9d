//! Source: transits of the Sun at 12 dates over an invented place, computed once with the library astropy:
//! `tests/data/drift_checks.csv` (see `sun_place.rs` for what that library does to the Sun's light). The
//! last columns say what three wrong rates would do to the radius; the right formula must beat them.

use std::collections::HashMap;
use truelimb::drift::{
    motion_position_angle_rad, path_turn_rad, rolling_shutter, sagitta_rad, semidiameter_rad,
    transit_s,
};
use truelimb::sky::{Place, Utc, rates, sun};
use truelimb::units::{ARCSEC_RAD, DEG_RAD, MAS_RAD};

type Row = HashMap<String, String>;

fn rows() -> Vec<Row> {
    let path = format!("{}/tests/data/drift_checks.csv", env!("CARGO_MANIFEST_DIR"));
    let text = std::fs::read_to_string(path).unwrap();
    let mut lines = text.lines().filter(|line| !line.starts_with('#'));
    let heads: Vec<&str> = lines.next().unwrap().split(',').collect();
    lines
        .map(|line| {
            heads
                .iter()
                .map(ToString::to_string)
                .zip(line.split(',').map(str::to_owned))
                .collect()
        })
        .collect()
}

fn number(row: &Row, head: &str) -> f64 {
    row[head].parse().unwrap()
}

const RATE: &str = "dHA_dt_arcsec_per_s_topo";
const DURATION: &str = "T_transit_s(meridian slit; asin form)";

/// Declination, semidiameter, rate and duration as printed, rad and s.
fn printed(row: &Row) -> (f64, f64, f64, f64) {
    (
        number(row, "dec_topo_deg") * DEG_RAD,
        number(row, "SD_topo_arcsec") * ARCSEC_RAD,
        number(row, RATE) * ARCSEC_RAD,
        number(row, DURATION),
    )
}

/// Half the last digit of the duration, and what half the last digit of the printed semidiameter, 5e-5
/// arcsec, makes of it: 2 / (15 cos d) each.
fn duration_tolerance_s(declination: f64) -> f64 {
    5e-6 + 5e-5 * 2.0 / (15.0 * declination.cos())
}

#[test]
fn durations_to_the_printed_digit() {
    for row in rows() {
        let (declination, radius, rate, duration) = printed(&row);
        let found = transit_s(radius, declination, rate);
        let tolerance = duration_tolerance_s(declination);
        assert!(
            (found - duration).abs() < tolerance,
            "{}: {found} vs {duration}",
            row["utc_meridian_passage"]
        );
        // And back: half a digit of the duration is 0.04 mas.
        let back = semidiameter_rad(duration, declination, rate);
        assert!((back - radius).abs() < 0.09 * MAS_RAD);
    }
}

/// The whole way, from place and time alone. The table's Sun stands up to 0.4 arcsec off in the date that
/// `sun_place.rs` names (a spurious bending of light): its declination and with it the duration.
#[test]
fn durations_from_place_and_time() {
    let place = Place {
        latitude_rad: 38.2 * DEG_RAD,
        longitude_rad: -8.5 * DEG_RAD,
        height_m: 300.0,
        ..Place::default()
    };
    for row in rows() {
        let (declination, _, _, duration) = printed(&row);
        let time = Utc::parse(&row["utc_meridian_passage"]).unwrap();
        let at = sun(time, &place, 0.0).unwrap();
        let rates = rates(time, &place, 0.0).unwrap();
        let radius = (truelimb::constants::SOLAR_RADIUS_NOMINAL.value
            / (at.distance_au * truelimb::constants::ASTRONOMICAL_UNIT.value))
            .asin();
        let found = transit_s(radius, rates.declination_rad, rates.hour_angle_rad_s);
        // The rate is printed to 5e-8 arcsec/s and agrees to 1e-6 of itself (`sun_place.rs`).
        let bent_s = if row["utc_meridian_passage"].starts_with("2018-02-11") {
            duration * declination.tan().abs() * 1.2e-4 * DEG_RAD
        } else {
            duration * declination.tan().abs() * 1.2e-5 * DEG_RAD
        };
        let tolerance = duration_tolerance_s(declination) + 1e-6 * duration + bent_s;
        assert!(
            (found - duration).abs() < tolerance,
            "{time}: {found} vs {duration}"
        );
    }
}

/// Each wrong rate misses the radius by the printed error, to the printed digit; the right one does not.
#[test]
fn wrong_rates_miss_by_what_the_table_says() {
    let arcsec = ARCSEC_RAD;
    for row in rows() {
        let (declination, radius, rate, duration) = printed(&row);
        let off_mas =
            |rate: f64| (semidiameter_rad(duration, declination, rate) - radius) / MAS_RAD;
        let own = off_mas(rate);
        assert!(own.abs() < 0.09, "{own}");
        let geocentric = number(&row, "dHAdt_geo") * arcsec;
        for (wrong, head) in [
            (15.041_067 * arcsec, "R_error_mas_if_sidereal_15.041067"),
            (15.0 * arcsec, "R_error_mas_if_mean_solar_15.0"),
            (geocentric, "R_error_mas_if_geocentric_rate"),
        ] {
            let expected = number(&row, head);
            let found = off_mas(wrong);
            // Half a printed digit, and the right rate's own rounding.
            assert!(
                (found - expected).abs() < 0.05 + 0.09,
                "{head}: {found} vs {expected}"
            );
            assert!(found.abs() > 20.0 * own.abs());
        }
        let per_ms = 0.5 * rate * declination.cos() * 1e-3 / MAS_RAD;
        let expected = number(&row, "R_mas_per_ms_per_contact");
        // To first order in the radius; the table has the sphere's: 1e-4 of it.
        assert!((per_ms - expected).abs() < 0.0005 + 1e-4 * expected);
    }
}

/// Source: section on transits of the physics notes: 0.65 mas at 23.4 degrees, for the radius of 960
/// arcsec of those notes.
#[test]
fn the_plane_formula_misses_by_two_thirds_of_a_mas() {
    let (declination, radius, rate) = (23.4 * DEG_RAD, 960.0 * ARCSEC_RAD, 14.998 * ARCSEC_RAD);
    let duration = transit_s(radius, declination, rate);
    let plane = 0.5 * rate * duration * declination.cos();
    let off_mas = (plane - radius).abs() / MAS_RAD;
    assert!((off_mas - 0.65).abs() < 0.005, "{off_mas}");
}

#[test]
fn direction_of_the_motion() {
    for row in rows() {
        let (declination, _, rate, _) = printed(&row);
        let rate_north = number(&row, "dDec_dt_arcsec_per_s") * ARCSEC_RAD;
        let found = motion_position_angle_rad(declination, rate, rate_north);
        let north_arcmin = (found / DEG_RAD - 270.0) * 60.0;
        let expected = number(&row, "motion_PA_offset_arcmin(atan dDec/(dHA cosDec))");
        // Half a digit of it, and of the printed rate: 5e-8 / 15 rad.
        assert!(
            (north_arcmin - expected).abs() < 5e-5 + 2e-5,
            "{north_arcmin}"
        );
    }
}

/// Source: the physics notes: 13 arcmin over half a degree at 23.4 degrees, sagitta 3.4 arcsec.
#[test]
fn the_diurnal_path_is_curved() {
    let (half_degree, declination) = (0.5 * DEG_RAD, 23.4 * DEG_RAD);
    let turn_arcmin = path_turn_rad(half_degree, declination) / DEG_RAD * 60.0;
    assert!((turn_arcmin - 13.0).abs() < 0.5, "{turn_arcmin}");
    let sagitta_arcsec = sagitta_rad(half_degree, declination) / ARCSEC_RAD;
    assert!((sagitta_arcsec - 3.4).abs() < 0.05, "{sagitta_arcsec}");
}

/// Source: the physics notes: a drift of 15 arcsec/s along the rows, read out in 30 ms: 225 mas from
/// the smallest to the largest radius; guiding at 0.1 arcsec/s: 1.5 mas.
#[test]
fn a_rolling_shutter_makes_225_mas_of_a_drift() {
    for (arcsec_s, expected_mas) in [(15.0, 225.0), (0.1, 1.5)] {
        let figure = rolling_shutter(1000.0 * arcsec_s, 0.0, 0.030);
        assert!((figure.out_of_round() - expected_mas).abs() < 1e-9);
        assert!(figure.mean.abs() < 1e-12);
    }
    // Across the rows the radius along y changes by v T / 2.
    let figure = rolling_shutter(0.0, 15_000.0, 0.030);
    assert!((figure.mean - figure.cos2 - 225.0).abs() < 1e-9);
}
