//! The record of the selection of frames, and the lines of the budget.

use super::{Parts, lines};
use crate::result::record::{BudgetLine, Rejection, SelectionRecord};

/// Which frames were used, and why the others were not.
pub(super) fn record(p: &Parts<'_>) -> SelectionRecord {
    let read = p
        .measured
        .iter()
        .map(|it| it.frames.len() + it.lost.len())
        .sum();
    let used = p.shape.observations.len();
    let mut rejected: Vec<Rejection> = Vec::new();
    let mut count = |reason: &str, frames: usize| {
        if frames == 0 {
            return;
        }
        match rejected.iter_mut().find(|it| it.reason == reason) {
            Some(it) => it.frames += frames,
            None => rejected.push(Rejection {
                reason: reason.to_owned(),
                frames,
            }),
        }
    };
    for (sequence, corrected) in p.measured.iter().zip(p.limbs) {
        for it in &sequence.lost {
            count(it.reason, 1);
        }
        count("too many gaps in the limb", corrected.gaps.len());
        if sequence.set_aside.is_some() {
            count("sequence set aside", corrected.frames.len());
        }
    }
    count(
        "less sharp than the kept fraction",
        p.selected.observations.len() - used,
    );
    SelectionRecord {
        read,
        usable: p.selected.observations.len(),
        used,
        rejected,
        kept_fraction: p.shape.fraction,
        criterion: "sharpness: mean blur of the limb's sectors; weights by the power of harmonics m >= 5".to_owned(),
        blind_to_shape: "blur holds no positions, and harmonics of m >= 5 are independent of those of the shape (m = 0, 2, 4) in isotropic turbulence".to_owned(),
        gain: p.shape.gain,
        sigma_all_and_kept_mas: p
            .shape
            .separability
            .oblateness
            .then_some(p.shape.sigma_all_and_kept_mas),
        weighting_gain: p.shape.weighting_gain,
    }
}

/// The lines of the budget as the result states them.
pub(super) fn budget_lines(p: &Parts<'_>) -> Vec<BudgetLine> {
    let separated = p.shape.separability.oblateness;
    lines(p, &p.shape.fit)
        .map(|it| BudgetLine {
            term: it.term.clone(),
            sigma_mas: separated.then(|| it.oblateness_mas2.sqrt()),
            sigma_radius_mas: it.radius_mas2.sqrt(),
            kind: if it.random { "random" } else { "systematic" }.to_owned(),
            scope: it.scope.to_owned(),
            how: ruler_how(p, &it.term).unwrap_or_else(|| it.how.clone()),
        })
        .collect()
}

/// How scale and angle were obtained where a drift gave them.
fn ruler_how(p: &Parts<'_>, term: &str) -> Option<String> {
    let camera = p.ruler.camera.as_ref()?;
    let drifts = match p.ruler.drifts.len() {
        1 => "1 drift".to_owned(),
        n => format!("{n} drifts"),
    };
    match term {
        "plate scale" if camera.scale.by_drift => {
            Some(format!("the Sun's own motion through the field, {drifts}"))
        }
        "camera angle" if camera.angle.by_drift => Some(format!(
            "the Sun's own motion through the field, {drifts}, through the correction for refraction"
        )),
        _ => None,
    }
}
