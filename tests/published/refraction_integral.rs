//! Source: `integral_grid.csv`, an outside library's refraction integral (PAL) run on 3240 cases;
//! Pulkovo refraction tables, 5th edition, as the published fit in `pulkovo_check.csv`; the library's
//! own unit test (from memory). `integral_reference.csv` and `horizon_flattening.csv`: regression
//! values, not an outside source.

use super::refraction_tables::{Worst, table};
use truelimb::air::{
    AirError, Conditions, LapseLayer, LayeredGas, Profile, ProfileSettings, RefractivityFormula,
    Site, SoundingLevel, StationAir, VapourConvention, gravity_m_s2, local_radius_m,
    standard_pressure_hpa,
};
use truelimb::units::{ARCSEC_RAD, DEG_RAD};

/// `g M/R` of the reference models, in K/m.
const REFERENCE_K_PER_M: f64 = 9.80665 * 0.0289644 / 8.31446;

/// The outside library's radius of the Earth, in metres.
const LIBRARY_RADIUS_M: f64 = 6_378_120.0;

fn lapse(top_m: f64, lapse_k_per_km: f64) -> LapseLayer {
    LapseLayer {
        top_m,
        lapse_k_per_m: lapse_k_per_km / 1000.0,
    }
}

fn gas(refractivity: f64, temperature_k: f64, radius_m: f64) -> LayeredGas {
    LayeredGas {
        radius_m,
        refractivity,
        temperature_k,
        hydrostatic_k_per_m: REFERENCE_K_PER_M,
    }
}

fn us_1976() -> Vec<LapseLayer> {
    vec![
        lapse(11_000.0, 6.5),
        lapse(20_000.0, 0.0),
        lapse(32_000.0, -1.0),
        lapse(47_000.0, -2.8),
        lapse(51_000.0, 0.0),
        lapse(71_000.0, 2.8),
        lapse(84_852.0, 2.0),
    ]
}

fn reference_model(name: &str) -> Profile {
    let sea = gas(2.8e-4, 288.15, 6_371_000.0);
    match &name[..2] {
        "M1" => Profile::layered(&sea, &[lapse(11_000.0, 6.5), lapse(100_000.0, 0.0)]),
        "M2" => Profile::layered(&sea, &[lapse(11_000.0, 0.0), lapse(100_000.0, 0.0)]),
        "M3" => Profile::layered(
            &gas(2.06e-4, 283.15, 6_373_600.0),
            &[lapse(8_400.0, 6.5), lapse(97_400.0, 0.0)],
        ),
        "M4" => Profile::layered(&sea, &us_1976()),
        _ => panic!("{name}"),
    }
    .unwrap()
}

#[test]
fn reference_models() {
    let (mut high, mut low) = (Worst::default(), Worst::default());
    let mut by_height = Worst::default();
    let mut rows = 0;
    for row in table("integral_reference.csv").rows() {
        let profile = reference_model(row.text("model"));
        let zenith_deg = row.number("z_obs_deg");
        let expected = row.number("R_psi_arcsec");
        let seen = profile.refraction_rad(zenith_deg * DEG_RAD) / ARCSEC_RAD;
        let place = || format!("{} at {zenith_deg}", row.text("model"));
        if zenith_deg <= 80.0 {
            high.meet(seen - expected, place);
            let other = profile.refraction_by_height_rad(zenith_deg * DEG_RAD) / ARCSEC_RAD;
            by_height.meet(other - seen, place);
        } else {
            low.meet(seen - expected, place);
        }
        rows += 1;
    }
    assert_eq!(rows, 64);
    high.assert_within(1e-6, "reference models to 80 degrees, arcsec");
    low.assert_within(1e-5, "reference models beyond 80 degrees, arcsec");
    by_height.assert_within(1e-8, "height form against angle form, arcsec");
}

/// The outside library's settings: its Earth, top at 80 km, lapse rate of the row.
fn library_air(c: Conditions, site: Site, lapse_k_per_m: f64) -> StationAir {
    StationAir {
        formula: RefractivityFormula::Iag1999,
        settings: ProfileSettings {
            lapse_k_per_m,
            top_m: 80_000.0,
            ..ProfileSettings::default()
        },
        local_radius_m: LIBRARY_RADIUS_M,
        ..StationAir::new(site, c, 0.0)
    }
}

#[test]
fn outside_integral_on_a_grid() {
    let mut worst = Worst::default();
    let mut rows = 0;
    for row in table("integral_grid.csv").rows() {
        let c = Conditions {
            pressure_hpa: row.number("P_hPa"),
            temperature_c: row.number("T_K") - 273.15,
            relative_humidity: row.number("RH_frac"),
            co2_ppm: 375.0,
        };
        let site = Site {
            latitude_rad: row.number("lat_deg") * DEG_RAD,
            height_m: row.number("height_m"),
        };
        let air = library_air(c, site, row.number("lapse_K_per_m"));
        let profile = air.profile(1000.0 * row.number("lambda_um")).unwrap();
        let zenith_deg = row.number("z_obs_deg");
        let seen = profile.refraction_rad(zenith_deg * DEG_RAD) / ARCSEC_RAD;
        worst.meet(seen - row.number("R_integral_pal"), || {
            format!("{zenith_deg}, {air:?}")
        });
        rows += 1;
    }
    assert_eq!(rows, 3240);
    worst.assert_within(2e-6, "outside integral, arcsec");
}

/// Unit test of the outside library, from memory: arguments (1.4 rad, 3456.7 m, 280 K, 678.9 hPa,
/// 0.9, 0.55 um, -0.3 rad, 0.006 K/m), result 0.00106715763018568 rad.
#[test]
fn unit_test_of_the_outside_library() {
    let c = Conditions {
        pressure_hpa: 678.9,
        temperature_c: 280.0 - 273.15,
        relative_humidity: 0.9,
        co2_ppm: 375.0,
    };
    let site = Site {
        latitude_rad: -0.3,
        height_m: 3456.7,
    };
    let profile = library_air(c, site, 0.006).profile(550.0).unwrap();
    let seen = profile.refraction_rad(1.4);
    assert!((seen - 0.00106715763018568).abs() < 1e-11, "{seen}");
}

/// The published fit holds to 0.002 arcsec for z below 60; the tables do not say how much carbon
/// dioxide they assume: 300 to 450 ppm moves the refraction by 0.0045 arcsec at 45 degrees.
#[test]
fn pulkovo_tables() {
    let (mut fit, mut regression) = (Worst::default(), Worst::default());
    for row in table("pulkovo_check.csv").rows() {
        let zenith_deg = row.number("z_obs_deg");
        for (co2_ppm, column) in [
            (300.0, "integral_Ciddor_300ppm"),
            (450.0, "integral_Ciddor_450ppm"),
        ] {
            let at = |top_m: f64| {
                pulkovo_air(co2_ppm, top_m).refraction_rad(zenith_deg * DEG_RAD) / ARCSEC_RAD
            };
            let place = || format!("{zenith_deg}, {co2_ppm} ppm");
            // The regression values stop at 80 km; real air does not.
            regression.meet(at(80_000.0) - row.number(column), place);
            let seen = at(100_000.0);
            if zenith_deg <= 60.0 {
                fit.meet(seen - row.number("Pulkovo5"), place);
            }
        }
    }
    fit.assert_within(0.005, "Pulkovo fit to 60 degrees, arcsec");
    regression.assert_within(1e-4, "regression values, arcsec");
}

/// 15 C, 1013.25 hPa, dry, 0.590 um, latitude 45, Ciddor.
fn pulkovo_air(co2_ppm: f64, top_m: f64) -> Profile {
    let c = Conditions {
        pressure_hpa: 1013.25,
        temperature_c: 15.0,
        relative_humidity: 0.0,
        co2_ppm,
    };
    let site = Site {
        latitude_rad: 45.0 * DEG_RAD,
        height_m: 0.0,
    };
    let settings = ProfileSettings {
        top_m,
        ..ProfileSettings::default()
    };
    StationAir {
        settings,
        local_radius_m: LIBRARY_RADIUS_M,
        ..StationAir::new(site, c, 0.0)
    }
    .profile(590.0)
    .unwrap()
}

/// Common practice, no source: the rising Sun is flattened by about a sixth. The value with four
/// digits is a regression value, not an outside source.
#[test]
fn sun_on_the_horizon() {
    let c = Conditions {
        pressure_hpa: 1013.25,
        temperature_c: 15.0,
        relative_humidity: 0.0,
        co2_ppm: 450.0,
    };
    let site = Site {
        latitude_rad: 45.0 * DEG_RAD,
        height_m: 0.0,
    };
    let air = StationAir {
        local_radius_m: LIBRARY_RADIUS_M,
        ..StationAir::new(site, c, 0.0)
    };
    let profile = air.profile(550.0).unwrap();
    let lower = 90.0 * DEG_RAD;
    let diameter = 2.0 * 959.2 * ARCSEC_RAD;
    let true_upper = lower + profile.refraction_rad(lower) - diameter;
    let mut upper = true_upper - 0.5 * DEG_RAD;
    for _ in 0..60 {
        upper = true_upper - profile.refraction_rad(upper);
    }
    let centre_true = true_upper + 0.5 * diameter;
    let mut centre = centre_true - 0.5 * DEG_RAD;
    for _ in 0..60 {
        centre = centre_true - profile.refraction_rad(centre);
    }
    let horizontal = diameter * centre.sin() / centre_true.sin();
    let flattening = 1.0 - (lower - upper) / horizontal;
    assert!((0.13..0.20).contains(&flattening), "{flattening}");
    assert!((flattening - 0.1530).abs() < 1e-4, "{flattening}");
    let lower_arcmin = profile.refraction_rad(lower) / ARCSEC_RAD / 60.0;
    assert!((lower_arcmin - 32.994).abs() < 1e-3, "{lower_arcmin}");
}

#[test]
fn vacuum_does_not_bend() {
    let profile =
        Profile::layered(&gas(0.0, 288.15, 6_371_000.0), &[lapse(100_000.0, 0.0)]).unwrap();
    for zenith_deg in [0.0, 30.0, 60.0, 85.0, 90.0] {
        assert!(profile.refraction_rad(zenith_deg * DEG_RAD).abs() < f64::MIN_POSITIVE);
    }
}

/// Bending grows with the zenith distance, is odd in it, and is nothing at the zenith.
#[test]
fn grows_with_the_zenith_distance() {
    let profile = pulkovo_air(420.0, 100_000.0);
    assert!(profile.refraction_rad(0.0).abs() < f64::MIN_POSITIVE);
    let mut before = 0.0;
    for tenth in 1..=900 {
        let zenith_rad = f64::from(tenth) * 0.1 * DEG_RAD;
        let seen = profile.refraction_rad(zenith_rad);
        assert!(seen > before, "{tenth}");
        assert!((profile.refraction_rad(-zenith_rad) + seen).abs() < 1e-18);
        before = seen;
    }
    assert!(profile.refraction_rad(90.1 * DEG_RAD).is_nan());
}

/// Splitting a layer in two changes nothing, and the refractivity has no step at a border.
#[test]
fn continuous_across_layers() {
    let sea = gas(2.8e-4, 288.15, 6_371_000.0);
    let whole = Profile::layered(&sea, &us_1976()).unwrap();
    let mut split = us_1976();
    split.insert(0, lapse(4_321.0, 6.5));
    split.insert(2, lapse(17_000.0, 0.0));
    let split = Profile::layered(&sea, &split).unwrap();
    for zenith_deg in [1.0, 45.0, 75.0, 89.0] {
        let difference =
            whole.refraction_rad(zenith_deg * DEG_RAD) - split.refraction_rad(zenith_deg * DEG_RAD);
        assert!(
            difference.abs() < 1e-8 * ARCSEC_RAD,
            "{zenith_deg}: {difference}"
        );
    }
    for border_m in [4_321.0, 11_000.0, 20_000.0, 71_000.0] {
        let (below, above) = (
            split.refractivity_at(border_m - 1e-6),
            split.refractivity_at(border_m + 1e-6),
        );
        assert!(
            (below / above - 1.0).abs() < 1e-8,
            "{border_m}: {below} {above}"
        );
    }
}

/// Station pressures of the standard atmosphere, U.S. Standard Atmosphere 1976 (from memory):
/// geopotential 11 km 226.32 hPa, 20 km 54.749, 32 km 8.6802, 47 km 1.1091.
#[test]
fn standard_pressures() {
    for (geopotential_m, hpa, half_digit) in [
        (0.0, 1013.25, 0.005),
        (11_000.0, 226.32, 0.005),
        (20_000.0, 54.749, 0.0005),
        (32_000.0, 8.6802, 0.00005),
        (47_000.0, 1.1091, 0.00005),
    ] {
        let radius_m = 6_356_766.0;
        let height_m = radius_m * geopotential_m / (radius_m - geopotential_m);
        let seen = standard_pressure_hpa(height_m);
        assert!((seen - hpa).abs() < half_digit, "{geopotential_m}: {seen}");
    }
}

/// WGS 84: radius of curvature 6335439 m in the meridian at the equator, 6399594 m at the poles
/// (NGA.STND.0036, polar radius of curvature 6399593.6258 m).
#[test]
fn radius_of_curvature() {
    assert!((local_radius_m(0.0, 0.0) - 6_335_439.327).abs() < 0.01);
    assert!((local_radius_m(0.0, 90.0 * DEG_RAD) - 6_378_137.0).abs() < 1e-6);
    for azimuth_deg in [0.0, 37.0, 90.0] {
        let pole = local_radius_m(90.0 * DEG_RAD, azimuth_deg * DEG_RAD);
        assert!((pole - 6_399_593.625_8).abs() < 1e-3, "{pole}");
    }
    assert!((gravity_m_s2(45.0 * DEG_RAD, 0.0) - 9.784).abs() < 1e-12);
}

const CORRIE_HEAD: Site = Site {
    latitude_rad: 30.94 * DEG_RAD,
    height_m: 2240.0,
};
const CLEAR_DAY: Conditions = Conditions {
    pressure_hpa: 776.0,
    temperature_c: 12.0,
    relative_humidity: 0.25,
    co2_ppm: 425.0,
};

#[test]
fn pressures_that_cannot_be() {
    let check = |pressure_hpa: f64| {
        Conditions {
            pressure_hpa,
            ..CLEAR_DAY
        }
        .check_at(&CORRIE_HEAD)
        .unwrap_err()
    };
    let reduced = check(1016.0);
    assert!(
        matches!(reduced, AirError::PressureReduced { .. }),
        "{reduced:?}"
    );
    let message = reduced.to_string();
    assert!(
        message.contains("sea level") && message.contains("772 hPa"),
        "{message}"
    );
    for (value, unit) in [
        (77_600.0, "Pa"),
        (77.6, "kPa"),
        (582.0, "mmHg"),
        (22.9, "inHg"),
    ] {
        let found = check(value);
        assert!(
            matches!(found, AirError::PressureUnit { unit: it, .. } if it == unit),
            "{found:?}"
        );
    }
    assert!(matches!(check(900.0), AirError::PressureForHeight { .. }));
    assert!(matches!(
        check(f64::NAN),
        AirError::OutOfRange {
            quantity: "pressure",
            ..
        }
    ));
    assert_eq!(CLEAR_DAY.check_at(&CORRIE_HEAD), Ok(()));
    let too_high = Site {
        height_m: 45_001.0,
        ..CORRIE_HEAD
    };
    assert!(matches!(
        CLEAR_DAY.check_at(&too_high),
        Err(AirError::OutOfRange { .. })
    ));
}

/// Every height of a station gives a profile, across the tropopause without a step in the result.
#[test]
fn stations_from_the_dead_sea_to_the_stratosphere() {
    let at = |height_m: f64| {
        let c = Conditions {
            pressure_hpa: standard_pressure_hpa(height_m),
            temperature_c: -50.0,
            relative_humidity: 0.0,
            co2_ppm: 420.0,
        };
        let site = Site {
            height_m,
            ..CORRIE_HEAD
        };
        StationAir::new(site, c, 0.0)
            .profile(550.0)
            .unwrap()
            .refraction_rad(60.0 * DEG_RAD)
    };
    let mut before = f64::INFINITY;
    for height_m in [-400.0, 0.0, 5_000.0, 10_900.0, 11_100.0, 20_000.0, 45_000.0] {
        let seen = at(height_m);
        assert!(seen > 0.0 && seen < before, "{height_m}");
        before = seen;
    }
    let step = at(10_999.9) / at(11_000.1) - 1.0;
    assert!(step.abs() < 1e-4, "{step}");
}

/// Levels taken from the standard model, as a balloon would report them.
fn balloon(lapse_k_per_m: f64, step_m: f64) -> Vec<SoundingLevel> {
    let gamma = gravity_m_s2(CORRIE_HEAD.latitude_rad, CORRIE_HEAD.height_m) * 28.9644
        / (8314.32 * lapse_k_per_m);
    let t0 = CLEAR_DAY.temperature_c + 273.15;
    (0..1000)
        .map(|k| 2200.0 + step_m * f64::from(k))
        .take_while(|height_m| *height_m < 10_900.0)
        .map(|height_m| {
            let x = 1.0 - lapse_k_per_m * (height_m - CORRIE_HEAD.height_m) / t0;
            SoundingLevel {
                height_m,
                pressure_hpa: CLEAR_DAY.pressure_hpa * x.powf(gamma),
                temperature_c: x * t0 - 273.15,
                relative_humidity: 0.0,
            }
        })
        .collect()
}

fn dry_station(sounding: Option<Vec<SoundingLevel>>) -> StationAir {
    let c = Conditions {
        relative_humidity: 0.0,
        ..CLEAR_DAY
    };
    StationAir {
        sounding,
        ..StationAir::new(CORRIE_HEAD, c, 0.0)
    }
}

/// A sounding of the standard model gives the standard refraction.
#[test]
fn sounding_of_the_standard_model() {
    let standard = dry_station(None).profile(550.0).unwrap();
    for step_m in [90.0, 400.0, 1500.0] {
        let sounding = dry_station(Some(balloon(0.0065, step_m)))
            .profile(550.0)
            .unwrap();
        assert!((sounding.refractivity() / standard.refractivity() - 1.0).abs() < 1e-14);
        for zenith_deg in [20.0, 60.0, 75.0, 85.0] {
            let difference = sounding.refraction_rad(zenith_deg * DEG_RAD)
                - standard.refraction_rad(zenith_deg * DEG_RAD);
            assert!(
                difference.abs() < 1e-7 * ARCSEC_RAD,
                "{step_m}, {zenith_deg}: {difference}"
            );
        }
    }
}

/// The theorem of Laplace and Oriani: an inversion and humidity aloft hardly change the bending.
#[test]
fn sounding_with_an_inversion() {
    let mut levels = balloon(0.0065, 300.0);
    for it in &mut levels[1..4] {
        it.temperature_c += 8.0;
        it.relative_humidity = 0.6;
    }
    let (plain, inverted) = (
        dry_station(None).profile(550.0).unwrap(),
        dry_station(Some(levels)).profile(550.0).unwrap(),
    );
    let change = |zenith_deg: f64| {
        (inverted.refraction_rad(zenith_deg * DEG_RAD) - plain.refraction_rad(zenith_deg * DEG_RAD))
            / ARCSEC_RAD
    };
    assert!(
        change(45.0).abs() < 0.002 && change(45.0) != 0.0,
        "{}",
        change(45.0)
    );
    assert!(change(60.0).abs() < 0.005, "{}", change(60.0));
    let forms =
        inverted.refraction_rad(75.0 * DEG_RAD) - inverted.refraction_by_height_rad(75.0 * DEG_RAD);
    assert!(forms.abs() < 1e-8 * ARCSEC_RAD, "{forms}");
}

#[test]
fn soundings_that_do_not_fit() {
    let of = |levels: Vec<SoundingLevel>| dry_station(Some(levels)).profile(550.0).unwrap_err();
    let good = balloon(0.0065, 300.0);
    let high = of(good[1..].to_vec());
    assert!(
        matches!(
            high,
            AirError::SoundingStartsAbove {
                station_m: 2240.0,
                ..
            }
        ),
        "{high:?}"
    );
    let short = of(good[..3].to_vec());
    assert!(
        matches!(short, AirError::SoundingTooShort { found: 2, .. }),
        "{short:?}"
    );
    assert!(matches!(
        of(Vec::new()),
        AirError::SoundingStartsAbove { .. }
    ));
    let mut swapped = good.clone();
    swapped.swap(3, 4);
    assert!(matches!(
        of(swapped),
        AirError::SoundingOrder { level: 5, .. }
    ));
    let mut other_day = good.clone();
    for it in &mut other_day {
        it.pressure_hpa *= 1.03;
    }
    assert!(matches!(of(other_day), AirError::SoundingPressure { .. }));
    let mut percent = good.clone();
    percent[2].relative_humidity = 40.0;
    assert!(matches!(of(percent), AirError::HumidityInPercent { .. }));
    let mut duct = balloon(0.0065, 75.0);
    duct[2].temperature_c += 30.0;
    let found = of(duct);
    assert!(matches!(found, AirError::Ducting { .. }), "{found:?}");
}

#[test]
fn settings_out_of_range() {
    let of = |settings: ProfileSettings| {
        StationAir {
            settings,
            ..dry_station(None)
        }
        .profile(550.0)
        .unwrap_err()
    };
    let standard = ProfileSettings::default();
    for settings in [
        ProfileSettings {
            lapse_k_per_m: 0.0,
            ..standard
        },
        ProfileSettings {
            lapse_k_per_m: 6.5,
            ..standard
        },
        ProfileSettings {
            tropopause_m: 11.0,
            ..standard
        },
        ProfileSettings {
            top_m: 50_000.0,
            ..standard
        },
    ] {
        assert!(matches!(of(settings), AirError::OutOfRange { .. }));
    }
    assert_eq!(dry_station(None).convention, VapourConvention::WaterGiacomo);
}
