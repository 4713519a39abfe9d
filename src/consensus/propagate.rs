//! Uncertainty carried through a calculation.
//!
//! # Model
//!
//! ```text
//! cov y = J cov x J',   nu_eff = u^4 / sum (u_i^4 / nu_i)   with u^2 = sum u_i^2
//! ```
//!
//! # Valid for
//!
//! First order: functions that are straight lines over the uncertainties of their inputs. The
//! effective degrees of freedom suppose independent contributions.
//!
//! # Accuracy
//!
//! That of the arithmetic.
//!
//! # Source
//!
//! JCGM 100:2008 (GUM), 5.2 and annex G.4 (Welch-Satterthwaite).

use super::ConsensusError;
use nalgebra::DMatrix;

/// Covariance of results from that of the inputs: `jacobian[i][j]` is the change of result `i` with
/// input `j`.
///
/// # Errors
///
/// [`ConsensusError::Lengths`] when the two do not belong together.
pub fn covariance(
    jacobian: &DMatrix<f64>,
    of_inputs: &DMatrix<f64>,
) -> Result<DMatrix<f64>, ConsensusError> {
    for (what, found) in [
        ("rows of the covariance", of_inputs.nrows()),
        ("columns of the covariance", of_inputs.ncols()),
    ] {
        if found != jacobian.ncols() {
            return Err(ConsensusError::Lengths {
                what,
                found,
                needed: jacobian.ncols(),
            });
        }
    }
    Ok(jacobian * of_inputs * jacobian.transpose())
}

/// One cause of uncertainty.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Contribution {
    /// Standard uncertainty in the result.
    pub u: f64,
    /// Its degrees of freedom; infinity where it is known.
    pub degrees: f64,
}

/// The combined standard uncertainty of independent contributions, with its effective degrees of
/// freedom.
pub fn combined(contributions: &[Contribution]) -> Contribution {
    let square: f64 = contributions.iter().map(|it| it.u * it.u).sum();
    let fourth: f64 = contributions
        .iter()
        .map(|it| it.u.powi(4) / it.degrees)
        .sum();
    Contribution {
        u: square.sqrt(),
        degrees: square * square / fourth,
    }
}
