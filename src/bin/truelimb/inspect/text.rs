//! What was found, for a person.

use super::Found;
use super::files::FrameFile;
use super::groups::Group;
use crate::commands::counted;
use crate::dry_run::size;
use std::fmt::Write as _;
use truelimb::sky::Utc;

/// Files that cannot be used, and keys, of which more are only counted.
const MOST_LINES: usize = 40;

pub(super) fn of(found: &Found) -> String {
    let mut out = Vec::new();
    let frames: usize = found.sequences.iter().map(|it| it.frames).sum();
    out.push(format!(
        "{}: {} in {}",
        found.folder,
        counted(frames, "frame"),
        counted(found.sequences.len(), "sequence")
    ));
    for (index, it) in found.sequences.iter().enumerate() {
        out.push(sequence(index, it));
    }
    for (name, files) in [("dark", &found.dark), ("flat", &found.flat)] {
        for it in files {
            out.push(format!(
                "{name}: {}: {}",
                it.path,
                counted(it.frames, "frame")
            ));
        }
    }
    for it in &found.weather {
        out.push(weather(it, &found.sequences));
    }
    for it in &found.tables {
        out.push(match &it.fault {
            Some(fault) => format!("weather that cannot be used: {fault}"),
            None => format!("table: {}: {}", it.path, it.columns),
        });
    }
    for it in &found.sessions {
        out.push(match (&it.first_fault, it.faults) {
            (None, _) => format!("session: {}: complete", it.path),
            (Some(first), faults) => format!(
                "session: {}: {}, the first: {first}",
                it.path,
                counted(faults, "fault")
            ),
        });
    }
    few(&mut out, &found.without_time, |it| {
        format!(
            "no time: {}: {}",
            it.path,
            it.no_time.as_deref().unwrap_or_default()
        )
    });
    few(&mut out, &found.unusable, |it| {
        let cure = it.cure.map(|it| format!("; {it}")).unwrap_or_default();
        format!("cannot be used: {}: {}{cure}", it.path, it.reason)
    });
    for it in &found.from_headers {
        out.push(format!(
            "from the headers: {} = {} ({})",
            it.key, it.value, it.keyword
        ));
    }
    if let Some(first) = found.sequences.first().and_then(|it| it.members.first())
        && !first.header.is_empty()
    {
        let cards: Vec<String> = first
            .header
            .iter()
            .map(|(keyword, value)| format!("{keyword} = {value}"))
            .collect();
        out.push(format!("header of {}: {}", first.path, cards.join(", ")));
    }
    if !found.missing.is_empty() {
        out.push(format!(
            "a session file must still say {}:",
            counted(found.missing.len(), "fact")
        ));
        let width = found
            .missing
            .iter()
            .map(|it| it.key.len())
            .max()
            .unwrap_or(0);
        for it in &found.missing {
            out.push(format!(
                "  {:<width$}  {}; {}",
                it.key,
                it.meaning.trim_end_matches('.'),
                it.allowed
            ));
        }
    }
    out.join("\n")
}

fn few<T>(out: &mut Vec<String>, all: &[T], line: impl Fn(&T) -> String) {
    out.extend(all.iter().take(MOST_LINES).map(line));
    if all.len() > MOST_LINES {
        out.push(format!("and {} more of such", all.len() - MOST_LINES));
    }
}

fn sequence(index: usize, it: &Group) -> String {
    let exposure = it
        .exposure_s
        .map(|it| format!(", exposures of {} ms", 1000.0 * it))
        .unwrap_or_default();
    let cadence = it
        .cadence_s
        .map(|it| format!(", one every {it:.2} s"))
        .unwrap_or_default();
    let first = it.members.first();
    let kind = first.map(of_pixels).unwrap_or_default();
    let cut: usize = it
        .members
        .iter()
        .map(|it| it.frames - it.frames_present)
        .sum();
    let cut = if cut > 0 {
        format!("; {} cut off at the end of a file", counted(cut, "frame"))
    } else {
        String::new()
    };
    let names = if it.files.len() > 4 {
        format!(
            "{} and {} more",
            it.files[..3].join(", "),
            it.files.len() - 3
        )
    } else {
        it.files.join(", ")
    };
    format!(
        "sequence {}: {names}: {} in {}, {}, {} x {} px, {kind}, {} to {}{exposure}{cadence}; \
         by its name a {}{cut}",
        index + 1,
        counted(it.frames, "frame"),
        counted(it.members.len(), "file"),
        size(it.bytes),
        it.size_px[0],
        it.size_px[1],
        it.time_utc[0],
        it.time_utc[1],
        it.kind,
    )
}

fn of_pixels(it: &FrameFile) -> String {
    let kind = if it.bits < 0 { "floats" } else { "integers" };
    let packed = match (&it.lossy, it.compressed) {
        (Some(how), _) => format!(", packed with loss: {how}"),
        (None, true) => ", packed".to_owned(),
        (None, false) => String::new(),
    };
    format!("{}-bit {kind}{packed}", it.bits.abs())
}

fn weather(it: &super::files::TableFile, sequences: &[Group]) -> String {
    let mut text = format!("weather: {}", it.path);
    if let (Some(rows), Some([first, last])) = (it.rows, &it.time_utc) {
        let _ = write!(text, ": {}, {first} to {last}", counted(rows, "reading"));
        let parsed = |text: &str| Utc::parse(text).ok();
        let outside = sequences
            .iter()
            .enumerate()
            .filter(|(_, group)| {
                let pair = |a: &str, b: &str| Some(parsed(a)?.minus(parsed(b)?));
                pair(&group.time_utc[0], first).is_some_and(|it| it < 0.0)
                    || pair(&group.time_utc[1], last).is_some_and(|it| it > 0.0)
            })
            .map(|(index, _)| (index + 1).to_string())
            .collect::<Vec<_>>();
        if sequences.is_empty() {
            return text;
        }
        if outside.is_empty() {
            text.push_str("; covers every sequence");
        } else {
            let _ = write!(text, "; does not cover sequence {}", outside.join(", "));
        }
    }
    text
}
