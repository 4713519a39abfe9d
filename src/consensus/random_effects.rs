//! The consensus of values that scatter more than they should: a dark uncertainty common to all.
//!
//! # Model
//!
//! ```text
//! x_i = mu + b_i + e_i,   var b_i = tau^2,   var e_i = u_i^2,   w*_i = 1 / (u_i^2 + tau^2)
//!
//! DerSimonian-Laird   tau^2 = max(0, (Q - (k - 1)) / (sum w - sum w^2 / sum w)),   w_i = 1 / u_i^2
//! Paule-Mandel        sum w*_i (x_i - mu)^2 = k - 1
//! REML                the greatest restricted likelihood of tau^2
//! mu = sum w* x / sum w*,   se = (sum w*)^(-1/2)
//! Hartung-Knapp       se_HK^2 = sum w* (x - mu)^2 / ((k - 1) sum w*),   t with k - 1 degrees of freedom
//! ```
//!
//! # Valid for
//!
//! Independent values. With fewer than about five, tau is hardly known: the interval by Hartung and
//! Knapp is the one to quote. Where the values agree better than they should, its standard error
//! would be below `se`; the interval never takes it below.
//!
//! # Accuracy
//!
//! tau to 1e-12 of the values' spread.
//!
//! # Source
//!
//! DerSimonian & Laird 1986, Control. Clin. Trials 7, 177; Paule & Mandel 1982, J. Res. NBS 87, 377;
//! DerSimonian & Kacker 2007, Contemp. Clin. Trials 28, 105; Hartung & Knapp 2001, Stat. Med. 20,
//! 3875; the floor at `se`: Knapp & Hartung 2003, Stat. Med. 22, 2693 (from memory).

use super::{ConsensusError, Value, check, student, weighted_mean};

/// How the dark uncertainty is estimated.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Method {
    /// By moments with the weights of the stated uncertainties.
    DerSimonianLaird,
    /// By moments with the final weights.
    PauleMandel,
    /// By the restricted likelihood.
    RestrictedLikelihood,
}

impl Method {
    /// The name it goes by.
    pub fn name(self) -> &'static str {
        match self {
            Self::DerSimonianLaird => "DerSimonian-Laird",
            Self::PauleMandel => "Paule-Mandel",
            Self::RestrictedLikelihood => "restricted likelihood",
        }
    }
}

/// A consensus with dark uncertainty.
#[derive(Clone, Debug, PartialEq)]
pub struct RandomEffects {
    /// How the dark uncertainty was estimated.
    pub method: Method,
    /// Dark uncertainty: the standard deviation that the stated uncertainties leave unexplained.
    pub tau: f64,
    /// The consensus.
    pub value: f64,
    /// Its standard error from the weights.
    pub se: f64,
    /// Its standard error by Hartung and Knapp; null with one value.
    pub se_hartung_knapp: Option<f64>,
    /// 95 percent interval by Hartung and Knapp, never narrower than `se` allows; null with one value.
    pub interval_95: Option<[f64; 2]>,
    /// Share of each value in the consensus; the shares add up to one.
    pub weights: Vec<f64>,
}

/// The consensus of independent values.
///
/// # Errors
///
/// [`ConsensusError`] for an empty list, and for values or uncertainties that are no numbers.
pub fn random_effects(values: &[Value], method: Method) -> Result<RandomEffects, ConsensusError> {
    check(values, "a consensus", 1)?;
    let tau2 = match method {
        Method::DerSimonianLaird => dersimonian_laird(values)?,
        Method::PauleMandel => paule_mandel(values),
        Method::RestrictedLikelihood => restricted_likelihood(values)?,
    };
    Ok(with_tau2(values, method, tau2))
}

/// The consensus with each value left out in turn, in the order of the values.
///
/// # Errors
///
/// [`ConsensusError`] for fewer than two values, and for values that are no numbers.
pub fn leave_one_out(
    values: &[Value],
    method: Method,
) -> Result<Vec<RandomEffects>, ConsensusError> {
    check(values, "leaving one out", 2)?;
    (0..values.len())
        .map(|left_out| {
            let mut rest = values.to_vec();
            rest.remove(left_out);
            random_effects(&rest, method)
        })
        .collect()
}

fn with_tau2(values: &[Value], method: Method, tau2: f64) -> RandomEffects {
    let mu = Moments::of(values, tau2);
    let degrees = values.len() - 1;
    let se = mu.weight.sqrt().recip();
    let se_hartung_knapp =
        (degrees > 0).then(|| (mu.squares / (degrees as f64 * mu.weight)).sqrt());
    let interval_95 = se_hartung_knapp.map(|it| {
        let wider = if it > se { it } else { se };
        let half = wider * student::quantile(0.95, degrees as f64);
        [mu.mean - half, mu.mean + half]
    });
    RandomEffects {
        method,
        tau: tau2.sqrt(),
        value: mu.mean,
        se,
        se_hartung_knapp,
        interval_95,
        weights: values
            .iter()
            .map(|it| 1.0 / (it.u * it.u + tau2) / mu.weight)
            .collect(),
    }
}

/// Sum of weights, mean and weighted sum of squares at one dark variance.
struct Moments {
    weight: f64,
    mean: f64,
    squares: f64,
}

impl Moments {
    fn of(values: &[Value], tau2: f64) -> Self {
        let w = |it: &Value| 1.0 / (it.u * it.u + tau2);
        let weight: f64 = values.iter().map(w).sum();
        let mean = values.iter().map(|it| w(it) * it.value).sum::<f64>() / weight;
        let squares = values
            .iter()
            .map(|it| w(it) * (it.value - mean).powi(2))
            .sum();
        Self {
            weight,
            mean,
            squares,
        }
    }
}

fn dersimonian_laird(values: &[Value]) -> Result<f64, ConsensusError> {
    let mean = weighted_mean(values)?;
    if mean.degrees == 0 {
        return Ok(0.0);
    }
    let one: f64 = values.iter().map(|it| it.u.powi(-2)).sum();
    let two: f64 = values.iter().map(|it| it.u.powi(-4)).sum();
    let tau2 = (mean.q - mean.degrees as f64) / (one - two / one);
    Ok(if tau2 > 0.0 { tau2 } else { 0.0 })
}

fn paule_mandel(values: &[Value]) -> f64 {
    let degrees = (values.len() - 1) as f64;
    let mean = values.iter().map(|it| it.value).sum::<f64>() / values.len() as f64;
    let spread: f64 = values.iter().map(|it| (it.value - mean).powi(2)).sum();
    // At tau^2 equal to the variance of the values the sum of squares is at most k - 1.
    falling_zero(spread / degrees, |tau2| {
        Moments::of(values, tau2).squares - degrees
    })
}

/// Zero of a falling function between 0 and `high`, 0 where it is not positive there.
pub(super) fn falling_zero(high: f64, function: impl Fn(f64) -> f64) -> f64 {
    if !(function(0.0) > 0.0) {
        return 0.0;
    }
    let (mut low, mut high) = (0.0, high);
    for _ in 0..200 {
        let middle = 0.5 * (low + high);
        if middle == low || middle == high {
            break;
        }
        if function(middle) > 0.0 {
            low = middle;
        } else {
            high = middle;
        }
    }
    0.5 * (low + high)
}

/// Fisher's scoring on the restricted likelihood, from the moments' answer.
fn restricted_likelihood(values: &[Value]) -> Result<f64, ConsensusError> {
    if values.len() == 1 {
        return Ok(0.0);
    }
    let mut tau2 = dersimonian_laird(values)?;
    for _ in 0..500 {
        let mu = Moments::of(values, tau2);
        let w = |it: &Value| 1.0 / (it.u * it.u + tau2);
        let two: f64 = values.iter().map(|it| w(it).powi(2)).sum();
        let three: f64 = values.iter().map(|it| w(it).powi(3)).sum();
        let residual: f64 = values
            .iter()
            .map(|it| (w(it) * (it.value - mu.mean)).powi(2))
            .sum();
        // Trace of the projection, and of its square.
        let trace = mu.weight - two / mu.weight;
        let square = two - 2.0 * three / mu.weight + (two / mu.weight).powi(2);
        let step = (residual - trace) / square;
        let next = if tau2 + step > 0.0 { tau2 + step } else { 0.0 };
        let done = (next - tau2).abs() <= 1e-14 * (1e-300 + next);
        tau2 = next;
        if done {
            break;
        }
    }
    Ok(tau2)
}
