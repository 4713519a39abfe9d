//! The session file: read, checked in full, and turned into plain values.
//!
//! [`read`] gives a [`Session`] or every fault at once: each with its line, what was found, what is
//! allowed and the cure. The files that the session names (weather log, sounding, filter curve) are
//! read and checked with it, so that no fault waits for the middle of a reduction; frames are only
//! looked for.
//!
//! | part | what it does |
//! |------|--------------|
//! | `tables` | every key with unit, range, default and meaning; the schema is made from it |
//! | `document` | the text as a tree with places, laid over its `base` |
//! | `reader` | typed values out of the tree, faults on the way |
//! | `build`, `sequences` | the checked session |
//!
//! Paths are relative to the file that names them.

use std::collections::BTreeSet;
use std::path::Path;

mod build;
mod document;
mod draft;
mod environment;
mod facts;
mod fault;
mod files;
mod filter_curve;
mod guards;
mod judge;
mod keys;
mod limb_sheet;
pub(crate) mod nearest;
mod reader;
mod resolved;
mod schema;
mod sequences;
mod sheet;
mod source;
mod sounding;
mod tables;
pub mod weather;

#[cfg(test)]
mod tests;

pub use draft::{Draft, DraftSequence, Sought, draft, sought};
pub use environment::Environment;
pub use facts::{
    Calibration, Camera, Filter, Instrument, Kind, LimbSettings, MaskImage, Moment, Projection,
    Refractivity, RotationLaw, ScaleOf, Sequence, Session, Site, Telescope, Time, Weather,
    WeatherSource,
};
pub use fault::{Fault, FaultKind, SessionError};
pub use filter_curve::FilterCurve;
pub use limb_sheet::{LIMB_COLUMNS, LimbSheet, read_limb_sheet};
pub use resolved::resolved;
pub use schema::schema;
pub use sounding::Sounding;
pub use weather::{
    EXTRAPOLATION_MIN, LONGEST_GAP_MIN, NOTED_GAP_MIN, SurfaceAir, WeatherAt, WeatherColumns,
    WeatherError, WeatherLog, WeatherNote,
};

/// Reads and checks a session file.
///
/// # Errors
///
/// A [`SessionError`] with every fault of the file, of those it stands on, and of those it names.
pub fn read(path: &Path) -> Result<Session, SessionError> {
    assembled(path, &|_, _| None, true)
}

/// Reads and checks a session file; for a number that it leaves out, the header of the sequence's
/// first frame is asked, by the frame and the keyword.
///
/// # Errors
///
/// As [`read`].
pub fn read_with_headers(
    path: &Path,
    header: &dyn Fn(&Path, &str) -> Option<f64>,
) -> Result<Session, SessionError> {
    assembled(path, header, true)
}

/// Reads and checks what a session file says of station and instrument, for a plan: there may be no
/// sequence, and patterns of frames that are not yet there name nothing.
///
/// # Errors
///
/// As [`read`].
pub fn read_station(path: &Path) -> Result<Session, SessionError> {
    assembled(path, &|_, _| None, false)
}

/// Reads and checks a session file whose frames may be gone, for a second fit of the limbs that were
/// measured in them; headers are asked where frames are still there.
///
/// # Errors
///
/// As [`read`].
pub fn read_without_frames(
    path: &Path,
    header: &dyn Fn(&Path, &str) -> Option<f64>,
) -> Result<Session, SessionError> {
    assembled(path, header, false)
}

fn assembled(
    path: &Path,
    lookup: &reader::HeaderLookup<'_>,
    files_needed: bool,
) -> Result<Session, SessionError> {
    let mut faults = fault::Faults::default();
    let document = document::read(path, &tables::SESSION, &mut faults);
    let mut read: Vec<_> = document.sources.iter().map(|it| it.path.clone()).collect();
    if document.sources.is_empty() {
        return Err(faults.into_error(path, &read));
    }
    let mut reader = reader::Reader {
        sources: &document.sources,
        faults,
        whole: document.whole,
        files_needed,
        assumed: BTreeSet::new(),
        from_headers: BTreeSet::new(),
        keywords: std::collections::BTreeMap::new(),
        frame: None,
        lookup,
    };
    let root = reader::View {
        spec: &tables::SESSION,
        path: String::new(),
        branch: document.root.clone(),
        place: None,
    };
    reader.walk(&root.branch, root.spec, "");
    build::keywords(&mut reader, &root);
    let outlines = sequences::outlines(&mut reader, &root);
    if outlines.is_empty() && files_needed && !root.has("sequence") {
        reader.missing(
            &root,
            "sequence",
            "one [[sequence]] at least".to_owned(),
            "add a [[sequence]] with `kind` and `files`".to_owned(),
        );
    }
    reader.frame = outlines.iter().find_map(|it| it.frame().cloned());
    let frames = outlines.is_empty() || outlines.iter().any(sequences::Outline::has_frames);
    let site = build::site(&mut reader, &root);
    let telescope = build::telescope(&mut reader, &root, frames);
    let instrument = build::instrument(&mut reader, &root);
    let none = Calibration::default();
    let calibration = build::calibration(&mut reader, &root.inner("calibration"), &none);
    sequences::overlaps(&mut reader, &outlines, calibration.as_ref());
    let height_m = site.as_ref().map(|it| it.height_m);
    let weather = build::weather(&mut reader, &root, height_m, &mut read);
    let refractivity = build::refractivity(&mut reader, &root);
    let time = build::time(&mut reader, &root);
    let limb = build::limb(&mut reader, &root);
    let rotation = build::rotation(&mut reader, &root);
    let mask = build::mask(&mut reader, &root, &mut read);
    let environment = build::environment(&mut reader, &root, &mut read);
    let mut common = sequences::Common::new(&root, calibration.as_ref());
    let sequences: Vec<Option<Sequence>> = outlines
        .iter()
        .map(|outline| sequences::sequence(&mut reader, outline, &mut common, &mut read))
        .collect();
    // A session without sequences still has a camera and a band; one with them has theirs.
    let first = outlines
        .iter()
        .position(sequences::Outline::has_frames)
        .or((!outlines.is_empty()).then_some(0));
    let (camera, filter) = match first.map(|index| &sequences[index]) {
        Some(Some(it)) => (Some(it.camera.clone()), Some(it.filter.clone())),
        Some(None) => (None, None),
        None => (
            common.camera(&mut reader, None, true),
            common.filter(&mut reader, None, &mut read),
        ),
    };
    let mut kept = BTreeSet::new();
    read.retain(|it| kept.insert(it.clone()));
    let order = read.clone();
    let headers = reader.keywords.clone();
    let assumed = reader.assumed.iter().cloned().collect();
    let from_headers = reader.from_headers.iter().cloned().collect();
    let session = (|| {
        Some(Session {
            path: path.to_owned(),
            site: site?,
            telescope: telescope?,
            filter: filter?,
            camera: camera?,
            instrument: instrument?,
            calibration: calibration.clone()?,
            weather: weather?,
            refractivity: refractivity?,
            time: time?,
            limb: limb?,
            rotation: rotation?,
            headers,
            mask: mask?,
            environment: environment?,
            sequences: sequences.into_iter().collect::<Option<_>>()?,
            sources: read,
            assumed,
            from_headers,
        })
    })();
    let mut faults = reader.faults;
    match session {
        Some(session) => {
            faults.extend(build::out_of_formula(&session, &root, &document.sources));
            if faults.is_empty() {
                return Ok(session);
            }
            Err(faults.into_error(path, &order))
        }
        None => Err(faults.into_error(path, &order)),
    }
}
