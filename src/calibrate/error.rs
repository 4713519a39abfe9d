//! Why raw frames cannot be calibrated.

use std::path::PathBuf;

use crate::frames::FitsError;

/// Why there is no calibration.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum CalibrateError {
    /// A file cannot be read.
    #[error("{what}: {source}")]
    File {
        /// `dark`, `flat` or `bad pixels`.
        what: &'static str,
        /// What is wrong with it.
        source: FitsError,
    },
    /// A calibration image of another size than the frames.
    #[error(
        "{}: the {what} has {found_width} x {found_height} pixels, the frames {width} x {height}",
        path.display()
    )]
    ImageSize {
        /// The file.
        path: PathBuf,
        /// `dark`, `flat` or `bad pixels`.
        what: &'static str,
        /// Columns of the image.
        found_width: usize,
        /// Rows of the image.
        found_height: usize,
        /// Columns of the frames.
        width: usize,
        /// Rows of the frames.
        height: usize,
    },
    /// A frame of another size than the calibration.
    #[error("a frame of {width} x {height} pixels with a calibration of {columns} x {rows}")]
    Size {
        /// Columns of the frame.
        width: usize,
        /// Rows of the frame.
        height: usize,
        /// Columns of the calibration.
        columns: usize,
        /// Rows of the calibration.
        rows: usize,
    },
    /// The flat shows no light.
    #[error("the flat is {level_adu} ADU above its dark in its bright part; it must be brighter")]
    NoLight {
        /// Its level, in ADU.
        level_adu: f64,
    },
    /// A number of the detector that cannot be meant.
    #[error("{name} is {found}; it must be {needed}")]
    Detector {
        /// Which.
        name: &'static str,
        /// As given.
        found: f64,
        /// What is allowed.
        needed: &'static str,
    },
}
