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
    if p.shape.fit.excess > 1.0 {
        say(
            "excess-scatter",
            format!(
                "the sequences scatter {:.2} times more than their frames say; the errors are enlarged by that",
                p.shape.fit.excess.sqrt()
            ),
        );
    }
    if !p.shape.separability.oblateness {
        say("not-separated", why_not(p, "the oblateness"));
    }
    out
}
