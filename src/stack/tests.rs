//! The stack by hand-made frames: brightness, flux, variance, weight.

use super::*;
use crate::refraction::Air;
use crate::session::{Projection, ScaleOf};
use crate::sky::Parity;
use rand::SeedableRng;
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, StandardNormal};

const SCALE_ARCSEC_PX: f64 = 9.5;
const RADIUS_ARCSEC: f64 = 950.0;
const SIZE: usize = 260;
const PLATE: Plate = Plate {
    projection: Projection::Arc,
    scale_of: ScaleOf::Apparent,
};
const DETECTOR: Detector = Detector {
    gain_e_adu: 12.0,
    read_noise_e: 8.0,
    saturation_adu: None,
};

/// A moment at a zenith distance, or above the air.
fn moment(zenith_true_deg: Option<f64>, parity: Parity) -> Moment {
    let mut out = crate::refraction::tests::moment(zenith_true_deg.unwrap_or(30.0));
    if zenith_true_deg.is_none() {
        let none = Air::none();
        out.map = none.map(out.sun.zenith_true_rad).unwrap();
        out.refractivity = none.refractivity;
    }
    out.orientation.parity = parity;
    out
}

/// Brightness at a true distance from the centre in px of the grid: a darkened disk with a soft edge.
fn brightness_adu(r_px: f64) -> f64 {
    let x = r_px * SCALE_ARCSEC_PX / RADIUS_ARCSEC;
    let edge = 0.5 * libm::erfc((x - 1.0) * RADIUS_ARCSEC / SCALE_ARCSEC_PX / (2.5 * 2f64.sqrt()));
    3000.0 * edge * (1.0 - 0.3 * x * x - 0.1 * x.powi(4))
}

/// What the detector shows of it through the air.
fn seen(moment: &Moment, centre_px: (f64, f64)) -> Array2<f32> {
    Array2::from_shape_fn((SIZE, SIZE), |(y, x)| {
        let (dx, dy) = (x as f64 - centre_px.0, y as f64 - centre_px.1);
        let apparent_rad = dx.hypot(dy) * SCALE_ARCSEC_PX * ARCSEC_RAD;
        let position_angle = moment.orientation.position_angle_rad(dy.atan2(dx));
        let bearing = position_angle - moment.sun.parallactic_rad;
        let true_rad = match &moment.map {
            Some(map) => map.true_from_apparent(apparent_rad, bearing).0,
            None => apparent_rad,
        };
        brightness_adu(true_rad.tan() / ARCSEC_RAD / SCALE_ARCSEC_PX) as f32
    })
}

fn placed<'a>(moment: &'a Moment, flat_inverse: &'a Array2<f32>) -> Placed<'a> {
    Placed {
        moment,
        plate: PLATE,
        scale_arcsec_px: SCALE_ARCSEC_PX,
        flat_inverse,
        detector: DETECTOR,
    }
}

/// Source: Keys (1981): the kernel's weights add to one and reproduce a parabola.
#[test]
fn cubic_convolution_keeps_flux_and_parabolas() {
    for k in 0..=10 {
        let t = f64::from(k) / 10.0;
        let w = cubic(t);
        assert!((w.iter().sum::<f64>() - 1.0).abs() < 1e-14);
        let parabola: f64 = w.iter().zip([1.0, 0.0, 1.0, 4.0]).map(|(w, v)| w * v).sum();
        assert!((parabola - t * t).abs() < 1e-12);
    }
}

/// Source: mathematics: a rotation and a shift keep the integral; refraction keeps the brightness of a
/// direction and presses the disk together, so the flux on the true grid is that of the frame times the
/// ratio of the areas (radiance is conserved; common practice, no source).
#[test]
fn brightness_stays_and_flux_goes_with_the_area() {
    let flat = Array2::ones((SIZE, SIZE));
    for (zenith_deg, parity) in [
        (None, Parity::Sky),
        (None, Parity::Mirrored),
        (Some(65.0), Parity::Sky),
        (Some(65.0), Parity::Mirrored),
    ] {
        let moment = moment(zenith_deg, parity);
        let centre = (130.37, 128.61);
        let frame = seen(&moment, centre);
        let mut stack = Stack::new(RADIUS_ARCSEC, SCALE_ARCSEC_PX);
        stack.add(frame.view(), centre, 1.0, &placed(&moment, &flat));
        let stack = stack.into_means();
        let mut worst = (0.0_f64, 0.0_f64);
        for ((y, x), value) in stack.image.indexed_iter() {
            let centre = stack.centre_px();
            let r = (x as f64 - centre).hypot(y as f64 - centre);
            let off = (value - brightness_adu(r)).abs() / 3000.0;
            assert!(off.is_finite() || r > 110.0, "no value at {r} px");
            if r < 90.0 {
                worst.0 = worst.0.max(off);
            } else {
                worst.1 = worst.1.max(off);
            }
        }
        assert!(
            worst.0 < 1e-5,
            "{zenith_deg:?} {parity:?}: disk off by {}",
            worst.0
        );
        // The third order that the kernel leaves on an edge of 2.5 px rms.
        assert!(
            worst.1 < 3e-3,
            "{zenith_deg:?} {parity:?}: edge off by {}",
            worst.1
        );
        let areas = {
            // Mean square of the apparent radius of a limb at the true one.
            let limb = 360;
            let sum: f64 = (0..limb)
                .map(|k| {
                    let angle = f64::from(k).to_radians();
                    let true_rad = RADIUS_ARCSEC * ARCSEC_RAD;
                    let (seen, _) = moment.apparent_place(PLATE, true_rad, angle);
                    (seen / RADIUS_ARCSEC).powi(2)
                })
                .sum();
            f64::from(limb) / sum
        };
        // Corners of grid and frame beyond the map have no value; they are dark.
        let lit = |it: f64| if it.is_finite() { it } else { 0.0 };
        let flux = stack.image.iter().map(|&it| lit(it)).sum::<f64>()
            / frame.iter().map(|&it| lit(f64::from(it))).sum::<f64>();
        assert!(
            (flux / areas - 1.0).abs() < 3e-5,
            "{zenith_deg:?} {parity:?}: flux {flux}, areas {areas}"
        );
        if zenith_deg.is_some() {
            assert!(areas - 1.0 > 5e-4, "{areas}");
        }
    }
}

/// Source: the definition of a variance; 400 draws of some 4000 pixels know it to about 1 percent, as
/// the pixels of one draw are correlated by the kernel over their next neighbours.
#[test]
fn the_variance_is_that_of_noise_put_in() {
    let flat = Array2::from_elem((SIZE, SIZE), 1.1_f32);
    let moment = moment(Some(40.0), Parity::Sky);
    let level = 900.0;
    let sigma = variance_adu2(level, 1.1, &DETECTOR).sqrt();
    let frames = [
        ((130.37, 128.61), 1.0),
        ((129.50, 130.02), 2.0),
        ((131.11, 129.83), 0.5),
    ];
    let mut rng = ChaCha8Rng::seed_from_u64(5);
    let draws = 400;
    let mut squares: Option<Array2<f64>> = None;
    let mut told = None;
    for _ in 0..draws {
        let mut stack = Stack::ring(RADIUS_ARCSEC, SCALE_ARCSEC_PX, 100.0, (95.0, 300.0));
        for (centre, weight) in frames {
            let frame = Array2::from_shape_fn((SIZE, SIZE), |_| {
                let normal: f64 = StandardNormal.sample(&mut rng);
                (level + sigma * normal) as f32
            });
            stack.add(frame.view(), centre, weight, &placed(&moment, &flat));
        }
        let stack = stack.into_means();
        let square = stack
            .image
            .mapv(|it| (it - level).powi(2) / f64::from(draws));
        match &mut squares {
            Some(sum) => *sum += &square,
            None => squares = Some(square),
        }
        // Told from the noisy brightness, which is right on average.
        told = Some(stack.variance);
    }
    let (found, told) = (squares.unwrap(), told.unwrap());
    let pairs: Vec<(f64, f64)> = found
        .iter()
        .zip(&told)
        .filter(|it| it.0.is_finite())
        .map(|(a, b)| (*a, *b))
        .collect();
    assert!(pairs.len() > 3000, "{}", pairs.len());
    // The variance depends on where between pixels a place fell: the upper and the lower half each.
    let mut sorted: Vec<f64> = pairs.iter().map(|it| it.1).collect();
    sorted.sort_by(f64::total_cmp);
    let median = sorted[sorted.len() / 2];
    assert!(
        sorted[sorted.len() - 1] / sorted[0] > 1.3,
        "no spread of the variance"
    );
    for upper in [false, true] {
        let (mut a, mut b) = (0.0, 0.0);
        for (found, told) in pairs.iter().filter(|it| (it.1 > median) == upper) {
            a += found;
            b += told;
        }
        assert!((a / b - 1.0).abs() < 0.02, "upper {upper}: {}", a / b);
    }
}

#[test]
fn a_bad_pixel_takes_the_weight_of_its_frame_and_no_other() {
    let flat = Array2::ones((SIZE, SIZE));
    let moment = moment(None, Parity::Sky);
    let centre = (130.0, 130.0);
    let clean = seen(&moment, centre);
    let mut spoilt = clean.clone();
    spoilt[[130, 130]] = f32::NAN;
    let mut stack = Stack::new(RADIUS_ARCSEC, SCALE_ARCSEC_PX);
    stack.add(clean.view(), centre, 1.5, &placed(&moment, &flat));
    stack.add(spoilt.view(), centre, 2.0, &placed(&moment, &flat));
    let stack = stack.into_means();
    let middle = stack.size() / 2;
    assert!((stack.weight[[middle, middle]] - 1.5).abs() < 1e-12);
    assert!((stack.weight[[middle + 9, middle]] - 3.5).abs() < 1e-12);
    assert!((stack.image[[middle, middle]] - brightness_adu(0.0)).abs() < 0.1);
    // A field that holds a corner of the grid alone leaves the rest without a value.
    let mut cut = Stack::new(RADIUS_ARCSEC, SCALE_ARCSEC_PX);
    cut.add(clean.view(), (20.0, 20.0), 1.0, &placed(&moment, &flat));
    let cut = cut.into_means();
    let (seen, all) = (cut.weight.sum(), cut.weight.len() as f64);
    assert!(seen > 0.1 * all && seen < 0.9 * all, "{seen} of {all}");
    let unseen = cut.image.iter().filter(|it| it.is_nan()).count() as f64;
    assert!((all - seen - unseen).abs() < 0.5);
}

#[test]
fn a_ring_holds_what_the_whole_grid_holds_there() {
    let flat = Array2::ones((SIZE, SIZE));
    let moment = moment(Some(50.0), Parity::Sky);
    let centre = (130.4, 129.7);
    let frame = seen(&moment, centre);
    let mut whole = Stack::new(RADIUS_ARCSEC, SCALE_ARCSEC_PX);
    let mut ring = Stack::ring(RADIUS_ARCSEC, SCALE_ARCSEC_PX, RADIUS_ARCSEC, (60.0, 40.0));
    for it in [&mut whole, &mut ring] {
        it.add(frame.view(), centre, 1.0, &placed(&moment, &flat));
    }
    let middle = whole.centre_px();
    for ((y, x), value) in whole.image.indexed_iter() {
        let r = (x as f64 - middle).hypot(y as f64 - middle) * SCALE_ARCSEC_PX;
        if (RADIUS_ARCSEC - 60.0..RADIUS_ARCSEC + 40.0).contains(&r) {
            assert!(ring.image[[y, x]].to_bits() == value.to_bits(), "{x} {y}");
        }
    }
    let filled = ring.weight.sum() / whole.weight.sum();
    assert!(filled < 0.5, "{filled}");
}
