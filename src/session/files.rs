//! The files that a path or a pattern names. A name is never interpreted further: what comes out
//! are paths of files that are there.

use std::path::{Path, PathBuf};

use super::fault::{FaultKind, Finding};
use super::nearest;
use super::source::shortened;

/// Most files one pattern may name.
const MOST_FILES: usize = 1_000_000;

/// Most names of a folder that are looked at for a near one.
const MOST_NAMES: usize = 10_000;

/// Why a pattern names no files.
#[derive(Clone, Debug, PartialEq)]
pub(super) enum NoMatch {
    /// Nothing fits.
    Nothing,
    /// It is not a pattern.
    Malformed(String),
    /// A folder could not be looked into.
    Unreadable(String),
    /// More fit than can be meant.
    TooMany,
}

impl NoMatch {
    /// The finding for a pattern in a folder.
    pub(super) fn finding(&self, folder: &Path, pattern: &str) -> Finding {
        let place = shown(folder);
        let allowed = "paths and patterns (*, ?, [a-z], **) that name at least one file";
        let pattern_shown = shortened(pattern);
        let (found, cure) = match self {
            Self::Nothing if !is_pattern(pattern) => return absent(folder, pattern),
            Self::Nothing => (
                format!("\"{pattern_shown}\" fits nothing in {place}"),
                "check the pattern; it is relative to the file that names it".to_owned(),
            ),
            Self::Malformed(why) => (
                format!("\"{pattern_shown}\": {why}"),
                "close the brackets, or put a bracket that is meant as itself in brackets"
                    .to_owned(),
            ),
            Self::Unreadable(why) => (
                format!("\"{pattern_shown}\" in {place}: {why}"),
                "check the rights".to_owned(),
            ),
            Self::TooMany => (
                format!("\"{pattern_shown}\" fits more than {MOST_FILES} files"),
                "narrow the pattern".to_owned(),
            ),
        };
        Finding::new(FaultKind::NoSuchFile, found, allowed, cure)
    }
}

/// The finding for a path that names no file.
pub(super) fn absent(folder: &Path, name: &str) -> Finding {
    let path = folder.join(name);
    let found = if path.is_dir() {
        format!("\"{}\" is a folder", shortened(name))
    } else {
        format!("no file \"{}\" in {}", shortened(name), shown(folder))
    };
    let cure = match near(&path) {
        Some(near) => format!("did you mean \"{near}\"?"),
        None => "check the path; it is relative to the file that names it".to_owned(),
    };
    Finding::new(
        FaultKind::NoSuchFile,
        found,
        "the path of a file that is there",
        cure,
    )
}

/// The files that fit a pattern, sorted. A path that is there is taken as it stands, whatever
/// characters are in it.
pub(super) fn matching(folder: &Path, pattern: &str) -> Result<Vec<PathBuf>, NoMatch> {
    let literal = folder.join(pattern);
    if literal.is_file() {
        return Ok(vec![literal]);
    }
    if !is_pattern(pattern) {
        return Err(NoMatch::Nothing);
    }
    let full = if Path::new(pattern).is_absolute() || folder.as_os_str().is_empty() {
        pattern.to_owned()
    } else {
        let Some(folder) = folder.to_str() else {
            return Err(NoMatch::Unreadable(
                "the folder's name is not UTF-8".to_owned(),
            ));
        };
        format!(
            "{}/{pattern}",
            glob::Pattern::escape(folder.trim_end_matches('/'))
        )
    };
    let paths = glob::glob(&full).map_err(|error| NoMatch::Malformed(error.msg.to_owned()))?;
    let mut found = Vec::new();
    for path in paths {
        let path = path.map_err(|error| NoMatch::Unreadable(error.to_string()))?;
        if path.is_file() {
            found.push(path);
        }
        if found.len() > MOST_FILES {
            return Err(NoMatch::TooMany);
        }
    }
    if found.is_empty() {
        return Err(NoMatch::Nothing);
    }
    found.sort();
    Ok(found)
}

/// Whether a text has a character of patterns.
fn is_pattern(text: &str) -> bool {
    text.contains(['*', '?', '['])
}

/// The folder in words.
fn shown(folder: &Path) -> String {
    if folder.as_os_str().is_empty() {
        "this folder".to_owned()
    } else {
        folder.display().to_string()
    }
}

/// The nearest name in the folder of a path that is not there.
fn near(path: &Path) -> Option<String> {
    let name = path.file_name()?.to_str()?;
    let folder = path
        .parent()
        .filter(|it| !it.as_os_str().is_empty())
        .unwrap_or(Path::new("."));
    let mut names: Vec<String> = std::fs::read_dir(folder)
        .ok()?
        .take(MOST_NAMES)
        .filter_map(|entry| entry.ok()?.file_name().into_string().ok())
        .collect();
    names.sort();
    nearest::of(name, names.iter().map(String::as_str)).map(str::to_owned)
}
