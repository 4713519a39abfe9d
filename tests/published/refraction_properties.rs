//! Source: geometry and conservation alone; no numbers. What must hold for any station, air and disk,
//! looked at over a thousand of them spread evenly (Halton's sequence).

use super::refraction_tables::Worst;
use truelimb::air::{
    Bending, Conditions, DiskMap, Site, StationAir, distortion, standard_pressure_hpa,
};
use truelimb::units::{ARCSEC_RAD, DEG_RAD};

const RADIUS_RAD: f64 = 959.2 * ARCSEC_RAD;

/// A fraction from 0 to 1: the index written backwards in a base.
fn halton(mut index: u32, base: u32) -> f64 {
    let (mut value, mut scale) = (0.0, 1.0);
    while index > 0 {
        scale /= f64::from(base);
        value += scale * f64::from(index % base);
        index /= base;
    }
    value
}

fn between(index: u32, base: u32, low: f64, high: f64) -> f64 {
    low + halton(index, base) * (high - low)
}

/// A station from -400 m to 45 km with air that belongs there.
fn station(index: u32) -> StationAir {
    let height_m = between(index, 2, -400.0, 45_000.0);
    let site = Site {
        latitude_rad: between(index, 3, -90.0, 90.0) * DEG_RAD,
        height_m,
    };
    let low = height_m < 9000.0;
    let conditions = Conditions {
        pressure_hpa: standard_pressure_hpa(height_m) * between(index, 5, 0.95, 1.05),
        temperature_c: if low {
            between(index, 7, -30.0, 35.0)
        } else {
            between(index, 7, -80.0, 0.0)
        },
        relative_humidity: if low { halton(index, 11) } else { 0.0 },
        co2_ppm: 420.0,
    };
    StationAir::new(site, conditions, between(index, 13, 0.0, 360.0) * DEG_RAD)
}

fn map(index: u32) -> (f64, DiskMap) {
    let nm = between(index, 17, 320.0, 1600.0);
    let zenith_rad = between(index, 19, 0.0, 85.0) * DEG_RAD;
    let profile = station(index).profile(nm).unwrap();
    let bending = Bending::new(&profile, zenith_rad).unwrap();
    (profile.refractivity(), DiskMap::new(bending, zenith_rad))
}

/// There and back is where it was; left and right of the vertical are mirrored; the zenith side stays
/// in the vertical.
#[test]
fn the_map_is_one_to_one_and_even() {
    let (mut back, mut mirror, mut vertical) =
        (Worst::default(), Worst::default(), Worst::default());
    for index in 1..=1000 {
        let (_, map) = map(index);
        let bearing_rad = between(index, 23, 0.0, 180.0) * DEG_RAD;
        let radius_rad = between(index, 29, 0.1, 1.6) * RADIUS_RAD;
        let place = || format!("{index}");
        let (r, b) = map.true_from_apparent(radius_rad, bearing_rad);
        let (r2, b2) = map.apparent_from_true(r, b);
        back.meet((r2 - radius_rad) / ARCSEC_RAD, place);
        back.meet(radius_rad * (b2 - bearing_rad) / ARCSEC_RAD, place);
        let (r3, b3) = map.true_from_apparent(radius_rad, -bearing_rad);
        mirror.meet((r3 - r) / ARCSEC_RAD, place);
        mirror.meet(radius_rad * (b3 + b) / ARCSEC_RAD, place);
        vertical.meet(map.true_from_apparent(radius_rad, 0.0).1, place);
    }
    back.assert_within(1e-6, "there and back, arcsec");
    mirror.assert_within(1e-9, "mirrored, arcsec");
    vertical.assert_within(1e-12, "in the vertical, rad");
}

/// Air shrinks a disk, along the vertical the most; the change is that of a plane atmosphere near the
/// zenith: every radius by the refractivity (Snell).
#[test]
fn air_shrinks_and_flattens() {
    for index in 1..=300 {
        let (n, map) = map(index);
        let it = distortion(&map, RADIUS_RAD);
        assert!(it.mean_mas < 0.0 && it.flattening_mas > -1e-6, "{index}");
        assert!(
            map.zenith_apparent_rad() <= map.zenith_true_rad(),
            "{index}"
        );
        let profile = station(index).profile(550.0).unwrap();
        let overhead = DiskMap::new(Bending::new(&profile, 0.0).unwrap(), 0.0);
        let it = distortion(&overhead, RADIUS_RAD);
        let plane = -profile.refractivity() * RADIUS_RAD / ARCSEC_RAD * 1000.0;
        // The Earth's curvature: one scale height over its radius, 0.2 percent at most.
        assert!((it.mean_mas / plane - 1.0).abs() < 3e-3, "{index} {n}");
        assert!(it.flattening_mas.abs() < 1e-5, "{index}");
    }
}

/// Small steps at a point of the limb are carried as the map itself carries them.
#[test]
fn the_jacobian_is_the_slope_of_the_map() {
    let mut worst = Worst::default();
    for index in 1..=300 {
        let (_, map) = map(index);
        let bearing_rad = between(index, 23, 0.0, 360.0) * DEG_RAD;
        let step_rad = 20.0 * ARCSEC_RAD;
        let radius = |by: f64| map.true_from_apparent(RADIUS_RAD + by, bearing_rad).0;
        let slope = (radius(step_rad) - radius(-step_rad)) / (2.0 * step_rad);
        let it = map.jacobian(RADIUS_RAD, bearing_rad);
        worst.meet(it.radial_radial - slope, || format!("{index}"));
        assert!(it.determinant() > 1.0, "air packs the sky: {index}");
    }
    worst.assert_within(1e-6, "radial slope");
}

/// What cannot be is refused: never an answer, never a number that was moved into range.
#[test]
fn nonsense_is_refused() {
    for index in 1..=200 {
        let far = between(index, 3, 1.01, 30.0);
        let changes: [&dyn Fn(&mut StationAir); 6] = [
            &|it| it.conditions.relative_humidity = far,
            &|it| it.conditions.relative_humidity = -far,
            &|it| it.conditions.temperature_c = -120.0 * far,
            &|it| it.conditions.pressure_hpa *= 3.0 * far,
            &|it| it.site.height_m = 50_000.0 * far,
            &|it| it.conditions.pressure_hpa = f64::NAN,
        ];
        for (number, change) in changes.iter().enumerate() {
            let mut air = station(index);
            change(&mut air);
            assert!(air.profile(550.0).is_err(), "{number}: {air:?}");
        }
        assert!(station(index).profile(299.0 / far).is_err());
        assert!(station(index).profile(2501.0 * far).is_err());
    }
}
