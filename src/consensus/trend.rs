//! The slope of a series of values in time, and the smallest one the series can show.
//!
//! # Model
//!
//! ```text
//! sigma_b = s / sqrt(sum (t_i - t)^2)                    equal uncertainties s, independent
//! sigma_b^2 = sum_ij c_i c_j rho^|i-j| s^2               c_i = (t_i - t) / sum (t_i - t)^2
//! limit    |b| > z sigma_b                               z = 1.960, s known
//!          |b| > t sigma_b                               t with n - 2 degrees of freedom, s from the scatter
//! ```
//!
//! The limit is what half of the series show when the true slope equals it; `found` is the slope that
//! 95 percent of them show.
//!
//! # Valid for
//!
//! Three values or more for `s` from the scatter. `rho` is the correlation of neighbours in the list,
//! whatever their distance in time. A step where the instrument changed is not a slope.
//!
//! # Accuracy
//!
//! That of the quantiles, 1e-9.
//!
//! # Source
//!
//! Least squares of a straight line, common practice, no source; regression values in
//! `tests/data/excess_slope_pairs.csv`.

use super::{ConsensusError, Value, check, student};

/// What slope a series can show.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct SlopeLimits {
    /// Standard uncertainty of the slope, in the unit of `s` per unit of time.
    pub sigma: f64,
    /// Smallest slope that differs from zero at 95 percent, `s` known.
    pub limit: f64,
    /// The same with `s` from the scatter about the line; null for two values.
    pub limit_by_scatter: Option<f64>,
    /// Slope that 95 percent of such series show, `s` known.
    pub found: f64,
    /// The same with `s` from the scatter about the line; null for two values.
    pub found_by_scatter: Option<f64>,
}

/// A straight line through values in time.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Slope {
    /// Change per unit of time.
    pub slope: f64,
    /// Its standard uncertainty from those of the values.
    pub sigma: f64,
    /// Its standard uncertainty by the scatter about the line; null for two values.
    pub sigma_by_scatter: Option<f64>,
    /// Value of the line at `time`.
    pub value: f64,
    /// Standard uncertainty of `value`, uncorrelated with the slope.
    pub value_sigma: f64,
    /// Weighted mean of the times.
    pub time: f64,
    /// Weighted sum of squared residuals.
    pub q: f64,
}

/// Weighted mean of times, and the weighted sum of squares about it.
fn lever(times: &[f64], weights: &[f64]) -> Result<(f64, f64), ConsensusError> {
    let total: f64 = weights.iter().sum();
    let middle = times.iter().zip(weights).map(|(t, w)| t * w).sum::<f64>() / total;
    let squares: f64 = times
        .iter()
        .zip(weights)
        .map(|(t, w)| w * (t - middle).powi(2))
        .sum();
    if squares > 0.0 {
        Ok((middle, squares))
    } else {
        Err(ConsensusError::OneEpoch { found: times.len() })
    }
}

fn check_times(times: &[f64], needed: usize) -> Result<(), ConsensusError> {
    if times.len() < needed {
        return Err(ConsensusError::TooFew {
            what: "a slope",
            found: times.len(),
            needed,
        });
    }
    match times.iter().zip(1..).find(|it| !it.0.is_finite()) {
        Some((&found, place)) => Err(ConsensusError::NotFinite { place, found }),
        None => Ok(()),
    }
}

/// Smallest slope that values at these times can show, each with the standard uncertainty `s` (with
/// what varies from season to season in it) and the correlation `rho` of neighbours.
///
/// # Errors
///
/// [`ConsensusError`] for fewer than two different times, an `s` that is not above zero, and a `rho`
/// outside -1 to 1.
///
/// ```
/// use truelimb::consensus::trend::limits;
/// let years: Vec<f64> = (0..11).map(f64::from).collect();
/// assert!((limits(&years, 0.5, 0.0)?.limit - 0.0934).abs() < 5e-5);
/// # Ok::<(), truelimb::consensus::ConsensusError>(())
/// ```
pub fn limits(times: &[f64], s: f64, rho: f64) -> Result<SlopeLimits, ConsensusError> {
    check_times(times, 2)?;
    if !(s.is_finite() && s > 0.0) {
        return Err(ConsensusError::Uncertainty { place: 1, found: s });
    }
    if !(rho.abs() < 1.0) {
        return Err(ConsensusError::OutOfRange {
            what: "the correlation of neighbours",
            found: rho,
            lowest: -1.0,
            highest: 1.0,
        });
    }
    let (middle, squares) = lever(times, &vec![1.0; times.len()])?;
    let c: Vec<f64> = times.iter().map(|t| (t - middle) / squares).collect();
    let mut variance = 0.0;
    for (i, a) in c.iter().enumerate() {
        for (j, b) in c.iter().enumerate() {
            variance += a * b * rho.powi(i.abs_diff(j) as i32);
        }
    }
    let sigma = s * variance.sqrt();
    let degrees = (times.len() > 2).then(|| (times.len() - 2) as f64);
    Ok(SlopeLimits {
        sigma,
        limit: student::normal_quantile(0.95) * sigma,
        limit_by_scatter: degrees.map(|it| student::quantile(0.95, it) * sigma),
        found: student::effect_found(0.95, f64::INFINITY) * sigma,
        found_by_scatter: degrees.map(|it| student::effect_found(0.95, it) * sigma),
    })
}

/// The straight line through independent values in time, by weighted least squares.
///
/// # Errors
///
/// [`ConsensusError`] for fewer than two different times, lists of unequal length, and values that
/// are no numbers.
pub fn slope(times: &[f64], values: &[Value]) -> Result<Slope, ConsensusError> {
    check(values, "a slope", 2)?;
    if times.len() != values.len() {
        return Err(ConsensusError::Lengths {
            what: "times",
            found: times.len(),
            needed: values.len(),
        });
    }
    check_times(times, 2)?;
    let weights: Vec<f64> = values.iter().map(|it| it.u.powi(-2)).collect();
    let total: f64 = weights.iter().sum();
    let (time, squares) = lever(times, &weights)?;
    let value = values
        .iter()
        .map(|it| it.value * it.u.powi(-2))
        .sum::<f64>()
        / total;
    let rows = || times.iter().zip(values).map(|(t, it)| (t - time, it));
    let slope = rows()
        .map(|(t, it)| t * it.value * it.u.powi(-2))
        .sum::<f64>()
        / squares;
    let q: f64 = rows()
        .map(|(t, it)| ((it.value - value - slope * t) / it.u).powi(2))
        .sum();
    let sigma = squares.sqrt().recip();
    let degrees = values.len() - 2;
    Ok(Slope {
        slope,
        sigma,
        sigma_by_scatter: (degrees > 0).then(|| sigma * (q / degrees as f64).sqrt()),
        value,
        value_sigma: total.sqrt().recip(),
        time,
        q,
    })
}
