//! The record of the seeing, with the coherence time.

use super::Parts;
use crate::result::record::{LayerRecord, PowerRecord, Quantity, SeeingRecord};

/// The record of the seeing.
pub(super) fn record(p: &Parts<'_>) -> SeeingRecord {
    let by_blur = match &p.seeing.blur {
        Ok(it) => Quantity::measured(it.zenith_m, it.sigma_m, "m"),
        Err(reason) => Quantity::missing("m", reason),
    };
    let it = match &p.seeing.motion {
        Ok(it) => it,
        Err(reason) => {
            let none = |unit: &str| Quantity::missing(unit, reason);
            return SeeingRecord {
                r0: none("m"),
                line_of_sight: none("m"),
                by_motion: none("m"),
                by_blur,
                fwhm: none("arcsec"),
                coherence_time: none("s"),
                outer_scale: none("m"),
                height_proxy: none("m"),
                independent_frames: Vec::new(),
                layers: Vec::new(),
            };
        }
    };
    let by_motion = Quantity::measured(it.r0_zenith_500nm_m, it.r0_zenith_sigma_m, "m");
    let relative = it.r0_los_sigma_m / it.r0_los_500nm_m;
    SeeingRecord {
        r0: by_motion.clone(),
        line_of_sight: Quantity::measured(it.r0_los_500nm_m, it.r0_los_sigma_m, "m"),
        by_motion,
        by_blur,
        fwhm: Quantity::measured(it.fwhm_arcsec, it.fwhm_arcsec * relative, "arcsec"),
        coherence_time: coherence_time(p),
        outer_scale: match it.outer_scale_m {
            Some(v) => Quantity::computed(v, "m"),
            None => Quantity::missing("m", &it.outer_scale_reason),
        },
        height_proxy: match it.height_proxy_m {
            Some(v) => Quantity::computed(v, "m"),
            None => Quantity::missing("m", "known to no better than a factor of two"),
        },
        independent_frames: it
            .power
            .iter()
            .map(|it| PowerRecord {
                m: it.m,
                observed_mas2: it.observed_mas2,
                modelled_mas2: it.modelled_mas2,
                noise_mas2: it.noise_mas2,
                independent_frames: it.n_effective,
            })
            .collect(),
        layers: it
            .profile
            .layers
            .iter()
            .map(|it| LayerRecord {
                height_m: it.height_m,
                share: it.share,
            })
            .collect(),
    }
}

/// The coherence time, where the frames follow each other fast enough to see it: the lag at which the
/// correlation of the high harmonics falls to 1/e.
fn coherence_time(p: &Parts<'_>) -> Quantity {
    let mut steps = Vec::new();
    let (mut product, mut square) = (0.0, 0.0);
    for (sequence, corrected) in p.measured.iter().zip(p.limbs) {
        for pair in corrected.frames.windows(2) {
            let [a, b] = [&pair[0], &pair[1]];
            let apart = sequence.frames[b.measured]
                .utc
                .minus(sequence.frames[a.measured].utc);
            steps.push(apart);
            let highest = a.harmonics.cos.len().min(b.harmonics.cos.len());
            for m in 6..highest {
                product += a.harmonics.cos[m] * b.harmonics.cos[m]
                    + a.harmonics.sin[m] * b.harmonics.sin[m];
                square += 0.5
                    * (a.harmonics.cos[m].powi(2)
                        + a.harmonics.sin[m].powi(2)
                        + b.harmonics.cos[m].powi(2)
                        + b.harmonics.sin[m].powi(2));
            }
        }
    }
    steps.sort_by(f64::total_cmp);
    let Some(&step_s) = steps.get(steps.len() / 2) else {
        return Quantity::missing("s", "fewer than two frames");
    };
    let correlation = product / square;
    if correlation < 0.15 {
        return Quantity::missing(
            "s",
            &format!(
                "frames {step_s:.2} s apart have forgotten each other (correlation {correlation:.2})"
            ),
        );
    }
    let tau_s = step_s / (1.0 / correlation).ln();
    Quantity::measured(tau_s, 0.3 * tau_s, "s")
}
