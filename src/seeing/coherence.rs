//! The coherence time, from how fast the harmonics of the limb's motion forget.
//!
//! # Model
//!
//! ```text
//! C(tau) = mean over m of  <a_m(t) a_m(t + tau)> / Var a_m        noise is in Var a_m alone, and taken off
//!        = mean over m of  sum_i J_i E_m,i(V tau) / sum_i J_i E_m,i(0)
//! tau0   = 0.314 r0 / V
//! ```
//!
//! One speed `V` for all layers is fitted to the lags until `C` has fallen below 0.1; layers as found by
//! the motion, `E` as in `turbulence::harmonic_lag_kernels`.
//!
//! # Valid for
//!
//! Frames that follow each other fast enough to remember: `C` above 0.15 from one to the next. Exposures
//! much shorter than the spacing of the frames.
//!
//! # Accuracy
//!
//! Statistical, and 30 percent for a single speed where layers move at their own (our judgement).
//!
//! # Source
//!
//! Frozen flow as in `turbulence::harmonic_lag_kernels`; F. Roddier, Progress in Optics 19, 281 (1981)
//! for `tau0` (from memory).

use super::Profile;
use super::convert::coherence_time_s;
use super::effective::Autocovariance;
use super::harmonics::{HarmonicSeries, harmonic_power};
use crate::turbulence::{Aperture, Tilt, harmonic_lag_kernels};
use crate::units::DEG_RAD;

/// How fast the air moves across the limb.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Coherence {
    /// Coherence time of the wavefront towards the Sun at 500 nm.
    pub time_s: f64,
    /// Its standard uncertainty.
    pub sigma_s: f64,
    /// Speed that stands for all layers.
    pub wind_m_s: f64,
    /// Correlation from one frame to the next.
    pub correlation: f64,
}

/// Why there is no coherence time.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum NoCoherence {
    /// Too few frames, or none that moves.
    #[error("{found} frames are too few to see them forget each other; at least {LEAST_FRAMES}")]
    TooFewFrames {
        /// Frames.
        found: usize,
    },
    /// The frames follow each other too slowly.
    #[error(
        "frames {spacing_s:.3} s apart have forgotten each other (correlation {correlation:.2}, at least {LEAST_CORRELATION} is needed)"
    )]
    Forgotten {
        /// Median spacing.
        spacing_s: f64,
        /// Correlation from one to the next.
        correlation: f64,
    },
    /// No speed explains the memory.
    #[error(
        "no wind of {} to {} m/s explains how slowly the limb's motion is forgotten",
        WIND_M_S.0,
        WIND_M_S.1
    )]
    Speed,
    /// The harmonics or the layers cannot be used.
    #[error("{0}")]
    Model(String),
}

/// Fewest frames.
const LEAST_FRAMES: usize = 20;
/// Least correlation from frame to frame that is told from none.
const LEAST_CORRELATION: f64 = 0.15;
/// Lags below this correlation say nothing more.
const LAST_CORRELATION: f64 = 0.1;
/// Most lags used.
const MOST_LAGS: usize = 24;
/// Speeds tried.
const WIND_M_S: (f64, f64) = (0.3, 80.0);
/// Steps of the speed in its logarithm.
const WIND_STEP: f64 = 0.01;
/// Harmonics from here on forget before anything slow does.
const FIRST: usize = 5;
/// Standard deviation of ln V for one speed in place of several.
const ONE_SPEED_SIGMA: f64 = 0.3;

/// Coherence time of one sequence, with the layers and Fried's parameter (500 nm, towards the Sun)
/// that its motion gave.
///
/// # Errors
///
/// [`NoCoherence`] where the cadence does not allow it.
pub fn coherence(
    series: &HarmonicSeries<'_>,
    profile: &Profile,
    aperture: &Aperture,
    tilt: Tilt,
    (r0_los_500nm_m, r0_relative_sigma): (f64, f64),
) -> Result<Coherence, NoCoherence> {
    let found = series.time_s.len();
    if found < LEAST_FRAMES {
        return Err(NoCoherence::TooFewFrames { found });
    }
    let model = |it: &dyn std::fmt::Display| NoCoherence::Model(it.to_string());
    let power = harmonic_power(0, series)
        .map_err(|it| model(&it))?
        .power_mas2;
    let orders: Vec<usize> = (FIRST..power.len())
        .filter(|&m| power[m] > 4.0 * series.noise_variance_mas2[m])
        .collect();
    if orders.is_empty() {
        return Err(NoCoherence::Model(
            "no harmonic from m = 5 on stands clear of the noise".to_owned(),
        ));
    }
    // Each harmonic in units of its own motion, noise taken off.
    let scaled: Vec<Vec<f64>> = orders
        .iter()
        .flat_map(|&m| {
            let unit = (power[m] - series.noise_variance_mas2[m]).sqrt();
            [series.cos_mas, series.sin_mas]
                .map(|table| table.column(m).iter().map(|it| it / unit).collect())
        })
        .collect();
    let columns: Vec<&[f64]> = scaled.iter().map(Vec::as_slice).collect();
    let memory =
        Autocovariance::of(series.time_s, &columns).ok_or(NoCoherence::TooFewFrames { found })?;
    let correlation = memory.gamma[1];
    if !(correlation >= LEAST_CORRELATION) {
        return Err(NoCoherence::Forgotten {
            spacing_s: memory.spacing_s,
            correlation,
        });
    }
    let used = (1..memory.gamma.len().min(MOST_LAGS))
        .take_while(|&k| memory.gamma[k] > LAST_CORRELATION)
        .last()
        .unwrap_or(1);
    let curve = Curve::new(series, profile, aperture, tilt, &orders).map_err(|it| model(&it))?;
    let steps = ((WIND_M_S.1 / WIND_M_S.0).ln() / WIND_STEP) as usize;
    let wind = |k: usize| WIND_M_S.0 * (WIND_STEP * k as f64).exp();
    let misfit = |wind_m_s: f64| -> f64 {
        (1..=used)
            .map(|k| {
                let drift_m = wind_m_s * memory.spacing_s * k as f64;
                memory.products[k] * (memory.gamma[k] - curve.at(drift_m)).powi(2)
            })
            .sum()
    };
    let best = (0..=steps)
        .min_by(|&a, &b| misfit(wind(a)).total_cmp(&misfit(wind(b))))
        .unwrap_or(0);
    if best == 0 || best == steps {
        return Err(NoCoherence::Speed);
    }
    let wind_m_s = wind(best);
    // Lags of one series are one measurement: the steepest counts.
    let steepest = (1..=used)
        .map(|k| {
            let drift_m = wind_m_s * memory.spacing_s * k as f64;
            let slope =
                (curve.at(1.05 * drift_m) - curve.at(drift_m / 1.05)) / (2.0 * 1.05_f64.ln());
            slope.abs()
        })
        .fold(1e-3, |a, b| if b > a { b } else { a });
    let independent = memory.products[0] / (1.0 + 2.0 * used as f64);
    let statistical = independent.sqrt().recip() / steepest;
    let relative = statistical.hypot(ONE_SPEED_SIGMA).hypot(r0_relative_sigma);
    let time_s = coherence_time_s(r0_los_500nm_m, wind_m_s).map_err(|it| model(&it))?;
    Ok(Coherence {
        time_s,
        sigma_s: time_s * relative,
        wind_m_s,
        correlation,
    })
}

/// Correlation against drift, tabulated.
struct Curve {
    first_ln: f64,
    step_ln: f64,
    values: Vec<f64>,
}

impl Curve {
    /// Drifts of 1 mm to 100 m.
    fn new(
        series: &HarmonicSeries<'_>,
        profile: &Profile,
        aperture: &Aperture,
        tilt: Tilt,
        orders: &[usize],
    ) -> Result<Self, crate::turbulence::TurbulenceError> {
        let range = series.limb_radius_rad / series.zenith_rad.min(80.0 * DEG_RAD).cos();
        let top = orders.iter().copied().fold(1, usize::max);
        let at = |drift_m: f64| -> Result<Vec<f64>, crate::turbulence::TurbulenceError> {
            let mut sum = vec![0.0; top + 1];
            for layer in &profile.layers {
                let ring_m = layer.height_m * range;
                let scale_m = profile.outer_scale_m;
                let k = harmonic_lag_kernels(aperture, tilt, scale_m, ring_m, top, drift_m)?;
                for (to, k) in sum.iter_mut().zip(k) {
                    *to += layer.share * k.mean;
                }
            }
            Ok(sum)
        };
        let still = at(0.0)?;
        let (first_ln, step_ln) = (1e-3_f64.ln(), 0.25);
        let count = ((100.0_f64.ln() - first_ln) / step_ln) as usize + 2;
        let values = (0..count)
            .map(|k| {
                let moved = at((first_ln + step_ln * k as f64).exp())?;
                let sum: f64 = orders.iter().map(|&m| moved[m] / still[m]).sum();
                Ok(sum / orders.len() as f64)
            })
            .collect::<Result<_, _>>()?;
        Ok(Self {
            first_ln,
            step_ln,
            values,
        })
    }

    fn at(&self, drift_m: f64) -> f64 {
        let place = (drift_m.ln() - self.first_ln) / self.step_ln;
        if place <= 0.0 {
            return 1.0 + (self.values[0] - 1.0) * (2.0 * place * self.step_ln).exp();
        }
        let k = (place as usize).min(self.values.len() - 2);
        let share = place - k as f64;
        if share > 1.0 {
            return 0.0;
        }
        self.values[k] + share * (self.values[k + 1] - self.values[k])
    }
}
