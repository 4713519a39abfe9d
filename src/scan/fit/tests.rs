//! The fit of transits: its columns on a moved circle, and its errors on made sessions.

use super::*;
use rand::SeedableRng;
use rand_chacha::ChaCha12Rng;
use rand_distr::{Distribution, StandardNormal};

const KNOWN: ScanKnown = ScanKnown {
    scale_sigma_rel: 5e-5,
    angle_sigma_rad: 5e-4,
    clock_sigma_rel: 1e-6,
    refractivity_sigma_rel: 3e-3,
};

fn transit(sequence: usize, motion_rad: f64) -> Transit {
    Transit {
        sequence,
        harmonics_mas: [0.0; 3],
        axis_rad: 1.4 + motion_rad,
        b0_rad: 0.02,
        motion_rad,
        zenith_rad: 0.7 + motion_rad,
        tan_zenith: 1.0,
        refractivity: 2.2e-4,
    }
}

/// The columns against the circle itself, moved point by point.
#[test]
fn columns_are_what_the_inputs_do_to_a_circle() {
    let it = transit(0, 0.3);
    let r = REFERENCE_RADIUS_MAS;
    let unit = |angle: f64| (angle.cos(), angle.sin());
    let (u, v) = (unit(SLIT_RAD), unit(it.motion_rad));
    let small = 1e-6;
    // A limb point p = y u + w v; what is assumed of y, u, w moves it.
    let moved = |theta: f64, input: usize| {
        let p = (r * theta.cos(), r * theta.sin());
        let determinant = u.0 * v.1 - u.1 * v.0;
        let y = (p.0 * v.1 - p.1 * v.0) / determinant;
        let w = (u.0 * p.1 - u.1 * p.0) / determinant;
        let (y, w, u) = match input {
            0 => (y / (1.0 + small), w, u),
            1 => (y, w, unit(SLIT_RAD - small)),
            _ => (y, w / (1.0 + small), u),
        };
        (y * u.0 + w * v.0).hypot(y * u.1 + w * v.1) - r
    };
    for input in 0..3 {
        let n = 720;
        let mut sums = [0.0; 3];
        for k in 0..n {
            let theta = std::f64::consts::TAU * f64::from(k) / f64::from(n);
            let off = moved(theta, input) / small / f64::from(n);
            sums[0] += off;
            sums[1] += 2.0 * off * (2.0 * theta).cos();
            sums[2] += 2.0 * off * (2.0 * theta).sin();
        }
        let expected = columns(&it)[input];
        for i in 0..3 {
            assert!(
                (sums[i] - expected[i]).abs() < 1e-4 * r,
                "{input} {i}: {} vs {}",
                sums[i],
                expected[i]
            );
        }
    }
}

/// Across the slit neither its scale nor its angle is seen.
#[test]
fn across_an_upright_slit_only_time_counts() {
    let [scale, angle, clock, _] = columns(&transit(0, 0.0));
    for it in [scale, angle] {
        assert!((it[0] + it[1]).abs() < 1e-6);
    }
    assert!((clock[0] + clock[1] + REFERENCE_RADIUS_MAS).abs() < 1e-6);
}

/// Sessions of 20 transits at one or three angles of the slit, inputs wrong by what is known of them: the
/// squares of the pulls within what chance allows at four standard deviations.
#[test]
fn pulls_have_unit_width() {
    let mut rng = ChaCha12Rng::seed_from_u64(7);
    let mut normal = || -> f64 { StandardNormal.sample(&mut rng) };
    let truth = (-20.0, 8.0, -0.8);
    let sessions = 400;
    for angles in [vec![0.05], vec![-0.7, 0.05, 0.75]] {
        let mut sums = [0.0; 2];
        for _ in 0..sessions {
            let inputs = [
                KNOWN.scale_sigma_rel * normal(),
                KNOWN.clock_sigma_rel * normal(),
                KNOWN.refractivity_sigma_rel * normal(),
            ];
            let mut all = Vec::new();
            for (sequence, &motion) in angles.iter().enumerate() {
                let turned = KNOWN.angle_sigma_rad * normal();
                for _ in 0..21 / angles.len() {
                    let mut it = transit(sequence, motion);
                    let sun = sun_columns(it.b0_rad, it.axis_rad);
                    let by = columns(&it);
                    let (a, b) = (100.0 * normal(), 80.0 * normal());
                    let noise = [a, 0.6 * a + b, 60.0 * normal()];
                    for i in 0..3 {
                        it.harmonics_mas[i] = truth.0 * sun[0][i]
                            + truth.1 * sun[1][i]
                            + truth.2 * sun[2][i]
                            + inputs[0] * by[0][i]
                            + turned * by[1][i]
                            + inputs[1] * by[2][i]
                            + inputs[2] * by[3][i]
                            + noise[i];
                    }
                    all.push(it);
                }
            }
            let found = fit(&all, &KNOWN).unwrap();
            let total = |i: usize| found.sigmas_mas(true)[i].hypot(found.sigmas_mas(false)[i]);
            let off = found.radius_mas - REFERENCE_RADIUS_MAS - truth.0;
            sums[0] += (off / total(0)).powi(2);
            sums[1] += ((found.oblateness_mas - truth.1) / total(1)).powi(2);
        }
        let n = f64::from(sessions);
        // With 18 degrees of freedom Student's variance is 18 / 16.
        let allowed = 4.0 * (2.0 / n).sqrt() + 0.125;
        for sum in sums {
            assert!((sum / n - 1.0).abs() < allowed, "{angles:?}: {}", sum / n);
        }
    }
}

#[test]
fn two_transits_are_too_few() {
    let error = fit(&[transit(0, 0.0), transit(0, 0.0)], &KNOWN).unwrap_err();
    assert_eq!(
        error,
        ScanError::TooFew {
            found: 2,
            needed: 3
        }
    );
}
