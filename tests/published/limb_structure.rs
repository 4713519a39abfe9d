//! Source: frames by the independent transform of `limb_extraction.rs`, with spots, faculae and dust
//! laid on as Gaussians of the disk's brightness: sizes and contrasts as near the limb of an active Sun
//! (3 to 6 arcsec, 3 to 10 percent bright or 30 to 60 percent dark; common practice, no source). Bound
//! on what masking itself does to the oblateness of a clean Sun: 0.1 mas, as the project asks.

use super::disk_transform::RADIUS_ARCSEC;
use super::limb_extraction::{Bench, LEVEL_ADU, Profile, SECTORS, WAVELENGTH_NM, frame};
use ndarray::Array2;
use rand::SeedableRng;
use rand_chacha::ChaCha12Rng;
use rand_distr::{Distribution, StandardNormal};
use std::f64::consts::TAU;
use truelimb::limb::harmonics::Projector;
use truelimb::limb::residual::{Facing, ResidualMap, Residuals};
use truelimb::limb::structure::{Structure, combined, find, flattened};
use truelimb::limb::template::blur_of_width;
use truelimb::limb::{Flag, ObservedLimb};
use truelimb::units::ARCSEC_RAD;

const R0_M: f64 = 0.07;

/// A bump on the disk: angle (deg), arcsec inside the limb, size (standard deviation), contrast.
type Bump = (f64, f64, f64, f64);

fn blur() -> f64 {
    blur_of_width(1e-9 * WAVELENGTH_NM / R0_M / ARCSEC_RAD)
}

/// The frame with bumps at detector angles.
fn with_bumps(clean: &Array2<f32>, scale: f64, centre: (f64, f64), bumps: &[Bump]) -> Array2<f32> {
    Array2::from_shape_fn(clean.dim(), |(y, x)| {
        let (dx, dy) = (x as f64 - centre.0, y as f64 - centre.1);
        let (r, theta) = (dx.hypot(dy) * scale, dy.atan2(dx));
        let mut factor = 1.0;
        for &(at_deg, inside, size, contrast) in bumps {
            let turn = (theta - at_deg.to_radians() + 0.5 * TAU).rem_euclid(TAU) - 0.5 * TAU;
            let (u, v) = (r - RADIUS_ARCSEC + inside, RADIUS_ARCSEC * turn);
            factor *= 1.0 + contrast * (-(u * u + v * v) / (2.0 * size * size)).exp();
        }
        (f64::from(clean[[y, x]]) * factor) as f32
    })
}

fn noisy(bench: &Bench, clean: &Array2<f32>, seed: u64) -> Array2<f32> {
    let mut rng = ChaCha12Rng::seed_from_u64(seed);
    let read2 = (bench.detector.read_noise_e / bench.detector.gain_e_adu).powi(2);
    clean.mapv(|it| {
        let sigma = (f64::from(it).max(0.0) / bench.detector.gain_e_adu + read2).sqrt();
        let draw: f64 = StandardNormal.sample(&mut rng);
        (f64::from(it) + sigma * draw) as f32
    })
}

fn facing(north_deg: f64) -> Facing {
    Facing {
        zero_rad: -north_deg.to_radians(),
        forward: true,
    }
}

/// Oblateness by the sectors that are not masked, solar north at a detector angle, mas.
fn oblateness_mas(bench: &Bench, limb: &ObservedLimb, masked: &[bool], north_deg: f64) -> f64 {
    let usable: Vec<bool> = (0..SECTORS)
        .map(|s| !masked[s] && limb.sectors[s].flag == Flag::Good)
        .collect();
    let radii: Vec<f64> = limb
        .sectors
        .iter()
        .map(|it| 1000.0 * (it.radius_arcsec - RADIUS_ARCSEC))
        .collect();
    let h = Projector::new(&bench.angles, &usable, 30)
        .unwrap()
        .apply(&radii);
    let (sin, cos) = (2.0 * north_deg.to_radians()).sin_cos();
    -2.0 * (h.cos[2] * cos + h.sin[2] * sin)
}

/// Sectors that touch what stands out, a bin of margin on either side.
fn masked(found: &[Structure], bins: usize, north_deg: f64) -> Vec<bool> {
    let turn = facing(north_deg);
    (0..SECTORS)
        .map(|s| {
            (0..4 * bins / SECTORS).any(|k| {
                let theta = TAU * (s as f64 + (k as f64 + 0.5) / (4 * bins / SECTORS) as f64)
                    / SECTORS as f64;
                let at = (turn.solar_rad(theta).rem_euclid(TAU) / TAU * bins as f64) as usize;
                found.iter().any(|it| {
                    let wide = Structure {
                        first: (it.first + bins - 1) % bins,
                        bins: it.bins + 2,
                        ..*it
                    };
                    wide.holds(at, bins)
                })
            })
        })
        .collect()
}

/// Half of the belts of activity masked, at the same solar angles through four rolls.
#[test]
fn masking_a_clean_sun_leaves_its_oblateness_alone() {
    for scale in [1.0, 2.0] {
        let bench = Bench::new(scale);
        let reach = bench.window + 3.0 + 3.0 * scale;
        let profile = Profile::of(R0_M, reach + 2.0 * scale);
        let half = (bench.size / 2) as f64;
        let centre = (half + 0.213, half - 0.377);
        let image = frame(&profile, scale, bench.size, centre, reach);
        let limb = bench.measure(&image, centre, blur());
        for north_deg in [90.0, 135.0, 180.0, 225.0] {
            let belts = |psi_deg: f64| {
                let from_equator = (psi_deg.rem_euclid(180.0) - 90.0).abs();
                (8.0..23.0).contains(&from_equator) && psi_deg.rem_euclid(360.0) < 260.0
            };
            let gone: Vec<bool> = bench
                .angles
                .iter()
                .map(|it| belts(it.to_degrees() - north_deg))
                .collect();
            let share = gone.iter().filter(|it| **it).count();
            assert!((12..=18).contains(&share), "{share} sectors masked");
            let found = oblateness_mas(&bench, &limb, &gone, north_deg);
            println!("{scale} arcsec/px, north at {north_deg} deg: {found:.4} mas");
            assert!(found.abs() < 0.1, "{found} mas at {scale} arcsec/px");
        }
    }
}

/// Four orientations of ten frames each with photon noise: what is on the Sun is found there, the dust
/// on the detector, nothing else; with the mask the oblateness of the noise-free frames is nearer to
/// the round Sun's.
#[test]
fn spots_faculae_and_dust_are_found_where_they_are() {
    let scale = 4.0;
    let bench = Bench::new(scale);
    let reach = bench.window + 3.0 + 3.0 * scale;
    let profile = Profile::of(R0_M, reach + 2.0 * scale);
    let half = (bench.size / 2) as f64;
    let centre = (half + 0.213, half - 0.377);
    let clean = frame(&profile, scale, bench.size, centre, reach);
    // Position angles from solar north through east.
    let on_sun: [Bump; 5] = [
        (75.0, 9.0, 4.0, 0.05),
        (112.0, 6.0, 5.0, 0.10),
        (262.0, 8.0, 3.0, 0.06),
        (289.0, 12.0, 4.0, -0.5),
        (301.5, 4.0, 6.0, 0.08),
    ];
    let on_detector: [Bump; 1] = [(200.0, 7.0, 8.0, -0.12)];
    let norths = [90.0, 135.0, 180.0, 225.0];
    let bins = 4 * SECTORS;
    let model = vec![RADIUS_ARCSEC; SECTORS];
    let slope = vec![0.0; SECTORS];
    let setup = bench.extraction(&model, &slope, blur());
    let mut maps: Vec<(ResidualMap, ResidualMap)> = Vec::new();
    let mut limbs = Vec::new();
    for (k, north_deg) in norths.into_iter().enumerate() {
        let mut bumps: Vec<Bump> = on_sun
            .iter()
            .map(|&(psi, inside, size, contrast)| (psi + north_deg, inside, size, contrast))
            .collect();
        bumps.extend(on_detector);
        let image = with_bumps(&clean, scale, centre, &bumps);
        let mut sums = Residuals::new(SECTORS);
        for seed in 0..10 {
            let shot = noisy(&bench, &image, 100 * k as u64 + seed);
            let limb = bench.measure(&shot, centre, blur());
            sums.add(shot.view(), &limb, facing(north_deg), &setup);
        }
        maps.push((flattened(&sums.by_sun()), flattened(&sums.by_detector())));
        limbs.push(bench.measure(&image, centre, blur()));
    }
    let of = |pick: fn(&(ResidualMap, ResidualMap)) -> &ResidualMap| {
        let all: Vec<ResidualMap> = maps.iter().map(|it| pick(it).clone()).collect();
        find(&combined(&all))
    };
    let (sun, detector) = (of(|it| &it.0), of(|it| &it.1));
    println!("on the Sun {sun:#?}\non the detector {detector:#?}");
    let bin = |deg: f64| (deg.rem_euclid(360.0) / 360.0 * bins as f64) as usize;
    for &(psi, _, _, contrast) in &on_sun {
        let near = sun
            .iter()
            .find(|it| (0..3).any(|k| it.holds((bin(psi) + bins + k - 1) % bins, bins)));
        let near = near.unwrap_or_else(|| panic!("nothing found at {psi} deg"));
        assert!(near.contrast * contrast > 0.0, "{psi} deg: {near:?}");
    }
    assert!(sun.len() <= on_sun.len(), "{sun:?}");
    assert_eq!(detector.len(), 1, "{detector:?}");
    assert!(detector[0].holds(bin(200.0), bins) && detector[0].contrast < 0.0);

    let mean = |mask: &dyn Fn(usize) -> Vec<bool>| {
        let each = norths.iter().enumerate();
        each.map(|(k, &north)| oblateness_mas(&bench, &limbs[k], &mask(k), north))
            .sum::<f64>()
            / norths.len() as f64
    };
    let without = mean(&|_| vec![false; SECTORS]);
    let with = mean(&|k| {
        let on_sun = masked(&sun, bins, norths[k]);
        let on_detector = masked(&detector, bins, 0.0);
        (0..SECTORS).map(|s| on_sun[s] || on_detector[s]).collect()
    });
    println!("oblateness without the mask {without:.3} mas, with it {with:.3} mas");
    // What is left with the mask is a tenth of what the structure does without it.
    assert!(without.abs() > 0.4, "{without}");
    assert!(with.abs() < 0.1 * without.abs(), "{with} of {without}");
}

/// Five pixels hit by a particle: the fit leaves them out one by one, and they are counted.
#[test]
fn a_hit_moves_neither_the_limb_nor_the_map() {
    let scale = 4.0;
    let bench = Bench::new(scale);
    let reach = bench.window + 3.0 + 3.0 * scale;
    let profile = Profile::of(R0_M, reach + 2.0 * scale);
    let half = (bench.size / 2) as f64;
    let centre = (half + 0.213, half - 0.377);
    let clean = frame(&profile, scale, bench.size, centre, reach);
    let model = vec![RADIUS_ARCSEC; SECTORS];
    let slope = vec![0.0; SECTORS];
    let setup = bench.extraction(&model, &slope, blur());
    let quiet = noisy(&bench, &clean, 7);
    let mut hit = quiet.clone();
    // A track of five pixels inside the limb to the right, 1.7 times as bright as the disk.
    let column = (centre.0 + RADIUS_ARCSEC / scale).round() as usize - 2;
    for k in 0..5 {
        hit[[centre.1.round() as usize + 3 + k, column]] += (1.7 * LEVEL_ADU) as f32;
    }
    let (a, b) = (
        bench.measure(&quiet, centre, blur()),
        bench.measure(&hit, centre, blur()),
    );
    let moved = a
        .sectors
        .iter()
        .zip(&b.sectors)
        .map(|(a, b)| (a.radius_arcsec - b.radius_arcsec).abs() / a.sigma_arcsec)
        .fold(0.0, f64::max);
    assert!(b.sectors.iter().all(|it| it.flag == Flag::Good));
    println!("largest move {moved:.2} standard deviations of its sector");
    assert!(moved < 1.5, "a hit moves its sector by {moved} sigma");
    let count = |image: &Array2<f32>, limb: &ObservedLimb| {
        let mut sums = Residuals::new(SECTORS);
        sums.add(image.view(), limb, facing(90.0), &setup);
        sums.hits_per_frame().round() as u64
    };
    assert_eq!(count(&quiet, &a), 0);
    assert_eq!(count(&hit, &b), 5);
}
