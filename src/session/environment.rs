//! Readings beside the weather, such as the temperature of the tube, against which the terms of the
//! instrument may drift.

use std::path::{Path, PathBuf};

use super::fault::Fault;
use super::sheet::{self, Wanted};
use super::weather::{EXTRAPOLATION_MIN, LONGEST_GAP_MIN};
use crate::sky::Utc;

/// A checked log: one row at least, times increasing.
#[derive(Clone, Debug, PartialEq)]
pub struct Environment {
    /// The file.
    pub path: PathBuf,
    /// Names of the columns.
    pub columns: Vec<String>,
    start: Utc,
    seconds: Vec<f64>,
    values: Vec<Vec<f64>>,
}

impl Environment {
    /// Reads and checks a log; without names all its columns.
    ///
    /// # Errors
    ///
    /// Every fault of the file.
    pub fn read(path: &Path, columns: &[String]) -> Result<Self, Vec<Fault>> {
        let wanted: Vec<Wanted> = columns
            .iter()
            .map(|column| Wanted {
                column: column.clone(),
                field: "environment.columns",
            })
            .collect();
        let (sheet, mut faults) = sheet::read(path, Some("time_utc"), &wanted);
        let Some(sheet) = sheet else {
            return Err(faults);
        };
        sheet.check_times(&mut faults);
        match sheet.times.first() {
            Some(&start) if faults.is_empty() => Ok(Self {
                path: path.to_owned(),
                start,
                seconds: sheet.times.iter().map(|time| time.minus(start)).collect(),
                columns: sheet.names,
                values: sheet.columns,
            }),
            _ => Err(faults),
        }
    }

    /// The readings at a time, linear between rows; none where the log does not cover the time, by
    /// the rules of the weather log.
    pub fn at(&self, time: Utc) -> Option<Vec<f64>> {
        let asked_s = time.minus(self.start);
        let after = self.seconds.partition_point(|&it| it < asked_s);
        let last = self.seconds.len() - 1;
        let (low, high) = (after.saturating_sub(1), after.min(last));
        let (low_s, high_s) = (self.seconds[low], self.seconds[high]);
        let near = |row_s: f64| (asked_s - row_s).abs() <= 60.0 * EXTRAPOLATION_MIN;
        let covered = if after == 0 || after > last {
            near(if after == 0 { high_s } else { low_s })
        } else {
            high_s - low_s <= 60.0 * LONGEST_GAP_MIN || asked_s >= high_s
        };
        let share = if high_s > low_s {
            ((asked_s - low_s) / (high_s - low_s)).clamp(0.0, 1.0)
        } else {
            0.0
        };
        covered.then(|| {
            self.values
                .iter()
                .map(|it| it[low] + share * (it[high] - it[low]))
                .collect()
        })
    }
}
