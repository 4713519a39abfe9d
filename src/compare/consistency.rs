//! Means, distances and differences of the values of one quantity, with what they share.

use super::Item;
use crate::consensus::correlated::{self, CorrelatedFit, Dark};
use crate::consensus::{ConsensusError, student};
use crate::footing::{Observable, Platform};
use crate::result::comparison::{
    ConsensusRecord, DifferenceRecord, EquivalenceRecord, PairwiseRecord, PlatformRecord,
    WithoutRecord,
};
use crate::result::record::{Quantity, WarningRecord};
use nalgebra::DMatrix;

/// Fewest values whose dark uncertainty is worth its name.
const FEW: usize = 5;

/// The values of one quantity.
pub(super) struct Set<'a> {
    pub(super) items: &'a [Item],
    pub(super) observable: Observable,
    /// Places of its values among the items.
    pub(super) places: Vec<usize>,
}

impl<'a> Set<'a> {
    pub(super) fn new(items: &'a [Item], observable: Observable, places: Vec<usize>) -> Self {
        Self {
            items,
            observable,
            places,
        }
    }

    /// The unit in which values are shown.
    pub(super) fn unit(&self) -> &'static str {
        Item::unit(self.observable).0
    }

    /// What divides mas into that unit.
    pub(super) fn per(&self) -> f64 {
        Item::unit(self.observable).1
    }

    pub(super) fn platform(&self, place: usize) -> Platform {
        self.items[place].published.platform
    }

    /// Places of the values of a platform.
    pub(super) fn of_platform(&self, platform: Platform) -> Vec<usize> {
        let mut places = self.places.clone();
        places.retain(|&it| self.platform(it) == platform);
        places
    }

    /// Values at some places, mas.
    pub(super) fn values(&self, places: &[usize]) -> Vec<f64> {
        places
            .iter()
            .map(|&it| self.items[it].carried.value_mas)
            .collect()
    }

    /// Their covariance, mas^2.
    pub(super) fn covariance(&self, places: &[usize]) -> DMatrix<f64> {
        let carried = |i: usize| &self.items[places[i]].carried;
        DMatrix::from_fn(places.len(), places.len(), |i, j| {
            if i == j {
                carried(i).sigma_mas().powi(2)
            } else {
                carried(i).covariance(carried(j))
            }
        })
    }

    /// One mean of the values at some places.
    pub(super) fn fit(
        &self,
        places: &[usize],
        dark: Dark,
    ) -> Result<CorrelatedFit, ConsensusError> {
        let ones = DMatrix::from_element(places.len(), 1, 1.0);
        correlated::fit(&self.values(places), &self.covariance(places), &ones, dark)
    }

    /// A fit of one mean as a record.
    pub(super) fn record(&self, method: &str, fit: &CorrelatedFit, dark: Dark) -> ConsensusRecord {
        let per = self.per();
        let se = fit.se(&[1.0]);
        let interval = if dark == Dark::None {
            let half = student::normal_quantile(0.95) * se;
            [fit.values[0] - half, fit.values[0] + half]
        } else {
            fit.interval_95(&[1.0])
        };
        let scatter = match dark {
            Dark::None => fit.birge.map(|it| it * se),
            _ => (fit.degrees > 0).then_some(fit.scatter * se),
        };
        ConsensusRecord {
            method: method.to_owned(),
            values: fit.weights.ncols(),
            mean: Quantity::measured(fit.values[0] / per, se / per, self.unit()),
            interval_95: Some(interval.map(|it| it / per)),
            sigma_by_scatter_mas: scatter,
            dark_mas: (dark != Dark::None).then_some(fit.tau),
            q: (fit.degrees > 0).then_some(fit.q),
            degrees: fit.degrees,
            birge: fit.birge,
            p: fit.p,
            weights: fit.weights.iter().copied().collect(),
        }
    }

    /// The mean of all values by three methods, the last with the interval to quote.
    pub(super) fn consensus(&self) -> Result<Vec<ConsensusRecord>, ConsensusError> {
        [
            ("weighted mean, Birge", Dark::None),
            ("DerSimonian-Laird", Dark::DerSimonianLaird),
            ("Paule-Mandel, Hartung-Knapp", Dark::PauleMandel),
        ]
        .into_iter()
        .map(|(method, dark)| Ok(self.record(method, &self.fit(&self.places, dark)?, dark)))
        .collect()
    }

    pub(super) fn platforms(&self) -> Result<Vec<PlatformRecord>, ConsensusError> {
        Platform::ALL
            .into_iter()
            .map(|platform| (platform, self.of_platform(platform)))
            .filter(|it| !it.1.is_empty())
            .map(|(platform, places)| {
                let fit = self.fit(&places, Dark::PauleMandel)?;
                Ok(PlatformRecord {
                    platform: platform.word().to_owned(),
                    consensus: self.record("Paule-Mandel, Hartung-Knapp", &fit, Dark::PauleMandel),
                    places,
                })
            })
            .collect()
    }

    /// Ground minus space from all values, with one dark uncertainty for both.
    pub(super) fn ground_minus_space(&self) -> Result<DifferenceRecord, ConsensusError> {
        let mut places = self.of_platform(Platform::Ground);
        let ground = places.len();
        places.extend(self.of_platform(Platform::Space));
        let what = "ground minus space, means of all values";
        if ground == 0 || ground == places.len() {
            let missing = if ground == 0 { "the ground" } else { "space" };
            return Ok(no_difference(
                what,
                &format!("there is no value from {missing}"),
            ));
        }
        let design = DMatrix::from_fn(places.len(), 2, |row, column| {
            f64::from(u8::from((row < ground) == (column == 0)))
        });
        let fit = correlated::fit(
            &self.values(&places),
            &self.covariance(&places),
            &design,
            Dark::PauleMandel,
        )?;
        let factors = [1.0, -1.0];
        let se = fit.scatter * fit.se(&factors);
        let degrees = if fit.degrees > 0 {
            fit.degrees as f64
        } else {
            f64::INFINITY
        };
        Ok(difference(what, fit.values[0] - fit.values[1], se, degrees))
    }

    pub(super) fn equivalence(&self) -> Result<Vec<EquivalenceRecord>, ConsensusError> {
        if self.places.len() < 2 {
            return Ok(Vec::new());
        }
        let fit = self.fit(&self.places, Dark::PauleMandel)?;
        let ones = DMatrix::from_element(self.places.len(), 1, 1.0);
        let found = correlated::equivalence(
            &fit,
            &self.values(&self.places),
            &self.covariance(&self.places),
            &ones,
        )?;
        Ok(self
            .places
            .iter()
            .zip(found)
            .map(|(&place, it)| EquivalenceRecord {
                place,
                difference_mas: it.difference,
                expanded_mas: it.expanded,
                normalised: (it.expanded > 0.0).then(|| it.normalised()),
            })
            .collect())
    }

    pub(super) fn pairwise(&self) -> Vec<PairwiseRecord> {
        let v = self.covariance(&self.places);
        let x = self.values(&self.places);
        let mut out = Vec::new();
        for i in 0..x.len() {
            for j in i + 1..x.len() {
                let variance = v[(i, i)] + v[(j, j)] - 2.0 * v[(i, j)];
                let sigma_mas = if variance > 0.0 { variance.sqrt() } else { 0.0 };
                out.push(PairwiseRecord {
                    first: self.places[i],
                    second: self.places[j],
                    difference_mas: x[i] - x[j],
                    sigma_mas,
                    correlation: v[(i, j)] / (v[(i, i)] * v[(j, j)]).sqrt(),
                    normalised: (x[i] - x[j]) / (2.0 * sigma_mas),
                });
            }
        }
        out
    }

    pub(super) fn without(&self) -> Result<Vec<WithoutRecord>, ConsensusError> {
        if self.places.len() < 3 {
            return Ok(Vec::new());
        }
        let all = self.fit(&self.places, Dark::PauleMandel)?;
        self.places
            .iter()
            .map(|&place| {
                let rest: Vec<usize> = self
                    .places
                    .iter()
                    .copied()
                    .filter(|it| *it != place)
                    .collect();
                let fit = self.fit(&rest, Dark::PauleMandel)?;
                Ok(WithoutRecord {
                    place,
                    mean: Quantity::measured(
                        fit.values[0] / self.per(),
                        fit.se(&[1.0]) / self.per(),
                        self.unit(),
                    ),
                    dark_mas: fit.tau,
                    change_mas: fit.values[0] - all.values[0],
                })
            })
            .collect()
    }
}

/// A difference with its interval by Student's t and what could have been shown.
pub(super) fn difference(what: &str, value: f64, sigma: f64, degrees: f64) -> DifferenceRecord {
    let half = student::quantile(0.95, degrees) * sigma;
    DifferenceRecord {
        what: what.to_owned(),
        difference: Quantity::measured(value, sigma, "mas"),
        interval_95_mas: Some([value - half, value + half]),
        smallest_shown_mas: Some(half),
        found_in_95_mas: Some(student::effect_found(0.95, degrees) * sigma),
    }
}

/// No difference, and why.
pub(super) fn no_difference(what: &str, reason: &str) -> DifferenceRecord {
    DifferenceRecord {
        what: what.to_owned(),
        difference: Quantity::missing("mas", reason),
        interval_95_mas: None,
        smallest_shown_mas: None,
        found_in_95_mas: None,
    }
}

/// What a reader must know of the values of one quantity.
pub(super) fn warn(set: &Set<'_>, consensus: &[ConsensusRecord], into: &mut Vec<WarningRecord>) {
    let quantity = set.observable.word();
    let mut say = |code: &str, text: String| {
        into.push(WarningRecord {
            code: code.to_owned(),
            text,
        });
    };
    if set.places.len() < FEW {
        say(
            "few_values",
            format!(
                "{} values of the {quantity}: their dark uncertainty is hardly known; quote the interval by Hartung and Knapp.",
                set.places.len()
            ),
        );
    }
    let negative = consensus
        .last()
        .is_some_and(|it| it.weights.iter().any(|w| *w < 0.0));
    if negative {
        say(
            "negative_weight",
            format!(
                "A value of the {quantity} has a weight below zero: errors shared within a group are large and unequal, and the mean may lie outside the values."
            ),
        );
    }
    let doubtful = set
        .places
        .iter()
        .filter(|&&it| {
            let carried = &set.items[it].carried;
            carried.footing_mas() > carried.random_mas.hypot(carried.systematic_mas)
        })
        .count();
    if doubtful > 0 {
        say(
            "footing_dominates",
            format!(
                "{doubtful} values of the {quantity} owe more of their uncertainty to the footing than to their own measurement."
            ),
        );
    }
}
