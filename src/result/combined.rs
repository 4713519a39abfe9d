//! The records of `combined.json`: many sessions as one value and as a series.

use super::record::{ByLaw, Quantity, Status, WarningRecord};
use serde::{Deserialize, Serialize};

/// Version of the layout of `combined.json`.
pub const COMBINED_VERSION: u32 = 1;

/// Everything in `combined.json`.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Combined {
    /// Layout of this file.
    pub schema_version: u32,
    /// Program that made it.
    pub program_version: String,
    /// The answer in one sentence.
    pub summary: String,
    /// The sessions, in the order of time.
    pub sessions: Vec<SessionEntry>,
    /// Oblateness, mas at 1 AU.
    pub oblateness: CombinedQuantity,
    /// Radius, arcsec at 1 AU.
    pub radius: CombinedQuantity,
    /// Oblateness beyond the figure of surface rotation, by each law, from the combined value.
    pub excess_by_law: Vec<ByLaw>,
    /// What a reader must know.
    pub warnings: Vec<WarningRecord>,
}

/// One session.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct SessionEntry {
    /// Name of the station.
    pub site_name: String,
    /// First and last mid-exposure, UTC.
    pub time_utc: [String; 2],
    /// Middle of the session, Julian year.
    pub epoch_year: f64,
    /// Version of the program that reduced it.
    pub program_version: String,
    /// SHA-256 over the checksums of the files that it was made from.
    pub input_sha256: String,
    /// The covariate at its epoch, where one was given.
    #[serde(skip_serializing_if = "Option::is_none", default)]
    pub covariate: Option<f64>,
}

/// One session's part in a combined value.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct SeriesPoint {
    /// Index in `sessions`.
    pub session: usize,
    /// Middle of the session, Julian year.
    pub epoch_year: f64,
    /// Its value.
    pub value: Option<f64>,
    /// Its whole standard uncertainty.
    pub sigma: Option<f64>,
    /// What of it no other session shares.
    pub sigma_own: Option<f64>,
    /// Weight in the mean.
    pub weight: Option<f64>,
    /// Value minus the mean.
    pub residual: Option<f64>,
    /// Measured, or not separated.
    pub status: Status,
    /// Why it is not in the mean.
    #[serde(skip_serializing_if = "Option::is_none", default)]
    pub reason: Option<String>,
}

/// A line of the budget that sessions have in common.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct SharedLine {
    /// Name of the line.
    pub term: String,
    /// `instrument`, `model`, or the line's own scope where it was declared common.
    pub scope: String,
    /// Station whose sessions share it; none where all do.
    #[serde(skip_serializing_if = "Option::is_none", default)]
    pub site_name: Option<String>,
    /// Sessions that have it.
    pub sessions: usize,
    /// Its standard uncertainty in the mean.
    pub sigma: f64,
}

/// A mean by one published method, from the sessions' own uncertainties.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct MeanBy {
    /// Name of the method.
    pub method: String,
    /// Mean.
    pub value: f64,
    /// Its standard uncertainty without what is shared.
    pub sigma: f64,
    /// Dark uncertainty: scatter between sessions beyond what they state.
    pub dark: Option<f64>,
}

/// Whether the sessions agree.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Heterogeneity {
    /// Weighted sum of squared residuals.
    pub q: f64,
    /// Its degrees of freedom.
    pub degrees: usize,
    /// Probability of as much by chance.
    pub p: Option<f64>,
    /// Birge ratio.
    pub birge: Option<f64>,
    /// Dark uncertainty in the mean that is stated.
    pub dark: f64,
}

/// A slope in the series.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct SlopeRecord {
    /// Against what.
    pub against: String,
    /// Value of the regressor at which `value` stands.
    pub at: f64,
    /// The fitted value there.
    pub value: Quantity,
    /// The slope.
    pub slope: Quantity,
    /// Its 95 percent interval.
    pub interval_95: Option<[f64; 2]>,
    /// Smallest slope that would differ from zero at 95 percent.
    pub limit_95: Option<f64>,
    /// Slope that such a series finds in 95 percent of cases.
    pub found_in_95_percent: Option<f64>,
    /// Dark uncertainty about the line.
    pub dark: f64,
    /// Why there is no slope.
    #[serde(skip_serializing_if = "Option::is_none", default)]
    pub reason: Option<String>,
}

/// One quantity over all sessions.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct CombinedQuantity {
    /// Best estimate and half the width of its 68 percent interval.
    pub mean: Quantity,
    /// What of its standard uncertainty the sessions do not share.
    pub sigma_own: Option<f64>,
    /// What they share: more sessions never lower it.
    pub sigma_shared: Option<f64>,
    /// The 68 percent interval.
    pub interval_68: Option<[f64; 2]>,
    /// The 95 percent interval.
    pub interval_95: Option<[f64; 2]>,
    /// Sessions in the mean.
    pub sessions_used: usize,
    /// Whether the sessions agree.
    pub heterogeneity: Option<Heterogeneity>,
    /// The mean by other methods.
    pub by_method: Vec<MeanBy>,
    /// Lines of the budget that sessions have in common.
    pub shared: Vec<SharedLine>,
    /// Slope in time, per year.
    pub trend: SlopeRecord,
    /// Slope against the covariate, where one was given.
    #[serde(skip_serializing_if = "Option::is_none", default)]
    pub covariate: Option<SlopeRecord>,
    /// The series.
    pub series: Vec<SeriesPoint>,
}
