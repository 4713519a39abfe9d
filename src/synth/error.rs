//! Why a session could not be made.

use std::path::{Path, PathBuf};

use crate::air::AirError;
use crate::disk::DiskError;
use crate::frames::FitsError;
use crate::optics::OpticsError;
use crate::sky::SkyError;

/// A scenario that cannot be, or a folder that cannot be written.
#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum SynthError {
    /// The text is not a scenario.
    #[error("scenario: {reason}")]
    Scenario {
        /// What the reader of TOML found.
        reason: String,
    },
    /// A number outside its range.
    #[error("scenario: {key} is {found} {unit}; allowed is {lowest} to {highest} {unit}")]
    OutOfRange {
        /// The key.
        key: String,
        /// Value found.
        found: f64,
        /// Smallest value allowed.
        lowest: f64,
        /// Largest value allowed.
        highest: f64,
        /// Unit of the three.
        unit: &'static str,
    },
    /// A list without entries.
    #[error("scenario: there is no [[{key}]]; one at least is needed")]
    Empty {
        /// The key.
        key: &'static str,
    },
    /// Sequences out of order.
    #[error(
        "scenario: sequence {sequence} starts {at_min} min after the start, but the one before ends at {before_min} min; sequences follow each other"
    )]
    Overlap {
        /// Number of the sequence, from 1.
        sequence: usize,
        /// Its start.
        at_min: f64,
        /// End of the one before.
        before_min: f64,
    },
    /// A disk that does not fit the detector.
    #[error(
        "scenario: the disk needs {needed_px:.0} px on a side, the detector has {size_px}; raise size_px or scale_arcsec_px"
    )]
    DiskTooLarge {
        /// Needed with room for pointing and sky.
        needed_px: f64,
        /// Side of the detector.
        size_px: usize,
    },
    /// A folder with a session that was not made here.
    #[error(
        "{}: holds a session.toml but no truth.json, so it was not made by a simulation; choose another folder",
        folder.display()
    )]
    NotOurs {
        /// The folder.
        folder: PathBuf,
    },
    /// The operating system refused.
    #[error("{}: cannot {action}: {source}", path.display())]
    Io {
        /// File or folder.
        path: PathBuf,
        /// What was tried.
        action: &'static str,
        /// What the system answered.
        source: std::io::Error,
    },
    /// Time or place of the Sun.
    #[error(transparent)]
    Sky(#[from] SkyError),
    /// The air.
    #[error(transparent)]
    Air(#[from] AirError),
    /// The disk.
    #[error(transparent)]
    Disk(#[from] DiskError),
    /// The optics.
    #[error(transparent)]
    Optics(#[from] OpticsError),
    /// A file of frames.
    #[error(transparent)]
    Fits(#[from] FitsError),
}

impl SynthError {
    /// For `map_err`: names what was tried on which path.
    pub(super) fn io(path: &Path, action: &'static str) -> impl FnOnce(std::io::Error) -> Self {
        let path = path.to_owned();
        move |source| Self::Io {
            path,
            action,
            source,
        }
    }
}
