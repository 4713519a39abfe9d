//! What the model of the limb adds to the error of the radius: other edges, laws and blurs measured
//! by the extraction as it stands.

use super::Error;
use super::measure::{MeasuredSequence, limb_optics, predicted};
use crate::budget::{self, Displacement};
use crate::disk::{Darkening, DarkeningLaw};
use crate::limb::Extraction;
use crate::limb::template::EdgeTable;
use crate::optics::Exposure;
use crate::optics::limb_profile::LimbOptics;
use crate::session::Session;
use crate::shape::{Contribution, REFERENCE_RADIUS_MAS};

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
    let angles: Vec<f64> = (0..setup.annulus.sectors())
        .map(|s| setup.annulus.angle_rad(s))
        .collect();
    let table = |optics: &LimbOptics| -> Result<EdgeTable, Error> {
        Ok(EdgeTable::new(optics, 0.0, setup.scale_arcsec_px, &angles)?)
    };
    let at = |table: &EdgeTable, blur: f64| -> Result<Displacement, Error> {
        Ok(budget::displacement(table, blur, &extraction)?)
    };
    let own = Moved::of(&setup.table, blur, 1.0, &at)?;
    let uneven = Unevenness::of(measured);
    // What a blur that is not the same all around the limb makes of a displacement that depends on blur.
    let line = |term: &str, other: &Moved, share: f64, how: &str| {
        let radius = share * (other.radius_mas - own.radius_mas) * au;
        let slope = share * (other.slope_mas - own.slope_mas) * au;
        let figure = [
            radius.abs(),
            (2.0 * uneven.second * slope).abs(),
            (64.0 / 35.0 * uneven.fourth * slope).abs(),
        ];
        budget::limb_model_line(term, figure, how)
    };
    let around = format!(
        "; on the oblateness through the blur around the limb ({:+.2} percent in m = 2 about the Sun's axis)",
        100.0 * uneven.second
    );

    let sequence = &session.sequences[first.index];
    let edge_km = session.limb.edge_scale_km;
    let sigma_km = session.limb.edge_scale_sigma_km;
    let thicker = table(&limb_optics(
        session,
        sequence,
        &first.middle,
        edge_km + sigma_km,
    )?)?;
    let mut lines = vec![line(
        "thickness of the Sun's edge",
        &Moved::of(&thicker, blur, 1.0, &at)?,
        1.0,
        &format!(
            "limb.edge_scale_km = {edge_km} known to {sigma_km}, through the extraction at the session's blur{around}"
        ),
    )];
    if blur > 0.0 {
        let long = table(&LimbOptics {
            exposure: Exposure::Long,
            ..setup.optics
        })?;
        let share = same_width(&long, blur, &at)?;
        lines.push(line(
            "shape of the blur",
            &Moved::of(&long, blur, share, &at)?,
            0.5,
            &format!("half of the change with a long-exposure blur of the same width{around}"),
        ));
    }
    let law = Darkening::new(DarkeningLaw::NeckelLabs1994, sequence.filter.centre_nm).ok();
    lines.push(match law {
        Some(darkening) => {
            let mut optics = setup.optics;
            optics.edge.darkening = darkening;
            line(
                "limb-darkening law",
                &Moved::of(&table(&optics)?, blur, 1.0, &at)?,
                1.0,
                &format!(
                    "Neckel & Labs (1994) at its nearest wavelength in place of Neckel (2005){around}"
                ),
            )
        }
        None => budget::limb_model_line(
            "limb-darkening law",
            [3.8, 0.0, 0.0],
            "rms difference of the two published laws at 2 arcsec of blur; no tabulated wavelength is near",
        ),
    });
    lines.push(flat_field(session, measured, &extraction, blur, au)?);
    Ok(LimbModel {
        lines,
        radius_bias_mas: own.radius_mas * au,
        blur,
    })
}

/// Relative gradient that a flat field is trusted to leave across the disk's radius, and that of a
/// session without one: common practice, no source.
const FLAT_GRADIENT: (f64, f64) = (0.005, 0.03);

/// The line of the flat field: free instrument terms take what is fixed to the detector, so that the
/// figure is moved only where they are not free.
fn flat_field(
    session: &Session,
    measured: &[MeasuredSequence],
    extraction: &Extraction<'_>,
    blur: f64,
    au: f64,
) -> Result<Contribution, Error> {
    let setup = &measured[0].setup;
    let with_flat = measured.iter().all(|it| it.has_flat);
    let gradient = if with_flat {
        FLAT_GRADIENT.0
    } else {
        FLAT_GRADIENT.1
    };
    let radius_px = REFERENCE_RADIUS_MAS / 1000.0 / au / setup.scale_arcsec_px;
    let moved = budget::shaded(extraction, blur, gradient, radius_px)?;
    let (second, fourth, where_to) = if session.instrument.distortion_sigma_mas.is_some() {
        (2.0 * moved.second_mas, 64.0 / 35.0 * moved.fourth_mas, "")
    } else {
        (
            0.0,
            0.0,
            "; fixed to the detector, so that the instrument's free terms take its figure",
        )
    };
    Ok(budget::limb_model_line(
        "gradient of the flat field",
        [moved.radius_mas.abs(), second, fourth].map(|it| it * au),
        &format!(
            "brightness off by {:.1} percent across the disk's radius, linear and square, through the extraction{where_to}",
            100.0 * gradient
        ),
    ))
}

/// What another model of the limb does, and how that depends on blur.
struct Moved {
    /// Displacement at the session's blur, mas as seen.
    radius_mas: f64,
    /// Its change for a relative change of the blur by one, mas.
    slope_mas: f64,
}

/// Step in relative blur of the slope.
const BLUR_STEP: f64 = 0.15;

impl Moved {
    /// Displacements by a table whose blur counts `share` of the session's.
    fn of(
        table: &EdgeTable,
        blur: f64,
        share: f64,
        at: &impl Fn(&EdgeTable, f64) -> Result<Displacement, Error>,
    ) -> Result<Self, Error> {
        let radius = |factor: f64| at(table, share * factor * blur).map(|it| it.radius_mas);
        let slope_mas = if blur > 0.0 {
            (radius(1.0 + BLUR_STEP)? - radius(1.0 - BLUR_STEP)?) / (2.0 * BLUR_STEP)
        } else {
            0.0
        };
        Ok(Self {
            radius_mas: radius(1.0)?,
            slope_mas,
        })
    }
}

/// Relative blur around the limb about the Sun's axis: cosines of m = 2 and 4, mean of all frames.
struct Unevenness {
    second: f64,
    fourth: f64,
}

impl Unevenness {
    fn of(measured: &[MeasuredSequence]) -> Self {
        let (mut second, mut fourth, mut count) = (0.0, 0.0, 0.0);
        for sequence in measured {
            for frame in &sequence.frames {
                let mean = frame.limb.mean_blur();
                if !(mean > 0.0) {
                    continue;
                }
                let (axis_rad, _) = frame.moment.axis_and_zenith_rad();
                for (s, sector) in frame.limb.sectors.iter().enumerate() {
                    if sector.flag != crate::limb::Flag::Good {
                        continue;
                    }
                    let angle = sequence.setup.annulus.angle_rad(s) - axis_rad;
                    let relative = sector.blur / mean - 1.0;
                    second += 2.0 * relative * (2.0 * angle).cos();
                    fourth += 2.0 * relative * (4.0 * angle).cos();
                    count += 1.0;
                }
            }
        }
        if count == 0.0 {
            return Self {
                second: 0.0,
                fourth: 0.0,
            };
        }
        Self {
            second: second / count,
            fourth: fourth / count,
        }
    }
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

/// Share of the session's blur that a table needs for the extraction to see the same width.
fn same_width(
    table: &EdgeTable,
    blur: f64,
    at: &impl Fn(&EdgeTable, f64) -> Result<Displacement, Error>,
) -> Result<f64, Error> {
    let mut share = 0.5;
    for _ in 0..2 {
        let seen = at(table, share * blur)?.blur_ratio * share;
        if !(seen > 0.05) {
            break;
        }
        share = (share / seen).clamp(0.02, 2.0);
    }
    Ok(share)
}
