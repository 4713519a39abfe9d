//! The exact map between where a point of the disk is seen and where it truly is.
//!
//! # Model
//!
//! A point is a direction `(u, v, w)` about a centre: `v` towards the zenith, `u` at right angles in
//! the positive sense of bearings, `w` along the line of sight. Refraction turns the direction in its
//! own vertical plane; the azimuth stays.
//!
//! ```text
//! x = sin z w - cos z v,  y = u,  c = cos z w + sin z v          horizontal, vertical parts
//! true      x h, y h, c''     h = cos R + c E sinc R,   c'' = c cos R - (x^2 + y^2) E sinc R
//! apparent  x h, y h, c''     h = cos R - c E sinc R,   c'' = c cos R + (x^2 + y^2) E sinc R
//! E = R/sin(zenith distance) as a polynomial in c;   R^2 = (x^2 + y^2) E^2
//! ```
//!
//! | symbol | meaning | unit |
//! |--------|---------|------|
//! | `z` | zenith distance of the centre, apparent or true | rad |
//! | `R` | refraction at the point | rad |
//!
//! No angle of the point itself is ever formed, which makes the map fast and regular at the zenith.
//!
//! # Valid for
//!
//! Radii up to 0.45 degrees ([`TABLE_HALF_WIDTH_RAD`]); NaN beyond.
//!
//! # Accuracy
//!
//! Rounding: 1e-10 arcsec; round trip 1e-8 arcsec.
//!
//! # Source
//!
//! Spherical trigonometry; the stretch `1 + R'` along the vertical and `sin z/sin zeta` across it is
//! the classical differential refraction.

use super::bending::{Bending, NEGLIGIBLE_RAD, TABLE_HALF_WIDTH_RAD};
use super::even_table::{EvenTable, FEW_TERMS, MAX_TERMS};
use crate::units::DEG_RAD;

/// Local linear map from apparent to true offsets, both in orthonormal axes.
///
/// Radial is away from the centre; tangential is towards growing bearing, its length the sine of
/// the radius times the bearing.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Jacobian {
    /// True radial part of an apparent radial step.
    pub radial_radial: f64,
    /// True radial part of an apparent tangential step.
    pub radial_tangential: f64,
    /// True tangential part of an apparent radial step.
    pub tangential_radial: f64,
    /// True tangential part of an apparent tangential step.
    pub tangential_tangential: f64,
}

impl Jacobian {
    /// True over apparent solid angle.
    pub fn determinant(&self) -> f64 {
        self.radial_radial * self.tangential_tangential
            - self.radial_tangential * self.tangential_radial
    }
}

/// Zenith distance of a centre, as sine and cosine.
#[derive(Clone, Copy, Debug, PartialEq)]
struct Centre {
    sin: f64,
    cos: f64,
}

impl Centre {
    fn new(zenith_rad: f64) -> Self {
        let (sin, cos) = zenith_rad.sin_cos();
        Self { sin, cos }
    }
}

/// Map of a disk through the air, both ways.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct DiskMap {
    bending: Bending,
    inverse: EvenTable,
    zenith_true_rad: f64,
    apparent: Centre,
    truth: Centre,
}

impl DiskMap {
    /// The map of a disk whose centre is truly at a zenith distance near that of the bending.
    ///
    /// Points the bending does not reach come out as NaN.
    pub fn new(bending: Bending, zenith_true_centre_rad: f64) -> Self {
        let half_rad = TABLE_HALF_WIDTH_RAD + 0.005 * DEG_RAD;
        let range_rad = (
            zenith_true_centre_rad - half_rad,
            zenith_true_centre_rad + half_rad,
        );
        let inverse = EvenTable::fit(range_rad, bending.points(), NEGLIGIBLE_RAD, |zenith_rad| {
            (zenith_rad - bending.apparent_rad(zenith_rad)) / zenith_rad.sin()
        });
        Self {
            bending,
            inverse,
            zenith_true_rad: zenith_true_centre_rad,
            apparent: Centre::new(bending.apparent_rad(zenith_true_centre_rad)),
            truth: Centre::new(zenith_true_centre_rad),
        }
    }

    /// The bending over the disk.
    pub fn bending(&self) -> &Bending {
        &self.bending
    }

    /// True zenith distance of the centre, in radians.
    pub fn zenith_true_rad(&self) -> f64 {
        self.zenith_true_rad
    }

    /// Apparent zenith distance of the centre, in radians.
    pub fn zenith_apparent_rad(&self) -> f64 {
        self.bending.apparent_rad(self.zenith_true_rad)
    }

    /// True radius and bearing about the true centre, from those seen about the refracted centre.
    ///
    /// Radians throughout; bearings from the direction of the zenith.
    #[inline]
    pub fn true_from_apparent(&self, radius_rad: f64, bearing_rad: f64) -> (f64, f64) {
        let [[radius_rad], [bearing_rad]] = self.towards_truth([[radius_rad], [bearing_rad]]);
        (radius_rad, bearing_rad)
    }

    /// Radius and bearing seen about the refracted centre, from the true ones about the true centre.
    ///
    /// Radians throughout; bearings from the direction of the zenith.
    #[inline]
    pub fn apparent_from_true(&self, radius_rad: f64, bearing_rad: f64) -> (f64, f64) {
        let [[radius_rad], [bearing_rad]] = self.towards_eye([[radius_rad], [bearing_rad]]);
        (radius_rad, bearing_rad)
    }

    /// [`DiskMap::true_from_apparent`] for a whole limb in place: the same numbers, faster.
    pub fn true_from_apparent_each(&self, points: &mut [(f64, f64)]) {
        carry_each(
            points,
            |it| self.towards_truth(it),
            |r, b| self.true_from_apparent(r, b),
        );
    }

    /// [`DiskMap::apparent_from_true`] for a whole limb in place: the same numbers, faster.
    pub fn apparent_from_true_each(&self, points: &mut [(f64, f64)]) {
        carry_each(
            points,
            |it| self.towards_eye(it),
            |r, b| self.apparent_from_true(r, b),
        );
    }

    #[inline]
    fn towards_truth<const N: usize>(&self, points: [[f64; N]; 2]) -> [[f64; N]; 2] {
        let table = self.bending.table();
        if table.is_short() {
            carried::<N, FEW_TERMS>(table, 1.0, self.apparent, self.truth, points)
        } else {
            carried::<N, MAX_TERMS>(table, 1.0, self.apparent, self.truth, points)
        }
    }

    #[inline]
    fn towards_eye<const N: usize>(&self, points: [[f64; N]; 2]) -> [[f64; N]; 2] {
        let table = &self.inverse;
        if table.is_short() {
            carried::<N, FEW_TERMS>(table, -1.0, self.truth, self.apparent, points)
        } else {
            carried::<N, MAX_TERMS>(table, -1.0, self.truth, self.apparent, points)
        }
    }

    /// How small steps at an apparent point turn into steps at the true point.
    pub fn jacobian(&self, radius_rad: f64, bearing_rad: f64) -> Jacobian {
        let (true_radius_rad, true_bearing_rad) = self.true_from_apparent(radius_rad, bearing_rad);
        let seen = vertical_at(self.apparent, radius_rad, bearing_rad);
        let truth = vertical_at(self.truth, true_radius_rad, true_bearing_rad);
        let [e, e1, _] = self.bending.table().with_derivatives(seen.cos_zenith);
        let sin2 = 1.0 - seen.cos_zenith * seen.cos_zenith;
        let along = 1.0 + seen.cos_zenith * e - sin2 * e1;
        let refraction_rad = sin2.max(0.0).sqrt() * e;
        let across = refraction_rad.cos() + seen.cos_zenith * e * sinc(refraction_rad);
        Jacobian {
            radial_radial: along * truth.radial * seen.radial
                + across * truth.tangential * seen.tangential,
            radial_tangential: along * truth.radial * seen.tangential
                - across * truth.tangential * seen.radial,
            tangential_radial: along * truth.tangential * seen.radial
                - across * truth.radial * seen.tangential,
            tangential_tangential: along * truth.tangential * seen.tangential
                + across * truth.radial * seen.radial,
        }
    }
}

/// Direction of the zenith at a point, in radial and tangential parts, and the point's own cosine.
struct Vertical {
    radial: f64,
    tangential: f64,
    cos_zenith: f64,
}

fn vertical_at(centre: Centre, radius_rad: f64, bearing_rad: f64) -> Vertical {
    let (sin_r, cos_r) = radius_rad.sin_cos();
    let (sin_b, cos_b) = bearing_rad.sin_cos();
    let radial = centre.sin * cos_r * cos_b - centre.cos * sin_r;
    let tangential = -centre.sin * sin_b;
    let cos_zenith = centre.cos * cos_r + centre.sin * sin_r * cos_b;
    let sin_zenith = radial.hypot(tangential);
    if sin_zenith < 1e-12 {
        // At the zenith every direction is vertical and the map is isotropic.
        return Vertical {
            radial: 1.0,
            tangential: 0.0,
            cos_zenith,
        };
    }
    Vertical {
        radial: radial / sin_zenith,
        tangential: tangential / sin_zenith,
        cos_zenith,
    }
}

fn sinc(x: f64) -> f64 {
    if x == 0.0 { 1.0 } else { x.sin() / x }
}

/// Points carried together: enough that the compiler works through them in vector registers.
const LANES: usize = 16;

/// Carries points about one centre through the air to the other; `sign` is +1 towards the truth.
///
/// Takes and gives radii and bearings. The long middle part has no branch, so that it vectorises.
#[inline]
fn carried<const N: usize, const T: usize>(
    table: &EvenTable,
    sign: f64,
    from: Centre,
    to: Centre,
    [radius_rad, bearing_rad]: [[f64; N]; 2],
) -> [[f64; N]; 2] {
    // A product with a constant costs a fifth of a quotient, and this runs for every point.
    const SIXTH: f64 = 1.0 / 6.0;
    let [mut sin_b, mut cos_b] = [[0.0; N]; 2];
    for i in 0..N {
        (sin_b[i], cos_b[i]) = libm::sincos(bearing_rad[i]);
    }
    let [mut radius_to_rad, mut across, mut along] = [[0.0; N]; 3];
    for i in 0..N {
        let r = radius_rad[i];
        let r2 = r * r;
        // Series to rounding: the radius is below 0.0079.
        let sin_r = r * (1.0 - r2 * (SIXTH - r2 * (SIXTH / 20.0)));
        let cos_r = 1.0 - r2 * (0.5 - r2 * (0.25 * SIXTH));
        let (u, v) = (sin_r * sin_b[i], sin_r * cos_b[i]);
        let x = from.sin * cos_r - from.cos * v;
        let c = from.cos * cos_r + from.sin * v;
        let sin2 = x * x + u * u;
        let e = table.sum::<T>(c);
        // Series to rounding: refraction is below 0.012, its square below 1.5e-4.
        let q = sin2 * e * e;
        let cos_refraction = 1.0 - q * (0.5 - q * (0.25 * SIXTH));
        let turn = sign * e * (1.0 - q * (SIXTH - q * (SIXTH / 20.0)));
        let stretch = cos_refraction + c * turn;
        let c_to = c * cos_refraction - sin2 * turn;
        let (u_to, v_to) = (u * stretch, to.sin * c_to - to.cos * x * stretch);
        let d2 = u_to * u_to + v_to * v_to;
        // The arc sine to rounding.
        radius_to_rad[i] = d2.sqrt() * (1.0 + d2 * (SIXTH + d2 * (3.0 / 40.0)));
        across[i] = u_to * cos_b[i] - v_to * sin_b[i];
        along[i] = u_to * sin_b[i] + v_to * cos_b[i];
    }
    let mut bearing_to_rad = bearing_rad;
    for i in 0..N {
        let t = across[i] / along[i];
        let t2 = t * t;
        bearing_to_rad[i] += t * (1.0 - t2 * (1.0 / 3.0 - t2 * 0.2));
    }
    for i in 0..N {
        // Where the turn is small, as nearly always, the series above is good to rounding.
        if !(along[i] > 0.0 && across[i].abs() < 3e-3 * along[i]) {
            bearing_to_rad[i] = bearing_rad[i] + across[i].atan2(along[i]);
        }
        // Rounding in a radius given in other units must not push the border itself outside.
        if !(0.0..=TABLE_HALF_WIDTH_RAD * (1.0 + 1e-12)).contains(&radius_rad[i]) {
            (radius_to_rad[i], bearing_to_rad[i]) = (f64::NAN, f64::NAN);
        }
    }
    [radius_to_rad, bearing_to_rad]
}

/// Carries every point of a list, [`LANES`] at a time.
fn carry_each(
    points: &mut [(f64, f64)],
    many: impl Fn([[f64; LANES]; 2]) -> [[f64; LANES]; 2],
    one: impl Fn(f64, f64) -> (f64, f64),
) {
    let (groups, rest) = points.as_chunks_mut::<LANES>();
    for group in groups {
        let [radii, bearings] = many([group.map(|it| it.0), group.map(|it| it.1)]);
        for (point, carried) in group.iter_mut().zip(radii.into_iter().zip(bearings)) {
            *point = carried;
        }
    }
    for point in rest {
        *point = one(point.0, point.1);
    }
}
