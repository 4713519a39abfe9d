//! The Sun's own motion as a ruler: a telescope that stands still while the Sun drifts through.
//!
//! | file | what |
//! |------|------|
//! | `transit` | contacts with a slit, direction and curvature of the motion, a shutter that rolls |
//! | `path` | where a camera that is fixed to the ground sees the Sun |
//! | `noise` | noise of the disk's centre that is correlated in time |
//! | `linear` | generalised least squares over all correlations |
//! | `fit` | plate scale and camera angle from the centres |
//! | `distortion` | what is left along the way |

mod distortion;
mod fit;
mod linear;
mod noise;
mod path;
mod transit;

pub use distortion::{DISTORTION_BINS, DistortionBin};
pub use fit::{Centre, DriftFit, LEAST_FRAMES, fit};
pub use path::{FixedCamera, Mounting, Seen};
pub use transit::{
    RollingShutter, motion_position_angle_rad, path_turn_rad, rolling_shutter, sagitta_rad,
    semidiameter_rad, transit_s,
};

/// Why a drift says nothing of scale and angle.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum DriftError {
    /// Too few frames hold the whole disk.
    #[error(
        "{found} frames show the whole disk clear of the field's edge; a drift needs at least {needed}: start it sooner, take frames faster, or use a larger field"
    )]
    TooFew {
        /// Frames found.
        found: usize,
        /// Frames needed.
        needed: usize,
    },
    /// The Sun stayed where it was.
    #[error(
        "the Sun moved {moved_px:.1} px over the drift where a telescope that stands still sees {expected_px:.1} px: was tracking on?"
    )]
    NotMoving {
        /// Movement found.
        moved_px: f64,
        /// Movement expected.
        expected_px: f64,
    },
    /// The Sun moved at another rate.
    #[error(
        "the Sun moved {moved_px:.1} px over the drift where a telescope that stands still sees {expected_px:.1} px: check the times of the frames, camera.scale_arcsec_px, and that the drive was off"
    )]
    WrongRate {
        /// Movement found.
        moved_px: f64,
        /// Movement expected.
        expected_px: f64,
    },
    /// The Sun moved another way.
    #[error(
        "the Sun moved towards {found_deg:.1} deg on the detector (from +x towards +y) where camera.angle_deg and camera.parity = \"{parity}\" say {expected_deg:.1} deg; with the other parity it would be {other_deg:.1} deg: correct camera.parity or camera.angle_deg"
    )]
    WrongWay {
        /// Direction found.
        found_deg: f64,
        /// Direction that the session predicts.
        expected_deg: f64,
        /// Direction that the other parity would predict.
        other_deg: f64,
        /// Parity of the session.
        parity: &'static str,
    },
    /// The places do not determine scale and angle.
    #[error("scale and angle are not determined by the {frames} places of the Sun")]
    Singular {
        /// Frames.
        frames: usize,
    },
}
