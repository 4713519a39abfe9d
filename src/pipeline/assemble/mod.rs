//! The outcome of the stages put into the records of the result.

mod shape;
mod interior;
pub(super) mod seeing;
mod turbulence;
mod sequences;
mod selection;
mod ruler;
mod warnings;
pub(super) mod traces;

use super::correct::CorrectedSequence;
use super::limb_model::LimbModel;
use super::measure::MeasuredSequence;
use super::ruler::Ruler;
use super::solve::{SeeingResult, Selected, Shape};
use super::stacking::Stacks;
use super::{Options, SetAside};
use crate::budget;
use crate::result::record::{
    MaskingRecord, Record, SCHEMA_VERSION, ShapeQuantity, SourceFile, Status, Traces,
};
use crate::session::Session;
use crate::shape::{Block, Contribution, Fit, Known};

/// Everything the record is made from.
pub(super) struct Parts<'a> {
    pub(super) masking: &'a MaskingRecord,
    /// The session with the camera that the drifts gave.
    pub(super) session: &'a Session,
    /// The session as it was given.
    pub(super) given: &'a Session,
    pub(super) ruler: &'a Ruler,
    pub(super) options: &'a Options,
    pub(super) measured: &'a [MeasuredSequence],
    pub(super) limbs: &'a [CorrectedSequence],
    pub(super) set_aside: &'a [SetAside],
    pub(super) seeing: &'a SeeingResult,
    pub(super) selected: &'a Selected,
    pub(super) shape: &'a Shape,
    pub(super) by_stack: &'a Result<(Fit, Vec<Block>), String>,
    pub(super) model: &'a LimbModel,
    pub(super) known: &'a Known,
    pub(super) stacks: &'a Stacks,
    pub(super) sources: Vec<SourceFile>,
}

/// The record and what the figures show beside it.
pub(super) fn record(p: &Parts<'_>) -> (Record, Traces) {
    let first = &p.measured[0];
    let last = &p.measured[p.measured.len() - 1];
    let end = last.frames.last().map_or(last.middle_utc, |it| it.utc);
    let mut record = Record {
        schema_version: SCHEMA_VERSION,
        program_version: env!("CARGO_PKG_VERSION").to_owned(),
        site_name: p.session.site.name.clone(),
        time_utc: [first.frames[0].utc.to_iso(), end.to_iso()],
        summary: String::new(),
        created_from: p.sources.clone(),
        settings: crate::session::resolved(p.given),
        seed: p.options.seed,
        shape: shape::record(p),
        seeing: seeing::record(p.seeing),
        turbulence: turbulence::record(p),
        refraction: p
            .measured
            .iter()
            .map(|it| sequences::refraction(it, p.known))
            .collect(),
        selection: selection::record(p),
        budget: selection::budget_lines(p),
        sequences: sequences::records(p),
        camera: ruler::camera(p),
        drifts: ruler::drifts(p),
        scans: ruler::scans(p),
        by_scan: ruler::by_scan(p),
        masked: p.measured.iter().flat_map(sequences::masked).collect(),
        warnings: warnings::records(p),
    };
    record.summary = crate::report::summary_sentence(&record);
    (record, traces::traces(p))
}

/// All lines of the budget.
fn lines<'a>(p: &'a Parts<'_>, fit: &'a Fit) -> impl Iterator<Item = &'a Contribution> {
    fit.contributions.iter().chain(&p.model.lines)
}

/// Share of a normal distribution within one standard deviation.
const ONE_SIGMA: f64 = 0.682_689_492;

/// A quantity of the shape with intervals: the random part's degrees of freedom count.
fn quantity(value: f64, random: f64, systematic: f64, degrees: f64, unit: &str) -> ShapeQuantity {
    let total = random.hypot(systematic);
    // Welch-Satterthwaite (GUM G.4.1): the systematic parts are taken as known.
    let effective = if random > 0.0 {
        degrees * (total / random).powi(4)
    } else {
        1e6
    };
    let effective = if effective < 1e6 { effective } else { 1e6 };
    let [one, two] = [ONE_SIGMA, 0.95].map(|share| budget::coverage_factor(effective, share));
    ShapeQuantity {
        value: Some(value),
        sigma: Some(one * total),
        unit: unit.to_owned(),
        sigma_random: Some(random),
        sigma_systematic: Some(systematic),
        interval_68: Some([value - one * total, value + one * total]),
        interval_95: Some([value - two * total, value + two * total]),
        status: Status::Measured,
        reason: None,
    }
}
