//! `truelimb reduce --dry-run`: everything read and checked, nothing written.

use crate::Ending;
use crate::arguments::Reduce;
use crate::commands::{Failure, counted, header_number, json, print};
use crate::progress::{duration, say};
use serde::Serialize;
use std::time::Instant;
use truelimb::pipeline::measure::{Rehearsal, is_followed, rehearse};
use truelimb::pipeline::{Options, products};
use truelimb::session::{self, Session};

/// What a reduction would do.
#[derive(Debug, Serialize)]
struct Plan {
    schema_version: u32,
    session: String,
    output: String,
    sequences: Vec<PlannedSequence>,
    frames: usize,
    bytes: u64,
    threads: usize,
    /// About how long, s.
    seconds: Option<f64>,
    /// About how much memory at the most, bytes.
    memory_bytes: u64,
    products: Vec<String>,
    already_there: Vec<String>,
    assumed: Vec<String>,
    from_headers: Vec<String>,
    warnings: Vec<String>,
}

#[derive(Debug, Serialize)]
struct PlannedSequence {
    sequence: usize,
    kind: &'static str,
    files: usize,
    frames: usize,
    size_px: [usize; 2],
    time_utc: [String; 2],
    exposure_s: Option<f64>,
    zenith_true_deg: f64,
    expected_radius_px: f64,
    seconds_per_frame: Option<f64>,
    set_aside: Option<String>,
}

/// Time of a whole reduction over that of its limbs, by the demo on two cores: the stack reads each
/// frame again, and the tables before and the report after take a fixed time.
const WHOLE_OVER_LIMBS: f64 = 1.7;

/// Fixed part, s.
const FIXED_S: f64 = 5.0;

/// What the program takes without any frame, bytes.
const BASE_BYTES: u64 = 80 << 20;

/// `truelimb reduce --dry-run`.
pub(crate) fn dry_run(it: &Reduce, options: &Options, quiet: bool) -> Result<Ending, Failure> {
    let session = session::read_with_headers(&it.session, &header_number)?;
    let began = Instant::now();
    let clock_s = || began.elapsed().as_secs_f64();
    let mut shared = Vec::new();
    let mut rehearsals = Vec::new();
    let mut warnings = Vec::new();
    let mut first_error = None;
    for (index, sequence) in session.sequences.iter().enumerate() {
        match rehearse(index, &session, &mut shared, &clock_s) {
            Ok(it) => rehearsals.push(it),
            // A reduction goes on without it, as long as another is left.
            Err(error @ truelimb::Error::NoFrames { .. }) => {
                warnings.push(error.to_string());
                if is_followed(sequence.kind) {
                    first_error = first_error.or(Some(error));
                }
            }
            Err(error) => return Err(error.into()),
        }
    }
    let good = |it: &&Rehearsal| it.set_aside.is_none() && it.frame_s.is_some();
    if rehearsals.iter().filter(good).count() == 0 {
        if let Some(reason) = rehearsals.iter().find_map(|it| {
            let reason = it.no_limb.clone()?;
            Some(truelimb::Error::NoFrames {
                sequence: it.sequence,
                reason,
            })
        }) {
            return Err(reason.into());
        }
        if let Some(error) = first_error {
            return Err(error.into());
        }
        if rehearsals.iter().all(|it| it.set_aside.is_none()) {
            return Err(truelimb::Error::NoSequence.into());
        }
    }
    for it in &rehearsals {
        notes(it, &mut warnings);
    }
    let plan = plan(it, options, &session, &rehearsals, warnings);
    if it.json {
        print(&json(&plan)?);
    } else {
        print(&text(&plan));
    }
    if !quiet && !it.json {
        say("nothing was written");
    }
    Ok(Ending::Done)
}

/// What a person should know of a sequence before it is reduced.
fn notes(it: &Rehearsal, warnings: &mut Vec<String>) {
    let mut note = |text: &str| warnings.push(format!("sequence {}: {text}", it.sequence + 1));
    for unreadable in &it.unreadable {
        note(&format!("left out: {unreadable}"));
    }
    if let Some(reason) = &it.no_limb {
        note(&format!("the first frames have no usable limb: {reason}"));
    }
    if let Some(text) = &it.weather_note {
        note(text);
    }
    if let Some(reason) = &it.set_aside {
        note(&format!("would be set aside: {reason}"));
    }
}

fn plan(
    it: &Reduce,
    options: &Options,
    session: &Session,
    rehearsals: &[Rehearsal],
    warnings: Vec<String>,
) -> Plan {
    let threads = rayon::current_num_threads();
    let measured: Vec<&Rehearsal> = rehearsals
        .iter()
        .filter(|it| it.frame_s.is_some())
        .collect();
    let limbs_s: f64 = measured
        .iter()
        .map(|it| it.frame_s.unwrap_or(0.0) * it.frames as f64 / threads as f64)
        .sum();
    let whole = if options.stack { WHOLE_OVER_LIMBS } else { 1.0 };
    let products: Vec<String> = products::NAMES
        .iter()
        .filter(|it| options.stack || **it != "stack.fits")
        .map(|it| (*it).to_owned())
        .collect();
    let already_there = products
        .iter()
        .filter(|name| it.output.join(name).exists())
        .cloned()
        .collect();
    Plan {
        schema_version: 1,
        session: it.session.display().to_string(),
        output: it.output.display().to_string(),
        frames: rehearsals.iter().map(|it| it.frames).sum(),
        bytes: rehearsals.iter().map(|it| it.bytes).sum(),
        threads,
        seconds: (!measured.is_empty()).then_some(FIXED_S + whole * limbs_s),
        memory_bytes: memory_bytes(&measured, options, threads),
        products,
        already_there,
        assumed: session.assumed.clone(),
        from_headers: session.from_headers.clone(),
        warnings,
        sequences: rehearsals
            .iter()
            .map(|it| PlannedSequence {
                sequence: it.sequence,
                kind: it.kind,
                files: it.files,
                frames: it.frames,
                size_px: it.size_px,
                time_utc: it.time_utc.clone(),
                exposure_s: it.exposure_s,
                zenith_true_deg: it.zenith_true_deg,
                expected_radius_px: it.expected_radius_px,
                seconds_per_frame: it.frame_s,
                set_aside: it.set_aside.clone(),
            })
            .collect(),
    }
}

/// Largest memory: a frame and its raw numbers for each worker, dark, flat and mask, and grids of
/// image, variance and weight for every sequence, its twin and the whole.
fn memory_bytes(measured: &[&Rehearsal], options: &Options, threads: usize) -> u64 {
    let pixels = |it: &Rehearsal| it.size_px[0] as u64 * it.size_px[1] as u64;
    let largest = measured.iter().map(|it| pixels(it)).max().unwrap_or(0);
    let side = |it: &Rehearsal| (2.3 * it.expected_radius_px).ceil() as u64;
    let stack = measured.iter().map(|it| side(it).pow(2)).max().unwrap_or(0);
    let grids = if options.stack {
        2 * measured.len() as u64 + 2
    } else {
        0
    };
    BASE_BYTES + largest * (6 * threads as u64 + 9) + stack * 24 * grids
}

fn text(plan: &Plan) -> String {
    let mut out = vec![format!(
        "{}: {} of {} on disk, {}",
        plan.session,
        counted(plan.frames, "frame"),
        size(plan.bytes),
        counted(plan.sequences.len(), "sequence")
    )];
    for it in &plan.sequences {
        let exposure = it
            .exposure_s
            .map(|it| format!(", exposures of {} ms", 1000.0 * it))
            .unwrap_or_default();
        out.push(format!(
            "sequence {}: {}, {} of {} x {} px in {}{exposure}, {} to {}, {:.1} deg from the zenith, radius of {:.1} px expected",
            it.sequence + 1,
            it.kind,
            counted(it.frames, "frame"),
            it.size_px[0],
            it.size_px[1],
            counted(it.files, "file"),
            it.time_utc[0],
            it.time_utc[1],
            it.zenith_true_deg,
            it.expected_radius_px,
        ));
    }
    for (what, keys) in [
        ("default taken", &plan.assumed),
        ("from the headers", &plan.from_headers),
    ] {
        if !keys.is_empty() {
            out.push(format!("{what}: {}", keys.join(", ")));
        }
    }
    let time = plan
        .seconds
        .map_or_else(|| "an unknown time".to_owned(), duration);
    out.push(format!(
        "would take about {time} with {} and up to about {}",
        counted(plan.threads, "thread"),
        size(plan.memory_bytes)
    ));
    out.push(format!(
        "would write into {}: {}",
        plan.output,
        plan.products.join(", ")
    ));
    if !plan.already_there.is_empty() {
        out.push(format!("would replace: {}", plan.already_there.join(", ")));
    }
    if !plan.warnings.is_empty() {
        out.push(format!("{}:", counted(plan.warnings.len(), "warning")));
    }
    out.extend(plan.warnings.iter().map(|it| format!("warning: {it}")));
    out.join("\n")
}

/// A number of bytes as people say it.
pub(crate) fn size(bytes: u64) -> String {
    let mb = bytes as f64 / 1e6;
    if mb < 1000.0 {
        format!("{mb:.1} MB")
    } else {
        format!("{:.2} GB", mb / 1000.0)
    }
}
