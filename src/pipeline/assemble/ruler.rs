//! The records of drifts and scans, and what a reader should know of them.

use super::{Parts, lines, quantity};
use crate::pipeline::measure::{MeasuredDrift, MeasuredScan, MeasuredTransit};
use crate::pipeline::ruler::Choice;
use crate::result::record::{
    BudgetLine, ByScan, CameraNumber, CameraRecord, DistortionPoint, DriftPoint, DriftRecord,
    Quantity, ScanRecord, SequenceRecord, ShapeQuantity, TransitRecord,
};
use crate::scan::ScanFit;
use crate::shape::REFERENCE_RADIUS_MAS;
use crate::sky::SunPlace;

/// A pull beyond this deserves a word.
const LARGE_PULL: f64 = 3.0;

/// Readout of a usual rolling shutter, whole frame (common practice, no source), s.
const USUAL_READOUT_S: f64 = 0.03;

/// Share of its standard uncertainty by which an unknown readout may change the scale without a word.
const READOUT_WORD: f64 = 0.5;

/// The camera by the Sun's own motion.
pub(super) fn camera(p: &Parts<'_>) -> Option<CameraRecord> {
    let it = p.ruler.camera.as_ref()?;
    let number = |it: &Choice, unit: &str| CameraNumber {
        nominal: Quantity::measured(it.nominal.0, it.nominal.1, unit),
        drift: Quantity::measured(it.drift.0, it.drift.1, unit),
        pull: it.pull,
        used: if it.by_drift { "drift" } else { "nominal" }.to_owned(),
    };
    Some(CameraRecord {
        scale: number(&it.scale, "arcsec/px"),
        angle: number(&it.angle, "deg"),
    })
}

/// The drifts.
pub(super) fn drifts(p: &Parts<'_>) -> Vec<DriftRecord> {
    p.ruler.drifts.iter().map(|it| drift(p, it)).collect()
}

fn drift(p: &Parts<'_>, it: &MeasuredDrift) -> DriftRecord {
    let fit = &it.fit;
    let index = it.measured.index;
    DriftRecord {
        sequence: index,
        frames_used: it.whole,
        frames_at_edge: it.touching,
        scale: Quantity::measured(it.scale.0, it.scale.0 * it.scale.1, "arcsec/px"),
        angle: Quantity::measured(it.angle_deg.0, it.angle_deg.1, "deg"),
        travel_arcsec: fit.travel_arcsec,
        velocity_px_s: [fit.velocity_px_s.0, fit.velocity_px_s.1],
        noise_arcsec: [fit.noise_arcsec.0, fit.noise_arcsec.1],
        correlated_share: fit.correlated.0,
        correlation_time_s: fit.correlated.1,
        independent_frames: fit.independent,
        readout_s: p.given.sequences[index].camera.readout_s,
        scale_by_readout_per_ms: 1e-3 * it.scale_by_readout_per_s,
        distortion: fit
            .distortion
            .iter()
            .map(|it| DistortionPoint {
                along_px: it.along_px,
                frames: it.frames,
                along_mas: it.along_mas,
                along_sigma_mas: it.sigma_mas.0,
                across_mas: it.across_mas,
                across_sigma_mas: it.sigma_mas.1,
            })
            .collect(),
        centres: fit
            .residuals
            .iter()
            .map(|&(along_px, along_mas, across_mas)| DriftPoint {
                along_px,
                along_mas,
                across_mas,
            })
            .collect(),
    }
}

/// The scans.
pub(super) fn scans(p: &Parts<'_>) -> Vec<ScanRecord> {
    p.ruler.scans.iter().map(|it| scan(p, it)).collect()
}

fn scan(p: &Parts<'_>, it: &MeasuredScan) -> ScanRecord {
    let fitted = p.ruler.by_scan.as_ref().and_then(|it| it.as_ref().ok());
    let own = fitted.and_then(|fit| fit.slits.iter().find(|s| s.sequence == it.index));
    let nominal_deg = p.session.sequences[it.index].camera.angle_deg;
    // +y turned from +x towards +y is turned against position angles in the sky's own parity.
    let sign = match p.session.sequences[it.index].camera.parity {
        crate::sky::Parity::Sky => 1.0,
        crate::sky::Parity::Mirrored => -1.0,
    };
    let limb = mean_limb(&it.transits);
    ScanRecord {
        sequence: it.index,
        lines: it.size.0,
        slit_px: it.size.1,
        across_arcsec_s: it.across_arcsec_s,
        oblique_deg: it.oblique_deg,
        slit_angle: own.map_or_else(
            || Quantity::missing("deg", "too few transits"),
            |it| {
                Quantity::measured(
                    nominal_deg + sign * it.turned_rad.to_degrees(),
                    it.sigma_rad.to_degrees(),
                    "deg",
                )
            },
        ),
        transits: it
            .transits
            .iter()
            .map(|it| transit(it, own.map_or(0.0, |it| it.turned_rad)))
            .collect(),
        lost: it
            .lost
            .iter()
            .map(|(k, reason)| format!("transit {k}: {reason}"))
            .collect(),
        limb_angle_deg: limb.iter().map(|it| it.0).collect(),
        limb_mas: limb.iter().map(|it| it.1).collect(),
        limb_sigma_mas: limb.iter().map(|it| it.2).collect(),
    }
}

fn transit(it: &MeasuredTransit, turned_rad: f64) -> TransitRecord {
    let [across, along] = crate::scan::radii_mas(&it.observation, turned_rad);
    let seen_rad = across * crate::units::MAS_RAD / it.sun.distance_au;
    TransitRecord {
        transit: it.transit,
        time_utc: it.utc.to_iso(),
        duration_s: 2.0 * seen_rad / it.across_rad_s,
        across_slit_arcsec: across / 1000.0,
        along_slit_arcsec: along / 1000.0,
    }
}

/// Angle (deg), mean radius minus its own mean, and standard uncertainty by sector, mas.
fn mean_limb(transits: &[MeasuredTransit]) -> Vec<(f64, f64, f64)> {
    let Some(first) = transits.first() else {
        return Vec::new();
    };
    let mas = |it: &MeasuredTransit, s: usize| {
        let sector = &it.limb.sectors[s];
        (sector.flag == crate::limb::Flag::Good).then(|| {
            crate::shape::beyond_reference_mas(
                sector.radius_arcsec * crate::units::ARCSEC_RAD,
                it.sun.distance_au,
            )
        })
    };
    let mut out: Vec<(f64, f64, f64)> = (0..first.limb.sectors.len())
        .filter_map(|s| {
            let all: Vec<f64> = transits.iter().filter_map(|it| mas(it, s)).collect();
            let n = all.len() as f64;
            let mean = all.iter().sum::<f64>() / n;
            let scatter = all.iter().map(|it| (it - mean).powi(2)).sum::<f64>() / (n - 1.0);
            (all.len() > 1).then(|| {
                (
                    first.limb.angle_rad(s).to_degrees(),
                    mean,
                    (scatter / n).sqrt(),
                )
            })
        })
        .collect();
    let mean = out.iter().map(|it| it.1).sum::<f64>() / out.len().max(1) as f64;
    for it in &mut out {
        it.1 -= mean;
    }
    out
}

/// The shape by transits.
pub(super) fn by_scan(p: &Parts<'_>) -> Option<ByScan> {
    let transits = p.ruler.scans.iter().map(|it| it.transits.len()).sum();
    Some(match p.ruler.by_scan.as_ref()? {
        Ok(fit) => by_scan_fit(p, fit, transits),
        Err(reason) => ByScan {
            radius: ShapeQuantity::not_separated("arcsec", reason),
            oblateness: ShapeQuantity::not_separated("mas", reason),
            slit_scale_error: Quantity::missing("1", reason),
            transits,
            scatter_mas: 0.0,
            radius_difference_sigma: None,
            oblateness_difference_sigma: None,
            budget: Vec::new(),
            reason: Some(reason.clone()),
        },
    })
}

fn by_scan_fit(p: &Parts<'_>, fit: &ScanFit, transits: usize) -> ByScan {
    let (random, systematic) = (fit.sigmas_mas(true), fit.sigmas_mas(false));
    // The model of the limb is the frames' own: both routes err by it together.
    let model: [f64; 2] = p.model.lines.iter().fold([0.0; 2], |sum, it| {
        [sum[0] + it.radius_mas2, sum[1] + it.oblateness_mas2]
    });
    let whole = [0, 1].map(|i| (systematic[i].powi(2) + model[i]).sqrt());
    let frames = frames_sigmas_mas(p, model);
    let apart = |difference: f64, i: usize| {
        let sigma = (random[i].powi(2) + systematic[i].powi(2) + frames[i].powi(2)).sqrt();
        Some(difference / sigma).filter(|it| it.is_finite())
    };
    let mas = |it: f64| it / 1000.0;
    let line = |term: &str, radius: f64, oblateness: f64, random: bool, how: &str| BudgetLine {
        term: term.to_owned(),
        sigma_mas: Some(oblateness.sqrt()),
        sigma_radius_mas: radius.sqrt(),
        kind: if random { "random" } else { "systematic" }.to_owned(),
        scope: if random { "burst" } else { "session" }.to_owned(),
        how: how.to_owned(),
    };
    let mut budget: Vec<BudgetLine> = fit
        .contributions
        .iter()
        .map(|it| {
            let how = match it.term {
                "slit scale" => "camera.scale_sigma_rel, or that of a drift",
                "slit angle" => "camera.angle_sigma_deg and the shear of the transits",
                "clock rate" => "time.clock_rate_sigma_ppm",
                "refractivity along the slit" => "the weather's, through the stretch of the slit",
                "Sun's terms not separated" => {
                    "8 mas within 12 (oblateness, for the radius) and 0 within 4 (P4)"
                }
                _ => "scatter of the transits, each with its lines' seeing as it was",
            };
            line(it.term, it.radius_mas2, it.oblateness_mas2, it.random, how)
        })
        .collect();
    budget.extend(p.model.lines.iter().map(|it| {
        line(
            &it.term,
            it.radius_mas2,
            it.oblateness_mas2,
            it.random,
            &it.how,
        )
    }));
    let radius = fit.radius_mas;
    let frames_radius = p.shape.fit.radius_mas() - p.model.radius_bias_mas;
    ByScan {
        radius: quantity(
            mas(radius),
            mas(random[0]),
            mas(whole[0]),
            fit.degrees,
            "arcsec",
        ),
        oblateness: quantity(fit.oblateness_mas, random[1], whole[1], fit.degrees, "mas"),
        slit_scale_error: Quantity::measured(fit.scale.0, fit.scale.1, "1"),
        transits,
        scatter_mas: fit.scatter_mas[0],
        radius_difference_sigma: apart(radius - frames_radius, 0),
        oblateness_difference_sigma: p
            .shape
            .separability
            .oblateness
            .then(|| apart(fit.oblateness_mas - p.shape.fit.oblateness_mas(), 1))
            .flatten(),
        budget,
        reason: None,
    }
}

/// Standard uncertainties of the frames' radius and oblateness without the limb's model.
fn frames_sigmas_mas(p: &Parts<'_>, model: [f64; 2]) -> [f64; 2] {
    let whole = lines(p, &p.shape.fit).fold([0.0; 2], |sum, it| {
        [sum[0] + it.radius_mas2, sum[1] + it.oblateness_mas2]
    });
    [0, 1].map(|i| (whole[i] - model[i]).max(0.0).sqrt())
}

/// Rows of the table of sequences.
pub(super) fn sequences(p: &Parts<'_>) -> Vec<SequenceRecord> {
    let row = |index: usize, kind: &str, times: [String; 2], sun: &SunPlace| SequenceRecord {
        sequence: index,
        kind: kind.to_owned(),
        time_utc: times,
        roll_deg: p.given.sequences[index].roll_deg,
        frames_read: 0,
        frames_used: 0,
        zenith_true_deg: sun.zenith_true_rad.to_degrees(),
        parallactic_deg: sun.parallactic_rad.to_degrees(),
        axis_deg: sun.axis_rad.to_degrees(),
        b0_deg: sun.b0_rad.to_degrees(),
        distance_au: sun.distance_au,
        r0: Quantity::missing("m", "not from a Sun that drifts"),
        radius: Quantity::missing("arcsec", "a drift measures scale and angle"),
        harmonics: Vec::new(),
        set_aside: None,
    };
    let drifts = p.ruler.drifts.iter().map(|it| {
        let m = &it.measured;
        let times = [&m.frames[0], &m.frames[m.frames.len() - 1]].map(|it| it.utc.to_iso());
        SequenceRecord {
            frames_read: m.frames.len() + m.lost.len(),
            frames_used: it.whole,
            ..row(m.index, "drift", times, &m.middle.sun)
        }
    });
    let scans = p.ruler.scans.iter().map(|it| {
        let (first, last) = (&it.transits[0], &it.transits[it.transits.len() - 1]);
        let means: Vec<f64> = it
            .transits
            .iter()
            .map(|it| it.observation.harmonics_mas[0])
            .collect();
        let n = means.len() as f64;
        let mean = means.iter().sum::<f64>() / n;
        let scatter = means.iter().map(|it| (it - mean).powi(2)).sum::<f64>() / (n - 1.0);
        SequenceRecord {
            frames_read: it.transits.len() + it.lost.len(),
            frames_used: it.transits.len(),
            radius: if means.len() > 1 {
                Quantity::measured(
                    (REFERENCE_RADIUS_MAS + mean) / 1000.0,
                    (scatter / n).sqrt() / 1000.0,
                    "arcsec",
                )
            } else {
                Quantity::missing("arcsec", "one transit has no scatter")
            },
            ..row(
                it.index,
                "scan",
                [first.utc.to_iso(), last.utc.to_iso()],
                &first.sun,
            )
        }
    });
    drifts.chain(scans).collect()
}

/// What a reader should know, each with its code.
pub(super) fn cautions(p: &Parts<'_>) -> Vec<(&'static str, String)> {
    let mut out = Vec::new();
    if let Some(camera) = &p.ruler.camera {
        for (name, it) in [
            ("plate scale", &camera.scale),
            ("camera angle", &camera.angle),
        ] {
            if it.pull.abs() > LARGE_PULL {
                out.push((
                    "drift-pull",
                    format!(
                        "the {name} by drift is {:.1} standard uncertainties from the session's: one of the two is not what it is said to be",
                        it.pull
                    ),
                ));
            }
            if it.excess > 2.0 {
                out.push((
                    "drift-scatter",
                    format!(
                        "the drifts' values of the {name} scatter {:.1} times more than they say; the error is enlarged by that",
                        it.excess
                    ),
                ));
            }
        }
    }
    for it in &p.ruler.drifts {
        let name = it.measured.index + 1;
        let unknown = p.given.sequences[it.measured.index]
            .camera
            .readout_s
            .is_none();
        let change = it.scale_by_readout_per_s.abs() * USUAL_READOUT_S;
        if unknown && change > READOUT_WORD * it.scale.1 {
            out.push((
                "drift-readout",
                format!(
                    "sequence {name}: camera.readout_s is not given; if the shutter rolls, each 10 ms of readout change the scale by {:.1e} of itself, which is known to {:.1e}; state it (0 for a global shutter)",
                    it.scale_by_readout_per_s.abs() * 0.01,
                    it.scale.1
                ),
            ));
        }
        if it.touching > 0 || !it.measured.lost.is_empty() {
            let first = it
                .measured
                .lost
                .first()
                .map_or(String::new(), |it| format!(" (the first: {})", it.detail));
            out.push((
                "drift-frames",
                format!(
                    "sequence {name}: {} frames show the disk at the edge of the field and {} have no limb{first}; the other {} give scale and angle",
                    it.touching,
                    it.measured.lost.len(),
                    it.whole
                ),
            ));
        }
    }
    for it in &p.ruler.scans {
        if let Some((k, reason)) = it.lost.first() {
            out.push((
                "transits-lost",
                format!(
                    "sequence {}: {} transits have no limb; the first, number {k}: {reason}",
                    it.index + 1,
                    it.lost.len()
                ),
            ));
        }
    }
    out
}
