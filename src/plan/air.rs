//! The turbulence a plan stands on, and what it does to the limb of a frame.

use super::PlanError;
use crate::air::BandInAir;
use crate::pipeline::ahead::Ahead;
use crate::seeing::{
    Layer, LayerPrior, Profile, ProfilePrior, Setup, View, coherence_time_s,
    floor_correlation_time_s, floor_variance_mas2, fwhm_arcsec, r0_at_wavelength_m,
    r0_line_of_sight_m,
};
use crate::session::{Camera, Session};
use crate::shape;
use crate::turbulence::{Aperture, Tilt};
use crate::units::{ARCSEC_RAD, FWHM_PER_SIGMA};

/// Typical Fried's parameter of a mountain station by day, 500 nm, zenith: common practice, no source.
pub const TYPICAL_R0_M: f64 = 0.06;

/// Typical outer scale: the middle of the prior's, see [`ProfilePrior`].
const OUTER_SCALE_M: f64 = 20.0;

/// Exposure a plan reckons with, s: short enough to freeze the image on most days.
pub(super) const EXPOSURE_S: f64 = 0.002;

/// The turbulence above the station.
#[derive(Clone, Debug, PartialEq)]
pub struct Seeing {
    /// Layers and outer scale.
    pub profile: Profile,
    /// Fried's parameter of all layers, 500 nm, zenith, by the mean strength.
    pub r0_m: f64,
    /// Wind in the layers.
    pub wind_m_s: f64,
    /// Standard deviation of the logarithm of Fried's parameter from frame to frame, by which frames will be
    /// weighed; 0 where it is not known: then nothing is promised for it.
    pub flicker_ln: f64,
    /// Whether the strength was given.
    pub given: bool,
}

/// Places and weights of three points that stand for a normal distribution of unit width (Hermite).
const THREE: [(f64, f64); 3] = [
    (-1.732_050_807_568_877_2, 1.0 / 6.0),
    (0.0, 2.0 / 3.0),
    (1.732_050_807_568_877_2, 1.0 / 6.0),
];

impl Seeing {
    /// Turbulence of a given strength, layered as daytime turbulence is before anything is measured: the
    /// mean over the prior's heights and shares. Without a strength, of a typical one.
    pub fn typical(r0_m: Option<f64>) -> Self {
        let strength_m = r0_m.unwrap_or(TYPICAL_R0_M);
        let prior = ProfilePrior::default();
        let mut layers = Vec::new();
        for (layer, mean) in prior.layers.iter().zip(mean_shares(&prior.layers)) {
            for (place, weight) in THREE {
                let share = mean * weight;
                layers.push(Layer {
                    height_m: layer.height_m * (layer.height_sigma_ln * place).exp(),
                    share,
                    r0_zenith_500nm_m: strength_m * share.powf(-0.6),
                });
            }
        }
        layers.sort_by(|a, b| a.height_m.total_cmp(&b.height_m));
        Self {
            profile: Profile {
                layers,
                outer_scale_m: OUTER_SCALE_M,
            },
            r0_m: strength_m,
            wind_m_s: Setup::new(Aperture::clear(1.0), 500.0).wind_m_s,
            flicker_ln: 0.0,
            given: r0_m.is_some(),
        }
    }

    /// Factor on the variance of a mean by weights that follow the flicker. With `s` the standard deviation
    /// of the logarithm of a frame's variance and `e` that of its estimate from the harmonics m = 5 to 30,
    ///
    /// ```text
    /// factor = exp(-s^4 / (s^2 + e^2)),    s = 5/3 sigma(ln r0),    e^2 = 2 / 52
    /// ```
    ///
    /// for log-normal strengths and weights that lean on the mean as they should.
    fn weighing(&self) -> f64 {
        const ESTIMATE: f64 = 2.0 / 52.0;
        let s2 = (5.0 / 3.0 * self.flicker_ln).powi(2);
        (-s2 * s2 / (s2 + ESTIMATE)).exp()
    }
}

/// Mean of each layer's share of the whole.
fn mean_shares(layers: &[LayerPrior]) -> Vec<f64> {
    let mut sums = vec![0.0; layers.len()];
    for node in 0..3_usize.pow(layers.len() as u32) {
        let mut digits = node;
        let mut weight = 1.0;
        let strengths: Vec<f64> = layers
            .iter()
            .map(|it| {
                let (place, own) = THREE[digits % 3];
                digits /= 3;
                weight *= own;
                it.share * (it.share_sigma_ln * place).exp()
            })
            .collect();
        let total: f64 = strengths.iter().sum();
        for (sum, it) in sums.iter_mut().zip(strengths) {
            *sum += weight * it / total;
        }
    }
    sums
}

/// What the air does to one frame: variances of one coefficient, mas^2 at 1 AU, by harmonic.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct FrameNoise {
    /// By turbulence, m = 0 to 4.
    pub(super) turbulence_mas2: [f64; 5],
    /// Correlation time of the same, s.
    pub(super) memory_s: [f64; 5],
    /// By photons and read noise, of one coefficient of m >= 1.
    pub(super) photons_mas2: f64,
    /// Factor on the variance of a mean by weights that follow the flicker.
    weighing: f64,
}

impl FrameNoise {
    /// Variance of one coefficient's mean over frames at even steps: that of a first-order process of the
    /// same correlation time, `coth(step / memory) / n`.
    pub(super) fn of_mean_mas2(&self, m: usize, frames: f64, step_s: f64) -> f64 {
        let photons = self.photons_mas2 * if m == 0 { 0.5 } else { 1.0 };
        let correlated = 1.0 / (step_s / self.memory_s[m]).tanh();
        (self.turbulence_mas2[m] * correlated * self.weighing + photons) / frames
    }
}

/// The noise of a frame at a moment.
pub(super) fn frame_noise(
    session: &Session,
    seeing: &Seeing,
    moment: &Ahead,
) -> Result<FrameNoise, PlanError> {
    let distance_au = moment.sun.distance_au;
    let view = View {
        zenith_rad: moment.sun.zenith_true_rad,
        limb_radius_rad: shape::reference_radius_rad(distance_au),
        sector_rad: std::f64::consts::TAU / session.limb.sectors as f64,
        drift_m: seeing.wind_m_s * EXPOSURE_S,
    };
    let aperture = Aperture {
        diameter_m: session.telescope.aperture_m,
        obstruction: session.telescope.central_obstruction,
    };
    let zernike_share = Setup::new(aperture, session.filter.centre_nm).zernike_share;
    let tilt = Tilt::Between { zernike_share };
    let profile = &seeing.profile;
    let variance = floor_variance_mas2(profile, &aperture, tilt, &view, 4)?;
    let memory = floor_correlation_time_s(profile, &aperture, tilt, &view, seeing.wind_m_s, 4)?;
    let au2 = distance_au * distance_au;
    Ok(FrameNoise {
        turbulence_mas2: std::array::from_fn(|m| variance[m] * au2),
        memory_s: std::array::from_fn(|m| memory[m]),
        photons_mas2: match peak_e(&session.camera) {
            Some(peak_e) => photons_mas2(session, seeing, moment, peak_e)? * au2,
            None => 0.0,
        },
        weighing: seeing.weighing(),
    })
}

/// Part of the saturation at which the disk's brightest pixels are to lie, least and most.
pub(super) const PEAK_SHARE: [f64; 2] = [0.6, 0.8];

/// Brightness just inside the limb over that of the disk's centre.
const LIMB_SHARE: f64 = 0.35;

/// Electrons of the disk's brightest pixels when exposed as advised.
pub(super) fn peak_e(camera: &Camera) -> Option<f64> {
    let middle = 0.5 * (PEAK_SHARE[0] + PEAK_SHARE[1]);
    Some(middle * camera.saturation_adu? * camera.gain_e_adu)
}

/// Variance of one harmonic's coefficient by photons and read noise, mas^2 as seen: the bound of Cramer
/// and Rao for a step of `N` electrons blurred by a Gaussian of `s` pixels, its noise that of half the step,
/// over all rows of pixels round the limb.
///
/// ```text
/// 1 / var(row) = N^2 / [2 sqrt(pi) s (N/2 + read^2)] px^-2      var = 2 var(row) / (2 pi R)
/// ```
fn photons_mas2(
    session: &Session,
    seeing: &Seeing,
    moment: &Ahead,
    peak_e: f64,
) -> Result<f64, PlanError> {
    let camera = &session.camera;
    let scale = camera.scale_arcsec_px;
    let wide = blur_fwhm_arcsec(session, seeing, moment.sun.zenith_true_rad)? / FWHM_PER_SIGMA;
    let sigma_px = ((wide / scale).powi(2) + 1.0 / 12.0).sqrt();
    let edge_e = LIMB_SHARE * peak_e;
    let noise_e2 = 0.5 * edge_e + camera.read_noise_e.powi(2);
    let row_px2 = 2.0 * std::f64::consts::PI.sqrt() * sigma_px * noise_e2 / (edge_e * edge_e);
    let radius_px = shape::reference_radius_rad(moment.sun.distance_au) / ARCSEC_RAD / scale;
    let rows = std::f64::consts::TAU * radius_px;
    Ok(2.0 * row_px2 / rows * (1000.0 * scale).powi(2))
}

/// Full width of the image of a point in a short exposure, about: seeing and diffraction.
pub(super) fn blur_fwhm_arcsec(
    session: &Session,
    seeing: &Seeing,
    zenith_rad: f64,
) -> Result<f64, PlanError> {
    let nm = session.filter.centre_nm;
    let r0_m = r0_at_wavelength_m(r0_line_of_sight_m(seeing.r0_m, zenith_rad)?, nm)?;
    let diffraction = 1.03 * nm * 1e-9 / session.telescope.aperture_m / ARCSEC_RAD;
    Ok(fwhm_arcsec(r0_m, nm, None)?.hypot(diffraction))
}

/// Coherence time at the observing wavelength towards the Sun, s.
pub(super) fn coherence_s(
    session: &Session,
    seeing: &Seeing,
    zenith_rad: f64,
) -> Result<f64, PlanError> {
    let r0_m = r0_line_of_sight_m(seeing.r0_m, zenith_rad)?;
    let there_m = r0_at_wavelength_m(r0_m, session.filter.centre_nm)?;
    Ok(coherence_time_s(there_m, seeing.wind_m_s)?)
}

/// Variance that dispersion over the band adds to the blur along the vertical, arcsec^2.
pub(super) fn smear_arcsec2(band: &BandInAir, moment: &Ahead) -> f64 {
    let refraction_rad = moment.sun.zenith_true_rad - moment.zenith_apparent_rad;
    band.smear(refraction_rad).variance_arcsec2
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Source: shares add up to one; of layers alike each has its part: mathematics.
    #[test]
    fn the_layers_add_up_to_the_strength_given() {
        let seeing = Seeing::typical(Some(0.07));
        let strength: f64 = seeing
            .profile
            .layers
            .iter()
            .map(|it| it.r0_zenith_500nm_m.powf(-5.0 / 3.0))
            .sum();
        assert!((strength.powf(-0.6) / 0.07 - 1.0).abs() < 1e-12);
        let prior = ProfilePrior::default();
        let shares = mean_shares(&prior.layers);
        assert!((shares[0] - shares[1]).abs() < 1e-15 && shares[4] < shares[0]);
    }

    /// Source: variance of the mean of a first-order process, `(1 + rho) / (1 - rho) / n` with
    /// `rho = exp(-2 step / memory)`: any textbook.
    #[test]
    fn frames_close_together_count_less() {
        let noise = FrameNoise {
            turbulence_mas2: [100.0; 5],
            memory_s: [0.5; 5],
            photons_mas2: 0.0,
            weighing: 1.0,
        };
        for step_s in [0.05, 0.5, 5.0] {
            let rho: f64 = (-2.0_f64 * step_s / 0.5).exp();
            let wanted = 100.0 * (1.0 + rho) / (1.0 - rho) / 1000.0;
            let found = noise.of_mean_mas2(2, 1000.0, step_s);
            assert!((found / wanted - 1.0).abs() < 1e-12, "{found} {wanted}");
        }
    }
}
