//! Source: O'Neill 1956, J. Opt. Soc. Am. 46, 285 (annular pupil, formula from memory); Fried 1966, J. Opt.
//! Soc. Am. 56, 1372; `limb_width_vs_r0.csv` and the widths of a pure Kolmogorov edge, computed once
//! by an independent program: regression values, not an outside source.

use std::f64::consts::PI;
use truelimb::disk::{Darkening, SolarEdge};
use truelimb::optics::transfer::{long_exposure, short_exposure};
use truelimb::optics::{Blur, Exposure, LimbOptics, OpticsError, ProfileMaker, Telescope};
use truelimb::units::ARCSEC_RAD;

const WIDTHS: &str = include_str!(concat!(
    env!("CARGO_MANIFEST_DIR"),
    "/tests/data/limb_width_vs_r0.csv"
));

#[test]
fn clear_aperture_has_the_closed_form() {
    let telescope = Telescope {
        aperture_m: 0.15,
        central_obstruction: 0.0,
    };
    let cutoff = telescope.cutoff_cycles_arcsec(650e-9);
    assert!((cutoff - 0.15 / 650e-9 * ARCSEC_RAD).abs() < 1e-12);
    for i in 0..=50 {
        let u = f64::from(i) / 50.0;
        let expected = 2.0 / PI * (u.acos() - u * (1.0 - u * u).sqrt());
        assert!(
            (telescope.transfer(u * cutoff, 650e-9) - expected).abs() < 1e-14,
            "{u}"
        );
    }
    assert!(telescope.transfer(1.01 * cutoff, 650e-9) == 0.0);
}

#[test]
fn annular_aperture_has_the_published_form() {
    for e in [0.1, 0.25, 1.0 / 3.0, 0.45] {
        let telescope = Telescope {
            aperture_m: 0.3,
            central_obstruction: e,
        };
        let cutoff = telescope.cutoff_cycles_arcsec(550e-9);
        for i in 1..100 {
            // nu runs to 2 at the cutoff, as printed.
            let nu = 2.0 * f64::from(i) / 100.0;
            let circle = |a: f64| (a / 2.0).acos() - a / 2.0 * (1.0 - a * a / 4.0).sqrt();
            let a = 2.0 / PI * circle(nu);
            let b = if nu <= 2.0 * e {
                2.0 * e * e / PI * circle(nu / e)
            } else {
                0.0
            };
            let c = if nu < 1.0 - e {
                -2.0 * e * e
            } else if nu < 1.0 + e {
                let phi = ((1.0 + e * e - nu * nu) / (2.0 * e)).acos();
                2.0 * e / PI * phi.sin() + (1.0 + e * e) / PI * phi
                    - 2.0 * (1.0 - e * e) / PI * ((1.0 + e) / (1.0 - e) * (phi / 2.0).tan()).atan()
                    - 2.0 * e * e
            } else {
                0.0
            };
            let expected = (a + b + c) / (1.0 - e * e);
            let found = telescope.transfer(0.5 * nu * cutoff, 550e-9);
            assert!(
                (found - expected).abs() < 1e-12,
                "e {e}, nu {nu}: {found} for {expected}"
            );
        }
    }
}

#[test]
fn annular_aperture_is_the_autocorrelation_of_the_pupil() {
    // Counted on a grid of 1/500 of the radius: no formula.
    let e = 0.4;
    let telescope = Telescope {
        aperture_m: 0.2,
        central_obstruction: e,
    };
    let cutoff = telescope.cutoff_cycles_arcsec(500e-9);
    let open = |x: f64, y: f64| {
        let r = x.hypot(y);
        r <= 1.0 && r >= e
    };
    let grid: Vec<f64> = (-500..500).map(|i| (f64::from(i) + 0.5) / 500.0).collect();
    let total = grid
        .iter()
        .flat_map(|x| grid.iter().map(|y| open(*x, *y)))
        .filter(|it| *it)
        .count();
    for u in [0.1, 0.35, 0.5, 0.8] {
        let common = grid
            .iter()
            .flat_map(|x| grid.iter().map(|y| open(*x, *y) && open(*x + 2.0 * u, *y)))
            .filter(|it| *it)
            .count();
        let expected = common as f64 / total as f64;
        assert!(
            (telescope.transfer(u * cutoff, 500e-9) - expected).abs() < 1e-3,
            "{u}"
        );
    }
}

#[test]
fn air_has_frieds_form() {
    // lambda f = r0 and half of it: exp(-3.44) and exp(-3.44 / 2^(5/3)).
    let (wavelength_m, r0_m) = (550e-9, 0.05);
    let f = r0_m / wavelength_m * ARCSEC_RAD;
    assert!((long_exposure(f, wavelength_m, r0_m) - (-3.44_f64).exp()).abs() < 1e-14);
    let half = (-3.44_f64 * 0.5_f64.powf(5.0 / 3.0)).exp();
    assert!((long_exposure(0.5 * f, wavelength_m, r0_m) - half).abs() < 1e-14);
    // An aperture of 8 r0: u = 1/8, u^(1/3) = 1/2.
    let short = short_exposure(f, wavelength_m, 8.0 * r0_m, r0_m);
    assert!((short - (-1.72_f64).exp()).abs() < 1e-14);
    assert!((long_exposure(f, wavelength_m, f64::INFINITY) - 1.0).abs() < 1e-15);
    assert!((short_exposure(2.0 * f, wavelength_m, r0_m, r0_m) - 1.0).abs() < 1e-15);
}

/// Distance between two levels of the straight edge's profile, arcsec.
fn distance(profile: &[f64], step: f64, high: f64, low: f64) -> f64 {
    let crossing = |level: f64| {
        let i = profile.iter().position(|&it| it < level).unwrap();
        i as f64 - (level - profile[i]) / (profile[i - 1] - profile[i])
    };
    step * (crossing(low) - crossing(high))
}

fn straight_edge(telescope: Telescope, exposure: Exposure, pixel: f64, step: f64) -> ProfileMaker {
    let darkening = Darkening::from_coefficients([1.0, 0.0, 0.0, 0.0, 0.0, 0.0]).unwrap();
    // The largest disk: curvature moves the levels by 0.1 mas at most.
    let edge = SolarEdge {
        radius_arcsec: 2000.0,
        scale_arcsec: 0.0,
        darkening,
    };
    let optics = LimbOptics {
        edge,
        telescope,
        wavelength_nm: 550.0,
        exposure,
    };
    ProfileMaker::new(&optics, 30.0, step, pixel).unwrap()
}

#[test]
fn edge_widths_follow_the_table() {
    let mut rows = 0;
    for line in WIDTHS
        .lines()
        .skip(2)
        .filter(|it| it.split(',').nth(4) == Some("inf"))
    {
        let cell: Vec<&str> = line.split(',').collect();
        let number = |i: usize| -> f64 { cell[i].parse().unwrap() };
        let telescope = Telescope {
            aperture_m: number(1),
            central_obstruction: 0.0,
        };
        let exposure = if cell[5] == "long" {
            Exposure::Long
        } else {
            Exposure::Short
        };
        let maker = straight_edge(telescope, exposure, number(2), 0.005);
        let r0_m = if cell[3] == "none" {
            f64::INFINITY
        } else {
            number(3)
        };
        let profile = maker.profile(
            &Blur {
                r0_m,
                gaussian_sigma_arcsec: 0.0,
            },
            0.0,
        );
        for (column, high, low) in [(9, 0.9, 0.1), (10, 0.8, 0.2), (11, 0.75, 0.25)] {
            let found = distance(&profile, 0.005, high, low);
            let off = (found / number(column) - 1.0).abs();
            assert!(off < 1e-3, "{found} in column {column} of {line}");
        }
        rows += 1;
    }
    assert!(rows > 20, "{rows}");
}

#[test]
fn pure_kolmogorov_edge_has_its_widths() {
    // In units of lambda / r0: 10-90 % 1.2994, 20-80 % 0.8127, 25-75 % 0.6440.
    let telescope = Telescope {
        aperture_m: f64::INFINITY,
        central_obstruction: 0.0,
    };
    let maker = straight_edge(telescope, Exposure::Long, 0.0, 0.02);
    let profile = maker.profile(
        &Blur {
            r0_m: 0.05,
            gaussian_sigma_arcsec: 0.0,
        },
        0.0,
    );
    let unit = 550e-9 / 0.05 / ARCSEC_RAD;
    for (high, low, expected) in [(0.9, 0.1, 1.2994), (0.8, 0.2, 0.8127), (0.75, 0.25, 0.6440)] {
        let found = distance(&profile, 0.02, high, low) / unit;
        assert!((found - expected).abs() < 1e-3, "{found} for {expected}");
    }
}

#[test]
fn what_is_out_of_range_is_refused() {
    let good = Telescope {
        aperture_m: 0.2,
        central_obstruction: 0.3,
    };
    assert!(good.check().is_ok());
    for (aperture_m, central_obstruction) in [
        (0.0, 0.0),
        (-0.1, 0.0),
        (f64::NAN, 0.0),
        (0.2, 0.95),
        (0.2, -0.1),
    ] {
        let bad = Telescope {
            aperture_m,
            central_obstruction,
        };
        assert!(
            matches!(bad.check(), Err(OpticsError::OutOfRange { .. })),
            "{bad:?}"
        );
    }
    let darkening = Darkening::from_coefficients([1.0, 0.0, 0.0, 0.0, 0.0, 0.0]).unwrap();
    let edge = SolarEdge {
        radius_arcsec: 960.0,
        scale_arcsec: 0.1,
        darkening,
    };
    let optics = LimbOptics {
        edge,
        telescope: good,
        wavelength_nm: 550.0,
        exposure: Exposure::Short,
    };
    for (span, step, pixel) in [
        (0.0, 0.02, 1.0),
        (200.0, 0.02, 1.0),
        (20.0, 0.0, 1.0),
        (20.0, 0.02, -1.0),
    ] {
        assert!(
            ProfileMaker::new(&optics, span, step, pixel).is_err(),
            "{span} {step} {pixel}"
        );
    }
    let huge = Telescope {
        aperture_m: 15.0,
        central_obstruction: 0.0,
    };
    let message = ProfileMaker::new(
        &LimbOptics {
            telescope: huge,
            ..optics
        },
        100.0,
        0.001,
        1.0,
    )
    .unwrap_err()
    .to_string();
    assert!(
        message.contains("table of the limb's spectrum"),
        "{message}"
    );
    let maker = ProfileMaker::new(&optics, 20.0, 0.02, 1.0).unwrap();
    for (r0_m, gaussian_sigma_arcsec) in [(0.0, 0.0), (-0.1, 0.0), (0.1, -1.0), (f64::NAN, 0.0)] {
        let blur = Blur {
            r0_m,
            gaussian_sigma_arcsec,
        };
        assert!(blur.check().is_err());
        assert!(maker.profile(&blur, 0.0).iter().all(|it| it.is_nan()));
    }
    // Without a telescope a blur must end before the table does.
    let free = Telescope {
        aperture_m: f64::INFINITY,
        central_obstruction: 0.0,
    };
    let maker = ProfileMaker::new(
        &LimbOptics {
            telescope: free,
            ..optics
        },
        20.0,
        0.02,
        0.0,
    )
    .unwrap();
    let sharp = Blur {
        r0_m: f64::INFINITY,
        gaussian_sigma_arcsec: 0.05,
    };
    assert!(maker.profile(&sharp, 0.0).iter().all(|it| it.is_nan()));
}
