//! Everything that decides the refraction at a station, in one value.

use super::conditions::{Conditions, Site};
use super::earth::local_radius_m;
use super::error::AirError;
use super::profile::{Profile, ProfileSettings};
use super::refractivity::{RefractivityFormula, refractivity, vapour_pressure_hpa};
use super::sounding::SoundingLevel;
use super::vapour::VapourConvention;

/// A station, its air, and the choices of the model.
#[derive(Clone, Debug, PartialEq)]
pub struct StationAir {
    /// Where the telescope stands.
    pub site: Site,
    /// Air at the pupil.
    pub conditions: Conditions,
    /// Formula of the refractivity.
    pub formula: RefractivityFormula,
    /// What the humidities are relative to.
    pub convention: VapourConvention,
    /// Shape of the standard profile.
    pub settings: ProfileSettings,
    /// Radius of curvature of the Earth in the vertical plane of the Sun, in metres.
    pub local_radius_m: f64,
    /// Levels of a sounding; without it the standard profile.
    pub sounding: Option<Vec<SoundingLevel>>,
}

impl StationAir {
    /// A station with Ciddor's formula and the standard profile, the Sun at an azimuth.
    pub fn new(site: Site, conditions: Conditions, azimuth_rad: f64) -> Self {
        Self {
            site,
            conditions,
            formula: RefractivityFormula::default(),
            convention: VapourConvention::default(),
            settings: ProfileSettings::default(),
            local_radius_m: local_radius_m(site.latitude_rad, azimuth_rad),
            sounding: None,
        }
    }

    /// Refractivity `n - 1` at the pupil.
    ///
    /// # Errors
    ///
    /// As [`refractivity`].
    pub fn refractivity(&self, wavelength_vacuum_nm: f64) -> Result<f64, AirError> {
        refractivity(
            &self.conditions,
            wavelength_vacuum_nm,
            self.formula,
            self.convention,
        )
    }

    /// The air above the station at a vacuum wavelength.
    ///
    /// # Errors
    ///
    /// As [`refractivity`], [`Profile::standard`] and [`Profile::from_sounding`].
    pub fn profile(&self, wavelength_vacuum_nm: f64) -> Result<Profile, AirError> {
        self.conditions.check_at(&self.site)?;
        let n0 = self.refractivity(wavelength_vacuum_nm)?;
        let (site, c, s) = (&self.site, &self.conditions, &self.settings);
        let vapour_hpa = vapour_pressure_hpa(c, self.formula, self.convention)?;
        let radius_m = self.local_radius_m;
        match &self.sounding {
            None => Profile::standard(site, c, n0, vapour_hpa, s, radius_m),
            Some(levels) => Profile::from_sounding(
                levels,
                self.convention,
                site,
                c,
                n0,
                vapour_hpa,
                s,
                radius_m,
            ),
        }
    }
}
