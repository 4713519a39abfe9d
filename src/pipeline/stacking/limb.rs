//! The limb of one stack, on the grid of the corrected disk, told in the detector's angles.

use super::apparent_radius_arcsec;
use crate::calibrate::{Calibration, Detector};
use crate::limb::geometry::Annulus;
use crate::limb::harmonics::Projector;
use crate::limb::template::EdgeTable;
use crate::limb::{self, Disk, Extraction, Flag};
use crate::pipeline::measure::{MeasuredSequence, Setup};
use crate::shape::{self, COMPONENTS};
use crate::sky::Parity;
use crate::stack::Stack;
use crate::units::ARCSEC_RAD;
use std::f64::consts::{FRAC_PI_2, TAU};

/// What the limbs of a sequence's stacks are measured with.
#[derive(Clone, Copy, Debug)]
pub(super) struct Ruler<'a> {
    /// The sequence.
    pub sequence: &'a MeasuredSequence,
    /// Detector angle of solar north, mean of the frames, rad.
    pub axis_rad: f64,
    /// Blur to start from.
    pub blur: f64,
}

/// Harmonics of a limb on the detector, mas at 1 AU, and their photon noise, mas^2.
pub(super) type Found = ([f64; COMPONENTS], [f64; COMPONENTS]);

impl Ruler<'_> {
    /// Measures the limb of a stack turned into means.
    ///
    /// # Errors
    ///
    /// Why there is no limb.
    pub(super) fn measure(&self, stack: &Stack) -> Result<Found, String> {
        let sequence = self.sequence;
        let setup: &Setup = &sequence.setup;
        let count = setup.annulus.sectors();
        let sense = match sequence.middle.orientation.parity {
            Parity::Sky => 1.0,
            Parity::Mirrored => -1.0,
        };
        // On the grid angles run from +x (solar west) to +y (solar north); on the detector solar north
        // stands at `axis_rad`. Sectors are laid so that the pixels' boxes fall into the same classes.
        let first_detector = setup.annulus.angle_rad(0);
        let first_grid = sense * (first_detector - self.axis_rad) + FRAC_PI_2;
        let on_detector: Vec<f64> = (0..count)
            .map(|s| first_detector + sense * TAU * s as f64 / count as f64)
            .collect();
        let table = EdgeTable::new(&setup.optics, 0.0, stack.scale_arcsec_px, &on_detector)
            .map_err(|it| it.to_string())?;
        // The grid is a tangent plane.
        let radius_arcsec = (apparent_radius_arcsec(sequence) * ARCSEC_RAD).tan() / ARCSEC_RAD;
        let annulus = Annulus::new(
            count,
            first_grid,
            stack.scale_arcsec_px,
            (radius_arcsec - 2.0, radius_arcsec + 2.0),
            setup.window_arcsec,
        );
        let model_arcsec = vec![radius_arcsec; count];
        let model_slope = vec![0.0; count];
        let n = stack.size();
        let calibration = Calibration::neutral(n, n);
        let frames = stack.frames as f64;
        let extraction = Extraction {
            table: &table,
            annulus: &annulus,
            calibration: &calibration,
            detector: Detector {
                gain_e_adu: setup.detector.gain_e_adu * frames,
                read_noise_e: setup.detector.read_noise_e * frames.sqrt(),
                saturation_adu: None,
            },
            model_arcsec: &model_arcsec,
            model_slope: &model_slope,
            blur_start: self.blur,
        };
        let image = stack.image.mapv(|it| it as f32);
        let centre = stack.centre_px();
        // The twin is dark inside its annulus: the brightest pixel serves both.
        let level = f64::from(
            image
                .iter()
                .copied()
                .filter(|it| it.is_finite())
                .fold(0.0_f32, |a, b| if b > a { b } else { a }),
        );
        let start = Disk {
            x_px: centre,
            y_px: centre,
            radius_px: 0.0,
            level_adu: level,
            sky_adu: 0.0,
        };
        let limb = limb::extract(image.view(), start, &extraction).map_err(|it| it.to_string())?;
        let usable: Vec<bool> = limb
            .sectors
            .iter()
            .enumerate()
            .map(|(s, it)| {
                let across = (sense * s as f64).rem_euclid(count as f64) as usize % count;
                it.flag == Flag::Good
                    && sequence.blemishes[if sense > 0.0 { s } else { across }].is_none()
            })
            .collect();
        let projector = Projector::new(&on_detector, &usable, 30)
            .ok_or("too few sectors of its limb are usable")?;
        let distance = sequence.middle.sun.distance_au;
        let radii: Vec<f64> = limb
            .sectors
            .iter()
            .map(|it| shape::beyond_reference_mas((it.radius_arcsec * ARCSEC_RAD).atan(), distance))
            .collect();
        let found = projector.apply(&radii);
        let variances: Vec<f64> = limb
            .sectors
            .iter()
            .map(|it| (1000.0 * it.sigma_arcsec * distance).powi(2))
            .collect();
        let noise = projector.noise(&variances);
        let (c, s) = (&found.cos, &found.sin);
        Ok((
            [c[0], c[2], s[2], c[3], s[3], c[4], s[4]],
            [
                noise[0], noise[2], noise[2], noise[3], noise[3], noise[4], noise[4],
            ],
        ))
    }
}
