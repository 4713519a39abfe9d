//! Results of this program as values among the published ones, and the footing they ask for.

use super::{CompareError, Named, Settings};
use crate::footing::epoch::Epoch;
use crate::footing::{
    Definition, Distance, Footing, Observable, Platform, Published, RadiusOf, Unit,
};
use crate::result::comparison::FootingRecord;
use crate::result::record::{Record, ShapeQuantity, WarningRecord};

/// A number of the settings of a result.
fn setting(record: &Record, table: &str, key: &str) -> Option<f64> {
    record.settings.get(table)?.get(key)?.as_f64()
}

/// The footing that was asked for; what was not said is the first result's.
pub(super) fn footing(first: &Named<'_>, settings: &Settings) -> Result<Footing, CompareError> {
    let incomplete = |what| CompareError::Incomplete {
        result: first.name.to_owned(),
        what,
    };
    let wavelength_nm = match settings.wavelength_nm {
        Some(it) => it,
        None => wavelength(first)?,
    };
    let blur_fwhm_arcsec = match settings.blur_fwhm_arcsec {
        Some(it) => it,
        None if settings.definition.feels_blur() => {
            return Err(CompareError::FootingBlur {
                definition: settings.definition,
            });
        }
        None => 0.0,
    };
    Ok(Footing {
        definition: settings.definition,
        wavelength_nm,
        blur_fwhm_arcsec,
        edge_scale_km: setting(first.record, "limb", "edge_scale_km")
            .ok_or_else(|| incomplete("limb.edge_scale_km"))?,
        edge_scale_sigma_km: setting(first.record, "limb", "edge_scale_sigma_km")
            .ok_or_else(|| incomplete("limb.edge_scale_sigma_km"))?,
    })
}

/// The footing as a record.
pub(super) fn footing_record(it: &Footing) -> FootingRecord {
    FootingRecord {
        definition: match it.definition {
            Definition::Model => "model: inflection of the unblurred limb".to_owned(),
            other => other.to_string(),
        },
        wavelength_nm: it.wavelength_nm,
        blur_fwhm_arcsec: it.definition.feels_blur().then_some(it.blur_fwhm_arcsec),
        edge_scale_km: it.edge_scale_km,
        edge_scale_sigma_km: it.edge_scale_sigma_km,
    }
}

fn wavelength(it: &Named<'_>) -> Result<f64, CompareError> {
    setting(it.record, "filter", "centre_nm").ok_or_else(|| CompareError::Incomplete {
        result: it.name.to_owned(),
        what: "filter.centre_nm",
    })
}

/// Every value with the index of the result it came from: the results first, as they were named.
pub(super) fn all(
    results: &[Named<'_>],
    published: &[Published],
    warnings: &mut Vec<WarningRecord>,
) -> Result<Vec<(Published, Option<usize>)>, CompareError> {
    let mut listed = Vec::new();
    let mut labels: Vec<String> = Vec::new();
    for (index, it) in results.iter().enumerate() {
        let label = label_of(it.record, &labels);
        for observable in Observable::ALL {
            let quantity = match observable {
                Observable::Oblateness => &it.record.shape.oblateness,
                Observable::Radius => &it.record.shape.radius,
            };
            match value(it, &label, observable, quantity)? {
                Some(value) => listed.push((value, Some(index))),
                None => warnings.push(WarningRecord {
                    code: "not_in_comparison".to_owned(),
                    text: format!(
                        "{label} has no {} to compare: {}.",
                        observable.word(),
                        quantity.reason.as_deref().unwrap_or("it was not measured")
                    ),
                }),
            }
        }
        labels.push(label);
    }
    listed.extend(published.iter().map(|it| (it.clone(), None)));
    Ok(listed)
}

/// Station and day; a number where the same was there before.
fn label_of(record: &Record, before: &[String]) -> String {
    let day = record.time_utc[0].split('T').next().unwrap_or_default();
    let plain = format!("{} {day}", record.site_name);
    let twins = before.iter().filter(|it| it.starts_with(&plain)).count();
    if twins == 0 {
        plain
    } else {
        format!("{plain} ({})", twins + 1)
    }
}

/// Whether a result was taken above the air.
fn above_the_air(record: &Record) -> bool {
    let none = record.settings.get("weather").and_then(|it| it.get("none"));
    none.and_then(serde_json::Value::as_bool) == Some(true)
}

fn value(
    it: &Named<'_>,
    label: &str,
    observable: Observable,
    quantity: &ShapeQuantity,
) -> Result<Option<Published>, CompareError> {
    let (Some(value), Some(sigma)) = (quantity.value, quantity.sigma) else {
        return Ok(None);
    };
    let incomplete = |what| CompareError::Incomplete {
        result: it.name.to_owned(),
        what,
    };
    let text = format!("{}/{}", it.record.time_utc[0], it.record.time_utc[1]);
    let epoch = Epoch::parse(&text).ok_or_else(|| incomplete("time"))?;
    let systematic = quantity
        .sigma_systematic
        .ok_or_else(|| incomplete("systematic uncertainty"))?;
    // Few degrees of freedom widen the random part; the total is the stated sigma.
    let random2 = sigma * sigma - systematic * systematic;
    let random = if random2 > 0.0 { random2.sqrt() } else { 0.0 };
    Ok(Some(Published {
        label: label.to_owned(),
        platform: if above_the_air(it.record) {
            Platform::Space
        } else {
            Platform::Ground
        },
        epoch: Epoch {
            text: it.record.time_utc[0]
                .split('T')
                .next()
                .unwrap_or_default()
                .to_owned(),
            ..epoch
        },
        wavelength_nm: wavelength(it)?,
        observable,
        value,
        unit: match observable {
            Observable::Oblateness => Unit::Mas,
            Observable::Radius => Unit::Arcsec,
        },
        sigma_random: random,
        sigma_systematic: systematic,
        definition: Definition::Model,
        blur: None,
        diameter: false,
        radius_of: RadiusOf::Harmonics,
        distance: Distance::OneAu,
        b0_deg: Some(0.0),
        group: Some(format!("station {}", it.record.site_name)),
        note: format!("reduced by truelimb {}", it.record.program_version),
    }))
}
