//! The fit of a drift on made paths with known noise, and on what is wrong.

use super::super::distortion::DISTORTION_BINS;
use super::*;
use crate::refraction::Plate;
use crate::session::{Projection, ScaleOf};
use crate::sky::{Place, SunTrack, Utc};
use crate::units::{ARCSEC_RAD, DEG_RAD};
use rand::SeedableRng;
use rand_chacha::ChaCha12Rng;
use rand_distr::{Distribution, StandardNormal};

const SCALE: f64 = 2.05;
const UP_RAD: f64 = 1.1;

fn camera() -> FixedCamera {
    FixedCamera {
        plate: Plate {
            projection: Projection::Tan,
            scale_of: ScaleOf::Apparent,
        },
        refractivity: 2.2e-4,
        parity: Parity::Sky,
        middle_px: (1023.5, 1023.5),
    }
}

/// A drift over `duration_s`, without air, seen by a camera of known mounting.
fn drift(frames: usize, duration_s: f64) -> Vec<Centre> {
    let place = Place {
        latitude_rad: 31.0 * DEG_RAD,
        longitude_rad: 57.0 * DEG_RAD,
        height_m: 2200.0,
        ..Place::default()
    };
    let start = Utc::parse("2026-06-14T05:30:00").unwrap();
    let track = SunTrack::new(start, start.plus_s(duration_s + 1.0), &place, 0.0).unwrap();
    let seen = |time_s: f64| {
        let sun = track.at(start.plus_s(time_s)).unwrap();
        Seen {
            azimuth_rad: sun.azimuth_rad,
            zenith_rad: sun.zenith_true_rad,
        }
    };
    // The Sun passes the optical axis off the middle of the drift, and beside it.
    let mounting = Mounting {
        scale_arcsec_px: SCALE,
        up_rad: UP_RAD,
        axis: seen(0.4 * duration_s).offset(60.0 * ARCSEC_RAD, 0.3),
    };
    (0..frames)
        .map(|k| {
            let time_s = duration_s * k as f64 / (frames as f64 - 1.0);
            let (x_px, y_px) = camera().place_px(&mounting, &seen(time_s));
            Centre {
                time_s,
                x_px,
                y_px,
                seen: seen(time_s),
            }
        })
        .collect()
}

/// The same with noise: a first-order process of a standard deviation in arcsec, a correlated share and
/// time, and the rest white.
fn noisy(exact: &[Centre], sigma_arcsec: f64, share: f64, tau_s: f64, seed: u64) -> Vec<Centre> {
    let mut rng = ChaCha12Rng::seed_from_u64(seed);
    let mut normal = || -> f64 { StandardNormal.sample(&mut rng) };
    let mut slow = [normal(), normal()];
    let mut last_s = exact[0].time_s;
    exact
        .iter()
        .map(|it| {
            let kept = (-(it.time_s - last_s) / tau_s).exp();
            last_s = it.time_s;
            let add = slow.each_mut().map(|slow| {
                *slow = kept * *slow + (1.0 - kept * kept).sqrt() * normal();
                sigma_arcsec / SCALE * (share.sqrt() * *slow + (1.0 - share).sqrt() * normal())
            });
            Centre {
                x_px: it.x_px + add[0],
                y_px: it.y_px + add[1],
                ..*it
            }
        })
        .collect()
}

#[test]
fn exact_places_give_scale_and_angle_back() {
    let found = fit(&drift(40, 120.0), &camera(), (SCALE * 1.004, UP_RAD + 0.01)).unwrap();
    assert!((found.mounting.scale_arcsec_px / SCALE - 1.0).abs() < 1e-9);
    assert!((found.mounting.up_rad - UP_RAD).abs() < 1e-8);
    let worst = found
        .residuals
        .iter()
        .fold(0.0_f64, |most, it| most.max(it.1.abs()).max(it.2.abs()));
    assert!(worst < 1e-3, "{worst} mas");
}

/// Pulls over 400 drifts of each kind of noise, the mean of the squares within what chance allows at
/// four standard deviations: 1 +- 4 sqrt(2 / 400); the stated sigma within 1.2 of the formula of evenly
/// spread independent points, for the independent number that the noise has in truth.
#[test]
fn pulls_have_unit_width_whatever_the_correlation() {
    for (share, tau_s) in [(0.0, 1.0), (0.6, 2.0), (0.9, 6.0)] {
        let exact = drift(60, 120.0);
        let (mut scale, mut angle) = (0.0, 0.0);
        let mut sigmas = Vec::new();
        let mut estimates = Vec::new();
        let sessions = 400;
        for seed in 0..sessions {
            let it = noisy(&exact, 0.5, share, tau_s, seed);
            let found = fit(&it, &camera(), (SCALE, UP_RAD)).unwrap();
            let off = (found.mounting.scale_arcsec_px / SCALE).ln();
            scale += (off / found.scale_sigma_rel).powi(2);
            angle += ((found.mounting.up_rad - UP_RAD) / found.up_sigma_rad).powi(2);
            sigmas.push(found.scale_sigma_rel);
            estimates.push(off);
        }
        let n = sessions as f64;
        let allowed = 4.0 * (2.0 / n).sqrt();
        let stated = sigmas.iter().sum::<f64>() / n;
        let scatter = (estimates.iter().map(|it| it * it).sum::<f64>() / n).sqrt();
        assert!((scale / n - 1.0).abs() < allowed, "scale {}", scale / n);
        assert!((angle / n - 1.0).abs() < allowed, "angle {}", angle / n);
        assert!((stated / scatter).ln().abs() < 1.2_f64.ln());
        if share == 0.0 {
            let travel = 15.0 * 23.2_f64.to_radians().cos() * 120.0;
            let formula = 0.5 * 12.0_f64.sqrt() / (travel * 60.0_f64.sqrt());
            assert!(
                (stated / formula).ln().abs() < 1.2_f64.ln(),
                "{stated:e} {formula:e}"
            );
        }
    }
}

/// A lens whose scale changes over the field shows in the residuals where the disk was.
#[test]
fn residuals_along_the_way_map_the_distortion() {
    let mut it = noisy(&drift(200, 150.0), 0.2, 0.3, 1.0, 3);
    let (vx, vy) = fit(&it, &camera(), (SCALE, UP_RAD)).unwrap().velocity_px_s;
    let (c, n) = (vx / vx.hypot(vy), vy / vx.hypot(vy));
    for centre in &mut it {
        let x = (c * (centre.x_px - 1023.5) + n * (centre.y_px - 1023.5)) / 500.0;
        let bent = 0.4 * (x * x * x - 0.6 * x);
        centre.x_px += c * bent;
        centre.y_px += n * bent;
    }
    let found = fit(&it, &camera(), (SCALE, UP_RAD)).unwrap();
    assert_eq!(found.distortion.len(), DISTORTION_BINS);
    let chi2 = |bins: &[DistortionBin]| -> f64 {
        bins.iter()
            .map(|it| (it.along_mas / it.sigma_mas.0).powi(2))
            .sum()
    };
    // 0.1 percent of chance with 8 means.
    let by_chance = 26.1;
    assert!(chi2(&found.distortion) > by_chance);
    // The map is the lens's: what was put in, its straight part taken out, within the stated errors.
    let put_in: Vec<(f64, f64)> = found
        .distortion
        .iter()
        .map(|it| {
            let x = it.along_px / 500.0;
            (x, 1000.0 * SCALE * 0.4 * (x * x * x - 0.6 * x))
        })
        .collect();
    let n = put_in.len() as f64;
    let mean = |f: &dyn Fn(&(f64, f64)) -> f64| put_in.iter().map(f).sum::<f64>() / n;
    let (mx, my) = (mean(&|it| it.0), mean(&|it| it.1));
    let slope = mean(&|it| (it.0 - mx) * (it.1 - my)) / mean(&|it| (it.0 - mx).powi(2));
    let off: f64 = found
        .distortion
        .iter()
        .zip(&put_in)
        .map(|(it, &(x, y))| {
            ((it.along_mas - (y - my - slope * (x - mx))) / it.sigma_mas.0).powi(2)
        })
        .sum();
    assert!(off < by_chance, "{off}");
    // Without it, nothing stands out.
    let plain = fit(
        &noisy(&drift(200, 150.0), 0.2, 0.3, 1.0, 4),
        &camera(),
        (SCALE, UP_RAD),
    );
    let left = chi2(&plain.unwrap().distortion);
    assert!(left < by_chance, "{left}");
}

#[test]
fn a_tracked_sun_is_named() {
    let exact = drift(20, 60.0);
    let still: Vec<Centre> = exact
        .iter()
        .map(|it| Centre {
            x_px: 1000.0,
            y_px: 1010.0,
            ..*it
        })
        .collect();
    let error = fit(&noisy(&still, 0.5, 0.0, 1.0, 1), &camera(), (SCALE, UP_RAD)).unwrap_err();
    assert!(matches!(error, DriftError::NotMoving { .. }), "{error}");
    assert!(error.to_string().contains("was tracking on?"));
}

#[test]
fn a_mirrored_detector_is_named() {
    let mirrored = FixedCamera {
        parity: Parity::Mirrored,
        ..camera()
    };
    let error = fit(&drift(20, 60.0), &mirrored, (SCALE, UP_RAD)).unwrap_err();
    assert!(matches!(error, DriftError::WrongWay { .. }), "{error}");
    assert!(error.to_string().contains("correct camera.parity"));
}

#[test]
fn wrong_times_and_too_few_disks_are_named() {
    let mut slow = drift(20, 60.0);
    let seen: Vec<Seen> = drift(20, 66.0).iter().map(|it| it.seen).collect();
    for (it, seen) in slow.iter_mut().zip(seen) {
        it.seen = seen;
    }
    let error = fit(&slow, &camera(), (SCALE, UP_RAD)).unwrap_err();
    assert!(matches!(error, DriftError::WrongRate { .. }), "{error}");
    let error = fit(&slow[..3], &camera(), (SCALE, UP_RAD)).unwrap_err();
    assert!(
        matches!(error, DriftError::TooFew { found: 3, .. }),
        "{error}"
    );
}
