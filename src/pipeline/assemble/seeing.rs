//! The records of the seeing.

use crate::pipeline::solve::SeeingResult;
use crate::result::record::{FloorRecord, LayerRecord, PowerRecord, Quantity, SeeingRecord};
use crate::seeing::{Coherence, OwnBlur};

/// The record of the seeing.
pub(in crate::pipeline) fn record(seeing: &SeeingResult) -> SeeingRecord {
    let by_blur = match &seeing.blur {
        Ok(it) => Quantity::measured(it.r0_zenith_500nm_m, it.r0_zenith_sigma_m, "m"),
        Err(reason) => Quantity::missing("m", reason),
    };
    let own_blur = own_blur(seeing);
    let noise_over_expected = match &seeing.noise {
        Some(it) => Quantity::measured(it.value, it.sigma, "1"),
        None => Quantity::missing("1", "too few frames could be measured twice"),
    };
    let it = match &seeing.motion {
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
                own_blur,
                noise_over_expected,
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
        coherence_time: coherence_time(&seeing.coherence),
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
        own_blur,
        noise_over_expected,
    }
}

/// The coherence time, where the cadence allows it.
pub(in crate::pipeline) fn coherence_time(it: &Result<Coherence, String>) -> Quantity {
    match it {
        Ok(it) => Quantity::measured(it.time_s, it.sigma_s, "s"),
        Err(reason) => Quantity::missing("s", reason),
    }
}

/// The instrument's own blur, where it is told from the air.
fn own_blur(seeing: &SeeingResult) -> Quantity {
    match seeing.blur.as_ref().map(|it| it.own) {
        Ok(OwnBlur::Seen {
            sigma_arcsec,
            uncertainty_arcsec,
        }) => Quantity::measured(sigma_arcsec, uncertainty_arcsec, "arcsec"),
        Ok(OwnBlur::Below { limit_arcsec }) => Quantity::missing(
            "arcsec",
            &format!("not seen: below {limit_arcsec:.2} arcsec on an axis (95 percent)"),
        ),
        Ok(OwnBlur::NoMotion) => Quantity::missing(
            "arcsec",
            "the motion of the limb gave no seeing to compare the width with",
        ),
        Err(reason) => Quantity::missing("arcsec", reason),
    }
}

/// The floors of the harmonics; none where the motion gave no seeing.
pub(in crate::pipeline) fn floors(seeing: &SeeingResult) -> Vec<FloorRecord> {
    let Ok(floors) = &seeing.floors else {
        return Vec::new();
    };
    floors
        .iter()
        .map(|it| {
            let frame = it.frame_observed_mas / it.frame_predicted_mas;
            FloorRecord {
                m: it.m,
                frame_predicted_mas: it.frame_predicted_mas,
                frame_observed_mas: it.frame_observed_mas,
                observed_over_predicted: Quantity::measured(
                    frame,
                    frame * it.frame_relative_sigma,
                    "1",
                ),
                time_s: it.time_s,
                correlation_time_s: it.correlation_time_s,
                mean_predicted_mas: it.mean_predicted_mas,
                mean_observed_mas: it.mean_observed.map(|it| it.0),
                mean_observed_over_predicted: match it.mean_observed {
                    Some((observed, relative)) => {
                        let ratio = observed / it.mean_predicted_mas;
                        Quantity::measured(ratio, ratio * relative, "1")
                    }
                    None => Quantity::missing("1", "blocks within a sequence need 40 frames"),
                },
            }
        })
        .collect()
}
