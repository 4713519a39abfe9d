//! The detector: response, dark level, noise, and the converter.
//!
//! # Model
//!
//! ```text
//! count = round[ (Poisson(e) + r n) / g + dark ],   held to 0 .. full scale as a converter does
//! e     = peak x brightness x vignetting x dust x response
//! ```
//!
//! | symbol | meaning | unit |
//! |--------|---------|------|
//! | `e`, `r` | light, read noise | electrons |
//! | `n` | normal number | - |
//! | `g` | gain | electrons per ADU |
//!
//! # Valid for
//!
//! A linear detector below its full scale.
//!
//! # Accuracy
//!
//! Above 30 electrons the Poisson distribution is taken as normal.
//!
//! # Source
//!
//! Photon transfer: common practice, no source.

use ndarray::Array2;

use super::Scenario;
use super::draw::{Draw, Stream};

/// Light above which photons are drawn from the normal distribution, electrons.
const MANY_E: f64 = 30.0;
/// Spread of the dark level from pixel to pixel, ADU.
const DARK_PATTERN_SIGMA_ADU: f64 = 0.8;
/// Hot pixels lie between these above the dark level, as fractions of full scale.
const HOT_FRACTION: (f64, f64) = (0.01, 0.3);

/// What is fixed to the pixels.
#[derive(Clone, Debug)]
pub(super) struct Detector {
    /// Response, 1 at the centre of a clean detector.
    pub(super) response: Vec<f32>,
    dark_adu: Vec<f32>,
    side: usize,
    gain_e_adu: f64,
    read_noise_e: f64,
    full_adu: f64,
    has_photon_noise: bool,
}

impl Detector {
    /// Draws the fixed pattern.
    pub(super) fn new(s: &Scenario, seed: u64) -> Self {
        let mut draw = Draw::new(seed, Stream::Detector);
        let side = s.size_px;
        let middle = 0.5 * (side as f64 - 1.0);
        let mut response = Vec::with_capacity(side * side);
        let mut dark_adu = Vec::with_capacity(side * side);
        for y in 0..side {
            for x in 0..side {
                let (dx, dy) = (x as f64 - middle, y as f64 - middle);
                let corner = (dx * dx + dy * dy) / (2.0 * middle * middle);
                let own = 1.0 + s.pixel_response_sigma_rel * draw.normal();
                response.push(((1.0 - s.vignetting * corner) * own) as f32);
                dark_adu.push((s.dark_adu + DARK_PATTERN_SIGMA_ADU * draw.normal()) as f32);
            }
        }
        for _ in 0..s.dust_spots {
            let centre = (side as f64 * draw.uniform(), side as f64 * draw.uniform());
            let radius_px = 2.0 + 5.0 * draw.uniform();
            let depth = 0.005 + 0.03 * draw.uniform();
            shade(&mut response, side, centre, radius_px, depth);
        }
        let full_adu = f64::from(s.saturation_adu);
        for _ in 0..s.hot_pixels {
            let place = ((side * side) as f64 * draw.uniform()) as usize;
            let span = HOT_FRACTION.1 - HOT_FRACTION.0;
            dark_adu[place] += (full_adu * (HOT_FRACTION.0 + span * draw.uniform())) as f32;
        }
        Self {
            response,
            dark_adu,
            side,
            gain_e_adu: s.gain_e_adu,
            read_noise_e: s.read_noise_e,
            full_adu,
            has_photon_noise: s.photon_noise,
        }
    }

    /// The counts of a frame; `light_e` gives the electrons of a pixel of response 1.
    pub(super) fn exposed(
        &self,
        light_e: impl Fn(usize, usize) -> f64,
        draw: &mut Draw,
    ) -> Array2<u16> {
        Array2::from_shape_fn((self.side, self.side), |(y, x)| {
            let place = y * self.side + x;
            let e = light_e(x, y) * f64::from(self.response[place]);
            self.count(e, f64::from(self.dark_adu[place]), draw)
        })
    }

    /// The counts of lines of the middle column, as a line detector has them.
    pub(super) fn exposed_lines(
        &self,
        lines: usize,
        light_e: impl Fn(usize, usize) -> f64,
        draw: &mut Draw,
    ) -> Array2<u16> {
        let column = self.side / 2;
        Array2::from_shape_fn((lines, self.side), |(line, y)| {
            let place = y * self.side + column;
            let e = light_e(line, y) * f64::from(self.response[place]);
            self.count(e, f64::from(self.dark_adu[place]), draw)
        })
    }

    #[inline]
    fn count(&self, e: f64, dark_adu: f64, draw: &mut Draw) -> u16 {
        let read2 = self.read_noise_e * self.read_noise_e;
        let with_noise_e = if !self.has_photon_noise {
            e + self.read_noise_e * draw.normal()
        } else if e > MANY_E {
            e + (e + read2).sqrt() * draw.normal()
        } else {
            draw.few_photons(e) + self.read_noise_e * draw.normal()
        };
        let adu = with_noise_e / self.gain_e_adu + dark_adu;
        adu.round().clamp(0.0, self.full_adu) as u16
    }
}

/// Takes light from a soft round spot.
fn shade(response: &mut [f32], side: usize, centre: (f64, f64), radius_px: f64, depth: f64) {
    let reach = (4.0 * radius_px).ceil();
    let range = |middle: f64| {
        let low = (middle - reach).max(0.0) as usize;
        low..((middle + reach) as usize + 1).min(side)
    };
    for y in range(centre.1) {
        for x in range(centre.0) {
            let r2 = (x as f64 - centre.0).powi(2) + (y as f64 - centre.1).powi(2);
            let loss = depth * (-0.5 * r2 / (radius_px * radius_px)).exp();
            response[y * side + x] *= (1.0 - loss) as f32;
        }
    }
}
