//! The records of each sequence: its refraction, its own harmonics, the masked arcs of its limb.

use super::Parts;
use crate::pipeline::correct::CorrectedSequence;
use crate::pipeline::measure::{MeasuredSequence, kind_word};
use crate::pipeline::solve::zenith_factor;
use crate::result::record::{
    HarmonicRecord, MaskedArc, Quantity, RefractionRecord, SequenceRecord,
};
use crate::seeing::LEAST_FRAMES;
use crate::shape::{Known, REFERENCE_RADIUS_MAS};

/// What refraction did to the disk at mid sequence.
pub(super) fn refraction(it: &MeasuredSequence, known: &Known) -> RefractionRecord {
    let sun = &it.middle.sun;
    let d = sun.distance_au;
    let apparent = it.middle.map.as_ref().map_or(
        sun.zenith_true_rad,
        crate::air::DiskMap::zenith_apparent_rad,
    );
    let flattening = -2.0 * it.middle_air.cos2_mas / d;
    let relative: f64 = known
        .refractivity
        .iter()
        .map(|it| it.sigma_rel.powi(2))
        .sum();
    let tilt = 2.0 * it.middle_air.cos2_mas_arcmin / d * known.tilt_sigma_arcmin;
    RefractionRecord {
        sequence: it.index,
        zenith_true_deg: sun.zenith_true_rad.to_degrees(),
        zenith_apparent_deg: apparent.to_degrees(),
        refraction_arcsec: (sun.zenith_true_rad - apparent) / crate::units::ARCSEC_RAD,
        radius_change_mas: it.middle_air.mean_mas / d,
        flattening_mas: flattening,
        flattening_sigma_mas: (flattening * relative.sqrt()).hypot(tilt),
        effective_wavelength_nm: it
            .band
            .map_or(it.setup.optics.wavelength_nm, |it| it.effective_nm),
        smear_mas: it.band.map_or(0.0, |band| {
            band.smear(sun.zenith_true_rad - apparent).spread_mas
        }),
        refractivity: it.middle.refractivity,
        pressure_hpa: it.conditions.map_or(0.0, |it| it.pressure_hpa),
        temperature_c: it.conditions.map_or(0.0, |it| it.temperature_c),
        relative_humidity: it.conditions.map_or(0.0, |it| it.relative_humidity),
    }
}

/// The records of all sequences, those set aside included, in the order of the session.
pub(super) fn records(p: &Parts<'_>) -> Vec<SequenceRecord> {
    let mut out: Vec<SequenceRecord> = p
        .measured
        .iter()
        .zip(p.limbs)
        .enumerate()
        .map(|(k, (m, l))| sequence(p, k, m, l))
        .collect();
    for (index, reason) in p.set_aside {
        let it = &p.session.sequences[*index];
        out.push(SequenceRecord {
            sequence: *index,
            kind: kind_word(it.kind).to_owned(),
            time_utc: [String::new(), String::new()],
            roll_deg: it.roll_deg,
            frames_read: 0,
            frames_used: 0,
            zenith_true_deg: 0.0,
            parallactic_deg: 0.0,
            axis_deg: 0.0,
            b0_deg: 0.0,
            distance_au: 0.0,
            r0: Quantity::missing("m", reason),
            radius: Quantity::missing("arcsec", reason),
            harmonics: Vec::new(),
            set_aside: Some(reason.clone()),
        });
    }
    out.extend(super::ruler::sequences(p));
    out.sort_by_key(|it| it.sequence);
    out
}

/// The record of one measured sequence.
fn sequence(
    p: &Parts<'_>,
    position: usize,
    m: &MeasuredSequence,
    l: &CorrectedSequence,
) -> SequenceRecord {
    let sun = &m.middle.sun;
    let n = l.frames.len() as f64;
    let highest = l
        .frames
        .iter()
        .map(|it| it.harmonics.cos.len())
        .min()
        .unwrap_or(0)
        .min(9);
    let mean = |f: &dyn Fn(usize) -> f64| (0..l.frames.len()).map(f).sum::<f64>() / n;
    let stated = |order: usize| -> (f64, f64, f64) {
        let (c, s) = (
            mean(&|k| l.frames[k].harmonics.cos[order]),
            mean(&|k| l.frames[k].harmonics.sin[order]),
        );
        let scatter: f64 = l
            .frames
            .iter()
            .map(|it| (it.harmonics.cos[order] - c).powi(2) + (it.harmonics.sin[order] - s).powi(2))
            .sum();
        let coefficients = if order == 0 { 1.0 } else { 2.0 };
        let factor = p
            .shape
            .correlation
            .factor
            .get(order)
            .copied()
            .unwrap_or(1.0);
        (
            c,
            s,
            (factor * scatter / coefficients / (n - 1.0).max(1.0) / n).sqrt(),
        )
    };
    let (radius, _, radius_sigma) = stated(0);
    let own = match &p.seeing.motion {
        Ok(it) => {
            // The seeing knows only the sequences that are long enough.
            let before = p
                .measured
                .iter()
                .take(position)
                .filter(|it| it.frames.len() >= LEAST_FRAMES)
                .count();
            match it
                .sequences
                .get(before)
                .filter(|_| m.frames.len() >= LEAST_FRAMES)
            {
                Some(it) => {
                    let up = zenith_factor(m);
                    Quantity::measured(it.r0_los_500nm_m * up, it.r0_los_sigma_m * up, "m")
                }
                None => Quantity::missing("m", "too few frames"),
            }
        }
        Err(reason) => Quantity::missing("m", reason),
    };
    let used = p
        .shape
        .observations
        .iter()
        .filter(|it| it.sequence == m.index)
        .count();
    SequenceRecord {
        sequence: m.index,
        kind: kind_word(p.session.sequences[m.index].kind).to_owned(),
        time_utc: [
            m.frames[0].utc.to_iso(),
            m.frames[m.frames.len() - 1].utc.to_iso(),
        ],
        roll_deg: p.session.sequences[m.index].roll_deg,
        frames_read: m.frames.len() + m.lost.len(),
        frames_used: used,
        zenith_true_deg: sun.zenith_true_rad.to_degrees(),
        parallactic_deg: sun.parallactic_rad.to_degrees(),
        axis_deg: sun.axis_rad.to_degrees(),
        b0_deg: sun.b0_rad.to_degrees(),
        distance_au: sun.distance_au,
        r0: own,
        radius: Quantity::measured(
            (REFERENCE_RADIUS_MAS + radius - p.model.radius_bias_mas) / 1000.0,
            radius_sigma / 1000.0,
            "arcsec",
        ),
        harmonics: (2..highest)
            .map(|order| {
                let (cos_mas, sin_mas, sigma_mas) = stated(order);
                HarmonicRecord {
                    m: order,
                    cos_mas,
                    sin_mas,
                    sigma_mas,
                }
            })
            .collect(),
        set_aside: m.set_aside.clone(),
    }
}

/// Runs of sectors that were left out of a whole sequence for one reason.
pub(super) fn masked(m: &MeasuredSequence) -> Vec<MaskedArc> {
    let width = m.setup.annulus.sector_rad();
    let mut out: Vec<MaskedArc> = Vec::new();
    let mut last: Option<usize> = None;
    for (s, blemish) in m.blemishes.iter().enumerate() {
        let Some(blemish) = blemish else { continue };
        let middle = m.setup.annulus.angle_rad(s);
        let to_deg = (middle + 0.5 * width).to_degrees();
        match (out.last_mut(), last) {
            (Some(arc), Some(before)) if before + 1 == s && arc.reason == blemish.words() => {
                arc.to_deg = to_deg;
            }
            _ => out.push(MaskedArc {
                sequence: m.index,
                from_deg: (middle - 0.5 * width).to_degrees(),
                to_deg,
                frames: 1.0,
                reason: blemish.words().to_owned(),
            }),
        }
        last = Some(s);
    }
    out
}
