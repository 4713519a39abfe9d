//! `truelimb inspect`: what is in a folder, and what a session file still needs. Only headers and
//! tables are read, every file by itself: one that cannot be used costs no other.

mod draft;
mod files;
mod groups;
mod text;

use crate::Ending;
use crate::arguments::Inspect;
use crate::commands::{Failure, json, print};
use crate::progress::say;
use files::{FrameFile, TableFile, Unusable};
use groups::Group;
use serde::Serialize;
use std::path::Path;
use truelimb::session;

/// Everything found.
#[derive(Debug, Serialize)]
pub(crate) struct Found {
    schema_version: u32,
    folder: String,
    sequences: Vec<Group>,
    dark: Vec<FrameFile>,
    flat: Vec<FrameFile>,
    without_time: Vec<FrameFile>,
    weather: Vec<TableFile>,
    tables: Vec<TableFile>,
    sessions: Vec<SessionFile>,
    unusable: Vec<Unusable>,
    /// Facts that the headers give, by key of the session file.
    from_headers: Vec<Fact>,
    /// Facts that a session file must still give.
    missing: Vec<Missing>,
}

/// A session file that is there already.
#[derive(Debug, Serialize)]
struct SessionFile {
    path: String,
    faults: usize,
    first_fault: Option<String>,
}

/// A fact from a header.
#[derive(Debug, Serialize)]
pub(crate) struct Fact {
    key: String,
    value: f64,
    keyword: String,
    file: String,
}

/// A fact that is nowhere.
#[derive(Debug, Serialize)]
struct Missing {
    key: String,
    allowed: String,
    meaning: String,
    keywords: Vec<String>,
}

/// `truelimb inspect`.
pub(crate) fn inspect(it: &Inspect, quiet: bool) -> Result<Ending, Failure> {
    let target = it
        .write
        .as_ref()
        .map(|path| draft::target(&it.folder, path))
        .transpose()?;
    let found = look(&it.folder)?;
    if it.json {
        print(&json(&found)?);
    } else {
        print(&text::of(&found));
    }
    if let Some(target) = &target {
        draft::write(&it.folder, target, &found)?;
        if !quiet {
            say(&format!(
                "written: {}; fill in the lines marked NEEDED",
                target.display()
            ));
        }
    }
    Ok(Ending::Done)
}

/// Looks at every file below a folder, or at one file.
fn look(place: &Path) -> Result<Found, Failure> {
    let listing = files::list(place)?;
    let is_one = place.is_file();
    let looked = files::look_at(&listing);
    if let (true, Some(it)) = (is_one, looked.unusable.first()) {
        let place = place.display().to_string();
        let reason = it.reason.strip_prefix(&format!("{place}: "));
        return Err(Failure::Usage(format!(
            "{place}: {}",
            reason.unwrap_or(&it.reason)
        )));
    }
    let (frames, without_time): (Vec<_>, Vec<_>) =
        looked.frames.into_iter().partition(FrameFile::has_time);
    let (dark, rest): (Vec<_>, Vec<_>) = frames
        .into_iter()
        .chain(without_time)
        .partition(|it| it.role == files::Role::Dark);
    let (flat, rest): (Vec<_>, Vec<_>) = rest
        .into_iter()
        .partition(|it| it.role == files::Role::Flat);
    let (frames, without_time): (Vec<_>, Vec<_>) = rest.into_iter().partition(FrameFile::has_time);
    let sequences = groups::group(frames, &listing);
    let from_headers = sequences
        .first()
        .and_then(|it| it.first_path())
        .map(|it| files::facts(&listing.folder.join(it)))
        .unwrap_or_default();
    let missing = session::sought()
        .into_iter()
        .filter(|sought| sought.is_needed)
        .filter(|sought| !from_headers.iter().any(|it| it.key == sought.key))
        .filter(|sought| sought.key != "weather.log" || looked.weather.is_empty())
        .map(|it| Missing {
            key: it.key,
            allowed: it.allowed,
            meaning: it.meaning,
            keywords: it.keywords,
        })
        .collect();
    let sessions = listing
        .sessions
        .iter()
        .map(|name| session_file(&listing.folder, name))
        .collect();
    Ok(Found {
        schema_version: 1,
        folder: place.display().to_string(),
        sequences,
        dark,
        flat,
        without_time,
        weather: looked.weather,
        tables: looked.tables,
        sessions,
        unusable: looked.unusable,
        from_headers,
        missing,
    })
}

fn session_file(folder: &Path, name: &str) -> SessionFile {
    let path = folder.join(name);
    let read = session::read_with_headers(&path, &crate::commands::header_number);
    let (faults, first_fault) = match &read {
        Ok(_) => (0, None),
        Err(it) => (
            it.faults.len() + it.more,
            it.faults.first().map(|it| {
                let text = it.to_string();
                text.lines().next().unwrap_or_default().to_owned()
            }),
        ),
    };
    SessionFile {
        path: name.to_owned(),
        faults,
        first_fault,
    }
}
