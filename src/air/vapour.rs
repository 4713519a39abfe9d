//! Water vapour in the air from its relative humidity.
//!
//! # Model
//!
//! ```text
//! x_w = f h p_s / P
//! p_s = exp(A T^2 + B T + C + D / T)                              over water, Giacomo (1982)
//! p_s = 1e6 [2 C / (-B + sqrt(B^2 - 4 A C))]^4                    over water, IAPWS
//! p_s = 611.657 exp[-13.928169 (1 - th^-1.5) + 34.7078238 (1 - th^-1.25)]   over ice, th = T/273.16
//! f   = 1.00062 + 3.14e-8 P + 5.6e-7 t^2                          enhancement in air
//! ```
//!
//! | symbol | meaning | unit |
//! |--------|---------|------|
//! | `x_w` | mole fraction of water vapour | - |
//! | `h` | relative humidity | - |
//! | `p_s`, `P` | saturation pressure, air pressure | Pa |
//! | `T`, `t` | temperature | K, C |
//!
//! # Valid for
//!
//! -90..60 C. Humidity sensors of weather services and radiosondes refer to water also below
//! freezing; a sensor that refers to ice there is a stated choice.
//!
//! # Accuracy
//!
//! The conventions differ by at most 0.7e-8 in the refractive index.
//!
//! # Source
//!
//! P. Giacomo, "Equation for the determination of the density of moist air (1981)", Metrologia 18,
//! 33 (1982); IAPWS-IF97 saturation line; IAPWS (2008) sublimation line.

use serde::{Deserialize, Serialize};

use super::conditions::{Conditions, within};
use super::error::AirError;
use crate::units::CELSIUS_ZERO_K;

/// What relative humidity is relative to.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize, Deserialize)]
pub enum VapourConvention {
    /// Over water at any temperature, after Giacomo (1982), as Ciddor (1996) has it.
    #[default]
    #[serde(rename = "water-giacomo")]
    WaterGiacomo,
    /// Over water at any temperature, after IAPWS.
    #[serde(rename = "water-iapws")]
    WaterIapws,
    /// Over water above freezing, over ice below, after IAPWS.
    #[serde(rename = "ice-below-zero-iapws")]
    IceBelowZeroIapws,
}

impl VapourConvention {
    /// Every convention.
    pub const ALL: [Self; 3] = [
        Self::WaterGiacomo,
        Self::WaterIapws,
        Self::IceBelowZeroIapws,
    ];

    /// The name used in files and on the command line.
    pub const fn name(self) -> &'static str {
        match self {
            Self::WaterGiacomo => "water-giacomo",
            Self::WaterIapws => "water-iapws",
            Self::IceBelowZeroIapws => "ice-below-zero-iapws",
        }
    }

    /// The convention of this name.
    ///
    /// # Errors
    ///
    /// [`AirError::UnknownName`].
    pub fn parse(name: &str) -> Result<Self, AirError> {
        Self::ALL
            .into_iter()
            .find(|it| it.name() == name)
            .ok_or_else(|| AirError::UnknownName {
                kind: "vapour convention",
                found: name.to_owned(),
                known: "water-giacomo, water-iapws, ice-below-zero-iapws",
            })
    }

    /// Pressure of saturated vapour, in Pa.
    pub fn saturation_pa(self, temperature_c: f64) -> f64 {
        let temperature_k = temperature_c + CELSIUS_ZERO_K;
        match self {
            Self::WaterGiacomo => giacomo_pa(temperature_k),
            Self::IceBelowZeroIapws if temperature_c < 0.0 => iapws_ice_pa(temperature_k),
            Self::WaterIapws | Self::IceBelowZeroIapws => iapws_water_pa(temperature_k),
        }
    }
}

fn giacomo_pa(t: f64) -> f64 {
    (1.2378847e-5 * t * t - 1.9121316e-2 * t + 33.93711047 - 6.3431645e3 / t).exp()
}

fn iapws_water_pa(t: f64) -> f64 {
    let w = t - 0.238555575678 / (t - 650.175348448);
    let a = w * w + 1167.05214528 * w - 724213.167032;
    let b = -17.0738469401 * w * w + 12020.8247025 * w - 3232555.03223;
    let c = 14.9151086135 * w * w - 4823.26573616 * w + 405113.405421;
    1e6 * (2.0 * c / (-b + (b * b - 4.0 * a * c).sqrt())).powi(4)
}

fn iapws_ice_pa(t: f64) -> f64 {
    let th = t / 273.16;
    611.657 * (-13.928169 * (1.0 - th.powf(-1.5)) + 34.7078238 * (1.0 - th.powf(-1.25))).exp()
}

/// Factor by which air raises the saturation pressure.
pub fn enhancement(pressure_pa: f64, temperature_c: f64) -> f64 {
    1.00062 + 3.14e-8 * pressure_pa + 5.6e-7 * temperature_c * temperature_c
}

/// Mole fraction of water vapour.
///
/// # Errors
///
/// [`AirError::OutOfRange`] when the vapour alone would exceed the pressure of the air.
pub fn vapour_mole_fraction(c: &Conditions, v: VapourConvention) -> Result<f64, AirError> {
    if c.relative_humidity == 0.0 {
        return Ok(0.0);
    }
    let pressure_pa = 100.0 * c.pressure_hpa;
    let vapour_pa = enhancement(pressure_pa, c.temperature_c)
        * c.relative_humidity
        * v.saturation_pa(c.temperature_c);
    let range_hpa = (0.0, 0.5 * c.pressure_hpa);
    within(
        "vapour pressure",
        vapour_pa / 100.0,
        range_hpa,
        "hPa",
        "half the pressure of the air",
    )?;
    Ok(vapour_pa / pressure_pa)
}
