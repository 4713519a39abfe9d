//! `limbs.fits`: the limbs of a session with all that a second fit needs.

use super::LOST;
use crate::frames::{Card, Column, FitsWriter, Values};
use crate::limb::template::width_of_blur_arcsec;
use crate::pipeline::correct::CorrectedFrame;
use crate::pipeline::{Error, Outcome, frame_table};
use crate::refraction;
use crate::session::{Moment, Projection, ScaleOf, Session};
use crate::shape::REFERENCE_RADIUS_MAS;
use crate::sky::Utc;
use std::collections::BTreeMap;
use std::path::Path;

/// Writes `limbs.fits`: the table LIMBS, a row for every frame and sector, FRAMES, a row for every
/// frame, SEQUENCES, and LOST, the frames without a limb.
///
/// # Errors
///
/// When the file cannot be written.
pub(in crate::pipeline) fn write(
    outcome: &Outcome,
    session: &Session,
    common: Vec<Card>,
    path: &Path,
) -> Result<(), Error> {
    // The time as it is printed is what the column counts from.
    let printed = outcome.measured[0].frames[0].utc.to_iso();
    let reference = Utc::parse(&printed)?;
    let mut cards = common;
    cards.push(Card::text("DATEREF", printed, "TIME counts from here"));
    cards.extend(made_with(session));
    if let Some((value, sigma)) = outcome.noise {
        cards.push(Card::real(
            "TL_NOISE",
            value,
            "variance of the noise over that expected",
        ));
        cards.push(Card::real(
            "TL_NOISU",
            sigma,
            "standard uncertainty of TL_NOISE",
        ));
    }
    let mut file = FitsWriter::create(path)?;
    file.table("LIMBS", &limbs(outcome, reference), &cards)?;
    let counted = cards.iter().filter(|it| it.name == "DATEREF").cloned();
    let counted: Vec<Card> = counted.collect();
    let frames = frame_table::columns(&outcome.traces.frames);
    file.table("FRAMES", &frames, &counted)?;
    file.table("SEQUENCES", &sequences(outcome, reference), &[])?;
    let lost = lost(outcome);
    if !lost[0].values.is_empty() {
        file.table("LOST", &lost, &[])?;
    }
    file.finish()?;
    Ok(())
}

/// What the limbs stand on and a second fit cannot change, or must know to change.
fn made_with(session: &Session) -> Vec<Card> {
    let moment = match session.time.date_obs {
        Moment::Start => "start",
        Moment::Middle => "middle",
        Moment::End => "end",
    };
    vec![
        Card::real(
            "TL_CLOCK",
            session.time.clock_offset_s,
            "[s] taken off the times",
        ),
        Card::text(
            "TL_STAMP",
            moment,
            "moment the headers' times were taken for",
        ),
        Card::real(
            "TL_EDGE",
            session.limb.edge_scale_km,
            "[km] edge of the template",
        ),
        Card::real(
            "TL_APER",
            session.telescope.aperture_m,
            "[m] aperture of the template",
        ),
        Card::real(
            "TL_OBSTR",
            session.telescope.central_obstruction,
            "of the aperture",
        ),
    ]
}

fn limbs(outcome: &Outcome, reference: Utc) -> Vec<Column> {
    let mut whole: [Vec<i32>; 2] = Default::default();
    let mut real: [Vec<f64>; 10] = Default::default();
    let mut short: [Vec<f32>; 2] = Default::default();
    let mut flags: [Vec<u8>; 2] = Default::default();
    for (m, l) in outcome.measured.iter().zip(&outcome.limbs) {
        let corrected: BTreeMap<usize, &CorrectedFrame> =
            l.frames.iter().map(|it| (it.measured, it)).collect();
        for (k, frame) in m.frames.iter().enumerate() {
            let own;
            let (limb, usable) = if let Some(it) = corrected.get(&k) {
                (&it.limb, Some(&it.usable))
            } else {
                own = refraction::remove(&frame.limb, m.setup.plate, &frame.moment);
                (&own, None)
            };
            let after_s = frame.utc.minus(reference);
            for (s, sector) in frame.limb.sectors.iter().enumerate() {
                let angle = limb.angles_rad[s];
                let position = frame.moment.orientation.position_angle_rad(angle);
                whole[0].push(m.index as i32);
                whole[1].push(frame.frame as i32);
                for (column, value) in real.iter_mut().zip([
                    after_s,
                    angle.to_degrees(),
                    position.to_degrees(),
                    (REFERENCE_RADIUS_MAS + limb.radius_mas[s]) / 1000.0,
                    sector.radius_arcsec,
                    sector.sigma_arcsec,
                    sector.blur,
                    sector.blur_sigma,
                    sector.gain_adu,
                    sector.misfit,
                ]) {
                    column.push(value);
                }
                short[0].push((limb.sigma_mas[s] / 1000.0) as f32);
                short[1].push(width_of_blur_arcsec(sector.blur) as f32);
                flags[0].push(if usable.is_some_and(|it| it[s]) {
                    0
                } else {
                    sector.flag.code().max(1)
                });
                flags[1].push(sector.flag.code());
            }
        }
    }
    let [sequence, frame] = whole;
    let [
        time,
        theta,
        position,
        radius,
        seen,
        seen_sigma,
        j,
        j_sigma,
        gain,
        misfit,
    ] = real;
    let [sigma, blur] = short;
    let [flag, own] = flags;
    vec![
        Column::new("SEQUENCE", Values::I32(sequence))
            .describe("index in the session file, from 0")
            .ucd("meta.id"),
        Column::new("FRAME", Values::I32(frame))
            .describe("index in the sequence, from 0")
            .ucd("meta.id"),
        Column::new("TIME", Values::F64(time))
            .unit("s")
            .describe("mid-exposure after DATEREF")
            .ucd("time.epoch"),
        Column::new("THETA", Values::F64(theta))
            .unit("deg")
            .describe("detector angle from +x towards +y")
            .ucd("pos.posAng;instr.det"),
        Column::new("POSANG", Values::F64(position))
            .unit("deg")
            .describe("position angle from celestial north through east")
            .ucd("pos.posAng"),
        Column::new("RADIUS", Values::F64(radius))
            .unit("arcsec")
            .describe("radius at 1 AU, air taken out")
            .ucd("phys.angSize"),
        Column::new("SIGMA", Values::F32(sigma))
            .unit("arcsec")
            .describe("photon and read noise of RADIUS")
            .ucd("stat.error;phys.angSize"),
        Column::new("SEEN", Values::F64(seen))
            .unit("arcsec")
            .describe("apparent radius on the plate scale")
            .ucd("phys.angSize;instr.det"),
        Column::new("SEENSIG", Values::F64(seen_sigma))
            .unit("arcsec")
            .describe("photon and read noise of SEEN")
            .ucd("stat.error;phys.angSize"),
        Column::new("BLUR", Values::F32(blur))
            .unit("arcsec")
            .describe("lambda / r0 from the width of the limb")
            .ucd("instr.obsty.seeing"),
        Column::new("BLURJ", Values::F64(j))
            .unit("arcsec(5/3)")
            .describe("BLUR to the power 5/3 as fitted")
            .ucd("instr.obsty.seeing"),
        Column::new("BLURJSIG", Values::F64(j_sigma))
            .unit("arcsec(5/3)")
            .describe("standard uncertainty of BLURJ")
            .ucd("stat.error;instr.obsty.seeing"),
        Column::new("GAIN", Values::F64(gain))
            .unit("adu")
            .describe("brightness of disk centre by this sector")
            .ucd("phot.count"),
        Column::new("MISFIT", Values::F64(misfit))
            .describe("mean square misfit over its expectation")
            .ucd("stat.fit.chi2"),
        Column::new("FLAG", Values::U8(flag))
            .describe("0 good, 1 incomplete or masked, 2 misfit")
            .ucd("meta.code.qual"),
        Column::new("OWNFLAG", Values::U8(own))
            .describe("the same before the sequence was looked at as a whole")
            .ucd("meta.code.qual"),
    ]
}

fn sequences(outcome: &Outcome, reference: Utc) -> Vec<Column> {
    let of = |f: &dyn Fn(&super::super::measure::MeasuredSequence) -> f64| {
        Values::F64(outcome.measured.iter().map(f).collect())
    };
    let whole = |f: &dyn Fn(&super::super::measure::MeasuredSequence) -> usize| {
        Values::I32(outcome.measured.iter().map(|it| f(it) as i32).collect())
    };
    vec![
        Column::new("SEQUENCE", whole(&|it| it.index))
            .describe("index in the session file")
            .ucd("meta.id"),
        Column::new("FRAMES", whole(&|it| it.list.frames.len()))
            .describe("frames read")
            .ucd("meta.number"),
        Column::new("START", of(&|it| it.span_utc.0.minus(reference)))
            .unit("s")
            .describe("mid-exposure of the first frame after DATEREF")
            .ucd("time.start"),
        Column::new("STOP", of(&|it| it.span_utc.1.minus(reference)))
            .unit("s")
            .describe("mid-exposure of the last frame after DATEREF")
            .ucd("time.end"),
        Column::new("XPOSURE", of(&|it| it.exposure_s))
            .unit("s")
            .describe("exposure; 0 where it is not known")
            .ucd("time.duration;obs.exposure"),
        Column::new("SCALE", of(&|it| it.setup.scale_arcsec_px))
            .unit("arcsec/pix")
            .describe("plate scale of SEEN")
            .ucd("instr.scale"),
        Column::new("WAVELEN", of(&|it| it.setup.optics.wavelength_nm))
            .unit("nm")
            .describe("wavelength of the template")
            .ucd("em.wl"),
        Column::new(
            "TAN",
            whole(&|it| usize::from(it.setup.plate.projection == Projection::Tan)),
        )
        .describe("1: flat detector, 0: angle proportional to pixels")
        .ucd("meta.code"),
        Column::new(
            "SKYSCALE",
            whole(&|it| usize::from(it.setup.plate.scale_of == ScaleOf::Sky)),
        )
        .describe("1: scale found on stars through the air, 0: of the arriving light")
        .ucd("meta.code"),
        Column::new("FLAT", whole(&|it| usize::from(it.has_flat)))
            .describe("1: a flat field was divided out")
            .ucd("meta.code"),
    ]
}

fn lost(outcome: &Outcome) -> [Column; 3] {
    let mut columns: [Vec<i32>; 3] = Default::default();
    for m in &outcome.measured {
        for it in &m.lost {
            let code = LOST.iter().position(|word| *word == it.reason);
            columns[0].push(m.index as i32);
            // A file that could not be opened has no number of frames.
            columns[1].push(if it.reason == LOST[0] {
                -1
            } else {
                it.frame as i32
            });
            columns[2].push(code.unwrap_or(LOST.len() - 1) as i32);
        }
    }
    let [sequence, frame, reason] = columns;
    [
        Column::new("SEQUENCE", Values::I32(sequence))
            .describe("index in the session file")
            .ucd("meta.id"),
        Column::new("FRAME", Values::I32(frame))
            .describe("index in the sequence; -1: a file")
            .ucd("meta.id"),
        Column::new("REASON", Values::I32(reason))
            .describe(
                "0 not opened 1 not read 2 no disk 3 cut 4 radius 5 small 6 gaps 7 centre 8 other",
            )
            .ucd("meta.code.error"),
    ]
}
