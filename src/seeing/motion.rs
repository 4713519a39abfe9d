//! Fried's parameter from the motion of the limb.
//!
//! # Model
//!
//! The power of the harmonics m >= 2 of all sequences is explained by the layers of
//! [`ProfilePrior`](super::ProfilePrior), whose heights and strengths are free within it, one outer scale
//! and one strength for each sequence (`fit`). The answer is the mean over outer scales, each weighted by
//! its evidence (`posterior`); the spread is in sigma. m = 1 is never used: it holds the telescope's shake.
//!
//! ```text
//! r0 = [ mean over frames of sum_i J_i s_k ]^(-3/5)        500 nm, zenith
//! systematic: change of ln r0 when the tilt's mixture and the wind move by one sigma
//! ```
//!
//! # Valid for
//!
//! Full limbs; zenith distances to 80 degrees (above 75 with a warning); r0 from 1 to 50 cm. Turbulence
//! nearer than some 4 m is not seen.
//!
//! # Accuracy
//!
//! Monte Carlo over random sites, apertures and profiles in `tests/published/motion_sessions.rs`.
//!
//! # Source
//!
//! Layers from displacements on the Sun: G. B. Scharmer and T. I. M. van Werkhoven, Astron. Astrophys.
//! 513, A25 (2010), abstract; the harmonics' statistics are derived in `turbulence`.

use super::convert::{coherence_time_s, fwhm_arcsec, r0_at_wavelength_m};
use super::error::{SeeingError, checked};
use super::fit::{LEAST_HEIGHT_M, MOST_HEIGHT_M, Observed, Problem, Solution};
use super::floor::sector_window;
use super::harmonics::{HarmonicSeries, harmonic_power};
use super::posterior::{Mixture, log_strength, weights};
use super::{Layer, Profile, ProfilePrior};
use crate::turbulence::{Aperture, KernelTable, Tilt};
use crate::units::DEG_RAD;

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
    /// Settings for a template fit of the edge (a Zernike share of 0.3 +- 0.15) and an unknown wind of
    /// 10 +- 5 m/s.
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
    /// Mean height weighted by turbulence and height to the power 5/3, where known to a factor of two.
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
/// [`SeeingError`] for too little data, unlike lengths, values out of range, no motion above the noise,
/// or a fit that does not come to rest.
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
    session.report(series, setup, &central, systematic2.sqrt())
}

/// What was observed, in the form of the fit.
struct Session<'a> {
    setup: &'a Setup,
    sequences: Vec<Observed>,
    exposures_s: Vec<f64>,
    n_effective: Vec<Vec<f64>>,
    flicker: Vec<f64>,
    frames: Vec<f64>,
    orders: Vec<usize>,
    extra_noise_mas2: f64,
}

/// The posterior.
struct Posterior {
    solutions: Vec<Solution>,
    weights: Vec<f64>,
    zenith: Mixture,
    sight: Mixture,
    /// `ln r0` of each sequence along the sight, and its strength relative to the common profile.
    each: Vec<(Mixture, Mixture)>,
}

impl Posterior {
    /// The most probable outer scale's solution.
    fn best(&self) -> usize {
        let by_weight = self
            .weights
            .iter()
            .enumerate()
            .max_by(|a, b| a.1.total_cmp(b.1));
        by_weight.map_or(0, |it| it.0)
    }
}

impl<'a> Session<'a> {
    fn observe(series: &[HarmonicSeries<'_>], setup: &'a Setup) -> Result<Self, SeeingError> {
        checked("wind speed", setup.wind_m_s, (0.0, 100.0), "m/s")?;
        let orders: Vec<usize> = (0..=setup.m_max)
            .filter(|&m| m >= 2 || (m == 0 && setup.use_mean_radius))
            .collect();
        let mut exposures_s: Vec<f64> = Vec::new();
        let (mut sequences, mut n_effective, mut flicker, mut frames) =
            (Vec::new(), Vec::new(), Vec::new(), Vec::new());
        let (mut seen, mut noise_sum, mut least_power) = (0.0, 0.0, f64::INFINITY);
        for (k, it) in series.iter().enumerate() {
            let power = harmonic_power(k, it)?;
            let top = power.power_mas2.len() - 1;
            if top < setup.m_max {
                let wanted = "as many as the set-up's m_max";
                return Err(SeeingError::Harmonics {
                    sequence: k,
                    found: top,
                    wanted,
                });
            }
            let zenith = checked("zenith distance", it.zenith_rad, ZENITH_RAD, "rad")?;
            let radius = checked("limb radius", it.limb_radius_rad, (1e-4, 0.1), "rad")?;
            let sector = checked("sector width", it.sector_rad, (0.0, 0.2), "rad")?;
            let exposure_s = checked("exposure", it.exposure_s, (0.0, 1.0), "s")?;
            let like = exposures_s
                .iter()
                .position(|e| (e - exposure_s).abs() <= 0.01 * exposure_s);
            let table = like.unwrap_or_else(|| {
                exposures_s.push(exposure_s);
                exposures_s.len() - 1
            });
            for &m in &orders {
                let p = power.power_mas2[m];
                let noise = it.noise_variance_mas2[m];
                checked("noise variance", noise, (0.0, 1e12), "mas^2")?;
                checked("power of a harmonic", p, (f64::MIN_POSITIVE, 1e14), "mas^2")?;
                seen += p;
                noise_sum += noise;
                least_power = least_power.min(p);
            }
            sequences.push(Observed {
                power_mas2: power.power_mas2,
                degrees_of_freedom: power.degrees_of_freedom,
                noise_mas2: it.noise_variance_mas2.to_vec(),
                window: (0..=setup.m_max)
                    .map(|m| sector_window(m, sector))
                    .collect(),
                air_mass: zenith.cos().recip(),
                limb_radius_rad: radius,
                table,
            });
            n_effective.push(power.n_effective);
            flicker.push(power.flicker_variance);
            frames.push(it.time_s.len() as f64);
        }
        if seen <= 1.05 * noise_sum {
            let (found_mas2, noise_mas2) = (seen, noise_sum);
            return Err(SeeingError::NoMotion {
                found_mas2,
                noise_mas2,
            });
        }
        let mean_noise = noise_sum / (orders.len() * series.len()) as f64;
        // Some per cent of the known noise, and never nothing: the logarithm needs a place to be.
        let extra_noise_mas2 = 0.03 * mean_noise + 1e-3 * least_power;
        Ok(Self {
            setup,
            sequences,
            exposures_s,
            n_effective,
            flicker,
            frames,
            orders,
            extra_noise_mas2,
        })
    }

    /// The kernels for each exposure.
    fn tables(
        &self,
        outer_scales_m: &[f64],
        zernike_share: f64,
        wind_m_s: f64,
    ) -> Result<Vec<KernelTable>, SeeingError> {
        let reach = |sign: f64| {
            self.sequences
                .iter()
                .map(|it| sign * it.air_mass * it.limb_radius_rad)
                .fold(f64::NEG_INFINITY, f64::max)
        };
        let range_m = (-reach(-1.0) * LEAST_HEIGHT_M, reach(1.0) * MOST_HEIGHT_M);
        let tilt = Tilt::Between { zernike_share };
        let (aperture, m_max) = (&self.setup.aperture, self.setup.m_max);
        let build = |exposure_s: &f64| {
            let drift_m = wind_m_s * exposure_s;
            KernelTable::build(aperture, tilt, outer_scales_m, range_m, m_max, drift_m)
        };
        Ok(self
            .exposures_s
            .iter()
            .map(build)
            .collect::<Result<_, _>>()?)
    }

    fn problem<'b>(&'b self, tables: &'b [KernelTable]) -> Problem<'b> {
        Problem {
            sequences: &self.sequences,
            tables,
            prior: &self.setup.prior,
            orders: &self.orders,
            extra_noise_mas2: self.extra_noise_mas2,
        }
    }

    /// Change of `ln r0` at the most probable outer scale when the tilt and the wind are these.
    fn moved(
        &self,
        central: &Posterior,
        zernike_share: f64,
        wind_m_s: f64,
    ) -> Result<f64, SeeingError> {
        let best = &central.solutions[central.best()];
        let scale_m = self.setup.prior.outer_scales_m[best.outer_scale_index].0;
        let tables = self.tables(&[scale_m], zernike_share, wind_m_s)?;
        let problem = self.problem(&tables);
        let found = problem
            .solve(0, best.parameters.clone())?
            .ok_or(SeeingError::NotConverged { starts: 1 })?;
        let strength = |it: &Solution| {
            let layers = self.setup.prior.layers.len();
            log_strength(it, layers, &self.frame_shares(), |k| problem.sequence_at(k)).0
        };
        Ok(-0.6 * (strength(&found) - strength(best)))
    }

    /// Each sequence's share of all frames.
    fn frame_shares(&self) -> Vec<f64> {
        let total: f64 = self.frames.iter().sum();
        self.frames.iter().map(|it| it / total).collect()
    }

    fn solve(&self, zernike_share: f64, wind_m_s: f64) -> Result<Posterior, SeeingError> {
        let prior = &self.setup.prior;
        let scales: Vec<f64> = prior.outer_scales_m.iter().map(|it| it.0).collect();
        let tables = self.tables(&scales, zernike_share, wind_m_s)?;
        let problem = self.problem(&tables);
        let mut solutions: Vec<Solution> = Vec::with_capacity(scales.len());
        for index in 0..scales.len() {
            // The neighbour's solution is nearer than the prior.
            let start = match solutions.last() {
                Some(it) => it.parameters.clone(),
                None => problem.start(index)?,
            };
            if let Some(found) = problem.solve(index, start)? {
                solutions.push(found);
            }
        }
        if solutions.is_empty() {
            return Err(SeeingError::NotConverged {
                starts: scales.len(),
            });
        }
        let weights = weights(&solutions, &prior.outer_scales_m);
        let mixture = |shares: &[f64]| {
            let parts = solutions.iter().zip(&weights).map(|(it, &w)| {
                let (mean, sigma) =
                    log_strength(it, prior.layers.len(), shares, |k| problem.sequence_at(k));
                (w, -0.6 * mean, 0.6 * sigma)
            });
            Mixture::new(parts.collect())
        };
        let at_zenith = self.frame_shares();
        let along: Vec<f64> = at_zenith
            .iter()
            .zip(&self.sequences)
            .map(|(f, it)| f * it.air_mass)
            .collect();
        let each = (0..self.sequences.len())
            .map(|k| {
                let mut alone = vec![0.0; self.sequences.len()];
                alone[k] = self.sequences[k].air_mass;
                let own = problem.sequence_at(k);
                let relative = solutions.iter().zip(&weights).map(|(it, &w)| {
                    let sigma = it.covariance[(own, own)].sqrt();
                    (w, -0.6 * it.parameters[own], 0.6 * sigma)
                });
                (mixture(&alone), Mixture::new(relative.collect()))
            })
            .collect();
        let (zenith, sight) = (mixture(&at_zenith), mixture(&along));
        Ok(Posterior {
            weights,
            zenith,
            sight,
            each,
            solutions,
        })
    }

    fn report(
        &self,
        series: &[HarmonicSeries<'_>],
        setup: &Setup,
        posterior: &Posterior,
        systematic: f64,
    ) -> Result<MotionSeeing, SeeingError> {
        let zenith = posterior.zenith.widened(systematic);
        let sight = posterior.sight.widened(systematic);
        let interval =
            |it: &Mixture, tail: f64| (it.quantile(tail).exp(), it.quantile(1.0 - tail).exp());
        let half = |it: &Mixture| {
            let (low, high) = interval(it, 0.158655);
            0.5 * (high - low)
        };
        let mut warnings = Vec::new();
        for (k, it) in series.iter().enumerate() {
            if it.zenith_rad > 75.0 * DEG_RAD {
                warnings.push(format!(
                    "sequence {k} is at a zenith distance of {:.1} degrees: above 75 flat layers \
                     overestimate the air mass",
                    it.zenith_rad / DEG_RAD
                ));
            }
        }
        let missing = setup.prior.outer_scales_m.len() - posterior.solutions.len();
        if missing > 0 {
            warnings.push(format!(
                "{missing} outer scales were left out: no maximum was found"
            ));
        }
        let solution = &posterior.solutions[posterior.best()];
        let (power, chi2, data) = self.compare(solution);
        let layers = setup.prior.layers.len();
        let effective_parameters = self.determined(solution, layers);
        let degrees_of_freedom = (data - effective_parameters).max(1.0);
        if chi2 > degrees_of_freedom + 4.0 * (2.0 * degrees_of_freedom).sqrt() {
            warnings.push(format!(
                "the harmonics do not follow isotropic layers: chi-square {chi2:.0} for {degrees_of_freedom:.0} \
                 degrees of freedom"
            ));
        }
        let (outer_scale_m, outer_scale_reason) = outer_scale(setup, posterior);
        let r0_los_500nm_m = sight.mean_exponential();
        let width_r0_m = r0_at_wavelength_m(r0_los_500nm_m, setup.wavelength_nm)?;
        let relative = |it: &Mixture| it.sigma();
        let r0_zenith_500nm_m = zenith.mean_exponential();
        Ok(MotionSeeing {
            r0_zenith_500nm_m,
            r0_zenith_sigma_m: half(&zenith),
            r0_zenith_interval_68_m: interval(&zenith, 0.158655),
            r0_zenith_interval_95_m: interval(&zenith, 0.025),
            r0_los_500nm_m,
            r0_los_sigma_m: half(&sight),
            systematic_relative_sigma: systematic,
            profile: profile(solution, layers, setup),
            outer_scale_m,
            outer_scale_reason,
            height_proxy_m: height_proxy(posterior, layers),
            extra_noise_mas2: solution.parameters[2 * layers].exp(),
            fwhm_arcsec: fwhm_arcsec(width_r0_m, setup.wavelength_nm, outer_scale_m)?,
            coherence_time_s: coherence_time_s(r0_los_500nm_m, setup.wind_m_s.max(0.1))?,
            sequences: posterior
                .each
                .iter()
                .zip(&self.flicker)
                .map(|((own, scale), &flicker_variance)| SequenceSeeing {
                    r0_los_500nm_m: own.mean_exponential(),
                    r0_los_sigma_m: half(&own.widened(systematic)),
                    relative_sigma: relative(scale),
                    flicker_variance,
                })
                .collect(),
            power,
            chi2,
            degrees_of_freedom,
            warnings,
        })
    }

    /// Power by harmonic against the model, chi-square, and number of data.
    fn compare(&self, solution: &Solution) -> (Vec<PowerRow>, f64, f64) {
        let (mut rows, mut chi2, mut data) = (Vec::new(), 0.0, 0.0);
        for (at, &m) in self.orders.iter().enumerate() {
            let (mut observed, mut modelled, mut noise, mut variance) = (0.0, 0.0, 0.0, 0.0);
            let (mut total, mut n_effective) = (0.0, 0.0);
            for (k, it) in self.sequences.iter().enumerate() {
                let (model, dof) = (solution.model_mas2[k][at], it.degrees_of_freedom[m]);
                chi2 += 0.5 * dof * (it.power_mas2[m] / model - 1.0).powi(2);
                data += 1.0;
                observed += dof * it.power_mas2[m];
                modelled += dof * model;
                noise += dof * it.noise_mas2[m];
                variance += 2.0 * dof * model * model;
                total += dof;
                n_effective += self.n_effective[k][m];
            }
            rows.push(PowerRow {
                m,
                observed_mas2: observed / total,
                modelled_mas2: modelled / total,
                sigma_mas2: variance.sqrt() / total,
                noise_mas2: noise / total,
                n_effective,
            });
        }
        (rows, chi2, data)
    }

    /// Number of parameters the data determine rather than the prior: the sum over parameters of the
    /// share of their prior variance that was lost.
    fn determined(&self, solution: &Solution, layers: usize) -> f64 {
        let prior = &self.setup.prior;
        let lost = |at: usize, sigma: f64| {
            (1.0 - solution.covariance[(at, at)] / (sigma * sigma)).clamp(0.0, 1.0)
        };
        let heights: f64 = prior
            .layers
            .iter()
            .enumerate()
            .map(|(i, it)| lost(i, it.share_sigma_ln) + lost(layers + i, it.height_sigma_ln))
            .sum();
        let first = 2 * layers + 1;
        let scales: f64 = (0..self.sequences.len())
            .map(|k| lost(first + k, prior.sequence_sigma_ln))
            .sum();
        heights + scales + 1.0
    }
}

/// Largest zenith distance for flat layers at all.
const ZENITH_RAD: (f64, f64) = (0.0, 80.0 * DEG_RAD);

fn profile(solution: &Solution, layers: usize, setup: &Setup) -> Profile {
    let at = &solution.parameters;
    let first = 2 * layers + 1;
    // Mean over the sequences, so that the profile predicts a typical one.
    let count = (at.len() - first) as f64;
    let scale = (first..at.len()).map(|k| at[k].exp()).sum::<f64>() / count;
    let total: f64 = (0..layers).map(|i| at[i].exp()).sum();
    let mut out: Vec<Layer> = (0..layers)
        .map(|i| Layer {
            height_m: at[layers + i].exp(),
            share: at[i].exp() / total,
            r0_zenith_500nm_m: (at[i].exp() * scale).powf(-0.6),
        })
        .collect();
    out.sort_by(|a, b| a.height_m.total_cmp(&b.height_m));
    let outer_scale_m = setup.prior.outer_scales_m[solution.outer_scale_index].0;
    Profile {
        layers: out,
        outer_scale_m,
    }
}

/// The outer scale, if its posterior is much narrower than the prior and ends inside the list.
fn outer_scale(setup: &Setup, posterior: &Posterior) -> (Option<f64>, String) {
    let scales = &setup.prior.outer_scales_m;
    // 1/L0 is what the limb sees: motion falls as L0^(-1/3), and infinity is an ordinary place.
    let place = |it: &Solution| scales[it.outer_scale_index].0.powf(-1.0 / 3.0);
    let parts = || posterior.solutions.iter().zip(&posterior.weights);
    let mean: f64 = parts().map(|(it, w)| w * place(it)).sum();
    let variance: f64 = parts().map(|(it, w)| w * (place(it) - mean).powi(2)).sum();
    let at_end: f64 = parts()
        .filter(|(it, _)| it.outer_scale_index == 0 || !scales[it.outer_scale_index].0.is_finite())
        .map(|(_, w)| w)
        .sum();
    let relative = 3.0 * variance.sqrt() / mean;
    if at_end > 0.2 {
        let reason = "the data allow an outer scale beyond the range considered".to_owned();
        (None, reason)
    } else if relative > 0.5 {
        (
            None,
            format!(
                "the data leave the outer scale open to {:.0} percent",
                100.0 * relative
            ),
        )
    } else {
        (
            Some(mean.powi(-3)),
            format!("known to {:.0} percent by evidence", 100.0 * relative),
        )
    }
}

/// `[sum J h^(5/3) / sum J]^(3/5)`, if the posterior knows it to a factor of two.
fn height_proxy(posterior: &Posterior, layers: usize) -> Option<f64> {
    let parts = posterior
        .solutions
        .iter()
        .zip(&posterior.weights)
        .map(|(it, &w)| {
            let at = &it.parameters;
            let strengths: Vec<f64> = (0..layers).map(|i| at[i].exp()).collect();
            let lifted: Vec<f64> = (0..layers)
                .map(|i| strengths[i] * (5.0 / 3.0 * at[layers + i]).exp())
                .collect();
            let (total, high): (f64, f64) = (strengths.iter().sum(), lifted.iter().sum());
            let mut slope = nalgebra::DVector::zeros(at.len());
            for i in 0..layers {
                slope[i] = 0.6 * (lifted[i] / high - strengths[i] / total);
                slope[layers + i] = lifted[i] / high;
            }
            let sigma = (slope.transpose() * &it.covariance * &slope)[(0, 0)].sqrt();
            (w, 0.6 * (high / total).ln(), sigma)
        });
    let mixture = Mixture::new(parts.collect());
    (mixture.sigma() < std::f64::consts::LN_2).then(|| mixture.mean().exp())
}
