//! A session in the form of the fit, and its posterior over the outer scales.
//!
//! # Model
//!
//! One `fit` for each outer scale of the prior, from the neighbour's solution; weights by evidence
//! as in `posterior`. Kernels come from one table for each exposure.
//!
//! # Valid for
//!
//! Zenith distances to 80 degrees, exposures to 1 s.
//!
//! # Accuracy
//!
//! That of `fit`.
//!
//! # Source
//!
//! As `fit` and `posterior`.

use super::error::{SeeingError, checked};
use super::fit::{LEAST_HEIGHT_M, MOST_HEIGHT_M, Observed, Problem, Solution};
use super::floor::sector_window;
use super::harmonics::{HarmonicSeries, harmonic_power};
use super::motion::Setup;
use super::posterior::{Mixture, log_strength, weights};
use crate::turbulence::{KernelTable, Tilt};
use crate::units::DEG_RAD;

/// What was observed, in the form of the fit.
#[derive(Debug)]
pub(super) struct Session<'a> {
    pub(super) setup: &'a Setup,
    pub(super) sequences: Vec<Observed>,
    exposures_s: Vec<f64>,
    pub(super) n_effective: Vec<Vec<f64>>,
    pub(super) flicker: Vec<f64>,
    frames: Vec<f64>,
    pub(super) orders: Vec<usize>,
    extra_noise_mas2: f64,
}

/// The posterior.
#[derive(Debug)]
pub(super) struct Posterior {
    pub(super) solutions: Vec<Solution>,
    pub(super) weights: Vec<f64>,
    pub(super) zenith: Mixture,
    pub(super) sight: Mixture,
    /// `ln r0` of each sequence along the sight, and its strength relative to the common profile.
    pub(super) each: Vec<(Mixture, Mixture)>,
}

impl Posterior {
    /// The most probable outer scale's solution.
    pub(super) fn best(&self) -> usize {
        let by_weight = self
            .weights
            .iter()
            .enumerate()
            .max_by(|a, b| a.1.total_cmp(b.1));
        by_weight.map_or(0, |it| it.0)
    }
}

impl<'a> Session<'a> {
    pub(super) fn observe(
        series: &[HarmonicSeries<'_>],
        setup: &'a Setup,
    ) -> Result<Self, SeeingError> {
        setup.checked()?;
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
    pub(super) fn moved(
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

    pub(super) fn solve(
        &self,
        zernike_share: f64,
        wind_m_s: f64,
    ) -> Result<Posterior, SeeingError> {
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
            solutions,
            weights,
            zenith,
            sight,
            each,
        })
    }
}

/// Largest zenith distance for flat layers at all.
const ZENITH_RAD: (f64, f64) = (0.0, 80.0 * DEG_RAD);
