//! Means and differences of values that share causes of error: generalised least squares.
//!
//! # Model
//!
//! ```text
//! x = A b + e,   cov e = V + tau^2 1,   W = (V + tau^2 1)^(-1)
//! b = (A' W A)^(-1) A' W x,   cov b = (A' W A)^(-1),   Q = r' W r,   r = x - A b
//! dark uncertainty, zero where Q <= k - p already:
//!   Paule-Mandel        Q(tau^2) = k - p
//!   DerSimonian-Laird   tau^2 = (Q - (k - p)) / trace P,   P = W - W A (A' W A)^(-1) A' W  at tau = 0
//! distance of a value from its mean: cov r = (1 - H)(V + tau^2 1)(1 - H)',   H = A (A' W A)^(-1) A' W
//! ```
//!
//! | symbol | meaning |
//! |--------|---------|
//! | `A` | design: a column of ones for one mean, a column of 0 and 1 for each group |
//! | `V` | covariance of the values: `u_i^2` on the diagonal, what two values share beside it |
//! | `k`, `p` | number of values, of columns |
//!
//! Without anything shared and with one column it is the consensus of [`super::random_effects()`]. What is shared by
//! all values cannot be seen in their scatter and stays in the error of the mean.
//!
//! # Valid for
//!
//! Any covariance with an inverse. Shared errors that are large and very unequal give weights below
//! zero, and a mean outside the values; the weights are in the answer, so that it is seen.
//!
//! # Accuracy
//!
//! That of the arithmetic, for condition numbers up to 1e10.
//!
//! # Source
//!
//! Aitken 1935, Proc. R. Soc. Edinb. 55, 42; the moment equation as in Paule & Mandel 1982, J. Res.
//! NBS 87, 377, with the covariance in place of the variances; the standard errors by scatter as in
//! Hartung & Knapp 2001, Stat. Med. 20, 3875.

use super::mean::chi_square_tail;
use super::random_effects::falling_zero;
use super::{ConsensusError, Equivalence, student};
use nalgebra::{DMatrix, DVector};

/// How the dark uncertainty is estimated.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Dark {
    /// There is none.
    None,
    /// By moments with the weights of the stated uncertainties.
    DerSimonianLaird,
    /// By moments with the final weights.
    PauleMandel,
}

/// A fit to correlated values.
#[derive(Clone, Debug, PartialEq)]
pub struct CorrelatedFit {
    /// Dark uncertainty.
    pub tau: f64,
    /// Value of each column.
    pub values: Vec<f64>,
    /// Their covariance.
    pub covariance: DMatrix<f64>,
    /// Weight of each value (column of the matrix) in each answer (row).
    pub weights: DMatrix<f64>,
    /// Weighted sum of squared residuals without dark uncertainty.
    pub q: f64,
    /// Values less columns.
    pub degrees: usize,
    /// `sqrt(q / degrees)`; null without degrees of freedom.
    pub birge: Option<f64>,
    /// Probability of a `q` at least as large if the values agree.
    pub p: Option<f64>,
    /// Factor by which scatter enlarges the standard errors at this dark uncertainty; never below 1.
    pub scatter: f64,
}

impl CorrelatedFit {
    /// Standard error of a sum of the answers with these factors.
    pub fn se(&self, factors: &[f64]) -> f64 {
        let c = DVector::from_column_slice(factors);
        (&self.covariance * &c).dot(&c).sqrt()
    }

    /// 95 percent interval of a sum of the answers with these factors: by Student's t with the
    /// degrees of freedom of the fit, by the normal law where there are none.
    pub fn interval_95(&self, factors: &[f64]) -> [f64; 2] {
        let value: f64 = self.values.iter().zip(factors).map(|(b, c)| b * c).sum();
        let quantile = if self.degrees > 0 {
            student::quantile(0.95, self.degrees as f64)
        } else {
            student::normal_quantile(0.95)
        };
        let half = quantile * self.scatter * self.se(factors);
        [value - half, value + half]
    }
}

/// Fits the columns of `design` to values with a covariance; and the dark uncertainty.
///
/// # Errors
///
/// [`ConsensusError`] for lists that do not belong together, too few values, or a singular matrix.
pub fn fit(
    values: &[f64],
    covariance: &DMatrix<f64>,
    design: &DMatrix<f64>,
    dark: Dark,
) -> Result<CorrelatedFit, ConsensusError> {
    let (count, columns) = design.shape();
    lengths("rows of the design", count, values.len())?;
    lengths("rows of the covariance", covariance.nrows(), values.len())?;
    lengths(
        "columns of the covariance",
        covariance.ncols(),
        values.len(),
    )?;
    if columns == 0 || count < columns {
        return Err(ConsensusError::TooFew {
            what: "a fit",
            found: count,
            needed: columns.max(1),
        });
    }
    for (&found, place) in values.iter().zip(1..) {
        if !found.is_finite() {
            return Err(ConsensusError::NotFinite { place, found });
        }
    }
    let x = DVector::from_column_slice(values);
    let degrees = count - columns;
    let plain = Solved::at(&x, covariance, design, 0.0)?;
    let excess = plain.q - degrees as f64;
    let tau2 = match dark {
        // Without degrees of freedom there is no scatter, only rounding.
        _ if degrees == 0 || !(excess > 0.0) => 0.0,
        Dark::None => 0.0,
        Dark::DerSimonianLaird => excess / plain.trace,
        Dark::PauleMandel => dark_variance(&x, covariance, design, degrees)?,
    };
    let final_fit = if tau2 > 0.0 {
        Solved::at(&x, covariance, design, tau2)?
    } else {
        plain.clone()
    };
    let scatter = if degrees > 0 {
        (final_fit.q / degrees as f64).sqrt()
    } else {
        1.0
    };
    Ok(CorrelatedFit {
        tau: tau2.sqrt(),
        values: final_fit.answer.iter().copied().collect(),
        covariance: final_fit.covariance,
        weights: final_fit.weights,
        q: plain.q,
        degrees,
        birge: (degrees > 0).then(|| (plain.q / degrees as f64).sqrt()),
        p: chi_square_tail(plain.q, degrees),
        scatter: if scatter > 1.0 { scatter } else { 1.0 },
    })
}

/// One mean of values with a covariance, with dark uncertainty by Paule and Mandel.
///
/// # Errors
///
/// As [`fit`].
pub fn mean(values: &[f64], covariance: &DMatrix<f64>) -> Result<CorrelatedFit, ConsensusError> {
    let ones = DMatrix::from_element(values.len(), 1, 1.0);
    fit(values, covariance, &ones, Dark::PauleMandel)
}

/// How far each value is from what the fit says of it, with the expanded uncertainty of the distance.
///
/// # Errors
///
/// [`ConsensusError::Lengths`] when the lists are not those of the fit.
pub fn equivalence(
    fit: &CorrelatedFit,
    values: &[f64],
    covariance: &DMatrix<f64>,
    design: &DMatrix<f64>,
) -> Result<Vec<Equivalence>, ConsensusError> {
    let count = fit.weights.ncols();
    lengths("values", values.len(), count)?;
    lengths("rows of the design", design.nrows(), count)?;
    lengths("columns of the design", design.ncols(), fit.values.len())?;
    lengths("rows of the covariance", covariance.nrows(), count)?;
    lengths("columns of the covariance", covariance.ncols(), count)?;
    let one = DMatrix::<f64>::identity(count, count);
    let off = &one - design * &fit.weights;
    let total = covariance + one * (fit.tau * fit.tau);
    let spread = &off * total * off.transpose();
    let residual = &off * DVector::from_column_slice(values);
    Ok((0..count)
        .map(|i| Equivalence::new(residual[i], spread[(i, i)]))
        .collect())
}

fn lengths(what: &'static str, found: usize, needed: usize) -> Result<(), ConsensusError> {
    if found == needed {
        Ok(())
    } else {
        Err(ConsensusError::Lengths {
            what,
            found,
            needed,
        })
    }
}

fn dark_variance(
    x: &DVector<f64>,
    covariance: &DMatrix<f64>,
    design: &DMatrix<f64>,
    degrees: usize,
) -> Result<f64, ConsensusError> {
    let goal = degrees as f64;
    let excess =
        |tau2: f64| Ok::<f64, ConsensusError>(Solved::at(x, covariance, design, tau2)?.q - goal);
    // Q falls with tau^2: double until it is below the goal.
    let mut high = x.iter().map(|it| it * it).sum::<f64>() * 1e-12 + covariance.trace() / goal;
    while excess(high)? > 0.0 {
        high *= 2.0;
    }
    Ok(falling_zero(high, |tau2| excess(tau2).unwrap_or(f64::NAN)))
}

/// The fit at one dark variance.
#[derive(Clone)]
struct Solved {
    answer: DVector<f64>,
    covariance: DMatrix<f64>,
    weights: DMatrix<f64>,
    q: f64,
    /// Trace of what projects on the residuals.
    trace: f64,
}

impl Solved {
    fn at(
        x: &DVector<f64>,
        covariance: &DMatrix<f64>,
        design: &DMatrix<f64>,
        tau2: f64,
    ) -> Result<Self, ConsensusError> {
        let total = covariance + DMatrix::identity(x.len(), x.len()) * tau2;
        let root = total.cholesky().ok_or(ConsensusError::Singular {
            what: "the covariance of the values",
            cure: "give each value a random uncertainty of its own",
        })?;
        let weighted = root.solve(design);
        let normal =
            (design.transpose() * &weighted)
                .cholesky()
                .ok_or(ConsensusError::Singular {
                    what: "the design",
                    cure: "each group needs a value of its own",
                })?;
        let weights = normal.solve(&weighted.transpose());
        let answer = &weights * x;
        let residual = x - design * &answer;
        let q = residual.dot(&root.solve(&residual));
        let trace = root.inverse().trace() - (&weighted * &weights).trace();
        Ok(Self {
            answer,
            covariance: normal.inverse(),
            weights,
            q,
            trace,
        })
    }
}
