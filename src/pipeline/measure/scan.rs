//! A scan measured: the limb of every transit over a line detector.

use super::reading::times;
use super::sky::Sky;
use super::slit::{SECTORS, Studio, studio};
use super::{Error, Progress, place};
use crate::calibrate;
use crate::frames::{self, Reader};
use crate::limb::harmonics::{Harmonics, Projector};
use crate::limb::lines::{self, LineExtraction};
use crate::limb::template::blur_of_width;
use crate::limb::{Flag, LimbError, ObservedLimb};
use crate::refraction::Moment;
use crate::scan::{self, LineSky, ScanError, Slit, Transit};
use crate::session::Session;
use crate::shape::{beyond_reference_mas, reference_radius_rad};
use crate::sky::{self, Orientation, SunPlace, Utc};
use crate::units::{ARCSEC_RAD, wrapped_rad};
use ndarray::Array2;
use rayon::prelude::*;
use std::f64::consts::FRAC_PI_2;

/// One transit with a limb.
#[derive(Clone, Debug)]
pub struct MeasuredTransit {
    /// Plane of the scan.
    pub transit: usize,
    /// When the Sun's centre crossed the slit.
    pub utc: Utc,
    /// The limb by sector: true radius, arcsec.
    pub limb: ObservedLimb,
    /// Harmonics on the detector, mas at 1 AU of the radius minus the reference.
    pub harmonics: Harmonics,
    /// What the fit takes.
    pub observation: Transit,
    /// The Sun then.
    pub sun: SunPlace,
    /// Motion across the slit, rad/s.
    pub across_rad_s: f64,
}

/// One scan.
#[derive(Clone, Debug)]
pub struct MeasuredScan {
    /// Index in the session file.
    pub index: usize,
    /// Transits with a limb, in order of time.
    pub transits: Vec<MeasuredTransit>,
    /// Transits without: plane and reason.
    pub lost: Vec<(usize, String)>,
    /// Lines of a transit and pixels of the slit.
    pub size: (usize, usize),
    /// Motion across the slit, arcsec/s.
    pub across_arcsec_s: f64,
    /// Angle of the motion from the slit's normal, deg.
    pub oblique_deg: f64,
    /// Relative uncertainty of the refractivity.
    pub refractivity_sigma_rel: f64,
}

/// Highest harmonic.
const HIGHEST: usize = 8;

/// Where an offset of the pointing is left alone, arcsec: it changes the rate by 1e-7.
const SETTLED_ARCSEC: f64 = 0.05;

/// Measures a scan.
///
/// # Errors
///
/// What makes it unusable as a whole: files, times, a slit that the Sun does not cross, no transit with a
/// limb.
pub fn measure_scan(
    index: usize,
    session: &Session,
    refractivity_sigma_rel: f64,
    progress: &dyn Progress,
) -> Result<MeasuredScan, Error> {
    let sequence = &session.sequences[index];
    let none = |reason: String| Error::NoFrames {
        sequence: index,
        reason,
    };
    let list = frames::list(&sequence.files).map_err(|it| none(it.to_string()))?;
    let stamps = times(&list, session)?;
    let line_s = sequence
        .line_s
        .ok_or_else(|| none("line_s is not given".to_owned()))?;
    let (Some(first), Some(last)) = (stamps.first(), stamps.last()) else {
        return Err(none("the files hold no transit".to_owned()));
    };
    // Without a word on the exposure a line is exposed from its start to that of the next.
    let starts: Vec<Utc> = stamps
        .iter()
        .map(|it| it.0.plus_s(if it.1.is_some() { 0.0 } else { 0.5 * line_s }))
        .collect();
    let exposure_s = first.1.unwrap_or(line_s);
    let span_s = line_s * list.height as f64;
    let sky = Sky::new(session, sequence, first.0, last.0.plus_s(span_s))?;
    let studio = studio(
        session,
        index,
        &list,
        sky,
        (line_s, exposure_s),
        starts[0],
        span_s,
    )?;
    progress.stage(
        &format!("sequence {}: transits", index + 1),
        list.frames.len() as u64,
    );
    let outcomes: Vec<Result<MeasuredTransit, Error>> = list
        .frames
        .par_iter()
        .zip(&starts)
        .enumerate()
        .map(|(k, (&frame, &start))| {
            let mut raw = Array2::zeros((0, 0));
            let read = Reader::new().read(&list, frame, &mut raw);
            progress.tick();
            read?;
            studio.transit(k, &raw, start)
        })
        .collect();
    let mut transits = Vec::new();
    let mut lost = Vec::new();
    let mut first_error = None;
    for (k, it) in outcomes.into_iter().enumerate() {
        match it {
            Ok(it) => transits.push(it),
            Err(it) => {
                lost.push((k, it.to_string()));
                first_error = first_error.or(Some(it));
            }
        }
    }
    let Some(one) = transits.first() else {
        return Err(first_error.unwrap_or_else(|| none("no transit".to_owned())));
    };
    let oblique = wrapped_rad(2.0 * one.observation.motion_rad) / 2.0;
    let speed = studio.speed_arcsec_s(starts[0].plus_s(0.5 * span_s))?;
    Ok(MeasuredScan {
        index,
        lost,
        size: (list.height, list.width),
        across_arcsec_s: speed.0 * oblique.cos().abs(),
        oblique_deg: oblique.to_degrees(),
        refractivity_sigma_rel,
        transits,
    })
}

impl Studio<'_> {
    /// The limb of one transit.
    fn transit(
        &self,
        transit: usize,
        raw: &Array2<f32>,
        start: Utc,
    ) -> Result<MeasuredTransit, Error> {
        let (height, width) = raw.dim();
        let mut calibrated = Array2::zeros((0, 0));
        calibrate::apply(
            raw,
            &self.calibration,
            self.detector.saturation_adu,
            &mut calibrated,
        )?;
        let passage = scan::find(calibrated.view()).map_err(|it| self.refused(it))?;
        let utc = start.plus_s(self.line_s * passage.line);
        let (moment, ..) = self.sky.moment(utc)?;
        self.require_extent(&passage, &moment, utc)?;
        let orientation = self.orientation(&moment);
        let mut mounting = self.pointed(&passage, &moment);
        let lines: Vec<LineSky> = (0..height)
            .map(|row| {
                Ok(LineSky::new(
                    &self.sky.sun(start.plus_s(self.line_s * row as f64))?,
                ))
            })
            .collect::<Result<_, Error>>()?;
        let radius_arcsec = reference_radius_rad(moment.sun.distance_au) / ARCSEC_RAD;
        let setup = LineExtraction {
            table: &self.table,
            annulus: &self.annulus,
            calibration: &self.calibration,
            detector: self.detector,
            model_arcsec: radius_arcsec,
            window_arcsec: self.window_arcsec,
            blur_start: blur_of_width(2.5),
            levels_adu: (passage.level_adu, passage.sky_adu),
        };
        // Room for a pointing that is a few lines off.
        let room = 30.0;
        let reach = (
            radius_arcsec - self.window_arcsec.0 - room,
            radius_arcsec + self.window_arcsec.1 + room,
        );
        let mut measured = None;
        for _ in 0..4 {
            let bending = moment.map.as_ref().map(crate::air::DiskMap::bending);
            let slit = Slit::new(&self.camera, &mounting, bending, width);
            let pixels = scan::near_limb(&slit, &lines, &orientation, reach);
            let (offset, limb) = lines::extract(raw.view(), &pixels, &setup)?;
            measured = Some(limb);
            let off = offset.0.hypot(offset.1);
            if off < SETTLED_ARCSEC {
                break;
            }
            let theta = (-offset.1).atan2(-offset.0);
            let bearing = orientation.position_angle_rad(theta) - moment.sun.parallactic_rad;
            mounting.axis = mounting.axis.offset(off * ARCSEC_RAD, bearing);
        }
        let limb = measured.ok_or_else(|| {
            self.refused(ScanError::TooFew {
                found: 0,
                needed: 1,
            })
        })?;
        self.finished(transit, utc, &moment, &orientation, limb)
    }

    fn finished(
        &self,
        transit: usize,
        utc: Utc,
        moment: &Moment,
        orientation: &Orientation,
        limb: ObservedLimb,
    ) -> Result<MeasuredTransit, Error> {
        let angles: Vec<f64> = (0..SECTORS).map(|s| limb.angle_rad(s)).collect();
        let usable: Vec<bool> = limb
            .sectors
            .iter()
            .map(|it| it.flag == Flag::Good)
            .collect();
        let found = usable.iter().filter(|it| **it).count();
        let projector =
            Projector::new(&angles, &usable, HIGHEST).ok_or(LimbError::TooFewSectors {
                found,
                sectors: SECTORS,
                needed: SECTORS.div_ceil(2),
            })?;
        let au = moment.sun.distance_au;
        let radii: Vec<f64> = limb
            .sectors
            .iter()
            .map(|it| beyond_reference_mas(it.radius_arcsec * ARCSEC_RAD, au))
            .collect();
        let harmonics = projector.apply(&radii);
        let rates = sky::rates(utc, &place(self.session), self.session.time.ut1_minus_utc_s)?;
        let motion = orientation.detector_angle_rad(rates.drift_position_angle_rad());
        let observation = Transit {
            sequence: self.index,
            harmonics_mas: [harmonics.cos[0], harmonics.cos[2], harmonics.sin[2]],
            axis_rad: orientation.detector_angle_rad(moment.sun.axis_rad),
            b0_rad: moment.sun.b0_rad,
            motion_rad: motion,
            zenith_rad: orientation.detector_angle_rad(moment.sun.parallactic_rad),
            tan_zenith: moment.sun.zenith_true_rad.tan(),
            refractivity: moment.refractivity,
        };
        Ok(MeasuredTransit {
            transit,
            utc,
            limb,
            harmonics,
            observation,
            sun: moment.sun,
            across_rad_s: rates.drift_rad_s() * (motion - FRAC_PI_2).sin().abs(),
        })
    }
}
