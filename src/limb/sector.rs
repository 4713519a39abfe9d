//! The fit of one sector: shift, gain, background, its slope, and blur.

use super::geometry::Pixels;
use super::template::Rows;
use super::{Extraction, Flag};
use nalgebra::{SMatrix, SVector};

/// Free parameters: shift, gain, background, slope, blur.
const PARAMETERS: usize = 5;

/// Share of a sector's pixels that must be usable.
const NEEDED_SHARE: f64 = 0.75;

/// A pixel farther off than this many standard deviations, and than [`OUTLIER_SHARE`] of the gain,
/// is a particle hit or a defect.
const OUTLIER_SIGMAS: f64 = 7.0;

/// See [`OUTLIER_SIGMAS`].
const OUTLIER_SHARE: f64 = 0.08;

/// How far the limb may be from where the fit starts: arcsec, and pixels beside.
const FIRST_REACH: (f64, f64) = (3.0, 1.0);

/// As [`OUTLIER_SHARE`], before the first round: the gain is not known yet.
const FIRST_SHARE: f64 = 0.2;

/// Prior width of a sector's blur about the frame's start, as a share of it, and floor in
/// arcsec^(5/3): wide enough to leave a measured blur alone, so that only sectors that cannot tell
/// lean on it.
const BLUR_PRIOR: (f64, f64) = (1.5, 1.5);

/// State of one sector's fit.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Fit {
    /// Limb minus the predicted limb, arcsec.
    pub shift_arcsec: f64,
    /// Its standard uncertainty, arcsec.
    pub shift_sigma_arcsec: f64,
    /// Gain, ADU.
    pub gain_adu: f64,
    /// Background at the limb, ADU.
    pub background_adu: f64,
    /// Its slope, ADU/arcsec.
    pub slope_adu_arcsec: f64,
    /// Blur, arcsec^(5/3).
    pub blur: f64,
    /// Its standard uncertainty.
    pub blur_sigma: f64,
    /// Mean square misfit over its expectation.
    pub misfit: f64,
    /// Whether it can be used.
    pub flag: Flag,
}

impl Fit {
    /// Where every sector starts.
    pub(super) fn start(level_adu: f64, sky_adu: f64, blur: f64) -> Self {
        Self {
            shift_arcsec: 0.0,
            shift_sigma_arcsec: f64::INFINITY,
            gain_adu: level_adu - sky_adu,
            background_adu: sky_adu,
            slope_adu_arcsec: 0.0,
            blur,
            blur_sigma: f64::INFINITY,
            misfit: f64::INFINITY,
            flag: Flag::Good,
        }
    }

    /// Whether a pixel is an outlier wherever within [`FIRST_REACH`] of its start the limb may be:
    /// what a fit that has not begun can say.
    fn beyond_any_limb(
        &self,
        rows: &Rows<'_>,
        (x, value): (f64, f64),
        variance: f64,
        pixel_arcsec: f64,
    ) -> bool {
        let reach = FIRST_REACH.0 + FIRST_REACH.1 * pixel_arcsec;
        let at = |shift: f64| {
            let it = rows.at(x - self.shift_arcsec - shift).value;
            self.gain_adu * it + self.background_adu + self.slope_adu_arcsec * x
        };
        let (bright, dark) = (at(reach), at(-reach));
        let off = if value > bright {
            value - bright
        } else {
            dark - value
        };
        off > FIRST_SHARE * self.gain_adu && off * off > OUTLIER_SIGMAS * OUTLIER_SIGMAS * variance
    }

    /// Gauss-Newton rounds on the gathered pixels.
    pub(super) fn refine(
        &mut self,
        pixels: &Pixels,
        setup: &Extraction<'_>,
        sector: usize,
        rounds: usize,
    ) {
        let usable = pixels.value_adu.len();
        if (usable as f64) < NEEDED_SHARE * pixels.expected as f64 || usable < 2 * PARAMETERS {
            self.flag = Flag::Incomplete;
            return;
        }
        self.flag = Flag::Good;
        let read_adu2 = (setup.detector.read_noise_e / setup.detector.gain_e_adu).powi(2);
        let per_electron = 1.0 / setup.detector.gain_e_adu;
        let pixel_arcsec = setup.annulus.scale_arcsec_px();
        let prior_sigma = BLUR_PRIOR.0 * setup.blur_start.abs() + BLUR_PRIOR.1;
        let mut normal = SMatrix::<f64, PARAMETERS, PARAMETERS>::zeros();
        let mut used = 0_usize;
        let mut chi2 = 0.0;
        for _ in 0..rounds {
            let rows = setup.table.rows(sector, self.blur);
            normal.fill(0.0);
            let mut right = SVector::<f64, PARAMETERS>::zeros();
            used = 0;
            chi2 = 0.0;
            for ((&x, &value), &flat) in pixels
                .x_arcsec
                .iter()
                .zip(&pixels.value_adu)
                .zip(&pixels.flat_inverse)
            {
                let it = rows.at(x - self.shift_arcsec);
                let model =
                    self.gain_adu * it.value + self.background_adu + self.slope_adu_arcsec * x;
                let signal = if model > 0.0 { model } else { 0.0 };
                let variance = flat * (signal * per_electron + flat * read_adu2);
                let residual = value - model;
                if !self.shift_sigma_arcsec.is_finite()
                    && self.beyond_any_limb(&rows, (x, value), variance, pixel_arcsec)
                {
                    continue;
                }
                if residual * residual > OUTLIER_SIGMAS * OUTLIER_SIGMAS * variance
                    && residual.abs() > OUTLIER_SHARE * self.gain_adu.abs()
                    && self.shift_sigma_arcsec.is_finite()
                {
                    continue;
                }
                let w = 1.0 / variance;
                let row = [
                    -self.gain_adu * it.slope,
                    it.value,
                    1.0,
                    x,
                    self.gain_adu * it.by_blur,
                ];
                for i in 0..PARAMETERS {
                    let wi = w * row[i];
                    right[i] += wi * residual;
                    for j in i..PARAMETERS {
                        normal[(i, j)] += wi * row[j];
                    }
                }
                used += 1;
                chi2 += w * residual * residual;
            }
            for i in 0..PARAMETERS {
                for j in 0..i {
                    normal[(i, j)] = normal[(j, i)];
                }
            }
            let lean = 1.0 / (prior_sigma * prior_sigma);
            normal[(4, 4)] += lean;
            right[4] += lean * (setup.blur_start - self.blur);
            let Some(cholesky) = normal.cholesky() else {
                self.flag = Flag::Misfit;
                return;
            };
            let step = cholesky.solve(&right);
            let largest = setup.table.largest_blur();
            self.shift_arcsec += step[0].clamp(-3.0, 3.0);
            self.gain_adu += step[1];
            self.background_adu += step[2];
            self.slope_adu_arcsec += step[3];
            self.blur = (self.blur + step[4]).clamp(-largest, largest);
            self.shift_sigma_arcsec = 0.0; // only now are outliers judged
        }
        let Some(inverse) = normal.try_inverse() else {
            self.flag = Flag::Misfit;
            return;
        };
        self.misfit = chi2 / (used as f64 - PARAMETERS as f64);
        self.shift_sigma_arcsec = inverse[(0, 0)].sqrt();
        self.blur_sigma = inverse[(4, 4)].sqrt();
        let enough = used as f64 >= NEEDED_SHARE * pixels.expected as f64;
        let limb = setup.annulus.scale_arcsec_px().mul_add(2.0, 6.0);
        if !(enough
            && self.gain_adu > 0.0
            && self.shift_arcsec.abs() < limb
            && self.shift_sigma_arcsec.is_finite())
        {
            self.flag = Flag::Misfit;
        }
    }
}
