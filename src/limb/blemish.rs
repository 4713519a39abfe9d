//! Arcs of the limb that are not the quiet limb: spots, faculae, dust, dead columns, an occulted side.
//!
//! # Model
//!
//! A sector is judged by two numbers that know nothing of where the limb is: its gain (the brightness
//! of the fitted disk there) and the misfit of its pixels, each as the median over the frames, each
//! against the running median along the limb. What stands out by more than a robust number of
//! standard deviations is left out, with one sector of margin on either side. Distance from a circle
//! is never looked at.
//!
//! # Valid for
//!
//! Blemishes narrower than a quarter of the limb.
//!
//! # Accuracy
//!
//! A clean limb loses no sector; see the tests.
//!
//! # Source
//!
//! Running medians and median absolute deviations; common practice, no source.

use super::{Flag, ObservedLimb};

/// Standard deviations, by the median absolute deviation, beyond which a sector stands out.
const SIGMAS: f64 = 7.0;

/// Least relative deviation of the gain that counts.
const SMALLEST_GAIN: f64 = 0.012;

/// Least relative deviation of the misfit that counts.
const SMALLEST_MISFIT: f64 = 0.6;

/// Misfit below which nothing is wrong with a sector, whatever its neighbours: the noise expected of
/// it, with room for chance.
const ORDINARY_MISFIT: f64 = 1.5;

/// Half width of the running median, as a share of the limb.
const RUNNING_SHARE: f64 = 0.06;

/// Why a sector is left out of every frame of a sequence.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Blemish {
    /// Its brightness is not that of its neighbours.
    Brightness,
    /// Its pixels do not follow the limb's profile.
    Profile,
    /// It was measured in less than half of the frames.
    Seldom,
    /// It lies beside one of these.
    Margin,
}

impl Blemish {
    /// The reason in words.
    pub fn words(self) -> &'static str {
        match self {
            Self::Brightness => "brightness differs from the neighbouring limb",
            Self::Profile => "pixels do not follow the profile of the limb",
            Self::Seldom => "outside the field or unusable in most frames",
            Self::Margin => "margin beside a blemish",
        }
    }
}

/// Judges the sectors of one sequence.
pub fn judge(limbs: &[&ObservedLimb]) -> Vec<Option<Blemish>> {
    let Some(first) = limbs.first() else {
        return Vec::new();
    };
    let count = first.sectors.len();
    let mut gain = vec![f64::NAN; count];
    let mut misfit = vec![f64::NAN; count];
    let mut seldom = vec![false; count];
    let levels: Vec<f64> = limbs
        .iter()
        .map(|it| {
            median(
                it.sectors
                    .iter()
                    .filter(|s| s.flag == Flag::Good)
                    .map(|s| s.gain_adu),
            )
        })
        .collect();
    for s in 0..count {
        let good = || {
            limbs
                .iter()
                .zip(&levels)
                .filter(|(it, _)| it.sectors[s].flag == Flag::Good)
        };
        seldom[s] = 2 * good().count() < limbs.len();
        gain[s] = median(good().map(|(it, level)| it.sectors[s].gain_adu / level));
        misfit[s] = median(good().map(|(it, _)| it.sectors[s].misfit));
    }
    let bright = standing_out(&gain, SMALLEST_GAIN);
    let level = median(misfit.iter().copied().filter(|it| it.is_finite()));
    let relative: Vec<f64> = misfit.iter().map(|it| it / level).collect();
    let odd = standing_out(&relative, SMALLEST_MISFIT);
    let own: Vec<Option<Blemish>> = (0..count)
        .map(|s| {
            if seldom[s] {
                Some(Blemish::Seldom)
            } else if bright[s] {
                Some(Blemish::Brightness)
            } else if odd[s] && misfit[s] > ORDINARY_MISFIT {
                Some(Blemish::Profile)
            } else {
                None
            }
        })
        .collect();
    (0..count)
        .map(|s| {
            let beside = [(s + count - 1) % count, (s + 1) % count];
            own[s].or_else(|| {
                beside
                    .iter()
                    .any(|&n| own[n].is_some())
                    .then_some(Blemish::Margin)
            })
        })
        .collect()
}

/// Which values stand out from the running median along the limb.
fn standing_out(values: &[f64], smallest: f64) -> Vec<bool> {
    let count = values.len();
    let half = ((count as f64 * RUNNING_SHARE) as usize).max(3);
    let deviation: Vec<f64> = (0..count)
        .map(|s| {
            let around = (0..=2 * half)
                .map(|k| values[(s + count + k - half) % count])
                .filter(|it| it.is_finite());
            values[s] - median(around)
        })
        .collect();
    let sigma = 1.4826
        * median(
            deviation
                .iter()
                .filter(|it| it.is_finite())
                .map(|it| it.abs()),
        );
    deviation
        .iter()
        .map(|it| it.is_finite() && it.abs() > smallest && it.abs() > SIGMAS * sigma)
        .collect()
}

/// Median; NaN of nothing.
pub(crate) fn median(values: impl Iterator<Item = f64>) -> f64 {
    let mut sorted: Vec<f64> = values.collect();
    sorted.sort_by(f64::total_cmp);
    let n = sorted.len();
    match n {
        0 => f64::NAN,
        n if n % 2 == 1 => sorted[n / 2],
        n => 0.5 * (sorted[n / 2 - 1] + sorted[n / 2]),
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::limb::SectorLimb;

    fn limb(gain: impl Fn(usize) -> f64) -> ObservedLimb {
        let sectors = (0..120)
            .map(|s| SectorLimb {
                radius_arcsec: 960.0,
                sigma_arcsec: 0.01,
                blur: 2.0,
                blur_sigma: 0.1,
                gain_adu: gain(s),
                background_adu: 0.0,
                misfit: 1.0 + 0.1 * ((s * 7919) % 13) as f64 / 13.0,
                flag: Flag::Good,
            })
            .collect();
        ObservedLimb {
            centre_px: (0.0, 0.0),
            first_rad: 0.0,
            sectors,
        }
    }

    fn ripple(s: usize) -> f64 {
        1000.0 * (1.0 + 0.002 * (((s * 104_729) % 17) as f64 / 8.0 - 1.0))
    }

    #[test]
    fn a_clean_limb_loses_nothing() {
        let it = limb(ripple);
        assert!(judge(&[&it, &it, &it]).iter().all(Option::is_none));
    }

    #[test]
    fn a_facula_is_left_out_with_a_margin() {
        let it = limb(|s| ripple(s) * if s == 40 { 1.05 } else { 1.0 });
        let found = judge(&[&it, &it, &it]);
        assert_eq!(found[40], Some(Blemish::Brightness));
        assert_eq!(
            (found[39], found[41]),
            (Some(Blemish::Margin), Some(Blemish::Margin))
        );
        assert_eq!(found.iter().filter(|it| it.is_some()).count(), 3);
    }
}
