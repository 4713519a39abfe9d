//! Source: Monte Carlo simulations of the motion of the limb (Fourier phase screens, plane waves), an
//! integral in real space, a table of autocorrelations and one of turbulence floors: tables made
//! without this program.

use truelimb::seeing::{Layer, Profile, View, floor_correlation_time_s, floor_variance_mas2};
use truelimb::turbulence::{
    Aperture, Tilt, covariance_kernels, harmonic_kernels, harmonic_lag_kernels, variance_kernel,
};
use truelimb::units::ARCSEC_RAD;

const LIMB_RAD: f64 = 960.0 * ARCSEC_RAD;

/// Numbers of a table; what is not a number, such as an empty field, is NaN.
fn rows(text: &str) -> Vec<Vec<f64>> {
    text.lines()
        .filter(|line| !line.starts_with('#'))
        .skip(1)
        .map(|line| {
            line.split(',')
                .map(|it| it.parse().unwrap_or(f64::NAN))
                .collect()
        })
        .collect()
}

/// A Monte Carlo's figure may be off by this many of its own standard errors: of 200 figures one
/// expects less than one beyond 3; the pixels of its grid take half a percent.
fn agrees(theory: f64, simulated: f64, standard_error: f64) -> bool {
    (theory - simulated).abs() < 3.2 * standard_error + 0.005 * theory.abs()
}

#[test]
fn covariances_of_phase_screens() {
    let table = rows(include_str!("../data/mc_check_covariance.csv"));
    assert_eq!(table.len(), 22);
    for it in table {
        let (aperture, s) = (Aperture::clear(it[0]), it[2]);
        let (b0, b2) = covariance_kernels(&aperture, Tilt::Gradient, it[1], s).unwrap();
        let sigma2 = variance_kernel(&aperture, Tilt::Gradient, it[1]).unwrap();
        for (found, printed, simulated, se) in [
            (b0 - b2, it[3], it[4], it[5]),
            (b0 + b2, it[6], it[7], it[8]),
        ] {
            // Six figures are printed.
            assert!(
                (found - printed).abs() < 5e-7 + 1e-6 * sigma2,
                "{it:?}: {found}"
            );
            assert!(agrees(found, simulated, se), "{it:?}: {found}");
        }
    }
}

#[test]
fn harmonics_of_phase_screens() {
    let mut count = 0;
    for text in [
        include_str!("../data/mc_check_harmonics.csv"),
        include_str!("../data/mc_check_harmonics_fine.csv"),
    ] {
        for it in rows(text) {
            let (aperture, m) = (Aperture::clear(it[0]), it[3] as usize);
            let k = harmonic_kernels(&aperture, Tilt::Gradient, it[1], it[2] * LIMB_RAD, m.max(1))
                .unwrap()[m];
            assert!((k / it[4] - 1.0).abs() < 5e-6, "{it:?}: {k}");
            assert!(agrees(k, it[5], it[6]), "{it:?}: {k}");
            count += 1;
        }
    }
    assert_eq!(count, 30);
}

#[test]
fn harmonics_of_plane_waves_with_and_without_drift() {
    let table = rows(include_str!("../data/mc_check_planewave.csv"));
    assert_eq!(table.len(), 49);
    for it in table {
        let (aperture, m) = (Aperture::clear(it[0]), it[5] as usize);
        let k = harmonic_lag_kernels(&aperture, Tilt::Gradient, it[1], it[2] * LIMB_RAD, 6, it[3])
            .unwrap()[m];
        let sign = if m % 2 == 0 { 1.0 } else { -1.0 };
        let turn = if it[4].is_nan() {
            0.0
        } else {
            (2.0 * m as f64 * it[4].to_radians()).cos()
        };
        let found = k.mean + sign * turn * k.swing;
        let sigma2 = variance_kernel(&aperture, Tilt::Gradient, it[1]).unwrap();
        assert!((found - it[6]).abs() < 3e-6 * sigma2, "{it:?}: {found}");
        assert!(agrees(found, it[7], it[8]), "{it:?}: {found}");
    }
}

#[test]
fn covariances_by_real_space() {
    let table = rows(include_str!("../data/check_realspace_vs_spectral.csv"));
    assert_eq!(table.len(), 90);
    for it in table {
        let aperture = Aperture::clear(it[0]);
        let s = it[2] * it[3] * ARCSEC_RAD;
        let (b0, b2) = covariance_kernels(&aperture, Tilt::Gradient, it[1], s).unwrap();
        let sigma2 = variance_kernel(&aperture, Tilt::Gradient, it[1]).unwrap();
        assert!(
            (b0 - b2 - it[5]).abs() < 1e-6 * sigma2,
            "{it:?}: {}",
            b0 - b2
        );
        assert!(
            (b0 + b2 - it[7]).abs() < 1e-6 * sigma2,
            "{it:?}: {}",
            b0 + b2
        );
    }
}

#[test]
fn autocorrelation_of_one_direction() {
    // Frozen flow: a lag is a separation along the wind.
    let table = rows(include_str!("../data/aa_temporal_autocorrelation.csv"));
    assert_eq!(table.len(), 33);
    let aperture = Aperture::clear(0.1);
    for it in table {
        let outer_m = 0.1 * it[0];
        let (b0, b2) = covariance_kernels(&aperture, Tilt::Gradient, outer_m, 0.1 * it[1]).unwrap();
        let sigma2 = variance_kernel(&aperture, Tilt::Gradient, outer_m).unwrap();
        assert!(((b0 - b2) / sigma2 - it[2]).abs() < 1.5e-5, "{it:?}");
        assert!(((b0 + b2) / sigma2 - it[3]).abs() < 1.5e-5, "{it:?}");
    }
}

/// Height, share, of the table's composite profiles.
fn composite(name: &str) -> Vec<(f64, f64)> {
    match name.split_once(' ').unwrap().0 {
        "\"surface-dominated" => vec![(10.0, 0.70), (500.0, 0.15), (5000.0, 0.15)],
        "\"extended" => vec![(20.0, 0.35), (200.0, 0.25), (1000.0, 0.25), (7000.0, 0.15)],
        "\"lake/peak" => vec![(10.0, 0.20), (500.0, 0.30), (5000.0, 0.50)],
        other => panic!("{other}"),
    }
}

#[test]
fn floors_of_composite_profiles() {
    let text = include_str!("../data/oblateness_floor.csv");
    let mut count = 0;
    for line in text.lines().filter(|it| !it.starts_with('#')).skip(1) {
        let (name, numbers) = line.rsplit_once("\",").unwrap();
        let it: Vec<f64> = numbers.split(',').map(|it| it.parse().unwrap()).collect();
        let r0_m = 0.01 * it[2];
        let layers = composite(name)
            .into_iter()
            .map(|(height_m, share)| Layer {
                height_m,
                share,
                r0_zenith_500nm_m: r0_m * share.powf(-0.6),
            })
            .collect();
        let profile = Profile {
            layers,
            outer_scale_m: it[1],
        };
        let aperture = Aperture::clear(it[0]);
        let view = View {
            zenith_rad: 0.0,
            limb_radius_rad: LIMB_RAD,
            sector_rad: 0.0,
            drift_m: 0.0,
        };
        let floor = floor_variance_mas2(&profile, &aperture, Tilt::Gradient, &view, 2).unwrap();
        // Half a unit of the fourth figure, of 1 to 9.999.
        let near = |found: f64, printed: f64| (found / printed - 1.0).abs() < 6e-4;
        assert!(near(floor[0].sqrt(), it[3]), "{line}: {}", floor[0].sqrt());
        assert!(near(floor[2].sqrt(), it[4]), "{line}: {}", floor[2].sqrt());
        assert!(near(2.0 * floor[2].sqrt(), it[5]), "{line}");
        assert!(near(floor[1].sqrt(), it[11]), "{line}: {}", floor[1].sqrt());
        // The table's layers have winds of their own that it does not list: its correlation time is
        // met by one wind between 2 and 40 m/s, the same for every r0.
        let at_10 = floor_correlation_time_s(&profile, &aperture, Tilt::Gradient, &view, 10.0, 2)
            .unwrap()[2];
        let wind_m_s = 10.0 * at_10 / it[6];
        assert!((2.0..40.0).contains(&wind_m_s), "{line}: {wind_m_s}");
        // sigma after an hour, and hours to 0.5 mas of the oblateness, from the table's own time.
        let hour = floor[2].sqrt() * (it[6] / 3600.0).sqrt();
        assert!(near(hour, it[8]), "{line}: {hour}");
        assert!(
            (((2.0 * hour) / 0.5).powi(2) / it[10] - 1.0).abs() < 1.5e-3,
            "{line}"
        );
        count += 1;
    }
    assert_eq!(count, 90);
}
