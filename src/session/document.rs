//! The text of a session file as a tree whose every key and value knows its place, and the laying
//! of one file over its `base`.

use std::collections::BTreeMap;
use std::fs::File;
use std::io::Read;
use std::ops::Range;
use std::path::{Path, PathBuf};

use toml::de::{DeTable, DeValue};

use super::fault::{Fault, FaultKind, Faults, Finding};
use super::keys::{Form, Table};
use super::source::Source;

/// Longest session file that is read, in bytes: far above any real one.
const LONGEST_BYTES: u64 = 1 << 20;

/// Most files that may stand on each other by `base`.
const MOST_LAYERS: usize = 16;

/// Where a key or value stands.
#[derive(Clone, Debug)]
pub(super) struct Place {
    /// Index of the source.
    pub(super) source: usize,
    /// Bytes of its text.
    pub(super) span: Range<usize>,
}

/// A value with its place and that of its key.
#[derive(Clone, Debug)]
pub(super) struct Node {
    /// Place of the key; of the value for an element of a list.
    pub(super) key: Place,
    /// Place of the value.
    pub(super) place: Place,
    /// The value.
    pub(super) value: Value,
}

/// The keys of a table.
pub(super) type Branch = BTreeMap<String, Node>;

/// A value as written.
#[derive(Clone, Debug)]
pub(super) enum Value {
    /// Text in quotes.
    Text(String),
    /// A number with a point or an exponent.
    Float(f64),
    /// A whole number; none where it does not fit.
    Whole(Option<i64>),
    /// `true` or `false`.
    Flag(bool),
    /// A date or time.
    Moment,
    /// A list.
    List(Vec<Node>),
    /// A table.
    Table(Branch),
}

impl Value {
    /// The type in words.
    pub(super) fn type_words(&self) -> &'static str {
        match self {
            Self::Text(_) => "text",
            Self::Float(_) => "a number",
            Self::Whole(_) => "a whole number",
            Self::Flag(_) => "true or false",
            Self::Moment => "a date",
            Self::List(_) => "a list",
            Self::Table(_) => "a table",
        }
    }
}

/// The file and those it stands on, as one tree.
#[derive(Debug)]
pub(super) struct Document {
    /// The texts, the file that was asked for first.
    pub(super) sources: Vec<Source>,
    /// The tree, each key from the uppermost file that has it.
    pub(super) root: Branch,
    /// Whether every file was read and is TOML, so that what is missing is truly missing.
    pub(super) whole: bool,
}

/// Reads a file and those it stands on.
pub(super) fn read(path: &Path, spec: &'static Table, faults: &mut Faults) -> Document {
    let mut document = Document {
        sources: Vec::new(),
        root: Branch::new(),
        whole: true,
    };
    let mut chain: Vec<PathBuf> = Vec::new();
    let mut next = Some((path.to_owned(), None::<Place>));
    while let Some((path, named_at)) = next.take() {
        let identity = path.canonicalize().unwrap_or_else(|_| path.clone());
        if chain.contains(&identity) || chain.len() == MOST_LAYERS {
            document.whole = false;
            if let Some(place) = &named_at {
                faults.push(Fault::at(
                    &document.sources[place.source],
                    &place.span,
                    "base",
                    Finding::new(
                        FaultKind::Contradictory,
                        format!(
                            "{} stands on itself, or on more than {MOST_LAYERS} files",
                            path.display()
                        ),
                        "a chain of files that ends",
                        "take `base` out of one of the files",
                    ),
                ));
            }
            break;
        }
        chain.push(identity);
        let text = match text_of(&path, LONGEST_BYTES) {
            Ok(text) => text,
            Err(finding) => {
                document.whole = false;
                faults.push(match &named_at {
                    Some(place) => Fault::at(
                        &document.sources[place.source],
                        &place.span,
                        "base",
                        finding,
                    ),
                    None => Fault::of_file(&path, "", finding),
                });
                break;
            }
        };
        let source = Source { path, text };
        let index = document.sources.len();
        let (tree, broken) = parse(&source, index, faults);
        document.whole &= !broken;
        next = tree.get("base").and_then(|node| match &node.value {
            Value::Text(name) => Some((folder(&source.path).join(name), Some(node.place.clone()))),
            _ => None,
        });
        document.sources.push(source);
        document.root = overlaid(std::mem::take(&mut document.root), tree, spec);
    }
    document
}

/// The folder a file is in.
pub(super) fn folder(path: &Path) -> &Path {
    path.parent().unwrap_or(Path::new(""))
}

/// The text of a file that is not longer than the limit.
pub(super) fn text_of(path: &Path, longest_bytes: u64) -> Result<String, Finding> {
    let unreadable = |found: String, cure: &str| {
        Finding::new(FaultKind::Unreadable, found, "a text file in UTF-8", cure)
    };
    let shown = path.display();
    if path.is_dir() {
        return Err(unreadable(
            format!("{shown} is a folder"),
            "name the file in it",
        ));
    }
    let file = File::open(path).map_err(|error| {
        unreadable(format!("{shown}: {error}"), "check the path and the rights")
    })?;
    let mut bytes = Vec::new();
    file.take(longest_bytes + 1)
        .read_to_end(&mut bytes)
        .map_err(|error| unreadable(format!("{shown}: {error}"), "check the disk"))?;
    if bytes.len() as u64 > longest_bytes {
        return Err(Finding::new(
            FaultKind::Unreadable,
            format!("{shown} is longer than {longest_bytes} bytes"),
            format!("a text file of at most {longest_bytes} bytes"),
            "check that the path names the file that was meant",
        ));
    }
    String::from_utf8(bytes).map_err(|error| {
        unreadable(
            format!(
                "{shown} has a byte at {} that is not UTF-8",
                error.utf8_error().valid_up_to()
            ),
            "save the file as UTF-8",
        )
    })
}

/// The tree of one text, and whether a part of it was not TOML.
fn parse(source: &Source, index: usize, faults: &mut Faults) -> (Branch, bool) {
    let (table, errors) = DeTable::parse_recoverable(&source.text);
    for error in &errors {
        if faults.is_full() {
            faults.count_more();
            continue;
        }
        let message = error.message();
        let finding = Finding::new(
            FaultKind::Syntax,
            message,
            "TOML 1.1",
            cure_of_syntax(message),
        );
        faults.push(Fault::at(
            source,
            &error.span().unwrap_or(0..0),
            "this line",
            finding,
        ));
    }
    let mut tree = branch(table.get_ref(), index);
    if !errors.is_empty() {
        // What stands where the syntax broke was guessed by the parser: leave it out.
        let spots: Vec<usize> = errors
            .iter()
            .filter_map(|it| Some(it.span()?.start))
            .collect();
        prune(&mut tree, &spots);
    }
    (tree, !errors.is_empty())
}

/// What to do about a syntax error.
fn cure_of_syntax(message: &str) -> &'static str {
    if message.contains("duplicate") {
        "keep one of the two"
    } else if message.contains("quoted") {
        "put text in quotes, and give every key a value"
    } else if message.contains("unclosed") {
        "close the bracket or quote"
    } else {
        "write `key = value`, text in quotes, lists in brackets"
    }
}

/// Takes out values that touch one of the spots.
fn prune(tree: &mut Branch, spots: &[usize]) {
    tree.retain(|_, node| match &mut node.value {
        Value::Table(inner) => {
            prune(inner, spots);
            true
        }
        Value::List(items) if items.iter().any(|it| matches!(it.value, Value::Table(_))) => {
            for item in items {
                if let Value::Table(inner) = &mut item.value {
                    prune(inner, spots);
                }
            }
            true
        }
        _ => !spots
            .iter()
            .any(|spot| (node.key.span.start..=node.place.span.end).contains(spot)),
    });
}

/// A parsed table as a branch.
fn branch(table: &DeTable<'_>, source: usize) -> Branch {
    table
        .iter()
        .map(|(key, value)| {
            let node = Node {
                key: Place {
                    source,
                    span: key.span(),
                },
                place: Place {
                    source,
                    span: value.span(),
                },
                value: value_of(value.get_ref(), source),
            };
            (key.get_ref().to_string(), node)
        })
        .collect()
}

/// A parsed value.
fn value_of(value: &DeValue<'_>, source: usize) -> Value {
    match value {
        DeValue::String(text) => Value::Text(text.to_string()),
        DeValue::Integer(whole) => {
            Value::Whole(i64::from_str_radix(whole.as_str(), whole.radix()).ok())
        }
        DeValue::Float(float) => Value::Float(float.as_str().parse().unwrap_or(f64::NAN)),
        DeValue::Boolean(flag) => Value::Flag(*flag),
        DeValue::Datetime(_) => Value::Moment,
        DeValue::Array(items) => Value::List(
            items
                .iter()
                .map(|item| {
                    let place = Place {
                        source,
                        span: item.span(),
                    };
                    let value = value_of(item.get_ref(), source);
                    Node {
                        key: place.clone(),
                        place,
                        value,
                    }
                })
                .collect(),
        ),
        DeValue::Table(table) => Value::Table(branch(table, source)),
    }
}

/// The lower table with the upper one laid over it, key by key. A key of the upper one also takes
/// away the keys of the lower that would contradict it, so that a station's constants give way to a
/// session's log.
pub(super) fn overlaid(mut upper: Branch, mut lower: Branch, spec: &Table) -> Branch {
    for (one, other) in spec.excludes {
        for (here, there) in [(one, other), (other, one)] {
            if here.iter().any(|name| is_named(&upper, name)) {
                lower.retain(|name, _| !there.contains(&name.as_str()));
            }
        }
    }
    for (name, under) in lower {
        match upper.get_mut(&name) {
            None => {
                upper.insert(name, under);
            }
            Some(over) => {
                if let (Value::Table(above), Value::Table(below), Some(Form::Table(inner))) = (
                    &mut over.value,
                    under.value,
                    spec.key(&name).map(|key| key.form),
                ) {
                    *above = overlaid(std::mem::take(above), below, inner);
                }
            }
        }
    }
    upper
}

/// Whether a table says something by that key: `false` says nothing.
pub(super) fn is_named(branch: &Branch, name: &str) -> bool {
    branch
        .get(name)
        .is_some_and(|node| !matches!(node.value, Value::Flag(false)))
}
