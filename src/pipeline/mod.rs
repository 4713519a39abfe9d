//! The main job: the stages in order, each called once.

pub(crate) mod ahead;
pub mod air;
mod assemble;
pub mod axis_blur;
mod band;
mod blemishes;
mod correct;
mod definitions;
mod error;
mod limb_model;
mod limb_table;
mod mask_image;
mod masking;
pub mod measure;
mod frame_table;
pub mod products;
mod ruler;
pub mod single;
mod solve;
mod stacking;

use crate::result::record::{Record, Traces};
use crate::session::{Kind, Session};
use crate::stack::Stack;
use correct::CorrectedSequence;
use limb_table::{Given, Saved};
use measure::MeasuredSequence;
use std::borrow::Cow;
use std::path::Path;
use std::sync::Arc;

pub use error::Error;
pub use measure::{is_followed, times_of};

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
    /// Variance of the limb's noise over what photons and read noise let expect, with its uncertainty.
    pub noise: Option<(f64, f64)>,
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
    let (session, given) = with_tables(session)?;
    stages(&session, &given, options, progress)
}

/// Runs the stages after the frames on the limbs that a run before saved in its `limbs.fits`: weather,
/// clock, camera angle and scale are the session's as it now stands. There is no stack.
///
/// # Errors
///
/// As [`reduce`], and where the session asks for limbs that only frames can give.
pub fn refit(
    session: &Session,
    limbs: &Path,
    options: &Options,
    progress: &dyn Progress,
) -> Result<Outcome, Error> {
    let saved = Saved::read(limbs)?;
    if session.sequences.iter().any(|it| it.kind == Kind::Limbs) {
        return Err(Error::File {
            path: limbs.to_owned(),
            what: "cannot stand for this session",
            reason: "it has sequences of kind \"limbs\", which need no frames: reduce it as it is"
                .to_owned(),
        });
    }
    if let Some(index) = saved.beyond(session.sequences.len()) {
        return Err(Error::File {
            path: limbs.to_owned(),
            what: "belongs to another session",
            reason: format!(
                "it has a sequence {}, the session has {}",
                index + 1,
                session.sequences.len()
            ),
        });
    }
    let mut session = session.clone();
    session.sources.push(limbs.to_owned());
    let mut given = Vec::new();
    for index in 0..session.sequences.len() {
        let it = saved.given(index, &session)?;
        if it.is_none() && is_followed(session.sequences[index].kind) {
            return Err(Error::File {
                path: limbs.to_owned(),
                what: "has no limb",
                reason: format!("of sequence {} of the session", index + 1),
            });
        }
        given.push(it);
    }
    for it in &mut session.sequences {
        // Drifts and scans have no limbs of frames in the table: they are read again.
        if !is_followed(it.kind) {
            continue;
        }
        it.files.clear();
        it.calibration = crate::session::Calibration::default();
        it.camera.bad_pixels = None;
    }
    stages(
        &session,
        &given,
        &Options {
            stack: false,
            ..options.clone()
        },
        progress,
    )
}

/// The session with every group of limbs measured elsewhere as a sequence of its own, and those limbs.
fn with_tables(session: &Session) -> Result<(Cow<'_, Session>, Vec<Option<Given>>), Error> {
    if session.sequences.iter().all(|it| it.kind != Kind::Limbs) {
        return Ok((Cow::Borrowed(session), vec![None; session.sequences.len()]));
    }
    let mut whole = session.clone();
    let mut given = Vec::new();
    whole.sequences.clear();
    for it in &session.sequences {
        if it.kind == Kind::Limbs {
            for (sequence, limbs) in limb_table::of_files(it)? {
                whole.sequences.push(sequence);
                given.push(Some(limbs));
            }
        } else {
            whole.sequences.push(it.clone());
            given.push(None);
        }
    }
    Ok((Cow::Owned(whole), given))
}

fn stages(
    given: &Session,
    tables: &[Option<Given>],
    options: &Options,
    progress: &dyn Progress,
) -> Result<Outcome, Error> {
    let mut shared = Vec::new();
    let (mut ruler, session) = ruler::drifts(given, &mut shared, progress)?;
    let session = &session;
    let (mut measured, mut set_aside) = measure_all(session, tables, &mut shared, progress)?;
    let refractivity_sigma_rel = solve::refractivity_sigma_rel(session, &measured[0]);
    ruler::scans(&mut ruler, session, refractivity_sigma_rel, progress)?;
    set_aside.extend(ruler.set_aside.iter().cloned());
    let image = session.mask.as_ref().map(mask_image::bins).transpose()?;
    let blemishes = blemishes::judge(&mut measured, image.as_deref());
    axis_blur::work_out(&mut measured)?;
    let limbs: Vec<CorrectedSequence> = measured.iter().map(correct::correct).collect();
    // What stays where it is moves no harmonic in time: the seeing uses the whole limb.
    let bare: Vec<CorrectedSequence> = measured
        .iter()
        .zip(&limbs)
        .map(|(m, l)| correct::without_mask(m, l))
        .collect();
    let seeing = solve::seeing(session, &measured, &bare);
    let selected = solve::select(&measured, &limbs)?;
    let model = limb_model::lines(session, &measured)?;
    let known = solve::known(session, &measured)?;
    let shape = solve::shape(&selected, &known, &model, options.seed)?;
    let has_pixels = measured.iter().all(|it| !it.from_table);
    let stacks = if options.stack && has_pixels {
        stacking::combine(
            &measured,
            &limbs,
            &selected,
            &shape.kept,
            model.blur,
            progress,
        )?
    } else {
        stacking::Stacks::none()
    };
    let by_stack = stacking::shape(&stacks, &shape, &known);

    let masking = masking::record(
        &blemishes,
        &measured,
        &bare,
        &selected,
        &shape,
        &known,
        model.radius_bias_mas,
    );
    let parts = assemble::Parts {
        masking: &masking,
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
    let noise = seeing.noise.map(|it| (it.value, it.sigma));
    Ok(Outcome {
        record,
        traces,
        limbs,
        stack: stacks.whole,
        measured,
        noise,
    })
}

/// A sequence that no stage of the shape uses, and why.
type SetAside = (usize, String);

/// Every whole-disk sequence measured; one that fails as a whole is set aside as long as another is
/// left.
fn measure_all(
    session: &Session,
    tables: &[Option<Given>],
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
        if !is_followed(sequence.kind) && tables[index].is_none() {
            let reason = format!(
                "kind \"{}\" does not go to the shape of followed disks",
                measure::kind_word(sequence.kind)
            );
            set_aside.push((index, reason));
            continue;
        }
        match measure::measure(index, session, shared, tables[index].as_ref(), progress) {
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
