//! Injection and recovery: sessions like this one with known shapes, each reduced in full.
//!
//! What the session says of place, times, rolls, telescope, camera, weather and of how well each is
//! known becomes a scenario; a result of the session adds the seeing that reigned and the distortion of
//! its optics. Each made session has errors of its own, drawn by the stated sigmas, and its own
//! turbulence. The answers tell bias, scatter and whether the error bars hold.
//!
//! Not simulated is what `synth` says; each run says in its notes what was assumed.

mod scenario;
mod score;

pub use scenario::{Basis, scenario};
pub use score::clopper_pearson;

use crate::pipeline::{self, Error, Options, Progress, Silent};
use crate::result::record::{Quantity, Record, ShapeQuantity};
use crate::result::recovery::{RECOVERY_VERSION, Recovery, Trial};
use crate::session::{self, Session};
use crate::synth::{self, Scenario, SynthError};
use rayon::prelude::*;
use std::path::Path;

/// How to run.
#[derive(Clone, Debug)]
pub struct Settings {
    /// Oblatenesses to inject, mas.
    pub injected_mas: Vec<f64>,
    /// Sessions for each of them.
    pub sessions: usize,
    /// Seed of everything random.
    pub seed: u64,
    /// Frames of each sequence at the most.
    pub frames: Option<usize>,
}

/// Why nothing could be injected.
#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum RecoverError {
    /// The session or its frames cannot be read.
    #[error(transparent)]
    Session(#[from] Error),
    /// A session like it cannot be made.
    #[error("simulation: {0}")]
    Synth(#[from] SynthError),
    /// The session is of a kind that is not simulated.
    #[error("{what}; {cure}")]
    NotSimulated {
        /// What is not.
        what: String,
        /// What to do.
        cure: &'static str,
    },
    /// No folder for the made sessions.
    #[error("no temporary folder for the made sessions: {reason}")]
    Folder {
        /// What the system said.
        reason: String,
    },
}

/// Makes sessions like this one with known shapes, reduces each, and says how well they came back.
///
/// The same session, result and settings give the same record, whatever the number of threads.
///
/// # Errors
///
/// When a session like this one cannot be made at all; a made session that cannot be reduced is counted.
pub fn recover(
    session: &Session,
    result: Option<&Record>,
    settings: &Settings,
    progress: &dyn Progress,
) -> Result<Recovery, RecoverError> {
    let basis = scenario(session, result, settings.frames)?;
    let jobs: Vec<(f64, u64)> = settings
        .injected_mas
        .iter()
        .enumerate()
        .flat_map(|(k, &mas)| {
            let first = settings.seed + (k * settings.sessions) as u64;
            (0..settings.sessions as u64).map(move |n| (mas, first + n))
        })
        .collect();
    progress.stage("made and reduced", jobs.len() as u64);
    let place = tempfile::Builder::new()
        .prefix("truelimb-recover-")
        .tempdir()
        .map_err(|it| RecoverError::Folder {
            reason: it.to_string(),
        })?;
    let trials: Vec<Trial> = jobs
        .par_iter()
        .map(|&(mas, seed)| {
            let it = trial(session, &basis, mas, seed, place.path());
            progress.tick();
            it
        })
        .collect::<Result<_, _>>()?;
    Ok(Recovery {
        schema_version: RECOVERY_VERSION,
        program_version: env!("CARGO_PKG_VERSION").to_owned(),
        seed: settings.seed,
        scenario: serde_json::to_value(&basis.scenario).unwrap_or_default(),
        notes: basis.notes,
        by_injected: settings
            .injected_mas
            .iter()
            .map(|&mas| score::recovered(Some(mas), &trials))
            .collect(),
        together: score::recovered(None, &trials),
        gain: score::gain(&trials),
        trials,
    })
}

/// One session made, reduced and taken away again.
fn trial(
    session: &Session,
    basis: &Basis,
    injected_mas: f64,
    seed: u64,
    place: &Path,
) -> Result<Trial, RecoverError> {
    let scenario = basis.drawn(session, injected_mas, seed);
    let folder = tempfile::Builder::new()
        .prefix("session-")
        .tempdir_in(place)
        .map_err(|it| RecoverError::Folder {
            reason: it.to_string(),
        })?;
    let made = folder.path().join("made");
    synth::make(&scenario, seed, &made, &|| {})?;
    Ok(reduced(session, &scenario, &made, injected_mas, seed))
}

fn reduced(
    session: &Session,
    scenario: &Scenario,
    made: &Path,
    injected_mas: f64,
    seed: u64,
) -> Trial {
    let outcome = session::read(&made.join("session.toml"))
        .map_err(Error::from)
        .and_then(|mut it| {
            // What is measured with, and what is known by other means, is the session's.
            it.instrument = session.instrument;
            it.limb = session.limb;
            it.rotation = session.rotation;
            it.time.clock_sigma_s = session.time.clock_sigma_s;
            it.refractivity.wavelength_sigma_nm = session.refractivity.wavelength_sigma_nm;
            let options = Options { seed, stack: false };
            pipeline::reduce(&it, &options, &Silent)
        });
    let missing = |unit: &str| Quantity::missing(unit, "the session failed");
    let mut out = Trial {
        seed,
        injected_mas,
        oblateness: missing("mas"),
        oblateness_intervals: None,
        injected_radius_arcsec: scenario.shape.radius_arcsec,
        radius: missing("arcsec"),
        radius_intervals: None,
        failed: None,
    };
    match outcome {
        Ok(outcome) => {
            let shape = &outcome.record.shape;
            out.oblateness = plain(&shape.oblateness);
            out.oblateness_intervals = shape
                .oblateness
                .interval_68
                .zip(shape.oblateness.interval_95)
                .map(|it| [it.0, it.1]);
            out.radius = plain(&shape.radius);
            out.radius_intervals = shape
                .radius
                .interval_68
                .zip(shape.radius.interval_95)
                .map(|it| [it.0, it.1]);
        }
        Err(it) => {
            // Folders of made sessions have names that nobody should depend on.
            let folder = format!("{}/", made.display());
            out.failed = Some(it.to_string().replace(&folder, ""));
        }
    }
    out
}

fn plain(it: &ShapeQuantity) -> Quantity {
    Quantity {
        value: it.value,
        sigma: it.sigma,
        unit: it.unit.clone(),
        reason: it.reason.clone(),
    }
}
