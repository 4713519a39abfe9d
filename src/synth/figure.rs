//! Where the limb stands on the detector in one frame, before turbulence.
//!
//! # Model
//!
//! ```text
//! true limb     rho_1(psi) = R [1 + c2 P2(s) + c4 P4(s)],  s = cos B0 cos psi,  psi = PA - P
//!               sin rho = sin rho_1 / d
//! seen          the apparent direction whose true direction lies on that limb, by Newton's steps
//!               in radius at a fixed bearing
//! detector      + A cos m (theta - phi)
//! ```
//!
//! | symbol | meaning | unit |
//! |--------|---------|------|
//! | `rho` | angular radius, `rho_1` at 1 AU | rad |
//! | `P`, `B0` | position angle of the solar north, latitude of the disk's centre | rad |
//! | `d` | distance | au |
//! | `theta` | angle on the detector from +x towards +y | rad |
//!
//! # Valid for
//!
//! Disks above the horizon, as [`crate::air::DiskMap`].
//!
//! # Accuracy
//!
//! That of the map of the disk: 1e-8 arcsec after three steps.
//!
//! # Source
//!
//! Spherical trigonometry; the map is [`crate::air::DiskMap`].

use crate::air::DiskMap;
use crate::sky::{Orientation, SunPlace};
use crate::units::{ARCSEC_RAD, DEG_RAD, MAS_RAD};

use super::scenario::{Distortion, Shape};

/// Newton's steps; each leaves 1e-3 of the error at most.
const STEPS: usize = 4;

/// The Sun's figure.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Figure {
    radius_rad: f64,
    pub(super) c2: f64,
    pub(super) c4: f64,
}

impl Figure {
    pub(super) fn new(shape: &Shape) -> Self {
        let radius_mas = 1000.0 * shape.radius_arcsec;
        Self {
            radius_rad: shape.radius_arcsec * ARCSEC_RAD,
            // Oblateness = R (-3/2 c2 - 5/8 c4): P2 and P4 at equator minus pole.
            c2: -2.0 / 3.0 * (shape.oblateness_mas + 0.625 * shape.p4_mas) / radius_mas,
            c4: shape.p4_mas / radius_mas,
        }
    }

    /// True angular radius at a position angle, rad.
    pub(super) fn radius_rad(&self, sun: &SunPlace, position_angle_rad: f64) -> f64 {
        let s = sun.b0_rad.cos() * (position_angle_rad - sun.axis_rad).cos();
        let s2 = s * s;
        let p2 = 1.5 * s2 - 0.5;
        let p4 = (35.0 * s2 * s2 - 30.0 * s2 + 3.0) / 8.0;
        let at_1_au = self.radius_rad * (1.0 + self.c2 * p2 + self.c4 * p4);
        (at_1_au.sin() / sun.distance_au).asin()
    }
}

/// A moment's geometry.
#[derive(Clone, Debug)]
pub(super) struct Geometry {
    pub(super) sun: SunPlace,
    pub(super) orientation: Orientation,
    /// Map of the disk about the air's own zenith.
    pub(super) map: DiskMap,
    /// Position angle of the air's own zenith.
    pub(super) zenith_angle_rad: f64,
}

/// Angular radius of the limb as seen at each detector angle, arcsec, without distortion.
pub(super) fn seen_limb_arcsec(figure: &Figure, at: &Geometry, angles_rad: &[f64]) -> Vec<f64> {
    let bearings: Vec<f64> = angles_rad
        .iter()
        .map(|it| at.orientation.position_angle_rad(*it) - at.zenith_angle_rad)
        .collect();
    let mut seen: Vec<f64> = bearings
        .iter()
        .map(|it| figure.radius_rad(&at.sun, it + at.zenith_angle_rad))
        .collect();
    let mut points = Vec::with_capacity(seen.len());
    for _ in 0..STEPS {
        points.clear();
        points.extend(seen.iter().copied().zip(bearings.iter().copied()));
        at.map.true_from_apparent_each(&mut points);
        for (radius_rad, (true_rad, bearing_rad)) in seen.iter_mut().zip(&points) {
            *radius_rad -= true_rad - figure.radius_rad(&at.sun, bearing_rad + at.zenith_angle_rad);
        }
    }
    seen.iter().map(|it| it / ARCSEC_RAD).collect()
}

/// The instrument's distortion at a detector angle, arcsec.
pub(super) fn distortion_arcsec(terms: &[Distortion], angle_rad: f64) -> f64 {
    let one = |it: &Distortion| {
        let phase_rad = f64::from(it.m) * (angle_rad - it.angle_deg * DEG_RAD);
        it.amplitude_mas * MAS_RAD / ARCSEC_RAD * phase_rad.cos()
    };
    terms.iter().map(one).sum()
}

#[cfg(test)]
mod tests {
    use super::*;

    // Source: worked example of the harmonics of a figure (invented c2 = -6.0e-6, c4 = 6.0e-7,
    // R = 960 arcsec): equator minus pole 8.2800 mas at B0 = 0 and 8.1876 mas at 7.25 deg.
    #[test]
    fn the_figure_has_its_oblateness() {
        let shape = Shape {
            radius_arcsec: 960.0,
            oblateness_mas: 8.28,
            p4_mas: 0.576,
        };
        let figure = Figure::new(&shape);
        assert!((figure.c2 + 6.0e-6).abs() < 1e-12 && (figure.c4 - 6.0e-7).abs() < 1e-15);
        for (b0_deg, expected_mas) in [(0.0, 8.28), (7.25, 8.1876)] {
            let sun = SunPlace {
                zenith_true_rad: 0.5,
                azimuth_rad: 0.0,
                hour_angle_rad: 0.0,
                right_ascension_rad: 0.0,
                declination_rad: 0.0,
                parallactic_rad: 0.0,
                axis_rad: 0.3,
                b0_rad: b0_deg * DEG_RAD,
                l0_rad: 0.0,
                distance_au: 1.0,
                radial_velocity_m_s: 0.0,
            };
            let equator = figure.radius_rad(&sun, 0.3 + std::f64::consts::FRAC_PI_2);
            let pole = figure.radius_rad(&sun, 0.3);
            let found_mas = (equator - pole) / MAS_RAD;
            assert!((found_mas - expected_mas).abs() < 1e-4, "{found_mas}");
        }
    }
}
