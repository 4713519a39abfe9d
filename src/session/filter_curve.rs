//! The measured transmission of a filter.
//!
//! # Model
//!
//! ```text
//! centre = int T l dl / int T dl,    width: between the outermost crossings of max T / 2
//! ```
//!
//! with the transmission `T` linear in the wavelength `l` (nm) between the points.
//!
//! # Valid for
//!
//! Curves that cover their band: the transmission at both ends below half its maximum.
//!
//! # Accuracy
//!
//! Exact for the straight lines between the points.
//!
//! # Source
//!
//! Definitions; common practice, no source.

use std::path::{Path, PathBuf};

use super::fault::{Fault, FaultKind, Finding};
use super::sheet::{self, Wanted};

/// A checked curve: wavelengths increase, transmission is nowhere negative.
#[derive(Clone, Debug, PartialEq)]
pub struct FilterCurve {
    /// The file.
    pub path: PathBuf,
    /// Wavelengths in vacuum, in nm.
    pub wavelength_nm: Vec<f64>,
    /// Transmission at each, in any unit.
    pub transmission: Vec<f64>,
}

impl FilterCurve {
    /// Reads and checks a table of wavelength and transmission.
    ///
    /// # Errors
    ///
    /// Every fault of the file.
    pub fn read(path: &Path) -> Result<Self, Vec<Fault>> {
        let fields = ["wavelength_nm", "transmission"];
        let (sheet, mut faults) = sheet::read(path, None, &fields.map(Wanted::same));
        let Some(mut sheet) = sheet else {
            return Err(faults);
        };
        sheet.check_range(0, (200.0, 20_000.0), "nm", &mut faults);
        sheet.check_range(1, (0.0, 1e6), "(any unit, not negative)", &mut faults);
        for row in 1..sheet.len() {
            if sheet.columns[0][row] <= sheet.columns[0][row - 1] {
                let finding = Finding::new(
                    FaultKind::BadRow,
                    format!(
                        "{} nm after {} nm",
                        sheet.columns[0][row],
                        sheet.columns[0][row - 1]
                    ),
                    "wavelengths that increase from row to row",
                    "sort the rows by wavelength",
                );
                faults.push(sheet.row_fault(row, "wavelength_nm", finding));
            }
        }
        let values = &sheet.columns[1];
        let half = 0.5 * values.iter().copied().fold(0.0, f64::max);
        let open = |end: Option<&f64>| end.is_none_or(|it| *it >= half);
        if faults.is_empty() && (values.len() < 3 || open(values.first()) || open(values.last())) {
            let finding = Finding::new(
                FaultKind::OutOfRange,
                format!("{} points that do not close the band", values.len()),
                "three points at least, the transmission at both ends below half its maximum",
                "extend the curve until it has fallen on both sides",
            );
            faults.push(Fault::of_file(path, "transmission", finding));
        }
        if !faults.is_empty() {
            return Err(faults);
        }
        let transmission = sheet.columns.pop().unwrap_or_default();
        let wavelength_nm = sheet.columns.pop().unwrap_or_default();
        Ok(Self {
            path: path.to_owned(),
            wavelength_nm,
            transmission,
        })
    }

    /// Mean wavelength weighted by the transmission, in nm.
    pub fn centre_nm(&self) -> f64 {
        let (mut weight, mut moment) = (0.0, 0.0);
        for (l, t) in self
            .wavelength_nm
            .windows(2)
            .zip(self.transmission.windows(2))
        {
            let step_nm = l[1] - l[0];
            weight += 0.5 * step_nm * (t[0] + t[1]);
            moment += step_nm / 6.0 * (t[0] * (2.0 * l[0] + l[1]) + t[1] * (l[0] + 2.0 * l[1]));
        }
        moment / weight
    }

    /// Distance of the outermost crossings of half the maximum, in nm.
    pub fn width_nm(&self) -> f64 {
        let half = 0.5 * self.transmission.iter().copied().fold(0.0, f64::max);
        let crossings = self
            .wavelength_nm
            .windows(2)
            .zip(self.transmission.windows(2))
            .filter_map(|(l, t)| {
                let crosses = (t[0] < half) != (t[1] < half);
                crosses.then(|| l[0] + (half - t[0]) / (t[1] - t[0]) * (l[1] - l[0]))
            });
        let (low, high) = crossings.fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), it| {
            (low.min(it), high.max(it))
        });
        high - low
    }
}
