//! From the posterior to the figures that are reported.
//!
//! # Model
//!
//! ```text
//! chi^2      = sum dof_km / 2 (P_km / M_km - 1)^2
//! parameters = sum over parameters of 1 - (posterior variance) / (prior variance)
//! height     = [ sum J_i h_i^(5/3) / sum J_i ]^(3/5)
//! ```
//!
//! # Valid for
//!
//! The outer scale is given only where its posterior is narrow and inside the list of the prior,
//! the height only where it is known to a factor of two.
//!
//! # Accuracy
//!
//! That of the posterior.
//!
//! # Source
//!
//! Height of the isoplanatic angle: F. Roddier, Progress in Optics 19, 281 (1981) (from memory).

use super::convert::{coherence_time_s, fwhm_arcsec, r0_at_wavelength_m};
use super::error::SeeingError;
use super::fit::Solution;
use super::harmonics::HarmonicSeries;
use super::motion::{MotionSeeing, PowerRow, SequenceSeeing, Setup};
use super::posterior::Mixture;
use super::session::{Posterior, Session};
use super::{Layer, Profile};
use crate::units::DEG_RAD;

/// Probability below one standard deviation under the mean.
const TAIL_68: f64 = 0.158655;
const TAIL_95: f64 = 0.025;

impl Session<'_> {
    /// The measurement as it is reported; `systematic` is an error of `ln r0`.
    pub(super) fn answer(
        &self,
        series: &[HarmonicSeries<'_>],
        posterior: &Posterior,
        systematic: f64,
    ) -> Result<MotionSeeing, SeeingError> {
        let setup = self.setup;
        let zenith = posterior.zenith.widened(systematic);
        let sight = posterior.sight.widened(systematic);
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
                "the harmonics do not follow isotropic layers: chi-square {chi2:.0} for \
                 {degrees_of_freedom:.0} degrees of freedom"
            ));
        }
        let (outer_scale_m, outer_scale_reason) = outer_scale(setup, posterior);
        let r0_los_500nm_m = sight.mean_exponential();
        let width_r0_m = r0_at_wavelength_m(r0_los_500nm_m, setup.wavelength_nm)?;
        let width_scale_m = outer_scale_m.filter(|it| *it > 20.0 * width_r0_m);
        if width_scale_m != outer_scale_m {
            warnings.push(
                "the outer scale is below 20 r0: the width of the seeing disk is given without it"
                    .to_owned(),
            );
        }
        let r0_zenith_500nm_m = zenith.mean_exponential();
        Ok(MotionSeeing {
            r0_zenith_500nm_m,
            r0_zenith_sigma_m: half_width(&zenith),
            r0_zenith_interval_68_m: interval(&zenith, TAIL_68),
            r0_zenith_interval_95_m: interval(&zenith, TAIL_95),
            r0_los_500nm_m,
            r0_los_sigma_m: half_width(&sight),
            systematic_relative_sigma: systematic,
            profile: profile(solution, layers, setup),
            outer_scale_m,
            outer_scale_reason,
            height_proxy_m: height_proxy(posterior, layers),
            extra_noise_mas2: solution.parameters[2 * layers].exp(),
            fwhm_arcsec: fwhm_arcsec(width_r0_m, setup.wavelength_nm, width_scale_m)?,
            coherence_time_s: coherence_time_s(r0_los_500nm_m, setup.wind_m_s.max(0.1))?,
            sequences: posterior
                .each
                .iter()
                .zip(&self.flicker)
                .map(|((own, scale), &flicker_variance)| SequenceSeeing {
                    r0_los_500nm_m: own.mean_exponential(),
                    r0_los_sigma_m: half_width(&own.widened(systematic)),
                    relative_sigma: scale.sigma(),
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

    /// Number of parameters the data determine rather than the prior: the sum over parameters of
    /// the share of their prior variance that was lost.
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

fn interval(ln_r0: &Mixture, tail: f64) -> (f64, f64) {
    (ln_r0.quantile(tail).exp(), ln_r0.quantile(1.0 - tail).exp())
}

/// Half the width of the 68 percent interval.
fn half_width(ln_r0: &Mixture) -> f64 {
    let (low, high) = interval(ln_r0, TAIL_68);
    0.5 * (high - low)
}

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
