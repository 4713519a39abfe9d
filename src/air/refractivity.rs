//! One door to the published refractivities: choice of formula, ranges, warnings.
//!
//! # Model
//!
//! ```text
//! n - 1 = f(pressure, temperature, humidity, CO2; vacuum wavelength)
//! ```
//!
//! The phase index, never the group index. The formulas stand in `ciddor.rs`, `other_formulas.rs`
//! and `mathar.rs`.
//!
//! # Valid for
//!
//! Wavelengths: Ciddor 300..2500 nm (fitted to 1690), Birch & Downs 300..2500 nm (fitted 350..650),
//! Owens 230..2059 nm, IAG 300..2500 nm, Mathar 1300..2500 nm. Outside: an error.
//! Between the fitted range and the allowed one: a warning.
//!
//! # Accuracy
//!
//! 2e-8 to 5e-8 in the visible for Ciddor and Birch & Downs.
//!
//! # Source
//!
//! Named at each formula.

use serde::{Deserialize, Serialize};

use super::ciddor::ciddor_refractivity;
use super::conditions::{Conditions, within};
use super::error::{AirError, AirWarning};
use super::mathar::mathar_refractivity;
use super::other_formulas::{
    birch_downs_refractivity, gill_crane_vapour_hpa, iag_refractivity, owens_refractivity,
};
use super::vapour::{VapourConvention, vapour_mole_fraction};

/// A published formula for the refractivity of moist air.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize, Deserialize)]
pub enum RefractivityFormula {
    /// Ciddor (1996).
    #[default]
    #[serde(rename = "ciddor-1996")]
    Ciddor1996,
    /// Birch & Downs (1994), the revised formula of Edlen.
    #[serde(rename = "birch-downs-1994")]
    BirchDowns1994,
    /// Owens (1967).
    #[serde(rename = "owens-1967")]
    Owens1967,
    /// The closed form recommended by the International Association of Geodesy in 1999.
    #[serde(rename = "iag-1999")]
    Iag1999,
    /// Mathar (2007), 1.3 to 2.5 um.
    #[serde(rename = "mathar-2007")]
    Mathar2007,
}

impl RefractivityFormula {
    /// Every formula.
    pub const ALL: [Self; 5] = [
        Self::Ciddor1996,
        Self::BirchDowns1994,
        Self::Owens1967,
        Self::Iag1999,
        Self::Mathar2007,
    ];

    /// The name used in files and on the command line.
    pub const fn name(self) -> &'static str {
        match self {
            Self::Ciddor1996 => "ciddor-1996",
            Self::BirchDowns1994 => "birch-downs-1994",
            Self::Owens1967 => "owens-1967",
            Self::Iag1999 => "iag-1999",
            Self::Mathar2007 => "mathar-2007",
        }
    }

    /// The formula of this name.
    ///
    /// # Errors
    ///
    /// [`AirError::UnknownName`].
    pub fn parse(name: &str) -> Result<Self, AirError> {
        Self::ALL
            .into_iter()
            .find(|it| it.name() == name)
            .ok_or_else(|| AirError::UnknownName {
                kind: "refractivity formula",
                found: name.to_owned(),
                known: "ciddor-1996, birch-downs-1994, owens-1967, iag-1999, mathar-2007",
            })
    }

    /// Wavelengths outside which the formula is refused, in nm.
    pub const fn wavelength_range_nm(self) -> (f64, f64) {
        match self {
            Self::Ciddor1996 | Self::BirchDowns1994 | Self::Iag1999 => (300.0, 2500.0),
            Self::Owens1967 => (230.0, 2059.0),
            Self::Mathar2007 => (1300.0, 2500.0),
        }
    }

    /// Range stated by the author: wavelength in nm, temperature in Celsius, pressure in hPa.
    const fn fitted(self) -> [(f64, f64); 3] {
        match self {
            Self::Ciddor1996 => [(300.0, 1690.0), (-40.0, 100.0), (800.0, 1200.0)],
            Self::BirchDowns1994 => [(350.0, 650.0), (5.0, 30.0), (700.0, 1100.0)],
            Self::Owens1967 => [(230.0, 2059.0), (-40.0, 50.0), (0.0, 4000.0)],
            Self::Iag1999 => [(300.0, 2500.0), (-90.0, 60.0), (0.0, 1200.0)],
            Self::Mathar2007 => [(1300.0, 2500.0), (10.0, 25.0), (500.0, 1023.0)],
        }
    }
}

/// Refractivity `n - 1` of moist air at a vacuum wavelength.
///
/// # Errors
///
/// An [`AirError`] when the air cannot be, or the formula does not reach it.
pub fn refractivity(
    c: &Conditions,
    wavelength_vacuum_nm: f64,
    f: RefractivityFormula,
    v: VapourConvention,
) -> Result<f64, AirError> {
    c.check()?;
    within(
        "wavelength",
        wavelength_vacuum_nm,
        f.wavelength_range_nm(),
        "nm",
        f.name(),
    )?;
    let (p_hpa, t_c, nm) = (c.pressure_hpa, c.temperature_c, wavelength_vacuum_nm);
    let vapour_hpa = vapour_pressure_hpa(c, f, v)?;
    let value = match f {
        RefractivityFormula::Ciddor1996 => {
            let x_w = vapour_mole_fraction(c, v)?;
            ciddor_refractivity(100.0 * p_hpa, t_c, x_w, c.co2_ppm, nm)
        }
        RefractivityFormula::BirchDowns1994 => {
            birch_downs_refractivity(100.0 * p_hpa, t_c, 100.0 * vapour_hpa, nm)
        }
        RefractivityFormula::Owens1967 => owens_refractivity(p_hpa, t_c, vapour_hpa, nm),
        RefractivityFormula::Iag1999 => iag_refractivity(p_hpa, t_c, vapour_hpa, nm),
        RefractivityFormula::Mathar2007 => {
            let [_, temperature_c, pressure_hpa] = f.fitted();
            within("temperature", t_c, temperature_c, "C", f.name())?;
            within("pressure", p_hpa, pressure_hpa, "hPa", f.name())?;
            let humidity = c.relative_humidity;
            within(
                "relative humidity",
                humidity,
                (0.05, 0.60),
                "(fraction)",
                f.name(),
            )?;
            mathar_refractivity(100.0 * p_hpa, t_c, humidity, nm)
        }
    };
    Ok(value)
}

/// Partial pressure of water vapour as the formula sees it, in hPa.
///
/// The IAG closed form brings its own (Gill, Crane). The others follow the convention; Birch & Downs
/// and Owens are used with humidity times saturation pressure, without the enhancement by air.
///
/// # Errors
///
/// [`AirError::OutOfRange`] when the vapour would exceed half the pressure of the air.
pub fn vapour_pressure_hpa(
    c: &Conditions,
    f: RefractivityFormula,
    v: VapourConvention,
) -> Result<f64, AirError> {
    let vapour_hpa = c.pressure_hpa * vapour_mole_fraction(c, v)?;
    Ok(match f {
        RefractivityFormula::Iag1999 => {
            gill_crane_vapour_hpa(c.pressure_hpa, c.temperature_c, c.relative_humidity)
        }
        RefractivityFormula::BirchDowns1994 | RefractivityFormula::Owens1967 => {
            0.01 * c.relative_humidity * v.saturation_pa(c.temperature_c)
        }
        RefractivityFormula::Ciddor1996 | RefractivityFormula::Mathar2007 => vapour_hpa,
    })
}

/// What a reader of the result should know about the formula in this air.
pub fn refractivity_warnings(
    c: &Conditions,
    wavelength_vacuum_nm: f64,
    f: RefractivityFormula,
) -> Vec<AirWarning> {
    let formula = f.name();
    let [(min_nm, max_nm), (min_c, max_c), (min_hpa, max_hpa)] = f.fitted();
    let (wavelength_nm, temperature_c) = (wavelength_vacuum_nm, c.temperature_c);
    let pressure_hpa = c.pressure_hpa;
    let mut warnings = Vec::new();
    if !(min_nm..=max_nm).contains(&wavelength_nm) {
        warnings.push(AirWarning::Wavelength {
            formula,
            wavelength_nm,
            min_nm,
            max_nm,
        });
    }
    if !(min_c..=max_c).contains(&temperature_c) {
        warnings.push(AirWarning::Temperature {
            formula,
            temperature_c,
            min_c,
            max_c,
        });
    }
    if !(min_hpa..=max_hpa).contains(&pressure_hpa) {
        warnings.push(AirWarning::Pressure {
            formula,
            pressure_hpa,
            min_hpa,
            max_hpa,
        });
    }
    if f == RefractivityFormula::Iag1999 {
        warnings.push(AirWarning::IdealGas { formula });
    }
    warnings
}

/// Caution due to the zenith distance of the disk; none up to 60 degrees.
pub fn zenith_warning(zenith_rad: f64) -> Option<AirWarning> {
    /// A disk at 60 degrees, there and back through radians, is not above 60.
    const ROUNDING_DEG: f64 = 1e-9;
    let zenith_deg = zenith_rad.to_degrees();
    if zenith_deg > 70.0 + ROUNDING_DEG {
        Some(AirWarning::ZenithAbove70 { zenith_deg })
    } else if zenith_deg > 60.0 + ROUNDING_DEG {
        Some(AirWarning::ZenithAbove60 { zenith_deg })
    } else {
        None
    }
}
