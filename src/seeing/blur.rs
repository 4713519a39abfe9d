//! Fried's parameter from the width of the limb, the instrument's own blur told apart by the motion.
//!
//! # Model
//!
//! ```text
//! J_k  = (lambda / r0_k)^(5/3)                                             of the air, towards the Sun
//! read_k - c_k w_k - M_k = c_k q + M_k g + e_k d + noise_k                 M_k: J by motion
//! r0   = [ mean over frames of  (read_k - c_k (w_k + q)) cos z_k ... ]^(-3/5)   500 nm, zenith
//! ```
//!
//! The blur that a sequence's limbs are read with grows with that of the air, with a blur of the
//! instrument's own that is the same for all (`q`), and with the thickness of the Sun's edge (`d`, in
//! units of its standard deviation). Where sequences of different seeing lie on a line of slope one,
//! its intercept is the instrument: `q` is free, `g` and `d` have normal priors. Where `q` is above twice
//! its standard deviation the two ways disagree, and it is taken off; where not, it is set to zero.
//!
//! | symbol | meaning | unit |
//! |--------|---------|------|
//! | `q` | square of the instrument's own blur, standard deviation on an axis | arcsec^2 |
//! | `w_k` | variance of the limb's displacement within a sector, which blurs the sector's edge | arcsec^2 |
//! | `c_k`, `e_k` | change of what is read by `q` and by `d` | arcsec^(-1/3), arcsec^(5/3) |
//! | `g` | common relative error of `M`: motion, and the family of transfer functions | - |
//!
//! # Valid for
//!
//! Pixels to 2.6 arcsec; r0 along the line of sight at the wavelength to 1.5 apertures. Blur of the
//! instrument to 1.5 arcsec, the same in all sequences.
//!
//! # Accuracy
//!
//! Of r0: 6 percent for the family of short-exposure transfer functions, which read 1 to 11 percent
//! high against wave optics (`tests/published/short_exposure_simulated.rs`), and what the edge's
//! thickness leaves, 1 to 5 percent. Ten sessions of an independent forward model at 1 to 2 arcsec a
//! pixel, r0 of 2.6 to 13 cm: mean over truth 1.008 +- 0.015, scatter 5 percent, the extremes 0.91 and
//! 1.09; an own blur of 0.50 read as 0.52, of 0.80 as 0.83 (`tests/campaigns/seeing_reach.py`).
//!
//! # Source
//!
//! D. L. Fried, J. Opt. Soc. Am. 56, 1372 (1966), for the transfer function; regression of blur on
//! motion: common practice, no source.

use crate::units::ARCSEC_RAD;
use nalgebra::{Matrix3, Vector3};

/// Relative standard deviation of r0 from the family of transfer functions.
const FAMILY_SIGMA: f64 = 0.06;

/// Pixels above this say nothing of the width.
const LARGEST_PIXEL_ARCSEC: f64 = 2.6;

/// Fried's parameter above this many apertures says nothing through the width.
const LARGEST_APERTURES: f64 = 1.5;

/// Relative standard deviation of the square of the instrument's blur from the response to it: a blur
/// of another form than the air's is read as one of the air's (our judgement).
const OWN_RESPONSE_SIGMA: f64 = 0.05;

/// Multiple of its standard deviation at which the instrument's blur is believed.
const BELIEVED: f64 = 2.0;

/// What one sequence's limbs were read with.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct BlurReading {
    /// Mean blur `J` of its frames at the wavelength, arcsec^(5/3); noise may make it negative.
    pub blur: f64,
    /// Standard deviation of that mean.
    pub blur_sigma: f64,
    /// Frames.
    pub frames: usize,
    /// Wavelength.
    pub wavelength_nm: f64,
    /// Zenith distance.
    pub zenith_rad: f64,
    /// Fried's parameter by motion, 500 nm, towards the Sun, with this sequence's own relative standard
    /// deviation.
    pub by_motion: Option<(f64, f64)>,
    /// Change of what is read by the square of a Gaussian blur of the instrument, per arcsec^2.
    pub per_own: f64,
    /// Change of what is read by one standard deviation of the edge's thickness.
    pub per_edge: f64,
    /// Variance of the displacement within a sector, from the motion: it blurs as the instrument would.
    pub within_arcsec2: f64,
}

impl BlurReading {
    /// What is read, less what the motion within a sector adds.
    fn still(&self) -> f64 {
        self.blur - self.per_own * self.within_arcsec2
    }
}

/// The instrument, and how well the motion knows what all sequences share.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct BlurSetup {
    /// Diameter of the aperture.
    pub aperture_m: f64,
    /// Side of a pixel.
    pub pixel_arcsec: f64,
    /// Relative standard deviation of r0 by motion that all sequences share.
    pub motion_relative_sigma: f64,
}

/// The instrument's own blur.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum OwnBlur {
    /// Seen.
    Seen {
        /// Standard deviation on one axis.
        sigma_arcsec: f64,
        /// Its standard uncertainty.
        uncertainty_arcsec: f64,
    },
    /// Not seen.
    Below {
        /// With 95 percent.
        limit_arcsec: f64,
    },
    /// The motion gave nothing to compare with.
    NoMotion,
}

/// The seeing by the limb's width.
#[derive(Clone, Debug, PartialEq)]
pub struct BlurSeeing {
    /// Fried's parameter at 500 nm at the zenith, of the mean strength over all frames.
    pub r0_zenith_500nm_m: f64,
    /// Its standard uncertainty.
    pub r0_zenith_sigma_m: f64,
    /// The same of each sequence; none where it is as sharp as without air.
    pub sequences: Vec<Option<(f64, f64)>>,
    /// The instrument's own blur.
    pub own: OwnBlur,
    /// Relative standard deviation of r0 from the edge's thickness, own blur as it was found.
    pub edge_relative_sigma: f64,
}

/// Why the width does not tell the seeing.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum BlurRefusal {
    /// Nothing was measured.
    #[error("no sequence")]
    NoSequence,
    /// The pixels set the width.
    #[error(
        "pixels of {found_arcsec:.2} arcsec are too large for the width of the limb to tell the seeing; up to {LARGEST_PIXEL_ARCSEC} arcsec"
    )]
    Pixels {
        /// Side of a pixel.
        found_arcsec: f64,
    },
    /// No blur beyond telescope and pixel.
    #[error("the limb is as sharp as the telescope alone makes it")]
    Sharp,
    /// The air is too good for this telescope.
    #[error(
        "Fried's parameter of {found_m:.2} m towards the Sun at the observing wavelength is above {largest_m:.2} m, {LARGEST_APERTURES} apertures, where the width says little"
    )]
    TooGood {
        /// What the width gave.
        found_m: f64,
        /// What the aperture allows.
        largest_m: f64,
    },
}

/// Common strength of a blur: `r0^(-5/3)` at 500 nm at the zenith is this times `J`.
fn strength_per_blur(it: &BlurReading) -> f64 {
    let wavelength_m = it.wavelength_nm * 1e-9;
    (ARCSEC_RAD / wavelength_m).powf(5.0 / 3.0)
        * (it.wavelength_nm / 500.0).powi(2)
        * it.zenith_rad.cos()
}

/// Blur of a Fried parameter at 500 nm towards the Sun.
fn blur_of_r0(r0_los_500nm_m: f64, it: &BlurReading) -> f64 {
    r0_los_500nm_m.powf(-5.0 / 3.0) * it.zenith_rad.cos() / strength_per_blur(it)
}

/// The regression's answer: `q` and `d`, with their covariance.
struct Regression {
    q: f64,
    qq: f64,
    qd: f64,
    dd: f64,
}

/// Fried's parameter from the blur of all sequences.
///
/// # Errors
///
/// [`BlurRefusal`] where the width cannot tell.
pub fn by_blur(readings: &[BlurReading], setup: &BlurSetup) -> Result<BlurSeeing, BlurRefusal> {
    if readings.is_empty() {
        return Err(BlurRefusal::NoSequence);
    }
    if setup.pixel_arcsec > LARGEST_PIXEL_ARCSEC {
        return Err(BlurRefusal::Pixels {
            found_arcsec: setup.pixel_arcsec,
        });
    }
    let fit = regression(readings, setup);
    let own = match &fit {
        None => OwnBlur::NoMotion,
        Some(it) if it.q > BELIEVED * it.qq.sqrt() => OwnBlur::Seen {
            sigma_arcsec: it.q.sqrt(),
            uncertainty_arcsec: 0.5 * it.qq.sqrt().hypot(OWN_RESPONSE_SIGMA * it.q) / it.q.sqrt(),
        },
        Some(it) => {
            let seen = if it.q > 0.0 { it.q } else { 0.0 };
            OwnBlur::Below {
                limit_arcsec: (seen + 1.96 * it.qq.sqrt()).sqrt(),
            }
        }
    };
    // Without a blur of its own the edge's thickness has its prior, and `q` is zero.
    let taken = match (&own, fit) {
        (OwnBlur::Seen { .. }, Some(it)) => it,
        _ => Regression {
            q: 0.0,
            qq: 0.0,
            qd: 0.0,
            dd: 1.0,
        },
    };
    let total: f64 = readings.iter().map(|it| it.frames as f64).sum();
    let (mut strength, mut sight, mut noise, mut by_own, mut by_edge) = (0.0, 0.0, 0.0, 0.0, 0.0);
    let sequences = readings
        .iter()
        .map(|it| {
            let per_blur = strength_per_blur(it);
            let share = it.frames as f64 / total;
            let air = it.still() - it.per_own * taken.q;
            strength += share * per_blur * air;
            sight += share * air;
            noise += (share * per_blur * it.blur_sigma).powi(2);
            by_own += share * per_blur * it.per_own;
            by_edge += share * per_blur * it.per_edge;
            let spread = model_variance(it.per_own, it.per_edge, &taken);
            (air > 0.0).then(|| {
                let relative = 0.6 * it.blur_sigma.hypot(spread.sqrt()) / air;
                let r0_m = (per_blur * air).powf(-0.6);
                (r0_m, r0_m * relative.hypot(FAMILY_SIGMA))
            })
        })
        .collect();
    if !(strength > 0.0) || !(sight > 0.0) {
        return Err(BlurRefusal::Sharp);
    }
    let found_m = readings[0].wavelength_nm * 1e-9 / ARCSEC_RAD / sight.powf(0.6);
    let largest_m = LARGEST_APERTURES * setup.aperture_m;
    if found_m > largest_m {
        return Err(BlurRefusal::TooGood { found_m, largest_m });
    }
    let r0_zenith_500nm_m = strength.powf(-0.6);
    let model = 0.6 * model_variance(by_own, by_edge, &taken).sqrt() / strength;
    let relative = (0.6 * noise.sqrt() / strength)
        .hypot(model)
        .hypot(FAMILY_SIGMA);
    Ok(BlurSeeing {
        r0_zenith_500nm_m,
        r0_zenith_sigma_m: r0_zenith_500nm_m * relative,
        sequences,
        own,
        edge_relative_sigma: model,
    })
}

/// Variance of `c q + e d`; never below zero by rounding.
fn model_variance(per_own: f64, per_edge: f64, it: &Regression) -> f64 {
    let sum =
        per_own * per_own * it.qq + 2.0 * per_own * per_edge * it.qd + per_edge * per_edge * it.dd;
    if sum > 0.0 { sum } else { 0.0 }
}

/// `q`, `g` and `d` by least squares; none without a motion to compare with.
fn regression(readings: &[BlurReading], setup: &BlurSetup) -> Option<Regression> {
    let common = 5.0 / 3.0 * setup.motion_relative_sigma.hypot(FAMILY_SIGMA);
    let mut normal = Matrix3::new(0.0, 0.0, 0.0, 0.0, common.powi(-2), 0.0, 0.0, 0.0, 1.0);
    let mut right = Vector3::zeros();
    let mut compared = 0;
    for it in readings {
        let Some((r0_m, relative)) = it.by_motion else {
            continue;
        };
        let motion = blur_of_r0(r0_m, it);
        let row = Vector3::new(it.per_own, motion, it.per_edge);
        let sigma = it
            .blur_sigma
            .hypot(5.0 / 3.0 * relative * motion)
            .hypot(0.01 * motion);
        let weight = sigma.powi(-2);
        normal += weight * row * row.transpose();
        right += weight * (it.still() - motion) * row;
        compared += 1;
    }
    let covariance = normal.try_inverse().filter(|_| compared > 0)?;
    let found = covariance * right;
    Some(Regression {
        q: found[0],
        qq: covariance[(0, 0)],
        qd: covariance[(0, 2)],
        dd: covariance[(2, 2)],
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    const SETUP: BlurSetup = BlurSetup {
        aperture_m: 0.15,
        pixel_arcsec: 1.0,
        motion_relative_sigma: 0.05,
    };

    /// A sequence whose limbs have the blur of `r0_m` towards the zenith and an own blur of `own`.
    fn reading(r0_m: f64, own_arcsec: f64) -> BlurReading {
        let mut it = BlurReading {
            blur: 0.0,
            blur_sigma: 0.02,
            frames: 40,
            wavelength_nm: 550.0,
            zenith_rad: 0.6,
            by_motion: None,
            per_own: 4.0,
            per_edge: 0.15,
            within_arcsec2: 0.0,
        };
        let r0_los_m = r0_m * it.zenith_rad.cos().powf(0.6);
        it.blur = blur_of_r0(r0_los_m, &it) + it.per_own * own_arcsec * own_arcsec;
        it.by_motion = Some((r0_los_m, 0.02));
        it
    }

    #[test]
    fn a_blur_is_the_width_of_its_seeing() {
        let it = reading(0.07, 0.0);
        // lambda / r0 along the sight: 550 nm / (7 cm (cos z)^0.6 (550/500)^1.2).
        let r0_m = 0.07 * 0.6_f64.cos().powf(0.6) * 1.1_f64.powf(1.2);
        let width_arcsec = 550e-9 / r0_m / ARCSEC_RAD;
        assert!((it.blur / width_arcsec.powf(5.0 / 3.0) - 1.0).abs() < 1e-12);
        let found = by_blur(&[it], &SETUP).unwrap();
        assert!((found.r0_zenith_500nm_m / 0.07 - 1.0).abs() < 1e-12);
        assert!(matches!(found.own, OwnBlur::Below { .. }));
        // Family 6 percent, edge 0.6 x 0.15 / J.
        let wanted = 0.06_f64
            .hypot(0.6 * 0.15 / it.blur)
            .hypot(0.6 * 0.02 / it.blur);
        assert!((found.r0_zenith_sigma_m / found.r0_zenith_500nm_m - wanted).abs() < 1e-9);
    }

    #[test]
    fn the_intercept_is_the_instrument() {
        let sky = [0.04, 0.06, 0.09, 0.13];
        let blurred: Vec<BlurReading> = sky.iter().map(|&it| reading(it, 0.8)).collect();
        let found = by_blur(&blurred, &SETUP).unwrap();
        let OwnBlur::Seen {
            sigma_arcsec,
            uncertainty_arcsec,
        } = found.own
        else {
            panic!("{:?}", found.own);
        };
        assert!(
            (sigma_arcsec - 0.8).abs() < 0.02 && uncertainty_arcsec < 0.1,
            "{:?}",
            found.own
        );
        let mean = sky.iter().map(|it: &f64| it.powf(-5.0 / 3.0)).sum::<f64>() / 4.0;
        assert!((found.r0_zenith_500nm_m / mean.powf(-0.6) - 1.0).abs() < 0.02);
        // Taken for the air, it would have read much worse seeing.
        let blind: Vec<BlurReading> = blurred
            .iter()
            .map(|it| BlurReading {
                by_motion: None,
                ..*it
            })
            .collect();
        let worse = by_blur(&blind, &SETUP).unwrap();
        assert_eq!(worse.own, OwnBlur::NoMotion);
        assert!(worse.r0_zenith_500nm_m < 0.85 * found.r0_zenith_500nm_m);
    }

    #[test]
    fn a_common_error_of_the_motion_is_no_blur() {
        // All bursts 8 percent better by motion than by blur: the slope, not the intercept.
        let readings: Vec<BlurReading> = [0.04, 0.06, 0.09, 0.13]
            .iter()
            .map(|&r0_m| {
                let it = reading(r0_m, 0.0);
                BlurReading {
                    by_motion: it.by_motion.map(|(r0, s)| (1.08 * r0, s)),
                    ..it
                }
            })
            .collect();
        let found = by_blur(&readings, &SETUP).unwrap();
        assert!(
            matches!(found.own, OwnBlur::Below { .. }),
            "{:?}",
            found.own
        );
    }

    #[test]
    fn where_the_width_cannot_tell_there_is_a_reason() {
        let coarse = BlurSetup {
            pixel_arcsec: 4.1,
            ..SETUP
        };
        assert!(matches!(
            by_blur(&[reading(0.05, 0.0)], &coarse),
            Err(BlurRefusal::Pixels { .. })
        ));
        assert!(matches!(
            by_blur(&[reading(0.4, 0.0)], &SETUP),
            Err(BlurRefusal::TooGood { .. })
        ));
        let sharp = BlurReading {
            blur: -0.02,
            ..reading(0.4, 0.0)
        };
        assert_eq!(by_blur(&[sharp], &SETUP), Err(BlurRefusal::Sharp));
        assert_eq!(by_blur(&[], &SETUP), Err(BlurRefusal::NoSequence));
    }
}
