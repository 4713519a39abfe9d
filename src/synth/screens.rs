//! Layers of frozen turbulence: the angle of arrival as a field that blows over the telescope.
//!
//! # Model
//!
//! ```text
//! alpha(r) = sum over k of  i lambda f_k c_k g(pi D f) sinc(f . V T) exp(2 pi i f_k . r)
//! <|c_k|^2> = A0 r0^(-5/3) (f^2 + L0^-2)^(-11/6) df^2
//! g(x)      = [2 J1(x)/x - e^2 2 J1(e x)/(e x)] / (1 - e^2)
//! dr(psi)   = n . alpha(h R n - V t),      n = (sin psi, cos psi)
//! ```
//!
//! | symbol | meaning | unit |
//! |--------|---------|------|
//! | `f` | spatial frequency | cycles/m |
//! | `c` | Fourier amplitudes of the phase, complex normal | rad |
//! | `g` | mean of the gradient over the aperture `D` with obstruction `e` | - |
//! | `V`, `T` | wind, exposure | m/s, s |
//! | `h`, `R` | range of the layer, angular radius of the limb | m, rad |
//! | `psi` | position angle | rad |
//!
//! Each layer is two periodic fields: a fine one (step `D/6`) of the frequencies above ten periods,
//! a coarse one of sixteen times the period of those below. Both components of the gradient come
//! from one transform, as real and imaginary part.
//!
//! # Valid for
//!
//! Outer scales up to a quarter of the coarse period. Near field: no diffraction on the way down.
//!
//! # Accuracy
//!
//! Variances of the limb's harmonics agree with the closed form of [`crate::turbulence`] within 2
//! percent, 2.4 sampling errors at worst (`tests/limb.rs`). Left out is what lies above `3/D`: 0.05
//! percent of the variance of one axis. The fine field comes round after `171 D` of wind: scales
//! below a tenth of that may repeat within a sequence.
//!
//! # Source
//!
//! Spectrum as in [`crate::turbulence`]; sampling by fast Fourier transform: common practice.

use std::f64::consts::PI;
use std::sync::Arc;

use rustfft::num_complex::Complex;
use rustfft::{Fft, FftPlanner};

use super::draw::Draw;
use crate::turbulence::PHASE_PSD_CONSTANT;
use crate::units::ARCSEC_RAD;

/// Cells on a side of a field; a power of two, so that a mask folds an index into the period.
const CELLS: usize = 1 << CELL_BITS;
const CELL_BITS: u32 = 10;
const FOLD: i32 = (1 << CELL_BITS) - 1;
/// Cells of the fine field to the aperture.
const CELLS_PER_APERTURE: f64 = 6.0;
/// Period of the coarse field over that of the fine one.
const COARSE_TO_FINE: f64 = 16.0;
/// Where the two share the spectrum, in periods of the fine field.
const SPLIT_CYCLES: f64 = 10.0;
/// Wavelength to which r0 belongs.
const R0_WAVELENGTH_M: f64 = 500e-9;
/// Entries of the table of amplitudes.
const AMPLITUDES: usize = 8192;

/// Period of the coarse field, m.
pub(super) fn coarse_period_m(aperture_m: f64) -> f64 {
    CELLS as f64 * aperture_m / CELLS_PER_APERTURE * COARSE_TO_FINE
}

/// Longest outer scale that the fields hold, m.
pub fn longest_outer_scale_m(aperture_m: f64) -> f64 {
    0.25 * coarse_period_m(aperture_m)
}

/// One layer, as the telescope sees it.
#[derive(Clone, Copy, Debug)]
pub(super) struct LayerFacts {
    pub(super) aperture_m: f64,
    pub(super) central_obstruction: f64,
    /// Fried's parameter of the layer along the line of sight, 500 nm.
    pub(super) r0_m: f64,
    pub(super) outer_scale_m: f64,
    /// Wind across the line of sight, towards position angle 90 deg and 0.
    pub(super) wind_m_s: (f64, f64),
    pub(super) exposure_s: f64,
}

/// Which share of the spectrum a field holds.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Scale {
    Fine,
    Coarse,
}

/// A periodic field of the angle of arrival, arcsec; real part along x, imaginary along y.
#[derive(Clone, Debug)]
pub(super) struct Field {
    step_m: f64,
    cells: Vec<Complex<f32>>,
}

impl Field {
    /// Draws a field.
    pub(super) fn new(facts: &LayerFacts, scale: Scale, draw: &mut Draw) -> Self {
        let fine_m = facts.aperture_m / CELLS_PER_APERTURE;
        let split_per_m = SPLIT_CYCLES / (fine_m * CELLS as f64);
        let (step_m, band) = match scale {
            Scale::Fine => (fine_m, (split_per_m, 0.5 / fine_m)),
            Scale::Coarse => (fine_m * COARSE_TO_FINE, (0.0, split_per_m)),
        };
        let frequency_step = 1.0 / (step_m * CELLS as f64);
        let amplitudes = Amplitudes::new(facts, band, frequency_step);
        let drift_m = (
            facts.wind_m_s.0 * facts.exposure_s,
            facts.wind_m_s.1 * facts.exposure_s,
        );
        let half = CELLS / 2;
        let signed = |k: usize| {
            if k < half {
                k as f64
            } else {
                k as f64 - CELLS as f64
            }
        };
        let mut cells = vec![Complex::new(0.0_f32, 0.0); CELLS * CELLS];
        // c(-k) is the conjugate of c(k), so half of the plane is drawn.
        for row in 0..=half {
            if row == half {
                continue;
            }
            let fy = frequency_step * signed(row);
            for column in 0..CELLS {
                let mirrored = row == 0 && column > half;
                if column == half || mirrored || (row == 0 && column == 0) {
                    continue;
                }
                let fx = frequency_step * signed(column);
                let amplitude = amplitudes.at(fx.hypot(fy));
                if amplitude == 0.0 {
                    continue;
                }
                let moved = sinc(fx * drift_m.0 + fy * drift_m.1);
                let size = (amplitude * moved) as f32;
                let c = Complex::new(draw.normal_f32(), draw.normal_f32()) * size;
                // i f c for both components; the second is itself the imaginary part of the field.
                let (gx, gy) = (fx as f32, fy as f32);
                let turned = Complex::new(-c.im, c.re);
                let conjugate = Complex::new(-c.im, -c.re);
                let both = Complex::new(gx, gy);
                cells[row * CELLS + column] = turned * both;
                let opposite = ((CELLS - row) % CELLS) * CELLS + (CELLS - column) % CELLS;
                cells[opposite] = conjugate * both;
            }
        }
        let transform: Arc<dyn Fft<f32>> = FftPlanner::new().plan_fft_inverse(CELLS);
        transform.process(&mut cells);
        let mut cells = transposed(&cells);
        transform.process(&mut cells);
        // Columns became rows: x now runs along the slow axis.
        Self { step_m, cells }
    }

    /// The field at a place, by cubic convolution (Catmull-Rom) over its period.
    fn at(&self, x_m: f64, y_m: f64) -> Complex<f32> {
        let (u, v) = (x_m / self.step_m, y_m / self.step_m);
        let (u0, v0) = (u.floor(), v.floor());
        let (wu, wv) = (cubic((u - u0) as f32), cubic((v - v0) as f32));
        let four = |base: f64| [-1, 0, 1, 2].map(|by| ((base as i32 + by) & FOLD) as usize);
        let (rows, columns) = (four(u0), four(v0));
        let mut sum = Complex::new(0.0, 0.0);
        for (row, weight) in rows.iter().zip(wu) {
            let row = &self.cells[row * CELLS..][..CELLS];
            let mut along = Complex::new(0.0, 0.0);
            for (column, weight) in columns.iter().zip(wv) {
                along += row[*column] * weight;
            }
            sum += along * weight;
        }
        sum
    }
}

/// Fine and coarse field of a layer.
#[derive(Clone, Debug)]
pub(super) struct Screens {
    pub(super) fine: Field,
    pub(super) coarse: Field,
    pub(super) wind_m_s: (f64, f64),
}

impl Screens {
    /// Adds the layer's radial displacement at the position angles whose sine and cosine are given.
    pub(super) fn add_ring(
        &self,
        ring_radius_m: f64,
        after_s: f64,
        factor: f64,
        directions: &[(f64, f64)],
        into_arcsec: &mut [f64],
    ) {
        let (x0_m, y0_m) = (-self.wind_m_s.0 * after_s, -self.wind_m_s.1 * after_s);
        for (&(sin, cos), to) in directions.iter().zip(into_arcsec) {
            let (x_m, y_m) = (x0_m + ring_radius_m * sin, y0_m + ring_radius_m * cos);
            let alpha = self.fine.at(x_m, y_m) + self.coarse.at(x_m, y_m);
            *to += factor * (f64::from(alpha.re) * sin + f64::from(alpha.im) * cos);
        }
    }
}

/// Size of the Fourier amplitudes by frequency: the square root of the spectrum, the aperture's
/// filter, and the factor from phase to angle; for real and imaginary part each of unit variance.
struct Amplitudes {
    values: Vec<f64>,
    step_per_m: f64,
    band_per_m: (f64, f64),
}

impl Amplitudes {
    fn new(facts: &LayerFacts, band_per_m: (f64, f64), frequency_step: f64) -> Self {
        let step_per_m = band_per_m.1 / (AMPLITUDES - 2) as f64;
        let values = (0..AMPLITUDES)
            .map(|i| {
                let f = step_per_m * i as f64;
                let q = f * f + facts.outer_scale_m.powi(-2);
                let psd = PHASE_PSD_CONSTANT * facts.r0_m.powf(-5.0 / 3.0) * q.powf(-11.0 / 6.0);
                let filter = aperture_mean(PI * facts.aperture_m * f, facts.central_obstruction);
                // Half of the power each to the real and the imaginary part.
                (0.5 * psd).sqrt() * frequency_step * filter * R0_WAVELENGTH_M / ARCSEC_RAD
            })
            .collect();
        Self {
            values,
            step_per_m,
            band_per_m,
        }
    }

    fn at(&self, f_per_m: f64) -> f64 {
        if f_per_m < self.band_per_m.0 || f_per_m >= self.band_per_m.1 {
            return 0.0;
        }
        let place = f_per_m / self.step_per_m;
        let (low, part) = (place as usize, place.fract());
        self.values[low] + part * (self.values[low + 1] - self.values[low])
    }
}

/// `[2 J1(x)/x - e^2 2 J1(e x)/(e x)] / (1 - e^2)`.
fn aperture_mean(x: f64, e: f64) -> f64 {
    let g = |x: f64| {
        if x < 1e-4 { 1.0 } else { 2.0 * libm::j1(x) / x }
    };
    (g(x) - e * e * g(e * x)) / (1.0 - e * e)
}

fn sinc(turns: f64) -> f64 {
    let z = PI * turns;
    if z.abs() < 1e-3 { 1.0 } else { z.sin() / z }
}

/// Weights of four points for a place between the second and the third.
fn cubic(t: f32) -> [f32; 4] {
    let (t2, t3) = (t * t, t * t * t);
    [
        0.5 * (-t + 2.0 * t2 - t3),
        0.5 * (2.0 - 5.0 * t2 + 3.0 * t3),
        0.5 * (t + 4.0 * t2 - 3.0 * t3),
        0.5 * (t3 - t2),
    ]
}

/// The square array with rows and columns exchanged, block by block for the processor's cache.
fn transposed(cells: &[Complex<f32>]) -> Vec<Complex<f32>> {
    const BLOCK: usize = 16;
    let mut out = vec![Complex::new(0.0, 0.0); cells.len()];
    for row in (0..CELLS).step_by(BLOCK) {
        for column in (0..CELLS).step_by(BLOCK) {
            for i in row..row + BLOCK {
                for j in column..column + BLOCK {
                    out[j * CELLS + i] = cells[i * CELLS + j];
                }
            }
        }
    }
    out
}
