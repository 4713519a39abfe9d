//! What the transits of a scan share: slit, calibration, template, and where the slit looks.

use super::sky::Sky;
use super::{Error, limb_optics, place};
use crate::calibrate::{self, Calibration, Detector};
use crate::drift::{FixedCamera, Mounting, Seen};
use crate::frames;
use crate::limb::geometry::Annulus;
use crate::limb::template::EdgeTable;
use crate::optics::PixelBox;
use crate::refraction::{Moment, Plate};
use crate::scan::{Passage, ScanError};
use crate::session::{Sequence, Session};
use crate::shape::reference_radius_rad;
use crate::sky::{self, Mount, Orientation, SunPlace, Utc};
use crate::units::{ARCSEC_RAD, DEG_RAD};
use std::f64::consts::{FRAC_PI_2, PI};

/// Sectors of a transit's limb.
pub(super) const SECTORS: usize = 48;

/// Disagreement of the crossing with line time or scale that is still believed.
const EXTENT_TOLERANCE: f64 = 0.03;

/// Least angle between motion and slit, deg.
const LEAST_CROSSING_DEG: f64 = 20.0;

/// What all transits share.
pub(super) struct Studio<'a> {
    pub(super) session: &'a Session,
    pub(super) sequence: &'a Sequence,
    pub(super) sky: Sky<'a>,
    pub(super) camera: FixedCamera,
    pub(super) calibration: Calibration,
    pub(super) detector: Detector,
    pub(super) table: EdgeTable,
    pub(super) annulus: Annulus,
    pub(super) window_arcsec: (f64, f64),
    pub(super) line_s: f64,
    pub(super) index: usize,
}

/// Works out what the transits share.
pub(super) fn studio<'a>(
    session: &'a Session,
    index: usize,
    list: &frames::Sequence,
    sky: Sky<'a>,
    (line_s, exposure_s): (f64, f64),
    start: Utc,
    span_s: f64,
) -> Result<Studio<'a>, Error> {
    let sequence = &session.sequences[index];
    let camera = &sequence.camera;
    let calibration = calibrate::load_lines(
        &sequence.calibration.dark,
        &sequence.calibration.flat,
        list.width,
        camera.saturation_adu,
        &calibrate::Limits::default(),
    )?;
    let calibration = if calibration.dark_adu().ncols() == list.width {
        calibration
    } else {
        Calibration::neutral(list.width, 1)
    };
    let detector = Detector {
        gain_e_adu: camera.gain_e_adu,
        read_noise_e: camera.read_noise_e,
        saturation_adu: camera.saturation_adu,
    }
    .checked()?;
    let middle_utc = start.plus_s(0.5 * span_s);
    let (middle, ..) = sky.moment(middle_utc)?;
    let optics = limb_optics(session, sequence, &middle, session.limb.edge_scale_km)?;
    let slit = camera.scale_arcsec_px;
    let mut it = Studio {
        session,
        sequence,
        sky,
        camera: FixedCamera {
            plate: Plate {
                projection: camera.projection,
                scale_of: camera.scale_of,
            },
            refractivity: middle.refractivity,
            parity: camera.parity,
            middle_px: (0.0, 0.5 * (list.width as f64 - 1.0)),
        },
        calibration,
        detector,
        table: EdgeTable::for_pixel(&optics, PixelBox::square(slit), &[0.0])?,
        annulus: Annulus::new(SECTORS, 0.0, slit, (1.0, 2.0), (1.0, 1.0)),
        window_arcsec: (10.0, 8.0),
        line_s,
        index,
    };
    let (speed, position_angle) = it.speed_arcsec_s(middle_utc)?;
    let motion = it.orientation(&middle).detector_angle_rad(position_angle);
    let crossing_deg = (motion - FRAC_PI_2).sin().abs().asin().to_degrees();
    if crossing_deg < LEAST_CROSSING_DEG {
        return Err(it.refused(ScanError::AlongSlit {
            angle_deg: crossing_deg,
        }));
    }
    let pixel = PixelBox {
        sides_arcsec: [slit, speed * exposure_s],
        // Half a turn of a side changes nothing.
        lean_rad: (motion - PI + FRAC_PI_2).rem_euclid(PI) - FRAC_PI_2,
    };
    let half_sector = PI / SECTORS as f64;
    let angles: Vec<f64> = (0..SECTORS)
        .map(|s| 2.0 * half_sector * s as f64 + half_sector - FRAC_PI_2)
        .collect();
    it.table = EdgeTable::for_pixel(&optics, pixel, &angles)?;
    let step = speed * line_s;
    let largest = if slit > step { slit } else { step };
    let wide = |least: f64, pixels: f64| {
        if pixels * largest > least {
            pixels * largest
        } else {
            least
        }
    };
    it.window_arcsec = (
        session
            .limb
            .window_inside_arcsec
            .unwrap_or_else(|| wide(10.0, 3.5)),
        session
            .limb
            .window_outside_arcsec
            .unwrap_or_else(|| wide(8.0, 3.0)),
    );
    let radius = reference_radius_rad(middle.sun.distance_au) / ARCSEC_RAD;
    it.annulus = Annulus::new(
        SECTORS,
        half_sector,
        largest,
        (radius, radius),
        it.window_arcsec,
    );
    Ok(it)
}

impl Studio<'_> {
    pub(super) fn refused(&self, source: ScanError) -> Error {
        Error::Scan {
            sequence: self.index,
            source,
        }
    }

    /// Speed of the Sun over the ground, arcsec/s, and the position angle of its motion, rad.
    pub(super) fn speed_arcsec_s(&self, at: Utc) -> Result<(f64, f64), Error> {
        let rates = sky::rates(at, &place(self.session), self.session.time.ut1_minus_utc_s)?;
        Ok((
            rates.drift_rad_s() / ARCSEC_RAD,
            rates.drift_position_angle_rad(),
        ))
    }

    /// The slit's orientation about the celestial north where the Sun stands.
    pub(super) fn orientation(&self, moment: &Moment) -> Orientation {
        sky::orientation(
            self.session.telescope.mount,
            self.sequence.camera.angle_deg * DEG_RAD,
            self.sequence.roll_deg * DEG_RAD,
            self.sequence.camera.parity,
            &moment.sun,
        )
    }

    /// The pointing that puts the Sun where the lines show it.
    pub(super) fn pointed(&self, passage: &Passage, moment: &Moment) -> Mounting {
        let seen = Seen {
            azimuth_rad: moment.sun.azimuth_rad,
            zenith_rad: moment.map.as_ref().map_or(
                moment.sun.zenith_true_rad,
                crate::air::DiskMap::zenith_apparent_rad,
            ),
        };
        let mounted = (self.sequence.camera.angle_deg + self.sequence.roll_deg) * DEG_RAD;
        let up_at = |parallactic: f64| match self.session.telescope.mount {
            Mount::Equatorial | Mount::Coelostat => mounted - parallactic,
            Mount::Altazimuth | Mount::Fixed => mounted,
        };
        let mut it = Mounting {
            scale_arcsec_px: self.sequence.camera.scale_arcsec_px,
            up_rad: up_at(moment.sun.parallactic_rad),
            axis: seen,
        };
        let mirrored = 2.0 * self.camera.middle_px.1 - passage.column;
        it.axis = self.camera.seen_at(&it, (0.0, mirrored));
        // North at the slit's middle is not quite north at the Sun.
        let zenith_true = it.axis.zenith_rad
            + moment
                .map
                .as_ref()
                .map_or(0.0, |map| map.bending().refraction_rad(it.axis.zenith_rad));
        let at_axis = SunPlace {
            azimuth_rad: it.axis.azimuth_rad,
            zenith_true_rad: zenith_true,
            ..moment.sun
        };
        it.up_rad = up_at(sky::parallactic_at_zenith_rad(
            &place(self.session),
            &at_axis,
            zenith_true,
        ));
        it
    }

    /// Refuses a crossing that contradicts the line time or the scale.
    pub(super) fn require_extent(
        &self,
        passage: &Passage,
        moment: &Moment,
        at: Utc,
    ) -> Result<(), Error> {
        let (speed, position_angle) = self.speed_arcsec_s(at)?;
        let motion = self.orientation(moment).detector_angle_rad(position_angle);
        let across = speed * (motion - FRAC_PI_2).sin().abs();
        let diameter = 2.0 * reference_radius_rad(moment.sun.distance_au) / ARCSEC_RAD;
        let expected = diameter / across / self.line_s;
        // Blur and the threshold widen the disk by a line or two.
        let allowed = |expected: f64| EXTENT_TOLERANCE * expected + 3.0;
        if (passage.lines - expected).abs() > allowed(expected) {
            return Err(self.refused(ScanError::LineTime {
                found: passage.lines,
                expected,
                line_s: self.line_s,
                drift_arcsec_s: across,
                agreeing_s: self.line_s * expected / passage.lines,
            }));
        }
        let slit =
            diameter / (motion - FRAC_PI_2).sin().abs() / self.sequence.camera.scale_arcsec_px;
        if (passage.columns - slit).abs() > allowed(slit) {
            return Err(self.refused(ScanError::SlitScale {
                found: passage.columns,
                expected: slit,
            }));
        }
        Ok(())
    }
}
