//! A line detector that stands still while the Sun drifts over it: every row of its image is a line in time.
//!
//! | file | what |
//! |------|------|
//! | `find` | the disk on the image of lines |
//! | `geometry` | where each pixel of each line looks, about the Sun |
//! | `fit` | radius and oblateness from many transits |

mod find;
mod fit;
mod geometry;

pub use find::{Passage, find};
pub use fit::{
    LEAST_TRANSITS, LOOSE_SUN_MAS, ROTATION_MAS, ScanContribution, ScanFit, ScanKnown, SlitAngle,
    Transit, fit, radii_mas,
};
pub use geometry::{LineSky, Slit, near_limb};

/// Why a scan, or one transit of it, gives no limb.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum ScanError {
    /// Nothing bright enough to be a disk.
    #[error(
        "no disk on the lines: bright pixels stand at {bright_adu:.1} ADU, dark ones at {dark_adu:.1} ADU"
    )]
    NoDisk {
        /// 97th percentile.
        bright_adu: f64,
        /// 3rd percentile.
        dark_adu: f64,
    },
    /// The scan began when the Sun was on the slit already.
    #[error(
        "the Sun is on the slit in the first line: the scan began after the first contact; start it sooner"
    )]
    NoFirstContact,
    /// The scan ended while the Sun was on the slit.
    #[error(
        "the Sun is on the slit in the last of {lines} lines: the scan was cut before the second contact; record at least {needed} lines"
    )]
    NoSecondContact {
        /// Lines.
        lines: usize,
        /// Lines needed.
        needed: usize,
    },
    /// The disk is larger than the slit.
    #[error(
        "the disk reaches an end of the slit of {pixels} px: the slit is too short, or the Sun passes beside its middle"
    )]
    BeyondSlit {
        /// Pixels of the slit.
        pixels: usize,
    },
    /// The lines do not follow each other as the Sun drifts.
    #[error(
        "the disk crosses {found:.1} lines where line_s = {line_s} s and the drift of {drift_arcsec_s:.4} arcsec/s across the slit make it {expected:.1}; line_s = {agreeing_s:.6} s would agree"
    )]
    LineTime {
        /// Lines found.
        found: f64,
        /// Lines expected.
        expected: f64,
        /// The session's line time.
        line_s: f64,
        /// The Sun's motion across the slit.
        drift_arcsec_s: f64,
        /// Line time that would agree.
        agreeing_s: f64,
    },
    /// The slit's scale does not fit.
    #[error(
        "the disk covers {found:.1} px of the slit where camera.scale_arcsec_px makes it {expected:.1} px"
    )]
    SlitScale {
        /// Pixels found.
        found: f64,
        /// Pixels expected.
        expected: f64,
    },
    /// The motion runs along the slit.
    #[error(
        "the Sun moves {angle_deg:.1} deg from the slit's own direction: it does not cross it; turn the slit"
    )]
    AlongSlit {
        /// Angle of the motion from the slit.
        angle_deg: f64,
    },
    /// Nothing to fit.
    #[error("{found} transits have a limb; an error needs at least {needed}")]
    TooFew {
        /// Transits.
        found: usize,
        /// Needed.
        needed: usize,
    },
    /// The unknowns are open.
    #[error("radius and oblateness are not determined by {found} transits")]
    Singular {
        /// Transits.
        found: usize,
    },
}
