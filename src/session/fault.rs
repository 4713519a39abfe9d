//! Faults of a session and how they are shown: place, line of the file, what was found, what is
//! allowed, and the cure.

use std::fmt;
use std::ops::Range;
use std::path::{Path, PathBuf};

use super::source::{Excerpt, Source, printable};

/// What kind of fault it is.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
#[non_exhaustive]
pub enum FaultKind {
    /// The file cannot be read, is too long, or is not text.
    Unreadable,
    /// The file is not TOML at this place.
    Syntax,
    /// There is no such key.
    UnknownKey,
    /// A key that is needed is not there.
    MissingKey,
    /// The value is of another type.
    WrongType,
    /// The value is outside the allowed range, or not among the allowed words.
    OutOfRange,
    /// Two facts contradict each other.
    Contradictory,
    /// A path or pattern names no file.
    NoSuchFile,
    /// A row of a table of readings cannot be used.
    BadRow,
    /// A column or value is in another unit.
    WrongUnit,
}

impl FaultKind {
    /// The kind in words, to follow the name of a key.
    fn words(self) -> &'static str {
        match self {
            Self::Unreadable => "cannot be read",
            Self::Syntax => "is not TOML",
            Self::UnknownKey => "is not a known key",
            Self::MissingKey => "is missing",
            Self::WrongType => "has the wrong type",
            Self::OutOfRange => "is out of range",
            Self::Contradictory => "contradicts another key",
            Self::NoSuchFile => "names no file",
            Self::BadRow => "has a bad row",
            Self::WrongUnit => "is in the wrong unit",
        }
    }
}

/// One fault, with its place and its cure.
#[derive(Clone, Debug, PartialEq)]
pub struct Fault {
    /// Kind of the fault.
    pub kind: FaultKind,
    /// File it is in.
    pub path: PathBuf,
    /// Line, counted from 1; 0 where the fault is of the file as a whole.
    pub line: usize,
    /// Column in characters, counted from 1; 0 where the fault is of the file as a whole.
    pub column: usize,
    /// Path of the key, such as `camera.gain_e_adu`.
    pub key: String,
    /// What was found.
    pub found: String,
    /// What is allowed, with the unit.
    pub allowed: String,
    /// What to do.
    pub cure: String,
    excerpt: Option<Excerpt>,
}

/// What was found, what is allowed and the cure.
#[derive(Clone, Debug, PartialEq)]
pub(super) struct Finding {
    pub(super) kind: FaultKind,
    pub(super) found: String,
    pub(super) allowed: String,
    pub(super) cure: String,
}

impl Finding {
    /// A finding of three sentences.
    pub(super) fn new(
        kind: FaultKind,
        found: impl Into<String>,
        allowed: impl Into<String>,
        cure: impl Into<String>,
    ) -> Self {
        Self {
            kind,
            found: found.into(),
            allowed: allowed.into(),
            cure: cure.into(),
        }
    }
}

impl Fault {
    /// A fault of a file as a whole.
    pub(super) fn of_file(path: &Path, key: &str, finding: Finding) -> Self {
        let Finding {
            kind,
            found,
            allowed,
            cure,
        } = finding;
        Self {
            kind,
            path: path.to_owned(),
            line: 0,
            column: 0,
            key: printable(key),
            found: printable(&found),
            allowed,
            cure: printable(&cure),
            excerpt: None,
        }
    }

    /// A fault at a place of a text.
    pub(super) fn at(source: &Source, span: &Range<usize>, key: &str, finding: Finding) -> Self {
        let (line, column, excerpt) = source.locate(span);
        Self {
            line,
            column,
            excerpt: Some(excerpt),
            ..Self::of_file(&source.path, key, finding)
        }
    }
}

impl fmt::Display for Fault {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{}", printable(&self.path.display().to_string()))?;
        if self.line > 0 {
            write!(f, ":{}:{}", self.line, self.column)?;
        }
        if self.key.is_empty() {
            writeln!(f, ": the file {}", self.kind.words())?;
        } else {
            writeln!(f, ": {} {}", self.key, self.kind.words())?;
        }
        if let Some(Excerpt { text, caret, width }) = &self.excerpt {
            let number = self.line.to_string();
            let margin = " ".repeat(number.len());
            writeln!(f, "  {number} | {text}")?;
            writeln!(
                f,
                "  {margin} | {}{}",
                " ".repeat(*caret),
                "^".repeat(*width)
            )?;
        }
        for (name, text) in [
            ("found", &self.found),
            ("allowed", &self.allowed),
            ("cure", &self.cure),
        ] {
            if !text.is_empty() {
                writeln!(f, "  {name:<8} {text}")?;
            }
        }
        Ok(())
    }
}

/// Everything that is wrong with a session, in the order of the files and their lines.
#[derive(Clone, Debug, PartialEq)]
pub struct SessionError {
    /// The session file that was asked for.
    pub path: PathBuf,
    /// The faults, one at least and 100 at most.
    pub faults: Vec<Fault>,
    /// How many more there are beyond those.
    pub more: usize,
}

impl std::error::Error for SessionError {}

impl fmt::Display for SessionError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let plural = if self.faults.len() == 1 {
            "fault"
        } else {
            "faults"
        };
        let path = printable(&self.path.display().to_string());
        write!(f, "{path}: {} {plural}", self.faults.len())?;
        for fault in &self.faults {
            write!(f, "\n\n{}", fault.to_string().trim_end())?;
        }
        if self.more > 0 {
            write!(f, "\n\nand {} more", self.more)?;
        }
        Ok(())
    }
}

/// Most faults that are kept: a file with more is not the file that was meant.
const MOST_FAULTS: usize = 100;

/// The faults found so far, each once.
#[derive(Debug, Default)]
pub(super) struct Faults {
    list: Vec<Fault>,
    more: usize,
}

impl Faults {
    /// Notes a fault, unless the same was noted at the same place.
    pub(super) fn push(&mut self, fault: Fault) {
        let known = self.list.iter().any(|it| {
            it.kind == fault.kind
                && it.path == fault.path
                && (it.line, it.column) == (fault.line, fault.column)
                && it.found == fault.found
                && (it.excerpt.is_some() && fault.kind != FaultKind::MissingKey
                    || it.key == fault.key)
        });
        if known {
            return;
        }
        if self.is_full() {
            self.more += 1;
        } else {
            self.list.push(fault);
        }
    }

    /// Notes several.
    pub(super) fn extend(&mut self, faults: impl IntoIterator<Item = Fault>) {
        for fault in faults {
            self.push(fault);
        }
    }

    /// Counts a fault beyond those that are kept.
    pub(super) fn count_more(&mut self) {
        self.more += 1;
    }

    /// Whether no further fault is kept, so that its place need not be found.
    pub(super) fn is_full(&self) -> bool {
        self.list.len() >= MOST_FAULTS
    }

    /// Whether there are none.
    pub(super) fn is_empty(&self) -> bool {
        self.list.is_empty()
    }

    /// The error of a session, in the order of the files as given and of their lines.
    pub(super) fn into_error(self, path: &Path, files: &[PathBuf]) -> SessionError {
        let mut list = self.list;
        let rank = |path: &PathBuf| {
            files
                .iter()
                .position(|it| it == path)
                .unwrap_or(files.len())
        };
        list.sort_by(|a, b| {
            (rank(&a.path), &a.path, a.line, a.column).cmp(&(
                rank(&b.path),
                &b.path,
                b.line,
                b.column,
            ))
        });
        SessionError {
            path: path.to_owned(),
            faults: list,
            more: self.more,
        }
    }
}
