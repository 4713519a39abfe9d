//! The turbulence of one stretch of a sequence: every layer's screens, and the limb's displacement.
//!
//! # Model
//!
//! ```text
//! r0 of a layer along the line of sight = r0 (cos z)^(3/5),   range = h / cos z
//! r0 of all     = [sum r0_i^(-5/3)]^(-3/5) (lambda / 500 nm)^(6/5) q(t)
//! displacement  = q(t)^(-5/6) times that of the screens
//! ```
//!
//! `z` is the apparent zenith distance, `q` the wander of r0 about its mean.
//!
//! # Valid for
//!
//! Zenith distances at which the secant is the air mass, to about 75 degrees.
//!
//! # Accuracy
//!
//! As `screens.rs`.
//!
//! # Source
//!
//! D. L. Fried, J. Opt. Soc. Am. 56, 1372 (1966), for the scaling.

use rayon::prelude::*;

use super::Scenario;
use super::draw::{Draw, Stream};
use super::screens::{Field, LayerFacts, Scale, Screens, coarse_period_m};
use super::sky_above::Moment;
use crate::units::ARCSEC_RAD;

/// Share of the coarse field's period that the fastest layer may blow before new screens are drawn:
/// no layer comes back to where it began, whatever the wind's direction.
const PERIODS: f64 = 0.9;

/// Seconds for which one set of screens serves.
pub(super) fn stretch_s(s: &Scenario) -> f64 {
    let fastest = s.layers.iter().map(|it| it.wind_m_s).fold(0.0, f64::max);
    if fastest == 0.0 {
        f64::INFINITY
    } else {
        PERIODS * coarse_period_m(s.aperture_m) / fastest
    }
}

/// Fried's parameter of all layers at 500 nm towards the zenith, m; infinity without layers.
pub(super) fn zenith_r0_m(s: &Scenario) -> f64 {
    let sum: f64 = s.layers.iter().map(|it| it.r0_m.powf(-5.0 / 3.0)).sum();
    sum.powf(-0.6)
}

/// Fried's parameter of a frame along the line of sight at the wavelength of observation, m.
pub(super) fn frame_r0_m(s: &Scenario, at: &Moment) -> f64 {
    let cos_zenith = at.geometry.map.zenith_apparent_rad().cos();
    let colour = (s.wavelength_nm / 500.0).powf(1.2);
    zenith_r0_m(s) * cos_zenith.powf(0.6) * colour * at.r0_factor
}

/// The layers for a stretch of time.
#[derive(Clone, Debug)]
pub(super) struct Turbulence {
    layers: Vec<(f64, Screens)>,
    start_s: f64,
}

impl Turbulence {
    /// Draws the screens of the stretch that begins with a frame; `number` tells stretches apart.
    pub(super) fn new(s: &Scenario, seed: u64, first: &Moment, number: u32) -> Self {
        let cos_zenith = first.geometry.map.zenith_apparent_rad().cos();
        let count = s.layers.len() as u32;
        // Wind directions belong to the session, not to the stretch.
        let mut draw = Draw::new(seed, Stream::Screen(u32::MAX));
        let winds: Vec<(f64, f64)> = s
            .layers
            .iter()
            .map(|it| {
                let (sin, cos) = (std::f64::consts::TAU * draw.uniform()).sin_cos();
                (it.wind_m_s * sin, it.wind_m_s * cos)
            })
            .collect();
        let jobs: Vec<(usize, Scale)> = (0..s.layers.len())
            .flat_map(|it| [(it, Scale::Fine), (it, Scale::Coarse)])
            .collect();
        let facts = |index: usize| LayerFacts {
            aperture_m: s.aperture_m,
            central_obstruction: s.central_obstruction,
            r0_m: s.layers[index].r0_m * cos_zenith.powf(0.6),
            outer_scale_m: s.layers[index].outer_scale_m,
            wind_m_s: winds[index],
            exposure_s: s.exposure_s,
        };
        let fields: Vec<Field> = jobs
            .par_iter()
            .map(|&(index, scale)| {
                let own = 2 * (number * count + index as u32) + u32::from(scale == Scale::Coarse);
                Field::new(
                    &facts(index),
                    scale,
                    &mut Draw::new(seed, Stream::Screen(own)),
                )
            })
            .collect();
        let mut fields = fields.into_iter();
        let mut layers = Vec::new();
        for (index, layer) in s.layers.iter().enumerate() {
            if let (Some(fine), Some(coarse)) = (fields.next(), fields.next()) {
                let screens = Screens {
                    fine,
                    coarse,
                    wind_m_s: winds[index],
                };
                layers.push((layer.height_m / cos_zenith, screens));
            }
        }
        Self {
            layers,
            start_s: first.middle_s,
        }
    }

    /// Radial displacement of the limb at position angles given by sine and cosine, arcsec.
    pub(super) fn displacement_arcsec(
        &self,
        at: &Moment,
        limb_arcsec: f64,
        directions: &[(f64, f64)],
    ) -> Vec<f64> {
        let mut sum = vec![0.0; directions.len()];
        let factor = at.r0_factor.powf(-5.0 / 6.0);
        let after_s = at.middle_s - self.start_s;
        for (range_m, screens) in &self.layers {
            let ring_m = range_m * limb_arcsec * ARCSEC_RAD;
            screens.add_ring(ring_m, after_s, factor, directions, &mut sum);
        }
        sum
    }
}
