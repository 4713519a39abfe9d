//! One layer of air: refractivity and its gradient in closed form.
//!
//! # Model
//!
//! Refractivity is the sum of a part of dry air and a part of vapour, each one of
//!
//! ```text
//! a x^m,  x = 1 + b s     temperature linear in height, hydrostatic
//! a exp(-s / H)           temperature constant
//! a (1 - s / h)           humidity that ends inside the layer
//! ```
//!
//! | symbol | meaning | unit |
//! |--------|---------|------|
//! | `s` | height above the base of the layer | m |
//! | `a` | refractivity at the base | - |
//! | `b` | gradient of the temperature over the temperature of the base | m^-1 |
//!
//! # Valid for
//!
//! Positive temperatures throughout the layer.
//!
//! # Accuracy
//!
//! Closed forms, to rounding.
//!
//! # Source
//!
//! C. Y. Hohenkerk and A. T. Sinclair, NAO Technical Note 63 (1985).

/// A part of the refractivity as a function of height within the layer.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) enum Term {
    /// `amplitude (1 + per_m s)^exponent`.
    Power {
        amplitude: f64,
        per_m: f64,
        exponent: f64,
    },
    /// `amplitude exp(-s / scale_m)`.
    Exponential { amplitude: f64, scale_m: f64 },
    /// `amplitude + slope_per_m s`.
    Linear { amplitude: f64, slope_per_m: f64 },
}

impl Term {
    /// No such part.
    pub(super) const NONE: Self = Self::Linear {
        amplitude: 0.0,
        slope_per_m: 0.0,
    };

    /// Value, and its derivative per metre.
    fn at(self, s_m: f64) -> (f64, f64) {
        match self {
            Self::Power {
                amplitude,
                per_m,
                exponent,
            } => {
                let rise = per_m * s_m;
                let value = amplitude * (exponent * rise.ln_1p()).exp();
                (value, value * exponent * per_m / (1.0 + rise))
            }
            Self::Exponential { amplitude, scale_m } => {
                let value = amplitude * (-s_m / scale_m).exp();
                (value, -value / scale_m)
            }
            Self::Linear {
                amplitude,
                slope_per_m,
            } => (amplitude + slope_per_m * s_m, slope_per_m),
        }
    }
}

/// A layer of air between two radii.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Layer {
    /// Distance of the base from the centre of curvature, in metres.
    pub(super) base_radius_m: f64,
    /// Thickness, in metres.
    pub(super) thickness_m: f64,
    /// Part of dry air.
    pub(super) dry: Term,
    /// Part of vapour, as a rule negative.
    pub(super) wet: Term,
}

impl Layer {
    /// Refractivity `n - 1`, and its derivative per metre, at a height above the base.
    pub(super) fn at(&self, s_m: f64) -> (f64, f64) {
        let (dry, dry_slope) = self.dry.at(s_m);
        if self.wet == Term::NONE {
            return (dry, dry_slope);
        }
        let (wet, wet_slope) = self.wet.at(s_m);
        (dry + wet, dry_slope + wet_slope)
    }

    /// Curvature of a level ray over that of the Earth at a height above the base.
    pub(super) fn curvature_ratio(&self, s_m: f64) -> f64 {
        let (refractivity, slope) = self.at(s_m);
        -(self.base_radius_m + s_m) * slope / (1.0 + refractivity)
    }

    /// Points of Gauss-Legendre quadrature that reach 1e-9 arcsec.
    pub(super) fn points(&self) -> usize {
        if self.thickness_m < 600.0 {
            8
        } else if self.thickness_m < 2500.0 {
            16
        } else {
            32
        }
    }
}
