//! What was left out for structure at the limb, and what that does to the shape.

use crate::report::html::{Column, Table};
use crate::report::numbers;
use crate::result::record::{MaskingRecord, Record, RegressionLine};

/// The tables of masking; nothing for a result without it.
pub(super) fn write(out: &mut String, record: &Record) {
    let Some(masking) = &record.shape.masking else {
        return;
    };
    let mut arcs = Table::new(
        "Structure at the limb, margin included: angles on the Sun from its north through east, on the detector from +x towards +y",
        &[
            Column::Text("Kind"),
            Column::Text("Stays on"),
            Column::Number("From, deg"),
            Column::Number("To, deg"),
            Column::Number("Contrast, percent"),
            Column::Text("How it was found"),
        ],
    );
    for it in &masking.arcs {
        arcs.row([
            it.kind.clone(),
            it.stays_on.clone(),
            numbers::significant(it.from_deg, 4),
            numbers::significant(it.to_deg, 4),
            it.contrast_percent
                .map_or(numbers::MISSING.to_owned(), |it| {
                    numbers::significant(it, 2)
                }),
            it.how.clone(),
        ]);
    }
    if !arcs.is_empty() {
        out.push_str(&arcs.html());
    }
    out.push_str(&effect(masking).html());
}

/// The shape with and without the mask.
fn effect(masking: &MaskingRecord) -> Table {
    let mut table = Table::new(
        "The shape with these arcs left out and with them taken in",
        &[
            Column::Text("Quantity"),
            Column::Number("Left out"),
            Column::Number("Taken in"),
        ],
    );
    let known = |value: Option<f64>, decimals: i32| {
        value.map_or(numbers::MISSING.to_owned(), |it| {
            numbers::fixed(it, decimals)
        })
    };
    let slope = |line: &Option<RegressionLine>| {
        line.as_ref().map_or(numbers::MISSING.to_owned(), |it| {
            numbers::plus_minus(it.slope_mas_percent, Some(it.sigma_mas_percent))
        })
    };
    table.row([
        "Radius, arcsec".to_owned(),
        known(masking.radius_with_arcsec, 4),
        known(masking.radius_without_arcsec, 4),
    ]);
    table.row([
        "Oblateness, mas".to_owned(),
        known(masking.oblateness_with_mas, 2),
        known(masking.oblateness_without_mas, 2),
    ]);
    table.row([
        "Radius against brightness of the limb, mas a percent".to_owned(),
        slope(&masking.brightness_regression.masked_out),
        slope(&masking.brightness_regression.whole_limb),
    ]);
    table
}
