//! The day in quarters of an hour.

use super::PlanError;
use super::air::{FrameNoise, Seeing, frame_noise};
use super::expected::{Expected, Stretch, fitted, observation, sequence};
use crate::air::zenith_warning;
use crate::pipeline::ahead::{self, Ahead};
use crate::pipeline::measure::place;
use crate::result::plan::PlanRow;
use crate::session::Session;
use crate::shape::{LARGEST_ZENITH_DEG, Observation};
use crate::sky::{self, Utc};
use crate::units::{DEG_RAD, wrapped_rad};
use rayon::prelude::*;

/// Length of a quarter, s.
pub(super) const QUARTER_S: f64 = 900.0;

/// Stretches in a quarter: each is a block of the fit.
pub(super) const STRETCHES: usize = 3;

/// A quarter is listed while the Sun stands higher than this, degrees from the zenith.
const LISTED_DEG: f64 = 85.0;

/// A quarter of an hour.
#[derive(Clone, Debug)]
pub(super) struct Quarter {
    pub(super) start: Utc,
    /// The moments at the middle of each stretch.
    pub(super) moments: Vec<Ahead>,
    /// What the air does to a frame at the middle; none where the Sun is too low for the shape.
    pub(super) noise: Option<FrameNoise>,
}

impl Quarter {
    fn middle(&self) -> &Ahead {
        &self.moments[self.moments.len() / 2]
    }

    /// True zenith distance at the middle, degrees.
    pub(super) fn zenith_deg(&self) -> f64 {
        self.middle().sun.zenith_true_rad.to_degrees()
    }

    /// Frames a second: as given, or as fast as frames are independent in m = 2.
    pub(super) fn frames_per_s(&self, given: Option<f64>) -> Option<f64> {
        let noise = self.noise?;
        Some(given.unwrap_or(1.0 / noise.memory_s[2]))
    }
}

/// The quarters of a day by the Sun at the station, whose 0 h UTC is given, the Sun well above the horizon.
pub(super) fn quarters(
    session: &Session,
    date: Utc,
    seeing: &Seeing,
) -> Result<Vec<Quarter>, PlanError> {
    let place = place(session);
    let sequence = sequence(session);
    let west_s = -session.site.longitude_deg / 360.0 * 86_400.0;
    let first = date.plus_s((west_s / QUARTER_S).round() * QUARTER_S);
    let limit_rad = LISTED_DEG * DEG_RAD;
    let starts: Vec<Utc> = (0..96)
        .map(|k| first.plus_s(f64::from(k) * QUARTER_S))
        .collect();
    let found: Vec<Result<Option<Quarter>, PlanError>> = starts
        .par_iter()
        .map(|&start| {
            let middle = start.plus_s(0.5 * QUARTER_S);
            let sun = sky::sun(middle, &place, session.time.ut1_minus_utc_s)
                .map_err(crate::pipeline::Error::from)?;
            if sun.zenith_true_rad > limit_rad {
                return Ok(None);
            }
            let step_s = QUARTER_S / STRETCHES as f64;
            let moments = (0..STRETCHES)
                .map(|k| ahead::at(session, &sequence, start.plus_s((k as f64 + 0.5) * step_s)))
                .collect::<Result<Vec<_>, _>>()?;
            let mut quarter = Quarter {
                start,
                moments,
                noise: None,
            };
            if quarter.zenith_deg() <= LARGEST_ZENITH_DEG {
                quarter.noise = Some(frame_noise(session, seeing, quarter.middle())?);
            }
            Ok(Some(quarter))
        })
        .collect();
    found.into_iter().filter_map(Result::transpose).collect()
}

/// The error after an hour like a quarter, the instrument told apart; none where the Sun is too low.
fn hour(
    session: &Session,
    quarter: &Quarter,
    frames_per_s: Option<f64>,
) -> Result<Option<Expected>, PlanError> {
    let (Some(noise), Some(rate)) = (quarter.noise, quarter.frames_per_s(frames_per_s)) else {
        return Ok(None);
    };
    let observations: Vec<Observation> = quarter
        .moments
        .iter()
        .map(|moment| {
            let at = Stretch {
                sequence: 0,
                time_s: moment.utc.minus(quarter.start),
                frames: rate * 3600.0 / STRETCHES as f64,
                step_s: 1.0 / rate,
                roll_deg: 0.0,
            };
            observation(session, moment, &noise, &at)
        })
        .collect();
    let mut known = ahead::known(
        session,
        &quarter.moments.iter().collect::<Vec<_>>(),
        quarter.start,
    );
    known.distortion_sigma_mas = Some(0.0);
    known.drivers.clear();
    fitted(&observations, &known).map(Some)
}

/// The row of a quarter.
pub(super) fn row(
    session: &Session,
    quarter: &Quarter,
    frames_per_s: Option<f64>,
) -> Result<PlanRow, PlanError> {
    let it = quarter.middle();
    let sun = &it.sun;
    let known = ahead::known(session, &[it], quarter.start);
    let relative: f64 = known
        .refractivity
        .iter()
        .map(|it| it.sigma_rel.powi(2))
        .sum();
    let d = sun.distance_au;
    let flattening_mas = -2.0 * it.air.cos2_mas / d;
    let tilt_mas = 2.0 * it.air.cos2_mas_arcmin / d * known.tilt_sigma_arcmin;
    let hour = hour(session, quarter, frames_per_s)?;
    let zenith_deg = quarter.zenith_deg();
    let note = if zenith_deg > LARGEST_ZENITH_DEG {
        Some(format!(
            "more than {LARGEST_ZENITH_DEG} deg from the zenith: no shape"
        ))
    } else {
        zenith_warning(sun.zenith_true_rad).map(|_| {
            let word = if zenith_deg > 70.0 {
                "strong caution"
            } else {
                "caution"
            };
            format!("{word}: {zenith_deg:.0} deg from the zenith")
        })
    };
    // An axis has two ends: the angle is that of the nearer one.
    let turned = wrapped_rad(2.0 * (sun.axis_rad - sun.parallactic_rad)) / 2.0;
    Ok(PlanRow {
        time_utc: quarter.start.to_iso(),
        zenith_true_deg: zenith_deg,
        zenith_apparent_deg: it.zenith_apparent_rad.to_degrees(),
        azimuth_deg: sun.azimuth_rad.to_degrees(),
        parallactic_deg: sun.parallactic_rad.to_degrees(),
        axis_deg: sun.axis_rad.to_degrees(),
        axis_from_vertical_deg: turned.to_degrees(),
        radius_change_mas: it.air.mean_mas / d,
        flattening_mas,
        flattening_sigma_mas: (flattening_mas * relative.sqrt()).hypot(tilt_mas),
        frame_mas: quarter.noise.map(|it| it.turbulence_mas2[2].sqrt()),
        frames_per_s: quarter.noise.map(|it| 1.0 / it.memory_s[2]),
        sigma_random_mas: hour.as_ref().map(|it| it.random_mas[1]),
        sigma_systematic_mas: hour.as_ref().map(|it| it.systematic_mas[1]),
        sigma_mas: hour.as_ref().map(Expected::oblateness_mas),
        note,
    })
}
