//! The session file that `inspect --write` starts.

use super::Found;
use crate::commands::Failure;
use std::fs::OpenOptions;
use std::io::Write;
use std::path::{Path, PathBuf};
use truelimb::Error;
use truelimb::session::{self, Draft, DraftSequence};

/// Where the file would be; refused where there is one.
pub(super) fn target(place: &Path, path: &Path) -> Result<PathBuf, Failure> {
    let target = folder_of(place).join(path);
    if target.exists() {
        return Err(Failure::Usage(format!(
            "{}: is there already and is not written over; give --write another name",
            target.display()
        )));
    }
    Ok(target)
}

/// The folder that names are relative to.
fn folder_of(place: &Path) -> &Path {
    if place.is_file() {
        place.parent().unwrap_or(Path::new(""))
    } else {
        place
    }
}

/// Writes the file.
pub(super) fn write(place: &Path, target: &Path, found: &Found) -> Result<(), Failure> {
    let folder = folder_of(place);
    let beside = target.parent() == Some(folder);
    let text = session::draft(&draft(found, |name| {
        if beside {
            Ok(name.to_owned())
        } else {
            absolute(folder, name)
        }
    })?);
    let failed = |it: std::io::Error| {
        Failure::from(Error::File {
            path: target.to_owned(),
            what: "could not be written",
            reason: it.to_string(),
        })
    };
    let mut file = OpenOptions::new()
        .write(true)
        .create_new(true)
        .open(target)
        .map_err(failed)?;
    file.write_all(text.as_bytes()).map_err(failed)
}

fn absolute(folder: &Path, name: &str) -> Result<String, Failure> {
    let folder = folder
        .canonicalize()
        .map_err(|it| Failure::Usage(format!("{}: {it}", folder.display())))?;
    Ok(folder.join(name).to_string_lossy().into_owned())
}

fn draft(found: &Found, shown: impl Fn(&str) -> Result<String, Failure>) -> Result<Draft, Failure> {
    let mut it = Draft::default();
    for fact in &found.from_headers {
        it.known.insert(
            fact.key.clone(),
            (
                format!("{:?}", fact.value),
                format!("{} of {}", fact.keyword, fact.file),
            ),
        );
    }
    for (key, files) in [
        ("calibration.dark", &found.dark),
        ("calibration.flat", &found.flat),
    ] {
        if !files.is_empty() {
            let names = files
                .iter()
                .map(|it| shown(&it.path))
                .collect::<Result<Vec<_>, _>>()?;
            it.known.insert(
                key.to_owned(),
                (
                    toml::Value::from(names).to_string(),
                    files[0].role_from.clone(),
                ),
            );
        }
    }
    if let Some(log) = found.weather.first() {
        it.known.insert(
            "weather.log".to_owned(),
            (
                toml::Value::from(shown(&log.path)?).to_string(),
                format!("its columns: {}", log.columns),
            ),
        );
    }
    for group in &found.sequences {
        it.sequences.push(DraftSequence {
            kind: group.kind.to_owned(),
            files: group
                .files
                .iter()
                .map(|it| shown(it))
                .collect::<Result<_, _>>()?,
            note: format!(
                "{} frames, {} to {}",
                group.frames, group.time_utc[0], group.time_utc[1]
            ),
        });
    }
    Ok(it)
}
