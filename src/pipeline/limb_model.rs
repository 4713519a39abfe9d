//! What the model of the limb adds to the error of the radius: other edges, laws and blurs measured
//! by the extraction as it stands.

use super::Error;
use super::measure::{MeasuredSequence, Setup, limb_optics, predicted};
use crate::budget::{self, Displacement};
use crate::disk::{Darkening, DarkeningLaw};
use crate::limb::Extraction;
use crate::limb::template::EdgeTable;
use crate::optics::Exposure;
use crate::optics::limb_profile::LimbOptics;
use crate::session::Session;
use crate::shape::Contribution;

/// Lines of the limb's model.
#[derive(Clone, Debug)]
pub(super) struct LimbModel {
    /// The lines.
    pub lines: Vec<Contribution>,
    /// What the extraction itself leaves on a noise-free limb of its own model, mas at 1 AU: taken
    /// off the radius.
    pub radius_bias_mas: f64,
    /// Mean blur of the session.
    pub blur: f64,
}

/// Works the lines out at the first sequence's camera and the session's mean blur.
///
/// # Errors
///
/// Whatever the tables or the extraction refuse.
pub(super) fn lines(session: &Session, measured: &[MeasuredSequence]) -> Result<LimbModel, Error> {
    let first = &measured[0];
    let setup = &first.setup;
    if measured.iter().any(|it| it.elsewhere) {
        // Another program's limb answers to another model, which is not known here.
        return Ok(LimbModel {
            lines: Vec::new(),
            radius_bias_mas: 0.0,
            blur: mean_blur(measured),
        });
    }
    let (model, slope) = predicted(setup, &first.middle);
    let blur = mean_blur(measured);
    let extraction = Extraction {
        table: &setup.table,
        annulus: &setup.annulus,
        calibration: &setup.calibration,
        detector: setup.detector,
        model_arcsec: &model,
        model_slope: &slope,
        blur_start: blur,
    };
    let au = first.middle.sun.distance_au;
    let with = |optics: &LimbOptics, blur: f64| -> Result<Displacement, Error> {
        let angles: Vec<f64> = (0..setup.annulus.sectors())
            .map(|s| setup.annulus.angle_rad(s))
            .collect();
        let table = EdgeTable::new(optics, 0.0, setup.scale_arcsec_px, &angles)?;
        Ok(budget::displacement(&table, blur, &extraction)?)
    };
    let own = budget::displacement(&setup.table, blur, &extraction)?;

    let sequence = &session.sequences[first.index];
    let edge_km = session.limb.edge_scale_km;
    let sigma_km = session.limb.edge_scale_sigma_km;
    let thicker = limb_optics(session, sequence, &first.middle, edge_km + sigma_km)?;
    let edge = with(&thicker, blur)?.radius_mas - own.radius_mas;

    let blurred = blur_family(setup, blur, &with)? - own.radius_mas;
    let law =
        other_law(setup, sequence.filter.centre_nm, blur, &with)?.map(|it| it - own.radius_mas);

    let mut lines = vec![
        budget::limb_model_line(
            "thickness of the Sun's edge",
            edge.abs() * au,
            &format!(
                "limb.edge_scale_km = {edge_km} known to {sigma_km}, through the extraction at the session's blur"
            ),
        ),
        budget::limb_model_line(
            "shape of the blur",
            0.5 * blurred.abs() * au,
            "half of the change with a long-exposure blur of the same width",
        ),
    ];
    lines.push(match law {
        Some(it) => budget::limb_model_line(
            "limb-darkening law",
            it.abs() * au,
            "Neckel & Labs (1994) at its nearest wavelength in place of Neckel (2005)",
        ),
        None => budget::limb_model_line(
            "limb-darkening law",
            3.8,
            "rms difference of the two published laws at 2 arcsec of blur; no tabulated wavelength is near",
        ),
    });
    Ok(LimbModel {
        lines,
        radius_bias_mas: own.radius_mas * au,
        blur,
    })
}

/// Mean blur of all frames.
fn mean_blur(measured: &[MeasuredSequence]) -> f64 {
    let all: Vec<f64> = measured
        .iter()
        .flat_map(|it| &it.frames)
        .map(|it| it.limb.mean_blur())
        .filter(|it| it.is_finite())
        .collect();
    let mean = all.iter().sum::<f64>() / all.len() as f64;
    if mean > 0.0 { mean } else { 0.0 }
}

/// Displacement by a long-exposure blur that the extraction sees as the same width.
fn blur_family(
    setup: &Setup,
    blur: f64,
    with: &impl Fn(&LimbOptics, f64) -> Result<Displacement, Error>,
) -> Result<f64, Error> {
    if blur <= 0.0 {
        return Ok(0.0);
    }
    let optics = LimbOptics {
        exposure: Exposure::Long,
        ..setup.optics
    };
    let mut share = 0.5;
    let mut found = with(&optics, share * blur)?;
    for _ in 0..2 {
        let seen = found.blur_ratio * share;
        if !(seen > 0.05) {
            break;
        }
        share = (share / seen).clamp(0.02, 2.0);
        found = with(&optics, share * blur)?;
    }
    Ok(found.radius_mas)
}

/// Displacement by the other published law, where it has a row near.
fn other_law(
    setup: &Setup,
    wavelength_nm: f64,
    blur: f64,
    with: &impl Fn(&LimbOptics, f64) -> Result<Displacement, Error>,
) -> Result<Option<f64>, Error> {
    let Ok(darkening) = Darkening::new(DarkeningLaw::NeckelLabs1994, wavelength_nm) else {
        return Ok(None);
    };
    let mut optics = setup.optics;
    optics.edge.darkening = darkening;
    Ok(Some(with(&optics, blur)?.radius_mas))
}
