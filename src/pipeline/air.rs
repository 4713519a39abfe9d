//! The air alone: limbs measured, refraction taken out, the seeing estimated, no shape fitted.

use super::assemble::seeing::{coherence_time, floors, record};
use super::correct::{self, CorrectedSequence};
use super::measure::{MeasuredSequence, kind_word};
use super::solve::{SeeingResult, SequenceAir, frame_r0_m, seeing, zenith_factor};
use super::{Error, Progress, measure_all, products, with_tables};
use crate::frames::{Column, Value, Values, write_ecsv};
use crate::result::air::{AIR_SCHEMA_VERSION, AirFrame, AirReport, AirSequence};
use crate::result::record::{Quantity, WarningRecord};
use crate::seeing::{fwhm_arcsec, r0_at_wavelength_m};
use crate::session::Session;
use std::path::Path;

/// What the frames say of the air.
#[derive(Clone, Debug)]
pub struct Air {
    /// The numbers.
    pub report: AirReport,
    /// The time series.
    pub frames: Vec<AirFrame>,
}

/// Measures the air from all sequences of whole disks, whether or not they would give a shape.
///
/// # Errors
///
/// As [`super::reduce`], but for the shape.
pub fn measure_air(session: &Session, progress: &dyn Progress) -> Result<Air, Error> {
    let (session, given) = with_tables(session)?;
    let session = &*session;
    let (measured, set_aside) = measure_all(session, &given, &mut Vec::new(), progress)?;
    let limbs: Vec<CorrectedSequence> = measured.iter().map(correct::correct).collect();
    let found = seeing(session, &measured, &limbs);
    let first = measured[0].frames[0].utc;
    let last = &measured[measured.len() - 1];
    let end = last.frames.last().map_or(last.middle_utc, |it| it.utc);
    let mut warnings: Vec<WarningRecord> = Vec::new();
    let mut say = |code: &str, text: String| {
        let code = code.to_owned();
        warnings.push(WarningRecord { code, text });
    };
    for m in measured.iter().filter(|it| !it.lost.is_empty()) {
        say(
            "frames-lost",
            format!(
                "sequence {}: {} frames have no limb; the first: {}",
                m.index + 1,
                m.lost.len(),
                m.lost[0].detail
            ),
        );
    }
    for (index, reason) in &set_aside {
        say(
            "set-aside",
            format!("sequence {} was not measured: {reason}", index + 1),
        );
    }
    if let Ok(it) = &found.motion {
        for text in &it.warnings {
            say("seeing", text.clone());
        }
    }
    for (code, text) in &found.warnings {
        say(code, text.clone());
    }
    let report = AirReport {
        schema_version: AIR_SCHEMA_VERSION,
        program_version: env!("CARGO_PKG_VERSION").to_owned(),
        site_name: session.site.name.clone(),
        time_utc: [first.to_iso(), end.to_iso()],
        created_from: products::sources(session)?,
        settings: crate::session::resolved(session),
        seeing: record(&found),
        harmonics: floors(&found),
        sequences: measured
            .iter()
            .zip(&limbs)
            .zip(&found.each)
            .map(|((m, l), own)| sequence(session, m, l, own, &found))
            .collect(),
        warnings,
    };
    let frames = measured
        .iter()
        .zip(&limbs)
        .zip(&found.each)
        .flat_map(|((m, l), own)| time_series(m, l, own, first))
        .collect();
    Ok(Air { report, frames })
}

/// One sequence's row.
fn sequence(
    session: &Session,
    m: &MeasuredSequence,
    l: &CorrectedSequence,
    own: &SequenceAir,
    found: &SeeingResult,
) -> AirSequence {
    let up = zenith_factor(m);
    let pair = |it: &Result<(f64, f64), String>, factor: f64, unit: &str| match it {
        Ok((value, sigma)) => Quantity::measured(value * factor, sigma * factor, unit),
        Err(reason) => Quantity::missing(unit, reason),
    };
    let wavelength_nm = m.setup.optics.wavelength_nm;
    let fwhm = own.motion.clone().and_then(|(r0_m, sigma_m)| {
        let scale_m = found.motion.as_ref().ok().and_then(|it| it.outer_scale_m);
        let there_m = r0_at_wavelength_m(r0_m, wavelength_nm).map_err(|it| it.to_string())?;
        let scale_m = scale_m.filter(|it| *it > 20.0 * there_m);
        let width = fwhm_arcsec(there_m, wavelength_nm, scale_m).map_err(|it| it.to_string())?;
        Ok((width, width * sigma_m / r0_m))
    });
    // The session's floor, as strong as this sequence's own turbulence.
    let floor = match (&found.floors, &own.motion, &found.motion) {
        (Ok(floors), Ok((r0_m, _)), Ok(session_motion)) => {
            floors.iter().find(|it| it.m == 2).map_or_else(
                || Quantity::missing("mas", "no harmonic m = 2"),
                |it| {
                    let relative = (session_motion.r0_los_500nm_m / r0_m).powf(5.0 / 6.0);
                    Quantity::computed(it.frame_predicted_mas * relative, "mas")
                },
            )
        }
        (Err(reason), ..) | (_, Err(reason), _) | (.., Err(reason)) => {
            Quantity::missing("mas", reason)
        }
    };
    AirSequence {
        sequence: m.index,
        kind: kind_word(session.sequences[m.index].kind).to_owned(),
        time_utc: [
            m.frames[0].utc.to_iso(),
            m.frames[m.frames.len() - 1].utc.to_iso(),
        ],
        frames_read: m.frames.len() + m.lost.len(),
        frames_used: l.frames.len(),
        zenith_true_deg: m.middle.sun.zenith_true_rad.to_degrees(),
        r0_motion: pair(&own.motion, up, "m"),
        r0_blur: pair(&own.blur, 1.0, "m"),
        fwhm: pair(&fwhm, 1.0, "arcsec"),
        coherence_time: coherence_time(&own.coherence),
        floor,
    }
}

/// One sequence's frames.
fn time_series(
    m: &MeasuredSequence,
    l: &CorrectedSequence,
    own: &SequenceAir,
    start: crate::sky::Utc,
) -> Vec<AirFrame> {
    let n = l.frames.len() as f64;
    let mean = |f: &dyn Fn(usize) -> f64| (0..l.frames.len()).map(f).sum::<f64>() / n;
    let of = |k: usize| &l.frames[k].harmonics;
    let (r, c, s) = (
        mean(&|k| of(k).cos[0]),
        mean(&|k| of(k).cos[2]),
        mean(&|k| of(k).sin[2]),
    );
    l.frames
        .iter()
        .enumerate()
        .map(|(k, it)| {
            let frame = &m.frames[it.measured];
            let strength = own.strength.get(k).copied().filter(|it| *it > 0.0);
            let mean_r0_m = own.motion.as_ref().ok().map(|it| it.0);
            AirFrame {
                sequence: m.index,
                frame: frame.frame,
                time_s: frame.utc.minus(start),
                zenith_deg: frame.moment.sun.zenith_true_rad.to_degrees(),
                r0_motion_m: mean_r0_m.zip(strength).map(|(r0, s)| r0 * s.powf(-0.6)),
                r0_blur_m: frame_r0_m(m, frame.limb.mean_blur()),
                radius_mas: it.harmonics.cos[0] - r,
                cos2_mas: it.harmonics.cos[2] - c,
                sin2_mas: it.harmonics.sin[2] - s,
            }
        })
        .collect()
}

/// Writes the time series, a row for every frame.
///
/// # Errors
///
/// When the file cannot be written; what was there before stays whole.
pub fn write_time_series(air: &Air, path: &Path) -> Result<(), Error> {
    let frames = &air.frames;
    let whole = |f: &dyn Fn(&AirFrame) -> usize| {
        Values::I32(frames.iter().map(|it| f(it) as i32).collect())
    };
    let real = |f: &dyn Fn(&AirFrame) -> f64| Values::F64(frames.iter().map(f).collect());
    let gaps = |f: &dyn Fn(&AirFrame) -> Option<f64>| {
        Values::Gaps(
            frames
                .iter()
                .map(|it| f(it).filter(|v| v.is_finite()))
                .collect(),
        )
    };
    let columns = [
        Column::new("sequence", whole(&|it| it.sequence)).describe("index in the session file, from 0"),
        Column::new("frame", whole(&|it| it.frame)).describe("index in the sequence, from 0"),
        Column::new("time", real(&|it| it.time_s))
            .unit("s")
            .describe("mid-exposure after the reference")
            .ucd("time.epoch"),
        Column::new("zenith_distance", real(&|it| it.zenith_deg))
            .unit("deg")
            .describe("true zenith distance of the Sun"),
        Column::new("r0_motion", gaps(&|it| it.r0_motion_m))
            .unit("m")
            .describe("Fried's parameter, 500 nm, towards the Sun, from the harmonics m >= 5 of this frame"),
        Column::new("r0_blur", gaps(&|it| it.r0_blur_m))
            .unit("m")
            .describe("Fried's parameter, 500 nm, towards the Sun, from the limb's width"),
        Column::new("radius", real(&|it| it.radius_mas))
            .unit("mas")
            .describe("minus the sequence's mean, at 1 AU"),
        Column::new("cos2", real(&|it| it.cos2_mas))
            .unit("mas")
            .describe("minus the sequence's mean, on the detector, at 1 AU"),
        Column::new("sin2", real(&|it| it.sin2_mas))
            .unit("mas")
            .describe("minus the sequence's mean, on the detector, at 1 AU"),
    ];
    let facts = [(
        "reference".to_owned(),
        Value::Text(air.report.time_utc[0].clone()),
    )];
    write_ecsv(path, &columns, &facts)?;
    Ok(())
}
