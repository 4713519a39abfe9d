//! Source: transform of `mu^n` on a disk, Sonine's first integral (2 pi R^2 2^{n/2} Gamma(n/2+1)
//! J_{n/2+1}(k) / k^{n/2+1}), summed at every frequency: a slow twin of the limb profile. A second one
//! in real space: the Gaussian blur of a disk with Bessel's I0.

use gauss_quad::GaussLegendre;
use std::f64::consts::PI;
use truelimb::disk::{Darkening, DarkeningLaw, SolarEdge};
use truelimb::optics::definitions::inflection_arcsec;
use truelimb::optics::{Blur, Exposure, LimbOptics, ProfileMaker, Telescope};

pub(crate) const RADIUS_ARCSEC: f64 = 960.0;

pub(crate) fn edge(wavelength_nm: f64, scale_arcsec: f64) -> SolarEdge {
    let darkening = Darkening::new(DarkeningLaw::Neckel2005, wavelength_nm).unwrap();
    SolarEdge {
        radius_arcsec: RADIUS_ARCSEC,
        scale_arcsec,
        darkening,
    }
}

fn uniform() -> SolarEdge {
    let darkening = Darkening::from_coefficients([1.0, 0.0, 0.0, 0.0, 0.0, 0.0]).unwrap();
    SolarEdge {
        radius_arcsec: RADIUS_ARCSEC,
        scale_arcsec: 0.0,
        darkening,
    }
}

/// `J_{n/2+1}(k) / k^{n/2+1}`: power series below 6, closed forms and upward recurrence above.
fn bessel_over_power(n: usize, k: f64) -> f64 {
    let order = 0.5 * n as f64 + 1.0;
    if k < 6.0 {
        let mut term = 0.5_f64.powf(order) / libm::tgamma(order + 1.0);
        let mut sum = term;
        for m in 1..40 {
            term *= -0.25 * k * k / (f64::from(m) * (f64::from(m) + order));
            sum += term;
        }
        return sum;
    }
    let j = if n.is_multiple_of(2) {
        libm::jn(i32::try_from(n / 2 + 1).unwrap(), k)
    } else {
        let scale = (2.0 / (PI * k)).sqrt();
        let mut below = scale * k.sin();
        let mut here = scale * (k.sin() / k - k.cos());
        let mut order_here = 1.5;
        while order_here < order {
            (below, here) = (here, 2.0 * order_here / k * here - below);
            order_here += 1.0;
        }
        here
    };
    j / k.powf(order)
}

fn disk_spectrum(darkening: &Darkening, f: f64) -> f64 {
    let k = 2.0 * PI * f * RADIUS_ARCSEC;
    let terms = darkening.coefficients();
    let sum: f64 = terms
        .iter()
        .enumerate()
        .map(|(n, a)| {
            let half = 0.5 * n as f64;
            a * 2.0_f64.powf(half) * libm::tgamma(half + 1.0) * bessel_over_power(n, k)
        })
        .sum();
    2.0 * PI * RADIUS_ARCSEC * RADIUS_ARCSEC * sum
}

/// The blurred disk at distances from its edge: 8 nodes a panel of `1 / (2 R)`.
pub(crate) fn slow_twin(
    darkening: &Darkening,
    xs: &[f64],
    highest: f64,
    transfer: impl Fn(f64) -> f64,
) -> Vec<f64> {
    let rule = GaussLegendre::new(8.try_into().unwrap());
    let panel = 0.5 / RADIUS_ARCSEC;
    let panels = (highest / panel).ceil() as usize;
    let width = highest / panels as f64;
    let mut out = vec![0.0; xs.len()];
    for i in 0..panels {
        for &(t, w) in rule.as_node_weight_pairs() {
            let f = width * (i as f64 + 0.5 + 0.5 * t);
            let part = PI * width * w * f * disk_spectrum(darkening, f) * transfer(f);
            for (o, x) in out.iter_mut().zip(xs) {
                *o += part * libm::j0(2.0 * PI * f * (RADIUS_ARCSEC + x));
            }
        }
    }
    out
}

const PLACES: [f64; 21] = [
    -20.0, -16.0, -12.0, -9.0, -6.5, -4.5, -3.0, -2.0, -1.25, -0.75, -0.5, -0.25, 0.0, 0.25, 0.5,
    1.0, 1.75, 3.0, 5.0, 10.0, 20.0,
];

/// Largest difference from the slow twin at the places, and difference of the inflection in mas.
fn compare(
    optics: &LimbOptics,
    blur: &Blur,
    highest: f64,
    transfer: impl Fn(f64) -> f64,
) -> (f64, f64) {
    let step = 1.0 / 64.0;
    let maker = ProfileMaker::new(optics, 20.0, step, 0.0).unwrap();
    let grid = maker.grid();
    let fast = maker.profile(blur, 0.0);
    // The places and, for the inflection, every point of the grid about it.
    let found = inflection_arcsec(&fast, &grid).unwrap();
    let middle = ((found - grid.x0_arcsec) / step).round() as usize;
    let near: Vec<usize> = (middle - 60..=middle + 60).collect();
    let indices: Vec<usize> = PLACES
        .iter()
        .map(|x| ((x - grid.x0_arcsec) / step).round() as usize)
        .collect();
    let xs: Vec<f64> = indices
        .iter()
        .chain(&near)
        .map(|&i| grid.x_arcsec(i))
        .collect();
    let slow = slow_twin(&optics.edge.darkening, &xs, highest, transfer);
    let worst = indices
        .iter()
        .chain(&near)
        .zip(&slow)
        .map(|(&i, s)| (fast[i] - s).abs())
        .fold(0.0, f64::max);
    // The profile's values about the inflection replaced by the slow twin's.
    let mut mixed = fast.clone();
    for (&i, s) in near.iter().zip(&slow[indices.len()..]) {
        mixed[i] = *s;
    }
    let shift = inflection_arcsec(&mixed, &grid).unwrap() - found;
    (worst, 1000.0 * shift.abs())
}

#[test]
fn telescope_and_long_exposure_agree_with_the_disk_transform() {
    for (wavelength_nm, aperture_m, r0_m) in [
        (650.0, 0.15, f64::INFINITY),
        (650.0, 0.15, 0.04),
        (430.0, 0.1, 0.07),
        (1050.0, 0.2, 0.03),
    ] {
        let telescope = Telescope {
            aperture_m,
            central_obstruction: 0.0,
        };
        let optics = LimbOptics {
            edge: edge(wavelength_nm, 0.0),
            telescope,
            wavelength_nm,
            exposure: Exposure::Long,
        };
        let blur = Blur {
            r0_m,
            gaussian_sigma_arcsec: 0.0,
        };
        let wavelength_m = wavelength_nm * 1e-9;
        let cutoff = aperture_m / wavelength_m / (180.0 * 3600.0 / PI);
        let (worst, shift_mas) = compare(&optics, &blur, cutoff, |f| {
            let u = f / cutoff;
            let pupil = 2.0 / PI * (u.acos() - u * (1.0 - u * u).sqrt());
            let lag = u * aperture_m / r0_m;
            pupil * (-3.44 * lag.powf(5.0 / 3.0)).exp()
        });
        assert!(
            worst < 3e-8,
            "{wavelength_nm} nm, D {aperture_m} m, r0 {r0_m} m: {worst}"
        );
        assert!(shift_mas < 0.003, "{wavelength_nm} nm: {shift_mas} mas");
    }
}

#[test]
fn obstructed_telescope_and_short_exposure_agree_with_the_disk_transform() {
    let telescope = Telescope {
        aperture_m: 0.2,
        central_obstruction: 0.35,
    };
    let optics = LimbOptics {
        edge: edge(550.0, 0.0),
        telescope,
        wavelength_nm: 550.0,
        exposure: Exposure::Short,
    };
    let blur = Blur {
        r0_m: 0.05,
        gaussian_sigma_arcsec: 0.1,
    };
    let cutoff = 0.2 / 550e-9 / (180.0 * 3600.0 / PI);
    let (worst, shift_mas) = compare(&optics, &blur, cutoff, |f| {
        let air = (-3.44 * (f / cutoff * 4.0).powf(5.0 / 3.0) * (1.0 - (f / cutoff).cbrt())).exp();
        telescope.transfer(f, 550e-9) * air * (-2.0 * (PI * 0.1 * f).powi(2)).exp()
    });
    assert!(worst < 3e-8, "{worst}");
    assert!(shift_mas < 0.003, "{shift_mas} mas");
}

const NO_DIFFRACTION: Telescope = Telescope {
    aperture_m: f64::INFINITY,
    central_obstruction: 0.0,
};

/// Disk blurred by a Gaussian, in real space: `1/s^2 Integral I(r') e^{-(r-r')^2/2s^2} e^{-z} I0(z) r' dr'`.
fn gaussian_twin(edge: &SolarEdge, x: f64, sigma: f64) -> f64 {
    let rule = GaussLegendre::new(16.try_into().unwrap());
    let r = RADIUS_ARCSEC + x;
    let integrand = |y: f64| {
        let z = r * (RADIUS_ARCSEC + y) / (sigma * sigma);
        // Abramowitz & Stegun 1964, eq. 9.7.1; z is above 1e5.
        let scaled_i0 = (1.0 + 1.0 / (8.0 * z) + 9.0 / (128.0 * z * z)) / (2.0 * PI * z).sqrt();
        let gauss = (-0.5 * ((x - y) / sigma).powi(2)).exp();
        edge.intensity(y) * gauss * scaled_i0 * (RADIUS_ARCSEC + y) / (sigma * sigma)
    };
    let panels = 400;
    let reach = 10.0 * sigma;
    let mut sum = 0.0;
    // Inside, y = -t^2 takes out the root of the limb darkening.
    let root = (reach - x).max(0.0).sqrt();
    let far = (reach + x).max(0.0);
    for i in 0..panels {
        let from = f64::from(i) / f64::from(panels);
        let to = f64::from(i + 1) / f64::from(panels);
        sum += rule.integrate(root * from, root * to, |t| 2.0 * t * integrand(-t * t));
        sum += rule.integrate(far * from, far * to, integrand);
    }
    sum
}

#[test]
fn gaussian_blur_of_sharp_and_soft_limbs_agrees_with_real_space() {
    for (scale, sigma) in [
        (0.0, 0.2),
        (0.0, 0.9),
        (0.08, 0.2),
        (0.11, 0.45),
        (0.14, 2.0),
    ] {
        let optics = LimbOptics {
            edge: edge(650.0, scale),
            telescope: NO_DIFFRACTION,
            wavelength_nm: 650.0,
            exposure: Exposure::Long,
        };
        let maker = ProfileMaker::new(&optics, 20.0, 1.0 / 64.0, 0.0).unwrap();
        let grid = maker.grid();
        let blur = Blur {
            r0_m: f64::INFINITY,
            gaussian_sigma_arcsec: sigma,
        };
        let profile = maker.profile(&blur, 0.0);
        let mut worst = 0.0_f64;
        for x in PLACES {
            let i = ((x - grid.x0_arcsec) / grid.step_arcsec).round() as usize;
            worst = worst.max((profile[i] - gaussian_twin(&optics.edge, x, sigma)).abs());
        }
        assert!(worst < 2e-8, "H {scale}, sigma {sigma}: {worst}");
    }
}

#[test]
fn uniform_disk_is_moved_by_minus_half_the_variance_over_its_radius() {
    let optics = LimbOptics {
        edge: uniform(),
        telescope: NO_DIFFRACTION,
        wavelength_nm: 650.0,
        exposure: Exposure::Long,
    };
    let maker = ProfileMaker::new(&optics, 20.0, 1.0 / 64.0, 0.0).unwrap();
    for sigma in [0.3, 1.0, 2.1] {
        let blur = Blur {
            r0_m: f64::INFINITY,
            gaussian_sigma_arcsec: sigma,
        };
        let profile = maker.profile(&blur, 0.0);
        let found = inflection_arcsec(&profile, &maker.grid()).unwrap();
        let expected = -sigma * sigma / (2.0 * RADIUS_ARCSEC);
        assert!(
            (found - expected).abs() < 5e-6,
            "sigma {sigma}: {found} for {expected}"
        );
    }
}

#[test]
fn square_pixel_agrees_with_the_average_over_its_area() {
    let rule = GaussLegendre::new(12.try_into().unwrap());
    // Worst difference in brightness and largest shift of the inflection allowed, by pixel.
    for (pixel, sigma, worst_allowed, mas_allowed) in [
        (1.0, 0.45, 1e-7, 0.002),
        (2.0, 0.6, 1e-7, 0.002),
        (4.0, 0.9, 1e-7, 0.004),
    ] {
        let optics = LimbOptics {
            edge: edge(650.0, 0.1),
            telescope: NO_DIFFRACTION,
            wavelength_nm: 650.0,
            exposure: Exposure::Long,
        };
        let blur = Blur {
            r0_m: f64::INFINITY,
            gaussian_sigma_arcsec: sigma,
        };
        let point = ProfileMaker::new(&optics, 30.0, 1.0 / 64.0, 0.0).unwrap();
        let (table, table_grid) = (point.profile(&blur, 0.0), point.grid());
        // Cubic between the steps of 1/64 arcsec: below 1e-8 at these widths.
        let at = |x: f64| {
            let u = (x - table_grid.x0_arcsec) / table_grid.step_arcsec;
            let i = u.floor() as usize;
            let t = u - i as f64;
            let y = &table[i - 1..i + 3];
            y[1] + 0.5
                * t
                * (y[2] - y[0]
                    + t * (2.0 * y[0] - 5.0 * y[1] + 4.0 * y[2] - y[3]
                        + t * (3.0 * (y[1] - y[2]) + y[3] - y[0])))
        };
        let boxed = ProfileMaker::new(&optics, 12.0, 1.0 / 64.0, pixel).unwrap();
        for angle in [0.0, 0.2, std::f64::consts::FRAC_PI_4, 2.0] {
            let (sin, cos) = f64::sin_cos(angle);
            let profile = boxed.profile(&blur, angle);
            let grid = boxed.grid();
            let area = |x: f64| {
                let half = 0.5 * pixel;
                // Pixel axes (u, v); the limb's normal stands at `angle` from u.
                rule.integrate(-half, half, |u| {
                    rule.integrate(-half, half, |v| {
                        let radial = RADIUS_ARCSEC + x + u * cos + v * sin;
                        let tangential = v * cos - u * sin;
                        at(radial.hypot(tangential) - RADIUS_ARCSEC)
                    })
                }) / (pixel * pixel)
            };
            let exact: Vec<f64> = (0..grid.n).map(|i| area(grid.x_arcsec(i))).collect();
            let worst = profile
                .iter()
                .zip(&exact)
                .map(|(a, b)| (a - b).abs())
                .fold(0.0, f64::max);
            let shift = inflection_arcsec(&profile, &grid).unwrap()
                - inflection_arcsec(&exact, &grid).unwrap();
            assert!(worst < worst_allowed, "pixel {pixel} at {angle}: {worst}");
            assert!(
                1e3 * shift.abs() < mas_allowed,
                "pixel {pixel} at {angle}: {shift}"
            );
        }
    }
}

#[test]
fn curvature_inside_the_pixel_moves_a_uniform_disk_by_the_pixels_second_moment() {
    let optics = LimbOptics {
        edge: uniform(),
        telescope: NO_DIFFRACTION,
        wavelength_nm: 650.0,
        exposure: Exposure::Long,
    };
    let sigma = 2.0;
    let pixel: f64 = 2.0;
    let maker = ProfileMaker::new(&optics, 20.0, 1.0 / 32.0, pixel).unwrap();
    let blur = Blur {
        r0_m: f64::INFINITY,
        gaussian_sigma_arcsec: sigma,
    };
    let expected = -(sigma * sigma + pixel * pixel / 12.0) / (2.0 * RADIUS_ARCSEC);
    for angle in [0.0, 0.4, 0.785] {
        let found = inflection_arcsec(&maker.profile(&blur, angle), &maker.grid()).unwrap();
        assert!((found - expected).abs() < 1.5e-5, "{found} for {expected}");
    }
}
