//! From the frames of one sequence to limbs: read, calibrate, find the limb, each frame once.

use super::{Error, Progress, band};
use crate::air::{BandInAir, Conditions, ProfileSettings, StationAir, local_radius_m};
use crate::calibrate::{self, Calibration, Detector};
use crate::disk::{Darkening, SolarEdge};
use crate::frames::{self, FrameRef, HeaderMap, Reader};
use crate::limb::blemish::{self, Blemish};
use crate::limb::geometry::Annulus;
use crate::limb::template::{EdgeTable, blur_of_width};
use crate::limb::{self, Disk, Extraction, LimbError, ObservedLimb};
use crate::optics::limb_profile::LimbOptics;
use crate::optics::{Exposure, Telescope};
use crate::refraction::{self, Air, Moment, Plate};
use crate::session::{self, Kind, Sequence, Session, WeatherNote};
use crate::shape::{AirResponse, LARGEST_ZENITH_DEG};
use crate::sky::{self, Place, SunTrack, Utc};
use crate::units::{ARCMIN_RAD, ARCSEC_RAD, DEG_RAD};
use ndarray::Array2;
use rayon::prelude::*;
use std::path::PathBuf;
use std::sync::Arc;

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
    /// Its files and frames.
    pub list: frames::Sequence,
    /// Frames with a limb, in order of time.
    pub frames: Vec<MeasuredFrame>,
    /// Frames without.
    pub lost: Vec<LostFrame>,
    /// Sectors left out of the whole sequence, and why.
    pub blemishes: Vec<Option<Blemish>>,
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

/// What belongs to a camera and filter: made once, shared by the sequences that use them.
#[derive(Clone, Debug)]
pub struct Setup {
    /// Tables of the blurred limb.
    pub table: EdgeTable,
    /// Pixels of the annulus.
    pub annulus: Annulus,
    /// Dark, flat, bad pixels.
    pub calibration: Calibration,
    /// Median of the dark, ADU.
    pub dark_adu: f64,
    /// Gain, read noise, saturation.
    pub detector: Detector,
    /// The plate.
    pub plate: Plate,
    /// Plate scale, arcsec a pixel.
    pub scale_arcsec_px: f64,
    /// Optics of the template.
    pub optics: LimbOptics,
    /// Limb inside and outside the annulus, arcsec.
    pub window_arcsec: (f64, f64),
    key: SetupKey,
}

type SetupKey = (Vec<PathBuf>, Vec<PathBuf>, usize, usize, [u64; 4]);

/// The place of the session's telescope.
pub fn place(session: &Session) -> Place {
    let site = &session.site;
    Place {
        latitude_rad: site.latitude_deg * DEG_RAD,
        longitude_rad: site.longitude_deg * DEG_RAD,
        height_m: site.height_m,
        deflection_north_rad: site.deflection_north_arcsec * ARCSEC_RAD,
        deflection_east_rad: site.deflection_east_arcsec * ARCSEC_RAD,
    }
}

/// The air over the station at a time, towards an azimuth; none above the air.
fn station_air(
    session: &Session,
    at: Utc,
    azimuth_rad: f64,
) -> Result<Option<(StationAir, Option<WeatherNote>)>, Error> {
    let Some((reading, note)) = session.weather.at(at)? else {
        return Ok(None);
    };
    let settings = &session.refractivity;
    let latitude_rad = session.site.latitude_deg * DEG_RAD;
    let station = StationAir {
        site: crate::air::Site {
            latitude_rad,
            height_m: session.site.height_m,
        },
        conditions: Conditions {
            pressure_hpa: reading.pressure_hpa,
            temperature_c: reading.temperature_c,
            relative_humidity: reading.relative_humidity,
            co2_ppm: settings.co2_ppm,
        },
        formula: settings.formula,
        convention: settings.vapour,
        settings: ProfileSettings {
            lapse_k_per_m: settings.lapse_k_per_km / 1000.0,
            tropopause_m: settings.tropopause_m,
            ..ProfileSettings::default()
        },
        local_radius_m: local_radius_m(latitude_rad, azimuth_rad),
        sounding: session.weather.profile.as_ref().map(|it| it.levels.clone()),
    };
    Ok(Some((station, note)))
}

/// Longest time between two nodes at which the response to the air is worked out, s.
const NODE_S: f64 = 120.0;

/// Relative disagreement of the radius with the plate scale that is still believed.
const RADIUS_TOLERANCE: f64 = 0.04;

/// Measures one sequence of whole-disk frames.
///
/// # Errors
///
/// What makes the sequence as a whole unusable: files that disagree, times that cannot be read, a
/// weather log that does not cover them, a Sun below the horizon, or no frame with a limb at all.
pub fn measure(
    index: usize,
    session: &Session,
    shared: &mut Vec<Arc<Setup>>,
    progress: &dyn Progress,
) -> Result<MeasuredSequence, Error> {
    let sequence = &session.sequences[index];
    // Files that cannot be read cost this sequence, not the others.
    let list = frames::list(&sequence.files).map_err(|it| Error::NoFrames {
        sequence: index,
        reason: it.to_string(),
    })?;
    let times = times(&list, session)?;
    let (Some(first), Some(last)) = (times.first(), times.last()) else {
        return Err(Error::NoFrames {
            sequence: index,
            reason: "the files hold no frame".to_owned(),
        });
    };
    let sky = Sky::new(session, sequence, first.0, last.0)?;
    let duration_s = last.0.minus(first.0);
    let middle_utc = first.0.plus_s(0.5 * duration_s);
    let (middle, middle_air, station) = sky.moment(middle_utc)?;
    let setup = setup(session, sequence, &list, &middle, shared)?;
    let nodes = sky.nodes(first.0, duration_s)?;
    let model_radii = predicted(&setup, &middle);
    let expected_px =
        model_radii.0.iter().sum::<f64>() / model_radii.0.len() as f64 / setup.scale_arcsec_px;

    let measure_one = |raw: &Array2<f32>, blur_start: f64| -> Result<ObservedLimb, LimbError> {
        let start = start(raw, &setup, expected_px)?;
        let extraction = Extraction {
            table: &setup.table,
            annulus: &setup.annulus,
            calibration: &setup.calibration,
            detector: setup.detector,
            model_arcsec: &model_radii.0,
            model_slope: &model_radii.1,
            blur_start,
        };
        limb::extract(raw.view(), start, &extraction)
    };
    let blur_start = first_blur(&list, &setup, &measure_one);
    progress.stage(
        &format!("sequence {}: limbs", index + 1),
        list.frames.len() as u64,
    );
    let outcomes = each_frame(&list, progress, |raw| measure_one(raw, blur_start));

    let mut measured = Vec::new();
    let mut lost: Vec<LostFrame> = list
        .unreadable
        .iter()
        .map(|(_, it)| LostFrame {
            frame: 0,
            reason: "file could not be opened",
            detail: it.to_string(),
        })
        .collect();
    for (frame, outcome) in outcomes.into_iter().enumerate() {
        match outcome {
            Ok(limb) => {
                let utc = times[frame].0;
                let (moment, ..) = sky.moment(utc)?;
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
        list,
        frames: measured,
        lost,
        blemishes,
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

/// The sky over one sequence: the Sun's track, the camera, the air.
struct Sky<'a> {
    session: &'a Session,
    sequence: &'a Sequence,
    track: SunTrack,
    /// The filter's band at mid sequence; none above the air.
    band: Option<BandInAir>,
}

/// Room about the track, so that rates can be had at its ends, s.
const TRACK_MARGIN_S: f64 = 2.0;

impl<'a> Sky<'a> {
    fn new(
        session: &'a Session,
        sequence: &'a Sequence,
        first: Utc,
        last: Utc,
    ) -> Result<Self, Error> {
        let (from, to) = (first.plus_s(-TRACK_MARGIN_S), last.plus_s(TRACK_MARGIN_S));
        let track = SunTrack::new(from, to, &place(session), session.time.ut1_minus_utc_s)?;
        let middle = first.plus_s(0.5 * last.minus(first));
        let sun = track.at(middle)?;
        sky::require_above_horizon(middle, &sun)?;
        let band = match station_air(session, middle, sun.azimuth_rad)? {
            Some((it, _)) => Some(band::in_air(&sequence.filter, &it, sun.zenith_true_rad)?),
            None => None,
        };
        Ok(Self {
            session,
            sequence,
            track,
            band,
        })
    }

    /// Wavelength at which the air bends the band's light as it does on average.
    fn wavelength_nm(&self) -> f64 {
        self.band
            .map_or(self.sequence.filter.centre_nm, |it| it.effective_nm)
    }

    /// Sun, camera and air at a time.
    fn moment(&self, at: Utc) -> Result<AtMoment, Error> {
        let sun = self.track.at(at)?;
        let station = station_air(self.session, at, sun.azimuth_rad)?;
        let air = match &station {
            Some((it, _)) => Air::over(it, self.wavelength_nm())?,
            None => Air::none(),
        };
        let orientation = sky::orientation(
            self.session.telescope.mount,
            self.sequence.camera.angle_deg * DEG_RAD,
            self.sequence.roll_deg * DEG_RAD,
            self.sequence.camera.parity,
            &sun,
        );
        let map = air.map(sun.zenith_true_rad)?;
        Ok((
            Moment {
                sun,
                orientation,
                map,
                refractivity: air.refractivity,
            },
            air,
            station,
        ))
    }

    /// Change of the true zenith distance, arcmin a second.
    fn zenith_rate_arcmin_s(&self, at: Utc) -> Result<f64, Error> {
        let (a, b) = (
            self.track.at(at.plus_s(-1.0))?,
            self.track.at(at.plus_s(1.0))?,
        );
        Ok((b.zenith_true_rad - a.zenith_true_rad) / 2.0 / ARCMIN_RAD)
    }

    /// The response to the air at nodes through the sequence: seconds after its start, response.
    fn nodes(&self, first: Utc, duration_s: f64) -> Result<Vec<(f64, AirResponse)>, Error> {
        let steps = (duration_s / NODE_S).ceil().max(1.0) as usize;
        (0..=steps)
            .map(|k| {
                let after_s = duration_s * k as f64 / steps as f64;
                let at = first.plus_s(after_s);
                let (moment, air, _) = self.moment(at)?;
                Ok((
                    after_s,
                    refraction::response(&air, &moment.sun, self.zenith_rate_arcmin_s(at)?)?,
                ))
            })
            .collect()
    }
}

type AtMoment = (Moment, Air, Option<(StationAir, Option<WeatherNote>)>);

/// Mid-exposures with the clock's offset taken off, and exposure times.
fn times(list: &frames::Sequence, session: &Session) -> Result<Vec<(Utc, Option<f64>)>, Error> {
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

/// The shared setup of this camera, filter and calibration; made when it is not there yet.
fn setup(
    session: &Session,
    sequence: &Sequence,
    list: &frames::Sequence,
    middle: &Moment,
    shared: &mut Vec<Arc<Setup>>,
) -> Result<Arc<Setup>, Error> {
    let camera = &sequence.camera;
    let (width, height) = (list.width, list.height);
    let key: SetupKey = (
        sequence.calibration.dark.clone(),
        sequence.calibration.flat.clone(),
        width,
        height,
        [
            camera.scale_arcsec_px.to_bits(),
            sequence.filter.centre_nm.to_bits(),
            camera.gain_e_adu.to_bits(),
            u64::from(camera.projection == crate::session::Projection::Tan),
        ],
    );
    if let Some(it) = shared.iter().find(|it| it.key == key) {
        return Ok(Arc::clone(it));
    }
    let calibration = calibrate::load(
        &sequence.calibration.dark,
        &sequence.calibration.flat,
        camera.bad_pixels.as_deref(),
        (width, height),
        camera.saturation_adu,
        &calibrate::Limits::default(),
    )?;
    let dark_adu = blemish::median(calibration.dark_adu().iter().map(|&it| f64::from(it)));
    let detector = Detector {
        gain_e_adu: camera.gain_e_adu,
        read_noise_e: camera.read_noise_e,
        saturation_adu: camera.saturation_adu,
    }
    .checked()?;
    let plate = Plate {
        projection: camera.projection,
        scale_of: camera.scale_of,
    };
    let scale = camera.scale_arcsec_px;
    let optics = limb_optics(session, sequence, middle, session.limb.edge_scale_km)?;
    let sectors = session.limb.sectors;
    let angles: Vec<f64> = (0..sectors).map(|s| sector_angle_rad(s, sectors)).collect();
    let window_arcsec = (
        session
            .limb
            .window_inside_arcsec
            .unwrap_or_else(|| larger(10.0, 3.5 * scale)),
        session
            .limb
            .window_outside_arcsec
            .unwrap_or_else(|| larger(8.0, 3.0 * scale)),
    );
    let table = EdgeTable::new(&optics, 0.0, scale, &angles)?;
    let radii: Vec<f64> = angles
        .iter()
        .map(|&it| middle.predicted_arcsec(plate, it))
        .collect();
    let mean = radii.iter().sum::<f64>() / radii.len() as f64;
    // Room for the day's change of refraction and of the apparent radius.
    let reach = 0.002 * mean + 2.0;
    let annulus = Annulus::new(
        sectors,
        angles[0],
        scale,
        (mean - reach, mean + reach),
        window_arcsec,
    );
    let it = Arc::new(Setup {
        table,
        annulus,
        calibration,
        dark_adu,
        detector,
        plate,
        scale_arcsec_px: scale,
        optics,
        window_arcsec,
        key,
    });
    shared.push(Arc::clone(&it));
    Ok(it)
}

fn larger(a: f64, b: f64) -> f64 {
    if a > b { a } else { b }
}

/// Detector angle of a sector's middle: half a sector off the axes, so that the pixel grid's symmetry
/// folds them onto few classes.
fn sector_angle_rad(sector: usize, sectors: usize) -> f64 {
    std::f64::consts::TAU * (sector as f64 + 0.5) / sectors as f64
}

/// The optics of the template for a given thickness of the Sun's edge.
pub(super) fn limb_optics(
    session: &Session,
    sequence: &Sequence,
    middle: &Moment,
    edge_scale_km: f64,
) -> Result<LimbOptics, Error> {
    let distance = middle.sun.distance_au;
    let radius_arcsec =
        ((crate::shape::REFERENCE_RADIUS_MAS * crate::units::MAS_RAD).sin() / distance).asin()
            / ARCSEC_RAD;
    let km_arcsec = 1000.0 / (crate::constants::ASTRONOMICAL_UNIT.value * distance) / ARCSEC_RAD;
    Ok(LimbOptics {
        edge: SolarEdge {
            radius_arcsec,
            scale_arcsec: edge_scale_km * km_arcsec,
            darkening: Darkening::new(
                crate::disk::DarkeningLaw::Neckel2005,
                sequence.filter.centre_nm,
            )?,
        },
        telescope: Telescope {
            aperture_m: session.telescope.aperture_m,
            central_obstruction: session.telescope.central_obstruction,
        },
        wavelength_nm: sequence.filter.centre_nm,
        exposure: Exposure::Short,
    })
}

/// Predicted radius by sector and its slope by angle, arcsec.
pub(super) fn predicted(setup: &Setup, moment: &Moment) -> (Vec<f64>, Vec<f64>) {
    let count = setup.annulus.sectors();
    let step = 0.25 * setup.annulus.sector_rad();
    let at = |theta: f64| moment.predicted_arcsec(setup.plate, theta);
    (0..count)
        .map(|s| {
            let theta = setup.annulus.angle_rad(s);
            (
                at(theta),
                (at(theta + step) - at(theta - step)) / (2.0 * step),
            )
        })
        .unzip()
}

/// Where a frame's disk is, roughly; its radius must be the one that the scale predicts.
fn start(raw: &Array2<f32>, setup: &Setup, expected_px: f64) -> Result<Disk, LimbError> {
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
fn first_blur(
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

type FrameOutcome<T> = Result<T, (&'static str, String)>;

/// Reads every frame once, in contiguous runs for each worker, into one reused buffer, and does
/// `work` on it; results in the order of the frames whatever the number of threads.
fn each_frame<T: Send>(
    list: &frames::Sequence,
    progress: &dyn Progress,
    work: impl Fn(&Array2<f32>) -> Result<T, LimbError> + Sync,
) -> Vec<FrameOutcome<T>> {
    let run = list
        .frames
        .len()
        .div_ceil(4 * rayon::current_num_threads())
        .clamp(1, 64);
    let runs: Vec<Vec<FrameOutcome<T>>> = list
        .frames
        .par_chunks(run)
        .map(|frames| {
            let mut reader = Reader::new();
            let mut raw = Array2::zeros((0, 0));
            frames
                .iter()
                .map(|&it| {
                    let read = reader.read(list, it, &mut raw);
                    progress.tick();
                    read.map_err(|it| ("could not be read", it.to_string()))?;
                    work(&raw).map_err(|it| (short(&it), it.to_string()))
                })
                .collect()
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

/// Straight line between the nodes about a time.
fn interpolated(nodes: &[(f64, AirResponse)], after_s: f64) -> AirResponse {
    let k = nodes
        .partition_point(|it| it.0 <= after_s)
        .clamp(1, nodes.len() - 1);
    let (a, b) = (&nodes[k - 1], &nodes[k]);
    let span = b.0 - a.0;
    let f = if span > 0.0 {
        (after_s - a.0) / span
    } else {
        0.0
    };
    let mix = |p: f64, q: f64| p + f * (q - p);
    AirResponse {
        mean_mas: mix(a.1.mean_mas, b.1.mean_mas),
        cos2_mas: mix(a.1.cos2_mas, b.1.cos2_mas),
        cos3_mas: mix(a.1.cos3_mas, b.1.cos3_mas),
        cos4_mas: mix(a.1.cos4_mas, b.1.cos4_mas),
        mean_mas_arcmin: mix(a.1.mean_mas_arcmin, b.1.mean_mas_arcmin),
        cos2_mas_arcmin: mix(a.1.cos2_mas_arcmin, b.1.cos2_mas_arcmin),
        sin_zenith: mix(a.1.sin_zenith, b.1.sin_zenith),
        zenith_rate_arcmin_s: mix(a.1.zenith_rate_arcmin_s, b.1.zenith_rate_arcmin_s),
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
