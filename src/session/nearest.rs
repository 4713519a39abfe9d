//! The nearest known name to one that is not known.

use super::fault::{FaultKind, Finding};
use super::keys::{Form, Table};
use super::tables::SESSION;

/// The nearest of the names, if any is near enough to have been meant.
pub(crate) fn of<'a>(name: &str, names: impl Iterator<Item = &'a str>) -> Option<&'a str> {
    let name = name.to_lowercase();
    let allowed = (name.chars().count() / 3).max(1);
    names
        .map(|known| {
            let lower = known.to_lowercase();
            let steps = strsim::damerau_levenshtein(&name, &lower);
            (steps, strsim::jaro_winkler(&name, &lower), known)
        })
        .filter(|(steps, alike, _)| *steps <= allowed || *alike > 0.88)
        .min_by(|a, b| a.0.cmp(&b.0).then(b.1.total_cmp(&a.1)))
        .map(|(_, _, known)| known)
}

/// The finding for a key that a table does not know.
pub(super) fn unknown(name: &str, spec: &Table) -> Finding {
    let names = || spec.keys.iter().map(|key| key.name);
    let cure = if let Some(known) = of(name, names()) {
        format!("did you mean `{known}`?")
    } else if let Some(home) = home_of(name) {
        format!("`{name}` belongs in [{home}]")
    } else {
        "take it out, or look up the key's name with `truelimb schema`".to_owned()
    };
    let allowed = names().collect::<Vec<_>>().join(", ");
    Finding::new(FaultKind::UnknownKey, format!("`{name}`"), allowed, cure)
}

/// The table that has a key of exactly that name.
fn home_of(name: &str) -> Option<&'static str> {
    SESSION
        .keys
        .iter()
        .filter(|key| key.name != "headers")
        .find_map(|key| match key.form {
            Form::Table(spec) | Form::Tables(spec) => spec.key(name).map(|_| key.name),
            _ => None,
        })
}
