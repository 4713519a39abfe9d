//! The records of `recovery.json`: known shapes injected, and what was recovered.

use super::record::Quantity;
use serde::{Deserialize, Serialize};

/// Version of the layout of `recovery.json`.
pub const RECOVERY_VERSION: u32 = 1;

/// Everything in `recovery.json`.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Recovery {
    /// Layout of this file.
    pub schema_version: u32,
    /// Program that made it.
    pub program_version: String,
    /// Seed of everything random.
    pub seed: u64,
    /// The scenario that was made, without the injected oblateness.
    pub scenario: serde_json::Value,
    /// What of the session could not be taken over, and what was taken in its place.
    pub notes: Vec<String>,
    /// By injected oblateness.
    pub by_injected: Vec<Recovered>,
    /// All of them together.
    pub together: Recovered,
    /// Recovered over injected difference of the largest and the smallest oblateness.
    pub gain: Quantity,
    /// Every made session.
    pub trials: Vec<Trial>,
}

/// How well one quantity came back.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Score {
    /// Mean of recovered minus true, with its standard error.
    pub bias: Quantity,
    /// Standard deviation of recovered minus true.
    pub scatter: Option<f64>,
    /// Mean of the stated sigmas.
    pub mean_sigma: Option<f64>,
    /// Standard deviation of the differences, each over its stated sigma.
    pub pull_width: Option<f64>,
    /// Share of the 68 percent intervals that hold the truth.
    pub coverage_68: Coverage,
    /// Share of the 95 percent intervals that hold the truth.
    pub coverage_95: Coverage,
}

/// A share with its exact binomial interval.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Coverage {
    /// Intervals that hold the truth.
    pub held: usize,
    /// Intervals.
    pub of: usize,
    /// The share.
    pub share: Option<f64>,
    /// Its 95 percent interval (Clopper and Pearson).
    pub interval_95: Option<[f64; 2]>,
}

/// The trials of one injected oblateness, or all.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Recovered {
    /// Injected oblateness, mas; null for all together.
    pub injected_mas: Option<f64>,
    /// Sessions made.
    pub made: usize,
    /// Of these, answered.
    pub answered: usize,
    /// Refused: the oblateness not separated.
    pub refused: usize,
    /// Failed, by the sentence of the first.
    pub failed: usize,
    /// The oblateness, mas.
    pub oblateness: Score,
    /// The radius, arcsec.
    pub radius: Score,
}

/// One made session.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Trial {
    /// Its seed.
    pub seed: u64,
    /// Injected oblateness, mas.
    pub injected_mas: f64,
    /// Recovered oblateness, mas.
    pub oblateness: Quantity,
    /// The 68 and the 95 percent interval of the oblateness.
    pub oblateness_intervals: Option<[[f64; 2]; 2]>,
    /// Injected radius, arcsec.
    pub injected_radius_arcsec: f64,
    /// Recovered radius, arcsec.
    pub radius: Quantity,
    /// The 68 and the 95 percent interval of the radius.
    pub radius_intervals: Option<[[f64; 2]; 2]>,
    /// Why the session failed as a whole.
    #[serde(skip_serializing_if = "Option::is_none", default)]
    pub failed: Option<String>,
}
