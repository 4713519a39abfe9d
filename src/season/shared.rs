//! What sessions have in common: lines of their budgets.

use super::Which;
use crate::result::combined::SharedLine;
use crate::result::record::{BudgetLine, Record};
use nalgebra::DMatrix;
use std::collections::BTreeMap;

/// The common lines of some sessions.
#[derive(Clone, Debug)]
pub(super) struct Shared {
    /// By name and station (empty: all): scope, and each session's standard uncertainty.
    lines: BTreeMap<(String, String), (String, Vec<f64>)>,
    count: usize,
}

impl Shared {
    /// The lines that sessions share.
    pub(super) fn new(which: Which, records: &[&Record], declared: &[String]) -> Self {
        let mut lines: BTreeMap<(String, String), (String, Vec<f64>)> = BTreeMap::new();
        let count = records.len();
        for (k, record) in records.iter().enumerate() {
            for it in &record.budget {
                let station = match it.scope.as_str() {
                    _ if declared.contains(&it.term) => "",
                    "model" => "",
                    "instrument" => record.site_name.as_str(),
                    _ => continue,
                };
                let sigma = sigma_of(which, it);
                if !(sigma > 0.0) {
                    continue;
                }
                let (_, sigmas) = lines
                    .entry((it.term.clone(), station.to_owned()))
                    .or_insert_with(|| (it.scope.clone(), vec![0.0; count]));
                // Two lines of one name in a budget are independent of each other.
                sigmas[k] = sigmas[k].hypot(sigma);
            }
        }
        // A line of one session alone is nobody else's.
        lines.retain(|_, it| it.1.iter().filter(|it| **it > 0.0).count() > 1);
        Self { lines, count }
    }

    /// What of each session's uncertainty is its own.
    pub(super) fn own(&self, sigmas: &[f64]) -> Vec<f64> {
        sigmas
            .iter()
            .enumerate()
            .map(|(k, sigma)| {
                let common: f64 = self.lines.values().map(|it| it.1[k].powi(2)).sum();
                let own = sigma * sigma - common;
                // The stated sigma holds the lines; rounding must not make it less than nothing.
                let least = 1e-6 * sigma * sigma;
                if own > least { own } else { least }.sqrt()
            })
            .collect()
    }

    /// Covariance of the values.
    pub(super) fn covariance(&self, sigmas: &[f64]) -> DMatrix<f64> {
        let own = self.own(sigmas);
        let mut out = self.common();
        for (k, it) in own.iter().enumerate() {
            out[(k, k)] += it * it;
        }
        out
    }

    /// Covariance by the common lines alone.
    fn common(&self) -> DMatrix<f64> {
        DMatrix::from_fn(self.count, self.count, |i, j| {
            self.lines.values().map(|it| it.1[i] * it.1[j]).sum()
        })
    }

    /// What a sum of the values with these weights has of the common lines.
    pub(super) fn in_mean(&self, weights: &[f64]) -> f64 {
        let of = |sigmas: &[f64]| -> f64 { sigmas.iter().zip(weights).map(|(s, w)| s * w).sum() };
        self.lines
            .values()
            .map(|it| of(&it.1).powi(2))
            .sum::<f64>()
            .sqrt()
    }

    /// The lines with what each leaves in the mean.
    pub(super) fn lines(&self, weights: &[f64]) -> Vec<SharedLine> {
        self.lines
            .iter()
            .map(|((term, station), (scope, sigmas))| SharedLine {
                term: term.clone(),
                scope: scope.clone(),
                site_name: (!station.is_empty()).then(|| station.clone()),
                sessions: sigmas.iter().filter(|it| **it > 0.0).count(),
                sigma: sigmas
                    .iter()
                    .zip(weights)
                    .map(|(s, w)| s * w)
                    .sum::<f64>()
                    .abs(),
            })
            .collect()
    }
}

/// Standard uncertainty of a line in the unit of the quantity.
fn sigma_of(which: Which, it: &BudgetLine) -> f64 {
    match which {
        Which::Oblateness => it.sigma_mas.unwrap_or(0.0),
        Which::Radius => it.sigma_radius_mas / 1000.0,
    }
}
