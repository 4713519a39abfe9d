//! A JSON Schema (2020-12) of `result.json`, made from the records themselves, so that neither can
//! change without the other.

use schemars::generate::SchemaSettings;
use serde_json::{Value, json};

use super::record::{Record, SCHEMA_VERSION};

/// The schema of `result.json`, for programs that read results.
///
/// It says what is written: a key is required where the program always writes it, and a number that
/// may be missing is `null`. Names beside those of the schema are allowed, as later versions add
/// some.
pub fn schema() -> Value {
    let generator = SchemaSettings::draft2020_12()
        .for_serialize()
        .into_generator();
    let mut schema = json!({
        "$schema": "https://json-schema.org/draft/2020-12/schema",
        "title": "truelimb result",
    });
    let made = generator.into_root_schema_for::<Record>().to_value();
    if let (Value::Object(into), Value::Object(made)) = (&mut schema, made) {
        for (name, member) in made {
            into.entry(name).or_insert(member);
        }
    }
    if let Some(version) = schema.pointer_mut("/properties/schema_version") {
        version["const"] = json!(SCHEMA_VERSION);
    }
    schema
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_name_is_explained() {
        // What a reader cannot look up here, no one can: each member carries its sentence.
        fn unexplained(schema: &Value, place: &str, found: &mut Vec<String>) {
            let Some(members) = schema.get("properties").and_then(Value::as_object) else {
                return;
            };
            for (name, member) in members {
                if member.get("description").is_none() {
                    found.push(format!("{place}.{name}"));
                }
            }
        }
        let schema = schema();
        let mut found = Vec::new();
        unexplained(&schema, "result", &mut found);
        let definitions = schema["$defs"].as_object().unwrap();
        assert!(definitions.len() > 20, "{}", definitions.len());
        for (name, it) in definitions {
            unexplained(it, name, &mut found);
        }
        assert!(found.is_empty(), "{found:?}");
    }
}
