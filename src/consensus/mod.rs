//! Statistics of values that should agree and may not: means, dark uncertainty, degrees of
//! equivalence, trends and pairs.
//!
//! Functions take slices of [`Value`] in one unit and give everything in that unit. Nothing here
//! knows of the Sun. Values that share a cause of error go through [`correlated`], all others through
//! [`weighted_mean`] and [`random_effects()`].
//!
//! | question | function |
//! |----------|----------|
//! | the mean, and whether the values agree | [`weighted_mean`] |
//! | the mean when they do not | [`random_effects()`] |
//! | who is off, and from whom | [`equivalence_of_consistent`], [`equivalence_of_inconsistent`], [`pairwise`] |
//! | who decides the answer | [`leave_one_out`] |
//! | the same with shared causes of error, or by groups | [`correlated::fit`] |
//! | the smallest trend a series can show | [`trend::limits`] |
//! | differences at common epochs | [`pairs::paired`], [`pairs::unpaired`] |
//! | scatter between and within laboratories | [`between::consistency`] |
//! | combined uncertainty and its degrees of freedom | [`propagate::covariance`], [`propagate::combined`] |

pub mod between;
pub mod correlated;
mod equivalence;
mod mean;
pub mod pairs;
pub mod propagate;
mod random_effects;
pub mod student;
pub mod trend;

pub use equivalence::{
    Equivalence, PairDifference, equivalence_of_consistent, equivalence_of_inconsistent, pairwise,
};
pub use mean::{WeightedMean, weighted_mean};
pub use random_effects::{Method, RandomEffects, leave_one_out, random_effects};

/// A value and its standard uncertainty, in one unit.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Value {
    /// Best estimate.
    pub value: f64,
    /// Standard uncertainty.
    pub u: f64,
}

impl Value {
    /// A value and its standard uncertainty.
    pub const fn new(value: f64, u: f64) -> Self {
        Self { value, u }
    }
}

/// Why there is no statistic.
#[derive(Clone, Copy, Debug, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum ConsensusError {
    /// Too few values.
    #[error("{found} values; {what} needs at least {needed}")]
    TooFew {
        /// What was asked.
        what: &'static str,
        /// Values found.
        found: usize,
        /// Values needed.
        needed: usize,
    },
    /// A value is not a finite number.
    #[error("value {place} is {found}; allowed are finite numbers")]
    NotFinite {
        /// Place in the list, from 1.
        place: usize,
        /// What was found.
        found: f64,
    },
    /// An uncertainty is not a finite number above zero.
    #[error(
        "the standard uncertainty of value {place} is {found}; allowed are finite numbers above 0"
    )]
    Uncertainty {
        /// Place in the list, from 1.
        place: usize,
        /// What was found.
        found: f64,
    },
    /// Two lists that belong together differ in length.
    #[error("{what}: {found} entries beside {needed} values; they must be equally many")]
    Lengths {
        /// Which list.
        what: &'static str,
        /// Entries found.
        found: usize,
        /// Entries needed.
        needed: usize,
    },
    /// The covariance has no inverse, or the columns of the design are not independent.
    #[error("{what} is singular; {cure}")]
    Singular {
        /// Which matrix.
        what: &'static str,
        /// What to do.
        cure: &'static str,
    },
    /// All epochs are the same, so there is no slope.
    #[error("all {found} epochs are the same; a slope needs at least two different ones")]
    OneEpoch {
        /// Epochs found.
        found: usize,
    },
    /// A number is outside its range.
    #[error("{what} is {found}; allowed is {lowest} to {highest}")]
    OutOfRange {
        /// What it is.
        what: &'static str,
        /// Value found.
        found: f64,
        /// Smallest value allowed.
        lowest: f64,
        /// Largest value allowed.
        highest: f64,
    },
}

/// Refuses too short a list, and values and uncertainties that are no numbers.
fn check(values: &[Value], what: &'static str, needed: usize) -> Result<(), ConsensusError> {
    if values.len() < needed {
        let found = values.len();
        return Err(ConsensusError::TooFew {
            what,
            found,
            needed,
        });
    }
    for (it, place) in values.iter().zip(1..) {
        if !it.value.is_finite() {
            let found = it.value;
            return Err(ConsensusError::NotFinite { place, found });
        }
        if !(it.u.is_finite() && it.u > 0.0) {
            return Err(ConsensusError::Uncertainty { place, found: it.u });
        }
    }
    Ok(())
}
