//! Sun and air at a time to come, by the same steps as for the frames of a session.

use super::Error;
use super::measure::Sky;
use super::solve::{AirInput, known_ahead};
use crate::air::{BandInAir, DiskMap};
use crate::refraction;
use crate::session::{Sequence, Session};
use crate::shape::{AirResponse, Known};
use crate::sky::{SunPlace, Utc};

/// Sun and air at one moment.
#[derive(Clone, Debug)]
pub(crate) struct Ahead {
    /// The moment.
    pub(crate) utc: Utc,
    /// The Sun.
    pub(crate) sun: SunPlace,
    /// Apparent zenith distance of the Sun's centre, rad.
    pub(crate) zenith_apparent_rad: f64,
    /// How the limb answers the air.
    pub(crate) air: AirResponse,
    /// The filter's band in the air; none above it.
    pub(crate) band: Option<BandInAir>,
    input: AirInput,
}

/// Sun and air at a moment, for a sequence of the session.
///
/// # Errors
///
/// A Sun below the horizon, weather that does not cover the moment, conditions outside the formulas.
pub(crate) fn at(session: &Session, sequence: &Sequence, utc: Utc) -> Result<Ahead, Error> {
    let sky = Sky::new(session, sequence, utc, utc)?;
    let (moment, air, station) = sky.moment(utc)?;
    let sensitivities = match &station {
        Some((it, _)) => refraction::refractivity_sensitivities(it, sky.wavelength_nm())?,
        None => [0.0; 4],
    };
    let rate = sky.zenith_rate_arcmin_s(utc)?;
    Ok(Ahead {
        utc,
        sun: moment.sun,
        zenith_apparent_rad: moment
            .map
            .as_ref()
            .map_or(moment.sun.zenith_true_rad, DiskMap::zenith_apparent_rad),
        air: refraction::response(&air, &moment.sun, rate)?,
        band: sky.band,
        input: AirInput {
            refractivity: moment.refractivity,
            sensitivities,
        },
    })
}

/// What will be known before a fit of frames at these moments.
pub(crate) fn known(session: &Session, moments: &[&Ahead], start: Utc) -> Known {
    let air: Vec<AirInput> = moments.iter().map(|it| it.input).collect();
    let seconds: Vec<f64> = moments.iter().map(|it| it.utc.minus(start)).collect();
    known_ahead(session, &air, &seconds)
}
