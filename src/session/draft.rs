//! A session file before it is whole: every key with its meaning, what is known filled in, what is
//! needed marked. Made from the same table of keys as reader and schema.

use std::collections::BTreeMap;
use std::fmt::Write as _;

use super::keys::{Absent, Form, Key, Table};
use super::tables::SESSION;

/// A number of the session that the header of a frame may answer.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Sought {
    /// Path of the key, such as `camera.gain_e_adu`.
    pub key: String,
    /// Keywords that answer for it, the first that is there.
    pub keywords: Vec<String>,
    /// Whether a session without it is refused.
    pub is_needed: bool,
    /// What is allowed, with the unit.
    pub allowed: String,
    /// What it means.
    pub meaning: String,
}

/// What is known before a session file is written.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Draft {
    /// Values by the path of their key, as TOML, and where each comes from.
    pub known: BTreeMap<String, (String, String)>,
    /// The sequences.
    pub sequences: Vec<DraftSequence>,
}

/// A sequence of a [`Draft`].
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct DraftSequence {
    /// Kind, as in the session file.
    pub kind: String,
    /// Paths or patterns.
    pub files: Vec<String>,
    /// What is in it, for the reader.
    pub note: String,
}

/// Tables that a draft starts with, in this order; the others are for those who need them.
const SHOWN: [&str; 8] = [
    "site",
    "telescope",
    "filter",
    "camera",
    "instrument",
    "calibration",
    "weather",
    "refractivity",
];

/// Keys that stand for others and would only confuse beside them.
const ADVANCED: [&str; 4] = ["curve", "none", "columns", "profile"];

/// Everything that a session needs or that a header may answer.
pub fn sought() -> Vec<Sought> {
    let mut found = Vec::new();
    for (name, table) in shown() {
        for key in table.keys {
            let needed = is_needed(table, key);
            if needed || !key.keywords.is_empty() {
                found.push(Sought {
                    key: format!("{name}.{}", key.name),
                    keywords: key.keywords.iter().map(|it| (*it).to_owned()).collect(),
                    is_needed: needed,
                    allowed: key.form.allowed(),
                    meaning: key.doc.to_owned(),
                });
            }
        }
    }
    found
}

fn shown() -> impl Iterator<Item = (&'static str, &'static Table)> {
    SHOWN
        .iter()
        .filter_map(|name| match SESSION.key(name)?.form {
            Form::Table(table) => Some((*name, table)),
            _ => None,
        })
}

/// Whether a table without this key is refused: it says so itself, or it is the first of those of
/// which one is needed, or stands with that one.
fn is_needed(table: &Table, key: &Key) -> bool {
    let first = table.one_of.first().copied();
    matches!(key.absent, Absent::Required)
        || first == Some(key.name)
        || table
            .together
            .iter()
            .any(|group| group.contains(&key.name) && first.is_some_and(|it| group.contains(&it)))
}

/// The text of the session file.
pub fn draft(draft: &Draft) -> String {
    let mut out = String::from(
        "# A session of frames of the solar disk. Paths are relative to this file.\n\
         # NEEDED: fill it in and take the mark of a comment away. A line that stays a comment\n\
         # after its meaning shows the value that is taken.\n",
    );
    for (name, table) in shown() {
        let weather_log = draft.known.contains_key("weather.log");
        let _ = write!(out, "\n[{name}]{}\n", comment(name, table.doc));
        for key in table.keys {
            let path = format!("{name}.{}", key.name);
            let known = draft.known.get(&path);
            let other_source = name == "weather"
                && weather_log
                && ["pressure_hpa", "temperature_c", "relative_humidity"].contains(&key.name);
            if known.is_none() && (ADVANCED.contains(&key.name) || other_source) {
                continue;
            }
            line(&mut out, table, key, known);
        }
    }
    for it in &draft.sequences {
        out.push_str("\n[[sequence]]");
        if !it.note.is_empty() {
            let _ = write!(out, "                  # {}", one_line(&it.note));
        }
        let files: Vec<String> = it.files.iter().map(|it| text(it)).collect();
        let _ = write!(
            out,
            "\nkind = {:<25}# burst: tracking | roll: the same with the instrument turned | drift | scan | limbs\nfiles = [{}]\n{}\n",
            text(&it.kind),
            files.join(", "),
            match it.kind.as_str() {
                "roll" =>
                    "# roll_deg =                    # NEEDED: degrees, added to camera.angle_deg.",
                "scan" => "# line_s =                      # NEEDED: seconds from line to line.",
                _ => "# roll_deg = 0.0                # added to camera.angle_deg",
            }
        );
    }
    if draft.sequences.is_empty() {
        out.push_str(
            "\n# NEEDED: at least one sequence\n# [[sequence]]\n# kind = \"burst\"\n# files = [\"burst_*.fits\"]\n",
        );
    }
    out
}

fn comment(name: &str, doc: &str) -> String {
    format!(
        "{:>width$}{doc}",
        "# ",
        width = 30_usize.saturating_sub(name.len())
    )
}

/// One key: filled in, or as a comment with what is taken without it.
fn line(out: &mut String, table: &Table, key: &Key, known: Option<&(String, String)>) {
    let default = match key.absent {
        Absent::Number(value) => Some(format!("{value:?}")),
        Absent::Whole(value) => Some(value.to_string()),
        Absent::Word(word) => Some(text(word)),
        Absent::Required | Absent::Open => None,
    };
    let (setting, mark) = match (known, default) {
        (Some((value, from)), _) => (
            format!("{} = {value}", key.name),
            format!("{} From {}.", key.doc, one_line(from)),
        ),
        (None, Some(default)) => (format!("# {} = {default}", key.name), key.doc.to_owned()),
        (None, None) if is_needed(table, key) => (
            format!("# {} =", key.name),
            format!("NEEDED: {}.", meant(key)),
        ),
        (None, None) => (
            format!("# {} =", key.name),
            format!("Optional: {}.", meant(key)),
        ),
    };
    let _ = writeln!(out, "{setting:<32}# {mark}");
}

/// What a key means and what is allowed.
fn meant(key: &Key) -> String {
    format!("{}; {}", key.doc.trim_end_matches('.'), key.form.allowed())
}

/// A TOML text.
fn text(it: &str) -> String {
    toml::Value::String(it.to_owned()).to_string()
}

fn one_line(it: &str) -> String {
    it.chars()
        .map(|c| if c.is_control() { ' ' } else { c })
        .collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn an_empty_draft_is_toml_and_marks_what_the_reader_will_ask_for() {
        let written = draft(&Draft::default());
        let table: toml::Table = written.parse().unwrap();
        for (name, value) in &table {
            assert!(
                value.as_table().is_some_and(toml::Table::is_empty),
                "{name}"
            );
        }
        let marked = written.matches("NEEDED: ").count();
        let needed = sought().iter().filter(|it| it.is_needed).count();
        for key in [
            "site.latitude_deg",
            "telescope.mount",
            "camera.scale_arcsec_px",
        ] {
            let it = sought().into_iter().find(|it| it.key == key);
            assert!(it.is_some_and(|it| it.is_needed), "{key}");
        }
        // One mark in the head explains the others, one asks for a sequence.
        assert_eq!(marked, needed + 2);
    }

    #[test]
    fn what_is_known_is_filled_in_whatever_its_letters() {
        let mut it = Draft::default();
        it.known.insert(
            "site.name".to_owned(),
            ("\"Corrie \\\"Head\\\"\"".to_owned(), "a\nheader".to_owned()),
        );
        it.sequences.push(DraftSequence {
            kind: "burst".to_owned(),
            files: vec!["a \"b\".fits".to_owned()],
            note: "two\nlines".to_owned(),
        });
        let table: toml::Table = draft(&it).parse().unwrap();
        assert_eq!(table["site"]["name"].as_str(), Some("Corrie \"Head\""));
        let files = &table["sequence"][0]["files"];
        assert_eq!(files[0].as_str(), Some("a \"b\".fits"));
    }
}
