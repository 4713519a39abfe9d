//! Source: `selection_bias.csv`, a Monte Carlo of an independent program: what is left of 50 mas of
//! `cos 2` in the tenth of the frames that a criterion likes best. Frames are drawn here from the exact
//! variances of the limb's harmonics, which `limb_motion_kernels.rs` checks against tables.

use rand::SeedableRng;
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, StandardNormal};
use truelimb::select::{Candidate, FIRST_JUDGING, sharpest, weights};
use truelimb::turbulence::{Aperture, Tilt, harmonic_kernels};
use truelimb::units::{ARCSEC_RAD, MAS_RAD};

const TABLE: &str = include_str!(concat!(
    env!("CARGO_MANIFEST_DIR"),
    "/tests/data/selection_bias.csv"
));

/// Sectors of 3.75 degrees, as in the table's Monte Carlo.
const SECTORS: usize = 96;
const M_MAX: usize = 46;
const FRAMES: usize = 30_000;
const INJECTED_MAS: f64 = 50.0;
const KEPT: f64 = 0.1;

/// A row of the table: share left, its standard error, scatter of `cos 2` in mas.
fn row(case: &str, metric: &str) -> (f64, f64, f64) {
    let line = TABLE
        .lines()
        .find(|it| it.contains(case) && it.contains(&format!(",{metric},")))
        .unwrap_or_else(|| panic!("no row {case}, {metric}"));
    let mut numbers = line.rsplit(',').map(|it| it.parse::<f64>().unwrap());
    let (scatter, se, share) = (
        numbers.next().unwrap(),
        numbers.next().unwrap(),
        numbers.next().unwrap(),
    );
    (share, se, scatter)
}

/// Cosine and sine of m = 2 to [`M_MAX`] of every frame, mas, without the Sun's figure.
struct Frames {
    cos: Vec<[f64; M_MAX + 1]>,
    sin: Vec<[f64; M_MAX + 1]>,
    /// Photon-noise variance of a coefficient, mas^2.
    noise_mas2: f64,
}

impl Frames {
    /// A layer of r0 = 5 cm (none where the height is zero) seen by 0.1 m, outer scale 25 m.
    fn drawn(seed: u64, height_m: f64, sector_noise_mas: f64) -> Self {
        let aperture = Aperture {
            diameter_m: 0.1,
            obstruction: 0.0,
        };
        let unit = (500e-9 / MAS_RAD).powi(2) * 0.05_f64.powf(-5.0 / 3.0);
        let ring_m = height_m * 960.0 * ARCSEC_RAD;
        let kernels = if height_m > 0.0 {
            harmonic_kernels(&aperture, Tilt::Gradient, 25.0, ring_m, M_MAX).unwrap()
        } else {
            vec![0.0; M_MAX + 1]
        };
        let noise_mas2 = 2.0 * sector_noise_mas.powi(2) / SECTORS as f64;
        let mut rng = ChaCha8Rng::seed_from_u64(seed);
        let mut draw = || {
            std::array::from_fn(|m| {
                let normal: f64 = StandardNormal.sample(&mut rng);
                (unit * kernels[m] + noise_mas2).sqrt() * normal
            })
        };
        let (mut cos, mut sin) = (Vec::new(), Vec::new());
        for _ in 0..FRAMES {
            cos.push(draw());
            sin.push(draw());
        }
        Self {
            cos,
            sin,
            noise_mas2,
        }
    }

    /// What is left of the injected figure in the mean over `chosen`: with it minus without it, the
    /// frames being the same.
    fn left(&self, choose: impl Fn(&dyn Fn(usize, usize) -> f64) -> Vec<f64>) -> f64 {
        let mean = |injected: f64| {
            let cos2 = |k: usize| self.cos[k][2] + injected;
            let weights = choose(&|k, m| {
                let c = if m == 2 { cos2(k) } else { self.cos[k][m] };
                0.5 * (c * c + self.sin[k][m].powi(2))
            });
            let total: f64 = weights.iter().sum();
            (0..FRAMES).map(|k| weights[k] * cos2(k)).sum::<f64>() / total
        };
        (mean(INJECTED_MAS) - mean(-INJECTED_MAS)) / (2.0 * INJECTED_MAS)
    }

    fn candidates(&self, power: &dyn Fn(usize, usize) -> f64) -> Vec<Candidate> {
        (0..FRAMES)
            .map(|k| {
                let high_power: Vec<f64> = (FIRST_JUDGING..=M_MAX)
                    .map(|m| power(k, m) - self.noise_mas2)
                    .collect();
                Candidate {
                    sequence: 0,
                    // A sharp frame is one of little motion at m >= 5.
                    blur: high_power.iter().sum(),
                    high_power,
                }
            })
            .collect()
    }
}

/// The tenth of the frames with the least of a number, each of weight one.
fn tenth(of: impl Fn(usize) -> f64) -> Vec<f64> {
    let value: Vec<f64> = (0..FRAMES).map(of).collect();
    let mut order: Vec<usize> = (0..FRAMES).collect();
    order.sort_by(|&a, &b| value[a].total_cmp(&value[b]));
    let mut out = vec![0.0; FRAMES];
    let kept = (KEPT * FRAMES as f64) as usize;
    order.iter().take(kept).for_each(|&k| out[k] = 1.0);
    out
}

const CASES: [(&str, f64, f64); 3] = [
    ("turbulence h=500m", 500.0, 20.0),
    ("turbulence h=20m", 20.0, 100.0),
    ("noise only 600 mas", 0.0, 600.0),
];

#[test]
fn the_tenth_that_looks_roundest_has_lost_the_figure() {
    for (seed, (case, height_m, noise_mas)) in CASES.into_iter().enumerate() {
        let frames = Frames::drawn(seed as u64, height_m, noise_mas);
        let (share, se, _) = row(case, "rms-residual(all sectors)->all");
        let (_, _, scatter) = row(case, "all frames");
        let own = (frames.cos.iter().map(|it| it[2] * it[2]).sum::<f64>() / FRAMES as f64).sqrt();
        // 30000 frames know their scatter to 0.4 percent.
        assert!(
            (own / scatter - 1.0).abs() < 0.015,
            "{case}: {own} mas, table {scatter}"
        );
        let left = frames.left(|power| tenth(|k| (2..=M_MAX).map(|m| power(k, m)).sum()));
        // Four standard errors of the table, and as much of our own smaller sample.
        let ours = 1.1 * scatter / INJECTED_MAS / (KEPT * FRAMES as f64).sqrt() * share;
        assert!(
            (left - share).abs() < 4.0 * se.hypot(ours),
            "{case}: {left} is left, table {share} +- {se}"
        );
        assert!(left < 0.85, "{case}: {left}");
    }
}

#[test]
fn the_sharpest_tenth_and_the_weights_leave_the_figure_as_it_is() {
    for (seed, (case, height_m, noise_mas)) in CASES.into_iter().enumerate() {
        let frames = Frames::drawn(10 + seed as u64, height_m, noise_mas);
        let (share, se, _) = row(case, "modes m>=5 ->a2");
        let kept = frames.left(|power| {
            let chosen = sharpest(&frames.candidates(power), KEPT);
            chosen
                .into_iter()
                .map(|it| f64::from(u8::from(it)))
                .collect()
        });
        let weighed = frames.left(|power| weights(&frames.candidates(power)));
        for left in [kept, weighed] {
            assert!((left - 1.0).abs() < 0.03, "{case}: {left} is left");
            assert!(
                (left - share).abs() < 3.0 * se,
                "{case}: {left}, table {share}"
            );
        }
    }
}
