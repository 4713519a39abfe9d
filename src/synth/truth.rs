//! What is true of a made session: `truth.json`.

use serde::Serialize;

use super::Scenario;
use super::sky_above::Moment;

/// The truth behind a made session.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Truth {
    /// Version of the program.
    pub program_version: String,
    /// Number from which everything random was drawn.
    pub seed: u64,
    /// The scenario: shape, camera and air as they truly are.
    pub scenario: Scenario,
    /// `c2` of the figure.
    pub c2: f64,
    /// `c4` of the figure.
    pub c4: f64,
    /// Fried's parameter of all layers, 500 nm, towards the zenith, without its wander; none for
    /// quiet air.
    pub r0_m: Option<f64>,
    /// What the session file and the weather log say, less the truth.
    pub errors: KnowledgeErrors,
    /// What the turbulence of these very frames, averaged with equal weights, adds to the
    /// oblateness, `-2 (c cos 2P + s sin 2P)`.
    pub turbulence_oblateness_mas: f64,
    /// The sequences.
    pub sequences: Vec<SequenceTruth>,
}

/// Nominal minus true.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
pub struct KnowledgeErrors {
    /// Scale, relative.
    pub scale_rel: f64,
    /// Angle of the camera.
    pub angle_deg: f64,
    /// Pressure.
    pub pressure_hpa: f64,
    /// Temperature.
    pub temperature_c: f64,
    /// Relative humidity; smaller than drawn where the log would leave 0 to 1.
    pub relative_humidity: f64,
}

/// One sequence.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct SequenceTruth {
    /// Its file.
    pub file: String,
    /// Its frames.
    pub frames: Vec<FrameTruth>,
}

/// One frame.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct FrameTruth {
    /// Start of the exposure, UTC.
    pub start_utc: String,
    /// True zenith distance of the Sun's centre.
    pub zenith_true_deg: f64,
    /// Mean radius of the limb as seen, without distortion and turbulence.
    pub seen_radius_arcsec: f64,
    /// Distance.
    pub distance_au: f64,
    /// Position angle of the solar north.
    pub axis_deg: f64,
    /// Position angle of the zenith.
    pub parallactic_deg: f64,
    /// Fried's parameter along the line of sight at the wavelength of observation; none for quiet air.
    pub r0_m: Option<f64>,
    /// The air's own zenith: along the vertical, across it.
    pub layer_tilt_arcmin: [f64; 2],
    /// Centre of the undisturbed disk, (x, y), pixels from 0 at their centres.
    pub centre_px: [f64; 2],
    /// The limb's radial displacement by turbulence in the position angle from celestial north: mean,
    /// cos 2, sin 2, cos 3, sin 3, cos 4, sin 4.
    pub turbulence_mas: [f64; 7],
}

impl FrameTruth {
    pub(super) fn new(
        at: &Moment,
        r0_m: f64,
        centre_px: (f64, f64),
        seen_radius_arcsec: f64,
        directions: &[(f64, f64)],
        moved_arcsec: &[f64],
    ) -> Self {
        let mut turbulence_mas = [0.0; 7];
        for (&(sin, cos), moved) in directions.iter().zip(moved_arcsec) {
            let (sin2, cos2) = (2.0 * sin * cos, cos * cos - sin * sin);
            let (sin3, cos3) = (sin2 * cos + cos2 * sin, cos2 * cos - sin2 * sin);
            let (sin4, cos4) = (2.0 * sin2 * cos2, cos2 * cos2 - sin2 * sin2);
            let row = [0.5, cos2, sin2, cos3, sin3, cos4, sin4];
            for (to, it) in turbulence_mas.iter_mut().zip(row) {
                *to += 2000.0 * moved * it / directions.len() as f64;
            }
        }
        let sun = &at.geometry.sun;
        Self {
            start_utc: at.start.to_iso(),
            zenith_true_deg: sun.zenith_true_rad.to_degrees(),
            seen_radius_arcsec,
            distance_au: sun.distance_au,
            axis_deg: sun.axis_rad.to_degrees(),
            parallactic_deg: sun.parallactic_rad.to_degrees(),
            r0_m: r0_m.is_finite().then_some(r0_m),
            layer_tilt_arcmin: [at.tilt_arcmin.0, at.tilt_arcmin.1],
            centre_px: [centre_px.0, centre_px.1],
            turbulence_mas,
        }
    }

    /// What this frame's turbulence adds to the oblateness, mas.
    pub(super) fn oblateness_mas(&self) -> f64 {
        let (sin, cos) = (2.0 * self.axis_deg.to_radians()).sin_cos();
        -2.0 * (self.turbulence_mas[1] * cos + self.turbulence_mas[2] * sin)
    }
}
