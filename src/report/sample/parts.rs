//! Parts of the invented sessions.

use super::{Noise, Session, utc};
use crate::result::record::*;

pub(super) fn budget(scale: f64, separated: bool, which: Session) -> Vec<BudgetLine> {
    let line =
        |term: &str, sigma: f64, radius: f64, kind: &str, scope: &str, how: &str| BudgetLine {
            term: term.to_owned(),
            sigma_mas: separated.then_some(sigma * scale),
            sigma_radius_mas: radius * if which == Session::Season { 0.064 } else { 1.0 },
            kind: kind.to_owned(),
            scope: scope.to_owned(),
            how: how.to_owned(),
        };
    vec![
        line(
            "turbulence",
            10.7,
            38.0,
            "random",
            "frame",
            "from the data, in blocks of 4.2 s",
        ),
        line(
            "photon and read noise",
            1.3,
            4.1,
            "random",
            "frame",
            "from the fit of each sector",
        ),
        line(
            "sequence to sequence",
            3.0,
            14.9,
            "random",
            "burst",
            "scatter of the sequences beyond turbulence",
        ),
        line(
            "plate scale",
            0.02,
            191.9,
            "systematic",
            "instrument",
            "2e-4 of the radius, as stated for the camera",
        ),
        line(
            "tilted layers",
            4.7,
            0.4,
            "systematic",
            "session",
            "3.0 arcmin on each axis, 30 min",
        ),
        line(
            "temperature of the air",
            1.9,
            2.1,
            "systematic",
            "session",
            "0.6 C through the whole chain",
        ),
        line(
            "pressure",
            0.62,
            0.7,
            "systematic",
            "session",
            "0.5 hPa through the whole chain",
        ),
        line(
            "camera angle",
            0.9,
            0.0,
            "systematic",
            "instrument",
            "0.03 degrees",
        ),
        line(
            "limb darkening",
            0.05,
            3.2,
            "systematic",
            "model",
            "spread of the published laws",
        ),
        line("humidity", 0.08, 0.09, "systematic", "session", "0.04"),
    ]
}

pub(super) fn null_tests(scale: f64, separated: bool) -> Vec<NullTest> {
    let test = |name: &str, value: f64, sigma: f64| NullTest {
        test: name.to_owned(),
        value: separated.then_some(value * scale),
        sigma: separated.then_some(sigma * scale),
        unit: "mas".to_owned(),
        reason: (!separated).then(|| "not separated from the instrument".to_owned()),
    };
    vec![
        test("sine of m = 2 about the solar axis", -6.2, 11.8),
        test("sine of m = 4 about the solar axis", 14.1, 9.0),
        test("cosine of m = 3 about the solar axis", 2.7, 10.1),
        test("first half of the session minus the second", 21.4, 24.6),
    ]
}

pub(super) fn instrument(scale: f64, separated: bool) -> Vec<DistortionRecord> {
    [
        (2, 23.1, 118.4, 9.7),
        (3, 11.9, -41.2, 7.4),
        (4, 31.0, 12.6, 8.9),
    ]
    .into_iter()
    .map(|(m, amplitude, angle, sigma)| DistortionRecord {
        m,
        amplitude_mas: separated.then_some(amplitude),
        angle_deg: separated.then_some(angle),
        sigma_mas: separated.then_some(sigma * scale),
        reason: (!separated).then(|| "one roll: the same as the Sun's".to_owned()),
    })
    .collect()
}

pub(super) fn covariance(terms: &[&str], units: &[&str], scale: f64) -> Covariance {
    let sigmas = [0.196, 12.4, 9.6, 11.8, 9.7, 9.9, 8.9, 8.6, 0.0105, 6.1];
    let matrix = (0..terms.len())
        .map(|a| {
            (0..terms.len())
                .map(|b| {
                    let r = if a == b {
                        1.0
                    } else {
                        let (low, high) = (a.min(b), a.max(b));
                        (1.7 * low as f64 + 0.9 * high as f64).sin() * 0.75
                            / (1.0 + (high - low) as f64 * 0.35)
                    };
                    r * sigmas[a] * sigmas[b] * scale * scale
                })
                .collect()
        })
        .collect();
    let own = |texts: &[&str]| texts.iter().map(|text| (*text).to_owned()).collect();
    Covariance {
        terms: own(terms),
        units: own(units),
        matrix,
    }
}

pub(super) fn definitions(
    radius: &ShapeQuantity,
    oblateness: &ShapeQuantity,
) -> Vec<DefinitionRecord> {
    let base = radius.value.unwrap_or(0.0);
    [
        ("template", 0.0, "fit of the whole edge"),
        ("inflection", -84.3, "steepest point at this blur"),
        (
            "finite Fourier transform, 20 arcsec",
            -212.0,
            "window of 20 arcsec",
        ),
    ]
    .into_iter()
    .map(|(name, shift, how)| DefinitionRecord {
        definition: name.to_owned(),
        radius_arcsec: Some(base + shift / 1000.0),
        displacement_mas: Some(shift),
        oblateness_mas: oblateness.value.map(|value| value + 0.004 * shift),
        how: how.to_owned(),
    })
    .collect()
}

pub(super) fn random_error() -> RandomErrorRecord {
    RandomErrorRecord {
        correlation_factor: [(0, 2.1), (2, 1.9), (3, 1.6), (4, 1.4)]
            .map(|(m, factor)| FactorRecord { m, factor })
            .to_vec(),
        excess: 1.0,
        degrees_of_freedom: 820.0,
        batches: [(14.0, 1.6, 112.0), (28.0, 1.8, 48.0), (56.0, 1.7, 16.0)]
            .map(|(length_s, factor, degrees_of_freedom)| BatchRecord {
                length_s,
                factor,
                degrees_of_freedom,
            })
            .to_vec(),
        converged: Some(true),
        bootstrap: Some(BootstrapRecord {
            sigma_radius_mas: 9.1,
            sigma_oblateness_mas: Some(13.2),
            sigma_p4_mas: Some(11.8),
            run_frames: 10,
            runs: 64,
            resamples: 2000,
            seed: 1,
        }),
    }
}

pub(super) fn kept_curve(
    noise: &mut Noise,
    scale: f64,
    oblateness: &ShapeQuantity,
    radius: &ShapeQuantity,
) -> Vec<KeptPoint> {
    [0.05, 0.1, 0.2, 0.3, 0.4, 0.5, 0.6, 0.7, 0.8, 0.9, 1.0]
        .into_iter()
        .map(|fraction: f64| {
            let sigma = scale
                * 11.2
                * (0.8 / fraction).sqrt().max(1.0)
                * if fraction > 0.8 { 1.1 } else { 1.0 };
            KeptPoint {
                fraction,
                frames: (640.0 * fraction) as usize,
                oblateness_mas: oblateness
                    .value
                    .map(|value| value + 0.4 * sigma * noise.normal() * (1.0 - fraction)),
                oblateness_sigma_mas: oblateness.value.map(|_| sigma),
                radius_arcsec: radius.value.unwrap_or(0.0) + 0.002 * scale * sigma * noise.normal(),
                radius_sigma_mas: 3.2 * sigma,
            }
        })
        .collect()
}

pub(super) fn kept_slope(scale: f64, oblateness: &ShapeQuantity) -> KeptSlope {
    let test = |slope: f64, sigma: f64, chance: f64| SlopeTest {
        slope_mas: slope,
        sigma_mas: sigma,
        pull: slope / sigma,
        chance,
        degrees: 56.0,
    };
    KeptSlope {
        oblateness: oblateness
            .value
            .map(|_| test(-6.2 * scale, 14.8 * scale, 0.677)),
        radius: Some(test(21.3 * scale, 33.1 * scale, 0.523)),
        fractions: vec![1.0, 0.8, 0.6, 0.4, 0.2, 0.1],
        reason: oblateness
            .value
            .is_none()
            .then(|| "the oblateness is not separated".to_owned()),
    }
}

pub(super) fn seeing(separated: bool) -> SeeingRecord {
    SeeingRecord {
        r0: Quantity::measured(0.0743, 0.0031, "m"),
        line_of_sight: Quantity::measured(0.0612, 0.0026, "m"),
        by_motion: Quantity::measured(0.0751, 0.0034, "m"),
        by_blur: if separated {
            Quantity::measured(0.0718, 0.0058, "m")
        } else {
            Quantity::missing("m", "the width is set by the pixels, 4.1 arcsec each")
        },
        fwhm: Quantity::measured(1.66, 0.08, "arcsec"),
        coherence_time: Quantity::measured(0.0041, 0.0006, "s"),
        outer_scale: Quantity::missing("m", "the session is too short to bound it"),
        height_proxy: Quantity::measured(3400.0, 610.0, "m"),
        independent_frames: (2..=16)
            .map(|m| {
                let model = 24_000.0 * (f64::from(m)).powf(-1.9) + 320.0;
                PowerRecord {
                    m: m as usize,
                    observed_mas2: model * (1.0 + 0.07 * (f64::from(m) * 2.3).sin()),
                    modelled_mas2: model,
                    noise_mas2: 320.0,
                    independent_frames: 512.0 / (1.0 + 8.0 / f64::from(m)),
                }
            })
            .collect(),
        layers: vec![
            LayerRecord {
                height_m: 30.0,
                share: 0.41,
            },
            LayerRecord {
                height_m: 1200.0,
                share: 0.22,
            },
            LayerRecord {
                height_m: 5200.0,
                share: 0.21,
            },
            LayerRecord {
                height_m: 11_500.0,
                share: 0.16,
            },
        ],
        own_blur: Quantity::missing("arcsec", "not seen: below 0.4 arcsec"),
        noise_over_expected: Quantity::measured(1.02, 0.03, "1"),
    }
}

/// Close to the first order: radius -A R (1 + sec^2 z)/2, flattening A R tan^2 z, at 778 hPa.
pub(super) fn refraction(sequence: usize, zenith_deg: f64) -> RefractionRecord {
    let tan2 = zenith_deg.to_radians().tan().powi(2);
    let (refractivity, radius_mas): (f64, f64) = (0.000_219_4, 944_200.0);
    let flattening_mas = refractivity * radius_mas * tan2;
    let refraction_arcsec = 45.2 * tan2.sqrt();
    RefractionRecord {
        sequence,
        zenith_true_deg: zenith_deg,
        zenith_apparent_deg: zenith_deg - refraction_arcsec / 3600.0,
        refraction_arcsec,
        radius_change_mas: -refractivity * radius_mas * (1.0 + 0.5 * tan2),
        flattening_mas,
        flattening_sigma_mas: 0.004 * flattening_mas + 0.4,
        effective_wavelength_nm: 550.1,
        smear_mas: 30.0,
        refractivity,
        pressure_hpa: 778.2,
        temperature_c: 9.4 + 0.6 * sequence as f64,
        relative_humidity: 0.35,
    }
}

pub(super) fn sequence(
    index: usize,
    plan: (f64, f64, f64),
    noise: &mut Noise,
    scale: f64,
) -> SequenceRecord {
    let (start_s, roll_deg, zenith_deg) = plan;
    SequenceRecord {
        sequence: index,
        kind: if roll_deg == 0.0 { "burst" } else { "roll" }.to_owned(),
        time_utc: [utc(start_s), utc(start_s + 78.2)],
        roll_deg,
        frames_read: 82,
        frames_used: 64,
        zenith_true_deg: zenith_deg,
        parallactic_deg: -58.0 + 6.1 * index as f64,
        axis_deg: -7.41,
        b0_deg: 1.83,
        distance_au: 1.016_31,
        r0: Quantity::measured(0.074 + 0.006 * noise.normal(), 0.005, "m"),
        radius: Quantity::measured(959.87 + 0.08 * noise.normal(), 0.11, "arcsec"),
        harmonics: (2..=5)
            .map(|m| {
                let sigma = scale * 30.0 / (m as f64 / 2.0);
                HarmonicRecord {
                    m,
                    cos_mas: 14.0 * (m as f64) - 30.0 + sigma * noise.normal(),
                    sin_mas: 18.0 - 7.0 * m as f64 + sigma * noise.normal(),
                    sigma_mas: sigma,
                }
            })
            .collect(),
        set_aside: None,
    }
}

pub(super) fn traces(
    noise: &mut Noise,
    sequences: &[(f64, f64, f64)],
    scale: f64,
    separated: bool,
) -> Traces {
    let mut frames = Vec::new();
    for (index, plan) in sequences.iter().enumerate() {
        let mut slow = noise.normal();
        for frame in 0..80 {
            slow = 0.93 * slow + 0.37 * noise.normal();
            let r0_blur_m = 0.0612 * (0.16 * slow + 0.08 * noise.normal()).exp();
            let factor = 0.0612 / r0_blur_m;
            frames.push(FrameTrace {
                sequence: index,
                frame,
                time_s: plan.0 - sequences[0].0 + 0.99 * frame as f64,
                kept: r0_blur_m > 0.0533,
                weight: (r0_blur_m / 0.0612).powf(5.0 / 3.0),
                r0_blur_m,
                radius_mas: 210.0 * factor * noise.normal(),
                cos2_mas: -18.0 + 150.0 * factor * noise.normal(),
                sin2_mas: 11.0 + 150.0 * factor * noise.normal(),
                north_deg: 90.0,
                harmonics_mas: [0.0; 7],
                influence: [[0.0; 7]; 3],
            });
        }
    }
    let count = if separated { 90 } else { 240 };
    let angle = |k: usize| 360.0 * k as f64 / count as f64;
    let model = |k: usize| {
        // Half the oblateness towards the equator, as a2 cos 2 (PA - axis).
        -4.2 * (2.0 * (angle(k) + 7.41).to_radians()).cos()
    };
    let sigma: Vec<f64> = (0..count)
        .map(|k| scale * (16.0 + 3.0 * (k as f64 * 0.21).sin()))
        .collect();
    let residual_mas = (0..count)
        .map(|k| model(k) + sigma[k] * noise.normal())
        .collect();
    Traces {
        frames,
        limb: LimbTrace {
            position_angle_deg: (0..count).map(angle).collect(),
            residual_mas,
            model_mas: (0..count).map(model).collect(),
            sigma_mas: sigma,
            axis_deg: -7.41,
            zenith_deg: 38.0,
        },
        preview: separated.then(|| picture(noise)),
        preview_radius_px: 232.0,
    }
}

/// A limb-darkened disk, 1 - 0.62 (1 - mu), with grain and two spots.
fn picture(noise: &mut Noise) -> ndarray::Array2<f32> {
    ndarray::Array2::from_shape_fn((480, 480), |(y, x)| {
        let (dx, dy) = ((x as f64 - 239.5) / 232.0, (y as f64 - 239.5) / 232.0);
        let square = dx * dx + dy * dy;
        if square >= 1.0 {
            return 0.0;
        }
        let mu = (1.0 - square).sqrt();
        let spot = |x0: f64, y0: f64, size: f64| {
            1.0 - 0.6 * (-((dx - x0).powi(2) + (dy - y0).powi(2)) / (size * size)).exp()
        };
        let dark = spot(0.31, 0.22, 0.022) * spot(0.36, 0.205, 0.016) * spot(-0.5, -0.28, 0.014);
        ((1.0 - 0.62 * (1.0 - mu)) * dark + 0.006 * noise.normal()) as f32
    })
}

/// A facula and a piece of dust left out.
pub(super) fn masking(separated: bool) -> MaskingRecord {
    let line = |slope_mas_percent, sectors| RegressionLine {
        slope_mas_percent,
        sigma_mas_percent: 0.83,
        sectors,
    };
    let arc = |kind: &str, stays_on: &str, from_deg, contrast| MaskArc {
        kind: kind.to_owned(),
        stays_on: stays_on.to_owned(),
        from_deg,
        to_deg: from_deg + 2.25,
        contrast_percent: Some(contrast),
        robust_sigmas: Some(11.4),
        how: "brightness inside the limb against its neighbours".to_owned(),
    };
    MaskingRecord {
        share_of_limb: 0.042,
        passing_share: 0.0,
        hits_per_frame: 0.31,
        arcs: vec![
            arc("facula", "sun", 71.25, 2.1),
            arc("dust", "detector", 211.5, -3.4),
        ],
        structures_left_in: 0,
        radius_with_arcsec: Some(959.8662),
        radius_without_arcsec: Some(959.8671),
        oblateness_with_mas: separated.then_some(8.23),
        oblateness_without_mas: separated.then_some(8.71),
        brightness_regression: BrightnessRegression {
            whole_limb: Some(line(-2.41, 960)),
            masked_out: Some(line(0.57, 918)),
        },
    }
}
