//! Drifts and scans beside the frames: the camera as the Sun's motion measures it, and the shape by transits.

use super::measure::{MeasuredDrift, MeasuredScan, measure_drift, measure_scan};
use super::{Error, Progress, SetAside};
use crate::scan::{ScanFit, ScanKnown};
use crate::session::{Camera, Kind, Session};
use crate::units::DEG_RAD;
use std::sync::Arc;

/// A number known from the session and from drifts.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Choice {
    /// Value and standard uncertainty of the session file.
    pub(super) nominal: (f64, f64),
    /// The same from all drifts.
    pub(super) drift: (f64, f64),
    /// Difference in units of its standard uncertainty.
    pub(super) pull: f64,
    /// Whether the drift's is used.
    pub(super) by_drift: bool,
    /// Factor on the drifts' errors where they scatter more than these say.
    pub(super) excess: f64,
}

/// The camera as the drifts measured it.
#[derive(Clone, Debug, PartialEq)]
pub(super) struct CameraByDrift {
    /// Arcsec a pixel.
    pub(super) scale: Choice,
    /// Degrees, as `camera.angle_deg`.
    pub(super) angle: Choice,
}

/// What the Sun's motion gave.
#[derive(Clone, Debug, Default)]
pub(super) struct Ruler {
    /// The drifts.
    pub(super) drifts: Vec<MeasuredDrift>,
    /// The scans.
    pub(super) scans: Vec<MeasuredScan>,
    /// The camera, where a drift measured it.
    pub(super) camera: Option<CameraByDrift>,
    /// The shape by transits, or why there is none.
    pub(super) by_scan: Option<Result<ScanFit, String>>,
    /// Drifts and scans that gave nothing, and why.
    pub(super) set_aside: Vec<SetAside>,
}

/// Measures every drift; the session with the camera that they give, where that is better.
///
/// # Errors
///
/// What stops a run: a parity that the drift contradicts, weather that does not cover it.
pub(super) fn drifts(
    session: &Session,
    shared: &mut Vec<Arc<super::measure::Setup>>,
    progress: &dyn Progress,
) -> Result<(Ruler, Session), Error> {
    let mut ruler = Ruler::default();
    for (index, sequence) in session.sequences.iter().enumerate() {
        if sequence.kind != Kind::Drift {
            continue;
        }
        match measure_drift(index, session, shared, progress) {
            Ok(it) => ruler.drifts.push(it),
            Err(it) if stops(&it) => return Err(it),
            Err(it) => ruler.set_aside.push((index, it.to_string())),
        }
    }
    let mut better = session.clone();
    ruler.camera = by_drifts(session, &ruler.drifts);
    if let (Some(it), Some(first)) = (&ruler.camera, ruler.drifts.first()) {
        let of = session.sequences[first.measured.index].camera.clone();
        replace(&mut better.camera, &of, it);
        for sequence in &mut better.sequences {
            replace(&mut sequence.camera, &of, it);
        }
    }
    Ok((ruler, better))
}

/// A drift or scan that contradicts the session file stops the run: the other sequences are read by the
/// same file.
fn stops(error: &Error) -> bool {
    match error {
        Error::Drift { source, .. } => matches!(source, crate::drift::DriftError::WrongWay { .. }),
        Error::Scan { .. } | Error::NoFrames { .. } | Error::Limb(_) | Error::Fits(_) => false,
        _ => true,
    }
}

/// Whether two sequences have one detector behind one lens.
fn one_camera(a: &Camera, b: &Camera) -> bool {
    a.scale_arcsec_px.to_bits() == b.scale_arcsec_px.to_bits()
        && a.angle_deg.to_bits() == b.angle_deg.to_bits()
        && (a.projection, a.scale_of, a.parity) == (b.projection, b.scale_of, b.parity)
}

fn replace(camera: &mut Camera, of: &Camera, by: &CameraByDrift) {
    if !one_camera(camera, of) {
        return;
    }
    if by.scale.by_drift {
        camera.scale_arcsec_px = by.scale.drift.0;
        camera.scale_sigma_rel = by.scale.drift.1 / by.scale.drift.0;
    }
    if by.angle.by_drift {
        camera.angle_deg = by.angle.drift.0;
        camera.angle_sigma_deg = by.angle.drift.1;
    }
}

/// Scale and angle of all drifts of the first one's camera.
fn by_drifts(session: &Session, drifts: &[MeasuredDrift]) -> Option<CameraByDrift> {
    let first = drifts.first()?;
    let camera = &session.sequences[first.measured.index].camera;
    let same: Vec<&MeasuredDrift> = drifts
        .iter()
        .filter(|it| one_camera(&session.sequences[it.measured.index].camera, camera))
        .collect();
    let scales: Vec<(f64, f64)> = same
        .iter()
        .map(|it| (it.scale.0, it.scale.0 * it.scale.1))
        .collect();
    let angles: Vec<(f64, f64)> = same.iter().map(|it| it.angle_deg).collect();
    let scale = camera.scale_arcsec_px;
    Some(CameraByDrift {
        scale: chosen((scale, scale * camera.scale_sigma_rel), &scales),
        angle: chosen((camera.angle_deg, camera.angle_sigma_deg), &angles),
    })
}

/// The weighted mean of the drifts against the nominal value; the better of the two is used.
fn chosen(nominal: (f64, f64), drifts: &[(f64, f64)]) -> Choice {
    let weights: Vec<f64> = drifts.iter().map(|it| 1.0 / (it.1 * it.1)).collect();
    let total: f64 = weights.iter().sum();
    let mean = drifts
        .iter()
        .zip(&weights)
        .map(|(it, w)| it.0 * w)
        .sum::<f64>()
        / total;
    let chi2: f64 = drifts
        .iter()
        .zip(&weights)
        .map(|(it, w)| w * (it.0 - mean).powi(2))
        .sum();
    let degrees = drifts.len() as f64 - 1.0;
    let excess = if degrees > 0.0 && chi2 > degrees {
        (chi2 / degrees).sqrt()
    } else {
        1.0
    };
    let sigma = excess / total.sqrt();
    Choice {
        nominal,
        drift: (mean, sigma),
        pull: (mean - nominal.0) / sigma.hypot(nominal.1),
        by_drift: sigma < nominal.1,
        excess,
    }
}

/// Measures every scan, by the session whose camera the drifts gave, and fits the transits together.
///
/// # Errors
///
/// What stops a run.
pub(super) fn scans(
    ruler: &mut Ruler,
    session: &Session,
    refractivity_sigma_rel: f64,
    progress: &dyn Progress,
) -> Result<(), Error> {
    for (index, sequence) in session.sequences.iter().enumerate() {
        if sequence.kind != Kind::Scan {
            continue;
        }
        match measure_scan(index, session, refractivity_sigma_rel, progress) {
            Ok(it) => ruler.scans.push(it),
            Err(it) if stops(&it) => return Err(it),
            Err(it) => ruler.set_aside.push((index, it.to_string())),
        }
    }
    let Some(first) = ruler.scans.first() else {
        return Ok(());
    };
    let camera = &session.sequences[first.index].camera;
    let known = ScanKnown {
        scale_sigma_rel: camera.scale_sigma_rel,
        angle_sigma_rad: camera.angle_sigma_deg * DEG_RAD,
        clock_sigma_rel: 1e-6 * session.time.clock_rate_sigma_ppm,
        refractivity_sigma_rel,
    };
    let transits: Vec<_> = ruler
        .scans
        .iter()
        .flat_map(|it| it.transits.iter().map(|it| it.observation))
        .collect();
    ruler.by_scan = Some(crate::scan::fit(&transits, &known).map_err(|it| it.to_string()));
    Ok(())
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_better_of_two_is_used_and_the_pull_is_stated() {
        let it = chosen((2.0, 0.01), &[(2.01, 0.002), (2.01, 0.002)]);
        assert!(it.by_drift && (it.drift.0 - 2.01).abs() < 1e-12);
        assert!((it.drift.1 - 0.002 / 2.0_f64.sqrt()).abs() < 1e-12);
        assert!((it.pull - 0.01 / 0.01_f64.hypot(it.drift.1)).abs() < 1e-9);
        assert!(!chosen((2.0, 0.0001), &[(2.01, 0.002)]).by_drift);
    }

    #[test]
    fn drifts_that_disagree_have_larger_errors() {
        let it = chosen((2.0, 0.1), &[(2.01, 0.002), (2.03, 0.002)]);
        assert!((it.drift.1 - 0.01).abs() < 1e-9, "{it:?}");
    }
}
