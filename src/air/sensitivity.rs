//! How far each input moves the apparent shape of the disk.
//!
//! # Model
//!
//! ```text
//! d f / d p = [f(p + h) - f(p - h)] / (2 h)
//! d f / d(vertical direction) = 2 f                 per radian, worst projection
//! tilted layers: the zenith of the air is displaced by tau
//!   in the plane of the disk    tau  df/dz
//!   across it                   2 f tau / sin z      the axis turns by tau / sin z
//! ```
//!
//! | symbol | meaning | unit |
//! |--------|---------|------|
//! | `f` | flattening or mean radius change | mas |
//! | `h` | step: 0.5 hPa, 0.5 K, 0.05 of humidity, 0.5 nm, 0.5 arcmin | |
//! | `tau` | tilt of the layers of air | arcmin |
//!
//! # Valid for
//!
//! Any disk above the horizon. Where one side of a step is not allowed (humidity 0, say), the
//! difference is one-sided.
//!
//! # Accuracy
//!
//! 0.1 percent below 75 degrees; tilt to first order, 1 percent at 6 arcmin.
//!
//! # Source
//!
//! Numerical differentiation of the model.

use serde::Serialize;

use super::bending::Bending;
use super::disk_map::DiskMap;
use super::distortion::distortion;
use super::error::AirError;
use super::station::StationAir;
use crate::units::ARCMIN_RAD;

/// Derivatives of one quantity (mas) by each input.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
pub struct Sensitivity {
    /// By the pressure, in mas per hPa.
    pub pressure_hpa: f64,
    /// By the temperature, in mas per degree.
    pub temperature_c: f64,
    /// By the relative humidity, in mas for 0 to 1.
    pub humidity: f64,
    /// By the vacuum wavelength, in mas per nm.
    pub wavelength_nm: f64,
    /// By the true zenith distance, in mas per arcmin.
    pub zenith_arcmin: f64,
    /// By the direction of the vertical on the detector, in mas per arcmin, worst projection.
    pub vertical_arcmin: f64,
}

/// Derivatives of the flattening and of the mean radius.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
pub struct Sensitivities {
    /// Of horizontal minus vertical radius.
    pub flattening: Sensitivity,
    /// Of the change of the mean radius.
    pub mean_radius: Sensitivity,
}

/// Effect of tilted layers of air on the flattening.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct TiltEffect {
    /// Tilt towards or away from the disk, in mas.
    pub in_plane_mas: f64,
    /// Tilt across, worst projection, in mas.
    pub across_mas: f64,
}

/// Flattening and mean radius change, in mas.
type Shape = [f64; 2];

fn shape(
    air: &StationAir,
    wavelength_nm: f64,
    zenith_true_rad: f64,
    radius_rad: f64,
) -> Result<Shape, AirError> {
    let profile = air.profile(wavelength_nm)?;
    let map = DiskMap::new(Bending::new(&profile, zenith_true_rad)?, zenith_true_rad);
    let it = distortion(&map, radius_rad);
    Ok([it.flattening_mas, it.mean_mas])
}

/// Slope by central difference, one-sided where only one side exists.
fn slope(
    step: f64,
    at_centre: Shape,
    at: impl Fn(f64) -> Result<Shape, AirError>,
) -> Result<Shape, AirError> {
    let (low, high, width) = match (at(-step), at(step)) {
        (Ok(low), Ok(high)) => (low, high, 2.0 * step),
        (Err(_), Ok(high)) => (at_centre, high, step),
        (Ok(low), Err(_)) => (low, at_centre, step),
        (Err(error), Err(_)) => return Err(error),
    };
    Ok([(high[0] - low[0]) / width, (high[1] - low[1]) / width])
}

/// Derivatives of the shape of a disk by every input.
///
/// # Errors
///
/// An [`AirError`] when the model does not reach the disk itself.
pub fn sensitivity(
    air: &StationAir,
    wavelength_vacuum_nm: f64,
    zenith_true_rad: f64,
    radius_rad: f64,
) -> Result<Sensitivities, AirError> {
    let nm = wavelength_vacuum_nm;
    let centre = shape(air, nm, zenith_true_rad, radius_rad)?;
    let changed = |change: &dyn Fn(&mut StationAir)| {
        let mut other = air.clone();
        change(&mut other);
        shape(&other, nm, zenith_true_rad, radius_rad)
    };
    // In the stratosphere half a hectopascal would be a tenth of the air.
    let pressure_step_hpa = 0.5f64.min(0.01 * air.conditions.pressure_hpa);
    let pressure = slope(pressure_step_hpa, centre, |step| {
        changed(&|it| it.conditions.pressure_hpa += step)
    })?;
    let temperature = slope(0.5, centre, |step| {
        changed(&|it| it.conditions.temperature_c += step)
    })?;
    let humidity = slope(0.05, centre, |step| {
        changed(&|it| it.conditions.relative_humidity += step)
    })?;
    let wavelength = slope(0.5, centre, |step| {
        shape(air, nm + step, zenith_true_rad, radius_rad)
    })?;
    let zenith = slope(0.5, centre, |step| {
        shape(air, nm, zenith_true_rad + step * ARCMIN_RAD, radius_rad)
    })?;
    let of = |index: usize, vertical_arcmin: f64| Sensitivity {
        pressure_hpa: pressure[index],
        temperature_c: temperature[index],
        humidity: humidity[index],
        wavelength_nm: wavelength[index],
        zenith_arcmin: zenith[index],
        vertical_arcmin,
    };
    Ok(Sensitivities {
        flattening: of(0, 2.0 * centre[0].abs() * ARCMIN_RAD),
        mean_radius: of(1, 0.0),
    })
}

/// Effect of layers of air tilted by an angle, to first order.
///
/// Layers tilted so that a star at the zenith moves by `A tau` act as a displaced zenith.
/// `flattening_mas` and its sensitivities belong to the same disk.
pub fn tilt_effect_on_flattening(
    s: &Sensitivity,
    flattening_mas: f64,
    zenith_true_rad: f64,
    tilt_arcmin: f64,
) -> TiltEffect {
    let turn_rad = tilt_arcmin * ARCMIN_RAD / zenith_true_rad.sin();
    TiltEffect {
        in_plane_mas: s.zenith_arcmin * tilt_arcmin,
        across_mas: 2.0 * flattening_mas * turn_rad,
    }
}
