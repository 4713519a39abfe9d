//! What the reader of a result should be warned of.

use super::shape::why_not;
use super::{Parts, lines};
use crate::result::record::WarningRecord;

/// Standard uncertainty by the refractivity formula above which its range deserves a word, mas of
/// oblateness and of radius.
const FORMULA_WORD_MAS: [f64; 2] = [0.1, 1.0];

/// Whether the uncertainty of the refractivity formula is large enough to deserve a word.
fn formula_weighs(p: &Parts<'_>) -> bool {
    lines(p, &p.shape.fit)
        .filter(|it| it.term == "refractivity formula")
        .any(|it| {
            it.oblateness_mas2.sqrt() > FORMULA_WORD_MAS[0]
                || it.radius_mas2.sqrt() > FORMULA_WORD_MAS[1]
        })
}

/// Zenith distances above these deserve a word.
const CAUTION_DEG: [f64; 2] = [60.0, 70.0];

/// Chance below which a slope of the shape against the kept fraction deserves a word.
const SLOPE_CHANCE: f64 = 0.01;

/// What is said of slopes of the shape against the kept fraction that chance does not explain.
fn slopes(p: &Parts<'_>) -> Vec<String> {
    let slope = &p.shape.slope;
    [("oblateness", &slope.oblateness), ("radius", &slope.radius)]
        .into_iter()
        .filter_map(|(name, test)| Some((name, test.as_ref()?)))
        .filter(|(_, it)| it.chance < SLOPE_CHANCE)
        .map(|(name, it)| {
            format!(
                "the {name} runs with the kept fraction by {:.1} +- {:.1} mas from none to all of the frames ({:+.1} sigma): something that goes with the sharpness moves the limb, and the answer depends on which frames are kept",
                it.slope_mas, it.sigma_mas, it.pull
            )
        })
        .collect()
}

/// All warnings, each once.
pub(super) fn records(p: &Parts<'_>) -> Vec<WarningRecord> {
    let mut out: Vec<WarningRecord> = Vec::new();
    let mut say = |code: &str, text: String| {
        let it = WarningRecord {
            code: code.to_owned(),
            text,
        };
        if !out.contains(&it) {
            out.push(it);
        }
    };
    for m in p.measured {
        let zenith = m.middle.sun.zenith_true_rad.to_degrees();
        let name = m.index + 1;
        if let Some(reason) = &m.set_aside {
            say(
                "set-aside",
                format!("sequence {name} does not go to the shape: {reason}"),
            );
        } else if m.middle.map.is_some() && zenith > CAUTION_DEG[1] {
            say(
                "zenith-strong",
                format!(
                    "sequence {name} was observed at {zenith:.1} deg from the zenith; above 70 deg errors of the weather weigh heavily on the shape"
                ),
            );
        } else if m.middle.map.is_some() && zenith > CAUTION_DEG[0] {
            say(
                "zenith-caution",
                format!(
                    "sequence {name} was observed at {zenith:.1} deg from the zenith; below 60 deg refraction is easier to know"
                ),
            );
        }
        if let Some(note) = &m.weather_note {
            say("weather", format!("sequence {name}: {note}"));
        }
        // The air changes little from sequence to sequence: once is enough.
        if let Some(it) = m.conditions.filter(|_| m.index == p.measured[0].index) {
            let formula = p.session.refractivity.formula;
            let nm = m.setup.optics.wavelength_nm;
            for it in crate::air::refractivity_warnings(&it, nm, formula) {
                // Every mountain lies outside the stated range of pressure: the budget has its line, and
                // a word is due where that line weighs.
                let of_pressure = matches!(it, crate::air::AirWarning::Pressure { .. });
                if !of_pressure || formula_weighs(p) {
                    say("refractivity", it.to_string());
                }
            }
        }
        if !m.lost.is_empty() {
            say(
                "frames-lost",
                format!(
                    "sequence {name}: {} frames have no limb; the first: {}",
                    m.lost.len(),
                    m.lost[0].detail
                ),
            );
        }
    }
    if let Some(log) = &p.session.environment {
        for name in &log.columns {
            if !p.known.drivers.iter().any(|it| it.name == *name) {
                say(
                    "environment-constant",
                    format!("the reading {name} is the same in all frames: nothing can go with it"),
                );
            }
        }
    }
    if p.measured
        .iter()
        .any(|it| it.saved_mask.iter().flatten().any(|it| *it))
    {
        say(
            "limbs-masked",
            "sectors that the run which measured the limbs left out stay out; its result says why"
                .to_owned(),
        );
    }
    if p.measured.iter().any(|it| it.elsewhere) {
        say(
            "limbs-elsewhere",
            "limbs of another program are in the fit: which edge it calls the limb, and how blur moves it, is not in the error of the radius"
                .to_owned(),
        );
    }
    for (index, reason) in p.set_aside {
        say(
            "set-aside",
            format!("sequence {} was not reduced: {reason}", index + 1),
        );
    }
    for (code, text) in super::ruler::cautions(p) {
        say(code, text);
    }
    if let crate::session::WeatherSource::Log(log) = &p.session.weather.source {
        for note in log.notes() {
            say("weather", note.to_string());
        }
    }
    if let Ok(it) = &p.seeing.motion {
        for text in &it.warnings {
            say("seeing", text.clone());
        }
    }
    for (code, text) in &p.seeing.warnings {
        say(code, text.clone());
    }
    if p.shape.fit.excess > 1.0 {
        say(
            "excess-scatter",
            format!(
                "the sequences scatter {:.2} times more than their frames say; the errors are enlarged by that",
                p.shape.fit.excess.sqrt()
            ),
        );
    }
    if p.shape.converged() == Some(false) {
        say(
            "not-converged",
            "the scatter of batches of frames still grows with their length: slow air or a drift; the random error is a lower limit, and more time, not more frames, is needed".to_owned(),
        );
    }
    for text in slopes(p) {
        say("kept-slope", text);
    }
    if p.masking.structures_left_in > 0 {
        say(
            "structure-left-in",
            format!(
                "{} structures at the limb were found and not left out, so that enough of it remains; the weaker ones stayed in",
                p.masking.structures_left_in
            ),
        );
    }
    if !p.shape.separability.oblateness {
        say("not-separated", why_not(p, "the oblateness"));
    }
    out
}
