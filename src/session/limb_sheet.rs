//! Limbs measured elsewhere as text: a row a point of the limb.

use std::path::Path;

use super::fault::{Fault, FaultKind, Finding};
use super::sheet;
use crate::sky::Utc;

/// Columns that such a table may have beside `time_utc`, all numbers.
pub const LIMB_COLUMNS: [&str; 6] = [
    "position_angle_deg",
    "radius_arcsec",
    "diameter_arcsec",
    "sigma_arcsec",
    "detector_angle_deg",
    "blur_arcsec",
];

/// A table of limbs, checked: times, and of [`LIMB_COLUMNS`] those that are there.
#[derive(Clone, Debug, PartialEq)]
pub struct LimbSheet {
    /// The time of each row.
    pub times: Vec<Utc>,
    /// Columns by the order of [`LIMB_COLUMNS`].
    pub columns: [Option<Vec<f64>>; 6],
}

/// Reads a table of limbs, comma-separated, lines after `#` left out (so ECSV with that delimiter is
/// read as well).
///
/// # Errors
///
/// Every fault of the file.
pub fn read_limb_sheet(path: &Path) -> Result<LimbSheet, Vec<Fault>> {
    let (sheet, mut faults) = sheet::read(path, Some("time_utc"), &[]);
    let Some(sheet) = sheet else {
        return Err(faults);
    };
    let column = |name: &str| sheet.names.iter().position(|it| it == name);
    let written = sheet.names.join(", ");
    let needed = [
        ("position_angle_deg", column("position_angle_deg").is_some()),
        (
            "radius_arcsec or diameter_arcsec",
            column("radius_arcsec").is_some() != column("diameter_arcsec").is_some(),
        ),
        ("sigma_arcsec", column("sigma_arcsec").is_some()),
    ];
    for (name, _) in needed.iter().filter(|it| !it.1) {
        let finding = Finding::new(
            FaultKind::MissingKey,
            format!("columns time_utc, {written}"),
            format!("a column {name} (one of them, not both)"),
            "add the column, its unit as its name says",
        );
        faults.push(Fault::of_file(path, name, finding));
    }
    for (index, name) in sheet.names.iter().enumerate() {
        let range = match name.as_str() {
            "radius_arcsec" => (800.0, 1100.0),
            "diameter_arcsec" => (1600.0, 2200.0),
            "sigma_arcsec" => (1e-9, 100.0),
            "blur_arcsec" => (0.0, 30.0),
            "position_angle_deg" | "detector_angle_deg" => (-720.0, 720.0),
            _ => continue,
        };
        let unit = if name.ends_with("_deg") {
            "deg"
        } else {
            "arcsec"
        };
        sheet.check_range(index, range, unit, &mut faults);
    }
    if faults.is_empty() {
        Ok(LimbSheet {
            columns: LIMB_COLUMNS.map(|name| column(name).map(|it| sheet.columns[it].clone())),
            times: sheet.times,
        })
    } else {
        Err(faults)
    }
}
