//! Slow drivers of the instrument: readings in time with which its distortion goes.
//!
//! # Model
//!
//! ```text
//! D_m(t) = D_m + k_m (x(t) - mean of x),   m = 2, 3, 4, fixed to the detector
//! ```
//!
//! # Valid for
//!
//! Changes small enough to be linear. A reading that runs with the roll, or with the field's turning,
//! can stand for the Sun's figure: the error of the oblateness grows by it, as it must.
//!
//! # Accuracy
//!
//! That of the fit: each slope is stated with its error.
//!
//! # Source
//!
//! Linear covariates with prior knowledge: general least squares.

use super::design::{Component, about};
use super::{COMPONENTS, Observation};

/// A reading in time.
#[derive(Clone, Debug, PartialEq)]
pub struct Driver {
    /// Name, as the result gives it.
    pub name: String,
    /// Unit of the reading; empty where it is not known.
    pub unit: &'static str,
    /// Line of the budget.
    pub term: &'static str,
    /// How its width was come by.
    pub how: String,
    /// Prior standard deviation of each slope about zero, mas for one unit of the reading.
    pub sigma_mas: f64,
    /// Seconds after the session's first frame, and the reading minus its mean, in the order of time.
    pub readings: Vec<(f64, f64)>,
}

impl Driver {
    /// The reading minus its mean at a time, linear between readings; that of the end beyond them.
    pub(super) fn at(&self, time_s: f64) -> f64 {
        let after = self.readings.partition_point(|it| it.0 < time_s);
        match (
            after.checked_sub(1).and_then(|k| self.readings.get(k)),
            self.readings.get(after),
        ) {
            (Some(a), Some(b)) => a.1 + (time_s - a.0) / (b.0 - a.0) * (b.1 - a.1),
            (Some(it), None) | (None, Some(it)) => it.1,
            (None, None) => 0.0,
        }
    }

    /// What a slope of 1 mas for one unit does to a limb: cosine (`part` 0) or sine of m.
    pub(super) fn column(&self, o: &Observation, m: usize, part: usize) -> Component {
        let x = self.at(o.time_s);
        if x == 0.0 {
            return [0.0; COMPONENTS];
        }
        about(m, part as f64 * std::f64::consts::FRAC_PI_2 / m as f64, x)
    }
}

/// A fitted slope, mas for one unit of the reading.
#[derive(Clone, Debug, PartialEq)]
pub struct DriverSlope {
    /// Name of the reading.
    pub name: String,
    /// Its unit.
    pub unit: &'static str,
    /// Harmonic.
    pub m: usize,
    /// Cosine, sine, and their standard uncertainties.
    pub cos_mas: (f64, f64),
    /// Sine.
    pub sin_mas: (f64, f64),
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn between_readings_it_is_linear_and_beyond_them_constant() {
        let it = Driver {
            name: String::new(),
            unit: "",
            term: "",
            how: String::new(),
            sigma_mas: 1.0,
            readings: vec![(0.0, -1.0), (10.0, 1.0), (10.0, 1.0), (20.0, 0.0)],
        };
        for (time_s, expected) in [
            (-5.0, -1.0),
            (2.5, -0.5),
            (10.0, 1.0),
            (15.0, 0.5),
            (99.0, 0.0),
        ] {
            assert!(
                (it.at(time_s) - expected).abs() < 1e-12,
                "{time_s}: {}",
                it.at(time_s)
            );
        }
    }
}
