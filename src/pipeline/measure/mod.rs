//! From the frames of one sequence to limbs: read, calibrate, find the limb, each frame once.

mod sky;
mod setup;
mod reading;
mod drift;
mod scan;
mod slit;
mod rehearsal;

use super::axis_blur::{self, AxisBlur};
use super::limb_table::Given;
use super::{Error, Progress};
use crate::air::{BandInAir, Conditions};
use crate::frames::{self, FrameRef};
use crate::limb::blemish::{self, Blemish};
use crate::limb::residual::{Facing, Residuals};
use crate::limb::{self, Extraction, LimbError, ObservedLimb};
use crate::refraction::{self, Moment};
use crate::session::{Kind, Session, WeatherNote};
use crate::shape::{AirResponse, LARGEST_ZENITH_DEG};
use crate::sky::{Parity, Utc};
use ndarray::Array2;
use reading::{each_frame, first_blur, start, times};
use setup::setup;
use sky::interpolated;
use std::sync::{Arc, Mutex, PoisonError};

pub use drift::{MeasuredDrift, measure_drift};
pub use rehearsal::{Rehearsal, rehearse};
pub use scan::{MeasuredScan, MeasuredTransit, measure_scan};
pub use setup::Setup;
pub(super) use setup::{limb_optics, predicted};
pub(super) use sky::Sky;
pub use sky::place;

/// One frame whose limb was measured.
#[derive(Clone, Debug)]
pub struct MeasuredFrame {
    /// Index of the frame in its sequence.
    pub frame: usize,
    /// Where it lies.
    pub source: FrameRef,
    /// Mid-exposure.
    pub utc: Utc,
    /// Its moment: Sun, camera, map of the disk.
    pub moment: Moment,
    /// The limb as it arrived.
    pub limb: ObservedLimb,
    /// How the limb answers the air.
    pub air: AirResponse,
}

/// A frame that was set aside.
#[derive(Clone, Debug, PartialEq)]
pub struct LostFrame {
    /// Index in the sequence.
    pub frame: usize,
    /// Short reason, the same for all frames lost the same way.
    pub reason: &'static str,
    /// The whole sentence.
    pub detail: String,
}

/// One sequence, measured.
#[derive(Clone, Debug)]
pub struct MeasuredSequence {
    /// Index in the session file.
    pub index: usize,
    /// Mid-exposures of the first and the last frame.
    pub span_utc: (Utc, Utc),
    /// Whether the limbs come from a table, so that there are no pixels.
    pub from_table: bool,
    /// Whether another program measured them.
    pub elsewhere: bool,
    /// Of limbs from a table: variance of their noise over its expectation, with its uncertainty.
    pub saved_noise: Option<(f64, f64)>,
    /// Whether a flat field was divided out.
    pub has_flat: bool,
    /// Of limbs from a table, by frame: sectors that the run which measured them left out.
    pub saved_mask: Vec<Vec<bool>>,
    /// Its files and frames.
    pub list: frames::Sequence,
    /// Frames with a limb, in order of time.
    pub frames: Vec<MeasuredFrame>,
    /// Frames without.
    pub lost: Vec<LostFrame>,
    /// Sectors left out of the whole sequence, and why.
    pub blemishes: Vec<Option<Blemish>>,
    /// Bins of the position angle from solar north, a full turn, that are left out of every frame
    /// wherever they fall; empty for none.
    pub sun_masked: Vec<bool>,
    /// Share of a sector and frame left out because the brightness passed, a cloud or a bird.
    pub passing: f64,
    /// The lasting second harmonic of the blur, and what it does to the radius.
    pub axis_blur: AxisBlur,
    /// What the frames' pixels leave over inside the limb.
    pub residuals: Residuals,
    /// What stacking and the budget need again.
    pub setup: Arc<Setup>,
    /// Conditions at mid sequence.
    pub conditions: Option<Conditions>,
    /// What had to be stretched for them.
    pub weather_note: Option<WeatherNote>,
    /// The moment of mid sequence.
    pub middle: Moment,
    /// Its time.
    pub middle_utc: Utc,
    /// Response to the air at mid sequence.
    pub middle_air: AirResponse,
    /// Relative change of the refractivity by pressure, temperature, humidity, wavelength.
    pub sensitivities: [f64; 4],
    /// The filter's band in the air; none above it.
    pub band: Option<BandInAir>,
    /// Why it does not go to the shape.
    pub set_aside: Option<String>,
    /// Middle of the exposure after its start, s.
    pub exposure_s: f64,
}

/// Measures one sequence of whole-disk frames, or takes its limbs as a table gives them.
///
/// # Errors
///
/// What makes the sequence as a whole unusable: files that disagree, times that cannot be read, a
/// weather log that does not cover them, a Sun below the horizon, or no frame with a limb at all.
pub(in crate::pipeline) fn measure(
    index: usize,
    session: &Session,
    shared: &mut Vec<Arc<Setup>>,
    given: Option<&Given>,
    progress: &dyn Progress,
) -> Result<MeasuredSequence, Error> {
    let sequence = &session.sequences[index];
    let (list, times) = if let Some(it) = given {
        it.listed()
    } else {
        // Files that cannot be read cost this sequence, not the others.
        let list = frames::list(&sequence.files).map_err(|it| Error::NoFrames {
            sequence: index,
            reason: it.to_string(),
        })?;
        let times = times(&list, session)?;
        (list, times)
    };
    let (Some(first), Some(last)) = (times.first(), times.last()) else {
        return Err(Error::NoFrames {
            sequence: index,
            reason: "the files hold no frame".to_owned(),
        });
    };
    let sky = Sky::new(session, sequence, first.0, last.0)?;
    let duration_s = last.0.minus(first.0);
    let middle_utc = first.0.plus_s(0.5 * duration_s);
    let (mut middle, middle_air, station) = sky.moment(middle_utc)?;
    let hung = |frame| given.and_then(|it| it.orientation(frame));
    middle.orientation = hung(times.len() / 2).unwrap_or(middle.orientation);
    let setup = setup(session, sequence, &list, &middle, shared)?;
    let nodes = sky.nodes(first.0, duration_s)?;
    let model_radii = predicted(&setup, &middle);
    let expected_px =
        model_radii.0.iter().sum::<f64>() / model_radii.0.len() as f64 / setup.scale_arcsec_px;

    let extraction = |blur_start: f64| Extraction {
        table: &setup.table,
        annulus: &setup.annulus,
        calibration: &setup.calibration,
        detector: setup.detector,
        model_arcsec: &model_radii.0,
        model_slope: &model_radii.1,
        blur_start,
    };
    let measure_one = |raw: &Array2<f32>, blur_start: f64| -> Result<ObservedLimb, LimbError> {
        let start = start(raw, &setup, expected_px)?;
        limb::extract(raw.view(), start, &extraction(blur_start))
    };
    let mut moments: Vec<Option<Result<Moment, Error>>> = times
        .iter()
        .enumerate()
        .map(|(frame, &(utc, _))| {
            Some(sky.moment(utc).map(|(mut moment, ..)| {
                moment.orientation = hung(frame).unwrap_or(moment.orientation);
                moment
            }))
        })
        .collect();
    let facings: Vec<Option<Facing>> = moments
        .iter()
        .map(|it| it.as_ref()?.as_ref().ok().map(facing))
        .collect();
    let empty = Residuals::new(setup.annulus.sectors());
    let residuals = Mutex::new(empty.clone());
    let outcomes = if let Some(it) = given {
        it.limbs(session, &setup, &model_radii.0)
    } else {
        let blur_start = first_blur(&list, &setup, &measure_one);
        progress.stage(
            &format!("sequence {}: limbs", index + 1),
            list.frames.len() as u64,
        );
        each_frame(
            &list,
            progress,
            || empty.clone(),
            |sums, frame, raw| {
                let limb = measure_one(raw, blur_start)?;
                if let Some(Some(facing)) = facings.get(frame) {
                    sums.add(raw.view(), &limb, *facing, &extraction(blur_start));
                }
                Ok(limb)
            },
            // Whole numbers: the order of the runs does not matter.
            |sums| {
                let mut all = residuals.lock().unwrap_or_else(PoisonError::into_inner);
                all.merge(&sums);
            },
        )
    };

    let mut measured = Vec::new();
    let mut lost: Vec<LostFrame> = given.map_or_else(Vec::new, |it| it.unreadable().to_vec());
    let unreadable = list.unreadable.iter().map(|(_, it)| LostFrame {
        frame: 0,
        reason: "file could not be opened",
        detail: it.to_string(),
    });
    lost.extend(unreadable);
    for (frame, outcome) in outcomes.into_iter().enumerate() {
        match outcome {
            Ok(limb) => {
                let utc = times[frame].0;
                let Some(moment) = moments[frame].take() else {
                    continue;
                };
                let moment = moment?;
                let air = interpolated(&nodes, utc.minus(first.0));
                measured.push(MeasuredFrame {
                    frame,
                    source: list.frames[frame],
                    utc,
                    moment,
                    limb,
                    air,
                });
            }
            Err((reason, detail)) => lost.push(LostFrame {
                frame,
                reason,
                detail,
            }),
        }
    }
    if measured.is_empty() {
        let reason = lost
            .first()
            .map_or_else(|| "no frame".to_owned(), |it| it.detail.clone());
        return Err(Error::NoFrames {
            sequence: index,
            reason,
        });
    }
    let blemishes = blemish::judge(&measured.iter().map(|it| &it.limb).collect::<Vec<_>>());
    let mut limbs: Vec<&mut ObservedLimb> = measured.iter_mut().map(|it| &mut it.limb).collect();
    let passing = blemish::leave_out_passing(&mut limbs, &blemishes);
    let axis_blur = axis_blur::second_harmonic(measured.iter().map(|it| &it.limb));
    let zenith_deg = middle.sun.zenith_true_rad.to_degrees();
    let set_aside = (zenith_deg > LARGEST_ZENITH_DEG && middle.map.is_some()).then(|| {
        format!(
            "zenith distance {zenith_deg:.1} deg is above {LARGEST_ZENITH_DEG} deg, where refraction is not known well enough for the shape"
        )
    });
    let sensitivities = match &station {
        Some((it, _)) => refraction::refractivity_sensitivities(it, sky.wavelength_nm())?,
        None => [0.0; 4],
    };
    let middle_response = refraction::response(
        &middle_air,
        &middle.sun,
        sky.zenith_rate_arcmin_s(middle_utc)?,
    )?;
    Ok(MeasuredSequence {
        index,
        span_utc: (first.0, last.0),
        from_table: given.is_some(),
        elsewhere: given.is_some_and(|it| it.elsewhere),
        saved_noise: given.and_then(|it| it.noise),
        has_flat: given.map_or(!sequence.calibration.flat.is_empty(), |it| it.has_flat),
        saved_mask: given.map_or_else(Vec::new, Given::mask),
        list,
        frames: measured,
        lost,
        blemishes,
        sun_masked: Vec::new(),
        passing,
        axis_blur,
        residuals: residuals
            .into_inner()
            .unwrap_or_else(PoisonError::into_inner),
        setup,
        conditions: station.as_ref().map(|it| it.0.conditions),
        weather_note: station.and_then(|it| it.1),
        middle,
        middle_utc,
        middle_air: middle_response,
        sensitivities,
        band: sky.band,
        set_aside,
        exposure_s: times[0].1.unwrap_or(0.0),
    })
}

/// Mid-exposure, and the exposure in seconds where it is known.
pub type Timed = (Utc, Option<f64>);

/// The frames of a sequence, and of each the mid-exposure, the clock's offset taken off, and the exposure
/// in seconds where the header tells it.
///
/// # Errors
///
/// When the files or their times cannot be read.
pub fn times_of(session: &Session, index: usize) -> Result<(frames::Sequence, Vec<Timed>), Error> {
    let list = frames::list(&session.sequences[index].files)?;
    let times = times(&list, session)?;
    Ok((list, times))
}

/// How the detector lies on the Sun at a moment.
pub(super) fn facing(moment: &Moment) -> Facing {
    Facing {
        zero_rad: moment.orientation.position_angle_rad(0.0) - moment.sun.axis_rad,
        forward: moment.orientation.parity == Parity::Sky,
    }
}

/// Whether a sequence is of whole disks that are followed.
pub fn is_followed(kind: Kind) -> bool {
    matches!(kind, Kind::Burst | Kind::Roll)
}

/// The word of the session file for a kind.
pub fn kind_word(kind: Kind) -> &'static str {
    match kind {
        Kind::Burst => "burst",
        Kind::Roll => "roll",
        Kind::Drift => "drift",
        Kind::Scan => "scan",
        Kind::Limbs => "limbs",
    }
}
