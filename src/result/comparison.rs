//! The record of `comparison.json`: results and published values on one footing.
//!
//! Values of the radius are in arcsec, those of the oblateness in mas, both at 1 AU with B0 = 0;
//! differences, steps and dark uncertainties are in mas. Places in lists count from 0.

use super::record::{Quantity, SourceFile, WarningRecord};
use serde::{Deserialize, Serialize};

/// Version of the layout of `comparison.json`.
pub const COMPARISON_VERSION: u32 = 1;

/// Where all values were carried to.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct FootingRecord {
    /// Definition of the limb.
    pub definition: String,
    /// Wavelength, nm.
    pub wavelength_nm: f64,
    /// Blur, full width at half maximum, arcsec; null where the definition does not feel it.
    pub blur_fwhm_arcsec: Option<f64>,
    /// Scale of the tangential optical depth at the Sun's edge, km.
    pub edge_scale_km: f64,
    /// Its standard uncertainty, km.
    pub edge_scale_sigma_km: f64,
}

/// A value as it was published.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct PublishedRecord {
    /// The value.
    pub value: f64,
    /// Its random standard uncertainty.
    pub sigma_random: f64,
    /// Its systematic standard uncertainty.
    pub sigma_systematic: f64,
    /// Unit of the three.
    pub unit: String,
    /// `radius` or `diameter`.
    pub of: String,
    /// Definition of the limb.
    pub definition: String,
    /// Blur, full width at half maximum, arcsec.
    pub blur_fwhm_arcsec: Option<f64>,
    /// Distance as seen, au; null where the value is brought to 1 AU.
    pub distance_au: Option<f64>,
    /// Heliographic latitude of the disk's centre, degrees.
    pub b0_deg: Option<f64>,
}

/// A value on the common footing.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct CommonRecord {
    /// The value.
    pub value: f64,
    /// The value by geometry alone, before the limb's model.
    pub geometric: f64,
    /// Standard uncertainty.
    pub sigma: f64,
    /// Random part.
    pub sigma_random: f64,
    /// Systematic part, as published.
    pub sigma_systematic: f64,
    /// What the steps add.
    pub sigma_footing: f64,
    /// Unit of all of them.
    pub unit: String,
}

/// One step towards the footing.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct StepRecord {
    /// What is done.
    pub step: String,
    /// What it adds, mas.
    pub change_mas: f64,
    /// Standard uncertainty that it brings, mas.
    pub sigma_mas: f64,
    /// The value after it, in the unit of the common value.
    pub after: f64,
    /// How, in words.
    pub how: String,
}

/// One value of the comparison.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct ComparedValue {
    /// What it is called.
    pub label: String,
    /// `result` of this program, or `published`.
    pub kind: String,
    /// `ground`, `balloon` or `space`.
    pub platform: String,
    /// Epoch as written.
    pub epoch: String,
    /// Its middle, MJD.
    pub mjd: f64,
    /// Wavelength, nm.
    pub wavelength_nm: f64,
    /// `radius` or `oblateness`.
    pub quantity: String,
    /// Values of one group share their systematic error.
    pub group: Option<String>,
    /// A remark.
    pub note: String,
    /// As published.
    pub published: PublishedRecord,
    /// On the common footing.
    pub common: CommonRecord,
    /// How it got there.
    pub steps: Vec<StepRecord>,
}

/// A mean of several values by one method.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct ConsensusRecord {
    /// Which method.
    pub method: String,
    /// How many values.
    pub values: usize,
    /// The mean with its standard error.
    pub mean: Quantity,
    /// Its 95 percent interval, in the unit of the mean.
    pub interval_95: Option<[f64; 2]>,
    /// Standard error enlarged by Birge's ratio, or by Hartung and Knapp, mas.
    pub sigma_by_scatter_mas: Option<f64>,
    /// Dark uncertainty, mas.
    pub dark_mas: Option<f64>,
    /// Weighted sum of squares about the mean, without dark uncertainty.
    pub q: Option<f64>,
    /// Degrees of freedom.
    pub degrees: usize,
    /// Birge's ratio.
    pub birge: Option<f64>,
    /// Probability of so large a sum of squares if the values agree.
    pub p: Option<f64>,
    /// Share of each value in the mean; the shares add up to one.
    pub weights: Vec<f64>,
}

/// The mean of one platform.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct PlatformRecord {
    /// `ground`, `balloon` or `space`.
    pub platform: String,
    /// Places of its values in the comparison's list.
    pub places: Vec<usize>,
    /// Its mean.
    pub consensus: ConsensusRecord,
}

/// How far one value is from the consensus of all.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct EquivalenceRecord {
    /// Place of the value.
    pub place: usize,
    /// Value minus consensus, mas.
    pub difference_mas: f64,
    /// Expanded uncertainty of the difference, two standard uncertainties, mas.
    pub expanded_mas: f64,
    /// Difference over expanded uncertainty; null where the value is the whole consensus.
    pub normalised: Option<f64>,
}

/// A difference of two values.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct PairwiseRecord {
    /// Place of the first value.
    pub first: usize,
    /// Place of the second value.
    pub second: usize,
    /// First minus second, mas.
    pub difference_mas: f64,
    /// Its standard uncertainty, mas.
    pub sigma_mas: f64,
    /// Correlation of the two values.
    pub correlation: f64,
    /// Difference over two standard uncertainties: within 1 the two are compatible.
    pub normalised: f64,
}

/// The consensus without one value.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct WithoutRecord {
    /// Place of the value that was left out.
    pub place: usize,
    /// The consensus of the others.
    pub mean: Quantity,
    /// Dark uncertainty of the others, mas.
    pub dark_mas: f64,
    /// Change of the consensus, mas.
    pub change_mas: f64,
}

/// A difference with its interval.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct DifferenceRecord {
    /// What minus what.
    pub what: String,
    /// The difference, mas.
    pub difference: Quantity,
    /// Its 95 percent interval, mas.
    pub interval_95_mas: Option<[f64; 2]>,
    /// Smallest difference from zero that could have been shown at 95 percent, mas.
    pub smallest_shown_mas: Option<f64>,
    /// Difference that would have been shown in 95 of 100 such comparisons, mas.
    pub found_in_95_mas: Option<f64>,
}

/// What the session would have reported in one of its forms had the reference been the truth.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct ReportedRecord {
    /// Which form of the answer: the headline, a kept fraction, the stack, a definition.
    pub form: String,
    /// Middle of what it would have reported.
    pub predicted: f64,
    /// Standard deviation of what it would have reported.
    pub sigma: f64,
    /// What it reported.
    pub reported: f64,
    /// Share of the distribution below what it reported.
    pub share_below: f64,
    /// Unit of all but the share.
    pub unit: String,
}

/// One cause in the distribution of what would have been reported.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct CauseRecord {
    /// What it is.
    pub cause: String,
    /// Its standard deviation, mas.
    pub sigma_mas: f64,
    /// Its share of the variance, 0 to 1.
    pub share: f64,
}

/// What this session would have reported had the reference been the truth.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct ReverseRecord {
    /// The reference, in words.
    pub truth: String,
    /// The reference with its uncertainty.
    pub reference: Quantity,
    /// Middle and standard deviation of the distribution.
    pub predicted: Quantity,
    /// Its effective degrees of freedom.
    pub degrees: f64,
    /// Quantiles: share, and the value below which that share lies.
    pub quantiles: Vec<[f64; 2]>,
    /// What the session reported.
    pub reported: f64,
    /// Share of the distribution below it.
    pub share_below: f64,
    /// Share of the distribution at least as far from the middle.
    pub as_far: f64,
    /// The same in each form of the answer.
    pub forms: Vec<ReportedRecord>,
    /// What the distribution is made of.
    pub causes: Vec<CauseRecord>,
}

/// The first ground result against what was measured in space.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct ThisResult {
    /// Place of the result's value.
    pub place: usize,
    /// Result minus space.
    pub against_space: DifferenceRecord,
    /// What it would have reported had space been the truth.
    pub reverse: ReverseRecord,
}

/// One pair of values of a common epoch.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct EpochPair {
    /// Place of the value from the ground.
    pub ground: usize,
    /// Place of the value from space.
    pub space: usize,
    /// Ground minus space in time, days.
    pub days: f64,
    /// Ground minus space, mas.
    pub difference_mas: f64,
    /// Its standard uncertainty, mas.
    pub sigma_mas: f64,
}

/// Values of common epochs compared as differences.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct PairsRecord {
    /// How far apart epochs of a pair may be, days.
    pub window_days: f64,
    /// The pairs.
    pub pairs: Vec<EpochPair>,
    /// Weighted mean of the differences, with dark uncertainty.
    pub mean: Option<ConsensusRecord>,
    /// Plain mean of the differences, its error by their scatter.
    pub by_scatter: Quantity,
    /// Its 95 percent interval, mas.
    pub by_scatter_interval_95_mas: Option<[f64; 2]>,
    /// Change of the difference in time: a drift of an instrument, not of the Sun.
    pub drift: Quantity,
    /// Places of values from ground and space without a partner.
    pub left_out: Vec<usize>,
    /// Ground minus space from the values without a partner.
    pub unpaired: Quantity,
}

/// The comparison of one quantity.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct QuantityComparison {
    /// `oblateness` or `radius`.
    pub quantity: String,
    /// Unit of its values.
    pub unit: String,
    /// Places of its values in the comparison's list.
    pub places: Vec<usize>,
    /// The mean of all, by several methods; the last is the one used below.
    pub consensus: Vec<ConsensusRecord>,
    /// The mean of each platform.
    pub platforms: Vec<PlatformRecord>,
    /// Ground minus space, all values.
    pub ground_minus_space: DifferenceRecord,
    /// The first ground result against space.
    pub this_result: Option<ThisResult>,
    /// Distance of each value from the consensus.
    pub equivalence: Vec<EquivalenceRecord>,
    /// All differences of two values.
    pub pairwise: Vec<PairwiseRecord>,
    /// The consensus without each value in turn.
    pub without: Vec<WithoutRecord>,
    /// Values of common epochs.
    pub pairs: PairsRecord,
}

/// Everything in `comparison.json`.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Comparison {
    /// Layout of this file.
    pub schema_version: u32,
    /// Program that made it.
    pub program_version: String,
    /// The files it was made from.
    pub created_from: Vec<SourceFile>,
    /// Where all values were carried to.
    pub footing: FootingRecord,
    /// The values.
    pub values: Vec<ComparedValue>,
    /// Oblateness and radius, where there are values of it.
    pub quantities: Vec<QuantityComparison>,
    /// What a reader must know.
    pub warnings: Vec<WarningRecord>,
}
