//! Source: `limb_displacement.csv` and `limb_profile_templates.csv`, computed once by an independent
//! program (Fourier-Bessel sums in another language): regression values, not an outside source. The
//! limb darkening in them is that of Neckel 2005.

use std::collections::BTreeMap;
use truelimb::disk::{Darkening, DarkeningLaw, SolarEdge};
use truelimb::optics::definitions::{fftd_arcsec, half_intensity_arcsec, inflection_arcsec};
use truelimb::optics::{Blur, Exposure, Grid, LimbOptics, ProfileMaker, Telescope};
use truelimb::units::FWHM_PER_SIGMA;

const TABLE: &str = include_str!(concat!(
    env!("CARGO_MANIFEST_DIR"),
    "/tests/data/limb_displacement.csv"
));
const TEMPLATES: &str = include_str!(concat!(
    env!("CARGO_MANIFEST_DIR"),
    "/tests/data/limb_profile_templates.csv"
));

/// One kilometre on the Sun at one astronomical unit, arcsec.
const KM_ARCSEC: f64 = 1.378_795e-3;

const STEP_ARCSEC: f64 = 1.0 / 64.0;

fn maker(wavelength_nm: f64, aperture_m: f64, span_arcsec: f64, pixel_arcsec: f64) -> ProfileMaker {
    let darkening = Darkening::new(DarkeningLaw::Neckel2005, wavelength_nm).unwrap();
    let optics = LimbOptics {
        edge: SolarEdge {
            radius_arcsec: 960.0,
            scale_arcsec: 0.0,
            darkening,
        },
        telescope: Telescope {
            aperture_m,
            central_obstruction: 0.0,
        },
        wavelength_nm,
        exposure: Exposure::Long,
    };
    ProfileMaker::new(&optics, span_arcsec, STEP_ARCSEC, pixel_arcsec).unwrap()
}

/// Fried's parameter quoted at 0.5 um, at another wavelength.
fn r0_m(at_500_nm: f64, wavelength_nm: f64) -> f64 {
    at_500_nm * (wavelength_nm / 500.0).powf(1.2)
}

/// The profile spread by the edge kernel `exp(-t/H - exp(-t/H)) / H` of a thick edge, trapezoidal rule
/// on the profile's own steps; shortened by `margin` values at both ends.
fn spread(profile: &[f64], grid: &Grid, scale_arcsec: f64, margin: usize) -> (Vec<f64>, Grid) {
    let kernel: Vec<f64> = (0..=2 * margin)
        .map(|i| {
            let t = (i as f64 - margin as f64) * grid.step_arcsec / scale_arcsec;
            (-t - (-t).exp()).exp()
        })
        .collect();
    let sum: f64 = kernel.iter().sum();
    let out = (margin..profile.len() - margin)
        .map(|i| {
            let terms = kernel.iter().enumerate();
            terms.map(|(j, k)| k * profile[i + margin - j]).sum::<f64>() / sum
        })
        .collect::<Vec<_>>();
    let n = out.len();
    (
        out,
        Grid {
            x0_arcsec: grid.x_arcsec(margin),
            step_arcsec: grid.step_arcsec,
            n,
        },
    )
}

/// Full width at half maximum of the derivative, arcsec.
fn width_arcsec(profile: &[f64], grid: &Grid) -> f64 {
    let slope: Vec<f64> = profile.windows(3).map(|it| it[0] - it[2]).collect();
    let top = (0..slope.len())
        .max_by(|&i, &j| slope[i].total_cmp(&slope[j]))
        .unwrap();
    let half = 0.5 * slope[top];
    let right = (top..slope.len()).find(|&i| slope[i] < half).unwrap();
    let left = (0..top).rev().find(|&i| slope[i] < half).unwrap();
    let right_part = (slope[right - 1] - half) / (slope[right - 1] - slope[right]);
    let left_part = (slope[left + 1] - half) / (slope[left + 1] - slope[left]);
    grid.step_arcsec * ((right - left) as f64 - 2.0 + right_part + left_part)
}

/// Largest deviations seen, by column.
#[derive(Default, Debug)]
struct Worst {
    rows: usize,
    inflection_mas: f64,
    width_arcsec: f64,
    fftd_mas: [f64; 3],
    half_mas: f64,
}

#[test]
fn inflection_width_and_finite_transform_follow_the_table() {
    let mut makers: BTreeMap<String, ProfileMaker> = BTreeMap::new();
    let mut sharp = Worst::default();
    let mut soft = Worst::default();
    for line in TABLE.lines().skip(2) {
        let cell: Vec<&str> = line.split(',').collect();
        let number = |i: usize| -> f64 { cell[i].parse().unwrap() };
        let wavelength_nm = 1000.0 * number(0);
        let aperture_m = cell[4].parse().unwrap_or(f64::INFINITY);
        let key = format!("{} {} {}", cell[0], cell[4], cell[5]);
        let maker = makers
            .entry(key)
            .or_insert_with(|| maker(wavelength_nm, aperture_m, 30.0, number(5)));
        let gaussian = cell[1].starts_with("gauss");
        let blur = Blur {
            r0_m: cell[3]
                .parse::<f64>()
                .map_or(f64::INFINITY, |it| r0_m(0.01 * it, wavelength_nm)),
            gaussian_sigma_arcsec: if gaussian {
                number(2) / FWHM_PER_SIGMA
            } else {
                0.0
            },
        };
        let mut grid = maker.grid();
        let mut profile = maker.profile(&blur, 0.0);
        let scale_km = if cell[1].ends_with("soft60") {
            60.0
        } else {
            100.0 * f64::from(cell[1].ends_with("soft100"))
        };
        if scale_km > 0.0 {
            (profile, grid) = spread(&profile, &grid, scale_km * KM_ARCSEC, 200);
        }
        let worst = if scale_km > 0.0 {
            &mut soft
        } else {
            &mut sharp
        };
        worst.rows += 1;

        let inflection = 1000.0 * inflection_arcsec(&profile, &grid).unwrap() - number(6);
        // A pixel twice as wide as the blur makes the derivative flat on top, and the table's coarse
        // edge kernel (its mean is 0.5715 H by the table's own finite transforms, Euler's constant
        // 0.5772 H by theory) then moves the greatest value: those rows are left to the slow twin.
        let flat_top = scale_km > 0.0 && number(5) > 1.5 * number(2);
        if !flat_top {
            worst.inflection_mas = worst.inflection_mas.max(inflection.abs());
        }
        let half = 1000.0 * half_intensity_arcsec(&profile, &grid).unwrap() - number(10);
        worst.half_mas = worst.half_mas.max(half.abs());
        let width = width_arcsec(&profile, &grid) - number(7);
        worst.width_arcsec = worst.width_arcsec.max(width.abs());
        for (i, window) in [5.0, 10.0, 20.0].into_iter().enumerate() {
            let found = 1000.0 * fftd_arcsec(&profile, &grid, window).unwrap();
            let off = found - number(13 + i);
            worst.fftd_mas[i] = worst.fftd_mas[i].max(off.abs());
        }
    }
    // Sharp edge: the rest is the curvature inside the pixel (0.04 mas), which the table leaves out, and
    // its flat-topped rows. Thick edge: the table's coarse kernel, 0.0057 H of 138 mas.
    assert!(
        sharp.inflection_mas < 0.2 && sharp.width_arcsec < 0.002,
        "{sharp:?}"
    );
    println!("sharp {sharp:.4?}\nsoft {soft:.4?}");
    assert!(sharp.half_mas < 0.1, "{sharp:?}");
    assert!(soft.half_mas < 1.0, "{soft:?}");
    assert!(sharp.fftd_mas.iter().all(|&it| it < 0.06), "{sharp:?}");
    assert!(
        soft.inflection_mas < 1.0 && soft.width_arcsec < 0.002,
        "{soft:?}"
    );
    assert!(soft.fftd_mas.iter().all(|&it| it < 0.9), "{soft:?}");
    assert_eq!((sharp.rows, soft.rows), (560, 96));
}

#[test]
fn profiles_follow_the_templates() {
    let header = TEMPLATES.lines().nth(1).unwrap();
    let names: Vec<&str> = header.split(',').skip(1).collect();
    let free = maker(650.0, f64::INFINITY, 20.0, 0.0);
    let telescope = maker(650.0, 0.15, 20.0, 0.0);
    let grid = free.grid();
    for (column, name) in names.iter().enumerate() {
        let sigma = |fwhm: f64| fwhm / FWHM_PER_SIGMA;
        let (maker, r0_cm, gaussian_sigma_arcsec) = match *name {
            "gauss_fwhm1" => (&free, f64::INFINITY, sigma(1.0)),
            "gauss_fwhm2" => (&free, f64::INFINITY, sigma(2.0)),
            "gauss_fwhm3" => (&free, f64::INFINITY, sigma(3.0)),
            "gauss_fwhm5" => (&free, f64::INFINITY, sigma(5.0)),
            "kol_r0_3cm_D15cm" => (&telescope, 3.0, 0.0),
            "kol_r0_5cm_D15cm" => (&telescope, 5.0, 0.0),
            "kol_r0_10cm_D15cm" => (&telescope, 10.0, 0.0),
            other => panic!("unknown column {other}"),
        };
        let blur = Blur {
            r0_m: r0_m(0.01 * r0_cm, 650.0),
            gaussian_sigma_arcsec,
        };
        let profile = maker.profile(&blur, 0.0);
        let mut worst = 0.0_f64;
        for line in TEMPLATES.lines().skip(2) {
            let cells: Vec<f64> = line.split(',').map(|it| it.parse().unwrap()).collect();
            let i = ((cells[0] - grid.x0_arcsec) / grid.step_arcsec).round();
            if i >= 0.0 && (i as usize) < grid.n {
                worst = worst.max((profile[i as usize] - cells[column + 1]).abs());
            }
        }
        assert!(worst < 2e-8, "{name}: {worst}");
    }
}

/// Source: `false_oblateness.csv`, by the same independent program (a regression value): radius along
/// the axis of a one-axis smear minus radius across it, the limb's curvature across it included. A round
/// blur of the same variance has that curvature on every side: the difference is its displacement plus
/// twice the `s^2 / 2R` of one side.
#[test]
fn a_smear_along_one_axis_flattens_as_the_table_says() {
    let mut makers: BTreeMap<String, ProfileMaker> = BTreeMap::new();
    let mut worst = [0.0_f64; 4];
    let mut rows = 0;
    for line in include_str!("../data/false_oblateness.csv").lines().skip(2) {
        let cell: Vec<&str> = line.split(',').collect();
        let number = |i: usize| -> f64 { cell[i].parse().unwrap() };
        if cell[3] != "gauss" {
            continue;
        }
        let wavelength_nm = 1000.0 * number(0);
        let after = |mark: &str| -> Option<f64> {
            let rest = cell[1].split(mark).nth(1)?;
            rest.split('_').next()?.parse().ok()
        };
        let aperture_m = after("D=").unwrap_or(f64::INFINITY);
        let maker = makers
            .entry(format!("{} {}", cell[0], aperture_m))
            .or_insert_with(|| maker(wavelength_nm, aperture_m, 30.0, number(2)));
        let base = after("gauss").map_or(0.0, |it| it / FWHM_PER_SIGMA);
        let r0 = after("r0=").map_or(f64::INFINITY, |it| r0_m(0.01 * it, wavelength_nm));
        let extra = number(5);
        let places = |sigma: f64| -> [f64; 4] {
            let blur = Blur {
                r0_m: r0,
                gaussian_sigma_arcsec: sigma,
            };
            let (grid, profile) = (maker.grid(), maker.profile(&blur, 0.0));
            [
                inflection_arcsec(&profile, &grid).unwrap(),
                half_intensity_arcsec(&profile, &grid).unwrap(),
                fftd_arcsec(&profile, &grid, 5.0).unwrap(),
                fftd_arcsec(&profile, &grid, 10.0).unwrap(),
            ]
        };
        let (none, with) = (places(base), places(base.hypot(extra)));
        for (k, column) in [6, 8, 9, 10].into_iter().enumerate() {
            let found = 1000.0 * (with[k] - none[k] + extra * extra / 960.0);
            worst[k] = worst[k].max((found - number(column)).abs());
        }
        rows += 1;
    }
    println!("{rows} rows: largest differences {worst:.3?} mas");
    assert!(rows > 200);
    // Half a digit of the table and 0.02 mas of each of two places; the half intensity moves by 1 arcsec.
    assert!(
        worst[0] < 0.05 && worst[2] < 0.05 && worst[3] < 0.05,
        "{worst:?}"
    );
    assert!(worst[1] < 0.6, "{worst:?}");
}
