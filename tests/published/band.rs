//! Source: `dispersion.csv`, `bandpass_limb_bias.csv`, `inflection_smear.csv`: regression values, not
//! an outside source. W. Wien's displacement law for photons, J. E. Hansen and L. D. Travis (1974), F.
//! Kasten and A. T. Young (1989): from memory.

use super::refraction_tables::{Row, Worst, table};
use truelimb::air::{
    AirError, Band, Conditions, Profile, RefractivityFormula, Site, Smear, StationAir,
    ZenithArgument, air_mass, band_table, molecular_depth, molecular_transmission,
    refraction_table, solar_photons, vapour_pressure_hpa,
};
use truelimb::disk::{Darkening, DarkeningLaw};
use truelimb::units::DEG_RAD;

/// The air of the tables, dry.
fn dry_air(site: &str) -> StationAir {
    let (height_m, temperature_k, pressure_hpa) = match site {
        "sea_level" => (0.0, 288.15, 1013.25),
        "mountain_2600m" => (2600.0, 283.15, 737.6),
        _ => panic!("no site {site}"),
    };
    let site = Site {
        latitude_rad: 45.0 * DEG_RAD,
        height_m,
    };
    let c = Conditions {
        pressure_hpa,
        temperature_c: temperature_k - 273.15,
        relative_humidity: 0.0,
        co2_ppm: 450.0,
    };
    let mut air = StationAir::new(site, c, 0.0);
    air.local_radius_m = 6_378_120.0;
    air.settings.top_m = 80_000.0;
    air
}

/// The air of a line of a table: its refractivity is that of dry air after Ciddor less a vapour term
/// that does not depend on the wavelength.
struct Line {
    dry: StationAir,
    damp: Conditions,
    nm: f64,
    zenith_rad: f64,
}

impl Line {
    fn new(row: &Row<'_>) -> Self {
        let dry = dry_air(row.text("site"));
        let relative_humidity = if dry.site.height_m > 0.0 { 0.2 } else { 0.5 };
        Self {
            damp: Conditions {
                relative_humidity,
                ..dry.conditions
            },
            dry,
            nm: 1000.0 * row.number("lambda_um"),
            zenith_rad: row.number("z_app_deg") * DEG_RAD,
        }
    }

    /// Refraction at a wavelength, and the same as if the vapour had kept its share of the dispersion.
    fn refraction_rad(&self, nm: f64) -> [f64; 2] {
        /// Vapour term of the closed form of the IAG, in K/hPa.
        const VAPOUR: f64 = 11.2684e-6;
        let (c, air) = (&self.damp, &self.dry);
        let vapour_hpa =
            vapour_pressure_hpa(c, RefractivityFormula::Iag1999, air.convention).unwrap();
        let dry = air.refractivity(nm).unwrap();
        let n = dry - VAPOUR * vapour_hpa / c.temperature_k();
        let profile = Profile::standard(
            &air.site,
            c,
            n,
            vapour_hpa,
            &air.settings,
            air.local_radius_m,
        );
        let refraction_rad = profile.unwrap().refraction_rad(self.zenith_rad);
        [refraction_rad, refraction_rad * dry / n]
    }
}

const MAS_PER_RAD: f64 = 648_000_000.0 / std::f64::consts::PI;

/// Refraction, its slope over wavelength, and for flat bands spread, standard deviation, and what the
/// mean has more than the centre. Regression values, not an outside source.
#[test]
fn dispersion_across_flat_bands() {
    let [mut refraction, mut slope, mut spread, mut rms] = [(); 4].map(|()| Worst::default());
    let [mut mean, mut shift] = [(); 2].map(|()| Worst::default());
    let mut rows = 0;
    for row in table("dispersion.csv").rows() {
        let line = Line::new(&row);
        let (air, nm) = (&line.dry, line.nm);
        let at = |nm: f64| line.refraction_rad(nm)[0] * MAS_PER_RAD;
        let [_, refraction_rad] = line.refraction_rad(nm);
        let place = || format!("{} {nm} {}", row.text("site"), row.text("z_app_deg"));
        let expected = row.number("R_ciddor");
        refraction.meet(at(nm) / expected - 1.0, place);
        let expected = row.number("dR_dlambda_mas_per_nm");
        slope.meet(0.5 * (at(nm + 1.0) - at(nm - 1.0)) / expected - 1.0, place);
        for width in ["1nm", "5nm", "10nm", "100nm"] {
            let width_nm: f64 = width.trim_end_matches("nm").parse().unwrap();
            let number = |column: &str| row.number(&format!("{column}_{width}"));
            let band = Band::top_hat(nm, width_nm).unwrap();
            let it = band.light(|_| 1.0).unwrap().in_air(air).unwrap();
            let place = || format!("{width} {}", place());
            let smear = it.smear(refraction_rad);
            // The last printed digit is 1e-4.
            spread.meet(excess(smear.spread_mas, number("spread"), 1e-3), place);
            // The table has the slope times the width here: no curvature, 2 percent at 100 nm.
            if width_nm < 50.0 {
                rms.meet(excess(smear.rms_mas, number("rms_smear"), 1e-3), place);
            }
            let n = air.refractivity(nm).unwrap();
            let more = (it.refractivity / n - 1.0) * refraction_rad * MAS_PER_RAD;
            mean.meet(excess(more, number("bandmean_minus_centre"), 1e-4), place);
            // The table divides by the slope at the centre: leave the curvature out here too.
            let at_centre_nm = more / row.number("dR_dlambda_mas_per_nm");
            shift.meet(
                excess(at_centre_nm, number("lambda_eff_shift"), 1e-4),
                place,
            );
        }
        rows += 1;
    }
    assert_eq!(rows, 240);
    refraction.assert_within(3e-6, "refraction, relative");
    slope.assert_within(2e-4, "dispersion, relative");
    for (worst, what) in [
        (spread, "spread"),
        (rms, "standard deviation"),
        (mean, "mean minus centre"),
        (shift, "effective minus centroid"),
    ] {
        worst.assert_within(3e-3, &format!("{what}, relative beyond rounding"));
    }
}

/// Relative difference, less a few last digits of what was printed.
fn excess(found: f64, expected: f64, digit: f64) -> f64 {
    let beyond = (found - expected).abs() - digit;
    if beyond <= 0.0 {
        0.0
    } else {
        beyond / expected.abs()
    }
}

/// The published numbers of the page: 9.6 and 16.6 mas, 2.39 nm, for 100 nm at 550 nm, sea level.
/// Regression values, not an outside source.
#[test]
fn a_wide_band_refracts_more_than_its_centre() {
    let air = dry_air("sea_level");
    let band = Band::top_hat(550.0, 100.0).unwrap();
    let it = band.light(|_| 1.0).unwrap().in_air(&air).unwrap();
    // 2.39 nm by the slope at the centre; 0.04 nm less by the steeper one on the way.
    let shift_nm = it.effective_nm - it.centroid_nm;
    assert!((shift_nm + 2.36).abs() < 0.02, "{shift_nm}");
    assert!((it.centroid_nm - 550.0).abs() < 1e-9);
    let profile = air.profile(550.0).unwrap();
    for (zenith_deg, expected_mas) in [(45.0, 9.6), (60.0, 16.6)] {
        let refraction_rad = profile.refraction_rad(zenith_deg * DEG_RAD);
        let more = (it.refractivity / profile.refractivity() - 1.0) * refraction_rad * MAS_PER_RAD;
        assert!((more - expected_mas).abs() < 0.05, "{more}");
    }
}

/// The mean over wavelength of the refraction itself, integral by integral, is that of the effective
/// wavelength: first order in the refractivity suffices.
#[test]
fn the_effective_wavelength_gives_the_mean_refraction() {
    let air = dry_air("sea_level");
    let source = |nm: f64| solar_photons(nm) * (nm / 500.0).powi(2);
    let (centre_nm, width_nm, steps) = (550.0, 100.0, 400);
    let light = Band::top_hat(centre_nm, width_nm)
        .unwrap()
        .light(source)
        .unwrap();
    let it = light.in_air(&air).unwrap();
    for zenith_deg in [30.0, 60.0, 70.0] {
        let at = |nm: f64| {
            air.profile(nm)
                .unwrap()
                .refraction_rad(zenith_deg * DEG_RAD)
        };
        let (mut sum, mut square, mut weight) = (0.0, 0.0, 0.0);
        let here = at(it.effective_nm);
        for step in 0..steps {
            let share = (f64::from(step) + 0.5) / f64::from(steps);
            let nm = centre_nm + width_nm * (share - 0.5);
            let away = at(nm) - here;
            sum += source(nm) * away;
            square += source(nm) * away * away;
            weight += source(nm);
        }
        let mean_mas = sum / weight * MAS_PER_RAD;
        assert!(mean_mas.abs() < 0.02, "{zenith_deg}: {mean_mas} mas");
        let rms_mas = (square / weight).sqrt() * MAS_PER_RAD;
        let ours = it.smear(here).rms_mas;
        assert!((ours / rms_mas - 1.0).abs() < 1.5e-3, "{ours} {rms_mas}");
    }
}

/// Spurious flattening by the spread of flat bands. The table takes the spread of the dispersion at
/// once, not to first order; the first order is good to a percent where the spread is below a third of
/// the width. Regression values, not an outside source.
#[test]
fn smear_flattens_the_limb() {
    let derivative = |um: f64, fwhm: f64| {
        table("inflection_smear.csv")
            .rows()
            .find(|it| {
                let near = |column: &str, value: f64| (it.number(column) - value).abs() < 1e-9;
                near("lambda_um", um) && near("seeing_FWHM_arcsec", fwhm)
            })
            .map(|it| it.number("d_offset_d_sigma2"))
            .expect("a derivative")
    };
    let (mut worst, mut blurred) = (Worst::default(), Worst::default());
    let (mut rows, mut wide) = (0, 0);
    for row in table("bandpass_limb_bias.csv").rows() {
        let line = Line::new(&row);
        let (air, nm) = (&line.dry, line.nm);
        let [_, refraction_rad] = line.refraction_rad(nm);
        let fwhm = row.number("seeing_FWHM_arcsec");
        let band = Band::top_hat(nm, row.number("tophat_width_nm")).unwrap();
        let exact = band
            .light(|_| 1.0)
            .unwrap()
            .in_air(air)
            .unwrap()
            .smear(refraction_rad);
        // The table takes the light as flat over its spread.
        let flat_arcsec2 = (exact.spread_mas / 1000.0).powi(2) / 12.0;
        assert!((exact.variance_arcsec2 / flat_arcsec2 - 1.0).abs() < 0.02);
        let smear = Smear {
            variance_arcsec2: flat_arcsec2,
            ..exact
        };
        let found = smear.flattening_mas(derivative(row.number("lambda_um"), fwhm));
        let expected = row.number("spurious_Delta_r_mas");
        if row.number("vertical_spread_arcsec") > fwhm / 3.0 {
            // Up to twice the width of the blur: an estimate, no more.
            blurred.meet(found / expected - 1.0, || format!("{nm} nm {fwhm}"));
            wide += 1;
            continue;
        }
        worst.meet(excess(found, expected, 1e-5), || {
            format!(
                "{} {nm} nm {} deg {} nm {fwhm}",
                row.text("site"),
                row.text("z_app_deg"),
                row.text("tophat_width_nm")
            )
        });
        rows += 1;
    }
    assert_eq!(rows + wide, 480);
    assert!(wide < 60, "{wide}");
    worst.assert_within(0.01, "flattening by smear, relative beyond rounding");
    blurred.assert_within(0.25, "flattening by smear as wide as the blur, relative");
}

/// The edge of the disk is redder than its centre: 2.7 nm for 100 nm at 550 nm. Regression value, not
/// an outside source; the moment itself is s^2 d ln S / d l with s^2 = 833 nm^2, by definition.
#[test]
fn the_limb_reddens_the_band() {
    let band = Band::top_hat(550.0, 100.0).unwrap();
    let edge = |nm: f64| {
        Darkening::new(DarkeningLaw::Neckel2005, nm)
            .unwrap()
            .at(0.0)
    };
    let centre = band.light(solar_photons).unwrap();
    let limb = band.light(|nm| solar_photons(nm) * edge(nm)).unwrap();
    let shift_nm = limb.centroid_nm - centre.centroid_nm;
    assert!((shift_nm - 2.7).abs() < 0.15, "{shift_nm}");

    for slope_per_nm in [-2e-3, 1e-4, 3.3e-3] {
        let it = band.light(|nm| (slope_per_nm * nm).exp()).unwrap();
        let width_nm = 100.0 / 12f64.sqrt();
        let first_order_nm = width_nm * width_nm * slope_per_nm;
        let found_nm = it.centroid_nm - 550.0;
        assert!((found_nm / first_order_nm - 1.0).abs() < 0.01, "{found_nm}");
        assert!((it.rms_width_nm / width_nm - 1.0).abs() < 0.01);
    }
    // Ten times narrower, a hundred times less.
    let narrow = Band::top_hat(550.0, 10.0).unwrap();
    let ratio =
        |band: &Band| band.light(|nm| (3.3e-3 * nm).exp()).unwrap().centroid_nm - band.centre_nm();
    assert!((ratio(&narrow) / ratio(&band) - 0.01).abs() < 1e-4);
}

/// Triangles have moments that can be written down: centroid (a + b + c)/3, variance
/// (a^2 + b^2 + c^2 - ab - ac - bc)/18.
#[test]
fn curves_have_the_moments_of_their_shape() {
    let (a, b, c) = (540.0, 548.0, 565.0);
    let band = Band::curve(&[a, b, c], &[0.0, 0.7, 0.0]).unwrap();
    let light = band.light(|_| 1.0).unwrap();
    assert!((light.centroid_nm - (a + b + c) / 3.0).abs() < 1e-9);
    let variance = (a * a + b * b + c * c - a * b - a * c - b * c) / 18.0;
    assert!((light.rms_width_nm - variance.sqrt()).abs() < 1e-9);
    let (low_nm, high_nm) = band.half_power_nm();
    assert!((low_nm - 544.0).abs() < 1e-9 && (high_nm - 556.5).abs() < 1e-9);

    // A table of a top hat is the top hat, also with dark wings beyond the formula's reach.
    let hat = Band::top_hat(550.0, 10.0).unwrap();
    let same = Band::curve(&[545.0, 552.0, 555.0], &[0.4, 0.4, 0.4]).unwrap();
    let winged = Band::curve(
        &[210.0, 545.0 - 1e-9, 545.0, 555.0, 555.0 + 1e-9, 5000.0],
        &[0.0, 0.0, 1.0, 1.0, 0.0, 0.0],
    )
    .unwrap();
    let air = dry_air("mountain_2600m");
    let of = |band: &Band| band.light(solar_photons).unwrap().in_air(&air).unwrap();
    let expected = of(&hat);
    for band in [&same, &winged] {
        let found = of(band);
        assert!((found.effective_nm - expected.effective_nm).abs() < 1e-6);
        assert!((found.spread_rel / expected.spread_rel - 1.0).abs() < 1e-6);
        assert!((found.rms_rel / expected.rms_rel - 1.0).abs() < 1e-6);
    }
}

/// Photons per wavelength peak at `l T = 3.6697 mm K`; optical depth of the molecules 0.097 at 550 nm
/// and 0.36 at 400 nm; air mass of the horizon 37.9. All from memory.
#[test]
fn source_and_extinction() {
    let slope = |nm: f64| solar_photons(nm + 0.5) - solar_photons(nm - 0.5);
    let peak_nm = 3.6697e6 / 5777.0;
    assert!(slope(peak_nm - 1.0) > 0.0 && slope(peak_nm + 1.0) < 0.0);
    assert!((molecular_depth(550.0, 1013.25) - 0.097).abs() < 5e-4);
    assert!((molecular_depth(400.0, 1013.25) - 0.36).abs() < 5e-3);
    assert!((air_mass(90.0 * DEG_RAD) - 37.9).abs() < 0.05);
    for zenith_deg in [0.0, 30.0, 60.0] {
        // A plane atmosphere: the secant, by geometry.
        let secant = 1.0 / f64::cos(zenith_deg * DEG_RAD);
        assert!((air_mass(zenith_deg * DEG_RAD) / secant - 1.0).abs() < 4e-3);
    }
    assert!(air_mass(91.0 * DEG_RAD).is_nan());
    // Beer's law: half the air, the root of the transmission.
    let whole = molecular_transmission(450.0, 1000.0, 1.0);
    let half = molecular_transmission(450.0, 500.0, 1.0);
    assert!((half * half - whole).abs() < 1e-12 && whole < 1.0);
}

/// Air reddens what comes through it, the more the longer the way.
#[test]
fn extinction_moves_a_band_towards_the_red() {
    let air = dry_air("sea_level");
    let band = [Band::top_hat(550.0, 100.0).unwrap()];
    let zeniths = [0.0, 45.0, 60.0, 70.0].map(|it| it * DEG_RAD);
    let rows = band_table(
        &air,
        &zeniths,
        ZenithArgument::Apparent,
        &band,
        solar_photons,
    )
    .unwrap();
    for pair in rows.windows(2) {
        let [before, after] = [0, 1].map(|i| pair[i].centroid_wavelength_nm);
        assert!(after > before, "{before} {after}");
    }
    // Slope of the optical depth 4 tau / l, times air mass and s^2: 0.6 nm at the zenith.
    let clear = band[0].light(solar_photons).unwrap().centroid_nm;
    let shift_nm = rows[0].centroid_wavelength_nm - clear;
    let expected_nm = 4.0 * molecular_depth(550.0, 1013.25) / 550.0 * 1e4 / 12.0;
    assert!((shift_nm / expected_nm - 1.0).abs() < 0.1, "{shift_nm}");
}

/// A line for a band is the line for its effective wavelength, whichever zenith distance is given.
#[test]
fn a_band_is_a_line_of_the_table() {
    let air = dry_air("mountain_2600m");
    let bands = [
        Band::top_hat(430.0, 10.0).unwrap(),
        Band::top_hat(550.0, 100.0).unwrap(),
    ];
    let zeniths = [30.0 * DEG_RAD, 65.0 * DEG_RAD];
    for argument in [ZenithArgument::Apparent, ZenithArgument::True] {
        let rows = band_table(&air, &zeniths, argument, &bands, solar_photons).unwrap();
        assert_eq!(rows.len(), 4);
        for (index, it) in rows.iter().enumerate() {
            let zenith_rad = zeniths[index / 2];
            let nm = it.effective_wavelength_nm;
            let same = refraction_table(&air, &[zenith_rad], argument, &[nm]).unwrap();
            let mut row = it.row;
            assert!((row.wavelength_nm - bands[index % 2].centre_nm()).abs() < 1e-12);
            row.wavelength_nm = nm;
            assert_eq!(row, same[0]);
            assert!(it.smear_mas > it.smear_rms_mas && it.smear_rms_mas > 0.0);
        }
    }
}

#[test]
fn what_is_no_band_is_refused() {
    let wide = |centre_nm, width_nm| Band::top_hat(centre_nm, width_nm).unwrap_err().to_string();
    assert!(wide(550.0, 0.0).contains("band width is 0 nm"));
    assert!(wide(550.0, -5.0).contains("-5"));
    assert!(wide(550.0, 900.0).contains("allows") && wide(550.0, 900.0).contains("700"));
    assert!(wide(f64::NAN, 5.0).contains("NaN"));
    assert!(matches!(
        Band::curve(&[500.0, 510.0], &[1.0]),
        Err(AirError::BandPoints {
            wavelengths: 2,
            values: 1
        })
    ));
    assert!(matches!(
        Band::curve(&[500.0, 500.0, 510.0], &[0.0, 1.0, 0.0]),
        Err(AirError::BandOrder { .. })
    ));
    assert!(matches!(
        Band::curve(&[500.0, 510.0], &[0.0, 0.0]),
        Err(AirError::BandDark)
    ));
    assert!(Band::curve(&[500.0, 510.0], &[-0.1, 1.0]).is_err());
    let band = Band::top_hat(550.0, 10.0).unwrap();
    assert!(matches!(
        band.light(|nm| 1.0 - nm),
        Err(AirError::SpectrumValue { .. })
    ));
    assert!(matches!(
        band.light(|_| f64::NAN),
        Err(AirError::SpectrumValue { .. })
    ));
    assert_eq!(band.light(|_| 0.0), Err(AirError::BandDark));

    // The formula must reach the whole band, not its middle only.
    let air = dry_air("sea_level");
    let edge = Band::top_hat(320.0, 60.0).unwrap();
    let refused = edge.light(|_| 1.0).unwrap().in_air(&air);
    assert!(matches!(
        refused,
        Err(AirError::OutOfRange {
            quantity: "wavelength",
            ..
        })
    ));
    let mut other = dry_air("mountain_2600m");
    other.formula = RefractivityFormula::Mathar2007;
    let visible = Band::top_hat(550.0, 10.0).unwrap();
    assert!(
        visible
            .light(|_| 1.0)
            .unwrap()
            .in_air(&other)
            .unwrap_err()
            .to_string()
            .contains("mathar-2007")
    );
}
