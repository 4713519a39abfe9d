//! Radius and oblateness from many transits.
//!
//! # Model
//!
//! The limb of a transit in the frame of the slit (`theta` from +x towards +y, `u` the slit along +y, `v` the
//! motion), as mean and second harmonic, is the Sun's and what the inputs do to it:
//!
//! ```text
//! slit scale wrong by d        -d R (r.p)(u.r) / (u.p)         p at right angles to v
//! slit turned by e             -e R (r.p)(n.r) / (u.p)         n at right angles to u
//! clock fast by k              -k R (r.n)(v.r) / (v.n)
//! refractivity wrong by a      -a A R (r.p) [u.r + tan^2 z (u.z)(z.r)] / (u.p)
//! ```
//!
//! `r` the direction of the limb, `z` that of the zenith, `A` the refractivity. Across the slit the radius
//! follows from time alone: `2 R = (v.n) T`. The slit's scale is known from the camera or a drift, its angle
//! from the camera and the transits themselves: a turned slit shears the disk. Random errors are the scatter
//! of the transits within their sequence, as a matrix of the three components, so that what a wind-shaken line
//! does to mean and ellipse together stays together.
//!
//! # Valid for
//!
//! Three or more transits. Where one direction of the slit leaves the oblateness to the slit's scale, the
//! radius is stated for an oblateness of [`ROTATION_MAS`] within [`LOOSE_SUN_MAS`].
//!
//! # Accuracy
//!
//! That of the covariance: squares of the pulls near 1 over 400 made sessions (tests). Tilted layers, 0.7 mas for 3 arcmin
//! at 45 deg from the zenith, are left out, as are distortions of the optics along the slit.
//!
//! # Source
//!
//! First-order displacement of a circle; generalised least squares with prior knowledge.

use super::ScanError;
use crate::shape::{REFERENCE_RADIUS_MAS, sun_columns};
use nalgebra::{DMatrix, DVector, Matrix3, Vector3};

/// Transits needed for an error: three components leave no freedom below.
pub const LEAST_TRANSITS: usize = 3;

/// Prior width of the oblateness about [`ROTATION_MAS`] for the radius, and of `R c4` about zero, mas.
pub const LOOSE_SUN_MAS: [f64; 2] = [12.0, 4.0];

/// Oblateness that surface rotation alone gives, rounded, mas (physics of rotation figures: 7.8 to 8.0).
pub const ROTATION_MAS: f64 = 8.0;

/// One transit in harmonics.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Transit {
    /// Index of the sequence.
    pub sequence: usize,
    /// Mean radius minus the reference, cosine and sine of m = 2; mas at 1 AU.
    pub harmonics_mas: [f64; 3],
    /// Detector angle of solar north, rad.
    pub axis_rad: f64,
    /// Heliographic latitude of the disk's centre, rad.
    pub b0_rad: f64,
    /// Detector angle of the motion of the slit over the Sun or the Sun over the slit (half a turn is the
    /// same), rad.
    pub motion_rad: f64,
    /// Detector angle of the zenith, rad.
    pub zenith_rad: f64,
    /// Tangent of the zenith distance.
    pub tan_zenith: f64,
    /// Refractivity at the telescope.
    pub refractivity: f64,
}

/// What is known before.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct ScanKnown {
    /// Relative standard uncertainty of the slit's scale.
    pub scale_sigma_rel: f64,
    /// Standard uncertainty of the slit's angle, rad.
    pub angle_sigma_rad: f64,
    /// Relative standard uncertainty of the clock's rate.
    pub clock_sigma_rel: f64,
    /// Relative standard uncertainty of the refractivity.
    pub refractivity_sigma_rel: f64,
}

/// The slit's angle as a sequence found it.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct SlitAngle {
    /// Index of the sequence.
    pub sequence: usize,
    /// Slit minus the nominal direction, from +x towards +y, rad.
    pub turned_rad: f64,
    /// Its standard uncertainty, rad.
    pub sigma_rad: f64,
}

/// A part of the error.
#[derive(Clone, Debug, PartialEq)]
pub struct ScanContribution {
    /// Name.
    pub term: &'static str,
    /// Variance of the radius, mas^2.
    pub radius_mas2: f64,
    /// Variance of the oblateness, mas^2.
    pub oblateness_mas2: f64,
    /// Random, or systematic.
    pub random: bool,
}

/// What the transits say.
#[derive(Clone, Debug, PartialEq)]
pub struct ScanFit {
    /// Radius at 1 AU, mas.
    pub radius_mas: f64,
    /// Equatorial minus polar radius, mas.
    pub oblateness_mas: f64,
    /// Parts of the error.
    pub contributions: Vec<ScanContribution>,
    /// Angle of each sequence's slit.
    pub slits: Vec<SlitAngle>,
    /// Relative error of the slit's scale and its standard uncertainty.
    pub scale: (f64, f64),
    /// Scatter of a transit: mean radius, cosine, sine of m = 2, mas.
    pub scatter_mas: [f64; 3],
    /// Degrees of freedom of the scatter.
    pub degrees: f64,
}

impl ScanFit {
    /// Standard uncertainties of radius and oblateness, random or systematic, mas.
    pub fn sigmas_mas(&self, random: bool) -> [f64; 2] {
        let mut sum = [0.0; 2];
        for it in self.contributions.iter().filter(|it| it.random == random) {
            sum[0] += it.radius_mas2;
            sum[1] += it.oblateness_mas2;
        }
        sum.map(f64::sqrt)
    }
}

/// `k (r.a)(r.b)` for unit vectors at two detector angles, as mean, cosine and sine of m = 2.
fn product(k: f64, a_rad: f64, b_rad: f64) -> Vector3<f64> {
    let half = 0.5 * k;
    Vector3::new(
        half * (a_rad - b_rad).cos(),
        half * (a_rad + b_rad).cos(),
        half * (a_rad + b_rad).sin(),
    )
}

/// Detector angle of the slit.
const SLIT_RAD: f64 = std::f64::consts::FRAC_PI_2;

/// Effects of one unit of slit scale, slit angle, clock rate and refractivity, mas.
fn columns(it: &Transit) -> [Vector3<f64>; 4] {
    let r = REFERENCE_RADIUS_MAS;
    let across_motion = it.motion_rad + SLIT_RAD;
    let across_slit = SLIT_RAD + std::f64::consts::FRAC_PI_2;
    let u_p = (SLIT_RAD - across_motion).cos();
    let v_n = (it.motion_rad - across_slit).cos();
    let air = it.refractivity;
    let slit_zenith = (SLIT_RAD - it.zenith_rad).cos();
    [
        product(-r / u_p, across_motion, SLIT_RAD),
        product(-r / u_p, across_motion, across_slit),
        product(-r / v_n, across_slit, it.motion_rad),
        product(-air * r / u_p, across_motion, SLIT_RAD)
            + product(
                -air * r / u_p * it.tan_zenith.powi(2) * slit_zenith,
                across_motion,
                it.zenith_rad,
            ),
    ]
}

/// Radius across the slit, and along it, that a transit's harmonics have, mas at 1 AU, for a slit turned
/// by an angle from the nominal direction: across it from time alone.
pub fn radii_mas(it: &Transit, turned_rad: f64) -> [f64; 2] {
    let turn = columns(it)[1] * turned_rad;
    let h = Vector3::from(it.harmonics_mas) - turn;
    // Across the slit means theta = 0 and 180 deg.
    [h[0] + h[1], h[0] - h[1]].map(|it| REFERENCE_RADIUS_MAS + it)
}

/// Position of the first unknown of its kind: radius, oblateness, P4, scale, clock, refractivity, angles.
const SCALE: usize = 3;
const CLOCK: usize = 4;
const AIR: usize = 5;
const ANGLES: usize = 6;

/// Fits radius and oblateness to the transits, which are in order of their sequences.
///
/// # Errors
///
/// [`ScanError::TooFew`] and [`ScanError::Singular`].
pub fn fit(transits: &[Transit], known: &ScanKnown) -> Result<ScanFit, ScanError> {
    let mut sequences: Vec<usize> = transits.iter().map(|it| it.sequence).collect();
    sequences.dedup();
    let degrees = transits.len() as f64 - sequences.len() as f64;
    if transits.len() < LEAST_TRANSITS || degrees < 2.0 {
        return Err(ScanError::TooFew {
            found: transits.len(),
            needed: LEAST_TRANSITS.max(sequences.len() + 2),
        });
    }
    let groups: Vec<Vec<&Transit>> = sequences
        .iter()
        .map(|s| transits.iter().filter(|it| it.sequence == *s).collect())
        .collect();
    let scatter = scatter(&groups, degrees);
    let found = transits.len();
    // The radius for a Sun that is nearly round; the oblateness for one that is free.
    let loose = solve(&groups, &scatter, known, None).ok_or(ScanError::Singular { found })?;
    let tight = solve(&groups, &scatter, known, Some(LOOSE_SUN_MAS[0]))
        .ok_or(ScanError::Singular { found })?;
    let radius_from = if loose.covariance[(1, 1)].sqrt() > LOOSE_SUN_MAS[0] {
        &tight
    } else {
        &loose
    };
    let contributions = contributions(radius_from, &loose, sequences.len());
    let slits = sequences
        .iter()
        .enumerate()
        .map(|(k, &sequence)| SlitAngle {
            sequence,
            turned_rad: loose.values[ANGLES + k],
            sigma_rad: loose.covariance[(ANGLES + k, ANGLES + k)].sqrt(),
        })
        .collect();
    Ok(ScanFit {
        radius_mas: REFERENCE_RADIUS_MAS + radius_from.values[0],
        oblateness_mas: loose.values[1],
        contributions,
        slits,
        scale: (loose.values[SCALE], loose.covariance[(SCALE, SCALE)].sqrt()),
        scatter_mas: [0, 1, 2].map(|i| scatter[(i, i)].sqrt()),
        degrees,
    })
}

/// Covariance of one transit's components, pooled over the sequences.
fn scatter(groups: &[Vec<&Transit>], degrees: f64) -> Matrix3<f64> {
    let mut sum = Matrix3::zeros();
    for group in groups {
        let mean = mean_of(group, |it| Vector3::from(it.harmonics_mas));
        for it in group {
            let off = Vector3::from(it.harmonics_mas) - mean;
            sum += off * off.transpose();
        }
    }
    sum /= degrees;
    // With few transits the matrix may be flat in a direction: a thousandth of its trace keeps it open.
    sum + Matrix3::identity() * (1e-3 * sum.trace() + 1e-9)
}

fn mean_of(group: &[&Transit], value: impl Fn(&Transit) -> Vector3<f64>) -> Vector3<f64> {
    group.iter().map(|it| value(it)).sum::<Vector3<f64>>() / group.len() as f64
}

struct Solution {
    values: DVector<f64>,
    covariance: DMatrix<f64>,
    information: DMatrix<f64>,
    prior: DVector<f64>,
}

fn solve(
    groups: &[Vec<&Transit>],
    scatter: &Matrix3<f64>,
    known: &ScanKnown,
    oblateness_mas: Option<f64>,
) -> Option<Solution> {
    let unknowns = ANGLES + groups.len();
    let precise = |sigma: f64| 1.0 / (sigma * sigma).max(1e-24);
    let mut prior = DVector::zeros(unknowns);
    prior[1] = oblateness_mas.map_or(0.0, precise);
    prior[2] = precise(LOOSE_SUN_MAS[1]);
    prior[SCALE] = precise(known.scale_sigma_rel);
    prior[CLOCK] = precise(known.clock_sigma_rel);
    prior[AIR] = precise(known.refractivity_sigma_rel);
    for k in 0..groups.len() {
        prior[ANGLES + k] = precise(known.angle_sigma_rad);
    }
    let mut information = DMatrix::zeros(unknowns, unknowns);
    let mut right = DVector::zeros(unknowns);
    for (k, group) in groups.iter().enumerate() {
        let precision = scatter.try_inverse()? * group.len() as f64;
        let mut design = DMatrix::zeros(3, unknowns);
        for (j, column) in (0..3)
            .map(|j| {
                mean_of(group, |it| {
                    let column = sun_columns(it.b0_rad, it.axis_rad)[j];
                    Vector3::new(column[0], column[1], column[2])
                })
            })
            .enumerate()
        {
            design.set_column(j, &column);
        }
        for (j, at) in [SCALE, ANGLES + k, CLOCK, AIR].into_iter().enumerate() {
            design.set_column(at, &mean_of(group, |it| columns(it)[j]));
        }
        let data = mean_of(group, |it| Vector3::from(it.harmonics_mas));
        let weighted = design.transpose() * precision;
        right += &weighted * data;
        information += weighted * &design;
    }
    right[1] += prior[1] * ROTATION_MAS;
    let total = &information + DMatrix::from_diagonal(&prior);
    // Unknowns in mas stand beside relative ones: each is scaled to its own diagonal.
    let scale: Vec<f64> = (0..unknowns)
        .map(|i| total[(i, i)].max(1e-300).sqrt())
        .collect();
    let scaled = DMatrix::from_fn(unknowns, unknowns, |i, j| {
        total[(i, j)] / (scale[i] * scale[j])
    });
    let inverse = scaled.cholesky()?.inverse();
    let covariance = DMatrix::from_fn(unknowns, unknowns, |i, j| {
        inverse[(i, j)] / (scale[i] * scale[j])
    });
    Some(Solution {
        values: &covariance * right,
        covariance,
        information,
        prior,
    })
}

/// Parts of the variances of radius (of one solution) and oblateness (of the other).
fn contributions(radius: &Solution, oblateness: &Solution, slits: usize) -> Vec<ScanContribution> {
    let random = |it: &Solution, i: usize| {
        (&it.covariance * &it.information * &it.covariance)[(i, i)].max(0.0)
    };
    let known = |it: &Solution, i: usize, terms: &[usize]| -> f64 {
        terms
            .iter()
            .map(|&j| it.covariance[(i, j)].powi(2) * it.prior[j])
            .sum()
    };
    let angles: Vec<usize> = (ANGLES..ANGLES + slits).collect();
    let mut out = vec![ScanContribution {
        term: "turbulence and photons, transit by transit",
        radius_mas2: random(radius, 0),
        oblateness_mas2: random(oblateness, 1),
        random: true,
    }];
    for (term, members) in [
        ("slit scale", vec![SCALE]),
        ("slit angle", angles),
        ("clock rate", vec![CLOCK]),
        ("refractivity along the slit", vec![AIR]),
        ("Sun's terms not separated", vec![1, 2]),
    ] {
        out.push(ScanContribution {
            term,
            radius_mas2: known(radius, 0, &members),
            oblateness_mas2: known(oblateness, 1, &members),
            random: false,
        });
    }
    out
}

#[cfg(test)]
mod tests;
