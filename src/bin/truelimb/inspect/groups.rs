//! Files of frames put together into sequences, as an observer would.

use super::files::{FrameFile, Listing};
use serde::Serialize;
use truelimb::sky::Utc;

/// Frames that belong together.
#[derive(Debug, Serialize)]
pub(super) struct Group {
    /// Kind, by the name of the files; a guess.
    pub(super) kind: &'static str,
    /// A pattern that names these files and no others, or their names.
    pub(super) files: Vec<String>,
    pub(super) size_px: [usize; 2],
    pub(super) frames: usize,
    pub(super) bytes: u64,
    /// First and last start of an exposure, UTC.
    pub(super) time_utc: [String; 2],
    pub(super) exposure_s: Option<f64>,
    /// Mean time from frame to frame.
    pub(super) cadence_s: Option<f64>,
    pub(super) members: Vec<FrameFile>,
}

impl Group {
    pub(super) fn first_path(&self) -> Option<&str> {
        self.members.first().map(|it| it.path.as_str())
    }
}

/// A longer pause begins a new sequence: turning an instrument takes as long.
const PAUSE_S: f64 = 60.0;

/// Puts files together by name, size and time. Cubes named as rolls stand alone, each at its angle.
pub(super) fn group(files: Vec<FrameFile>, listing: &Listing) -> Vec<Group> {
    let mut timed: Vec<(String, Utc, Utc, FrameFile)> = files
        .into_iter()
        .filter_map(|it| {
            let [first, last] = it.time_utc.as_ref()?;
            let (first, last) = (Utc::parse(first).ok()?, Utc::parse(last).ok()?);
            Some((prefix(&it.path).to_owned(), first, last, it))
        })
        .collect();
    if let Some(origin) = timed.first().map(|it| it.1) {
        timed.sort_by(|a, b| {
            (&a.0, a.3.size_px)
                .cmp(&(&b.0, b.3.size_px))
                .then(a.1.minus(origin).total_cmp(&b.1.minus(origin)))
        });
    }
    let mut groups: Vec<(String, Utc, Vec<FrameFile>)> = Vec::new();
    for (prefix, first, last, file) in timed {
        let alone = kind(&file.path) == "roll" && file.frames > 1;
        match groups.last_mut() {
            Some((name, end, members))
                if *name == prefix
                    && !alone
                    && members[0].size_px == file.size_px
                    && first.minus(*end).abs() < PAUSE_S =>
            {
                *end = last;
                members.push(file);
            }
            _ => groups.push((prefix, last, vec![file])),
        }
    }
    let mut out: Vec<Group> = groups
        .into_iter()
        .filter_map(|(prefix, _, members)| finished(&prefix, members, listing))
        .collect();
    out.sort_by(|a, b| a.time_utc[0].cmp(&b.time_utc[0]));
    out
}

fn finished(prefix: &str, members: Vec<FrameFile>, listing: &Listing) -> Option<Group> {
    let first = members.first()?;
    let start = first.time_utc.as_ref()?[0].clone();
    let end = members.last()?.time_utc.as_ref()?[1].clone();
    let frames = members.iter().map(|it| it.frames).sum();
    let length_s = Utc::parse(&end).ok()?.minus(Utc::parse(&start).ok()?);
    Some(Group {
        kind: kind(&first.path),
        files: named(prefix, &members, listing),
        size_px: first.size_px,
        frames,
        bytes: members.iter().map(|it| it.bytes).sum(),
        exposure_s: first.exposure_s,
        cadence_s: (frames > 1).then(|| length_s / (frames as f64 - 1.0)),
        time_utc: [start, end],
        members,
    })
}

/// A pattern that fits these files and no other of the folder, else their names.
fn named(prefix: &str, members: &[FrameFile], listing: &Listing) -> Vec<String> {
    let names: Vec<String> = members.iter().map(|it| it.path.clone()).collect();
    let ends: Vec<&str> = names.iter().map(|it| ending(it)).collect();
    let plain = !prefix.contains(['*', '?', '[', ']']);
    if names.len() > 1 && plain && ends.iter().all(|it| *it == ends[0]) {
        let fits = |it: &&String| {
            it.strip_prefix(prefix)
                .and_then(|it| it.strip_suffix(ends[0]))
                .is_some_and(|it| !it.contains('/'))
        };
        if listing.images.iter().filter(fits).count() == names.len() {
            return vec![format!("{prefix}*{}", ends[0])];
        }
    }
    names
}

/// The name without its number and what follows it.
fn prefix(path: &str) -> &str {
    let stem = &path[..path.len() - ending(path).len()];
    stem.trim_end_matches(|it: char| it.is_ascii_digit())
}

/// The dot and what follows it, `.gz` with what stands before it.
fn ending(path: &str) -> &str {
    let start = path.rfind('/').map_or(0, |it| it + 1);
    let name = &path[start..];
    let plain = name.strip_suffix(".gz").unwrap_or(name);
    plain.rfind('.').map_or("", |at| &name[at..])
}

/// The kind of a sequence by the name of its files.
fn kind(path: &str) -> &'static str {
    let name = path.to_lowercase();
    ["roll", "drift", "scan"]
        .into_iter()
        .find(|it| name.contains(it))
        .unwrap_or("burst")
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn names_are_taken_apart() {
        for (path, stem, end) in [
            ("burst_0012.fits", "burst_", ".fits"),
            ("a/b12.fit.gz", "a/b", ".fit.gz"),
            ("sun", "sun", ""),
            ("day.1/x3.fits", "day.1/x", ".fits"),
        ] {
            assert_eq!((prefix(path), ending(path)), (stem, end), "{path}");
        }
    }
}
