//! Source: Neckel & Labs 1994, Solar Phys. 153, 91; Neckel 2005, Solar Phys. 229, 13 (coefficients by
//! transcription); the values at given `mu` in `ld_check_values.csv` are sums of those polynomials:
//! regression values, not an outside source.

use truelimb::disk::{Darkening, DarkeningLaw, DiskError, SolarEdge};

const CHECKS: &str = include_str!(concat!(
    env!("CARGO_MANIFEST_DIR"),
    "/tests/data/ld_check_values.csv"
));
const TABLE_1994: &str = include_str!(concat!(
    env!("CARGO_MANIFEST_DIR"),
    "/tests/data/ld_coefficients_NL94.csv"
));
const TABLE_2005: &str = include_str!(concat!(
    env!("CARGO_MANIFEST_DIR"),
    "/tests/data/ld_coefficients_N2005.csv"
));

fn numbers(line: &str, skip: usize) -> Vec<f64> {
    line.split(',')
        .skip(skip)
        .map(|it| it.parse().unwrap_or(f64::NAN))
        .collect()
}

#[test]
fn values_at_given_mu_follow_the_table() {
    let header = CHECKS.lines().nth(1).unwrap();
    let mus: Vec<f64> = header
        .split(',')
        .filter_map(|it| it.strip_prefix("I(mu=")?.strip_suffix(')')?.parse().ok())
        .collect();
    assert_eq!(mus.len(), 15);
    let mut rows = 0;
    for line in CHECKS.lines().skip(2) {
        let law = if line.starts_with("neckel2005") {
            DarkeningLaw::Neckel2005
        } else if line.starts_with("NL94_row") {
            DarkeningLaw::NeckelLabs1994
        } else {
            continue;
        };
        rows += 1;
        let cells = numbers(line, 1);
        let darkening = Darkening::new(law, 1000.0 * cells[0]).unwrap();
        for (found, printed) in darkening.coefficients().iter().zip(&cells[1..7]) {
            assert!((found - printed).abs() < 6e-7, "{line}");
        }
        for (mu, printed) in mus.iter().zip(&cells[7..22]) {
            assert!(
                (darkening.at(*mu) - printed).abs() < 6e-7,
                "mu {mu}: {line}"
            );
        }
        assert!((darkening.disk_mean() - cells[22]).abs() < 6e-7, "{line}");
    }
    assert_eq!(rows, 10);
}

#[test]
fn law_of_2005_is_one_at_disk_centre() {
    for wavelength_nm in [
        300.0, 350.0, 372.98, 385.0, 400.0, 422.57, 430.0, 656.3, 1100.0,
    ] {
        let darkening = Darkening::new(DarkeningLaw::Neckel2005, wavelength_nm).unwrap();
        assert!(
            (darkening.at(1.0) - 1.0).abs() < 1e-14,
            "{wavelength_nm} nm"
        );
    }
}

#[test]
fn law_of_2005_has_the_coefficients_of_its_table() {
    for line in TABLE_2005.lines().skip(2) {
        let c = numbers(line, 1);
        let (lowest, highest) = (c[0], c[1]);
        // Inside each range; the printed a10, a11 and a15 are those of the normalisation.
        let wavelength_nm = 0.5 * (lowest + highest);
        let l = wavelength_nm / 1000.0;
        let l5 = l.powi(5);
        let printed = [
            c[2] + c[3] / l,
            c[4] + c[5] / l + c[6] / l5,
            c[7] + c[8] / l5,
            c[9] + c[10] / l5,
            c[11] + c[12] / l5,
            c[13] + c[14] / l5,
        ];
        let found = Darkening::new(DarkeningLaw::Neckel2005, wavelength_nm).unwrap();
        for (a, b) in found.coefficients().iter().zip(printed) {
            assert!((a - b).abs() < 1e-9, "{line}");
        }
    }
}

#[test]
fn sign_of_a55_agrees_with_the_table_of_1994() {
    let rms = |sign: f64, wavelength_nm: f64, row: &Darkening| {
        let law = Darkening::new(DarkeningLaw::Neckel2005, wavelength_nm).unwrap();
        let l5 = (wavelength_nm / 1000.0).powi(5);
        let extra = (sign + 1.0) * 0.003347 / l5;
        // The wrong sign moves A5 and, by the normalisation, A1.
        let mus: Vec<f64> = (12..=100).map(|i| f64::from(i) / 100.0).collect();
        let squares = mus.iter().map(|&mu| {
            let value = law.at(mu) + extra * (mu.powi(5) - mu);
            (value - row.at(mu)).powi(2)
        });
        (squares.sum::<f64>() / mus.len() as f64).sqrt()
    };
    for line in TABLE_1994.lines().skip(2) {
        let wavelength_nm = numbers(line, 0)[0];
        if wavelength_nm < 422.57 {
            continue;
        }
        let row = Darkening::new(DarkeningLaw::NeckelLabs1994, wavelength_nm).unwrap();
        let (minus, plus) = (
            rms(-1.0, wavelength_nm, &row),
            rms(1.0, wavelength_nm, &row),
        );
        assert!(minus < 0.006, "{wavelength_nm} nm: {minus}");
        if wavelength_nm < 600.0 {
            assert!(
                plus > 2.0 * minus && plus > 0.01,
                "{wavelength_nm} nm: {minus} and {plus}"
            );
        }
    }
}

#[test]
fn rows_of_1994_add_up_to_one_and_the_bad_row_is_refused() {
    let mut rows = 0;
    for line in TABLE_1994.lines().skip(2) {
        let cells = numbers(line, 0);
        let darkening = Darkening::new(DarkeningLaw::NeckelLabs1994, cells[0]);
        if line.starts_with("365.875,") {
            assert!(matches!(darkening, Err(DiskError::WavelengthInGap { .. })));
            assert!((cells[1..7].iter().sum::<f64>() - 1.0).abs() > 1e-3);
            continue;
        }
        rows += 1;
        let found = darkening.unwrap().coefficients();
        for (a, b) in found.iter().zip(&cells[1..7]) {
            assert!((a - b).abs() < 1e-14, "{line}");
        }
        assert!((found.iter().sum::<f64>() - 1.0).abs() < 3e-5, "{line}");
    }
    assert_eq!(rows, 29);
}

#[test]
fn row_of_1994_at_580_nm_is_near_that_of_pierce_and_slaughter_1977() {
    // Pierce & Slaughter 1977, Solar Phys. 51, 25: P5 at 579.88 nm.
    let row = Darkening::new(DarkeningLaw::NeckelLabs1994, 579.88).unwrap();
    for (mu, value) in [(0.9, 0.950_687), (0.5, 0.723_828), (0.2, 0.503_111)] {
        assert!((row.at(mu) - value).abs() < 0.005, "{mu}: {}", row.at(mu));
    }
}

#[test]
fn between_two_rows_the_profile_is_interpolated() {
    let at = |nm| {
        Darkening::new(DarkeningLaw::NeckelLabs1994, nm)
            .unwrap()
            .at(0.3)
    };
    let middle = 0.5 * (541.76 + 559.95);
    assert!((at(middle) - 0.5 * (at(541.76) + at(559.95))).abs() < 1e-14);
}

#[test]
fn violet_and_visible_ranges_join_without_a_step() {
    // Regression values, not an outside source: .241999 and .242017 at mu = 0.1.
    let at = |nm| {
        Darkening::new(DarkeningLaw::Neckel2005, nm)
            .unwrap()
            .at(0.1)
    };
    assert!((at(422.56) - 0.241_999).abs() < 1e-6 && (at(422.58) - 0.242_017).abs() < 1e-6);
}

#[test]
fn wavelengths_without_a_law_are_refused() {
    use DarkeningLaw::{Neckel2005, NeckelLabs1994};
    for nm in [373.0, 380.0, 384.9] {
        let found = Darkening::new(Neckel2005, nm);
        assert!(
            matches!(found, Err(DiskError::WavelengthInGap { .. })),
            "{nm}"
        );
    }
    for (law, nm) in [
        (Neckel2005, 299.9),
        (Neckel2005, 1100.1),
        (Neckel2005, f64::NAN),
        (NeckelLabs1994, 303.0),
        (NeckelLabs1994, 1099.0),
    ] {
        let found = Darkening::new(law, nm);
        assert!(
            matches!(found, Err(DiskError::WavelengthOutside { .. })),
            "{nm}"
        );
    }
    assert!(matches!(
        Darkening::new(NeckelLabs1994, 380.0),
        Err(DiskError::WavelengthInGap { .. })
    ));
    let message = Darkening::new(Neckel2005, 380.0).unwrap_err().to_string();
    assert!(message.contains("380") && message.contains("372.98") && message.contains("385"));
    assert!(Darkening::from_coefficients([0.5, 0.2, 0.2, 0.0, 0.0, 0.0]).is_err());
}

#[test]
fn edge_falls_fastest_at_its_radius() {
    let darkening = Darkening::new(DarkeningLaw::Neckel2005, 650.0).unwrap();
    for scale_arcsec in [0.0, 0.083, 0.138] {
        let edge = SolarEdge {
            radius_arcsec: 960.0,
            scale_arcsec,
            darkening,
        };
        // Falls over one microarcsecond on a grid about the limb.
        let micro = 1e-6;
        let steepest = (-200_000..200_000)
            .map(|i| {
                let x = f64::from(i) * micro;
                (
                    edge.intensity(x) - edge.intensity(x + micro),
                    x + 0.5 * micro,
                )
            })
            .max_by(|a, b| a.0.total_cmp(&b.0))
            .unwrap();
        assert!(
            (steepest.1 - edge.inflection_arcsec()).abs() <= micro,
            "{steepest:?}"
        );
    }
}

#[test]
fn thick_edge_is_the_emergent_intensity_of_its_optical_depth() {
    let darkening = Darkening::new(DarkeningLaw::Neckel2005, 550.0).unwrap();
    let edge = SolarEdge {
        radius_arcsec: 950.0,
        scale_arcsec: 0.1,
        darkening,
    };
    for x in [-3.0_f64, -0.4, -0.05, 0.0, 0.05, 0.4, 1.0] {
        let r: f64 = 950.0 + x;
        let mu = (1.0 - (r / 950.0).powi(2)).max(0.0).sqrt();
        let expected = darkening.at(mu) * (1.0 - (-(-x / 0.1).exp()).exp());
        assert!((edge.intensity(x) - expected).abs() < 1e-9, "{x}");
    }
    assert!(edge.check().is_ok());
    for (radius_arcsec, scale_arcsec) in [(400.0, 0.1), (f64::NAN, 0.1)] {
        let bad = SolarEdge {
            radius_arcsec,
            scale_arcsec,
            ..edge
        };
        assert!(matches!(bad.check(), Err(DiskError::Radius { .. })));
    }
    for scale_arcsec in [-0.01, 1.5, f64::NAN] {
        let bad = SolarEdge {
            scale_arcsec,
            ..edge
        };
        assert!(matches!(bad.check(), Err(DiskError::Scale { .. })));
    }
}
