//! Results and published values on one footing: who agrees with whom, ground against space, and what
//! a session would have reported had space been the truth.
//!
//! [`against`] carries every value by [`crate::footing`] and compares them by [`crate::consensus`].
//! Values of one group, and those that go through the same model of the limb, are correlated and
//! compared as such.

mod consistency;
mod gather;
mod pairs;
mod reverse;

use crate::consensus::ConsensusError;
use crate::footing::limb::Displacements;
use crate::footing::{Carried, Definition, FootingError, Observable, Published, carry};
use crate::result::comparison::{
    COMPARISON_VERSION, CommonRecord, ComparedValue, Comparison, PublishedRecord,
    QuantityComparison, StepRecord,
};
use crate::result::record::{Record, SourceFile, WarningRecord};

/// Widest window for pairs of epochs, days.
pub const WINDOW_DAYS: (f64, f64) = (0.0, 400.0);

/// What may be chosen.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Settings {
    /// Definition of the footing.
    pub definition: Definition,
    /// Wavelength of the footing, nm; the first result's where it is not given.
    pub wavelength_nm: Option<f64>,
    /// Blur of the footing, full width at half maximum, arcsec; needed for a definition that feels it.
    pub blur_fwhm_arcsec: Option<f64>,
    /// How far apart the epochs of a pair may be, days.
    pub window_days: f64,
}

impl Default for Settings {
    /// The unblurred limb, as this program's results have it; pairs within a day.
    fn default() -> Self {
        Self {
            definition: Definition::Model,
            wavelength_nm: None,
            blur_fwhm_arcsec: None,
            window_days: 1.0,
        }
    }
}

/// Why there is no comparison.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum CompareError {
    /// There is no result.
    #[error("no result to compare; name the folder of one")]
    NoResult,
    /// There is one value only.
    #[error(
        "{result} alone: nothing to compare it with; add a table of values, or a second result"
    )]
    Alone {
        /// The result.
        result: String,
    },
    /// A result does not say what is needed.
    #[error("{result}: its settings have no {what}; reduce the session again with this version")]
    Incomplete {
        /// The result.
        result: String,
        /// What is missing.
        what: &'static str,
    },
    /// The window is outside its range.
    #[error("a window of {found_days} days; allowed is {} to {} days", WINDOW_DAYS.0, WINDOW_DAYS.1)]
    Window {
        /// Window found.
        found_days: f64,
    },
    /// The footing's definition moves with the blur.
    #[error(
        "the definition {definition} moves with the blur: say which with --to-blur-arcsec, 0.4 to 10 arcsec"
    )]
    FootingBlur {
        /// The definition.
        definition: Definition,
    },
    /// Values that cannot be carried.
    #[error("{}", shown(.0))]
    Carry(Vec<(String, FootingError)>),
    /// The values have no statistics.
    #[error("{quantity}: {source}")]
    Statistics {
        /// Which quantity.
        quantity: &'static str,
        /// Why.
        source: ConsensusError,
    },
}

fn shown(faults: &[(String, FootingError)]) -> String {
    let lines: Vec<String> = faults
        .iter()
        .map(|(label, it)| format!("{label}: {it}"))
        .collect();
    lines.join("\n")
}

/// A result with the name it goes by in errors.
#[derive(Clone, Copy, Debug)]
pub struct Named<'a> {
    /// The folder or file it was read from.
    pub name: &'a str,
    /// The result.
    pub record: &'a Record,
}

/// One value with where it came from.
struct Item {
    published: Published,
    carried: Carried,
    /// Index of the result it came from.
    result: Option<usize>,
}

impl Item {
    /// The unit in which values of this quantity are shown, and what divides mas into it.
    fn unit(observable: Observable) -> (&'static str, f64) {
        match observable {
            Observable::Oblateness => ("mas", 1.0),
            Observable::Radius => ("arcsec", 1000.0),
        }
    }
}

/// Compares results with each other and with published values.
///
/// # Errors
///
/// [`CompareError`] without a result, with nothing beside it, for a footing or values that the model of
/// the limb cannot carry, and for values whose covariance has no inverse.
pub fn against(
    results: &[Named<'_>],
    published: &[Published],
    settings: &Settings,
    created_from: Vec<SourceFile>,
) -> Result<Comparison, CompareError> {
    let first = results.first().ok_or(CompareError::NoResult)?;
    if results.len() + published.len() < 2 {
        return Err(CompareError::Alone {
            result: first.name.to_owned(),
        });
    }
    let (lowest, highest) = WINDOW_DAYS;
    if !(lowest..=highest).contains(&settings.window_days) {
        return Err(CompareError::Window {
            found_days: settings.window_days,
        });
    }
    let footing = gather::footing(first, settings)?;
    let mut warnings = Vec::new();
    let listed = gather::all(results, published, &mut warnings)?;
    let mut limbs = Displacements::default();
    let mut faults = Vec::new();
    let mut items = Vec::new();
    for (published, result) in listed {
        match carry(&published, &footing, &mut limbs) {
            Ok(carried) => items.push(Item {
                published,
                carried,
                result,
            }),
            Err(it) => faults.push((published.label, it)),
        }
    }
    if !faults.is_empty() {
        return Err(CompareError::Carry(faults));
    }
    let mut quantities = Vec::new();
    for observable in Observable::ALL {
        let places: Vec<usize> = (0..items.len())
            .filter(|&it| items[it].published.observable == observable)
            .collect();
        if places.is_empty() {
            continue;
        }
        let statistics = |source| CompareError::Statistics {
            quantity: observable.word(),
            source,
        };
        let set = consistency::Set::new(&items, observable, places);
        quantities.push(quantity(&set, results, settings, &mut warnings).map_err(statistics)?);
    }
    Ok(Comparison {
        schema_version: COMPARISON_VERSION,
        program_version: env!("CARGO_PKG_VERSION").to_owned(),
        created_from,
        footing: gather::footing_record(&footing),
        values: items.iter().map(value_record).collect(),
        quantities,
        warnings,
    })
}

fn quantity(
    set: &consistency::Set<'_>,
    results: &[Named<'_>],
    settings: &Settings,
    warnings: &mut Vec<WarningRecord>,
) -> Result<QuantityComparison, ConsensusError> {
    let consensus = set.consensus()?;
    consistency::warn(set, &consensus, warnings);
    Ok(QuantityComparison {
        quantity: set.observable.word().to_owned(),
        unit: set.unit().to_owned(),
        places: set.places.clone(),
        platforms: set.platforms()?,
        ground_minus_space: set.ground_minus_space()?,
        this_result: reverse::this_result(set, results)?,
        equivalence: set.equivalence()?,
        pairwise: set.pairwise(),
        without: set.without()?,
        pairs: pairs::compare(set, settings.window_days)?,
        consensus,
    })
}

fn value_record(item: &Item) -> ComparedValue {
    let (it, carried) = (&item.published, &item.carried);
    let (unit, per) = Item::unit(it.observable);
    ComparedValue {
        label: it.label.clone(),
        kind: if item.result.is_some() {
            "result".to_owned()
        } else {
            "published".to_owned()
        },
        platform: it.platform.word().to_owned(),
        epoch: it.epoch.text.clone(),
        mjd: it.epoch.middle_mjd(),
        wavelength_nm: it.wavelength_nm,
        quantity: it.observable.word().to_owned(),
        group: it.group.clone(),
        note: it.note.clone(),
        published: PublishedRecord {
            value: it.value,
            sigma_random: it.sigma_random,
            sigma_systematic: it.sigma_systematic,
            unit: it.unit.word().to_owned(),
            of: if it.diameter { "diameter" } else { "radius" }.to_owned(),
            definition: it.definition.to_string(),
            blur_fwhm_arcsec: it.blur.map(|it| it.fwhm_arcsec),
            distance_au: match it.distance {
                crate::footing::Distance::OneAu => None,
                crate::footing::Distance::Seen(au) => Some(au),
            },
            b0_deg: it.b0_deg,
        },
        common: CommonRecord {
            value: carried.value_mas / per,
            geometric: carried.geometric_mas / per,
            sigma: carried.sigma_mas() / per,
            sigma_random: carried.random_mas / per,
            sigma_systematic: carried.systematic_mas / per,
            sigma_footing: carried.footing_mas() / per,
            unit: unit.to_owned(),
        },
        steps: carried
            .steps
            .iter()
            .map(|step| StepRecord {
                step: step.name.to_owned(),
                change_mas: step.change_mas,
                sigma_mas: step.sigma_mas,
                after: step.after_mas / per,
                how: step.how.clone(),
            })
            .collect(),
    }
}
