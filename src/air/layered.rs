//! Profiles of dry gas in layers of constant lapse rate: how model atmospheres are defined.
//!
//! # Model
//!
//! ```text
//! n - 1 = (n_b - 1) x^(k/L - 1),  x = T/T_b = 1 - L s/T_b     (L = 0: (n_b - 1) exp(-k s/T_b))
//! ```
//!
//! | symbol | meaning | unit |
//! |--------|---------|------|
//! | `s` | height above the base of the layer | m |
//! | `T_b`, `n_b` | temperature (K) and refractive index at the base | |
//! | `L` | lapse rate | K/m |
//! | `k` | gravity times molar mass over the gas constant | K/m |
//!
//! # Valid for
//!
//! Ideal gas, constant gravity, positive temperatures. The air ends at the top of the last layer.
//!
//! # Accuracy
//!
//! Closed forms, to rounding.
//!
//! # Source
//!
//! Hydrostatic balance; the layers of the U.S. Standard Atmosphere, 1976, are of this form.

use super::conditions::within;
use super::error::AirError;
use super::layer::{Layer, Term};
use super::profile::Profile;

/// A dry hydrostatic gas of constant gravity, as model atmospheres are defined.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct LayeredGas {
    /// Distance of the observer from the centre of curvature, in metres.
    pub radius_m: f64,
    /// Refractivity at the observer.
    pub refractivity: f64,
    /// Temperature at the observer, in kelvin.
    pub temperature_k: f64,
    /// Gravity times molar mass over the gas constant, in K/m.
    pub hydrostatic_k_per_m: f64,
}

/// A layer of constant lapse rate.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct LapseLayer {
    /// Height of its top above the observer, in metres.
    pub top_m: f64,
    /// Fall of temperature with height, in K/m.
    pub lapse_k_per_m: f64,
}

impl Profile {
    /// A dry gas in layers of constant lapse rate, all heights counted from the observer.
    ///
    /// # Errors
    ///
    /// [`AirError::OutOfRange`] for a temperature that is not positive or a top that does not rise.
    pub fn layered(gas: &LayeredGas, lapse_layers: &[LapseLayer]) -> Result<Self, AirError> {
        const SET_BY: &str = "the model atmosphere";
        let (mut base_m, mut refractivity) = (0.0, gas.refractivity);
        let mut temperature_k = gas.temperature_k;
        let mut layers = Vec::with_capacity(lapse_layers.len());
        within("temperature", temperature_k, (1.0, 1e4), "K", SET_BY)?;
        within("refractivity", refractivity, (0.0, 1e-3), "(n - 1)", SET_BY)?;
        for it in lapse_layers {
            let thickness_m = it.top_m - base_m;
            within(
                "thickness of a layer",
                thickness_m,
                (1e-3, 1e7),
                "m",
                SET_BY,
            )?;
            let per_m = -it.lapse_k_per_m / temperature_k;
            let dry = if per_m == 0.0 {
                let scale_m = temperature_k / gas.hydrostatic_k_per_m;
                Term::Exponential {
                    amplitude: refractivity,
                    scale_m,
                }
            } else {
                let exponent = gas.hydrostatic_k_per_m / it.lapse_k_per_m - 1.0;
                Term::Power {
                    amplitude: refractivity,
                    per_m,
                    exponent,
                }
            };
            let base_radius_m = gas.radius_m + base_m;
            let layer = Layer {
                base_radius_m,
                thickness_m,
                dry,
                wet: Term::NONE,
            };
            refractivity = layer.at(thickness_m).0;
            temperature_k -= it.lapse_k_per_m * thickness_m;
            within("temperature", temperature_k, (1.0, 1e4), "K", SET_BY)?;
            base_m = it.top_m;
            layers.push(layer);
        }
        Self::from_layers(layers, gas.radius_m)
    }
}
