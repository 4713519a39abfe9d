//! A sequence read and checked as far as its first frames, without measuring the rest.

use super::reading::{start, times};
use super::setup::{predicted, setup};
use super::sky::Sky;
use super::{Setup, is_followed, kind_word};
use crate::frames::{self, Reader};
use crate::limb::template::blur_of_width;
use crate::limb::{self, Extraction};
use crate::pipeline::Error;
use crate::session::Session;
use crate::shape::LARGEST_ZENITH_DEG;
use ndarray::Array2;
use std::sync::Arc;

/// What a reduction would meet in one sequence.
#[derive(Clone, Debug)]
pub struct Rehearsal {
    /// Index in the session file.
    pub sequence: usize,
    /// Kind, as in the session file.
    pub kind: &'static str,
    /// Files named.
    pub files: usize,
    /// Those that cannot be opened, and why.
    pub unreadable: Vec<String>,
    /// Frames in the others.
    pub frames: usize,
    /// Columns and rows of a frame.
    pub size_px: [usize; 2],
    /// Bytes of all frames on disk.
    pub bytes: u64,
    /// First and last mid-exposure, UTC.
    pub time_utc: [String; 2],
    /// Exposure of the first frame, where the header says it.
    pub exposure_s: Option<f64>,
    /// True zenith distance at mid sequence, degrees.
    pub zenith_true_deg: f64,
    /// Radius of the disk that plate scale and date predict, px.
    pub expected_radius_px: f64,
    /// What of the weather had to be stretched.
    pub weather_note: Option<String>,
    /// Time to read and measure a frame by one thread, s, by the caller's clock.
    pub frame_s: Option<f64>,
    /// Why the frames that were tried have no usable limb.
    pub no_limb: Option<String>,
    /// Why the sequence would not go to the shape.
    pub set_aside: Option<String>,
}

/// Frames that are tried, at the most.
const TRIED: usize = 3;

/// Reads the headers, the times and the calibration of one sequence, checks weather and sky, and
/// measures its first frames; `clock_s` tells seconds from any beginning.
///
/// # Errors
///
/// As the measurement itself, except that frames without a limb are told and not refused.
pub fn rehearse(
    index: usize,
    session: &Session,
    shared: &mut Vec<Arc<Setup>>,
    clock_s: &dyn Fn() -> f64,
) -> Result<Rehearsal, Error> {
    let sequence = &session.sequences[index];
    let list = frames::list(&sequence.files).map_err(|it| Error::NoFrames {
        sequence: index,
        reason: it.to_string(),
    })?;
    let unreadable = list
        .unreadable
        .iter()
        .map(|(_, it)| it.to_string())
        .collect();
    let times = times(&list, session)?;
    let (Some(first), Some(last)) = (times.first(), times.last()) else {
        return Err(Error::NoFrames {
            sequence: index,
            reason: "the files hold no frame".to_owned(),
        });
    };
    let sky = Sky::new(session, sequence, first.0, last.0)?;
    let (middle, _, station) = sky.moment(first.0.plus_s(0.5 * last.0.minus(first.0)))?;
    let setup = setup(session, sequence, &list, &middle, shared)?;
    let (radii, slopes) = predicted(&setup, &middle);
    let mean_arcsec = radii.iter().sum::<f64>() / radii.len() as f64;
    let expected_radius_px = mean_arcsec / setup.scale_arcsec_px;
    let zenith_true_deg = middle.sun.zenith_true_rad.to_degrees();

    let mut it = Rehearsal {
        sequence: index,
        kind: kind_word(sequence.kind),
        files: sequence.files.len(),
        unreadable,
        frames: list.frames.len(),
        size_px: [list.width, list.height],
        bytes: bytes(&list)?,
        time_utc: [first.0.to_iso(), last.0.to_iso()],
        exposure_s: first.1,
        zenith_true_deg,
        expected_radius_px,
        weather_note: station.and_then(|it| it.1).map(|it| it.to_string()),
        frame_s: None,
        no_limb: None,
        set_aside: (zenith_true_deg > LARGEST_ZENITH_DEG && middle.map.is_some())
            .then(|| format!("its zenith distance is above {LARGEST_ZENITH_DEG} deg")),
    };
    if !is_followed(sequence.kind) {
        return Ok(it);
    }
    let mut reader = Reader::new();
    let mut raw = Array2::zeros((0, 0));
    let mut blur_start = blur_of_width(1.5);
    for &frame in list.frames.iter().take(TRIED) {
        let began_s = clock_s();
        let tried = reader
            .read(&list, frame, &mut raw)
            .map_err(|it| it.to_string())
            .and_then(|()| {
                let extraction = Extraction {
                    table: &setup.table,
                    annulus: &setup.annulus,
                    calibration: &setup.calibration,
                    detector: setup.detector,
                    model_arcsec: &radii,
                    model_slope: &slopes,
                    blur_start,
                };
                let disk = start(&raw, &setup, expected_radius_px).map_err(|it| it.to_string())?;
                limb::extract(raw.view(), disk, &extraction).map_err(|it| it.to_string())
            });
        match tried {
            Ok(limb) => {
                // The first frame finds the blur; those after it take as long as all others will.
                let blur = limb.mean_blur();
                if blur.is_finite() {
                    blur_start = blur.clamp(0.0, setup.table.largest_blur());
                }
                it.frame_s = Some(clock_s() - began_s);
                it.no_limb = None;
            }
            Err(reason) if it.frame_s.is_none() => it.no_limb = Some(reason),
            Err(_) => {}
        }
    }
    Ok(it)
}

/// Bytes of the files that can be opened.
fn bytes(list: &frames::Sequence) -> Result<u64, Error> {
    let mut reader = Reader::new();
    let mut sum = 0;
    let mut last = None;
    for &it in &list.frames {
        if last != Some(it.file) {
            last = Some(it.file);
            sum += reader.file(list, it)?.bytes_on_disk();
        }
    }
    Ok(sum)
}
