//! Whatever stops a run, with where it happened.

use crate::air::AirError;
use crate::calibrate::CalibrateError;
use crate::disk::DiskError;
use crate::drift::DriftError;
use crate::frames::FitsError;
use crate::limb::LimbError;
use crate::optics::OpticsError;
use crate::report::ReportError;
use crate::scan::ScanError;
use crate::seeing::SeeingError;
use crate::session::SessionError;
use crate::session::weather::WeatherError;
use crate::shape::ShapeError;
use crate::sky::SkyError;
use std::path::PathBuf;

/// Anything that stops a run.
#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum Error {
    /// The session file cannot be used.
    #[error(transparent)]
    Session(#[from] SessionError),
    /// A FITS file cannot be used.
    #[error(transparent)]
    Fits(#[from] FitsError),
    /// Dark, flat or bad pixels cannot be used.
    #[error("calibration: {0}")]
    Calibrate(#[from] CalibrateError),
    /// The weather cannot be used.
    #[error("weather: {0}")]
    Weather(#[from] WeatherError),
    /// The air model has no answer.
    #[error("air: {0}")]
    Air(#[from] AirError),
    /// A time or the Sun's place cannot be had.
    #[error("time and place: {0}")]
    Sky(#[from] SkyError),
    /// The model of the Sun's disk has no answer.
    #[error("model of the disk: {0}")]
    Disk(#[from] DiskError),
    /// The model of the blurred limb has no answer.
    #[error("model of the limb: {0}")]
    Optics(#[from] OpticsError),
    /// No limb.
    #[error("limb: {0}")]
    Limb(#[from] LimbError),
    /// The seeing has no answer.
    #[error("seeing: {0}")]
    Seeing(#[from] SeeingError),
    /// No shape.
    #[error("shape: {0}")]
    Shape(#[from] ShapeError),
    /// The report cannot be drawn.
    #[error("report: {0}")]
    Report(#[from] ReportError),
    /// A sequence gave no frame with a limb.
    #[error("sequence {}: no frame has a usable limb: {reason}", sequence + 1)]
    NoFrames {
        /// Index in the session file.
        sequence: usize,
        /// What was wrong with the first frame.
        reason: String,
    },
    /// A drift says nothing of scale and angle.
    #[error("sequence {}, a drift: {source}", sequence + 1)]
    Drift {
        /// Index in the session file.
        sequence: usize,
        /// Why.
        source: DriftError,
    },
    /// A scan gives no limb.
    #[error("sequence {}, a scan: {source}", sequence + 1)]
    Scan {
        /// Index in the session file.
        sequence: usize,
        /// Why.
        source: ScanError,
    },
    /// The session has no sequence of whole disks.
    #[error(
        "the session has no sequence of kind \"burst\" or \"roll\", from which the shape is measured; add one under [[sequence]]"
    )]
    NoSequence,
    /// The mask image cannot be used.
    #[error("{}: mask image: {found}: {cure}", path.display())]
    MaskImage {
        /// The file.
        path: PathBuf,
        /// What was found, and what is allowed.
        found: String,
        /// What to do.
        cure: String,
    },
    /// A file could not be written or read.
    #[error("{}: {what}: {reason}", path.display())]
    File {
        /// The file.
        path: PathBuf,
        /// What was tried.
        what: &'static str,
        /// What the system said.
        reason: String,
    },
    /// A folder or file that should hold a result does not.
    #[error("{}: no result that can be used: {found}\n  cure     {cure}", path.display())]
    NotAResult {
        /// The file.
        path: PathBuf,
        /// What was found.
        found: String,
        /// What to do.
        cure: String,
    },
    /// A record could not be put into text.
    #[error("{what}: {source}")]
    Record {
        /// Which.
        what: &'static str,
        /// What the library said.
        source: serde_json::Error,
    },
}
