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

/// Change of a sector's brightness against its own median in time, and standard deviations of it,
/// beyond which something passed before it.
const PASSING: (f64, f64) = (0.05, 7.0);

/// Neighbouring sectors that must change together: a cloud is wide, a particle hit is not.
const PASSING_SECTORS: usize = 3;

/// Why a sector is left out of every frame of a sequence.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Blemish {
    /// A dark structure that stays on the Sun.
    Spot,
    /// A bright structure that stays on the Sun.
    Facula,
    /// The mask image covers it.
    Image,
    /// A structure that stays on the detector.
    Dust,
    /// Dead columns or rows cross it.
    Column,
    /// It lies outside the field.
    Edge,
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
            Self::Spot => "spot: dark structure that stays on the Sun",
            Self::Facula => "facula: bright structure that stays on the Sun",
            Self::Image => "covered by the mask image",
            Self::Dust => "dust: structure that stays on the detector",
            Self::Column => "dead columns or rows",
            Self::Edge => "outside the field",
            Self::Brightness => "brightness differs from the neighbouring limb",
            Self::Profile => "pixels do not follow the profile of the limb",
            Self::Seldom => "outside the field or unusable in most frames",
            Self::Margin => "margin beside a blemish",
        }
    }

    /// What kind of thing it is, in one word.
    pub fn kind(self) -> &'static str {
        match self {
            Self::Spot => "spot",
            Self::Facula => "facula",
            Self::Image => "image",
            Self::Dust => "dust",
            Self::Column => "column",
            Self::Edge => "edge",
            Self::Brightness => "brightness",
            Self::Profile => "profile",
            Self::Seldom => "absent",
            Self::Margin => "margin",
        }
    }

    /// Whether the sector is not there at all.
    pub fn is_absence(self) -> bool {
        matches!(self, Self::Seldom | Self::Edge | Self::Column)
    }

    /// Whether it stays at its angle on the Sun, not on the detector.
    pub fn on_the_sun(self) -> bool {
        matches!(self, Self::Spot | Self::Facula | Self::Image)
    }
}

/// Marks as masked, frame by frame, sectors before which something passed: their brightness changed
/// with their neighbours' against its own course in time. Sectors with a blemish are not looked at.
/// Returns the share of all sectors and frames that it took.
pub fn leave_out_passing(limbs: &mut [&mut ObservedLimb], blemishes: &[Option<Blemish>]) -> f64 {
    let count = blemishes.len();
    if limbs.len() < 5 {
        return 0.0;
    }
    let usable = |limb: &ObservedLimb, s: usize| {
        limb.sectors[s].flag == Flag::Good && blemishes[s].is_none()
    };
    let mut ratio: Vec<Vec<f64>> = limbs
        .iter()
        .map(|it| {
            let gains = |s: usize| usable(it, s).then_some(it.sectors[s].gain_adu);
            let level = median((0..count).filter_map(gains));
            (0..count)
                .map(|s| gains(s).map_or(f64::NAN, |it| it / level))
                .collect()
        })
        .collect();
    for s in 0..count {
        let middle = median(ratio.iter().map(|it| it[s]).filter(|it| it.is_finite()));
        for it in &mut ratio {
            it[s] = it[s] / middle - 1.0;
        }
    }
    let all = ratio.iter().flatten().filter(|it| it.is_finite());
    let sigma = 1.4826 * median(all.map(|it| it.abs()));
    let mut taken = 0;
    for (limb, row) in limbs.iter_mut().zip(&ratio) {
        let odd: Vec<bool> = row
            .iter()
            .map(|it| it.abs() > PASSING.0 && it.abs() > PASSING.1 * sigma)
            .collect();
        let wide = |s: usize| {
            (0..PASSING_SECTORS)
                .any(|k| (0..PASSING_SECTORS).all(|j| odd[(s + count + j - k) % count]))
        };
        for s in 0..count {
            let beside = [(s + count - 1) % count, s, (s + 1) % count];
            if usable(limb, s) && beside.iter().any(|&n| wide(n)) {
                limb.sectors[s].flag = Flag::Masked;
                taken += 1;
            }
        }
    }
    f64::from(taken) / (count * limbs.len()) as f64
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
    fn a_cloud_is_left_out_where_and_when_it_passes() {
        let mut limbs: Vec<ObservedLimb> = (0..20)
            .map(|k| {
                limb(|s| {
                    ripple(s + 7 * k)
                        * if k == 6 && (30..42).contains(&s) {
                            0.8
                        } else {
                            1.0
                        }
                })
            })
            .collect();
        // One sector that flickers alone is no cloud.
        limbs[3].sectors[90].gain_adu *= 0.7;
        let mut list: Vec<&mut ObservedLimb> = limbs.iter_mut().collect();
        let share = leave_out_passing(&mut list, &[None; 120]);
        assert!((share - 14.0 / 2400.0).abs() < 1e-12, "{share}");
        let masked = |k: usize| {
            (0..120)
                .filter(|&s| limbs[k].sectors[s].flag == Flag::Masked)
                .collect::<Vec<_>>()
        };
        assert_eq!(masked(6), (29..43).collect::<Vec<_>>());
        assert!((0..20).filter(|&k| k != 6).all(|k| masked(k).is_empty()));
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
