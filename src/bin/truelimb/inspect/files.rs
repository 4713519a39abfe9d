//! The files of a folder, each looked at by itself.

use super::Fact;
use crate::commands::Failure;
use rayon::prelude::*;
use serde::Serialize;
use std::path::{Path, PathBuf};
use truelimb::frames::{FitsError, HeaderMap, ImageFile, frame_times};
use truelimb::session::{self, WeatherColumns, WeatherLog};
use truelimb::sky::Utc;

/// Files of a folder by what their names promise.
#[derive(Debug, Default)]
pub(super) struct Listing {
    /// The folder that names are relative to.
    pub(super) folder: PathBuf,
    /// Files that may be FITS.
    pub(super) images: Vec<String>,
    /// Files that may be tables.
    pub(super) tables: Vec<String>,
    /// Files that may be sessions.
    pub(super) sessions: Vec<String>,
}

/// Folders below the one asked for that are still entered.
const DEPTH: usize = 3;

/// More files than this are not a session.
const MOST_FILES: usize = 200_000;

/// Lists a folder, or takes one file.
pub(super) fn list(place: &Path) -> Result<Listing, Failure> {
    let mut listing = Listing::default();
    if place.is_file() {
        place
            .parent()
            .unwrap_or(Path::new(""))
            .clone_into(&mut listing.folder);
        if let Some(name) = place.file_name() {
            // Asked for by name, it is looked at whatever it is called.
            let name = name.to_string_lossy().into_owned();
            match kind_of(&name) {
                Some(Promise::Table) => listing.tables.push(name),
                Some(Promise::Session) => listing.sessions.push(name),
                _ => listing.images.push(name),
            }
        }
        return Ok(listing);
    }
    place.clone_into(&mut listing.folder);
    enter(place, "", DEPTH, &mut listing)
        .map_err(|it| Failure::Usage(format!("{}: cannot be listed: {it}", place.display())))?;
    for names in [
        &mut listing.images,
        &mut listing.tables,
        &mut listing.sessions,
    ] {
        names.sort();
    }
    Ok(listing)
}

fn enter(folder: &Path, prefix: &str, depth: usize, into: &mut Listing) -> std::io::Result<()> {
    for entry in std::fs::read_dir(folder)? {
        let entry = entry?;
        let Ok(name) = entry.file_name().into_string() else {
            continue;
        };
        if name.starts_with('.') {
            continue;
        }
        let shown = format!("{prefix}{name}");
        let kind = entry.file_type()?;
        if kind.is_dir() {
            // A folder with a result holds nothing to be reduced.
            if depth > 0 && !entry.path().join("result.json").exists() {
                enter(&entry.path(), &format!("{shown}/"), depth - 1, into)?;
            }
            continue;
        }
        match kind_of(&name) {
            Some(Promise::Image) => into.images.push(shown),
            Some(Promise::Table) => into.tables.push(shown),
            Some(Promise::Session) => into.sessions.push(shown),
            None => {}
        }
        if into.images.len() > MOST_FILES {
            return Err(std::io::Error::other(format!(
                "more than {MOST_FILES} files of frames"
            )));
        }
    }
    Ok(())
}

enum Promise {
    Image,
    Table,
    Session,
}

fn kind_of(name: &str) -> Option<Promise> {
    let name = name.to_lowercase();
    let plain = name.strip_suffix(".gz").unwrap_or(&name);
    match Path::new(plain).extension()?.to_str()? {
        "fits" | "fit" | "fts" | "fz" => Some(Promise::Image),
        "csv" if plain == name => Some(Promise::Table),
        "toml" if plain == name => Some(Promise::Session),
        _ => None,
    }
}

/// What a file of frames is for.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize)]
#[serde(rename_all = "snake_case")]
pub(super) enum Role {
    /// The Sun.
    Frames,
    /// Without light.
    Dark,
    /// Of an even light.
    Flat,
}

/// A file of frames, as its header tells.
#[derive(Clone, Debug, Serialize)]
pub(super) struct FrameFile {
    pub(super) path: String,
    pub(super) role: Role,
    /// What the role was judged by.
    pub(super) role_from: String,
    pub(super) hdu: usize,
    pub(super) size_px: [usize; 2],
    pub(super) frames: usize,
    /// Fewer where the file was cut.
    pub(super) frames_present: usize,
    pub(super) bits: i32,
    pub(super) compressed: bool,
    /// Named where the packing changed the values.
    pub(super) lossy: Option<String>,
    pub(super) bytes: u64,
    /// First and last start of an exposure, UTC.
    pub(super) time_utc: Option<[String; 2]>,
    pub(super) exposure_s: Option<f64>,
    /// Why there is no time.
    pub(super) no_time: Option<String>,
    /// Cards that a person wants to see, as written.
    pub(super) header: Vec<(String, String)>,
}

impl FrameFile {
    pub(super) fn has_time(&self) -> bool {
        self.time_utc.is_some()
    }
}

/// A table of numbers.
#[derive(Clone, Debug, Serialize)]
pub(super) struct TableFile {
    pub(super) path: String,
    pub(super) columns: String,
    pub(super) rows: Option<usize>,
    pub(super) time_utc: Option<[String; 2]>,
    /// Why it cannot be read as a weather log, where it looks like one.
    pub(super) fault: Option<String>,
}

/// A file that cannot be used, and why.
#[derive(Clone, Debug, Serialize)]
pub(super) struct Unusable {
    pub(super) path: String,
    pub(super) reason: String,
    pub(super) cure: Option<&'static str>,
}

/// What was found in the files of a listing.
#[derive(Debug, Default)]
pub(super) struct Looked {
    pub(super) frames: Vec<FrameFile>,
    pub(super) weather: Vec<TableFile>,
    pub(super) tables: Vec<TableFile>,
    pub(super) unusable: Vec<Unusable>,
}

/// Looks at every file, in the order of the names.
pub(super) fn look_at(listing: &Listing) -> Looked {
    let mut looked = Looked::default();
    let images: Vec<Result<FrameFile, FitsError>> = listing
        .images
        .par_iter()
        .map(|name| image(&listing.folder, name))
        .collect();
    for (name, image) in listing.images.iter().zip(images) {
        match image {
            Ok(it) => looked.frames.push(it),
            Err(error) => looked.unusable.push(Unusable {
                path: name.clone(),
                cure: error.cure(),
                reason: error.without_path(),
            }),
        }
    }
    for name in &listing.tables {
        match table(&listing.folder, name) {
            Ok((true, it)) => looked.weather.push(it),
            Ok((false, it)) => looked.tables.push(it),
            Err(reason) => looked.unusable.push(Unusable {
                path: name.clone(),
                reason,
                cure: None,
            }),
        }
    }
    looked
}

/// Keywords that a person wants to see.
const SHOWN: [&str; 14] = [
    "OBJECT", "TELESCOP", "INSTRUME", "DETECTOR", "FILTER", "WAVELNTH", "IMAGETYP", "OBSTYPE",
    "GAIN", "OFFSET", "CCD-TEMP", "XBINNING", "SITELAT", "SITELONG",
];

/// Keywords that say what a frame is of.
const ROLES: [&str; 4] = ["IMAGETYP", "OBSTYPE", "IMTYPE", "FRAME"];

fn image(folder: &Path, name: &str) -> Result<FrameFile, FitsError> {
    let mut file = ImageFile::open(&folder.join(name))?;
    let (role, role_from) = role(&file, name);
    let (time_utc, exposure_s, no_time) = match frame_times(&mut file, &HeaderMap::default()) {
        Ok(times) => {
            let at = |it: Option<&truelimb::frames::FrameTime>| {
                let it = it?;
                Some(Utc::parse(&it.reference_utc).ok()?.plus_s(it.offset_s))
            };
            match (at(times.first()), at(times.last())) {
                (Some(first), Some(last)) => (
                    Some([first.to_iso(), last.to_iso()]),
                    times.first().and_then(|it| it.exposure_s),
                    None,
                ),
                _ => (None, None, Some("its times are out of reach".to_owned())),
            }
        }
        Err(error) => (None, None, Some(error.without_path())),
    };
    let header = SHOWN
        .iter()
        .filter_map(|it| {
            let value = file.key_text(it).ok()??;
            let value: String = value
                .chars()
                .filter(|it| !it.is_control())
                .take(68)
                .collect();
            Some(((*it).to_owned(), value))
        })
        .collect();
    Ok(FrameFile {
        path: name.to_owned(),
        role,
        role_from,
        hdu: file.hdu(),
        size_px: [file.width(), file.height()],
        frames: file.planes(),
        frames_present: file.planes_present(),
        bits: file.bitpix(),
        compressed: file.is_compressed(),
        lossy: file.lossy(),
        bytes: file.bytes_on_disk(),
        time_utc,
        exposure_s,
        no_time,
        header,
    })
}

/// What a file is for: by its header, else by its name.
fn role(file: &ImageFile, name: &str) -> (Role, String) {
    let word = |text: &str| {
        let text = text.to_lowercase();
        if text.contains("dark") || text.contains("bias") {
            Some(Role::Dark)
        } else if text.contains("flat") {
            Some(Role::Flat)
        } else {
            None
        }
    };
    for keyword in ROLES {
        if let Ok(Some(text)) = file.key_text(keyword) {
            return (word(&text).unwrap_or(Role::Frames), keyword.to_owned());
        }
    }
    let stem = name.rsplit('/').next().unwrap_or(name);
    (word(stem).unwrap_or(Role::Frames), "its name".to_owned())
}

/// A table; true where it is a weather log.
fn table(folder: &Path, name: &str) -> Result<(bool, TableFile), String> {
    use std::io::{BufRead, BufReader, Read};
    let path = folder.join(name);
    let file = std::fs::File::open(&path).map_err(|it| format!("cannot be opened: {it}"))?;
    // The head is in the first lines, or it is no table.
    let head = BufReader::new(file.take(1 << 16))
        .lines()
        .map_while(Result::ok)
        .map(|it| it.trim().to_owned())
        .find(|it| !it.is_empty() && !it.starts_with('#'))
        .ok_or("it has no line of text")?;
    let columns: String = head
        .chars()
        .filter(|it| !it.is_control())
        .take(200)
        .collect();
    let mut it = TableFile {
        path: name.to_owned(),
        columns,
        rows: None,
        time_utc: None,
        fault: None,
    };
    let wanted = WeatherColumns::default();
    let has = |name: &str| it.columns.split(',').any(|it| it.trim() == name);
    if !(has(&wanted.pressure_hpa) && has(&wanted.time_utc)) {
        return Ok((false, it));
    }
    match WeatherLog::read(&path, &wanted, None) {
        Ok(log) => {
            let (first, last) = log.covers();
            it.rows = Some(log.rows());
            it.time_utc = Some([first.to_iso(), last.to_iso()]);
            Ok((true, it))
        }
        Err(faults) => {
            it.fault = faults
                .first()
                .map(|it| it.to_string().trim_end().to_owned());
            Ok((false, it))
        }
    }
}

/// The facts of a session that a frame's header gives.
pub(super) fn facts(path: &Path) -> Vec<Fact> {
    let Ok(file) = ImageFile::open(path) else {
        return Vec::new();
    };
    session::sought()
        .into_iter()
        .filter_map(|sought| {
            sought.keywords.iter().find_map(|keyword| {
                let value = file.key_f64(keyword).ok().flatten()?;
                value.is_finite().then(|| Fact {
                    key: sought.key.clone(),
                    value,
                    keyword: keyword.clone(),
                    file: path.display().to_string(),
                })
            })
        })
        .collect()
}
