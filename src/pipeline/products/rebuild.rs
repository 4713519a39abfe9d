//! The report of a result that is already there, drawn again from its files.

use std::fmt::Write as _;
use std::path::{Path, PathBuf};

use ndarray::Array2;
use serde::de::DeserializeOwned;
use serde_json::Value;

use super::{json, page, provenance};
use crate::frames::{ImageFile, write_whole};
use crate::pipeline::{Error, assemble};
use crate::result::record::{Record, SCHEMA_VERSION, Traces};

/// What was drawn again.
#[derive(Clone, Debug)]
pub struct Rebuilt {
    /// The result that the report is of.
    pub record: Record,
    /// The files written, by their names in the folder.
    pub files: Vec<String>,
}

/// Draws report and figures of the result in `folder` again, from `result.json`, `traces.json` and,
/// where it is there, `stack.fits`. The same version writes the same bytes as the reduction did;
/// the checksums in `provenance.json` follow.
///
/// # Errors
///
/// [`Error::NotAResult`] when a file is missing, is no result or has another layout;
/// [`Error::Fits`] when the stack cannot be read.
pub fn rebuild(folder: &Path) -> Result<Rebuilt, Error> {
    let path = folder.join("result.json");
    let written: Value = read(&path)?;
    let version = written.get("schema_version").and_then(Value::as_u64);
    if version != Some(u64::from(SCHEMA_VERSION)) {
        return Err(Error::NotAResult {
            path,
            found: version.map_or_else(
                || "no schema_version".to_owned(),
                |it| format!("schema_version {it}"),
            ),
            cure: format!(
                "this program draws layout {SCHEMA_VERSION}: reduce the session again, or take the version that wrote it"
            ),
        });
    }
    let record: Record = from_value(&path, written)?;
    let mut traces: Traces = read(&folder.join("traces.json"))?;
    let stack = folder.join("stack.fits");
    if traces.preview_radius_px > 0.0 && stack.is_file() {
        let mut image = Array2::zeros((0, 0));
        ImageFile::open(&stack)?.read_plane(0, &mut image)?;
        traces.preview = Some(assemble::traces::reduced(&image));
    }
    let files = page(&record, &traces, folder)?;
    let origin = folder.join("provenance.json");
    if origin.is_file() {
        let mut document: Value = read(&origin)?;
        for it in &files {
            provenance::renew(&mut document, &provenance::product(folder, it)?);
        }
        write_whole(&origin, json("provenance.json", &document)?.as_bytes())?;
    }
    Ok(Rebuilt { record, files })
}

fn read<T: DeserializeOwned>(path: &Path) -> Result<T, Error> {
    let text = std::fs::read_to_string(path).map_err(|it| Error::NotAResult {
        path: path.to_owned(),
        found: it.to_string(),
        cure: "give the folder that `truelimb reduce` wrote".to_owned(),
    })?;
    serde_json::from_str(&text).map_err(|it| refused(path, &text, &it))
}

fn from_value<T: DeserializeOwned>(path: &Path, value: Value) -> Result<T, Error> {
    serde_json::from_value(value).map_err(|it| Error::NotAResult {
        path: path.to_owned(),
        found: it.to_string(),
        cure: "reduce the session again".to_owned(),
    })
}

/// The refusal of a text, with its line and a caret under the place.
fn refused(path: &Path, text: &str, error: &serde_json::Error) -> Error {
    /// Most characters of a line that are shown.
    const SHOWN: usize = 96;
    let (line, column) = (error.line(), error.column());
    let mut found = error.to_string();
    let written = text.lines().nth(line.saturating_sub(1)).unwrap_or_default();
    if line > 0 && written.chars().count() <= SHOWN {
        let margin = " ".repeat(line.to_string().len());
        let caret = " ".repeat(column.saturating_sub(1));
        let _ = write!(found, "\n  {line} | {written}\n  {margin} | {caret}^");
    }
    Error::NotAResult {
        path: PathBuf::from(path),
        found,
        cure: "reduce the session again".to_owned(),
    }
}
