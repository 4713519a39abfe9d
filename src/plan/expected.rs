//! The error to expect: observations to come, put through the blocks, the judge and the fit of a session.
//!
//! Nothing is measured yet, so the harmonics are zero and the variance of each stretch of frames is that of
//! its mean by turbulence and photons; design matrix and prior knowledge are those of the reduction.

use super::PlanError;
use super::air::{FrameNoise, Seeing, frame_noise};
use crate::pipeline::ahead::{self, Ahead};
use crate::session::{Calibration, Kind, Sequence, Session};
use crate::shape::{self, Contribution, Known, Observation, Separability};
use crate::sky::{Utc, orientation};
use crate::units::DEG_RAD;

/// A stretch of frames at even steps, the instrument at rest.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Visit {
    /// When it begins.
    pub start: Utc,
    /// Its length, s.
    pub duration_s: f64,
    /// Frames in it.
    pub frames: f64,
    /// Roll of the instrument.
    pub roll_deg: f64,
}

/// The error to expect.
#[derive(Clone, Debug, PartialEq)]
pub struct Expected {
    /// Random standard uncertainties of radius, oblateness and `R c4`, mas.
    pub random_mas: [f64; 3],
    /// Systematic ones, without those of the limb's model.
    pub systematic_mas: [f64; 3],
    /// What can be told apart.
    pub separability: Separability,
    /// Where the variances come from.
    pub contributions: Vec<Contribution>,
}

impl Expected {
    /// Random and systematic error of the oblateness together, mas.
    pub fn oblateness_mas(&self) -> f64 {
        self.random_mas[1].hypot(self.systematic_mas[1])
    }
}

/// The error to expect from visits in the order of time.
///
/// # Errors
///
/// [`PlanError`] for a Sun below the horizon or more than 80 degrees from the zenith, weather that does not
/// cover a visit, or turbulence outside the kernels' range.
pub fn expected(
    session: &Session,
    visits: &[Visit],
    seeing: &Seeing,
) -> Result<Expected, PlanError> {
    let sequence = sequence(session);
    let start = visits.first().map(|it| it.start).ok_or(PlanError::Empty)?;
    let mut moments = Vec::new();
    let mut observations = Vec::new();
    for (k, it) in visits.iter().enumerate() {
        let moment = ahead::at(session, &sequence, it.start.plus_s(0.5 * it.duration_s))?;
        let noise = frame_noise(session, seeing, &moment)?;
        observations.push(observation(
            session,
            &moment,
            &noise,
            &Stretch {
                sequence: k,
                time_s: moment.utc.minus(start),
                frames: it.frames,
                step_s: it.duration_s / it.frames,
                roll_deg: it.roll_deg,
            },
        ));
        moments.push(moment);
    }
    let known = ahead::known(session, &moments.iter().collect::<Vec<_>>(), start);
    fitted(&observations, &known)
}

/// The sequence that a session without one would have.
pub(super) fn sequence(session: &Session) -> Sequence {
    session
        .sequences
        .iter()
        .find(|it| it.kind != Kind::Limbs)
        .cloned()
        .unwrap_or_else(|| Sequence {
            name: None,
            kind: Kind::Burst,
            files: Vec::new(),
            roll_deg: 0.0,
            line_s: None,
            calibration: Calibration::default(),
            camera: session.camera.clone(),
            filter: session.filter.clone(),
        })
}

/// Where a stretch of frames stands.
pub(super) struct Stretch {
    pub(super) sequence: usize,
    pub(super) time_s: f64,
    pub(super) frames: f64,
    pub(super) step_s: f64,
    pub(super) roll_deg: f64,
}

/// A stretch of frames as one observation.
pub(super) fn observation(
    session: &Session,
    moment: &Ahead,
    noise: &FrameNoise,
    at: &Stretch,
) -> Observation {
    let camera = &session.camera;
    let hangs = orientation(
        session.telescope.mount,
        camera.angle_deg * DEG_RAD,
        at.roll_deg * DEG_RAD,
        camera.parity,
        &moment.sun,
    );
    let [mean, two, three, four] =
        [0, 2, 3, 4].map(|m| noise.of_mean_mas2(m, at.frames, at.step_s));
    Observation {
        sequence: at.sequence,
        time_s: at.time_s,
        axis_rad: hangs.detector_angle_rad(moment.sun.axis_rad),
        zenith_rad: hangs.detector_angle_rad(moment.sun.parallactic_rad),
        b0_rad: moment.sun.b0_rad,
        weight: 1.0,
        harmonics_mas: [0.0; shape::COMPONENTS],
        noise_mas2: [mean, two, two, three, three, four, four],
        air: moment.air,
    }
}

/// The fit of observations to come.
pub(super) fn fitted(observations: &[Observation], known: &Known) -> Result<Expected, PlanError> {
    let (blocks, _) = shape::blocks(observations);
    let separability = shape::judge(observations, &blocks, known.distortion_sigma_mas.is_some());
    let fit = shape::fit(observations, &blocks, known, &separability)
        .map_err(crate::pipeline::Error::from)?;
    Ok(Expected {
        random_mas: fit.sigmas_mas(true),
        systematic_mas: fit.sigmas_mas(false),
        separability,
        contributions: fit.contributions,
    })
}
