//! Slopes of the series: in time, and against a covariate.

use crate::consensus::correlated::{self, Dark};
use crate::consensus::student;
use crate::result::combined::SlopeRecord;
use crate::result::record::Quantity;
use nalgebra::DMatrix;

/// The values and what is known of their errors.
#[derive(Clone, Copy, Debug)]
pub(super) struct About<'a> {
    pub(super) values: &'a [f64],
    pub(super) covariance: &'a DMatrix<f64>,
    pub(super) unit: &'a str,
}

/// Least number of values of a line with an error by scatter.
const LEAST: usize = 3;

impl About<'_> {
    /// The straight line against a regressor, with dark uncertainty about it.
    pub(super) fn slope(&self, against: &str, per: &str, at: &[f64]) -> SlopeRecord {
        let unit = format!("{}/{per}", self.unit);
        if at.len() < LEAST {
            let reason = format!("{} sessions; a slope needs at least {LEAST}", at.len());
            return none(against, &unit, &reason);
        }
        let middle = at.iter().sum::<f64>() / at.len() as f64;
        let reach = at.iter().map(|it| (it - middle).abs());
        if !(reach.fold(0.0, |a: f64, b| if b > a { b } else { a }) > 1e-9) {
            return none(against, &unit, "it is the same for all sessions");
        }
        let design = DMatrix::from_fn(
            at.len(),
            2,
            |k, c| if c == 0 { 1.0 } else { at[k] - middle },
        );
        let fit = match correlated::fit(self.values, self.covariance, &design, Dark::PauleMandel) {
            Ok(it) => it,
            Err(it) => return none(against, &unit, &it.to_string()),
        };
        let degrees = fit.degrees as f64;
        let [intercept, slope] = [[1.0, 0.0], [0.0, 1.0]].map(|it| fit.scatter * fit.se(&it));
        let quantile = student::quantile(0.95, degrees);
        let one = student::quantile(0.682_689_492, degrees);
        let value = fit.values[1];
        SlopeRecord {
            against: against.to_owned(),
            at: middle,
            value: Quantity::measured(fit.values[0], one * intercept, self.unit),
            slope: Quantity::measured(value, one * slope, &unit),
            interval_95: Some([value - quantile * slope, value + quantile * slope]),
            limit_95: Some(quantile * slope),
            found_in_95_percent: Some(student::effect_found(0.95, degrees) * slope),
            dark: fit.tau,
            reason: None,
        }
    }
}

/// A slope that cannot be had.
pub(super) fn none(against: &str, unit: &str, reason: &str) -> SlopeRecord {
    SlopeRecord {
        against: against.to_owned(),
        at: 0.0,
        value: Quantity::missing(unit, reason),
        slope: Quantity::missing(unit, reason),
        interval_95: None,
        limit_95: None,
        found_in_95_percent: None,
        dark: 0.0,
        reason: Some(reason.to_owned()),
    }
}
