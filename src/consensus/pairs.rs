//! Two series of values compared: by differences at common epochs, and by their means.
//!
//! # Model
//!
//! ```text
//! paired     d_i = x_i - y_i,   u^2(d_i) = u^2(x_i) + u^2(y_i) - 2 cov(x_i, y_i)
//!            d = sum d_i / n,   s_d^2 = sum (d_i - d)^2 / (n - 1),   |d| > t s_d / sqrt n
//! unpaired   u^2(x - y) = (s_x^2 + s_c^2) / n_x + (s_y^2 + s_c^2) / n_y
//! ```
//!
//! with `s_c` what both share from epoch to epoch: it drops out of the pairs. A systematic common to
//! all epochs does not average and is added at the end.
//!
//! # Valid for
//!
//! Independent epochs. Each value goes into one pair at most.
//!
//! # Accuracy
//!
//! That of the arithmetic.
//!
//! # Source
//!
//! The paired t test, common practice, no source.

use super::{ConsensusError, Value, check, student};

/// The mean of differences at common epochs.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Paired {
    /// Plain mean of the differences.
    pub difference: f64,
    /// Standard error by the scatter of the differences, with `u_shared`; null for one pair.
    pub u_by_scatter: Option<f64>,
    /// Standard error by the stated uncertainties of the differences, with `u_shared`.
    pub u_stated: f64,
    /// 95 percent interval: by scatter and Student's t where there are pairs enough, otherwise by the
    /// stated uncertainties and the normal law.
    pub interval_95: [f64; 2],
    /// Pairs.
    pub pairs: usize,
}

/// The mean of differences `d_i`, with a systematic uncertainty common to all of them.
///
/// # Errors
///
/// [`ConsensusError`] for an empty list, and for values or uncertainties that are no numbers.
pub fn paired(differences: &[Value], u_shared: f64) -> Result<Paired, ConsensusError> {
    check(differences, "a mean of pairs", 1)?;
    if !(u_shared.is_finite() && u_shared >= 0.0) {
        return Err(ConsensusError::OutOfRange {
            what: "the uncertainty common to all pairs",
            found: u_shared,
            lowest: 0.0,
            highest: f64::INFINITY,
        });
    }
    let n = differences.len() as f64;
    let difference = differences.iter().map(|it| it.value).sum::<f64>() / n;
    let stated = differences.iter().map(|it| it.u * it.u).sum::<f64>().sqrt() / n;
    let scatter = (differences.len() > 1).then(|| {
        let squares: f64 = differences
            .iter()
            .map(|it| (it.value - difference).powi(2))
            .sum();
        (squares / (n - 1.0) / n).sqrt()
    });
    let random_half = match scatter {
        // Two or three pairs may lie closer together than they should.
        Some(it) if it > stated => it * student::quantile(0.95, n - 1.0),
        _ => stated * student::normal_quantile(0.95),
    };
    let half = random_half.hypot(student::normal_quantile(0.95) * u_shared);
    Ok(Paired {
        difference,
        u_by_scatter: scatter.map(|it| it.hypot(u_shared)),
        u_stated: stated.hypot(u_shared),
        interval_95: [difference - half, difference + half],
        pairs: differences.len(),
    })
}

/// Standard deviation of one epoch's value in each of two series, and what both share.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Scatter {
    /// Of the first series alone.
    pub first: f64,
    /// Of the second series alone.
    pub second: f64,
    /// Of the true value from epoch to epoch.
    pub common: f64,
}

impl Scatter {
    /// Standard error of the mean difference of `n` pairs.
    pub fn of_pairs(&self, n: usize) -> f64 {
        self.first.hypot(self.second) / (n as f64).sqrt()
    }

    /// Standard error of the difference of two means over epochs of their own.
    pub fn of_means(&self, first: usize, second: usize) -> f64 {
        let one = self.first.hypot(self.common) / (first as f64).sqrt();
        one.hypot(self.second.hypot(self.common) / (second as f64).sqrt())
    }

    /// Error of unpaired means over that of pairs, for equally many epochs.
    pub fn gain_of_pairs(&self) -> f64 {
        let own = self.first * self.first + self.second * self.second;
        (1.0 + 2.0 * self.common * self.common / own).sqrt()
    }
}

/// The difference of the plain means of two series and its standard error by their scatter.
///
/// # Errors
///
/// [`ConsensusError`] for a series of fewer than two values, and for values that are no numbers.
pub fn unpaired(first: &[Value], second: &[Value]) -> Result<Value, ConsensusError> {
    let (a, b) = (scattered_mean(first)?, scattered_mean(second)?);
    Ok(Value::new(a.value - b.value, a.u.hypot(b.u)))
}

fn scattered_mean(values: &[Value]) -> Result<Value, ConsensusError> {
    check(values, "a mean by scatter", 2)?;
    let n = values.len() as f64;
    let mean = values.iter().map(|it| it.value).sum::<f64>() / n;
    let squares: f64 = values.iter().map(|it| (it.value - mean).powi(2)).sum();
    Ok(Value::new(mean, (squares / (n - 1.0) / n).sqrt()))
}

/// Pairs of epochs no farther apart than `window`, the nearest first, each epoch used once; the pairs
/// in the order of the first list.
pub fn matched(first: &[f64], second: &[f64], window: f64) -> Vec<(usize, usize)> {
    let mut near: Vec<(f64, usize, usize)> = first
        .iter()
        .enumerate()
        .flat_map(|(i, a)| {
            second
                .iter()
                .enumerate()
                .map(move |(j, b)| ((a - b).abs(), i, j))
        })
        .filter(|it| it.0 <= window)
        .collect();
    near.sort_by(|a, b| a.0.total_cmp(&b.0).then((a.1, a.2).cmp(&(b.1, b.2))));
    let (mut taken, mut other) = (vec![false; first.len()], vec![false; second.len()]);
    let mut pairs = Vec::new();
    for (_, i, j) in near {
        if !taken[i] && !other[j] {
            (taken[i], other[j]) = (true, true);
            pairs.push((i, j));
        }
    }
    pairs.sort_unstable();
    pairs
}
