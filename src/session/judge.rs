//! Whether one value fits its key.

use super::document::{Node, Place, Value};
use super::fault::{FaultKind, Finding};
use super::keys::{Form, Key};
use super::nearest;
use super::source::{Source, shortened};

/// A value that fits.
#[derive(Clone, Debug, PartialEq)]
pub(super) enum Judged {
    Number(f64),
    Whole(i64),
    Flag,
    Text(String),
    Texts(Vec<String>),
}

/// The value, or where and why it does not fit.
pub(super) fn judge(
    node: &Node,
    key: &Key,
    sources: &[Source],
) -> Result<Judged, (Place, Finding)> {
    let found = sources[node.place.source].snippet(&node.place.span);
    let here = |finding: Finding| (node.place.clone(), finding);
    match (key.form, &node.value) {
        (Form::Number { .. }, Value::Float(value)) => number_in_range(*value, key, &found)
            .map(Judged::Number)
            .map_err(here),
        (Form::Number { .. }, Value::Whole(Some(value))) => {
            number_in_range(*value as f64, key, &found)
                .map(Judged::Number)
                .map_err(here)
        }
        (Form::Whole { low, high }, Value::Whole(value)) => match value {
            Some(value) if (low..=high).contains(value) => Ok(Judged::Whole(*value)),
            _ => Err(here(out_of_range(&found, key))),
        },
        (Form::Number { .. }, Value::Whole(None)) => Err(here(out_of_range(&found, key))),
        (Form::Flag, Value::Flag(_)) => Ok(Judged::Flag),
        (Form::Text | Form::File, Value::Text(text)) => {
            if text.trim().is_empty() || text.contains('\0') {
                return Err(here(out_of_range(&found, key)));
            }
            Ok(Judged::Text(text.clone()))
        }
        (Form::Keyword, Value::Text(text)) => {
            if is_keyword(text) {
                return Ok(Judged::Text(text.clone()));
            }
            let mut finding = out_of_range(&found, key);
            if is_keyword(&text.to_uppercase()) {
                finding.cure = format!("write \"{}\"", text.to_uppercase());
            }
            Err(here(finding))
        }
        (Form::Choice(words), Value::Text(text)) => {
            if words.contains(&text.as_str()) {
                return Ok(Judged::Text(text.clone()));
            }
            let mut finding = out_of_range(&found, key);
            if let Some(word) = nearest::of(text, words.iter().copied()) {
                finding.cure = format!("did you mean \"{word}\"?");
            }
            Err(here(finding))
        }
        (Form::Files | Form::Texts, Value::List(items)) => texts(items, key, sources),
        (Form::Files | Form::Texts, Value::Text(text)) => {
            let cure = format!("write {} = [\"{}\"]", key.name, shortened(text));
            Err(here(wrong_type(node, &found, key, cure)))
        }
        (Form::Number { .. }, Value::Text(text)) => Err(here(wrong_type(
            node,
            &found,
            key,
            cure_of_quoted_number(text),
        ))),
        (
            Form::Text | Form::File | Form::Choice(_) | Form::Keyword,
            Value::Whole(_) | Value::Float(_) | Value::Flag(_),
        ) => {
            let cure = format!("put it in quotes: \"{found}\"");
            Err(here(wrong_type(node, &found, key, cure)))
        }
        _ => Err(here(wrong_type(node, &found, key, String::new()))),
    }
}

/// The number, if it is finite and in the key's range.
pub(super) fn number_in_range(value: f64, key: &Key, found: &str) -> Result<f64, Finding> {
    match key.form {
        Form::Number {
            low,
            high,
            above_low,
            ..
        } if value.is_finite()
            && value <= high
            && (if above_low { value > low } else { value >= low }) =>
        {
            Ok(value)
        }
        _ => Err(out_of_range(found, key)),
    }
}

/// A list of texts that are not empty.
fn texts(items: &[Node], key: &Key, sources: &[Source]) -> Result<Judged, (Place, Finding)> {
    let mut texts = Vec::with_capacity(items.len());
    for item in items {
        let found = sources[item.place.source].snippet(&item.place.span);
        match &item.value {
            Value::Text(text) if !text.trim().is_empty() && !text.contains('\0') => {
                texts.push(text.clone());
            }
            Value::Text(_) => return Err((item.place.clone(), out_of_range(&found, key))),
            _ => {
                return Err((
                    item.place.clone(),
                    wrong_type(item, &found, key, String::new()),
                ));
            }
        }
    }
    Ok(Judged::Texts(texts))
}

/// The finding for a value outside its range.
fn out_of_range(found: &str, key: &Key) -> Finding {
    Finding::new(
        FaultKind::OutOfRange,
        found,
        key.form.allowed(),
        format!("`{}`: {}", key.name, key.doc),
    )
}

/// The finding for a value of another type.
fn wrong_type(node: &Node, found: &str, key: &Key, cure: String) -> Finding {
    let cure = if cure.is_empty() {
        format!("`{}`: {}", key.name, key.doc)
    } else {
        cure
    };
    Finding::new(
        FaultKind::WrongType,
        format!("{found} ({})", node.value.type_words()),
        key.form.allowed(),
        cure,
    )
}

/// What to write in place of a number in quotes.
fn cure_of_quoted_number(text: &str) -> String {
    let bare = text.trim();
    if bare.parse::<f64>().is_ok_and(f64::is_finite) {
        return format!("take off the quotes: {bare}");
    }
    let parts: Option<Vec<f64>> = bare.split([':', ' ']).map(|it| it.parse().ok()).collect();
    match parts.as_deref() {
        Some([degrees, minutes, rest @ ..]) if rest.len() < 2 => {
            let sign = if bare.starts_with('-') { -1.0 } else { 1.0 };
            let seconds = rest.first().copied().unwrap_or(0.0);
            let decimal = sign * (degrees.abs() + minutes / 60.0 + seconds / 3600.0);
            format!("write it as a decimal number: {decimal:.6}")
        }
        _ => "write a plain number, without unit or quotes".to_owned(),
    }
}

/// Whether a text can be a keyword of a FITS header.
fn is_keyword(text: &str) -> bool {
    let allowed = |c: char| c.is_ascii_uppercase() || c.is_ascii_digit() || c == '-' || c == '_';
    match text.strip_prefix("HIERARCH ") {
        Some(name) => {
            (1..=60).contains(&name.len())
                && name
                    .chars()
                    .all(|c| c.is_ascii_graphic() && c != '=' || c == ' ')
        }
        None => (1..=8).contains(&text.len()) && text.chars().all(allowed),
    }
}
