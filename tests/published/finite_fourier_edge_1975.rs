//! Source: Hill, Stebbins & Oleson 1975, `ApJ` 200, 484: edge of the Sun by a finite Fourier transform.
//! Its invariances and its relation to the inflection point follow from the definition.

use truelimb::disk::{Darkening, DarkeningLaw, SolarEdge};
use truelimb::optics::definitions::{fftd_arcsec, inflection_arcsec};
use truelimb::optics::{Blur, Exposure, Grid, LimbOptics, OpticsError, ProfileMaker, Telescope};

fn limb(sigma_arcsec: f64) -> (Vec<f64>, Grid) {
    let darkening = Darkening::new(DarkeningLaw::Neckel2005, 650.0).unwrap();
    let optics = LimbOptics {
        edge: SolarEdge {
            radius_arcsec: 960.0,
            scale_arcsec: 0.08,
            darkening,
        },
        telescope: Telescope {
            aperture_m: 0.15,
            central_obstruction: 0.2,
        },
        wavelength_nm: 650.0,
        exposure: Exposure::Long,
    };
    let maker = ProfileMaker::new(&optics, 30.0, 1.0 / 64.0, 1.0).unwrap();
    let blur = Blur {
        r0_m: 0.08,
        gaussian_sigma_arcsec: sigma_arcsec,
    };
    (maker.profile(&blur, 0.3), maker.grid())
}

#[test]
fn constant_ramp_and_gain_do_not_move_the_edge() {
    let (profile, grid) = limb(0.3);
    for window in [5.0, 10.0, 20.0] {
        let plain = fftd_arcsec(&profile, &grid, window).unwrap();
        for (constant, slope, gain) in [
            (0.7, 0.0, 1.0),
            (0.0, 0.02, 1.0),
            (0.0, 0.0, 3.0),
            (-5.0, -0.1, 20_000.0),
        ] {
            let changed: Vec<f64> = (0..grid.n)
                .map(|i| gain * (profile[i] + constant + slope * grid.x_arcsec(i)))
                .collect();
            let moved = fftd_arcsec(&changed, &grid, window).unwrap() - plain;
            assert!(moved.abs() < 1e-9, "window {window}: {moved} arcsec");
        }
    }
}

#[test]
fn edge_moves_with_the_profile() {
    let (profile, grid) = limb(0.3);
    let shifted = Grid {
        x0_arcsec: grid.x0_arcsec + 0.123_4,
        ..grid
    };
    let fftd = |grid: &Grid| fftd_arcsec(&profile, grid, 10.0).unwrap();
    assert!((fftd(&shifted) - fftd(&grid) - 0.123_4).abs() < 1e-9);
    let inflection = |grid: &Grid| inflection_arcsec(&profile, grid).unwrap();
    assert!((inflection(&shifted) - inflection(&grid) - 0.123_4).abs() < 1e-12);
}

#[test]
fn edge_is_the_inflection_of_the_profile_smoothed_by_the_window() {
    let (profile, grid) = limb(0.5);
    for window in [5.0_f64, 10.0] {
        let half = (window / grid.step_arcsec) as i32;
        let kernel: Vec<f64> = (-half..=half)
            .map(|i| {
                (1.0 - (f64::from(i) * grid.step_arcsec / window).powi(2))
                    .max(0.0)
                    .powf(1.5)
            })
            .collect();
        let smoothed: Vec<f64> = profile
            .windows(kernel.len())
            .map(|part| part.iter().zip(&kernel).map(|(p, k)| p * k).sum())
            .collect();
        let inner = Grid {
            x0_arcsec: grid.x_arcsec(half as usize),
            n: smoothed.len(),
            ..grid
        };
        let expected = inflection_arcsec(&smoothed, &inner).unwrap();
        let found = fftd_arcsec(&profile, &grid, window).unwrap();
        assert!(
            (found - expected).abs() < 1e-4,
            "window {window}: {found} for {expected}"
        );
    }
}

#[test]
fn blur_moves_the_finite_transform_less_than_the_inflection() {
    let (sharp, grid) = limb(0.2);
    let (soft, _) = limb(1.2);
    let moved = |edge: &dyn Fn(&[f64]) -> f64| (edge(&soft) - edge(&sharp)).abs();
    let inflection = moved(&|it| inflection_arcsec(it, &grid).unwrap());
    let fftd = moved(&|it| fftd_arcsec(it, &grid, 10.0).unwrap());
    assert!(fftd < 0.1 * inflection, "{fftd} and {inflection}");
}

#[test]
fn profiles_without_an_edge_are_refused() {
    let grid = Grid {
        x0_arcsec: -30.0,
        step_arcsec: 0.05,
        n: 1201,
    };
    let flat = vec![1.0; grid.n];
    assert!(matches!(
        inflection_arcsec(&flat, &grid),
        Err(OpticsError::NoInflection { .. })
    ));
    let rising: Vec<f64> = (0..grid.n).map(|i| grid.x_arcsec(i).atan()).collect();
    assert!(matches!(
        fftd_arcsec(&rising, &grid, 10.0),
        Err(OpticsError::NoZero { .. })
    ));
    assert!(matches!(
        inflection_arcsec(&rising, &grid),
        Err(OpticsError::NoInflection { .. })
    ));
    let (profile, grid) = limb(0.3);
    for window in [40.0, 0.01, f64::NAN] {
        let found = fftd_arcsec(&profile, &grid, window);
        assert!(
            matches!(found, Err(OpticsError::OutOfRange { .. })),
            "{window}"
        );
    }
    assert!(inflection_arcsec(&[], &grid).is_err());
    assert!(fftd_arcsec(&[1.0], &grid, 5.0).is_err());
}
