//! Source: sessions drawn from the exact variances of the limb's harmonics, which
//! `limb_motion_kernels.rs` checks against tables; accuracies of the inversion by simulation in the
//! manner of G. B. Scharmer and T. I. M. van Werkhoven, Astron. Astrophys. 513, A25 (2010)
//! (abstract). The limits on ratios and pulls are our own requirements.

use ndarray::Array2;
use rand::{RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, StandardNormal};
use truelimb::seeing::{
    HarmonicSeries, MotionSeeing, SeeingError, Setup, View, by_motion, floor_correlation_time_s,
    floor_variance_mas2,
};
use truelimb::turbulence::{Aperture, Tilt, harmonic_kernels};
use truelimb::units::{ARCSEC_RAD, DEG_RAD, MAS_RAD};

const LIMB_RAD: f64 = 960.0 * ARCSEC_RAD;
const SECTOR_RAD: f64 = 3.0 * DEG_RAD;
const M_MAX: usize = 30;

/// Height above the telescope in m, share, outer scale in m.
type Layers<'a> = &'a [(f64, f64, f64)];

/// The site of the inversion by simulation: three layers, outer scale 25 m.
const THREE: Layers<'static> = &[
    (20.0, 0.60, 25.0),
    (500.0, 0.25, 25.0),
    (5000.0, 0.15, 25.0),
];

struct Sequence {
    time_s: Vec<f64>,
    cos_mas: Array2<f64>,
    sin_mas: Array2<f64>,
    noise: Vec<f64>,
    zenith_rad: f64,
}

fn normal(rng: &mut ChaCha8Rng) -> f64 {
    StandardNormal.sample(rng)
}

#[expect(
    clippy::too_many_arguments,
    reason = "one argument for each condition of the draw"
)]
/// Frames of one sequence and the mean of `r0^(-5/3)` realised, r0 at the zenith and 500 nm.
fn sequence(
    rng: &mut ChaCha8Rng,
    aperture: &Aperture,
    layers: Layers<'_>,
    r0_m: f64,
    zenith_rad: f64,
    frames: usize,
    noise_mas: f64,
    flicker: f64,
) -> (Sequence, f64) {
    let air_mass = 1.0 / zenith_rad.cos();
    let unit = (500e-9 / MAS_RAD).powi(2) * air_mass * r0_m.powf(-5.0 / 3.0);
    let mut variance = vec![0.0; M_MAX + 1];
    for &(height_m, share, outer_m) in layers {
        let rho = height_m * air_mass * LIMB_RAD;
        let k = harmonic_kernels(aperture, Tilt::Gradient, outer_m, rho, M_MAX).unwrap();
        for (m, (to, k)) in variance.iter_mut().zip(k).enumerate() {
            let half = 0.5 * m as f64 * SECTOR_RAD;
            let window = if m == 0 {
                1.0
            } else {
                (half.sin() / half).powi(2)
            };
            *to += unit * share * k * window;
        }
    }
    let mut realised = 0.0;
    let [mut cos_mas, mut sin_mas] = [(); 2].map(|()| Array2::zeros((frames, M_MAX + 1)));
    for frame in 0..frames {
        let strength = (-5.0 / 3.0 * flicker * normal(rng)).exp();
        realised += strength * r0_m.powf(-5.0 / 3.0) / frames as f64;
        for m in 0..=M_MAX {
            let sigma = (variance[m] * strength + noise_mas * noise_mas).sqrt();
            // A constant shape of the Sun and the instrument lies under the motion.
            cos_mas[(frame, m)] = 40.0 + sigma * normal(rng);
            sin_mas[(frame, m)] = -25.0 + sigma * normal(rng);
        }
    }
    let time_s = (0..frames).map(|k| 0.7 * k as f64).collect();
    let noise = vec![noise_mas * noise_mas; M_MAX + 1];
    (
        Sequence {
            time_s,
            cos_mas,
            sin_mas,
            noise,
            zenith_rad,
        },
        realised,
    )
}

fn measure(sequences: &[Sequence], setup: &Setup) -> Result<MotionSeeing, SeeingError> {
    measure_exposed(sequences, setup, 0.0)
}

fn measure_exposed(
    sequences: &[Sequence],
    setup: &Setup,
    exposure_s: f64,
) -> Result<MotionSeeing, SeeingError> {
    let series: Vec<HarmonicSeries<'_>> = sequences
        .iter()
        .map(|it| HarmonicSeries {
            time_s: &it.time_s,
            cos_mas: &it.cos_mas,
            sin_mas: &it.sin_mas,
            noise_variance_mas2: &it.noise,
            zenith_rad: it.zenith_rad,
            sector_rad: SECTOR_RAD,
            limb_radius_rad: LIMB_RAD,
            exposure_s,
        })
        .collect();
    by_motion(&series, setup)
}

fn gradient_setup(aperture: Aperture) -> Setup {
    Setup {
        zernike_share: 0.0,
        ..Setup::new(aperture, 500.0)
    }
}

#[test]
fn three_layers_are_inverted() {
    let aperture = Aperture::clear(0.1);
    let setup = gradient_setup(aperture);
    for (frames, runs, seed) in [(300, 6, 11), (3000, 2, 12)] {
        let mut rng = ChaCha8Rng::seed_from_u64(seed);
        let (mut ratio, mut chi2, mut freedom) = (0.0, 0.0, 0.0);
        for _ in 0..runs {
            let (one, _) = sequence(&mut rng, &aperture, THREE, 0.05, 0.0, frames, 3.0, 0.0);
            let found = measure(&[one], &setup).unwrap();
            let off = (found.r0_zenith_500nm_m - 0.05) / found.r0_zenith_sigma_m;
            assert!(off.abs() < 3.0, "{off}");
            assert!(
                found.r0_zenith_sigma_m < 0.10 * 0.05,
                "{}",
                found.r0_zenith_sigma_m
            );
            ratio += found.r0_zenith_500nm_m / 0.05 / f64::from(runs);
            chi2 += found.chi2;
            freedom += found.degrees_of_freedom;
            // The power of the second harmonic is predicted whatever the layers.
            let view = View {
                zenith_rad: 0.0,
                limb_radius_rad: LIMB_RAD,
                sector_rad: SECTOR_RAD,
                drift_m: 0.0,
            };
            let floor =
                floor_variance_mas2(&found.profile, &aperture, Tilt::Gradient, &view, 8).unwrap();
            let unit = (500e-9 / MAS_RAD).powi(2) * 0.05_f64.powf(-5.0 / 3.0);
            for m in [2, 4, 8] {
                let wanted: f64 = THREE
                    .iter()
                    .map(|it| {
                        let rho = it.0 * LIMB_RAD;
                        it.1 * harmonic_kernels(&aperture, Tilt::Gradient, it.2, rho, 8).unwrap()[m]
                    })
                    .sum::<f64>()
                    * unit
                    * view_window(m);
                assert!(
                    (floor[m] / wanted - 1.0).abs() < 0.10,
                    "m {m}: {} {wanted}",
                    floor[m]
                );
            }
            let memory_s =
                floor_correlation_time_s(&found.profile, &aperture, Tilt::Gradient, &view, 10.0, 2)
                    .unwrap();
            // Between that of the lowest layer and of the highest, 0.01 to 0.4 s.
            assert!((0.01..0.4).contains(&memory_s[2]), "{}", memory_s[2]);
        }
        assert!(
            (ratio - 1.0).abs() < 0.05,
            "{frames} frames: mean ratio {ratio}"
        );
        assert!(
            chi2 < freedom + 3.0 * (2.0 * freedom).sqrt(),
            "{chi2} for {freedom}"
        );
    }
}

fn view_window(m: usize) -> f64 {
    let half = 0.5 * m as f64 * SECTOR_RAD;
    (half.sin() / half).powi(2)
}

#[test]
fn shaking_the_telescope_does_not_change_the_seeing() {
    let aperture = Aperture::clear(0.1);
    let mut rng = ChaCha8Rng::seed_from_u64(21);
    let (mut one, _) = sequence(&mut rng, &aperture, THREE, 0.06, 0.6, 300, 3.0, 0.0);
    let setup = gradient_setup(aperture);
    let still = measure(std::slice::from_ref(&one), &setup).unwrap();
    for frame in 0..300 {
        // 1 arcsec rms on each axis: m = 1, and to second order m = 0 and 2.
        let (x, y) = (1000.0 * normal(&mut rng), 1000.0 * normal(&mut rng));
        let radius_mas = LIMB_RAD / MAS_RAD;
        one.cos_mas[(frame, 1)] += x;
        one.sin_mas[(frame, 1)] += y;
        one.cos_mas[(frame, 0)] -= (x * x + y * y) / (4.0 * radius_mas);
        one.cos_mas[(frame, 2)] += (x * x - y * y) / (4.0 * radius_mas);
        one.sin_mas[(frame, 2)] += x * y / (2.0 * radius_mas);
    }
    let shaken = measure(&[one], &setup).unwrap();
    let change = shaken.r0_zenith_500nm_m / still.r0_zenith_500nm_m - 1.0;
    assert!(change.abs() < 0.01, "{change}");
}

#[test]
fn twice_the_noise_is_not_worse_seeing() {
    let aperture = Aperture::clear(0.2);
    let [quiet, noisy] = [1.0, 30.0].map(|noise_mas| {
        let mut rng = ChaCha8Rng::seed_from_u64(31);
        let (one, _) = sequence(&mut rng, &aperture, THREE, 0.12, 0.4, 400, noise_mas, 0.0);
        measure(&[one], &gradient_setup(aperture)).unwrap()
    });
    let off = (noisy.r0_zenith_500nm_m - quiet.r0_zenith_500nm_m) / quiet.r0_zenith_sigma_m;
    assert!(off.abs() < 1.0, "{off}");
}

#[test]
fn r0_of_random_sessions_is_right_and_its_error_too() {
    let mut rng = ChaCha8Rng::seed_from_u64(41);
    let (mut ratios, mut pulls, mut steps) = (Vec::new(), Vec::new(), Vec::new());
    for session in 0..20_usize {
        let aperture = Aperture::clear([0.10, 0.15, 0.20, 0.30][session % 4]);
        // Even steps of the logarithm from 3 to 20 cm, in an order that no aperture follows.
        let r0_m = 0.03 * (20.0_f64 / 3.0).powf((7 * session % 20) as f64 / 19.0);
        // A power law through the boundary layer of random steepness, and some free air.
        let (steepness, free) = (rng.random_range(0.9..1.4), rng.random_range(0.05..0.20));
        let heights: Vec<f64> = (0..10).map(|k| 7.0 * 1.75_f64.powi(k)).collect();
        let weights: Vec<f64> = heights.iter().map(|h| h.powf(1.0 - steepness)).collect();
        let total: f64 = weights.iter().sum();
        let outer_m = rng.random_range(10.0..40.0);
        let mut layers: Vec<(f64, f64, f64)> = heights
            .iter()
            .zip(&weights)
            .map(|(&h, w)| (h, (1.0 - free) * w / total, outer_m))
            .collect();
        layers.push((7000.0, free, outer_m));
        let noise_mas = rng.random_range(1.0..10.0);
        let first_deg = rng.random_range(10.0..45.0);
        let (sequences, realised): (Vec<_>, Vec<f64>) = (0..8)
            .map(|k| {
                let zenith_rad = (first_deg + 2.5 * f64::from(k)) * DEG_RAD;
                sequence(
                    &mut rng, &aperture, &layers, r0_m, zenith_rad, 63, noise_mas, 0.18,
                )
            })
            .unzip();
        let truth_m = (realised.iter().sum::<f64>() / 8.0).powf(-0.6);
        let found = measure(&sequences, &gradient_setup(aperture)).unwrap();
        ratios.push(found.r0_zenith_500nm_m / truth_m);
        steps.push((r0_m / 0.0775).ln());
        pulls.push((found.r0_zenith_500nm_m - truth_m) / found.r0_zenith_sigma_m);
    }
    let mean = ratios.iter().sum::<f64>() / 20.0;
    let pull_rms = (pulls.iter().map(|it| it * it).sum::<f64>() / 20.0).sqrt();
    // 5 percent for the mean; chi-square of 20 pulls between its 0.5 and 99.5 percent points about
    // errors that are right to a third.
    assert!((mean - 1.0).abs() < 0.05, "mean ratio {mean}: {ratios:?}");
    assert!(
        (0.35..1.5).contains(&pull_rms),
        "pulls {pull_rms}: {pulls:?}"
    );
    // No trend from 3 to 20 cm: below three of its standard errors and 5 percent end to end.
    let square: f64 = steps.iter().map(|it: &f64| it * it).sum();
    let slope = steps
        .iter()
        .zip(&ratios)
        .map(|(x, y)| x * (y - mean))
        .sum::<f64>()
        / square;
    let scatter = (ratios.iter().map(|it| (it - mean).powi(2)).sum::<f64>() / 19.0).sqrt();
    let allowed = 3.0 * scatter / square.sqrt() + 0.05 / (20.0_f64 / 3.0).ln();
    assert!(
        slope.abs() < allowed,
        "slope {slope}, scatter {scatter}: {ratios:?}"
    );
}

#[test]
fn a_finite_exposure_is_put_back() {
    // 20 ms at 10 m/s take 2 to 20 percent of the harmonics of these layers, most from the lowest:
    // the same motion then means more turbulence.
    let aperture = Aperture::clear(0.1);
    let mut rng = ChaCha8Rng::seed_from_u64(61);
    let (one, _) = sequence(&mut rng, &aperture, THREE, 0.06, 0.3, 300, 3.0, 0.0);
    let setup = gradient_setup(aperture);
    let sequences = [one];
    let still = measure(&sequences, &setup).unwrap();
    let exposed = measure_exposed(&sequences, &setup, 0.02).unwrap();
    let ratio = exposed.r0_zenith_500nm_m / still.r0_zenith_500nm_m;
    assert!((0.80..0.99).contains(&ratio), "{ratio}");
    assert!(exposed.systematic_relative_sigma > still.systematic_relative_sigma);
}

#[test]
fn what_cannot_be_measured_is_refused() {
    let aperture = Aperture::clear(0.1);
    let setup = gradient_setup(aperture);
    assert_eq!(by_motion(&[], &setup), Err(SeeingError::NoSequence));
    let mut rng = ChaCha8Rng::seed_from_u64(51);
    let (few, _) = sequence(&mut rng, &aperture, THREE, 0.05, 0.0, 5, 3.0, 0.0);
    assert!(matches!(
        measure(&[few], &setup),
        Err(SeeingError::TooFewFrames {
            found: 5,
            least: 6,
            ..
        })
    ));
    let (mut low, _) = sequence(&mut rng, &aperture, THREE, 0.05, 0.0, 20, 3.0, 0.0);
    low.zenith_rad = 85.0 * DEG_RAD;
    assert!(matches!(
        measure(&[low], &setup),
        Err(SeeingError::OutOfRange {
            name: "zenith distance",
            ..
        })
    ));
    let (mut noise, _) = sequence(&mut rng, &aperture, &[], 0.05, 0.0, 40, 5.0, 0.0);
    noise.noise = vec![30.0; M_MAX + 1];
    assert!(matches!(
        measure(&[noise], &setup),
        Err(SeeingError::NoMotion { .. })
    ));
}
