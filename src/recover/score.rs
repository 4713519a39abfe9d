//! How well injected shapes came back.

use crate::result::record::Quantity;
use crate::result::recovery::{Coverage, Recovered, Score, Trial};
use statrs::distribution::{Beta, ContinuousCDF};

/// The exact 95 percent interval of a share, of `held` in `of` (Clopper & Pearson 1934, Biometrika 26,
/// 404); none of none.
///
/// ```
/// let [low, high] = truelimb::recover::clopper_pearson(0, 10).unwrap_or_default();
/// assert!(low == 0.0 && (high - (1.0 - 0.025_f64.powf(0.1))).abs() < 1e-9);
/// ```
pub fn clopper_pearson(held: usize, of: usize) -> Option<[f64; 2]> {
    if of == 0 || held > of {
        return None;
    }
    let (k, n) = (held as f64, of as f64);
    let low = if held == 0 {
        0.0
    } else {
        Beta::new(k, n - k + 1.0).ok()?.inverse_cdf(0.025)
    };
    let high = if held == of {
        1.0
    } else {
        Beta::new(k + 1.0, n - k).ok()?.inverse_cdf(0.975)
    };
    Some([low, high])
}

fn coverage(held: usize, of: usize) -> Coverage {
    Coverage {
        held,
        of,
        share: (of > 0).then(|| held as f64 / of as f64),
        interval_95: clopper_pearson(held, of),
    }
}

/// The answers to one injected oblateness, or to all.
pub(super) fn recovered(injected_mas: Option<f64>, trials: &[Trial]) -> Recovered {
    let own: Vec<&Trial> = trials
        .iter()
        .filter(|it| injected_mas.is_none_or(|mas| it.injected_mas.to_bits() == mas.to_bits()))
        .collect();
    let count = |test: &dyn Fn(&Trial) -> bool| own.iter().filter(|it| test(it)).count();
    Recovered {
        injected_mas,
        made: own.len(),
        answered: count(&|it| it.oblateness.value.is_some()),
        refused: count(&|it| it.failed.is_none() && it.oblateness.value.is_none()),
        failed: count(&|it| it.failed.is_some()),
        oblateness: score(
            "mas",
            own.iter()
                .map(|it| (&it.oblateness, it.oblateness_intervals, it.injected_mas)),
        ),
        radius: score(
            "arcsec",
            own.iter()
                .map(|it| (&it.radius, it.radius_intervals, it.injected_radius_arcsec)),
        ),
    }
}

fn mean(of: &[f64]) -> f64 {
    of.iter().sum::<f64>() / of.len() as f64
}

/// Standard deviation about a mean.
fn deviation(of: &[f64]) -> Option<f64> {
    let middle = mean(of);
    let squares: f64 = of.iter().map(|it| (it - middle).powi(2)).sum();
    (of.len() > 1).then(|| (squares / (of.len() - 1) as f64).sqrt())
}

fn score<'a>(
    unit: &str,
    answers: impl Iterator<Item = (&'a Quantity, Option<[[f64; 2]; 2]>, f64)>,
) -> Score {
    let mut difference = Vec::new();
    let mut sigma = Vec::new();
    let mut held = [0; 2];
    for (it, intervals, truth) in answers {
        let (Some(value), Some(stated), Some(intervals)) = (it.value, it.sigma, intervals) else {
            continue;
        };
        difference.push(value - truth);
        sigma.push(stated);
        for (held, [low, high]) in held.iter_mut().zip(intervals) {
            *held += usize::from((low..=high).contains(&truth));
        }
    }
    let n = difference.len();
    let scatter = deviation(&difference);
    let pulls: Vec<f64> = difference.iter().zip(&sigma).map(|(d, s)| d / s).collect();
    Score {
        bias: match scatter {
            Some(it) => Quantity::measured(mean(&difference), it / (n as f64).sqrt(), unit),
            None => Quantity::missing(unit, "fewer than two answers"),
        },
        scatter,
        mean_sigma: (n > 0).then(|| mean(&sigma)),
        pull_width: deviation(&pulls),
        coverage_68: coverage(held[0], n),
        coverage_95: coverage(held[1], n),
    }
}

/// Recovered over injected difference of the largest and the smallest oblateness.
pub(super) fn gain(trials: &[Trial]) -> Quantity {
    let injected = || trials.iter().map(|it| it.injected_mas);
    let (low, high) = (
        injected().fold(f64::INFINITY, |a, b| if b < a { b } else { a }),
        injected().fold(f64::NEG_INFINITY, |a, b| if b > a { b } else { a }),
    );
    let of = |mas: f64| -> Option<(f64, f64)> {
        let found: Vec<f64> = trials
            .iter()
            .filter(|it| it.injected_mas.to_bits() == mas.to_bits())
            .filter_map(|it| it.oblateness.value)
            .collect();
        let error = deviation(&found)? / (found.len() as f64).sqrt();
        Some((mean(&found), error))
    };
    if !(high > low) {
        return Quantity::missing("1", "one injected value");
    }
    match of(low).zip(of(high)) {
        Some((a, b)) => {
            let span = high - low;
            Quantity::measured((b.0 - a.0) / span, a.1.hypot(b.1) / span, "1")
        }
        None => Quantity::missing("1", "fewer than two answers to one of the values"),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Source: closed forms of the interval at the ends, `1 - (a/2)^(1/n)`; the middle one, 5 of 10,
    /// 0.1871 to 0.8129: scipy 1, `scipy.stats.binomtest(5, 10).proportion_ci(method="exact")`.
    #[test]
    fn exact_intervals_of_a_share() {
        for n in [1_usize, 7, 40] {
            let end = 0.025_f64.powf(1.0 / n as f64);
            let [low, high] = clopper_pearson(0, n).unwrap();
            assert!(low.abs() < 1e-15 && (high - (1.0 - end)).abs() < 1e-9);
            let [low, high] = clopper_pearson(n, n).unwrap();
            assert!((high - 1.0).abs() < 1e-15 && (low - end).abs() < 1e-9);
        }
        let [low, high] = clopper_pearson(5, 10).unwrap();
        assert!((low - 0.187_086).abs() < 1e-6 && (high - 0.812_914).abs() < 1e-6);
        let [low, high] = clopper_pearson(109, 160).unwrap();
        assert!((low - 0.6030455).abs() < 1e-6 && (high - 0.7525935).abs() < 1e-6);
        assert!(clopper_pearson(0, 0).is_none());
    }

    fn trial(injected_mas: f64, value: f64, sigma: f64) -> Trial {
        Trial {
            seed: 0,
            injected_mas,
            oblateness: Quantity::measured(value, sigma, "mas"),
            oblateness_intervals: Some([
                [value - sigma, value + sigma],
                [value - 2.0 * sigma, value + 2.0 * sigma],
            ]),
            injected_radius_arcsec: 959.8,
            radius: Quantity::missing("arcsec", "none"),
            radius_intervals: None,
            failed: None,
        }
    }

    #[test]
    fn bias_scatter_and_coverage_by_hand() {
        let trials = [
            trial(0.0, 1.0, 2.0),
            trial(0.0, 3.0, 2.0),
            trial(0.0, -5.0, 2.0),
            trial(8.0, 8.0, 2.0),
            trial(8.0, 10.0, 2.0),
        ];
        let it = recovered(Some(0.0), &trials);
        assert_eq!((it.made, it.answered, it.refused), (3, 3, 0));
        let found = &it.oblateness;
        assert!((found.bias.value.unwrap() + 1.0 / 3.0).abs() < 1e-12);
        // Deviations 4/3, 10/3, -14/3: squares add up to 312/9.
        assert!((found.scatter.unwrap() - (312.0_f64 / 18.0).sqrt()).abs() < 1e-12);
        assert_eq!((found.coverage_68.held, found.coverage_95.held), (1, 2));
        assert_eq!(it.radius.coverage_68.of, 0);
        let all = recovered(None, &trials);
        assert_eq!(all.oblateness.coverage_95.of, 5);
        let gain = gain(&trials);
        assert!((gain.value.unwrap() - (9.0 + 1.0 / 3.0) / 8.0).abs() < 1e-12);
    }
}
