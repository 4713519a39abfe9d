//! A picture of the Sun taken in other light that says which arcs of the limb to leave out.
//!
//! The picture is sampled on rings just inside its limb; each ring is divided by its own median. An arc
//! on which a ring is brighter or darker than the session allows is masked.

use super::Error;
use crate::frames::ImageFile;
use crate::limb::blemish::median;
use crate::session::MaskImage;
use crate::sky::Orientation;
use ndarray::Array2;
use std::f64::consts::TAU;

/// Bins of the position angle from solar north.
const BINS: usize = 720;

/// Samples along each bin.
const SAMPLES: usize = 4;

/// Rings, as shares of the radius.
const RINGS: [f64; 6] = [0.93, 0.94, 0.95, 0.96, 0.97, 0.98];

/// Largest share of the limb that a picture may mask.
const LARGEST_SHARE: f64 = 0.35;

/// Bins of the position angle from solar north through east that the picture masks.
///
/// # Errors
///
/// [`Error::MaskImage`] where the limb of the picture is not in it, or where it masks too much.
pub(super) fn bins(mask: &MaskImage) -> Result<Vec<bool>, Error> {
    let mut file = ImageFile::open(&mask.image)?;
    let mut image = Array2::zeros((0, 0));
    file.read_plane(0, &mut image)?;
    let fault = |found: String, cure: &str| Error::MaskImage {
        path: mask.image.clone(),
        found,
        cure: cure.to_owned(),
    };
    let covered = covered(&image, mask).map_err(|(x, y)| {
        let (height, width) = image.dim();
        fault(
            format!(
                "the limb of the picture passes ({x:.1}, {y:.1}) px, where a picture of {width} x {height} px has no value"
            ),
            "correct mask.centre_x_px, mask.centre_y_px and mask.radius_px, or take a picture of the whole disk",
        )
    })?;
    let share = covered.iter().filter(|it| **it).count() as f64 / BINS as f64;
    if share > LARGEST_SHARE {
        return Err(fault(
            format!(
                "{:.0} percent of the limb pass mask.brighter_than or mask.darker_than; at most {:.0} percent may",
                100.0 * share,
                100.0 * LARGEST_SHARE
            ),
            "set the limits farther from 1",
        ));
    }
    Ok(covered)
}

/// Which bins are masked, or the first place without a value.
fn covered(image: &Array2<f32>, mask: &MaskImage) -> Result<Vec<bool>, (f64, f64)> {
    let orientation = Orientation {
        y_position_angle_rad: mask.angle_deg.to_radians(),
        parity: mask.parity,
    };
    let mut out = vec![false; BINS];
    for ring in RINGS {
        let mut values = Vec::with_capacity(BINS);
        for bin in 0..BINS {
            let mut sum = 0.0;
            for k in 0..SAMPLES {
                let part = (k as f64 + 0.5) / SAMPLES as f64;
                let angle = TAU * (bin as f64 + part) / BINS as f64;
                let (sin, cos) = orientation.detector_angle_rad(angle).sin_cos();
                let x = mask.centre_px.0 + ring * mask.radius_px * cos;
                let y = mask.centre_px.1 + ring * mask.radius_px * sin;
                sum += at(image, x, y).ok_or((x, y))?;
            }
            values.push(sum / SAMPLES as f64);
        }
        let level = median(values.iter().copied());
        for (covered, value) in out.iter_mut().zip(values) {
            let ratio = value / level;
            *covered |= mask.brighter_than.is_some_and(|it| ratio > it)
                || mask.darker_than.is_some_and(|it| ratio < it);
        }
    }
    Ok(out)
}

/// The picture between four pixels.
fn at(image: &Array2<f32>, x: f64, y: f64) -> Option<f64> {
    let (height, width) = image.dim();
    if !(x >= 0.0 && y >= 0.0) {
        return None;
    }
    let (i, j) = (x as usize, y as usize);
    if i + 1 >= width || j + 1 >= height {
        return None;
    }
    let (fx, fy) = (x - i as f64, y - j as f64);
    let pixel = |dj: usize, di: usize| f64::from(image[[j + dj, i + di]]);
    let low = pixel(0, 0) * (1.0 - fx) + pixel(0, 1) * fx;
    let high = pixel(1, 0) * (1.0 - fx) + pixel(1, 1) * fx;
    let value = low * (1.0 - fy) + high * fy;
    value.is_finite().then_some(value)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::sky::Parity;

    fn mask(angle_deg: f64, parity: Parity) -> MaskImage {
        MaskImage {
            image: "picture.fits".into(),
            centre_px: (150.0, 150.0),
            radius_px: 120.0,
            angle_deg,
            parity,
            brighter_than: Some(1.3),
            darker_than: None,
        }
    }

    /// A disk that is twice as bright in one corner: up and to the left.
    fn picture() -> Array2<f32> {
        Array2::from_shape_fn((301, 301), |(y, x)| {
            let (dx, dy) = (x as f64 - 150.0, y as f64 - 150.0);
            let angle = dy.atan2(dx).to_degrees();
            if dx.hypot(dy) > 120.0 {
                0.0
            } else if (130.0..140.0).contains(&angle) {
                200.0
            } else {
                100.0
            }
        })
    }

    fn middle_deg(covered: &[bool]) -> f64 {
        let at: Vec<f64> = (0..BINS)
            .filter(|&bin| covered[bin])
            .map(|bin| (bin as f64 + 0.5) * 360.0 / BINS as f64)
            .collect();
        assert!((18..=22).contains(&at.len()), "{} bins", at.len());
        at.iter().sum::<f64>() / at.len() as f64
    }

    /// North up and east to the left: up and left is 45 degrees; with the picture turned, more.
    #[test]
    fn a_bright_arc_is_masked_at_its_position_angle() {
        let covered = |angle, parity| covered(&picture(), &mask(angle, parity)).unwrap();
        assert!((middle_deg(&covered(0.0, Parity::Sky)) - 45.0).abs() < 0.6);
        assert!((middle_deg(&covered(30.0, Parity::Sky)) - 75.0).abs() < 0.6);
        assert!((middle_deg(&covered(0.0, Parity::Mirrored)) - 315.0).abs() < 0.6);
    }

    #[test]
    fn a_limb_outside_the_picture_is_refused() {
        let off = MaskImage {
            centre_px: (60.0, 150.0),
            ..mask(0.0, Parity::Sky)
        };
        assert!(covered(&picture(), &off).is_err());
    }
}
