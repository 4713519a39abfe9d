//! The frames of a sequence read: their times, and each of them once.

use super::setup::{Setup, larger};
use crate::frames::{self, HeaderMap, Reader};
use crate::limb::template::blur_of_width;
use crate::limb::{self, Disk, LimbError, ObservedLimb};
use crate::pipeline::{Error, Progress};
use crate::session::{self, Session};
use crate::sky::Utc;
use ndarray::Array2;
use rayon::prelude::*;

/// Mid-exposures with the clock's offset taken off, and exposure times.
pub(super) fn times(
    list: &frames::Sequence,
    session: &Session,
) -> Result<Vec<(Utc, Option<f64>)>, Error> {
    let map = header_map(session);
    let mut out = Vec::with_capacity(list.frames.len());
    let mut reader = Reader::new();
    let mut last = None;
    for &it in &list.frames {
        if last == Some(it.file) {
            continue;
        }
        last = Some(it.file);
        for stamp in frames::frame_times(reader.file(list, it)?, &map)? {
            let exposure_s = stamp.exposure_s;
            let to_middle_s = match session.time.date_obs {
                session::Moment::Start => 0.5 * exposure_s.unwrap_or(0.0),
                session::Moment::Middle => 0.0,
                session::Moment::End => -0.5 * exposure_s.unwrap_or(0.0),
            };
            let utc = Utc::parse(&stamp.reference_utc)?
                .plus_s(stamp.offset_s + to_middle_s - session.time.clock_offset_s);
            out.push((utc, exposure_s));
        }
    }
    Ok(out)
}

/// Keywords of times, with the station's own first.
fn header_map(session: &Session) -> HeaderMap {
    let mut map = HeaderMap::default();
    if let Some(it) = session.headers.get("date") {
        map.date.insert(0, it.clone());
        map.cube_reference.insert(0, it.clone());
    }
    if let Some(it) = session.headers.get("exposure_s") {
        map.exposure.insert(0, it.clone());
    }
    map
}

/// Relative disagreement of the radius with the plate scale that is still believed.
const RADIUS_TOLERANCE: f64 = 0.04;

/// Where a frame's disk is, roughly; its radius must be the one that the scale predicts.
pub(super) fn start(raw: &Array2<f32>, setup: &Setup, expected_px: f64) -> Result<Disk, LimbError> {
    let mut disk = limb::locate::find(raw.view())?;
    if (disk.radius_px / expected_px - 1.0).abs() > RADIUS_TOLERANCE {
        return Err(LimbError::WrongRadius {
            found_px: disk.radius_px,
            expected_px,
        });
    }
    disk.sky_adu -= setup.dark_adu;
    disk.level_adu -= setup.dark_adu;
    Ok(disk)
}

/// Blur of the first frame that has a limb: where all frames of the sequence start.
pub(super) fn first_blur(
    list: &frames::Sequence,
    setup: &Setup,
    measure: &(impl Fn(&Array2<f32>, f64) -> Result<ObservedLimb, LimbError> + Sync),
) -> f64 {
    let fallback = blur_of_width(1.5);
    let mut raw = Array2::zeros((0, 0));
    let mut reader = Reader::new();
    for &it in list.frames.iter().take(20) {
        if reader.read(list, it, &mut raw).is_err() {
            continue;
        }
        if let Ok(limb) = measure(&raw, fallback) {
            let blur = limb.mean_blur();
            if blur.is_finite() {
                return larger(blur, 0.0).min(setup.table.largest_blur());
            }
        }
    }
    fallback
}

/// What became of a frame: the result, or the reason in a few words and in a sentence.
type FrameOutcome<T> = Result<T, (&'static str, String)>;

/// Reads every frame once, in contiguous runs for each worker, into one reused buffer, and does
/// `work` on it, with the frame's number and the worker's own sums; results in the order of the frames
/// whatever the number of threads. A run's sums end in `close`, in any order.
pub(super) fn each_frame<T: Send, A>(
    list: &frames::Sequence,
    progress: &dyn Progress,
    open: impl Fn() -> A + Sync,
    work: impl Fn(&mut A, usize, &Array2<f32>) -> Result<T, LimbError> + Sync,
    close: impl Fn(A) + Sync,
) -> Vec<FrameOutcome<T>> {
    let run = list
        .frames
        .len()
        .div_ceil(4 * rayon::current_num_threads())
        .clamp(1, 64);
    let runs: Vec<Vec<FrameOutcome<T>>> = list
        .frames
        .par_chunks(run)
        .enumerate()
        .map(|(number, frames)| {
            let mut reader = Reader::new();
            let mut raw = Array2::zeros((0, 0));
            let mut sums = open();
            let outcomes = frames
                .iter()
                .enumerate()
                .map(|(k, &it)| {
                    let read = reader.read(list, it, &mut raw);
                    progress.tick();
                    read.map_err(|it| ("could not be read", it.to_string()))?;
                    work(&mut sums, number * run + k, &raw)
                        .map_err(|it| (short(&it), it.to_string()))
                })
                .collect();
            close(sums);
            outcomes
        })
        .collect();
    runs.into_iter().flatten().collect()
}

/// A reason in a few words, to count frames by.
fn short(error: &LimbError) -> &'static str {
    match error {
        LimbError::NoDisk { .. } => "no disk in the frame",
        LimbError::TooFewCrossings { .. } => "disk cut by the field",
        LimbError::WrongRadius { .. } => "radius disagrees with the plate scale",
        LimbError::TooSmall { .. } => "disk too small",
        LimbError::TooFewSectors { .. } => "less than half of the limb usable",
        LimbError::Unstable { .. } => "no stable centre",
    }
}
