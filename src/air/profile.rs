//! The air above a station, layer by layer.
//!
//! # Model
//!
//! ```text
//! troposphere    T = T0 - alpha s,  x = T/T0,  p_w = e0 x^delta
//!                n - 1 = C1 x^(gamma - 1) - C2 x^(delta - 1)
//!                C1 = a (p0 + w)/T0,  C2 = (a w + b e0)/T0
//!                w = e0 (1 - M_w/M_d) gamma/(delta - gamma),  gamma = g M_d/(R alpha)
//! stratosphere   n - 1 = (n_t - 1) exp[-g M_d (s - s_t)/(R T_t)]
//! ```
//!
//! | symbol | meaning | unit |
//! |--------|---------|------|
//! | `s` | height above the station | m |
//! | `p0`, `e0`, `T0` | pressure, vapour pressure (hPa), temperature (K) at the station | |
//! | `a`, `b` | coefficients of the refractivity, dry and vapour | K/hPa |
//! | `alpha`, `gamma`, `delta` | lapse rate (K/m), exponents of pressure and of vapour (18.36) | |
//!
//! `a` is chosen so that `n0 - 1 = (a p0 - b e0)/T0` is the given refractivity, whatever formula it
//! came from. Above the tropopause there is no troposphere: one isothermal layer.
//!
//! # Valid for
//!
//! Stations from -400 m to 45 km, lapse rates from 2 to 10 K/km. Inversions need a sounding.
//!
//! # Accuracy
//!
//! With the refractivity at the pupil given, the flattening at 60 degrees depends on the rest of the
//! profile by less than 0.01 mas; at 75 degrees by 0.3 mas per K/km. Stopping at the top costs 0.3 mas
//! tan z in refraction at 80 km, nothing at 100 km.
//!
//! # Source
//!
//! C. Y. Hohenkerk and A. T. Sinclair, "The computation of angular atmospheric refraction at large
//! zenith angles", NAO Technical Note 63 (1985).

use super::conditions::{Conditions, Site, within};
use super::earth::gravity_m_s2;
use super::error::AirError;
use super::integral::{self, HeightPoint};
use super::layer::{Layer, Term};
use super::other_formulas::IAG_VAPOUR_K_PER_HPA;

/// Molar gas constant of the model, in J/(kmol K).
const GAS_CONSTANT: f64 = 8314.32;
/// Molar mass of dry air, in kg/kmol.
const DRY_KG_PER_KMOL: f64 = 28.9644;
/// Molar mass of water, in kg/kmol.
const WATER_KG_PER_KMOL: f64 = 18.0152;
/// Exponent of the vapour pressure as a power of the temperature.
const VAPOUR_EXPONENT: f64 = 18.36;
/// Largest curvature of a level ray over that of the Earth.
const MAX_CURVATURE_RATIO: f64 = 0.95;
/// Zenith distance up to which the height form serves, in radians.
const HEIGHT_FORM_TO_RAD: f64 = 80.0 * crate::units::DEG_RAD;

/// Shape of the standard profile.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct ProfileSettings {
    /// Fall of temperature with height in the troposphere, in K/m.
    pub lapse_k_per_m: f64,
    /// Height of the tropopause above sea level, in metres.
    pub tropopause_m: f64,
    /// Height above sea level at which the air ends, in metres.
    pub top_m: f64,
}

impl Default for ProfileSettings {
    /// 6.5 K/km up to 11 km as in the standard atmosphere, and 100 km, where nothing is cut off.
    fn default() -> Self {
        Self {
            lapse_k_per_m: 0.0065,
            tropopause_m: 11_000.0,
            top_m: 100_000.0,
        }
    }
}

impl ProfileSettings {
    /// Checks the settings against the model.
    ///
    /// # Errors
    ///
    /// [`AirError::OutOfRange`].
    pub fn check(&self) -> Result<(), AirError> {
        const SET_BY: &str = "the model atmosphere";
        within(
            "lapse rate",
            1000.0 * self.lapse_k_per_m,
            (2.0, 10.0),
            "K/km",
            SET_BY,
        )?;
        within(
            "tropopause",
            self.tropopause_m,
            (5000.0, 20_000.0),
            "m",
            SET_BY,
        )?;
        within(
            "top of the air",
            self.top_m,
            (80_000.0, 200_000.0),
            "m",
            SET_BY,
        )
    }
}

/// Air above an observer: refractivity as a function of height.
#[derive(Clone, Debug, PartialEq)]
pub struct Profile {
    layers: Vec<Layer>,
    points: Vec<HeightPoint>,
    optical_radius_m: f64,
}

impl Profile {
    /// The standard profile: a humid troposphere below an isothermal stratosphere.
    ///
    /// `refractivity0` is `n - 1` at the station, `vapour_hpa` the vapour pressure there,
    /// `local_radius_m` the radius of curvature at sea level
    /// ([`local_radius_m`](super::local_radius_m)).
    ///
    /// # Errors
    ///
    /// An [`AirError`] when conditions, site or settings are out of range.
    pub fn standard(
        site: &Site,
        c: &Conditions,
        refractivity0: f64,
        vapour_hpa: f64,
        s: &ProfileSettings,
        local_radius_m: f64,
    ) -> Result<Self, AirError> {
        c.check_at(site)?;
        s.check()?;
        within(
            "refractivity",
            refractivity0,
            (0.0, 1e-3),
            "(n - 1)",
            "the air model",
        )?;
        within(
            "local radius",
            local_radius_m,
            (6.3e6, 6.45e6),
            "m",
            "the Earth",
        )?;
        let vapour_range_hpa = (0.0, 0.5 * c.pressure_hpa);
        within(
            "vapour pressure",
            vapour_hpa,
            vapour_range_hpa,
            "hPa",
            "half the pressure",
        )?;
        let base_radius_m = local_radius_m + site.height_m;
        let thickness_m = (s.tropopause_m - site.height_m).max(0.0);
        let gas = Gas {
            latitude_rad: site.latitude_rad,
            height_m: site.height_m,
        };
        let (temperature_k, p0) = (c.temperature_k(), c.pressure_hpa);

        let mut layers = Vec::with_capacity(2);
        let (mut top_k, mut top_refractivity) = (temperature_k, refractivity0);
        if thickness_m > 0.0 {
            let per_m = -s.lapse_k_per_m / temperature_k;
            let gamma = gas.hydrostatic_k_per_m() / s.lapse_k_per_m;
            let b = IAG_VAPOUR_K_PER_HPA;
            let a = (refractivity0 * temperature_k + b * vapour_hpa) / p0;
            let w = vapour_hpa * (1.0 - WATER_KG_PER_KMOL / DRY_KG_PER_KMOL) * gamma
                / (VAPOUR_EXPONENT - gamma);
            let c1 = a * (p0 + w) / temperature_k;
            let c2 = (a * w + b * vapour_hpa) / temperature_k;
            let wet = if c2 == 0.0 {
                Term::NONE
            } else {
                Term::Power {
                    amplitude: -c2,
                    per_m,
                    exponent: VAPOUR_EXPONENT - 1.0,
                }
            };
            let dry = Term::Power {
                amplitude: c1,
                per_m,
                exponent: gamma - 1.0,
            };
            let troposphere = Layer {
                base_radius_m,
                thickness_m,
                dry,
                wet,
            };
            top_refractivity = troposphere.at(thickness_m).0;
            top_k -= s.lapse_k_per_m * thickness_m;
            layers.push(troposphere);
        }
        let above_m = s.top_m - site.height_m - thickness_m;
        let radius_m = base_radius_m + thickness_m;
        layers.push(gas.isothermal(radius_m, above_m, top_refractivity, top_k));
        Self::from_layers(layers, local_radius_m)
    }

    /// Checks the layers and prepares the height form; heights in errors count from `zero_radius_m`.
    pub(super) fn from_layers(layers: Vec<Layer>, zero_radius_m: f64) -> Result<Self, AirError> {
        for layer in &layers {
            let ratio = layer
                .curvature_ratio(0.0)
                .max(layer.curvature_ratio(layer.thickness_m));
            if ratio.is_nan() || ratio > MAX_CURVATURE_RATIO {
                let base_m = layer.base_radius_m - zero_radius_m;
                return Err(AirError::Ducting {
                    base_m,
                    top_m: base_m + layer.thickness_m,
                    ratio,
                });
            }
        }
        let optical_radius_m = layers
            .first()
            .map_or(0.0, |it| (1.0 + it.at(0.0).0) * it.base_radius_m);
        Ok(Self {
            points: integral::height_points(&layers),
            layers,
            optical_radius_m,
        })
    }

    /// Refractivity `n - 1` at the observer.
    pub fn refractivity(&self) -> f64 {
        self.layers.first().map_or(0.0, |it| it.at(0.0).0)
    }

    /// Refractivity `n - 1` at a height above the observer; zero above the top, NaN below zero.
    pub fn refractivity_at(&self, above_observer_m: f64) -> f64 {
        let Some(first) = self.layers.first() else {
            return 0.0;
        };
        let radius_m = first.base_radius_m + above_observer_m;
        if radius_m.is_nan() || radius_m < first.base_radius_m {
            return f64::NAN;
        }
        let holds = |it: &&Layer| radius_m <= it.base_radius_m + it.thickness_m;
        self.layers
            .iter()
            .find(holds)
            .map_or(0.0, |it| it.at(radius_m - it.base_radius_m).0)
    }

    /// Refraction at an apparent zenith distance, in radians: true minus apparent zenith distance.
    ///
    /// The exact integral (angle form). Odd in its argument; NaN beyond 90 degrees, where the ray
    /// would come from below the horizon of the station.
    pub fn refraction_rad(&self, zenith_apparent_rad: f64) -> f64 {
        integral::by_angle_rad(&self.layers, zenith_apparent_rad)
    }

    /// Refraction by the height form, in radians; good to 80 degrees, and much faster.
    pub fn refraction_by_height_rad(&self, zenith_apparent_rad: f64) -> f64 {
        let sin = zenith_apparent_rad.sin();
        sin * integral::by_height_over_sine(&self.points, self.optical_radius_m, sin)
    }

    /// Refraction over the sine of the apparent zenith distance, by the form that suits it.
    pub(super) fn refraction_over_sine(&self, zenith_apparent_rad: f64) -> f64 {
        let sin = zenith_apparent_rad.sin();
        if zenith_apparent_rad <= HEIGHT_FORM_TO_RAD {
            integral::by_height_over_sine(&self.points, self.optical_radius_m, sin)
        } else {
            self.refraction_rad(zenith_apparent_rad) / sin
        }
    }
}

/// The gas of the standard model above a station: what its weight depends on.
#[derive(Clone, Copy, Debug)]
pub(super) struct Gas {
    pub(super) latitude_rad: f64,
    pub(super) height_m: f64,
}

impl Gas {
    /// Gravity times molar mass over the gas constant, in K/m.
    pub(super) fn hydrostatic_k_per_m(self) -> f64 {
        gravity_m_s2(self.latitude_rad, self.height_m) * DRY_KG_PER_KMOL / GAS_CONSTANT
    }

    /// An isothermal layer in hydrostatic balance.
    pub(super) fn isothermal(
        self,
        base_radius_m: f64,
        thickness_m: f64,
        refractivity: f64,
        temperature_k: f64,
    ) -> Layer {
        let scale_m = temperature_k / self.hydrostatic_k_per_m();
        let dry = Term::Exponential {
            amplitude: refractivity,
            scale_m,
        };
        Layer {
            base_radius_m,
            thickness_m,
            dry,
            wet: Term::NONE,
        }
    }
}
