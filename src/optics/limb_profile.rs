//! The radial limb profile after telescope, air, jitter and the pixel.
//!
//! # Model
//!
//! ```text
//! B(x) = unblurred disk, transformed with   T(f) = T_telescope T_air T_jitter T_pixel
//!
//! T_jitter = exp(-2 pi^2 sigma^2 f^2)
//! T_pixel  = sinc(f p cos theta) sinc(f p sin theta),   sinc(z) = sin(pi z) / (pi z)
//! ```
//!
//! | symbol | meaning | unit |
//! |--------|---------|------|
//! | `x` | distance from the unblurred limb's inflection, positive outward | arcsec |
//! | `sigma` | standard deviation of jitter or other Gaussian blur, one axis | arcsec |
//! | `p` | side of the square pixel | arcsec |
//! | `theta` | angle of the limb's normal from a side of the pixel | rad |
//!
//! A pixel of two sides `p`, `q`, the second leaning by `l` from the first one's normal, has
//! `sinc(f p cos theta) sinc(f q sin(theta - l))`; the formulas below are its case `q = p`, `l = 0`.
//!
//! The two-dimensional transform of the disk is used, so that the curvature of the limb inside the
//! blur is in the profile (see `limb_spectrum.rs`). A pixel that stands at `theta` averages, along the
//! radius, over two boxes; along the limb its second moment is `p^2/12` for every `theta`, and the
//! limb's curvature moves the mean by `-p^2 / (24 R)`. `T_pixel`, taken as a function of `f` alone, has
//! the same second moment and gives that shift; how the pixel's moments along the limb change across
//! the pixel is added to first order in `1/R`, with `g = sinc`, `a = f p cos theta`, `b = f p sin theta`:
//!
//! ```text
//! S_yy - S'/f = p^2 [sin^2 g''(a) g(b) - 2 sin cos g'(a) g'(b) + cos^2 g(a) g''(b)]
//!               - p [cos g'(a) g(b) + sin g(a) g'(b)] / f
//! ```
//!
//! # Valid for
//!
//! Profiles up to 100 arcsec from the limb, pixels up to 10 arcsec. A telescope of infinite aperture
//! stands for no diffraction: its table ends at 8 cycles per arcsec, and a blur that lets more than
//! 1e-9 pass there gives not-a-number, as does a blur that is not physical.
//!
//! # Accuracy
//!
//! 1e-8 of disk centre without a pixel; with one 1e-6, of limb position 0.01 mas at 4 arcsec a pixel
//! (`tests/published/disk_transform.rs`).
//!
//! # Source
//!
//! Limb darkening and edge: [`crate::disk`]; telescope and air: [`super::transfer`]; Hankel transform
//! of the disk: `limb_spectrum.rs`.

use super::interpolation::{HIGHEST_CYCLES_PER_STEP, Interpolator};
use super::limb_spectrum::{Weights, nodes, weights};
use super::transfer::{air_exponent, tilt_share};
use super::{OpticsError, Telescope, within};
use crate::disk::SolarEdge;
use std::f64::consts::PI;

/// Highest frequency of a telescope without diffraction, cycles per arcsec.
const UNLIMITED_CYCLES_ARCSEC: f64 = 8.0;

/// What may be left of the transfer function there.
const UNLIMITED_REMAINDER: f64 = 1e-9;

/// Frequencies beyond the last with a transfer above this are left out of the sum.
const NEGLIGIBLE_TRANSFER: f64 = 1e-13;

/// Largest number of weights, 8 bytes each.
const LARGEST_TABLE: f64 = 3e7;

/// How long the air is exposed.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Exposure {
    /// Frozen, with the tilt over the aperture taken out.
    Short,
    /// The mean over all states of the air.
    Long,
}

/// What blurs the limb from frame to frame.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Blur {
    /// Fried's parameter along the line of sight at the observing wavelength, m; infinity for no air.
    pub r0_m: f64,
    /// Standard deviation of jitter or other Gaussian blur on one axis, arcsec.
    pub gaussian_sigma_arcsec: f64,
}

impl Blur {
    /// Whether the blur is physical.
    ///
    /// # Errors
    ///
    /// [`OpticsError::OutOfRange`] for a Fried parameter below 1 mm or a negative or infinite sigma.
    pub fn check(&self) -> Result<(), OpticsError> {
        within("Fried parameter", self.r0_m, (0.001, f64::INFINITY), "m")?;
        within(
            "Gaussian blur",
            self.gaussian_sigma_arcsec,
            (0.0, 100.0),
            "arcsec",
        )
    }
}

/// The box over which a pixel takes the mean.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct PixelBox {
    /// Lengths of its two sides, arcsec.
    pub sides_arcsec: [f64; 2],
    /// By how much the second side leans from the normal of the first, rad.
    pub lean_rad: f64,
}

impl PixelBox {
    /// A square.
    pub fn square(side_arcsec: f64) -> Self {
        Self {
            sides_arcsec: [side_arcsec; 2],
            lean_rad: 0.0,
        }
    }

    /// Whether it is a point.
    fn is_point(&self) -> bool {
        self.sides_arcsec.iter().all(|it| *it == 0.0)
    }
}

/// The limb and the optics that images it.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct LimbOptics {
    /// Unblurred limb.
    pub edge: SolarEdge,
    /// Telescope.
    pub telescope: Telescope,
    /// Wavelength of observation, nm.
    pub wavelength_nm: f64,
    /// Exposure of the air.
    pub exposure: Exposure,
}

/// Where the values of a profile lie: `x0 + i step`.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Grid {
    /// Distance of the first value from the limb, positive outward, arcsec.
    pub x0_arcsec: f64,
    /// Step, arcsec.
    pub step_arcsec: f64,
    /// Number of values.
    pub n: usize,
}

impl Grid {
    /// Distance of a value from the limb, arcsec.
    pub fn x_arcsec(&self, index: usize) -> f64 {
        self.x0_arcsec + self.step_arcsec * index as f64
    }
}

/// One frequency of the transfer function, with what does not change from blur to blur.
#[derive(Clone, Copy, Debug)]
struct Channel {
    f_cycles_arcsec: f64,
    telescope: f64,
    /// Exponent of the air for `r0` of one metre.
    air: f64,
}

/// Makes blurred profiles of one limb through one telescope, for many blurs and pixel directions.
#[derive(Clone, Debug)]
pub struct ProfileMaker {
    grid: Grid,
    pixel: PixelBox,
    unlimited: bool,
    channels: Vec<Channel>,
    weights: Weights,
    wide_len: usize,
    interpolator: Interpolator,
}

impl ProfileMaker {
    /// Prepares profiles from `-span` to `+span` about the limb, on multiples of the step; the span is
    /// widened to a whole number of steps. A pixel of zero is a point.
    ///
    /// # Errors
    ///
    /// When edge, telescope, wavelength, span, step or pixel are out of range, or when the telescope's
    /// cutoff over such a span would need a table of more than a quarter of a gigabyte.
    pub fn new(
        optics: &LimbOptics,
        span_arcsec: f64,
        step_arcsec: f64,
        pixel_arcsec: f64,
    ) -> Result<Self, OpticsError> {
        Self::for_pixel(
            optics,
            span_arcsec,
            step_arcsec,
            PixelBox::square(pixel_arcsec),
        )
    }

    /// The same for a pixel that is no square, as a line detector's is in time and slit.
    ///
    /// # Errors
    ///
    /// As [`ProfileMaker::new`].
    pub fn for_pixel(
        optics: &LimbOptics,
        span_arcsec: f64,
        step_arcsec: f64,
        pixel: PixelBox,
    ) -> Result<Self, OpticsError> {
        optics.edge.check()?;
        optics.telescope.check()?;
        within("wavelength", optics.wavelength_nm, (200.0, 5000.0), "nm")?;
        within(
            "half width of the profile",
            span_arcsec,
            (1.0, 100.0),
            "arcsec",
        )?;
        within("step of the profile", step_arcsec, (1e-4, 1.0), "arcsec")?;
        for side in pixel.sides_arcsec {
            within("pixel", side, (0.0, 10.0), "arcsec")?;
        }
        let wavelength_m = optics.wavelength_nm * 1e-9;
        let unlimited = !optics.telescope.aperture_m.is_finite();
        let highest = if unlimited {
            UNLIMITED_CYCLES_ARCSEC
        } else {
            optics.telescope.cutoff_cycles_arcsec(wavelength_m)
        };

        let half = (span_arcsec / step_arcsec - 1e-9).ceil();
        let n = 2 * half as usize + 1;
        let grid = Grid {
            x0_arcsec: -half * step_arcsec,
            step_arcsec,
            n,
        };
        let factor = (HIGHEST_CYCLES_PER_STEP / (highest * step_arcsec))
            .floor()
            .max(1.0);
        let interpolator = Interpolator::new(factor as usize);
        let wide_len = interpolator.wide_len(n);
        let wide_step = factor * step_arcsec;
        let origin = optics.edge.inflection_arcsec() + grid.x0_arcsec
            - interpolator.lead() as f64 * wide_step;
        let xs: Vec<f64> = (0..wide_len)
            .map(|i| origin + wide_step * i as f64)
            .collect();
        let reach = xs.iter().fold(1.0_f64, |most, x| most.max(x.abs()));

        let kinks = optics.telescope.kinks_cycles_arcsec(wavelength_m);
        let frequencies = nodes(optics.edge.radius_arcsec, highest, &kinks, reach);
        let table = frequencies.len() as f64 * wide_len as f64;
        within(
            "table of the limb's spectrum",
            table,
            (0.0, LARGEST_TABLE),
            "values",
        )?;
        let channels = frequencies
            .iter()
            .map(|node| {
                let tilt = match optics.exposure {
                    Exposure::Short => {
                        tilt_share(node.f, wavelength_m, optics.telescope.aperture_m)
                    }
                    Exposure::Long => 0.0,
                };
                Channel {
                    f_cycles_arcsec: node.f,
                    telescope: optics.telescope.transfer(node.f, wavelength_m),
                    air: air_exponent(node.f, wavelength_m, tilt),
                }
            })
            .collect();
        Ok(Self {
            grid,
            pixel,
            unlimited,
            channels,
            weights: weights(&optics.edge, &frequencies, &xs),
            wide_len,
            interpolator,
        })
    }

    /// Where the values of the profiles lie.
    pub fn grid(&self) -> Grid {
        self.grid
    }

    /// The profile, in units of the unblurred disk's centre, for a limb whose normal stands at an angle
    /// from a side of the pixel. Not-a-number throughout for a blur that fails [`Blur::check`] or that
    /// is too narrow for a table without a telescope.
    pub fn profile(&self, blur: &Blur, pixel_angle_rad: f64) -> Vec<f64> {
        let transfer = self.transfer(blur, pixel_angle_rad);
        let left_over = transfer
            .last()
            .is_some_and(|it| it.0.abs() > UNLIMITED_REMAINDER);
        if blur.check().is_err() || (self.unlimited && left_over) {
            return vec![f64::NAN; self.grid.n];
        }
        let used = transfer
            .iter()
            .rposition(|it| it.0.abs() + it.1.abs() > NEGLIGIBLE_TRANSFER)
            .map_or(0, |last| last + 1);
        let mut wide = vec![0.0; self.wide_len];
        let weighted = self.weights.radial.chunks_exact(self.wide_len);
        if self.pixel.is_point() {
            for (&(t, _), radial) in transfer[..used].iter().zip(weighted) {
                for (value, r) in wide.iter_mut().zip(radial) {
                    *value += t * r;
                }
            }
        } else {
            let bent = self.weights.across.chunks_exact(self.wide_len);
            for ((&(t, bend), radial), across) in transfer[..used].iter().zip(weighted).zip(bent) {
                for ((value, r), a) in wide.iter_mut().zip(radial).zip(across) {
                    *value += t * r + bend * a;
                }
            }
        }
        self.interpolator.apply(&wide, self.grid.n)
    }

    /// The whole transfer function at the frequencies of the table, and what its second derivative
    /// across the limb's normal has more than that of a function of `f` alone.
    fn transfer(&self, blur: &Blur, pixel_angle_rad: f64) -> Vec<(f64, f64)> {
        let air = blur.r0_m.powf(-5.0 / 3.0);
        let jitter = 2.0 * (PI * blur.gaussian_sigma_arcsec).powi(2);
        let [p, q] = self.pixel.sides_arcsec;
        let (sin, cos) = pixel_angle_rad.sin_cos();
        let (lean_sin, lean_cos) = (pixel_angle_rad - self.pixel.lean_rad).sin_cos();
        self.channels
            .iter()
            .map(|it| {
                let f = it.f_cycles_arcsec;
                let round = it.telescope * (-it.air * air - jitter * f * f).exp();
                let [g_a, d_a, dd_a] = sinc(f * p * cos);
                let [g_b, d_b, dd_b] = sinc(f * q * lean_sin);
                let second = p * p * sin * sin * dd_a * g_b
                    - 2.0 * p * q * sin * lean_cos * d_a * d_b
                    + q * q * lean_cos * lean_cos * g_a * dd_b;
                let first = p * cos * d_a * g_b + q * lean_sin * g_a * d_b;
                (round * g_a * g_b, round * (second - first / f))
            })
            .collect()
    }
}

/// `sin(pi a) / (pi a)` and its first two derivatives.
fn sinc(a: f64) -> [f64; 3] {
    let z = PI * a;
    let z2 = z * z;
    let [value, first, second] = if z2 < 0.01 {
        [
            1.0 - z2 / 6.0 * (1.0 - z2 / 20.0 * (1.0 - z2 / 42.0)),
            -z / 3.0 * (1.0 - z2 / 10.0 * (1.0 - z2 / 28.0)),
            -1.0 / 3.0 * (1.0 - z2 * 0.3 * (1.0 - z2 * 5.0 / 84.0)),
        ]
    } else {
        let (sin, cos) = z.sin_cos();
        let value = sin / z;
        let first = (cos - value) / z;
        [value, first, -value - 2.0 * first / z]
    };
    [value, PI * first, PI * PI * second]
}
