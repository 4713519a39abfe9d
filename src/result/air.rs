//! The record of the air alone: what `truelimb seeing` says, in the names its files keep.

use super::record::{FloorRecord, Quantity, SeeingRecord, SourceFile, WarningRecord};
use serde::{Deserialize, Serialize};

/// Version of the layout of `seeing.json`.
pub const AIR_SCHEMA_VERSION: u32 = 1;

/// One sequence's air.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct AirSequence {
    /// Index of the sequence in the session file, from 0.
    pub sequence: usize,
    /// Kind, as in the session file.
    pub kind: String,
    /// First and last mid-exposure, UTC.
    pub time_utc: [String; 2],
    /// Frames read.
    pub frames_read: usize,
    /// Frames whose limb was used.
    pub frames_used: usize,
    /// True zenith distance at mid sequence, degrees.
    pub zenith_true_deg: f64,
    /// Fried's parameter at 500 nm at the zenith, by the motion of the limb.
    pub r0_motion: Quantity,
    /// Fried's parameter at 500 nm at the zenith, by the width of the limb.
    pub r0_blur: Quantity,
    /// Long-exposure image size at the observing wavelength, towards the Sun.
    pub fwhm: Quantity,
    /// Coherence time at 500 nm towards the Sun.
    pub coherence_time: Quantity,
    /// Floor of one coefficient of m = 2 in one frame, predicted from the seeing, mas at 1 AU.
    pub floor: Quantity,
}

/// Everything that `truelimb seeing` says.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct AirReport {
    /// Layout of this record.
    pub schema_version: u32,
    /// Program that made it.
    pub program_version: String,
    /// Name of the station.
    pub site_name: String,
    /// First and last mid-exposure, UTC.
    pub time_utc: [String; 2],
    /// The files it was made from.
    pub created_from: Vec<SourceFile>,
    /// The settings as they were resolved.
    pub settings: serde_json::Value,
    /// The seeing of the session.
    pub seeing: SeeingRecord,
    /// The floor of every harmonic.
    pub harmonics: Vec<FloorRecord>,
    /// The sequences.
    pub sequences: Vec<AirSequence>,
    /// What a reader must know.
    pub warnings: Vec<WarningRecord>,
}

/// One frame of the time series, `seeing.ecsv`.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct AirFrame {
    /// Index of the sequence in the session file.
    pub sequence: usize,
    /// Index of the frame in its sequence.
    pub frame: usize,
    /// Mid-exposure after the session's first, s.
    pub time_s: f64,
    /// True zenith distance, degrees.
    pub zenith_deg: f64,
    /// Fried's parameter, 500 nm, towards the Sun, from the power of the harmonics m >= 5 of this frame
    /// alone, m.
    pub r0_motion_m: Option<f64>,
    /// The same from the limb's width, m.
    pub r0_blur_m: Option<f64>,
    /// Mean radius less the sequence's mean, mas at 1 AU.
    pub radius_mas: f64,
    /// Coefficient of cos 2 theta on the detector, less the sequence's mean, mas at 1 AU.
    pub cos2_mas: f64,
    /// Coefficient of sin 2 theta on the detector, less the sequence's mean, mas at 1 AU.
    pub sin2_mas: f64,
}
