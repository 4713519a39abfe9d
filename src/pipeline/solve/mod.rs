//! Seeing, selection and shape of the corrected limbs.

mod noise;
mod blur;
mod floor;
mod seeing;
mod select;
mod drivers;
mod known;
mod slope;
mod shape;

use crate::session::{Session, WeatherSource};
use crate::turbulence::Aperture;

pub(super) use known::{AirInput, known, known_ahead, refractivity_sigma_rel};
pub(super) use seeing::{SeeingResult, SequenceAir, frame_r0_m, seeing, zenith_factor};
pub(super) use select::{Selected, select};
pub(super) use shape::{Shape, shape};

/// Whether the session has no air.
pub(super) fn above_the_air(session: &Session) -> bool {
    matches!(session.weather.source, WeatherSource::None)
}

/// The telescope's aperture as the kernels take it.
pub(super) fn aperture(session: &Session) -> Aperture {
    Aperture {
        diameter_m: session.telescope.aperture_m,
        obstruction: session.telescope.central_obstruction,
    }
}
