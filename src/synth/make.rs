//! A whole session, from scenario to folder.

use std::path::Path;

use rayon::prelude::*;

use super::detector::Detector;
use super::draw::{Draw, Stream};
use super::figure::{self, Figure};
use super::folder::Folder;
use super::profile_table::ProfileTable;
use super::render::{self, Studio};
use super::seeing::{self, Turbulence};
use super::sky_above::{self, Moment};
use super::truth::{FrameTruth, KnowledgeErrors, SequenceTruth, Truth};
use super::{Scenario, SequenceKind, SynthError, check, text, transit};
use crate::constants::ASTRONOMICAL_UNIT;
use crate::disk::{Darkening, DarkeningLaw, SolarEdge};
use crate::frames::{Card, CubeShape, FitsWriter};
use crate::optics::{Exposure, LimbOptics, Telescope};
use crate::units::ARCSEC_RAD;
use std::f64::consts::TAU;

/// Frames rendered together.
const CHUNK: usize = 8;
/// Darks, and flats.
const CALIBRATION_FRAMES: u32 = 12;
/// Light of the flats, of full scale.
const FLAT_LEVEL: f64 = 0.65;
/// Sky that must be around the disk, arcsec.
const SKY_ARCSEC: f64 = 20.0;
/// Scatters of the pointing for which there must be room.
const POINTING_SIGMAS: f64 = 5.0;
/// Half width of the blurred limb's table: this or so many pixels.
const SPAN_ARCSEC: f64 = 16.0;
const SPAN_PX: f64 = 6.0;
/// Places on the limb for each pixel along it.
const SAMPLES_PER_PX: f64 = 2.0;

/// Makes a session: `session.toml`, `weather.csv`, `dark.fits`, `flat.fits`, a cube for each sequence
/// and `truth.json`, in `folder`, which is created if it is not there. The files appear when all are
/// complete, `session.toml` last. `tick` is called once for each frame.
///
/// The same scenario and seed give the same bytes, whatever the number of threads.
///
/// # Errors
///
/// [`SynthError::NotOurs`] for a folder with a session of another origin; otherwise what is wrong
/// with the scenario, or what the disk refused.
pub fn make(
    s: &Scenario,
    seed: u64,
    folder: &Path,
    tick: &(dyn Fn() + Sync),
) -> Result<Truth, SynthError> {
    check::check(s)?;
    let moments = sky_above::moments(s, seed)?;
    let studio = studio(s, seed, &moments)?;
    let errors = knowledge_errors(s, seed);
    let weather = text::weather_csv(s, &errors)?;
    let files: Vec<String> = s
        .sequences
        .iter()
        .enumerate()
        .map(|(index, it)| match it.kind {
            SequenceKind::Burst | SequenceKind::Roll => format!("burst_{index:03}.fits"),
            SequenceKind::Drift | SequenceKind::Scan => {
                format!("{}_{index:03}.fits", it.kind.word())
            }
        })
        .collect();

    let folder = Folder::open(folder)?;
    calibration(s, seed, &studio.detector, &folder)?;
    if s.sequences.iter().any(|it| it.kind == SequenceKind::Scan) {
        line_calibration(s, seed, &studio.detector, &folder)?;
    }
    let mut sequences = Vec::new();
    let mut stretches = 0;
    for (index, file) in files.iter().enumerate() {
        let first = moments.partition_point(|it| it.sequence < index);
        let end = moments.partition_point(|it| it.sequence <= index);
        let mut writer = FitsWriter::create(&folder.staged(file))?;
        let plan = &s.sequences[index];
        let cube = CubeShape {
            height: if plan.kind == SequenceKind::Scan {
                plan.lines
            } else {
                s.size_px
            },
            ..shape(s, end - first)
        };
        writer.begin_u16(None, cube, &cards(s, &moments[first]))?;
        let mut frames = Vec::new();
        if plan.kind == SequenceKind::Scan {
            let cast = transit::Cast::new(s, &studio, plan)?;
            for at in &moments[first..end] {
                let turbulence: Vec<Turbulence> = transit::stretches(s, plan, at)
                    .into_iter()
                    .map(|from| {
                        stretches += 1;
                        let exposed = transit::exposed_as_lines(s, plan);
                        Turbulence::new(&exposed, seed, &from, stretches - 1)
                    })
                    .collect();
                let number = (first + frames.len()) as u32;
                let (counts, truth) = cast.transit(&studio, &turbulence, at, number)?;
                writer.plane_u16(&counts)?;
                frames.push(truth);
                tick();
            }
            writer.finish()?;
            sequences.push(SequenceTruth {
                file: file.clone(),
                frames,
            });
            continue;
        }
        for stretch in by_stretch(s, &moments[first..end]) {
            let turbulence = Turbulence::new(s, seed, &stretch[0], stretches);
            stretches += 1;
            let number = (first + frames.len()) as u32;
            let make_one = |(i, at): (usize, &Moment)| {
                let made = render::frame(s, &studio, &turbulence, at, number + i as u32);
                tick();
                made
            };
            frames.extend(rendered(stretch, &make_one, &mut writer)?);
        }
        writer.finish()?;
        sequences.push(SequenceTruth {
            file: file.clone(),
            frames,
        });
    }

    let truth = truth(s, seed, &studio.figure, errors, sequences);
    let json = serde_json::to_string_pretty(&truth).map_err(|it| SynthError::Scenario {
        reason: it.to_string(),
    })?;
    folder.stage("weather.csv", &weather)?;
    folder.stage("truth.json", &json)?;
    folder.stage("session.toml", &text::session_toml(s, &errors, &files))?;
    folder.publish()?;
    Ok(truth)
}

/// Renders frames in chunks, each written while the next is rendered.
fn rendered<'a>(
    moments: &'a [Moment],
    make_one: &(dyn Fn((usize, &'a Moment)) -> (ndarray::Array2<u16>, FrameTruth) + Sync),
    writer: &mut FitsWriter,
) -> Result<Vec<FrameTruth>, SynthError> {
    let numbered: Vec<(usize, &Moment)> = moments.iter().enumerate().collect();
    let mut truths = Vec::new();
    let mut ready = Vec::new();
    for chunk in numbered.chunks(CHUNK).map(Some).chain([None]) {
        let mut next = Vec::new();
        let written = rayon::in_place_scope(|scope| {
            if let Some(chunk) = chunk {
                let next = &mut next;
                scope.spawn(move |_| *next = chunk.par_iter().map(|it| make_one(*it)).collect());
            }
            let mut own = Vec::new();
            for (counts, truth) in std::mem::take(&mut ready) {
                writer.plane_u16(&counts)?;
                own.push(truth);
            }
            Ok::<_, SynthError>(own)
        });
        truths.extend(written?);
        ready = next;
    }
    Ok(truths)
}

/// Cuts a sequence where its screens would come round again.
fn by_stretch<'a>(s: &Scenario, moments: &'a [Moment]) -> Vec<&'a [Moment]> {
    let longest_s = seeing::stretch_s(s);
    let mut from_s = moments.first().map_or(0.0, |it| it.middle_s);
    moments
        .chunk_by(|_, it| {
            let goes_on = it.middle_s - from_s < longest_s;
            if !goes_on {
                from_s = it.middle_s;
            }
            goes_on
        })
        .collect()
}

/// What all frames share.
fn studio(s: &Scenario, seed: u64, moments: &[Moment]) -> Result<Studio, SynthError> {
    let figure = Figure::new(&s.shape);
    let middle = &moments[moments.len() / 2].geometry;
    let few: Vec<f64> = (0..90).map(|k| TAU * f64::from(k) / 90.0).collect();
    let limb = figure::seen_limb_arcsec(&figure, middle, &few);
    let mean_arcsec = limb.iter().sum::<f64>() / limb.len() as f64;
    let room_arcsec = SKY_ARCSEC + POINTING_SIGMAS * s.pointing_sigma_arcsec;
    let needed_px = 2.0 * (mean_arcsec + room_arcsec) / s.scale_arcsec_px;
    if needed_px > s.size_px as f64 {
        return Err(SynthError::DiskTooLarge {
            needed_px,
            size_px: s.size_px,
        });
    }
    let darkening = Darkening::new(DarkeningLaw::Neckel2005, s.wavelength_nm)?;
    let distance_m = middle.sun.distance_au * ASTRONOMICAL_UNIT.value;
    let optics = LimbOptics {
        edge: SolarEdge {
            radius_arcsec: mean_arcsec,
            scale_arcsec: 1000.0 * s.edge_scale_km / distance_m / ARCSEC_RAD,
            darkening,
        },
        telescope: Telescope {
            aperture_m: s.aperture_m,
            central_obstruction: s.central_obstruction,
        },
        wavelength_nm: s.wavelength_nm,
        exposure: Exposure::Short,
    };
    let r0_m = moments.iter().map(|it| seeing::frame_r0_m(s, it));
    let range_m = r0_m.fold((f64::INFINITY, 0.0), |(low, high): (f64, f64), it| {
        (low.min(it), high.max(it))
    });
    let span_arcsec = SPAN_ARCSEC.max(SPAN_PX * s.scale_arcsec_px);
    let samples = (SAMPLES_PER_PX * TAU * mean_arcsec / s.scale_arcsec_px).ceil() as usize;
    Ok(Studio {
        figure,
        detector: Detector::new(s, seed),
        table: ProfileTable::new(&optics, span_arcsec, s.scale_arcsec_px, range_m)?,
        darkening,
        optics,
        angles_rad: (0..samples)
            .map(|k| TAU * k as f64 / samples as f64)
            .collect(),
        seed,
    })
}

/// How wrong the observer's facts are.
pub(super) fn knowledge_errors(s: &Scenario, seed: u64) -> KnowledgeErrors {
    let mut draw = Draw::new(seed, Stream::Knowledge);
    let w = &s.weather;
    let scale_rel = s.scale_sigma_rel * draw.normal();
    let angle_deg = s.angle_sigma_deg * draw.normal();
    let pressure_hpa = w.pressure_sigma_hpa * draw.normal();
    let temperature_c = w.temperature_sigma_c * draw.normal();
    // A hygrometer shows nothing below 0 or above 1.
    let shown = (w.relative_humidity + w.humidity_sigma * draw.normal()).clamp(0.0, 1.0);
    KnowledgeErrors {
        scale_rel,
        angle_deg,
        pressure_hpa,
        temperature_c,
        relative_humidity: shown - w.relative_humidity,
    }
}

fn truth(
    s: &Scenario,
    seed: u64,
    figure: &Figure,
    errors: KnowledgeErrors,
    sequences: Vec<SequenceTruth>,
) -> Truth {
    let added: Vec<f64> = sequences
        .iter()
        .flat_map(|it| &it.frames)
        .map(FrameTruth::oblateness_mas)
        .collect();
    let r0_m = seeing::zenith_r0_m(s);
    Truth {
        program_version: env!("CARGO_PKG_VERSION").to_owned(),
        seed,
        scenario: s.clone(),
        c2: figure.c2,
        c4: figure.c4,
        r0_m: r0_m.is_finite().then_some(r0_m),
        errors,
        turbulence_oblateness_mas: added.iter().sum::<f64>() / added.len() as f64,
        sequences,
    }
}

fn shape(s: &Scenario, planes: usize) -> CubeShape {
    CubeShape {
        width: s.size_px,
        height: s.size_px,
        planes,
        compressed: s.compressed,
    }
}

/// Header of a sequence's cube, whose third axis is time.
fn cards(s: &Scenario, first: &Moment) -> Vec<Card> {
    let plan = &s.sequences[first.sequence];
    let start = first.start.to_iso();
    let mut cards = vec![
        Card::text("OBJECT", "Sun", ""),
        Card::text("TIMESYS", "UTC", "time scale"),
        Card::text("DATEREF", start.clone(), "start of the first exposure"),
        Card::text("DATE-BEG", start, "start of the first exposure"),
        Card::text("BUNIT", "adu", ""),
    ];
    // The lines of a scan are exposed from one to the next.
    if plan.kind != SequenceKind::Scan {
        cards.push(Card::real(
            "XPOSURE",
            s.exposure_s,
            "[s] exposure of a frame",
        ));
    }
    if plan.frames > 1 {
        cards.extend([
            Card::text("CTYPE3", "UTC", "starts of the exposures"),
            Card::text("CUNIT3", "s", ""),
            Card::real("CRPIX3", 1.0, ""),
            Card::real("CRVAL3", 0.0, "[s] after DATEREF"),
            Card::real("CDELT3", plan.step_s, "[s] from frame to frame"),
        ]);
    }
    cards
}

/// Lines of the calibration of a line detector.
const CALIBRATION_LINES: usize = 256;

/// Darks and flats of the line detector: images whose rows are lines.
fn line_calibration(
    s: &Scenario,
    seed: u64,
    detector: &Detector,
    folder: &Folder,
) -> Result<(), SynthError> {
    let flat_e = (FLAT_LEVEL * f64::from(s.saturation_adu) - s.dark_adu) * s.gain_e_adu;
    for (name, light_e, stream) in [
        ("line_dark.fits", 0.0, Stream::Dark(CALIBRATION_FRAMES)),
        ("line_flat.fits", flat_e, Stream::Flat(CALIBRATION_FRAMES)),
    ] {
        let mut draw = Draw::new(seed, stream);
        let lines = detector.exposed_lines(CALIBRATION_LINES, |_, _| light_e, &mut draw);
        let mut writer = FitsWriter::create(&folder.staged(name))?;
        let cube = CubeShape {
            height: CALIBRATION_LINES,
            ..shape(s, 1)
        };
        writer.begin_u16(None, cube, &[Card::text("BUNIT", "adu", "")])?;
        writer.plane_u16(&lines)?;
        writer.finish()?;
    }
    Ok(())
}

/// Darks and flats.
fn calibration(
    s: &Scenario,
    seed: u64,
    detector: &Detector,
    folder: &Folder,
) -> Result<(), SynthError> {
    let flat_e = (FLAT_LEVEL * f64::from(s.saturation_adu) - s.dark_adu) * s.gain_e_adu;
    for (name, light_e) in [("dark.fits", 0.0), ("flat.fits", flat_e)] {
        let stream = |it| {
            if light_e == 0.0 {
                Stream::Dark(it)
            } else {
                Stream::Flat(it)
            }
        };
        let planes: Vec<_> = (0..CALIBRATION_FRAMES)
            .into_par_iter()
            .map(|it| detector.exposed(|_, _| light_e, &mut Draw::new(seed, stream(it))))
            .collect();
        let mut writer = FitsWriter::create(&folder.staged(name))?;
        let cards = [
            Card::real("XPOSURE", s.exposure_s, "[s] exposure of a frame"),
            Card::text("BUNIT", "adu", ""),
        ];
        writer.begin_u16(None, shape(s, planes.len()), &cards)?;
        for plane in &planes {
            writer.plane_u16(plane)?;
        }
        writer.finish()?;
    }
    Ok(())
}
