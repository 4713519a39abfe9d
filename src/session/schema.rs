//! A JSON Schema (2020-12) of the session file, made from the table of keys.

use serde_json::{Map, Value, json};

use super::keys::{Absent, Form, Key, Table};
use super::tables::SESSION;

/// The schema, for editors and for other programs that write sessions.
///
/// A file that stands on a `base`, or whose frames' headers answer, may leave keys out that the
/// schema could not know of; so what is needed is said in words and is checked on reading.
pub fn schema() -> Value {
    let mut schema = json!({
        "$schema": "https://json-schema.org/draft/2020-12/schema",
        "title": "truelimb session",
    });
    merge(&mut schema, table(&SESSION));
    schema
}

fn table(spec: &Table) -> Value {
    let properties: Map<String, Value> = spec
        .keys
        .iter()
        .map(|key| (key.name.to_owned(), property(key)))
        .collect();
    let mut schema = json!({
        "type": "object",
        "description": spec.doc,
        "additionalProperties": false,
        "properties": properties,
    });
    let pairs = spec.excludes.iter().flat_map(|(one, other)| {
        one.iter()
            .flat_map(move |a| other.iter().map(move |b| (*a, *b)))
    });
    // `none = false` says nothing, so a flag excludes only where it is true.
    let named = |name: &str| match spec.key(name).map(|key| key.form) {
        Some(Form::Flag) => {
            json!({ "required": [name], "properties": { name: { "const": true } } })
        }
        _ => json!({ "required": [name] }),
    };
    let excluded: Vec<Value> = pairs
        .map(|(a, b)| json!({ "not": { "allOf": [named(a), named(b)] } }))
        .collect();
    if !excluded.is_empty() {
        merge(&mut schema, json!({ "allOf": excluded }));
    }
    schema
}

fn property(key: &Key) -> Value {
    let text = || json!({ "type": "string", "minLength": 1 });
    let mut schema = match key.form {
        Form::Number {
            unit,
            low,
            high,
            above_low,
        } => {
            let bound = if above_low {
                "exclusiveMinimum"
            } else {
                "minimum"
            };
            let mut number = json!({ "type": "number", bound: low, "maximum": high });
            if !unit.is_empty() {
                merge(&mut number, json!({ "x-unit": unit }));
            }
            number
        }
        Form::Whole { low, high } => json!({ "type": "integer", "minimum": low, "maximum": high }),
        Form::Flag => json!({ "type": "boolean" }),
        Form::Text | Form::File => text(),
        Form::Keyword => json!({
            "type": "string",
            "pattern": "^([A-Z0-9_-]{1,8}|HIERARCH [!-<>-~ ]{1,60})$",
        }),
        Form::Choice(words) => json!({ "enum": words }),
        Form::Files | Form::Texts => json!({ "type": "array", "items": text() }),
        Form::Table(spec) => table(spec),
        Form::Tables(spec) => json!({ "type": "array", "items": table(spec) }),
    };
    let mut doc = key.doc.to_owned();
    match key.absent {
        Absent::Number(value) => merge(&mut schema, json!({ "default": value })),
        Absent::Whole(value) => merge(&mut schema, json!({ "default": value })),
        Absent::Word(word) => merge(&mut schema, json!({ "default": word })),
        Absent::Required => doc.push_str(" Needed."),
        Absent::Open => {}
    }
    if !key.keywords.is_empty() {
        doc.push_str(" Without it the header is asked: ");
        doc.push_str(&key.keywords.join(", "));
        doc.push('.');
    }
    merge(&mut schema, json!({ "description": doc }));
    schema
}

/// Adds the members of one object to another.
fn merge(into: &mut Value, from: Value) {
    if let (Value::Object(into), Value::Object(from)) = (into, from) {
        into.extend(from);
    }
}
