//! Times of the air: refractivity, setting up a frame and a sequence, carrying a limb through it.
//!
//! Every benchmark asserts its answer: against the exact integral where there is one.

use criterion::{Criterion, criterion_group, criterion_main};
use std::f64::consts::TAU;
use std::hint::black_box;
use std::time::{Duration, Instant};
use truelimb::air::{
    Band, Bending, Conditions, DiskMap, Profile, RefractivityFormula, Site, StationAir,
    VapourConvention, refractivity, solar_photons,
};
use truelimb::units::{ARCSEC_RAD, DEG_RAD};

/// Points of the limb of one frame.
const POINTS: usize = 720;

/// Radius of the disk, in radians.
const RADIUS_RAD: f64 = 959.2 * ARCSEC_RAD;

/// Zenith distances at which times are taken.
const ZENITHS_DEG: [f64; 3] = [30.0, 60.0, 82.0];

/// What the limb of a frame may cost after set-up.
const LIMB_TIME: Duration = Duration::from_micros(20);

/// What setting up a sequence may cost.
const SEQUENCE_TIME: Duration = Duration::from_millis(5);

fn station() -> StationAir {
    let site = Site {
        latitude_rad: 30.94 * DEG_RAD,
        height_m: 2240.0,
    };
    let conditions = Conditions {
        pressure_hpa: 778.0,
        temperature_c: 9.0,
        relative_humidity: 0.35,
        co2_ppm: 420.0,
    };
    StationAir::new(site, conditions, 180.0 * DEG_RAD)
}

fn map(profile: &Profile, zenith_true_rad: f64) -> DiskMap {
    let bending = Bending::new(profile, zenith_true_rad).expect("a disk above the horizon");
    DiskMap::new(bending, zenith_true_rad)
}

fn limb() -> Vec<(f64, f64)> {
    (0..POINTS)
        .map(|step| (RADIUS_RAD, TAU * step as f64 / POINTS as f64))
        .collect()
}

/// The true place of an apparent point by spherical trigonometry and one integral, without any table.
fn by_integral(profile: &Profile, map: &DiskMap, radius_rad: f64, bearing_rad: f64) -> [f64; 2] {
    let turn = |zenith_rad: f64, radius_rad: f64, bearing_rad: f64| {
        let (sin_z, cos_z) = zenith_rad.sin_cos();
        let (sin_r, cos_r) = radius_rad.sin_cos();
        let (sin_b, cos_b) = bearing_rad.sin_cos();
        let x = sin_z * cos_r - cos_z * sin_r * cos_b;
        let y = sin_r * sin_b;
        (
            x.hypot(y).atan2(cos_z * cos_r + sin_z * sin_r * cos_b),
            y.atan2(x),
        )
    };
    let (zenith_rad, azimuth_rad) = turn(map.zenith_apparent_rad(), radius_rad, bearing_rad);
    let seen_rad = zenith_rad + profile.refraction_rad(zenith_rad);
    let centre_rad = map.zenith_true_rad();
    let (sin_z, cos_z) = centre_rad.sin_cos();
    let (sin_s, cos_s) = seen_rad.sin_cos();
    let half = (0.5 * azimuth_rad).sin();
    let u = sin_s * azimuth_rad.sin();
    let v = (centre_rad - seen_rad).sin() + 2.0 * sin_s * cos_z * half * half;
    let w = cos_s * cos_z + sin_s * sin_z * azimuth_rad.cos();
    let radius_rad = u.hypot(v).atan2(w);
    let scale = radius_rad / u.hypot(v);
    [u * scale, v * scale]
}

/// Largest distance between points and the integral, in arcsec.
fn error_arcsec(profile: &Profile, map: &DiskMap, carried: &[(f64, f64)]) -> f64 {
    limb()
        .iter()
        .zip(carried)
        .map(|(seen, truth)| {
            let [u, v] = by_integral(profile, map, seen.0, seen.1);
            let (sin, cos) = truth.1.sin_cos();
            (truth.0 * sin - u).hypot(truth.0 * cos - v) / ARCSEC_RAD
        })
        .fold(0.0, f64::max)
}

/// The least of many times of one call: what it costs when nothing else runs.
fn least(calls: usize, mut call: impl FnMut()) -> Duration {
    (0..calls)
        .map(|_| {
            let start = Instant::now();
            call();
            start.elapsed()
        })
        .min()
        .unwrap_or_default()
}

fn refractivities(c: &mut Criterion) {
    let conditions = station().conditions;
    let mut group = c.benchmark_group("air/refractivity");
    for formula in RefractivityFormula::ALL {
        if formula == RefractivityFormula::Mathar2007 {
            continue;
        }
        group.bench_function(formula.name(), |bench| {
            bench.iter(|| {
                let n = refractivity(
                    black_box(&conditions),
                    black_box(550.0),
                    formula,
                    VapourConvention::default(),
                )
                .expect("air as it can be");
                assert!((2.1e-4..2.2e-4).contains(&n));
                n
            });
        });
    }
    group.finish();
}

fn limbs(c: &mut Criterion) {
    let profile = station().profile(550.0).expect("a profile");
    let seen = limb();
    let mut group = c.benchmark_group("air/limb of 720 points");
    // What any way from polar to polar coordinates costs: two sines, a root, an arc tangent a point.
    group.bench_function("reference: polar to plane and back", |bench| {
        let mut points = seen.clone();
        bench.iter(|| {
            points.copy_from_slice(&seen);
            for it in &mut points {
                let (sin, cos) = black_box(it.1).sin_cos();
                let (u, v) = (it.0.sin() * sin, it.0.sin() * cos);
                *it = (u.hypot(v).asin(), u.atan2(v));
            }
            assert!((points[0].0 - RADIUS_RAD).abs() < 1e-12);
        });
    });
    for zenith_deg in ZENITHS_DEG {
        let map = map(&profile, zenith_deg * DEG_RAD);
        let mut points = seen.clone();
        group.bench_function(format!("together, {zenith_deg} deg"), |bench| {
            bench.iter(|| {
                points.copy_from_slice(black_box(&seen));
                map.true_from_apparent_each(&mut points);
            });
        });
        let error = error_arcsec(&profile, &map, &points);
        assert!(error < 1e-5, "{zenith_deg} deg: {error} arcsec");
        let time = least(2000, || {
            points.copy_from_slice(black_box(&seen));
            map.true_from_apparent_each(black_box(&mut points));
        });
        assert!(time < LIMB_TIME, "{zenith_deg} deg: {time:?}");

        let mut single = seen.clone();
        group.bench_function(format!("one by one, {zenith_deg} deg"), |bench| {
            bench.iter(|| {
                for (to, from) in single.iter_mut().zip(&seen) {
                    *to = map.true_from_apparent(black_box(from.0), from.1);
                }
            });
        });
        let error = error_arcsec(&profile, &map, &single);
        assert!(error < 1e-5, "{zenith_deg} deg: {error} arcsec");
    }
    group.finish();
}

fn setting_up(c: &mut Criterion) {
    let air = station();
    let mut group = c.benchmark_group("air/set-up");
    for zenith_deg in ZENITHS_DEG {
        group.bench_function(format!("frame, {zenith_deg} deg"), |bench| {
            bench.iter(|| {
                let profile = black_box(&air).profile(550.0).expect("a profile");
                let map = map(&profile, zenith_deg * DEG_RAD);
                // Refraction lifts.
                assert!(map.zenith_apparent_rad() < map.zenith_true_rad());
                map
            });
        });
    }
    let band = Band::top_hat(550.0, 10.0).expect("a band");
    let sequence = || {
        // Effective wavelength, then a map at begin, middle and end of the sequence.
        let light = band
            .light_through_air(solar_photons, air.conditions.pressure_hpa, 40.0 * DEG_RAD)
            .expect("light");
        let nm = light.in_air(&air).expect("a mean").effective_nm;
        [38.0, 40.0, 42.0].map(|zenith_deg| {
            let profile = air.profile(nm).expect("a profile");
            map(&profile, zenith_deg * DEG_RAD)
        })
    };
    group.bench_function("sequence", |bench| {
        bench.iter(|| {
            let maps = sequence();
            assert!(maps[0].zenith_apparent_rad() < maps[2].zenith_apparent_rad());
            maps
        });
    });
    let time = least(50, || {
        black_box(sequence());
    });
    assert!(time < SEQUENCE_TIME, "{time:?}");
    group.finish();
}

criterion_group!(air, refractivities, limbs, setting_up);
criterion_main!(air);
