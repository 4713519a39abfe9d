//! Small tables as ECSV 1.0: text that people read and that keeps units.
//!
//! Numbers are written with the fewest digits that read back as the same double; a gap is an
//! empty field.

use std::fmt::Write as _;
use std::path::Path;

use super::card::Value;
use super::column::{self, Column, Values};
use super::error::FitsError;
use super::write::write_whole;

/// Writes `columns` to `path`, with `facts` about the whole table in its head.
///
/// # Errors
///
/// [`FitsError`] when a column is malformed or the disk refuses.
pub fn write_ecsv(
    path: &Path,
    columns: &[Column],
    facts: &[(String, Value)],
) -> Result<(), FitsError> {
    write_whole(path, ecsv_text(path, columns, facts)?.as_bytes())
}

/// The text of the table; `path` only serves errors.
///
/// # Errors
///
/// [`FitsError::Unwritable`] when a column is malformed.
pub fn ecsv_text(
    path: &Path,
    columns: &[Column],
    facts: &[(String, Value)],
) -> Result<String, FitsError> {
    if let Some((what, reason)) = column::fault(columns, false) {
        return Err(FitsError::unwritable(path, &what, reason));
    }
    if columns.is_empty() {
        return Err(FitsError::unwritable(path, "table", "it has no columns"));
    }
    let mut out = String::from("# %ECSV 1.0\n# ---\n# delimiter: ','\n# datatype:\n");
    for it in columns {
        let _ = write!(out, "# - {{name: {}", yaml(&it.name));
        if let Some(unit) = &it.unit {
            let _ = write!(out, ", unit: {}", yaml(unit));
        }
        let _ = write!(out, ", datatype: {}", datatype(&it.values));
        if let Some(description) = &it.description {
            let _ = write!(out, ", description: {}", yaml(description));
        }
        if let Some(ucd) = &it.ucd {
            let _ = write!(out, ", meta: {{ucd: {}}}", yaml(ucd));
        }
        out.push_str("}\n");
    }
    if !facts.is_empty() {
        out.push_str("# meta: !!omap\n");
        for (name, value) in facts {
            let value = match value {
                Value::Text(it) => yaml(it),
                Value::Real(it) if it.is_nan() => ".nan".to_owned(),
                Value::Real(it) if it.is_infinite() => {
                    if *it > 0.0 { ".inf" } else { "-.inf" }.to_owned()
                }
                Value::Real(it) => yaml_number(*it),
                Value::Integer(it) => it.to_string(),
                Value::Logical(it) => it.to_string(),
            };
            let _ = writeln!(out, "# - {{{}: {value}}}", yaml(name));
        }
    }
    out.push_str("# schema: astropy-2.0\n");
    let names: Vec<&str> = columns.iter().map(|it| it.name.as_str()).collect();
    out.push_str(&names.join(","));
    out.push('\n');
    for row in 0..columns[0].values.len() {
        for (index, it) in columns.iter().enumerate() {
            if index > 0 {
                out.push(',');
            }
            field(&mut out, &it.values, row, columns.len() == 1);
        }
        out.push('\n');
    }
    Ok(out)
}

fn datatype(values: &Values) -> &'static str {
    match values {
        Values::F64(_) | Values::Gaps(_) => "float64",
        Values::F32(_) => "float32",
        Values::I32(_) => "int32",
        Values::I64(_) => "int64",
        Values::U8(_) => "uint8",
        Values::Text(_) => "string",
    }
}

/// A quoted YAML text on one line.
fn yaml(text: &str) -> String {
    let mut out = String::from("\"");
    for it in text.chars() {
        match it {
            '"' => out.push_str("\\\""),
            '\\' => out.push_str("\\\\"),
            '\n' => out.push_str("\\n"),
            '\t' => out.push_str("\\t"),
            '\r' => out.push_str("\\r"),
            it if it.is_control() => {
                let _ = write!(out, "\\u{:04x}", u32::from(it));
            }
            it => out.push(it),
        }
    }
    out.push('"');
    out
}

/// YAML 1.1 takes `1e-7` for a text: a number needs a point, and its exponent a sign.
fn yaml_number(value: f64) -> String {
    let text = format!("{value:?}");
    let Some((digits, power)) = text.split_once('e') else {
        return text;
    };
    let point = if digits.contains('.') { "" } else { ".0" };
    let sign = if power.starts_with('-') { "" } else { "+" };
    format!("{digits}{point}e{sign}{power}")
}

fn field(out: &mut String, values: &Values, row: usize, is_alone: bool) {
    let mut real = |it: f64| {
        if it.is_infinite() {
            out.push_str(if it > 0.0 { "inf" } else { "-inf" });
        } else if it.is_nan() {
            out.push_str("nan");
        } else {
            let _ = write!(out, "{it:?}");
        }
    };
    match values {
        Values::F64(it) => real(it[row]),
        Values::Gaps(it) => match it[row] {
            Some(value) => real(value),
            // An empty line would be skipped by readers.
            None if is_alone => out.push_str("\"\""),
            None => {}
        },
        Values::F32(it) if it[row].is_finite() => {
            let _ = write!(out, "{:?}", it[row]);
        }
        Values::F32(it) => real(f64::from(it[row])),
        Values::I32(it) => {
            let _ = write!(out, "{}", it[row]);
        }
        Values::I64(it) => {
            let _ = write!(out, "{}", it[row]);
        }
        Values::U8(it) => {
            let _ = write!(out, "{}", it[row]);
        }
        Values::Text(it) => {
            let text = &it[row];
            let plain = !text.is_empty()
                && !text.starts_with([' ', '#'])
                && !text.ends_with(' ')
                && !text.contains([',', '"', '\n', '\r']);
            if plain {
                out.push_str(text);
            } else {
                let _ = write!(out, "\"{}\"", text.replace('"', "\"\""));
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    // ECSV 1.0 (Astropy Proposal for Enhancement 6): head, quoting, empty field for a gap.
    #[test]
    fn a_table_as_the_proposal_writes_it() {
        let columns = [
            Column::new("time", Values::F64(vec![0.1, 1e-7]))
                .unit("s")
                .ucd("time.epoch"),
            Column::new("sigma", Values::Gaps(vec![None, Some(2.5)])).describe("a \"b\": c"),
            Column::new("note", Values::Text(vec!["x,y".into(), "plain".into()])),
        ];
        let facts = [("frames".to_owned(), Value::Integer(7))];
        let text = ecsv_text(Path::new("t.ecsv"), &columns, &facts).unwrap();
        let expected = "# %ECSV 1.0\n# ---\n# delimiter: ','\n# datatype:\n\
            # - {name: \"time\", unit: \"s\", datatype: float64, meta: {ucd: \"time.epoch\"}}\n\
            # - {name: \"sigma\", datatype: float64, description: \"a \\\"b\\\": c\"}\n\
            # - {name: \"note\", datatype: string}\n\
            # meta: !!omap\n# - {\"frames\": 7}\n# schema: astropy-2.0\n\
            time,sigma,note\n0.1,,\"x,y\"\n1e-7,2.5,plain\n";
        assert_eq!(text, expected);
    }

    #[test]
    fn columns_of_unequal_length_are_refused() {
        let columns = [
            Column::new("a", Values::I32(vec![1, 2])),
            Column::new("b", Values::I32(vec![1])),
        ];
        assert!(ecsv_text(Path::new("t.ecsv"), &columns, &[]).is_err());
    }
}
