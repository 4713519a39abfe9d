//! What the figure says of the interior: quadrupole, next moment and perihelion.
//!
//! # Model
//!
//! ```text
//! c_n = c_n(rotation) - J_n                                                   n = 2, 4
//! oblateness = rotation figure + R (3/2 J2 + 5/8 J4)
//! excess E   = oblateness - rotation figure,   J2 = E / (1.5 R)               J4 = 0
//! J2 = c2(rotation) - c2,   J4 = c4(rotation) - c4                            J4 free
//! u^2 = u(measured)^2 + u(law)^2,   u(law) = (largest - smallest) / (2 sqrt 3) over the laws
//! ```
//!
//! | symbol | meaning | unit |
//! |--------|---------|------|
//! | `c_n` | coefficient of `P_n` in the radius | - |
//! | `J_n` | moments of the gravity field | - |
//! | `R` | nominal radius at 1 AU | mas |
//!
//! # Valid for
//!
//! First order in the flattening: exact level surfaces of a body that turns on cylinders agree within
//! 1e-9. The limb is taken for a surface of equal pressure; magnetic stress, or a temperature that
//! depends on latitude, is not in it.
//!
//! # Accuracy
//!
//! The rotation law leads: its spread is 0.28 mas in the oblateness and 1.9e-7 in `J2`, and no number
//! of seasons lowers it.
//!
//! # Source
//!
//! Hydrostatic equilibrium projected on Legendre polynomials; the rectangular distribution of the law
//! after JCGM 100:2008, 4.3.7. Checked in `tests/published/gravity.rs`.

mod perihelion;
mod rotation;

pub use perihelion::{quadrupole_advance_arcsec, relativity_advance_arcsec};
pub use rotation::{Figure, figure, spread};

use crate::constants::{ASTRONOMICAL_UNIT, SOLAR_RADIUS_NOMINAL};
use crate::session::RotationLaw;
use crate::units::MAS_RAD;

/// A value with its standard uncertainty.
pub type Uncertain = (f64, f64);

/// What a measured figure says by one choice of rotation law.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Interior {
    /// Oblateness that rotation alone gives, mas at 1 AU.
    pub rotation_mas: Uncertain,
    /// Oblateness beyond it, mas.
    pub excess_mas: Uncertain,
    /// `J2`, with `J4` taken as zero.
    pub j2: Uncertain,
    /// `J2` with `J4` free, and `J4`; none where `R c4` was not measured.
    pub free: Option<(Uncertain, Uncertain)>,
}

/// The measured figure.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Measured {
    /// Equatorial minus polar radius, mas at 1 AU.
    pub oblateness_mas: Uncertain,
    /// `R c4`, mas at 1 AU, where it was measured.
    pub p4_mas: Option<Uncertain>,
    /// Correlation of the two.
    pub correlation: f64,
}

/// What a figure says of the interior. With `law` as one law or none (the middle of their range) the
/// spread between the laws is part of every uncertainty; `alone` leaves it out, for a table by law.
pub fn interior(measured: &Measured, law: RotationLaw, alone: bool) -> Interior {
    let taken = figure(law);
    let radius_mas = nominal_radius_mas();
    let spread = if alone { Figure::default() } else { spread() };
    let (value, sigma) = measured.oblateness_mas;
    let rotation_mas = (
        taken.oblateness * radius_mas,
        spread.oblateness * radius_mas,
    );
    let excess_mas = (value - rotation_mas.0, sigma.hypot(rotation_mas.1));
    let per_j2 = 1.5 * radius_mas;
    let free = measured.p4_mas.map(|(p4, p4_sigma)| {
        // c2 = -(2/3 oblateness + 5/12 R c4) / R
        let (by_oblateness, by_p4) = (-2.0 / 3.0, -5.0 / 12.0);
        let c2 = (by_oblateness * value + by_p4 * p4) / radius_mas;
        let variance = (by_oblateness * sigma).powi(2)
            + (by_p4 * p4_sigma).powi(2)
            + 2.0 * by_oblateness * by_p4 * measured.correlation * sigma * p4_sigma;
        let c2_sigma = larger(variance, 0.0).sqrt() / radius_mas;
        let (c4, c4_sigma) = (p4 / radius_mas, p4_sigma / radius_mas);
        (
            (taken.c2 - c2, c2_sigma.hypot(spread.c2)),
            (taken.c4 - c4, c4_sigma.hypot(spread.c4)),
        )
    });
    Interior {
        rotation_mas,
        excess_mas,
        j2: (excess_mas.0 / per_j2, excess_mas.1 / per_j2),
        free,
    }
}

/// The nominal radius at 1 AU, by which lengths become mas, mas.
pub fn nominal_radius_mas() -> f64 {
    (SOLAR_RADIUS_NOMINAL.value / ASTRONOMICAL_UNIT.value).asin() / MAS_RAD
}

fn larger(a: f64, b: f64) -> f64 {
    if a > b { a } else { b }
}
