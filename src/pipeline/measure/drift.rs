//! A drift measured: scale and angle from the Sun's own motion.

use super::reading::times;
use super::sky::Sky;
use super::{Error, MeasuredSequence, Progress, Setup, measure};
use crate::drift::{self, Centre, DriftFit, FixedCamera, Seen};
use crate::pipeline::solve::refractivity_sigma_rel;
use crate::session::Session;
use crate::sky::{self, Mount, SunPlace};
use crate::units::{DEG_RAD, wrapped_rad};
use std::sync::Arc;

/// One drift.
#[derive(Clone, Debug)]
pub struct MeasuredDrift {
    /// Its frames.
    pub measured: MeasuredSequence,
    /// Frames in which the disk was whole and clear of the edge.
    pub whole: usize,
    /// Frames in which it touched the edge.
    pub touching: usize,
    /// What the centres say.
    pub fit: DriftFit,
    /// Scale, arcsec a pixel, and its relative standard uncertainty with the clock's rate and the air's.
    pub scale: (f64, f64),
    /// Camera angle as the session counts it, deg, and its standard uncertainty.
    pub angle_deg: (f64, f64),
    /// Relative change of the scale by one second of readout of the whole frame.
    pub scale_by_readout_per_s: f64,
}

/// Pixels that must be free beyond the limb's window.
const CLEAR_PX: f64 = 1.0;

/// Measures a drift.
///
/// # Errors
///
/// As a sequence of frames, and [`Error::Drift`] for a Sun that does not move as it must.
pub fn measure_drift(
    index: usize,
    session: &Session,
    shared: &mut Vec<Arc<Setup>>,
    progress: &dyn Progress,
) -> Result<MeasuredDrift, Error> {
    let measured = measure(index, session, shared, None, progress)?;
    let sequence = &session.sequences[index];
    let (width, height) = (measured.list.width as f64, measured.list.height as f64);
    let readout_s = sequence.camera.readout_s.unwrap_or(0.0);
    let stamps = times(&measured.list, session)?;
    let (Some(first), Some(last)) = (stamps.first(), stamps.last()) else {
        return Err(Error::NoFrames {
            sequence: index,
            reason: "the files hold no frame".to_owned(),
        });
    };
    let sky = Sky::new(session, sequence, first.0, last.0.plus_s(readout_s))?;
    let mut centres = Vec::new();
    let mut touching = 0;
    for frame in &measured.frames {
        let (x, y) = frame.limb.centre_px;
        let reach = CLEAR_PX + reach_px(frame, &measured);
        if x < reach || y < reach || x + reach > width - 1.0 || y + reach > height - 1.0 {
            touching += 1;
            continue;
        }
        // The stamp is that of the first row.
        let at = frame.utc.plus_s(readout_s * y / (height - 1.0));
        let (moment, ..) = sky.moment(at)?;
        centres.push(Centre {
            time_s: at.minus(first.0),
            x_px: x,
            y_px: y,
            seen: Seen {
                azimuth_rad: moment.sun.azimuth_rad,
                zenith_rad: moment.map.as_ref().map_or(
                    moment.sun.zenith_true_rad,
                    crate::air::DiskMap::zenith_apparent_rad,
                ),
            },
        });
    }
    centres.sort_by(|a, b| a.time_s.total_cmp(&b.time_s));
    let camera = FixedCamera {
        plate: measured.setup.plate,
        refractivity: measured.middle.refractivity,
        parity: sequence.camera.parity,
        middle_px: (0.5 * (width - 1.0), 0.5 * (height - 1.0)),
    };
    let mounted_rad = (sequence.camera.angle_deg + sequence.roll_deg) * DEG_RAD;
    let field_rad = |parallactic_rad: f64| match session.telescope.mount {
        Mount::Equatorial | Mount::Coelostat => parallactic_rad,
        Mount::Altazimuth | Mount::Fixed => 0.0,
    };
    let middle = &measured.middle;
    let nominal_up = mounted_rad - field_rad(middle.sun.parallactic_rad);
    let fit = drift::fit(
        &centres,
        &camera,
        (sequence.camera.scale_arcsec_px, nominal_up),
    )
    .map_err(|source| Error::Drift {
        sequence: index,
        source,
    })?;
    let axis = fit.mounting.axis;
    let zenith_true = axis.zenith_rad
        + middle
            .map
            .as_ref()
            .map_or(0.0, |it| it.bending().refraction_rad(axis.zenith_rad));
    let at_axis = SunPlace {
        azimuth_rad: axis.azimuth_rad,
        zenith_true_rad: zenith_true,
        ..middle.sun
    };
    let parallactic = sky::parallactic_at_zenith_rad(&super::place(session), &at_axis, zenith_true);
    let off = wrapped_rad(fit.mounting.up_rad + field_rad(parallactic) - mounted_rad);
    let systematic = systematic_rel(session, &measured);
    Ok(MeasuredDrift {
        whole: centres.len(),
        touching,
        scale: (
            fit.mounting.scale_arcsec_px,
            fit.scale_sigma_rel.hypot(systematic),
        ),
        angle_deg: (
            sequence.camera.angle_deg + off.to_degrees(),
            fit.up_sigma_rad.hypot(systematic).to_degrees(),
        ),
        // Rows read along the motion see the Sun later, so farther on: a pixel seems smaller.
        scale_by_readout_per_s: -fit.velocity_px_s.1 / (height - 1.0),
        measured,
        fit,
    })
}

/// Radius of the limb's window, px.
fn reach_px(frame: &super::MeasuredFrame, measured: &MeasuredSequence) -> f64 {
    let largest = frame
        .limb
        .sectors
        .iter()
        .map(|it| it.radius_arcsec)
        .filter(|it| it.is_finite())
        .fold(0.0, |a: f64, b| if b > a { b } else { a });
    (largest + measured.setup.window_arcsec.1) / measured.setup.scale_arcsec_px
}

/// What clock and air add to the relative error of the scale, and to the angle in radians.
fn systematic_rel(session: &Session, measured: &MeasuredSequence) -> f64 {
    // The air contracts by A along the horizon and A / cos^2 z along the vertical: the larger is taken.
    let tan = measured.middle.sun.zenith_true_rad.tan();
    let air = refractivity_sigma_rel(session, measured)
        * measured.middle.refractivity
        * (1.0 + tan * tan);
    air.hypot(1e-6 * session.time.clock_rate_sigma_ppm)
}
