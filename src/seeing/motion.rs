//! Fried's parameter from the motion of the limb.
//!
//! # Model
//!
//! The power of the harmonics m >= 2 of all sequences is explained by the layers of
//! [`ProfilePrior`], whose heights and strengths are free within it, one outer scale
//! and one strength for each sequence (`fit`). The answer is the mean over outer scales, each
//! weighted by its evidence (`posterior`); the spread is in sigma. m = 1 is never used: it holds
//! the telescope's shake.
//!
//! ```text
//! r0 = [ mean over frames of sum_i J_i s_k ]^(-3/5)        500 nm, zenith
//! systematic: change of ln r0 when the tilt's mixture and the wind move by one sigma
//! ```
//!
//! # Valid for
//!
//! Full limbs; zenith distances to 80 degrees (above 75 with a warning); r0 from 1 to 50 cm.
//! Turbulence nearer than some 4 m is not seen.
//!
//! # Accuracy
//!
//! Simulated sessions of 480 frames at 0.10 to 0.30 m, five kinds of site, 200 of each: mean of r0
//! over truth 0.95 to 1.07, scatter 3 to 6 percent about it, pulls of rms 0.6 to 1.05. The ends are
//! sites with next to no, or with 40 percent, of their turbulence at 8 m; apertures of 0.3 m do
//! worst (0.93 to 1.11). Twenty sessions are in `tests/published/motion_sessions.rs`. Twenty-one
//! sessions of an independent forward model, 160 or 500 frames each, 3 to 20 cm: mean 1.026 +- 0.014 of
//! the truth, scatter 6 percent, no trend with r0 (`tests/campaigns/seeing_reach.py`).
//!
//! # Source
//!
//! Layers from displacements on the Sun: G. B. Scharmer and T. I. M. van Werkhoven, Astron.
//! Astrophys. 513, A25 (2010), abstract; the harmonics' statistics are derived in `turbulence`.

use super::error::{SeeingError, checked};
use super::fit::{LEAST_HEIGHT_M, MOST_HEIGHT_M};
use super::harmonics::HarmonicSeries;
use super::session::Session;
use super::{Profile, ProfilePrior};
use crate::turbulence::Aperture;

/// The instrument, and what is assumed of the air.
#[derive(Clone, Debug, PartialEq)]
pub struct Setup {
    /// Aperture of the telescope.
    pub aperture: Aperture,
    /// Wavelength at which the width of the seeing disk is quoted.
    pub wavelength_nm: f64,
    /// Share of the Zernike tilt in what the edge estimator follows; 0 for a centroid.
    pub zernike_share: f64,
    /// Its standard deviation: a systematic.
    pub zernike_share_sigma: f64,
    /// Wind speed in the layers, for the loss by exposure.
    pub wind_m_s: f64,
    /// Its standard deviation: a systematic.
    pub wind_sigma_m_s: f64,
    /// Whether the mean radius, m = 0, is stable enough to be used.
    pub use_mean_radius: bool,
    /// Highest harmonic used.
    pub m_max: usize,
    /// What is assumed of the profile.
    pub prior: ProfilePrior,
}

impl Setup {
    /// Settings for a template fit of the edge (a Zernike share of 0.3 +- 0.15) and an unknown wind
    /// of 10 +- 5 m/s.
    pub fn new(aperture: Aperture, wavelength_nm: f64) -> Self {
        Self {
            aperture,
            wavelength_nm,
            zernike_share: 0.3,
            zernike_share_sigma: 0.15,
            wind_m_s: 10.0,
            wind_sigma_m_s: 5.0,
            use_mean_radius: false,
            m_max: 30,
            prior: ProfilePrior::default(),
        }
    }

    /// Refuses numbers that cannot be used.
    pub(super) fn checked(&self) -> Result<(), SeeingError> {
        checked("highest harmonic", self.m_max as f64, (6.0, 200.0), "")?;
        checked("wind speed", self.wind_m_s, (0.0, 100.0), "m/s")?;
        checked(
            "sigma of the wind speed",
            self.wind_sigma_m_s,
            (0.0, 100.0),
            "m/s",
        )?;
        checked(
            "sigma of the Zernike share",
            self.zernike_share_sigma,
            (0.0, 0.5),
            "",
        )?;
        let prior = &self.prior;
        checked(
            "number of layers",
            prior.layers.len() as f64,
            (1.0, 8.0),
            "",
        )?;
        checked(
            "number of outer scales",
            prior.outer_scales_m.len() as f64,
            (1.0, 50.0),
            "",
        )?;
        checked(
            "sigma of ln strength by sequence",
            prior.sequence_sigma_ln,
            (1e-3, 3.0),
            "",
        )?;
        for layer in &prior.layers {
            checked(
                "height of a layer",
                layer.height_m,
                (LEAST_HEIGHT_M, MOST_HEIGHT_M),
                "m",
            )?;
            checked("sigma of ln height", layer.height_sigma_ln, (1e-3, 3.0), "")?;
            checked("share of a layer", layer.share, (1e-6, 1.0), "")?;
            checked("sigma of ln share", layer.share_sigma_ln, (1e-3, 3.0), "")?;
        }
        for &(_, weight) in &prior.outer_scales_m {
            checked(
                "weight of an outer scale",
                weight,
                (f64::MIN_POSITIVE, 1e6),
                "",
            )?;
        }
        Ok(())
    }
}

/// One sequence's own seeing.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct SequenceSeeing {
    /// Fried's parameter along the line of sight, 500 nm.
    pub r0_los_500nm_m: f64,
    /// Its standard deviation, what all sequences share included.
    pub r0_los_sigma_m: f64,
    /// Relative standard deviation of this sequence against the others.
    pub relative_sigma: f64,
    /// Relative variance of the turbulence's strength from frame to frame.
    pub flicker_variance: f64,
}

/// Power of one harmonic, all sequences together.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct PowerRow {
    /// Harmonic.
    pub m: usize,
    /// Observed variance of one coefficient, noise included.
    pub observed_mas2: f64,
    /// Modelled.
    pub modelled_mas2: f64,
    /// Standard deviation of the observed, from the model.
    pub sigma_mas2: f64,
    /// Noise known beforehand.
    pub noise_mas2: f64,
    /// Effective number of frames.
    pub n_effective: f64,
}

/// The seeing by the limb's motion.
#[derive(Clone, Debug, PartialEq)]
pub struct MotionSeeing {
    /// Fried's parameter at the zenith, 500 nm, of the mean strength over all frames.
    pub r0_zenith_500nm_m: f64,
    /// Half the width of its 68 percent interval, systematics included.
    pub r0_zenith_sigma_m: f64,
    /// 68 percent interval.
    pub r0_zenith_interval_68_m: (f64, f64),
    /// 95 percent interval.
    pub r0_zenith_interval_95_m: (f64, f64),
    /// Fried's parameter along the line of sight, 500 nm, of the mean strength over all frames.
    pub r0_los_500nm_m: f64,
    /// Half the width of its 68 percent interval, systematics included.
    pub r0_los_sigma_m: f64,
    /// Part of the relative error of r0 that more frames do not lower: tilt and wind.
    pub systematic_relative_sigma: f64,
    /// The single most probable profile; its r0 differs from the mean within the error.
    pub profile: Profile,
    /// Outer scale, where the data tell it.
    pub outer_scale_m: Option<f64>,
    /// Why there is no outer scale, or how it was found.
    pub outer_scale_reason: String,
    /// Mean height weighted by turbulence and height to the power 5/3, where known to a factor of
    /// two.
    pub height_proxy_m: Option<f64>,
    /// White noise found beyond the known.
    pub extra_noise_mas2: f64,
    /// Width of the long-exposure disk at the set wavelength along the line of sight.
    pub fwhm_arcsec: f64,
    /// Coherence time along the line of sight at 500 nm, with the wind assumed.
    pub coherence_time_s: f64,
    /// Each sequence's own seeing.
    pub sequences: Vec<SequenceSeeing>,
    /// Power by harmonic.
    pub power: Vec<PowerRow>,
    /// Chi-square of the most probable profile.
    pub chi2: f64,
    /// Data less parameters the data determine.
    pub degrees_of_freedom: f64,
    /// What the reader must know.
    pub warnings: Vec<String>,
}

/// Seeing from the harmonics of the limb's motion, all sequences together.
///
/// # Errors
///
/// [`SeeingError`] for too little data, unlike lengths, values out of range, no motion above the
/// noise, or a fit that does not come to rest.
pub fn by_motion(
    series: &[HarmonicSeries<'_>],
    setup: &Setup,
) -> Result<MotionSeeing, SeeingError> {
    if series.is_empty() {
        return Err(SeeingError::NoSequence);
    }
    let session = Session::observe(series, setup)?;
    let central = session.solve(setup.zernike_share, setup.wind_m_s)?;
    let mut systematic2 = 0.0;
    if setup.zernike_share_sigma > 0.0 {
        let share = setup.zernike_share + setup.zernike_share_sigma;
        systematic2 += session.moved(&central, share, setup.wind_m_s)?.powi(2);
    }
    let exposed = series.iter().any(|it| it.exposure_s > 0.0);
    if setup.wind_sigma_m_s > 0.0 && exposed {
        let wind_m_s = setup.wind_m_s + setup.wind_sigma_m_s;
        systematic2 += session
            .moved(&central, setup.zernike_share, wind_m_s)?
            .powi(2);
    }
    session.answer(series, &central, systematic2.sqrt())
}
