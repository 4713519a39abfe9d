//! Values from ground and space at common epochs, compared as differences.

use super::consistency::Set;
use crate::consensus::correlated::{self, Dark};
use crate::consensus::pairs::{matched, paired};
use crate::consensus::{ConsensusError, Value, trend};
use crate::footing::Platform;
use crate::result::comparison::{EpochPair, PairsRecord};
use crate::result::record::Quantity;
use nalgebra::DMatrix;

/// Days of a year.
const YEAR_DAYS: f64 = 365.25;

/// Pairs the values and compares them.
pub(super) fn compare(set: &Set<'_>, window_days: f64) -> Result<PairsRecord, ConsensusError> {
    let (ground, space) = (
        set.of_platform(Platform::Ground),
        set.of_platform(Platform::Space),
    );
    let epoch = |place: &usize| set.items[*place].published.epoch.middle_mjd();
    let epochs = |places: &[usize]| places.iter().map(epoch).collect::<Vec<f64>>();
    let found: Vec<(usize, usize)> = matched(&epochs(&ground), &epochs(&space), window_days)
        .into_iter()
        .map(|(i, j)| (ground[i], space[j]))
        .collect();
    let is_paired = |place: &usize| found.iter().any(|it| it.0 == *place || it.1 == *place);
    let mut left_out: Vec<usize> = ground.iter().chain(&space).copied().collect();
    left_out.retain(|it| !is_paired(it));
    left_out.sort_unstable();
    let unpaired = without_partner(set, &left_out)?;
    if found.is_empty() {
        let reason =
            format!("no epoch from the ground is within {window_days} days of one from space");
        return Ok(PairsRecord {
            window_days,
            pairs: Vec::new(),
            mean: None,
            by_scatter: Quantity::missing("mas", &reason),
            by_scatter_interval_95_mas: None,
            drift: Quantity::missing("mas/yr", &reason),
            left_out,
            unpaired,
        });
    }
    let (differences, covariance) = differences(set, &found);
    let count = found.len();
    let pairs: Vec<EpochPair> = found
        .iter()
        .enumerate()
        .map(|(i, &(ground, space))| EpochPair {
            ground,
            space,
            days: epoch(&ground) - epoch(&space),
            difference_mas: differences[i],
            sigma_mas: covariance[(i, i)].sqrt(),
        })
        .collect();
    let ones = DMatrix::from_element(count, 1, 1.0);
    let fit = correlated::fit(&differences, &covariance, &ones, Dark::PauleMandel)?;
    let mut mean = set.record("Paule-Mandel, Hartung-Knapp", &fit, Dark::PauleMandel);
    mean.mean = Quantity::measured(fit.values[0], fit.se(&[1.0]), "mas");
    mean.interval_95 = Some(fit.interval_95(&[1.0]));
    // What all differences share does not show in their scatter.
    let shared2 = common_part(&covariance);
    let own: Vec<Value> = (0..count)
        .map(|i| {
            let variance = covariance[(i, i)] - shared2;
            Value::new(differences[i], variance.sqrt())
        })
        .collect();
    let by_scatter = paired(&own, shared2.sqrt())?;
    let sigma = by_scatter.u_by_scatter.unwrap_or(by_scatter.u_stated);
    Ok(PairsRecord {
        window_days,
        mean: Some(mean),
        by_scatter: Quantity::measured(by_scatter.difference, sigma, "mas"),
        by_scatter_interval_95_mas: Some(by_scatter.interval_95),
        drift: drift(&pairs, &own, epoch),
        pairs,
        left_out,
        unpaired,
    })
}

/// Ground minus space of each pair, and the covariance of these differences.
fn differences(set: &Set<'_>, pairs: &[(usize, usize)]) -> (Vec<f64>, DMatrix<f64>) {
    let places: Vec<usize> = pairs
        .iter()
        .map(|it| it.0)
        .chain(pairs.iter().map(|it| it.1))
        .collect();
    let n = pairs.len();
    let minus = DMatrix::from_fn(n, 2 * n, |row, column| {
        f64::from(i8::from(column == row) - i8::from(column == row + n))
    });
    let values = set.values(&places);
    let differences = (0..n).map(|i| values[i] - values[i + n]).collect();
    let covariance = &minus * set.covariance(&places) * minus.transpose();
    (differences, covariance)
}

/// Mean covariance of two differences; zero for one pair, and never so large that a difference would
/// have no error of its own.
fn common_part(covariance: &DMatrix<f64>) -> f64 {
    let n = covariance.nrows();
    if n < 2 {
        return 0.0;
    }
    let off = (covariance.sum() - covariance.trace()) / (n * (n - 1)) as f64;
    let least = covariance
        .diagonal()
        .iter()
        .copied()
        .fold(
            f64::INFINITY,
            |least, it| if it < least { it } else { least },
        );
    let most = least * (1.0 - 1e-6);
    if !(off > 0.0) {
        0.0
    } else if off > most {
        most
    } else {
        off
    }
}

/// Change of the difference in time.
fn drift(pairs: &[EpochPair], own: &[Value], epoch: impl Fn(&usize) -> f64) -> Quantity {
    let years: Vec<f64> = pairs
        .iter()
        .map(|it| 0.5 * (epoch(&it.ground) + epoch(&it.space)) / YEAR_DAYS)
        .collect();
    if pairs.len() < 3 {
        return Quantity::missing("mas/yr", "fewer than three pairs");
    }
    match trend::slope(&years, own) {
        Ok(it) => {
            let scatter = it.sigma_by_scatter.filter(|wide| *wide > it.sigma);
            Quantity::measured(it.slope, scatter.unwrap_or(it.sigma), "mas/yr")
        }
        Err(it) => Quantity::missing("mas/yr", &it.to_string()),
    }
}

/// Ground minus space from the values without a partner.
fn without_partner(set: &Set<'_>, left_out: &[usize]) -> Result<Quantity, ConsensusError> {
    let rest = Set::new(set.items, set.observable, left_out.to_vec());
    Ok(rest.ground_minus_space()?.difference)
}
