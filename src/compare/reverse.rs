//! The first ground result against space, and what its session would have reported had space been the
//! truth.
//!
//! # Model
//!
//! ```text
//! report = truth + error,   truth of the space value and its uncertainty,   error of the session
//! ```
//!
//! The session's error is its own: that of the frames it kept, at the seeing it had, line by line of
//! its budget, with the degrees of freedom of its intervals. The sum follows Student's t with the
//! effective degrees of freedom of Welch and Satterthwaite. For each form of the answer (a kept
//! fraction, a definition of the limb, the stack) the random part is that form's own.

use super::Named;
use super::consistency::{Set, difference, no_difference};
use crate::consensus::correlated::Dark;
use crate::consensus::propagate::{Contribution, combined};
use crate::consensus::{ConsensusError, student};
use crate::footing::{Observable, Platform};
use crate::result::comparison::{CauseRecord, ReportedRecord, ReverseRecord, ThisResult};
use crate::result::record::{Quantity, Record, ShapeQuantity};

/// Shares for which quantiles are given.
const SHARES: [f64; 7] = [0.025, 0.16, 0.25, 0.5, 0.75, 0.84, 0.975];

/// The first ground result of the set against the values from space.
pub(super) fn this_result(
    set: &Set<'_>,
    results: &[Named<'_>],
) -> Result<Option<ThisResult>, ConsensusError> {
    let first = set
        .places
        .iter()
        .copied()
        .find(|&it| set.platform(it) == Platform::Ground && set.items[it].result.is_some());
    let Some(place) = first else { return Ok(None) };
    let Some(index) = set.items[place].result else {
        return Ok(None);
    };
    let record = results[index].record;
    let space = set.of_platform(Platform::Space);
    if space.is_empty() {
        return Ok(None);
    }
    let fit = set.fit(&space, Dark::PauleMandel)?;
    let (mean, dark) = (fit.values[0], fit.tau);
    let own = &set.items[place].carried;
    // What the result and the space values share leaves the difference.
    let shared: f64 = space
        .iter()
        .zip(fit.weights.iter())
        .map(|(&it, w)| w * own.covariance(&set.items[it].carried))
        .sum();
    let u_space = fit.scatter * fit.se(&[1.0]);
    let quantity = shape_of(record, set.observable);
    let degrees = degrees_of(quantity);
    let own_sigma = own.sigma_mas() / sigma_factor(degrees);
    let sum = combined(&[
        Contribution {
            u: own_sigma,
            degrees,
        },
        Contribution {
            u: u_space,
            degrees: if dark > 0.0 && fit.degrees > 0 {
                fit.degrees as f64
            } else {
                f64::INFINITY
            },
        },
    ]);
    let variance = sum.u * sum.u - 2.0 * shared;
    let sigma = if variance > 0.0 {
        variance.sqrt()
    } else {
        sum.u
    };
    let what = format!("{} minus space", set.items[place].published.label);
    let against_space = if sigma > 0.0 {
        difference(&what, own.value_mas - mean, sigma, sum.degrees)
    } else {
        no_difference(&what, "neither has an uncertainty")
    };
    let truth = Truth {
        mean_mas: mean,
        u_mas: u_space,
        sigma_mas: sigma,
        own_mas: own_sigma,
        shared_mas2: shared,
        degrees: sum.degrees,
        values: space.len(),
    };
    Ok(Some(ThisResult {
        place,
        against_space,
        reverse: reverse(set, record, place, &truth),
    }))
}

/// The space value as the truth, and the width of what would have been reported.
struct Truth {
    mean_mas: f64,
    u_mas: f64,
    sigma_mas: f64,
    own_mas: f64,
    shared_mas2: f64,
    degrees: f64,
    values: usize,
}

fn shape_of(record: &Record, observable: Observable) -> &ShapeQuantity {
    match observable {
        Observable::Oblateness => &record.shape.oblateness,
        Observable::Radius => &record.shape.radius,
    }
}

/// Half width of the 68 percent interval over the standard deviation.
fn sigma_factor(degrees: f64) -> f64 {
    student::quantile(0.682_689_492, degrees)
}

/// Degrees of freedom by which the 95 percent interval is so much wider than the 68 percent one.
fn degrees_of(quantity: &ShapeQuantity) -> f64 {
    let (Some([low, high]), Some(sigma)) = (quantity.interval_95, quantity.sigma) else {
        return f64::INFINITY;
    };
    let ratio = (high - low) / (2.0 * sigma);
    let of = |degrees: f64| student::quantile(0.95, degrees) / sigma_factor(degrees);
    let (mut few, mut many) = (2.0_f64, 1e5_f64);
    if !(ratio > of(many)) {
        return f64::INFINITY;
    }
    if ratio >= of(few) {
        return few;
    }
    for _ in 0..60 {
        let middle = (few * many).sqrt();
        if of(middle) > ratio {
            few = middle;
        } else {
            many = middle;
        }
    }
    (few * many).sqrt()
}

fn reverse(set: &Set<'_>, record: &Record, place: usize, truth: &Truth) -> ReverseRecord {
    let (unit, per) = (set.unit(), set.per());
    let reported = set.items[place].carried.value_mas;
    let pull = (reported - truth.mean_mas) / truth.sigma_mas;
    let share_below = student::share_below(pull, truth.degrees);
    let quantile = |share: f64| {
        let t = student::quantile((2.0 * share - 1.0).abs(), truth.degrees);
        (truth.mean_mas + t.copysign(share - 0.5) * truth.sigma_mas) / per
    };
    let plural = if truth.values == 1 { "value" } else { "values" };
    ReverseRecord {
        truth: format!(
            "the mean of {} {plural} from space, on the common footing",
            truth.values
        ),
        reference: Quantity::measured(truth.mean_mas / per, truth.u_mas / per, unit),
        predicted: Quantity::measured(truth.mean_mas / per, truth.sigma_mas / per, unit),
        degrees: if truth.degrees.is_finite() {
            truth.degrees
        } else {
            1e6
        },
        quantiles: SHARES.map(|share| [share, quantile(share)]).to_vec(),
        reported: reported / per,
        share_below,
        as_far: 2.0 * student::share_below(-pull.abs(), truth.degrees),
        forms: forms(set, record, reported, truth),
        causes: causes(record, set.observable, truth),
    }
}

/// What the session would have reported in each form of its answer. All forms differ from the truth as
/// the headline does on the footing, but for their own random error.
fn forms(set: &Set<'_>, record: &Record, reported_mas: f64, truth: &Truth) -> Vec<ReportedRecord> {
    let (unit, per) = (set.unit(), set.per());
    let quantity = shape_of(record, set.observable);
    let (Some(headline), Some(systematic)) = (quantity.value, quantity.sigma_systematic) else {
        return Vec::new();
    };
    // From the session's own footing to the common one.
    let shift = reported_mas / per - headline;
    let middle = truth.mean_mas / per - shift;
    let mut out = Vec::new();
    let mut push = |form: String, predicted: f64, random: f64, reported: f64| {
        let own2 = random * random + systematic * systematic;
        let variance = own2 + (truth.u_mas.powi(2) - 2.0 * truth.shared_mas2) / per.powi(2);
        let sigma = if variance > 0.0 { variance } else { own2 }.sqrt();
        out.push(ReportedRecord {
            form,
            predicted,
            sigma,
            reported,
            share_below: student::share_below((reported - predicted) / sigma, truth.degrees),
            unit: unit.to_owned(),
        });
    };
    let random = quantity.sigma_random.unwrap_or(0.0);
    push("frame by frame".to_owned(), middle, random, headline);
    let stack = &record.shape.by_stack;
    let by_stack = match set.observable {
        Observable::Oblateness => &stack.oblateness,
        Observable::Radius => &stack.radius,
    };
    if let (Some(value), Some(random)) = (by_stack.value, by_stack.sigma_random) {
        push("limb of the stack".to_owned(), middle, random, value);
    }
    for it in &record.shape.kept_curve {
        let form = format!("sharpest {:.0} percent of the frames", 100.0 * it.fraction);
        match set.observable {
            Observable::Radius => push(form, middle, it.radius_sigma_mas / per, it.radius_arcsec),
            Observable::Oblateness => {
                if let (Some(value), Some(random)) = (it.oblateness_mas, it.oblateness_sigma_mas) {
                    push(form, middle, random, value);
                }
            }
        }
    }
    for it in record.shape.definitions.iter().skip(1) {
        let value = match set.observable {
            Observable::Radius => it.radius_arcsec,
            Observable::Oblateness => it.oblateness_mas,
        };
        if let Some(value) = value {
            push(
                it.definition.clone(),
                middle + value - headline,
                random,
                value,
            );
        }
    }
    out
}

/// What the distribution is made of: the budget of the session, and the space value.
fn causes(record: &Record, observable: Observable, truth: &Truth) -> Vec<CauseRecord> {
    let mut lines: Vec<(String, f64)> = record
        .budget
        .iter()
        .filter_map(|it| {
            let sigma = match observable {
                Observable::Oblateness => it.sigma_mas?,
                Observable::Radius => it.sigma_radius_mas,
            };
            Some((format!("{} ({})", it.term, it.kind), sigma))
        })
        .filter(|it| it.1 > 0.0)
        .collect();
    let told: f64 = lines.iter().map(|it| it.1 * it.1).sum();
    let rest = truth.own_mas.powi(2) - told;
    if rest > 1e-9 * truth.own_mas.powi(2) {
        lines.push((
            "what no line of the session's budget has".to_owned(),
            rest.sqrt(),
        ));
    }
    lines.push(("the space value itself".to_owned(), truth.u_mas));
    let total: f64 = lines.iter().map(|it| it.1 * it.1).sum();
    lines
        .into_iter()
        .map(|(cause, sigma_mas)| CauseRecord {
            cause,
            sigma_mas,
            share: sigma_mas * sigma_mas / total,
        })
        .collect()
}

#[cfg(test)]
#[expect(clippy::float_cmp, reason = "exact by construction")]
mod tests {
    use super::*;

    // Source: Student's t, 0.975 and 0.841345, with five degrees of freedom: 2.5706 and 1.1105
    // (common tables; GUM table G.2 has 2.57 and 1.11).
    #[test]
    fn degrees_of_freedom_come_back_from_the_intervals() {
        let quantity = |half_68: f64, half_95: f64| ShapeQuantity {
            sigma: Some(half_68),
            interval_95: Some([8.0 - half_95, 8.0 + half_95]),
            ..ShapeQuantity::not_separated("mas", "")
        };
        let five = degrees_of(&quantity(1.1105, 2.5706));
        assert!((five - 5.0).abs() < 0.01, "{five}");
        assert!((sigma_factor(5.0) - 1.1105).abs() < 5e-5);
        assert_eq!(degrees_of(&quantity(1.0, 1.9599)), f64::INFINITY);
        assert_eq!(degrees_of(&quantity(1.0, 50.0)), 2.0);
    }
}
