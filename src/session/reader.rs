//! Reads typed values out of the tree by the table of keys, and notes every fault on the way.

use std::collections::{BTreeMap, BTreeSet};
use std::path::{Path, PathBuf};

use super::document::{Branch, Node, Place, Value, folder, is_named};
use super::fault::{Fault, FaultKind, Faults, Finding};
use super::files::{self, NoMatch};
use super::judge::{Judged, judge, number_in_range};
use super::keys::{Absent, Form, Key, Table};
use super::source::{Source, shortened};

/// Asks the header of a frame for a number: the frame, the keyword.
pub(super) type HeaderLookup<'a> = dyn Fn(&Path, &str) -> Option<f64> + 'a;

/// The reading of one session.
pub(super) struct Reader<'a> {
    /// The texts.
    pub(super) sources: &'a [Source],
    /// What was found to be wrong.
    pub(super) faults: Faults,
    /// Whether what is missing is truly missing.
    pub(super) whole: bool,
    /// Whether a pattern that names no file is a fault.
    pub(super) files_needed: bool,
    /// Keys filled with their defaults.
    pub(super) assumed: BTreeSet<String>,
    /// Keys found in the header of a frame.
    pub(super) from_headers: BTreeSet<String>,
    /// Keywords by the fact they give.
    pub(super) keywords: BTreeMap<String, String>,
    /// The frame whose header answers for what the file leaves out.
    pub(super) frame: Option<PathBuf>,
    /// How to ask it.
    pub(super) lookup: &'a HeaderLookup<'a>,
}

impl std::fmt::Debug for Reader<'_> {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        f.debug_struct("Reader")
            .field("faults", &self.faults)
            .finish_non_exhaustive()
    }
}

/// One table under its form.
#[derive(Clone, Debug)]
pub(super) struct View {
    /// The form.
    pub(super) spec: &'static Table,
    /// Path of the table.
    pub(super) path: String,
    /// Its keys.
    pub(super) branch: Branch,
    /// Where it is named, if it is.
    pub(super) place: Option<Place>,
}

impl View {
    /// The table of that name inside; empty where it is not written.
    pub(super) fn inner(&self, name: &str) -> Self {
        let spec = match self.spec.key(name).map(|key| key.form) {
            Some(Form::Table(spec) | Form::Tables(spec)) => spec,
            _ => self.spec,
        };
        let path = self.path_of(name);
        match self.branch.get(name) {
            Some(Node {
                key,
                value: Value::Table(branch),
                ..
            }) => Self {
                spec,
                path,
                branch: branch.clone(),
                place: Some(key.clone()),
            },
            _ => Self {
                spec,
                path,
                branch: Branch::new(),
                place: None,
            },
        }
    }

    /// The path of a key of this table.
    pub(super) fn path_of(&self, name: &str) -> String {
        if self.path.is_empty() {
            name.to_owned()
        } else {
            format!("{}.{name}", self.path)
        }
    }

    /// Whether the key is written.
    pub(super) fn has(&self, name: &str) -> bool {
        self.branch.contains_key(name)
    }
}

impl Reader<'_> {
    /// Notes a fault at a place.
    pub(super) fn fault(&mut self, place: &Place, key: &str, finding: Finding) {
        if self.faults.is_full() {
            self.faults.count_more();
            return;
        }
        self.faults.push(Fault::at(
            &self.sources[place.source],
            &place.span,
            key,
            finding,
        ));
    }

    /// Notes that something is missing in a table.
    pub(super) fn missing(&mut self, view: &View, key: &str, allowed: String, cure: String) {
        if !self.whole {
            return;
        }
        let finding = Finding::new(FaultKind::MissingKey, "", allowed, cure);
        match &view.place {
            Some(place) => self.fault(&place.clone(), key, finding),
            None => self
                .faults
                .push(Fault::of_file(&self.sources[0].path, key, finding)),
        }
    }

    /// Checks every key that is written: known, of the right type, in range.
    pub(super) fn walk(&mut self, branch: &Branch, spec: &'static Table, path: &str) {
        for (name, node) in branch {
            let full = if path.is_empty() {
                name.clone()
            } else {
                format!("{path}.{name}")
            };
            let Some(key) = spec.key(name) else {
                if self.faults.is_full() {
                    self.faults.count_more();
                    continue;
                }
                self.fault(&node.key, &full, super::nearest::unknown(name, spec));
                continue;
            };
            match (key.form, &node.value) {
                (Form::Table(inner), Value::Table(below)) => self.walk(below, inner, &full),
                (Form::Tables(inner), Value::List(items)) => {
                    for (index, item) in items.iter().enumerate() {
                        let full = format!("{full}[{index}]");
                        match &item.value {
                            Value::Table(below) => self.walk(below, inner, &full),
                            other => {
                                let finding = wrong_table(other, &format!("[[{name}]]"));
                                self.fault(&item.place, &full, finding);
                            }
                        }
                    }
                }
                (Form::Table(_), other) => {
                    self.fault(&node.place, &full, wrong_table(other, &format!("[{full}]")));
                }
                (Form::Tables(_), other) => {
                    self.fault(
                        &node.place,
                        &full,
                        wrong_table(other, &format!("[[{full}]]")),
                    );
                }
                _ => {
                    if let Err((place, finding)) = judge(node, key, self.sources) {
                        self.fault(&place, &full, finding);
                    }
                }
            }
        }
    }

    /// Checks the rules between the keys of a table.
    pub(super) fn rules(&mut self, view: &View) {
        let mut contradicted = false;
        for (one, other) in view.spec.excludes {
            let first = one.iter().find(|name| is_named(&view.branch, name));
            let second = other.iter().filter(|name| is_named(&view.branch, name));
            if let Some(first) = first {
                for second in second {
                    let finding = Finding::new(
                        FaultKind::Contradictory,
                        format!("`{first}` and `{second}` in one [{}]", view.path),
                        format!("`{first}` or `{second}`, not both"),
                        "take one of them out",
                    );
                    contradicted = true;
                    let place = view.branch[*second].key.clone();
                    self.fault(&place, &view.path_of(second), finding);
                }
            }
        }
        // What else a group lacks is not known before it is known which group is meant.
        if contradicted {
            return;
        }
        let given = |it: &Self, name: &str| {
            is_named(&view.branch, name)
                || view
                    .spec
                    .key(name)
                    .is_some_and(|key| it.header_number(key).is_some())
        };
        for group in view.spec.together {
            let (have, lack): (Vec<&str>, Vec<&str>) =
                group.iter().partition(|name| given(self, name));
            if have.is_empty() {
                continue;
            }
            for name in lack {
                let allowed = view
                    .spec
                    .key(name)
                    .map(|key| key.form.allowed())
                    .unwrap_or_default();
                let cure = format!("give `{name}` with `{}`", have.join("`, `"));
                self.missing(view, &view.path_of(name), allowed, cure);
            }
        }
        if !view.spec.one_of.is_empty() && !view.spec.one_of.iter().any(|name| given(self, name)) {
            let names = format!("`{}`", view.spec.one_of.join("`, `"));
            self.missing(
                view,
                &view.path,
                format!("one of {names}"),
                format!("write one of {names} in [{}]", view.path),
            );
        }
    }

    /// A number: as written, else from the header of a frame, else its default. None means that a
    /// fault was noted.
    pub(super) fn number(&mut self, view: &View, name: &str) -> Option<f64> {
        let found = self.open_number(view, name)?;
        if found.is_some() {
            return found;
        }
        let key = view.spec.key(name)?;
        match key.absent {
            Absent::Number(value) => {
                self.assumed.insert(view.path_of(name));
                Some(value)
            }
            _ => self.required(view, key),
        }
    }

    /// A number that may be unknown: the outer none means that a fault was noted.
    #[expect(
        clippy::option_option,
        reason = "the outer none is a fault, the inner one a silence"
    )]
    pub(super) fn open_number(&mut self, view: &View, name: &str) -> Option<Option<f64>> {
        let key = view.spec.key(name)?;
        if let Some(node) = view.branch.get(name) {
            return match judge(node, key, self.sources) {
                Ok(Judged::Number(value)) => Some(Some(value)),
                _ => None,
            };
        }
        let Some((value, keyword)) = self.header_number(key) else {
            return Some(None);
        };
        if let Err(finding) = number_in_range(value, key, &format!("{keyword} = {value}")) {
            let path = self.frame.clone().unwrap_or_default();
            self.faults
                .push(Fault::of_file(&path, &view.path_of(name), finding));
            return None;
        }
        self.from_headers.insert(view.path_of(name));
        Some(Some(value))
    }

    /// What the header of a frame says of a key, and by which keyword.
    fn header_number(&self, key: &Key) -> Option<(f64, String)> {
        let frame = self.frame.as_ref()?;
        let named = self.keywords.get(key.name).map(String::as_str);
        named
            .into_iter()
            .chain(key.keywords.iter().copied())
            .find_map(|keyword| {
                (self.lookup)(frame, keyword).map(|value| (value, keyword.to_owned()))
            })
    }

    /// A whole number or its default.
    pub(super) fn whole_number(&mut self, view: &View, name: &str) -> Option<i64> {
        let key = view.spec.key(name)?;
        match (view.branch.get(name), key.absent) {
            (Some(node), _) => match judge(node, key, self.sources) {
                Ok(Judged::Whole(value)) => Some(value),
                _ => None,
            },
            (None, Absent::Whole(value)) => {
                self.assumed.insert(view.path_of(name));
                Some(value)
            }
            (None, _) => self.required(view, key),
        }
    }

    /// A text, its default, or none where neither is given or a fault was noted.
    pub(super) fn text(&mut self, view: &View, name: &str) -> Option<String> {
        let key = view.spec.key(name)?;
        match (view.branch.get(name), key.absent) {
            (Some(node), _) => match judge(node, key, self.sources) {
                Ok(Judged::Text(text)) => Some(text),
                _ => None,
            },
            (None, Absent::Word(word)) => {
                self.assumed.insert(view.path_of(name));
                Some(word.to_owned())
            }
            (None, Absent::Open) => None,
            (None, _) => self.required(view, key),
        }
    }

    /// The value that stands for a word.
    pub(super) fn choice<T: Copy>(
        &mut self,
        view: &View,
        name: &str,
        words: &[&str],
        values: &[T],
    ) -> Option<T> {
        let word = self.text(view, name)?;
        let index = words.iter().position(|it| *it == word)?;
        values.get(index).copied()
    }

    /// A list of texts; empty where it is not written.
    pub(super) fn texts(&mut self, view: &View, name: &str) -> Vec<String> {
        match (view.branch.get(name), view.spec.key(name)) {
            (Some(node), Some(key)) => match judge(node, key, self.sources) {
                Ok(Judged::Texts(texts)) => texts,
                _ => Vec::new(),
            },
            _ => Vec::new(),
        }
    }

    /// The path of one file that is there. The outer none means that a fault was noted.
    #[expect(
        clippy::option_option,
        reason = "the outer none is a fault, the inner one a silence"
    )]
    pub(super) fn file(&mut self, view: &View, name: &str) -> Option<Option<PathBuf>> {
        let Some(node) = view.branch.get(name) else {
            return Some(None);
        };
        let Ok(Judged::Text(text)) = judge(node, view.spec.key(name)?, self.sources) else {
            return None;
        };
        let path = folder(&self.sources[node.place.source].path).join(&text);
        if path.is_file() {
            return Some(Some(path));
        }
        let finding = files::absent(folder(&self.sources[node.place.source].path), &text);
        self.fault(&node.place, &view.path_of(name), finding);
        None
    }

    /// The files that the paths and patterns of a key name, sorted, each once. The outer none means
    /// that a fault was noted.
    #[expect(
        clippy::option_option,
        reason = "the outer none is a fault, the inner one a silence"
    )]
    pub(super) fn files(&mut self, view: &View, name: &str) -> Option<Option<Vec<PathBuf>>> {
        let key = view.spec.key(name)?;
        let Some(node) = view.branch.get(name) else {
            return match key.absent {
                Absent::Open => Some(None),
                _ => self.required(view, key),
            };
        };
        let (Value::List(items), Ok(_)) = (&node.value, judge(node, key, self.sources)) else {
            return None;
        };
        let mut found = Some(BTreeSet::new());
        for item in items {
            let Value::Text(pattern) = &item.value else {
                continue;
            };
            let folder = folder(&self.sources[item.place.source].path).to_owned();
            match files::matching(&folder, pattern) {
                Ok(paths) => {
                    if let Some(found) = &mut found {
                        found.extend(paths);
                    }
                }
                Err(NoMatch::Nothing) if !self.files_needed => {}
                Err(no_match) => {
                    let finding = NoMatch::finding(&no_match, &folder, pattern);
                    self.fault(&item.place, &view.path_of(name), finding);
                    found = None;
                }
            }
        }
        Some(Some(found?.into_iter().collect()))
    }

    /// Notes that a needed key is missing.
    fn required<T>(&mut self, view: &View, key: &Key) -> Option<T> {
        let table = if view.path.is_empty() {
            "the file"
        } else {
            &format!("[{}]", view.path)
        };
        let mut cure = format!("write `{}` in {table}: {}", key.name, key.doc);
        let in_map = super::tables::SESSION.key("headers").is_some_and(
            |headers| matches!(headers.form, Form::Table(spec) if spec.key(key.name).is_some()),
        );
        if in_map {
            let known = key.keywords.join(", ");
            let known = if known.is_empty() {
                String::new()
            } else {
                format!(" ({known})")
            };
            let place = format!(
                " It may also stand in the frames' headers{known}, its keyword named in [headers]."
            );
            cure.push_str(&place);
        }
        self.missing(view, &view.path_of(key.name), key.form.allowed(), cure);
        None
    }
}

/// The finding for something that should be a table.
fn wrong_table(value: &Value, header: &str) -> Finding {
    Finding::new(
        FaultKind::WrongType,
        match value {
            Value::Text(text) => format!("text \"{}\"", shortened(text)),
            Value::Table(_) => "a single table".to_owned(),
            other => other.type_words().to_owned(),
        },
        "a table",
        format!("put the keys under a line {header}"),
    )
}
