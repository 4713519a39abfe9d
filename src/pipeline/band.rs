//! The wavelength at which a filter's light is bent, and how far the air draws its band apart.

use super::Error;
use crate::air::{self, Band, BandInAir, StationAir};
use crate::disk::{Darkening, DarkeningLaw};
use crate::session::Filter;

/// The band of a filter in the air of the station, the Sun at a zenith distance: Sun and limb
/// darkening, filter, extinction.
///
/// # Errors
///
/// When the filter reaches beyond the range of the refractivity formula.
pub(super) fn in_air(
    filter: &Filter,
    station: &StationAir,
    zenith_rad: f64,
) -> Result<BandInAir, Error> {
    let band = match &filter.curve {
        Some(it) => Band::curve(&it.wavelength_nm, &it.transmission)?,
        None => Band::top_hat(filter.centre_nm, filter.width_nm)?,
    };
    // Where the law of limb darkening has its gap or its end, the light is taken to be as red as the
    // disk's centre.
    let edge = |nm: f64| Darkening::new(DarkeningLaw::Neckel2005, nm).map_or(1.0, |it| it.at(0.0));
    let known = |nm: f64| Darkening::new(DarkeningLaw::Neckel2005, nm).is_ok();
    let (low_nm, high_nm) = band.half_power_nm();
    let reddened = known(low_nm) && known(band.centre_nm()) && known(high_nm);
    let photons = |nm: f64| air::solar_photons(nm) * if reddened { edge(nm) } else { 1.0 };
    let pressure_hpa = station.conditions.pressure_hpa;
    Ok(band
        .light_through_air(photons, pressure_hpa, zenith_rad)?
        .in_air(station)?)
}
