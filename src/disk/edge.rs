//! The Sun's limb before the air: limb darkening that ends in an edge of finite thickness.
//!
//! # Model
//!
//! ```text
//! I(x) = P5(mu(R + x)) (1 - exp(-tau)),   tau = exp(-x / H),   mu(r) = sqrt(1 - (r/R)^2), 0 beyond R
//! ```
//!
//! | symbol | meaning | unit |
//! |--------|---------|------|
//! | `x` | distance from the limb, positive outward | arcsec |
//! | `R` | apparent radius, where the tangential optical depth `tau` is one | arcsec |
//! | `H` | scale of the tangential optical depth, as an angle; 0 is a sharp step | arcsec |
//! | `P5` | limb darkening | disk centre |
//!
//! Inflection: `-dI/dx` is the sum of `P5 tau exp(-tau) / H`, largest at `tau = 1`, and of the
//! darkening's slope, which with `A1 > 0` grows as `A1 / sqrt(2 R |x|)` towards `x = 0` from inside
//! and is zero outside. Both have their greatest value at `x = 0`, so that the inflection of the
//! unblurred profile is at `R` for every `H`.
//!
//! # Valid for
//!
//! Radii of 500..2000 arcsec, `H` of 0..1 arcsec. The photosphere has `H` of 60..100 km, 0.08..0.14
//! arcsec (from memory).
//!
//! # Accuracy
//!
//! The same edge taken as the sharp disk spread by the derivative of `1 - exp(-tau)` gives an
//! inflection after blur that lies 4 to 10 mas farther out (`H` of 60 to 100 km): the thickness of
//! the edge is a systematic of every absolute radius.
//!
//! # Source
//!
//! Emergent intensity of a layer of constant source function, `S (1 - exp(-tau))`, with exponential
//! opacity along the tangential ray: radiative transfer, common practice, no source.

use super::{Darkening, DiskError};

/// Smallest and largest radius of the disk, arcsec.
const RADIUS_RANGE_ARCSEC: (f64, f64) = (500.0, 2000.0);

/// Largest scale of the edge, arcsec.
const LARGEST_SCALE_ARCSEC: f64 = 1.0;

/// The limb as it would be seen without air and telescope.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct SolarEdge {
    /// Apparent semi-diameter as seen, arcsec.
    pub radius_arcsec: f64,
    /// Scale `H` of the tangential optical depth, arcsec; zero for a sharp step.
    pub scale_arcsec: f64,
    /// Limb darkening.
    pub darkening: Darkening,
}

impl SolarEdge {
    /// Whether radius and scale are those of a solar limb.
    ///
    /// # Errors
    ///
    /// [`DiskError::Radius`] or [`DiskError::Scale`] outside the ranges of the module's page.
    pub fn check(&self) -> Result<(), DiskError> {
        let (lowest_arcsec, highest_arcsec) = RADIUS_RANGE_ARCSEC;
        if !(lowest_arcsec..=highest_arcsec).contains(&self.radius_arcsec) {
            return Err(DiskError::Radius {
                found_arcsec: self.radius_arcsec,
                lowest_arcsec,
                highest_arcsec,
            });
        }
        if !(0.0..=LARGEST_SCALE_ARCSEC).contains(&self.scale_arcsec) {
            return Err(DiskError::Scale {
                found_arcsec: self.scale_arcsec,
                highest_arcsec: LARGEST_SCALE_ARCSEC,
            });
        }
        Ok(())
    }

    /// Cosine of the heliocentric angle at a distance from the limb; zero outside.
    pub fn mu(&self, x_arcsec: f64) -> f64 {
        let r = self.radius_arcsec;
        // 1 - ((r + x) / r)^2 without the cancellation near the limb.
        (-x_arcsec * (2.0 * r + x_arcsec)).max(0.0).sqrt() / r
    }

    /// Brightness at a distance from the limb, in units of disk centre.
    pub fn intensity(&self, x_arcsec: f64) -> f64 {
        self.sharp_intensity(x_arcsec) + self.softening(x_arcsec)
    }

    /// Where the unblurred profile has its inflection, relative to `x = 0`, arcsec: at `x = 0` itself,
    /// for every scale and every limb darkening with `A1 >= 0` (see the module's page).
    pub fn inflection_arcsec(&self) -> f64 {
        0.0
    }

    /// The disk with a sharp edge; half of the step at `x = 0`.
    pub(crate) fn sharp_intensity(&self, x_arcsec: f64) -> f64 {
        if x_arcsec < 0.0 {
            self.darkening.at(self.mu(x_arcsec))
        } else if x_arcsec == 0.0 {
            0.5 * self.darkening.at(0.0)
        } else {
            0.0
        }
    }

    /// What the finite thickness adds to the sharp edge: negative inside, positive outside.
    pub(crate) fn softening(&self, x_arcsec: f64) -> f64 {
        if self.scale_arcsec == 0.0 {
            return 0.0;
        }
        let tau = (-x_arcsec / self.scale_arcsec).exp();
        if x_arcsec < 0.0 {
            -self.darkening.at(self.mu(x_arcsec)) * (-tau).exp()
        } else if x_arcsec == 0.0 {
            self.darkening.at(0.0) * (0.5 - (-1.0_f64).exp())
        } else {
            self.darkening.at(0.0) * -(-tau).exp_m1()
        }
    }
}
