//! The main job: the stages in order, each called once.

mod assemble;
mod band;
mod correct;
mod definitions;
mod error;
mod limb_model;
pub mod measure;
pub mod products;
mod ruler;
pub mod single;
mod solve;
mod stacking;

use crate::result::record::{Record, Traces};
use crate::session::{Kind, Session};
use crate::stack::Stack;
use correct::CorrectedSequence;
use measure::{MeasuredSequence, is_followed};
use std::sync::Arc;

pub use error::Error;

/// Told how far the work is. Silent by default.
pub trait Progress: Sync {
    /// A stage of `steps` steps begins.
    fn stage(&self, _name: &str, _steps: u64) {}
    /// A step is done.
    fn tick(&self) {}
}

/// Nobody is told.
#[derive(Clone, Copy, Debug)]
pub struct Silent;

impl Progress for Silent {}

/// How to run.
#[derive(Clone, Debug)]
pub struct Options {
    /// Seed of everything random.
    pub seed: u64,
    /// Whether the kept frames are stacked.
    pub stack: bool,
}

impl Default for Options {
    fn default() -> Self {
        Self {
            seed: 1,
            stack: true,
        }
    }
}

/// What a run found.
#[derive(Clone, Debug)]
pub struct Outcome {
    /// The numbers.
    pub record: Record,
    /// What the figures show beyond them.
    pub traces: Traces,
    /// The limbs, air taken out.
    pub limbs: Vec<CorrectedSequence>,
    /// All kept frames, solar north up.
    pub stack: Option<Stack>,
    /// The station's limbs as measured, for the tables.
    pub measured: Vec<MeasuredSequence>,
}

/// Runs every stage once, in order.
///
/// # Errors
///
/// One sentence with file, place, what was found and what is allowed, for whatever stops the run.
pub fn reduce(
    session: &Session,
    options: &Options,
    progress: &dyn Progress,
) -> Result<Outcome, Error> {
    let given = session;
    let mut shared = Vec::new();
    let (mut ruler, session) = ruler::drifts(given, &mut shared, progress)?;
    let session = &session;
    let (measured, mut set_aside) = measure_all(session, &mut shared, progress)?;
    let refractivity_sigma_rel = solve::refractivity_sigma_rel(session, &measured[0]);
    ruler::scans(&mut ruler, session, refractivity_sigma_rel, progress)?;
    set_aside.extend(ruler.set_aside.iter().cloned());
    let limbs: Vec<CorrectedSequence> = measured.iter().map(correct::correct).collect();
    let seeing = solve::seeing(session, &measured, &limbs);
    let selected = solve::select(&measured, &limbs)?;
    let model = limb_model::lines(session, &measured)?;
    let known = solve::known(session, &measured);
    let shape = solve::shape(&selected, &known, &model)?;
    let stacks = if options.stack {
        stacking::combine(&measured, &limbs, &selected, &shape.kept, progress)?
    } else {
        stacking::Stacks::none()
    };
    let by_stack = stacking::shape(&stacks, &measured, &shape, &known, &model);

    let parts = assemble::Parts {
        session,
        given,
        ruler: &ruler,
        options,
        measured: &measured,
        limbs: &limbs,
        set_aside: &set_aside,
        seeing: &seeing,
        selected: &selected,
        shape: &shape,
        by_stack: &by_stack,
        model: &model,
        known: &known,
        stacks: &stacks,
        sources: products::sources(session)?,
    };
    let (record, traces) = assemble::record(&parts);
    Ok(Outcome {
        record,
        traces,
        limbs,
        stack: stacks.whole,
        measured,
    })
}

/// A sequence that no stage of the shape uses, and why.
type SetAside = (usize, String);

/// Every whole-disk sequence measured; one that fails as a whole is set aside as long as another is
/// left.
fn measure_all(
    session: &Session,
    shared: &mut Vec<Arc<measure::Setup>>,
    progress: &dyn Progress,
) -> Result<(Vec<MeasuredSequence>, Vec<SetAside>), Error> {
    let mut measured = Vec::new();
    let mut set_aside = Vec::new();
    let mut first_error = None;
    for (index, sequence) in session.sequences.iter().enumerate() {
        if matches!(sequence.kind, Kind::Drift | Kind::Scan) {
            continue;
        }
        if !is_followed(sequence.kind) {
            let reason = format!(
                "kind \"{}\" does not go to the shape of followed disks",
                measure::kind_word(sequence.kind)
            );
            set_aside.push((index, reason));
            continue;
        }
        match measure::measure(index, session, shared, progress) {
            Ok(it) => measured.push(it),
            Err(it @ Error::NoFrames { .. }) => {
                set_aside.push((index, it.to_string()));
                first_error = first_error.or(Some(it));
            }
            Err(it) => return Err(it),
        }
    }
    match (measured.is_empty(), first_error) {
        (true, Some(it)) => Err(it),
        (true, None) => Err(Error::NoSequence),
        _ => Ok((measured, set_aside)),
    }
}
