//! Noise of the disk's centre: part of it white, part correlated in time.
//!
//! # Model
//!
//! ```text
//! cov(t_i, t_j) = s^2 [(1 - f) delta_ij + f exp(-|t_i - t_j| / tau)]
//! ```
//!
//! `s` the standard deviation of one centre, `f` the correlated share, `tau` its time. The series is
//! whitened by the filter of this first-order process, in order of time, at a cost that grows with the
//! number of frames alone.
//!
//! # Valid for
//!
//! Times in ascending order.
//!
//! # Accuracy
//!
//! Equal to the whitening by the whole covariance matrix to rounding (its test). Turbulence is not a
//! first-order process; within the times of a drift the two are told apart by no series.
//!
//! # Source
//!
//! R. E. Kalman, J. Basic Engineering 82, 35 (1960).

/// Correlation of a series in time.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Correlation {
    /// Correlated share of the variance, 0 to 1.
    pub(super) share: f64,
    /// Its time, s.
    pub(super) tau_s: f64,
}

/// The columns with the correlation taken out, and the logarithm of the covariance's determinant, both
/// for unit variance.
pub(super) fn whitened(
    times_s: &[f64],
    it: Correlation,
    columns: &[Vec<f64>],
) -> (Vec<Vec<f64>>, f64) {
    let mut out: Vec<Vec<f64>> = columns
        .iter()
        .map(|column| Vec::with_capacity(column.len()))
        .collect();
    let mut means = vec![0.0; columns.len()];
    let mut variance = it.share;
    let mut log_determinant = 0.0;
    let mut last_s = times_s.first().copied().unwrap_or(0.0);
    for (k, &time_s) in times_s.iter().enumerate() {
        let kept = (-(time_s - last_s) / it.tau_s).exp();
        last_s = time_s;
        variance = kept * kept * variance + it.share * (1.0 - kept * kept);
        let total = variance + (1.0 - it.share);
        log_determinant += total.ln();
        let gain = variance / total;
        let root = total.sqrt();
        for ((mean, column), out) in means.iter_mut().zip(columns).zip(&mut out) {
            let predicted = kept * *mean;
            let news = column[k] - predicted;
            out.push(news / root);
            *mean = predicted + gain * news;
        }
        variance *= 1.0 - gain;
    }
    (out, log_determinant)
}

#[cfg(test)]
mod tests {
    use super::*;
    use nalgebra::{DMatrix, DVector};

    /// The slow twin: the covariance matrix in full.
    #[test]
    fn the_filter_whitens_as_the_matrix_does() {
        let times: Vec<f64> = vec![0.0, 0.4, 1.1, 1.2, 3.0, 3.3, 7.0];
        let values: Vec<f64> = vec![0.3, -0.2, 1.0, 0.9, -0.4, 0.1, 0.6];
        let it = Correlation {
            share: 0.7,
            tau_s: 1.3,
        };
        let n = times.len();
        let matrix = DMatrix::from_fn(n, n, |i, j| {
            let apart: f64 = times[i] - times[j];
            it.share * (-apart.abs() / it.tau_s).exp() + if i == j { 1.0 - it.share } else { 0.0 }
        });
        let vector = DVector::from_vec(values.clone());
        let quadratic =
            (vector.transpose() * matrix.clone().cholesky().unwrap().solve(&vector))[(0, 0)];
        let (white, log_determinant) = whitened(&times, it, &[values]);
        let sum: f64 = white[0].iter().map(|v| v * v).sum();
        assert!((sum - quadratic).abs() < 1e-12, "{sum} {quadratic}");
        assert!((log_determinant - matrix.determinant().ln()).abs() < 1e-12);
    }
}
