//! The record of a plan: what `truelimb plan` says, in the names its files keep.

use super::record::{Quantity, SourceFile, WarningRecord};
use serde::{Deserialize, Serialize};

/// Version of the layout of `plan.json`.
pub const PLAN_SCHEMA_VERSION: u32 = 1;

/// One quarter of an hour; its numbers hold at its middle.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct PlanRow {
    /// When it begins, UTC.
    pub time_utc: String,
    /// True zenith distance of the Sun's centre, degrees.
    pub zenith_true_deg: f64,
    /// Apparent zenith distance, degrees.
    pub zenith_apparent_deg: f64,
    /// Azimuth from north through east, degrees.
    pub azimuth_deg: f64,
    /// Position angle of the zenith at the Sun, positive west of the meridian, degrees.
    pub parallactic_deg: f64,
    /// Position angle of the solar north pole, degrees.
    pub axis_deg: f64,
    /// Angle of the solar axis from the vertical, -90 to 90 degrees: position angle of the pole minus
    /// that of the zenith.
    pub axis_from_vertical_deg: f64,
    /// Mean apparent minus true radius, mas as seen.
    pub radius_change_mas: f64,
    /// Horizontal minus vertical radius by the air, mas as seen.
    pub flattening_mas: f64,
    /// Its standard uncertainty by weather, wavelength, formula and tilted layers.
    pub flattening_sigma_mas: f64,
    /// One coefficient of m = 2 in one frame, by turbulence, mas at 1 AU.
    pub frame_mas: Option<f64>,
    /// Frames a second beyond which frames are no longer independent in m = 2.
    pub frames_per_s: Option<f64>,
    /// Random error of the oblateness after an hour like this, the instrument told apart, mas.
    pub sigma_random_mas: Option<f64>,
    /// Systematic error of the same.
    pub sigma_systematic_mas: Option<f64>,
    /// Both.
    pub sigma_mas: Option<f64>,
    /// What speaks against this quarter.
    #[serde(skip_serializing_if = "Option::is_none", default)]
    pub note: Option<String>,
}

/// The turbulence that the plan stands on.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct PlannedSeeing {
    /// Fried's parameter at 500 nm, zenith.
    pub r0_m: f64,
    /// Whether it was given, or is the typical one.
    pub given: bool,
    /// Wind in all layers.
    pub wind_m_s: f64,
    /// Outer scale.
    pub outer_scale_m: f64,
    /// Heights above the telescope and shares of the turbulence.
    pub layers: Vec<PlannedLayer>,
}

/// A layer of the turbulence.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct PlannedLayer {
    /// Height above the telescope.
    pub height_m: f64,
    /// Share of the turbulence.
    pub share: f64,
}

/// One position of the instrument in the schedule.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct PlannedRoll {
    /// From when, UTC.
    pub from_utc: String,
    /// Until when, UTC.
    pub to_utc: String,
    /// `roll_deg` of the sequences in it.
    pub roll_deg: f64,
}

/// A number of positions of the instrument at its best, for choosing.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct RollChoice {
    /// Turns of the instrument between positions.
    pub moves: usize,
    /// Degrees from position to position.
    pub step_deg: f64,
    /// Begin of its best window, UTC.
    pub from_utc: String,
    /// Whether the oblateness is told apart from the instrument.
    pub separated: bool,
    /// Condition number of Sun and instrument; null where it is not measured.
    pub condition_number: Option<f64>,
    /// Random error of the oblateness, mas; null where it is not separated.
    pub sigma_random_mas: Option<f64>,
    /// Systematic error.
    pub sigma_systematic_mas: Option<f64>,
}

/// The best stretch of the day and what it gives.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct PlannedWindow {
    /// From when to when, UTC.
    pub time_utc: [String; 2],
    /// Its length.
    pub hours: f64,
    /// Largest and smallest true zenith distance in it, degrees.
    pub zenith_true_deg: [f64; 2],
    /// Expected error of the oblateness; the value is not known before.
    pub sigma: Quantity,
    /// Its random part, mas.
    pub sigma_random_mas: f64,
    /// Its systematic part, mas.
    pub sigma_systematic_mas: f64,
    /// Expected error of the radius, mas.
    pub sigma_radius_mas: f64,
    /// Expected error of `R c4`, mas.
    pub sigma_p4_mas: f64,
    /// The positions of the instrument, in order.
    pub rolls: Vec<PlannedRoll>,
    /// Turns between them.
    pub moves: usize,
    /// Condition number of Sun and instrument.
    pub condition_number: Option<f64>,
    /// Frames a second that the error was worked out for, mean of the window.
    pub frames_per_s: f64,
    /// Frames in all.
    pub frames: f64,
    /// Lines of the expected error, mas of the oblateness.
    pub budget: Vec<PlannedLine>,
}

/// A line of the expected error.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct PlannedLine {
    /// Its name, as in `result.json`.
    pub term: String,
    /// Standard uncertainty of the oblateness, mas.
    pub sigma_mas: f64,
    /// random or systematic.
    pub kind: String,
}

/// A goal for the error of the oblateness.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct PlannedGoal {
    /// The error wanted, mas.
    pub goal_mas: f64,
    /// Hours like those of the window, or why no number of them will do.
    pub hours: Quantity,
    /// Days with as many hours as this one offers below the limit of zenith distance.
    pub days: Option<f64>,
}

/// How to set filter and exposure.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct PlannedCamera {
    /// Wavelength of the filter's centre.
    pub centre_nm: f64,
    /// Full width of the filter as the session has it.
    pub width_nm: f64,
    /// Flattening that dispersion over this width leaves in the limb by its blur, low end of the window,
    /// mas.
    pub smear_flattening_mas: f64,
    /// Widest filter for which that stays below the limit.
    pub widest_nm: f64,
    /// The limit.
    pub smear_limit_mas: f64,
    /// Longest exposure that freezes the image, s.
    pub longest_exposure_s: f64,
    /// Exposure that the error was worked out for, s.
    pub exposure_s: f64,
    /// Counts of the disk's brightest pixels to aim at; null where the saturation is not known.
    pub peak_adu: Option<[f64; 2]>,
    /// Share of photon noise in the variance of one frame's m = 2 at that light; null as above.
    pub photon_share: Option<f64>,
    /// The advice in words.
    pub advice: Vec<String>,
}

/// A plan for one day.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Plan {
    /// Layout of this record.
    pub schema_version: u32,
    /// Program that made it.
    pub program_version: String,
    /// Name of the station.
    pub site_name: String,
    /// The day, by the Sun at the station.
    pub date: String,
    /// One sentence.
    pub summary: String,
    /// What it was made from, frames that are already there not among it.
    pub created_from: Vec<SourceFile>,
    /// The settings as they were resolved.
    pub settings: serde_json::Value,
    /// The turbulence it stands on.
    pub seeing: PlannedSeeing,
    /// The quarters of the day, the Sun well above the horizon.
    pub quarters: Vec<PlanRow>,
    /// Hours of the day in which the shape can be measured.
    pub usable_hours: f64,
    /// The best stretch; null where the shape cannot be measured that day.
    pub window: Option<PlannedWindow>,
    /// Numbers of positions compared, each at its best.
    pub choices: Vec<RollChoice>,
    /// The goals.
    pub goals: Vec<PlannedGoal>,
    /// Filter and exposure; null as the window.
    pub camera: Option<PlannedCamera>,
    /// What must be heeded at the telescope.
    pub cautions: Vec<String>,
    /// What a reader must know.
    pub warnings: Vec<WarningRecord>,
}
