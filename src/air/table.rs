//! Refraction and its effect on the disk, tabulated by zenith distance and wavelength.

use serde::Serialize;

use super::band::Band;
use super::bending::Bending;
use super::conditions::within;
use super::disk_map::DiskMap;
use super::distortion::distortion;
use super::error::AirError;
use super::sensitivity::{Sensitivity, sensitivity};
use super::station::StationAir;
use crate::units::ARCSEC_RAD;

/// Radius of the disk of the table, in arcsec.
pub const TABLE_RADIUS_ARCSEC: f64 = 959.2;

/// Which zenith distance is given.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum ZenithArgument {
    /// As observed.
    Apparent,
    /// Without the air.
    True,
}

/// One line of the table: a zenith distance and a wavelength.
///
/// Changes are apparent minus true. Harmonics are those of the radius over the bearing from the
/// zenith; flattening is horizontal minus vertical radius.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
pub struct RefractionRow {
    /// Apparent zenith distance of the centre, in degrees.
    pub zenith_apparent_deg: f64,
    /// True zenith distance of the centre, in degrees.
    pub zenith_true_deg: f64,
    /// Vacuum wavelength, in nm.
    pub wavelength_nm: f64,
    /// Refractivity `n - 1` at the pupil.
    pub refractivity: f64,
    /// Refraction of the centre, in arcsec.
    pub refraction_arcsec: f64,
    /// Derivative of the refraction by the true zenith distance.
    pub dr_dz: f64,
    /// Change of the mean radius, in mas.
    pub radius_change_mas: f64,
    /// Horizontal minus vertical radius, in mas.
    pub flattening_mas: f64,
    /// Coefficient of `P4`, in mas.
    pub p4_mas: f64,
    /// Coefficient of `cos 3 theta`, in mas.
    pub m3_mas: f64,
    /// Derivative of the flattening by the wavelength, in mas per nm.
    pub dispersion_mas_per_nm: f64,
    /// Derivatives of the flattening.
    pub sensitivity: Sensitivity,
}

/// One line of the table for a band, computed at its effective wavelength.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
pub struct BandRow {
    /// The line; its wavelength is the middle of the band, all else belongs to the effective one.
    #[serde(flatten)]
    pub row: RefractionRow,
    /// Wavelength at which the refractivity is the band's mean, in nm.
    pub effective_wavelength_nm: f64,
    /// Centroid of the light that makes the limb, in nm.
    pub centroid_wavelength_nm: f64,
    /// Refraction between the half-power wavelengths, in mas.
    pub smear_mas: f64,
    /// Standard deviation of the refraction over the band, in mas.
    pub smear_rms_mas: f64,
}

/// The table: for each zenith distance every wavelength, in the order given.
///
/// # Errors
///
/// An [`AirError`] for the first line that the model does not reach.
pub fn refraction_table(
    air: &StationAir,
    zeniths_rad: &[f64],
    argument: ZenithArgument,
    wavelengths_vacuum_nm: &[f64],
) -> Result<Vec<RefractionRow>, AirError> {
    let mut rows = Vec::with_capacity(zeniths_rad.len() * wavelengths_vacuum_nm.len());
    for &zenith_rad in zeniths_rad {
        for &wavelength_nm in wavelengths_vacuum_nm {
            rows.push(row(air, zenith_rad, argument, wavelength_nm)?);
        }
    }
    Ok(rows)
}

/// The table for bands: as [`refraction_table`], at the effective wavelength of each band behind the
/// clear air of each zenith distance.
///
/// `photons` is the source at the limb, by wavelength in nm, in any unit; see
/// [`solar_photons`](super::solar_photons).
///
/// # Errors
///
/// An [`AirError`] for the first line that the model does not reach, or for a band without light.
pub fn band_table(
    air: &StationAir,
    zeniths_rad: &[f64],
    argument: ZenithArgument,
    bands: &[Band],
    photons: impl Fn(f64) -> f64,
) -> Result<Vec<BandRow>, AirError> {
    let mut rows = Vec::with_capacity(zeniths_rad.len() * bands.len());
    for &zenith_rad in zeniths_rad {
        for band in bands {
            check_zenith(zenith_rad)?;
            let (low_nm, high_nm) = band.half_power_nm();
            // Names the end of the band that the formula does not reach.
            air.refractivity(low_nm)?;
            air.refractivity(high_nm)?;
            let zenith_apparent_rad = match argument {
                ZenithArgument::Apparent => zenith_rad,
                ZenithArgument::True => {
                    let profile = air.profile(band.centre_nm())?;
                    Bending::new(&profile, zenith_rad)?.centre_apparent_rad()
                }
            };
            let pressure_hpa = air.conditions.pressure_hpa;
            let it = band
                .light_through_air(&photons, pressure_hpa, zenith_apparent_rad)?
                .in_air(air)?;
            let mut row = row(air, zenith_rad, argument, it.effective_nm)?;
            row.wavelength_nm = band.centre_nm();
            let smear = it.smear(row.refraction_arcsec * ARCSEC_RAD);
            rows.push(BandRow {
                row,
                effective_wavelength_nm: it.effective_nm,
                centroid_wavelength_nm: it.centroid_nm,
                smear_mas: smear.spread_mas,
                smear_rms_mas: smear.rms_mas,
            });
        }
    }
    Ok(rows)
}

fn check_zenith(zenith_rad: f64) -> Result<(), AirError> {
    within(
        "zenith distance",
        zenith_rad.to_degrees(),
        (0.0, 90.0),
        "deg",
        "a disk above the horizon",
    )
}

fn row(
    air: &StationAir,
    zenith_rad: f64,
    argument: ZenithArgument,
    wavelength_nm: f64,
) -> Result<RefractionRow, AirError> {
    check_zenith(zenith_rad)?;
    let profile = air.profile(wavelength_nm)?;
    let zenith_true_rad = match argument {
        ZenithArgument::True => zenith_rad,
        ZenithArgument::Apparent => zenith_rad + profile.refraction_rad(zenith_rad),
    };
    let bending = Bending::new(&profile, zenith_true_rad)?;
    let zenith_apparent_rad = bending.centre_apparent_rad();
    let slope = bending.slope(zenith_apparent_rad);
    let radius_rad = TABLE_RADIUS_ARCSEC * ARCSEC_RAD;
    let limb = distortion(&DiskMap::new(bending, zenith_true_rad), radius_rad);
    let sensitivity = sensitivity(air, wavelength_nm, zenith_true_rad, radius_rad)?.flattening;
    Ok(RefractionRow {
        zenith_apparent_deg: zenith_apparent_rad.to_degrees(),
        zenith_true_deg: zenith_true_rad.to_degrees(),
        wavelength_nm,
        refractivity: profile.refractivity(),
        refraction_arcsec: bending.refraction_rad(zenith_apparent_rad) / ARCSEC_RAD,
        dr_dz: slope / (1.0 + slope),
        radius_change_mas: limb.mean_mas,
        flattening_mas: limb.flattening_mas,
        p4_mas: limb.p4_mas,
        m3_mas: limb.cos3_mas,
        dispersion_mas_per_nm: sensitivity.wavelength_nm,
        sensitivity,
    })
}
