//! The limb on the pixels, and its motion, against what they must be.

use std::f64::consts::TAU;

use ndarray::Array2;

use crate::disk::{Darkening, DarkeningLaw, SolarEdge};
use crate::frames::ImageFile;
use crate::optics::{Blur, Exposure, LimbOptics, ProfileMaker, Telescope};
use crate::synth::draw::{Draw, Stream};
use crate::synth::figure::Figure;
use crate::synth::screens::{Field, LayerFacts, Scale, Screens};
use crate::synth::{Scenario, make, sky_above};
use crate::turbulence::{Aperture, Tilt, harmonic_kernels};
use crate::units::{ARCSEC_RAD, wrapped_rad};

/// A still Sun without noise: the limb found by an independent template at the place where the map
/// of the disk, run from true to apparent, puts it.
#[test]
fn a_still_limb_stands_where_the_map_of_the_disk_says() {
    let mut s = Scenario {
        layers: Vec::new(),
        photon_noise: false,
        read_noise_e: 0.0,
        saturation_adu: 65535,
        dark_adu: 100.0,
        gain_e_adu: 1.0,
        peak_e: 60000.0,
        vignetting: 0.0,
        pixel_response_sigma_rel: 0.0,
        dust_spots: 0,
        hot_pixels: 0,
        aureole_rel: 0.0,
        distortion: Vec::new(),
        start_utc: "2026-12-20T05:00:00".to_owned(),
        ..Scenario::default()
    };
    s.shape.oblateness_mas = 30.0;
    s.shape.p4_mas = -12.0;
    s.sequences.truncate(1);
    s.sequences[0].frames = 1;
    let place = tempfile::tempdir().unwrap();
    let truth = make(&s, 5, place.path(), &|| {}).unwrap();
    let own = &truth.sequences[0].frames[0];
    let mut plane = Array2::zeros((0, 0));
    let mut file = ImageFile::open(&place.path().join("burst_000.fits")).unwrap();
    file.read_plane(0, &mut plane).unwrap();

    let at = &sky_above::moments(&s, 5).unwrap()[0].geometry;
    let figure = Figure::new(&s.shape);
    let seen: Vec<(f64, f64)> = (0..72000)
        .map(|k| {
            let angle = TAU * f64::from(k) / 72000.0;
            let bearing = angle - at.zenith_angle_rad;
            at.map
                .apparent_from_true(figure.radius_rad(&at.sun, angle), bearing)
        })
        .collect();
    let optics = LimbOptics {
        edge: SolarEdge {
            radius_arcsec: own.seen_radius_arcsec,
            scale_arcsec: s.edge_scale_km / own.distance_au / 725.271,
            darkening: Darkening::new(DarkeningLaw::Neckel2005, 550.0).unwrap(),
        },
        telescope: Telescope {
            aperture_m: s.aperture_m,
            central_obstruction: 0.0,
        },
        wavelength_nm: 550.0,
        exposure: Exposure::Short,
    };
    let maker = ProfileMaker::new(&optics, 14.0, 0.02, s.scale_arcsec_px).unwrap();
    let blur = Blur {
        r0_m: f64::INFINITY,
        gaussian_sigma_arcsec: 0.0,
    };
    // Shift of each of 90 sectors: one step of least squares, the light being known.
    let profiles: Vec<Vec<f64>> = (0..90)
        .map(|k| maker.profile(&blur, TAU * f64::from(k) / 90.0))
        .collect();
    let grid = maker.grid();
    let mut sums = vec![(0.0, 0.0); 90];
    for ((j, i), value) in plane.indexed_iter() {
        let (x, y) = (i as f64 - own.centre_px[0], j as f64 - own.centre_px[1]);
        let r_arcsec = (x.hypot(y) * s.scale_arcsec_px * ARCSEC_RAD).atan() / ARCSEC_RAD;
        let theta = y.atan2(x);
        let angle = at.orientation.position_angle_rad(theta);
        // Refraction turns the bearings: the true one follows from the apparent one in two steps.
        let entry = |it: f64| seen[(it / TAU * 72000.0).round() as usize % 72000];
        let turned = |it: f64| wrapped_rad(entry(it).1 - (it - at.zenith_angle_rad));
        let once = (angle - turned(angle)).rem_euclid(TAU);
        let true_angle = (angle - turned(once)).rem_euclid(TAU);
        let radius = entry(true_angle).0;
        let offset = r_arcsec - radius / ARCSEC_RAD;
        if offset.abs() < 10.0 {
            let sector = (theta.rem_euclid(TAU) / TAU * 90.0).round() as usize % 90;
            let index = ((offset - grid.x0_arcsec) / grid.step_arcsec).floor();
            let part = (offset - grid.x0_arcsec) / grid.step_arcsec - index;
            let profile = &profiles[sector][index as usize..];
            let model = profile[0] + part * (profile[1] - profile[0]);
            let slope = (profile[1] - profile[0]) / grid.step_arcsec;
            let light = (f64::from(*value) - s.dark_adu) / s.peak_e;
            sums[sector].0 += (model - light) * slope;
            sums[sector].1 += slope * slope;
        }
    }
    let shifts_mas: Vec<f64> = sums.iter().map(|it| 1000.0 * it.0 / it.1).collect();
    for m in 0..=4_u8 {
        let part = |f: fn(f64) -> f64| -> f64 {
            let each = shifts_mas.iter().enumerate();
            each.map(|(k, it)| it * f(f64::from(m) * TAU * k as f64 / 90.0))
                .sum::<f64>()
                / 45.0
        };
        let (cos, sin) = (part(f64::cos), part(f64::sin));
        assert!(
            cos.abs() < LIMB_MAS && sin.abs() < LIMB_MAS,
            "m = {m}: {cos} {sin} mas"
        );
    }
}

/// What rounding to counts and the template's coarse sectors leave.
const LIMB_MAS: f64 = 0.15;

/// Variances of the harmonics of many independent rings against their closed form.
fn harmonics(draws: u32, tolerance_sigma: f64) {
    let (aperture_m, r0_m, outer_scale_m) = (0.15, 0.07, 20.0);
    let facts = LayerFacts {
        aperture_m,
        central_obstruction: 0.0,
        r0_m,
        outer_scale_m,
        wind_m_s: (0.0, 0.0),
        exposure_s: 1e-6,
    };
    let directions: Vec<(f64, f64)> = (0..1440)
        .map(|k| (TAU * f64::from(k) / 1440.0).sin_cos())
        .collect();
    let rings_m = [0.3, 1.6, 11.0];
    let mut power = [[0.0; 6]; 3];
    let mut count = 0.0;
    for number in 0..draws {
        let screens = Screens {
            fine: Field::new(
                &facts,
                Scale::Fine,
                &mut Draw::new(11, Stream::Screen(2 * number)),
            ),
            coarse: Field::new(
                &facts,
                Scale::Coarse,
                &mut Draw::new(11, Stream::Screen(2 * number + 1)),
            ),
            // The wind carries the screens by 60 m and 34 m a second: independent places.
            wind_m_s: (60.0, 34.0),
        };
        for step in 0..40 {
            count += 1.0;
            for (ring_m, power) in rings_m.iter().zip(&mut power) {
                let mut ring = vec![0.0; directions.len()];
                screens.add_ring(*ring_m, f64::from(step), 1.0, &directions, &mut ring);
                for (m, sum) in power.iter_mut().enumerate() {
                    let mut parts = (0.0, 0.0);
                    for (k, it) in ring.iter().enumerate() {
                        let (sin, cos) = (TAU * (k * m) as f64 / 1440.0).sin_cos();
                        parts = (parts.0 + it * cos / 720.0, parts.1 + it * sin / 720.0);
                    }
                    *sum += if m == 0 {
                        0.25 * parts.0 * parts.0
                    } else {
                        0.5 * (parts.0 * parts.0 + parts.1 * parts.1)
                    };
                }
            }
        }
    }
    let factor = (500e-9 / ARCSEC_RAD).powi(2) * f64::powf(r0_m, -5.0 / 3.0);
    for (ring_m, power) in rings_m.iter().zip(power) {
        let aperture = Aperture::clear(aperture_m);
        let kernels =
            harmonic_kernels(&aperture, Tilt::Gradient, outer_scale_m, *ring_m, 5).unwrap();
        for (m, (power, kernel)) in power.iter().zip(kernels).enumerate() {
            let ratio = power / count / (factor * kernel);
            let sigma = f64::sqrt(if m == 0 { 2.0 } else { 1.0 } / count);
            let allowed = tolerance_sigma * sigma + 0.01;
            assert!(
                (ratio - 1.0).abs() < allowed,
                "ring {ring_m} m, m = {m}: {ratio}"
            );
        }
    }
}

#[test]
fn the_limb_moves_as_the_closed_form_says() {
    harmonics(6, 3.5);
}

/// Gave ratios of 0.981 to 1.012, the worst 2.4 of its sampling error of 0.8 percent (mean: 1.1 percent).
#[test]
#[ignore = "a minute; the short form above runs always"]
fn the_limb_moves_as_the_closed_form_says_closely() {
    harmonics(400, 3.0);
}
