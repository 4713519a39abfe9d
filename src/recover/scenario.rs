//! A session turned into a scenario of sessions like it.

use super::RecoverError;
use crate::frames::Reader;
use crate::gravity;
use crate::pipeline::{Error, is_followed, times_of};
use crate::result::record::Record;
use crate::session::{Kind, Session};
use crate::sky::{Mount, Parity, Utc};
use crate::synth::{
    Distortion, Layer, MountKind, Scenario, SequenceKind, SequencePlan, Shape, Site, Weather,
    longest_outer_scale_m,
};
use ndarray::Array2;
use rand::SeedableRng;
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, StandardNormal};

/// What the sessions are made from.
#[derive(Clone, Debug, PartialEq)]
pub struct Basis {
    /// The scenario; oblateness, edge and unknown distortion are drawn for each session.
    pub scenario: Scenario,
    /// What of the session could not be taken over, and what was taken in its place.
    pub notes: Vec<String>,
    /// Whether a result gave the distortion.
    distortion_known: bool,
}

/// Distortion of optics of which nothing is known, each coefficient, mas: an assumption.
const DISTORTION_MAS: f64 = 25.0;
/// Fried's parameter where no result tells it, at 500 nm towards the zenith, m: an assumption.
const R0_M: f64 = 0.07;
/// Layers where no result tells them: height, m, and share: an assumption.
const LAYERS: [(f64, f64); 3] = [(8.0, 0.55), (350.0, 0.27), (2600.0, 0.18)];
/// Outer scale where it was not measured, m: an assumption.
const OUTER_SCALE_M: f64 = 20.0;
/// Wind of the layers where the coherence time was not measured, m/s: an assumption.
const WIND_M_S: f64 = 9.0;
/// Exposure where the headers do not tell it, s: an assumption.
const EXPOSURE_S: f64 = 0.002;
/// Radius where no result tells it, arcsec at 1 AU: an assumption.
const RADIUS_ARCSEC: f64 = 959.83;

impl Basis {
    /// The scenario of one session: its oblateness, and what only it has.
    pub(super) fn drawn(&self, session: &Session, injected_mas: f64, seed: u64) -> Scenario {
        // A stream apart from those of `synth`, which are drawn from the same seed.
        let mut random = ChaCha8Rng::seed_from_u64(seed);
        random.set_stream(u64::MAX);
        let mut normal = || -> f64 { StandardNormal.sample(&mut random) };
        let mut out = self.scenario.clone();
        out.shape.oblateness_mas = injected_mas;
        let edge_km = session.limb.edge_scale_km + session.limb.edge_scale_sigma_km * normal();
        // An edge thinner than nothing is no edge.
        out.edge_scale_km = if edge_km > 0.0 { edge_km } else { 0.0 };
        let sigma_mas = match session.instrument.distortion_sigma_mas {
            Some(it) => Some(it),
            None if self.distortion_known => None,
            None => Some(DISTORTION_MAS),
        };
        if let Some(sigma_mas) = sigma_mas {
            out.distortion = (2..=4_u8)
                .map(|m| {
                    let (c, s) = (sigma_mas * normal(), sigma_mas * normal());
                    Distortion {
                        m,
                        amplitude_mas: c.hypot(s),
                        angle_deg: (s.atan2(c) / f64::from(m)).to_degrees(),
                    }
                })
                .collect();
        }
        out
    }
}

/// A scenario of sessions like this one, by a result of it where there is one.
///
/// # Errors
///
/// When the frames cannot be read or the session is of a kind that is not simulated.
pub fn scenario(
    session: &Session,
    result: Option<&Record>,
    frames: Option<usize>,
) -> Result<Basis, RecoverError> {
    let mut notes = Vec::new();
    let mut plans = Vec::new();
    let mut start: Option<Utc> = None;
    let mut end = None;
    let mut size_px = 0;
    let mut exposure_s = None;
    let mut light = None;
    for (index, sequence) in session.sequences.iter().enumerate() {
        if !is_followed(sequence.kind) {
            notes.push(format!(
                "sequence {} is not of followed disks and is not made",
                index + 1
            ));
            continue;
        }
        let (list, times) = times_of(session, index)?;
        let (Some(first), Some(last)) = (times.first(), times.last()) else {
            continue;
        };
        let exposure = first.1.unwrap_or(EXPOSURE_S);
        exposure_s = exposure_s.or(first.1);
        let began = first.0.plus_s(-0.5 * exposure);
        let origin = *start.get_or_insert(began);
        let span_s = last.0.minus(first.0);
        let step_s = if times.len() > 1 {
            span_s / (times.len() - 1) as f64
        } else {
            1.0
        };
        let count = frames.map_or(times.len(), |most| times.len().min(most));
        if count < times.len() {
            notes.push(format!(
                "sequence {} is made with {count} of its {} frames, at the same step: the random error is that of a shorter sequence",
                index + 1,
                times.len()
            ));
        }
        if list.width != list.height {
            let note = "the detector is made square, of the longer side".to_owned();
            if !notes.contains(&note) {
                notes.push(note);
            }
        }
        size_px = size_px.max(list.width).max(list.height);
        if light.is_none() {
            light = Some(light_of(&list, &session.camera)?);
        }
        end = Some(last.0);
        plans.push(SequencePlan {
            kind: if sequence.kind == Kind::Roll {
                SequenceKind::Roll
            } else {
                SequenceKind::Burst
            },
            frames: count,
            step_s: if step_s > exposure { step_s } else { exposure },
            at_min: began.minus(origin) / 60.0,
            roll_deg: sequence.roll_deg,
            lines: 0,
            line_s: 0.0,
        });
    }
    let (Some(start), Some(end), Some(light)) = (start, end, light) else {
        return Err(RecoverError::Session(Error::NoSequence));
    };
    plans.sort_by(|a, b| a.at_min.total_cmp(&b.at_min));
    if exposure_s.is_none() {
        notes.push(format!(
            "the exposure is not in the headers: {EXPOSURE_S} s"
        ));
    }
    if session.camera.parity == Parity::Mirrored {
        notes.push("a mirrored detector is made as one that shows the sky".to_owned());
    }
    let weather = weather(session, start, end)?;
    let (layers, radius_arcsec) = if let Some(it) = result {
        (
            layers(session, it, &mut notes),
            it.shape.radius.value.unwrap_or(RADIUS_ARCSEC),
        )
    } else {
        notes.push(format!(
                "no result was given: r0 {R0_M} m in {} layers, winds of {WIND_M_S} m/s, distortions drawn with {DISTORTION_MAS} mas; with --result they are those of the session",
                LAYERS.len()
            ));
        (
            layers_of(session, R0_M, &LAYERS, OUTER_SCALE_M, WIND_M_S),
            RADIUS_ARCSEC,
        )
    };
    let distortion = result.map_or(Vec::new(), |it| {
        it.shape
            .instrument
            .iter()
            .filter_map(|it| {
                Some(Distortion {
                    m: it.m as u8,
                    amplitude_mas: it.amplitude_mas?,
                    angle_deg: it.angle_deg?,
                })
            })
            .collect()
    });
    let site = &session.site;
    let camera = &session.camera;
    let scenario = Scenario {
        start_utc: start.to_iso(),
        mount: match session.telescope.mount {
            Mount::Equatorial => MountKind::Equatorial,
            Mount::Coelostat => MountKind::Coelostat,
            Mount::Altazimuth => MountKind::Altazimuth,
            Mount::Fixed => MountKind::Fixed,
        },
        aperture_m: session.telescope.aperture_m,
        central_obstruction: session.telescope.central_obstruction,
        wavelength_nm: session.filter.centre_nm,
        width_nm: session.filter.width_nm,
        exposure_s: exposure_s.unwrap_or(EXPOSURE_S),
        size_px,
        scale_arcsec_px: camera.scale_arcsec_px,
        scale_sigma_rel: camera.scale_sigma_rel,
        camera_angle_deg: camera.angle_deg,
        angle_sigma_deg: camera.angle_sigma_deg,
        gain_e_adu: camera.gain_e_adu,
        read_noise_e: camera.read_noise_e,
        peak_e: light.peak_e,
        saturation_adu: light.full_adu,
        dark_adu: light.dark_adu,
        hot_pixels: 0,
        dust_spots: 0,
        compressed: false,
        photon_noise: true,
        edge_scale_km: session.limb.edge_scale_km,
        layer_tilt_sigma_arcmin: session.refractivity.layer_tilt_sigma_arcmin,
        layer_tilt_tau_min: session.refractivity.layer_tilt_tau_min,
        site: Site {
            name: site.name.clone(),
            latitude_deg: site.latitude_deg,
            longitude_deg: site.longitude_deg,
            height_m: site.height_m,
        },
        shape: Shape {
            radius_arcsec,
            oblateness_mas: 0.0,
            p4_mas: gravity::figure(session.rotation).c4 * gravity::nominal_radius_mas(),
        },
        weather,
        distortion,
        layers,
        sequences: plans,
        ..Scenario::default()
    };
    let distortion_known = !scenario.distortion.is_empty();
    notes.push(
        "pointing, vignetting, response of pixels, scattered light and the flicker of r0 are the demonstration's; spots and the filter's width are not made; stacks are left out"
            .to_owned(),
    );
    Ok(Basis {
        scenario,
        notes,
        distortion_known,
    })
}

/// The light of a frame.
struct Light {
    peak_e: f64,
    dark_adu: f64,
    full_adu: u16,
}

/// Light and dark level of the first frame that can be read.
fn light_of(
    list: &crate::frames::Sequence,
    camera: &crate::session::Camera,
) -> Result<Light, RecoverError> {
    let mut raw = Array2::zeros((0, 0));
    let first = list.frames.first().copied().ok_or(Error::NoSequence)?;
    Reader::new()
        .read(list, first, &mut raw)
        .map_err(Error::from)?;
    let mut sorted: Vec<f32> = raw.iter().copied().filter(|it| it.is_finite()).collect();
    sorted.sort_by(f32::total_cmp);
    let at = |share: f64| {
        let place = ((sorted.len() as f64 - 1.0) * share) as usize;
        sorted.get(place).map_or(0.0, |it| f64::from(*it))
    };
    // A percent of the pixels lies outside any disk that has its limb in the frame.
    let (dark_adu, bright_adu) = (at(0.01), at(0.99));
    let dark_adu = if dark_adu > 0.0 { dark_adu } else { 0.0 };
    let full = camera.saturation_adu.unwrap_or(65_535.0);
    Ok(Light {
        peak_e: (bright_adu - dark_adu) * camera.gain_e_adu,
        dark_adu,
        full_adu: if full < 65_535.0 { full as u16 } else { 65_535 },
    })
}

/// The air at the start, and how it changes.
fn weather(session: &Session, start: Utc, end: Utc) -> Result<Weather, RecoverError> {
    let at = |time| session.weather.at(time).map_err(Error::from);
    let (Some((a, _)), Some((b, _))) = (at(start)?, at(end)?) else {
        return Err(RecoverError::NotSimulated {
            what: "a session above the air is not simulated".to_owned(),
            cure: "give a session with [weather]",
        });
    };
    let hours = end.minus(start) / 3600.0;
    let rate = |a: f64, b: f64| if hours > 0.05 { (b - a) / hours } else { 0.0 };
    let known = &session.weather;
    Ok(Weather {
        pressure_hpa: a.pressure_hpa,
        temperature_c: a.temperature_c,
        relative_humidity: a.relative_humidity,
        pressure_rate_hpa_h: rate(a.pressure_hpa, b.pressure_hpa),
        temperature_rate_c_h: rate(a.temperature_c, b.temperature_c),
        pressure_sigma_hpa: known.pressure_sigma_hpa,
        temperature_sigma_c: known.temperature_sigma_c,
        humidity_sigma: known.humidity_sigma,
    })
}

/// The turbulence that a result found.
fn layers(session: &Session, result: &Record, notes: &mut Vec<String>) -> Vec<Layer> {
    let seeing = &result.seeing;
    let r0_m = seeing.r0.value.unwrap_or_else(|| {
        notes.push(format!("the result has no r0: {R0_M} m"));
        R0_M
    });
    let found: Vec<(f64, f64)> = seeing
        .layers
        .iter()
        .filter(|it| it.share > 1e-3)
        .map(|it| (it.height_m, it.share))
        .collect();
    let shares = if found.is_empty() {
        notes.push(format!(
            "the result has no layers: {} assumed",
            LAYERS.len()
        ));
        LAYERS.to_vec()
    } else {
        found
    };
    let longest_m = longest_outer_scale_m(session.telescope.aperture_m);
    let outer_m = match seeing.outer_scale.value {
        Some(it) if it <= longest_m => it,
        Some(it) => {
            notes.push(format!(
                "the outer scale of {it:.0} m is made as {longest_m:.0} m, the longest that is simulated"
            ));
            longest_m
        }
        None => OUTER_SCALE_M,
    };
    // Common practice, no source: tau = 0.314 r0 / V.
    let wind_m_s = match (seeing.coherence_time.value, seeing.line_of_sight.value) {
        (Some(tau_s), Some(r0_m)) if tau_s > 0.0 => {
            let it = 0.314 * r0_m / tau_s;
            if it < 40.0 { it } else { 40.0 }
        }
        _ => {
            notes.push(format!(
                "the result has no coherence time: winds of {WIND_M_S} m/s"
            ));
            WIND_M_S
        }
    };
    layers_of(session, r0_m, &shares, outer_m, wind_m_s)
}

/// Layers that together have an r0.
fn layers_of(
    session: &Session,
    r0_m: f64,
    shares: &[(f64, f64)],
    outer_m: f64,
    wind_m_s: f64,
) -> Vec<Layer> {
    let total: f64 = shares.iter().map(|it| it.1).sum();
    let longest_m = longest_outer_scale_m(session.telescope.aperture_m);
    shares
        .iter()
        .map(|&(height_m, share)| Layer {
            height_m,
            // Strengths add: r0^(-5/3).
            r0_m: r0_m * (share / total).powf(-0.6),
            outer_scale_m: if outer_m < longest_m {
                outer_m
            } else {
                longest_m
            },
            wind_m_s,
        })
        .collect()
}
