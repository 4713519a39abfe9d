//! Refraction over a disk, tabulated once and then free of integrals.
//!
//! # Model
//!
//! ```text
//! R(zeta) = sin zeta E(cos zeta)
//! R'      = cos zeta E - sin^2 zeta E'
//! R''     = -sin zeta E - 3 sin zeta cos zeta E' + sin^3 zeta E''
//! ```
//!
//! | symbol | meaning | unit |
//! |--------|---------|------|
//! | `zeta` | apparent zenith distance | rad |
//! | `R` | refraction, true minus apparent zenith distance | rad |
//! | `E` | polynomial in the cosine; primes of `E` are by the cosine | rad |
//!
//! # Valid for
//!
//! Disks whose apparent centre is at least 0.46 degrees above the horizon, the zenith included.
//!
//! # Accuracy
//!
//! Against the integral: 1e-8 arcsec to 75 degrees, 1e-6 arcsec down to the horizon.
//!
//! # Source
//!
//! Own construction, checked against the integral in `tests/published/limb_map.rs`.

use std::f64::consts::FRAC_PI_2;

use super::conditions::within;
use super::error::AirError;
use super::even_table::EvenTable;
use super::profile::Profile;
use crate::units::DEG_RAD;

/// Distance from the centre that the tables serve, in radians.
pub const TABLE_HALF_WIDTH_RAD: f64 = 0.45 * DEG_RAD;

/// Room beyond it, for a centre that is not quite that of the table.
const MARGIN_RAD: f64 = 0.01 * DEG_RAD;

/// Terms of the tables below this are dropped, in radians.
pub(super) const NEGLIGIBLE_RAD: f64 = 1e-16;

/// Refraction as a function of apparent zenith distance, near the centre of a disk.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Bending {
    table: EvenTable,
    low_rad: f64,
    high_rad: f64,
    centre_apparent_rad: f64,
    points: usize,
}

impl Bending {
    /// Tabulates the bending for a disk whose centre is truly at a zenith distance.
    ///
    /// # Errors
    ///
    /// [`AirError::OutOfRange`] when the zenith distance is negative or the disk touches the
    /// horizon.
    pub fn new(profile: &Profile, zenith_true_centre_rad: f64) -> Result<Self, AirError> {
        const SET_BY: &str = "a disk above the horizon";
        let true_deg = zenith_true_centre_rad.to_degrees();
        within(
            "true zenith distance",
            true_deg,
            (0.0, 89.95),
            "deg",
            SET_BY,
        )?;
        let centre_apparent_rad = apparent_centre_rad(profile, zenith_true_centre_rad);
        let half_rad = TABLE_HALF_WIDTH_RAD + MARGIN_RAD;
        let highest_deg = (FRAC_PI_2 - half_rad).to_degrees();
        let apparent_deg = centre_apparent_rad.to_degrees();
        within(
            "apparent zenith distance",
            apparent_deg,
            (0.0, highest_deg),
            "deg",
            SET_BY,
        )?;
        let (low_rad, high_rad) = (
            centre_apparent_rad - half_rad,
            centre_apparent_rad + half_rad,
        );
        // The nearest singularity is just below the horizon: more points as it comes closer.
        let points = if high_rad < 80.0 * DEG_RAD { 8 } else { 16 };
        let table = EvenTable::fit((low_rad, high_rad), points, NEGLIGIBLE_RAD, |zenith_rad| {
            profile.refraction_over_sine(zenith_rad)
        });
        Ok(Self {
            table,
            low_rad,
            high_rad,
            centre_apparent_rad,
            points,
        })
    }

    /// Apparent zenith distance of the centre, in radians.
    pub fn centre_apparent_rad(&self) -> f64 {
        self.centre_apparent_rad
    }

    /// Refraction at an apparent zenith distance, in radians; NaN outside the table.
    pub fn refraction_rad(&self, zenith_apparent_rad: f64) -> f64 {
        if !self.holds(zenith_apparent_rad) {
            return f64::NAN;
        }
        let (sin, cos) = zenith_apparent_rad.sin_cos();
        sin * self.table.value(cos)
    }

    /// Derivative of the refraction by the apparent zenith distance; NaN outside the table.
    pub fn slope(&self, zenith_apparent_rad: f64) -> f64 {
        if !self.holds(zenith_apparent_rad) {
            return f64::NAN;
        }
        self.expansion(zenith_apparent_rad)[1]
    }

    /// Second derivative of the refraction by the apparent zenith distance, per radian.
    pub fn curvature_per_rad(&self, zenith_apparent_rad: f64) -> f64 {
        if !self.holds(zenith_apparent_rad) {
            return f64::NAN;
        }
        self.expansion(zenith_apparent_rad)[2]
    }

    /// Apparent zenith distance of a true one, in radians; NaN outside the table.
    pub fn apparent_rad(&self, zenith_true_rad: f64) -> f64 {
        const STEPS: usize = 8;
        let mut zenith_rad = zenith_true_rad - self.expansion(self.centre_apparent_rad)[0];
        for _ in 0..STEPS {
            let [refraction_rad, slope, _] = self.expansion(zenith_rad);
            let step_rad = (zenith_rad + refraction_rad - zenith_true_rad) / (1.0 + slope);
            zenith_rad -= step_rad;
            if step_rad.abs() < 1e-15 {
                break;
            }
        }
        if self.holds(zenith_rad) {
            zenith_rad
        } else {
            f64::NAN
        }
    }

    /// Points from which the table was made: as many suffice for the inverse.
    pub(super) fn points(&self) -> usize {
        self.points
    }

    /// The even part, refraction over sine.
    pub(super) fn table(&self) -> &EvenTable {
        &self.table
    }

    fn holds(&self, zenith_rad: f64) -> bool {
        (self.low_rad..=self.high_rad).contains(&zenith_rad)
    }

    /// Refraction and its first two derivatives.
    fn expansion(&self, zenith_rad: f64) -> [f64; 3] {
        let (sin, cos) = zenith_rad.sin_cos();
        let [e, e1, e2] = self.table.with_derivatives(cos);
        [
            sin * e,
            cos * e - sin * sin * e1,
            sin * (-e - 3.0 * cos * e1 + sin * sin * e2),
        ]
    }
}

/// Solves `zeta + R(zeta) = z` by fixed-point steps, each smaller by the slope of the refraction.
fn apparent_centre_rad(profile: &Profile, zenith_true_rad: f64) -> f64 {
    const STEPS: usize = 60;
    let mut zenith_rad = zenith_true_rad;
    for _ in 0..STEPS {
        let next_rad =
            zenith_true_rad - zenith_rad.sin() * profile.refraction_over_sine(zenith_rad);
        let step_rad = next_rad - zenith_rad;
        zenith_rad = next_rad;
        if step_rad.abs() < 1e-13 {
            break;
        }
    }
    zenith_rad
}
