//! Tables of the blurred limb by sector direction, blur and distance, made once a sequence.

use crate::optics::OpticsError;
use crate::optics::limb_profile::{Blur, LimbOptics, PixelBox, ProfileMaker};
use rayon::prelude::*;
use std::f64::consts::{FRAC_PI_2, PI};

/// The steps of the table in seeing width `lambda / r0`, arcsec. Dense where the limb changes fast.
const WIDTHS_ARCSEC: [f64; 40] = [
    0.0, 0.15, 0.25, 0.35, 0.45, 0.55, 0.65, 0.75, 0.85, 0.95, 1.05, 1.15, 1.3, 1.45, 1.6, 1.75,
    1.9, 2.1, 2.3, 2.5, 2.75, 3.0, 3.25, 3.5, 3.8, 4.1, 4.5, 4.9, 5.4, 5.9, 6.5, 7.1, 7.8, 8.6,
    9.5, 10.5, 11.6, 12.8, 14.2, 16.0,
];

/// The blurred limb as a function of distance and blur, by direction of the pixel grid.
#[derive(Clone, Debug)]
pub struct EdgeTable {
    /// One table a class of directions: `[class][blur][distance]`, flattened.
    values: Vec<Vec<f32>>,
    class_of_sector: Vec<usize>,
    blurs: Vec<f64>,
    points: usize,
    x0_arcsec: f64,
    inverse_step: f64,
}

/// Two neighbouring rows of the table and where between them a blur lies.
#[derive(Clone, Copy, Debug)]
pub(super) struct Rows<'a> {
    low: &'a [f32],
    high: &'a [f32],
    share: f64,
    inverse_gap: f64,
    x0_arcsec: f64,
    inverse_step: f64,
}

/// The template and its derivatives at one distance.
#[derive(Clone, Copy, Debug)]
pub(super) struct Sample {
    pub(super) value: f64,
    pub(super) slope: f64,
    pub(super) by_blur: f64,
}

impl Rows<'_> {
    /// Value, derivative by distance and by blur; beyond the table's ends the last value holds.
    #[inline(always)]
    pub(super) fn at(&self, x_arcsec: f64) -> Sample {
        let last = self.low.len() - 2;
        let u =
            ((x_arcsec - self.x0_arcsec) * self.inverse_step).clamp(0.0, last as f64 + 0.999_999);
        let i = u as usize;
        let f = u - i as f64;
        let (a0, a1) = (f64::from(self.low[i]), f64::from(self.low[i + 1]));
        let (b0, b1) = (f64::from(self.high[i]), f64::from(self.high[i + 1]));
        let low = a0 + f * (a1 - a0);
        let high = b0 + f * (b1 - b0);
        let slope = (a1 - a0) + self.share * ((b1 - b0) - (a1 - a0));
        Sample {
            value: low + self.share * (high - low),
            slope: slope * self.inverse_step,
            by_blur: (high - low) * self.inverse_gap,
        }
    }
}

/// Blur `J` of a seeing width `lambda / r0`.
pub fn blur_of_width(width_arcsec: f64) -> f64 {
    width_arcsec.powf(5.0 / 3.0)
}

/// Seeing width of a blur, arcsec; zero for a blur that noise made negative.
pub fn width_of_blur_arcsec(blur: f64) -> f64 {
    if blur > 0.0 { blur.powf(0.6) } else { 0.0 }
}

impl EdgeTable {
    /// Makes the tables for sectors whose middles stand at `angles_rad` on the detector.
    ///
    /// # Errors
    ///
    /// When the optics has no profile there (wavelength outside the limb-darkening law).
    pub fn new(
        optics: &LimbOptics,
        gaussian_sigma_arcsec: f64,
        pixel_arcsec: f64,
        angles_rad: &[f64],
    ) -> Result<Self, OpticsError> {
        let pixel = PixelBox::square(pixel_arcsec);
        Self::made(
            optics,
            gaussian_sigma_arcsec,
            pixel,
            angles_rad,
            folded_rad,
            &WIDTHS_ARCSEC,
        )
    }

    /// The tables for one blur alone.
    ///
    /// # Errors
    ///
    /// As [`EdgeTable::new`].
    pub fn of_blur(
        optics: &LimbOptics,
        gaussian_sigma_arcsec: f64,
        pixel_arcsec: f64,
        angles_rad: &[f64],
        blur: f64,
    ) -> Result<Self, OpticsError> {
        let width = width_of_blur_arcsec(blur);
        Self::made(
            optics,
            gaussian_sigma_arcsec,
            PixelBox::square(pixel_arcsec),
            angles_rad,
            folded_rad,
            &[width, width + 0.01],
        )
    }

    /// The same for a pixel that is no square; the angles count from its first side.
    ///
    /// # Errors
    ///
    /// As [`EdgeTable::new`].
    pub fn for_pixel(
        optics: &LimbOptics,
        pixel: PixelBox,
        angles_rad: &[f64],
    ) -> Result<Self, OpticsError> {
        // Half a turn changes nothing, whatever the box.
        let folded = |angle: f64| (angle.rem_euclid(PI) * 1e7).round() / 1e7;
        Self::made(optics, 0.0, pixel, angles_rad, folded, &WIDTHS_ARCSEC)
    }

    fn made(
        optics: &LimbOptics,
        gaussian_sigma_arcsec: f64,
        pixel: PixelBox,
        angles_rad: &[f64],
        fold: impl Fn(f64) -> f64,
        widths_arcsec: &[f64],
    ) -> Result<Self, OpticsError> {
        let [p, q] = pixel.sides_arcsec;
        let (largest, smallest) = if p > q { (p, q) } else { (q, p) };
        let span_arcsec = (7.0 * largest).clamp(24.0, 90.0);
        let step_arcsec = (smallest / 64.0).clamp(0.008, 0.04);
        let maker = ProfileMaker::for_pixel(optics, span_arcsec, step_arcsec, pixel)?;
        let mut classes: Vec<f64> = Vec::new();
        let class_of_sector = angles_rad
            .iter()
            .map(|&angle| {
                let folded = fold(angle);
                classes
                    .iter()
                    .position(|it| (it - folded).abs() < 1e-6)
                    .unwrap_or_else(|| {
                        classes.push(folded);
                        classes.len() - 1
                    })
            })
            .collect();
        let wavelength_m = optics.wavelength_nm * 1e-9;
        let values = classes
            .par_iter()
            .map(|&angle| {
                widths_arcsec
                    .iter()
                    .flat_map(|&width| {
                        let r0_m = if width > 0.0 {
                            wavelength_m / (width * crate::units::ARCSEC_RAD)
                        } else {
                            f64::INFINITY
                        };
                        let blur = Blur {
                            r0_m,
                            gaussian_sigma_arcsec,
                        };
                        maker.profile(&blur, angle).into_iter().map(|it| it as f32)
                    })
                    .collect()
            })
            .collect();
        let grid = maker.grid();
        Ok(Self {
            values,
            class_of_sector,
            blurs: widths_arcsec.iter().map(|&it| blur_of_width(it)).collect(),
            points: grid.n,
            x0_arcsec: grid.x0_arcsec,
            inverse_step: 1.0 / grid.step_arcsec,
        })
    }

    /// The rows about a blur for one sector. Below zero and above the table the last pair of rows is
    /// carried on in a straight line.
    pub(super) fn rows(&self, sector: usize, blur: f64) -> Rows<'_> {
        let k = self
            .blurs
            .partition_point(|&it| it <= blur)
            .clamp(1, self.blurs.len() - 1)
            - 1;
        let gap = self.blurs[k + 1] - self.blurs[k];
        let table = &self.values[self.class_of_sector[sector]];
        Rows {
            low: &table[k * self.points..(k + 1) * self.points],
            high: &table[(k + 1) * self.points..(k + 2) * self.points],
            share: (blur - self.blurs[k]) / gap,
            inverse_gap: 1.0 / gap,
            x0_arcsec: self.x0_arcsec,
            inverse_step: self.inverse_step,
        }
    }

    /// The template at a distance from the limb, in units of disk centre.
    pub fn value(&self, sector: usize, blur: f64, x_arcsec: f64) -> f64 {
        self.rows(sector, blur).at(x_arcsec).value
    }

    /// Largest blur of the table.
    pub fn largest_blur(&self) -> f64 {
        self.blurs[self.blurs.len() - 1]
    }
}

/// A direction folded into the eighth of a turn in which a square pixel differs.
fn folded_rad(angle_rad: f64) -> f64 {
    let quarter = angle_rad.rem_euclid(FRAC_PI_2);
    let folded = if quarter > FRAC_PI_2 / 2.0 {
        FRAC_PI_2 - quarter
    } else {
        quarter
    };
    (folded * 1e7).round() / 1e7
}
