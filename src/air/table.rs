//! Refraction and its effect on the disk, tabulated by zenith distance and wavelength.

use serde::Serialize;

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

fn row(
    air: &StationAir,
    zenith_rad: f64,
    argument: ZenithArgument,
    wavelength_nm: f64,
) -> Result<RefractionRow, AirError> {
    let zenith_deg = zenith_rad.to_degrees();
    within(
        "zenith distance",
        zenith_deg,
        (0.0, 90.0),
        "deg",
        "a disk above the horizon",
    )?;
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
