//! One frame: from the limb's place to counts.
//!
//! # Model
//!
//! ```text
//! pixel (i, j) -> plate p = scale |(i, j) - centre| -> angle r = atan p, detector angle theta
//! x     = r - L(theta)                L: the limb as seen, distorted, displaced
//! light = B(x) within the table, P5(mu(r / L)) farther inside, 0 farther outside; + aureole
//! ```
//!
//! | symbol | meaning | unit |
//! |--------|---------|------|
//! | `B` | blurred, pixel-integrated limb | disk centre |
//! | `P5` | limb darkening | disk centre |
//!
//! # Valid for
//!
//! Displacements that vary little within a pixel; the limb moves as a whole through the table's width.
//!
//! # Accuracy
//!
//! Limb of a still frame: 0.1 mas in the low harmonics (test in `tests.rs`).
//!
//! # Source
//!
//! Limb profile: [`crate::optics`]; a flat detector behind a lens: `tan`.

use ndarray::Array2;

use super::detector::Detector;
use super::draw::{Draw, Stream};
use super::figure::{self, Figure};
use super::profile_table::ProfileTable;
use super::seeing::{self, Turbulence};
use super::sky_above::Moment;
use super::truth::FrameTruth;
use super::{Scenario, SequenceKind};
use crate::disk::Darkening;
use crate::optics::LimbOptics;
use crate::units::ARCSEC_RAD;
use std::f64::consts::TAU;

/// Everything that frames share.
#[derive(Clone, Debug)]
pub(super) struct Studio {
    pub(super) figure: Figure,
    pub(super) detector: Detector,
    pub(super) table: ProfileTable,
    pub(super) darkening: Darkening,
    /// The limb and the optics that images it.
    pub(super) optics: LimbOptics,
    /// Detector angles at which the limb is worked out.
    pub(super) angles_rad: Vec<f64>,
    pub(super) seed: u64,
}

/// Makes a frame; `number` counts all frames of the session.
pub(super) fn frame(
    s: &Scenario,
    studio: &Studio,
    turbulence: &Turbulence,
    at: &Moment,
    number: u32,
) -> (Array2<u16>, FrameTruth) {
    let mut draw = Draw::new(studio.seed, Stream::Frame(number));
    let mut limb_arcsec =
        figure::seen_limb_arcsec(&studio.figure, &at.geometry, &studio.angles_rad);
    let mean_arcsec = limb_arcsec.iter().sum::<f64>() / limb_arcsec.len() as f64;
    let directions: Vec<(f64, f64)> = studio
        .angles_rad
        .iter()
        .map(|it| at.geometry.orientation.position_angle_rad(*it).sin_cos())
        .collect();
    let moved_arcsec = turbulence.displacement_arcsec(at, mean_arcsec, &directions);
    for ((limb, moved), angle) in limb_arcsec
        .iter_mut()
        .zip(&moved_arcsec)
        .zip(&studio.angles_rad)
    {
        *limb += moved + figure::distortion_arcsec(&s.distortion, *angle);
    }
    let middle_px = 0.5 * (s.size_px as f64 - 1.0);
    // A telescope that stands still is not pointed from frame to frame.
    let jump_px = if s.sequences[at.sequence].kind == SequenceKind::Drift {
        0.0
    } else {
        s.pointing_sigma_arcsec / s.scale_arcsec_px
    };
    let centre_px = (
        middle_px + at.drift_px.0 + jump_px * draw.normal(),
        middle_px + at.drift_px.1 + jump_px * draw.normal(),
    );
    let r0_m = seeing::frame_r0_m(s, at);
    let profile = studio.table.at(r0_m);
    let scale_rad = s.scale_arcsec_px * ARCSEC_RAD;
    let samples = limb_arcsec.len() as f64;
    // The first value again behind the last, for the interpolation.
    limb_arcsec.push(limb_arcsec[0]);
    let light_e = |i: usize, j: usize| {
        let (x, y) = (i as f64 - centre_px.0, j as f64 - centre_px.1);
        let (x2, y2) = (x * x, y * y);
        let r_px = (x2 + y2).sqrt();
        let plate = scale_rad * r_px;
        // atan to rounding at the disk, whose plate radius is 0.005.
        let p2 = plate * plate;
        let r_arcsec = plate * (1.0 - p2 * (1.0 / 3.0 - p2 * (0.2 - p2 / 7.0))) / ARCSEC_RAD;
        let turn = (y.atan2(x) / TAU).rem_euclid(1.0) * samples;
        let low = (turn as usize).min(limb_arcsec.len() - 2);
        let part = turn - low as f64;
        let limb = limb_arcsec[low] + part * (limb_arcsec[low + 1] - limb_arcsec[low]);
        let cos2 = if r_px > 0.0 {
            (x2 - y2) / (x2 + y2)
        } else {
            1.0
        };
        let share = r_arcsec / limb;
        let brightness = profile
            .at(r_arcsec - limb, 2.0 * cos2 * cos2 - 1.0)
            .unwrap_or_else(|| {
                if share < 1.0 {
                    studio.darkening.at((1.0 - share * share).sqrt())
                } else {
                    0.0
                }
            });
        s.peak_e * (brightness + s.aureole_rel / (1.0 + share * share)).max(0.0)
    };
    let counts = studio.detector.exposed(light_e, &mut draw);
    let truth = FrameTruth::new(at, r0_m, centre_px, mean_arcsec, &directions, &moved_arcsec);
    (counts, truth)
}
