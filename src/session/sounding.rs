//! A sounding: the air above the station, read from a table and checked.

use std::path::{Path, PathBuf};

use super::fault::{Fault, FaultKind, Finding};
use super::sheet::{self, Sheet, Wanted};
use crate::air::SoundingLevel;

/// Fewest levels of a sounding.
const FEWEST_LEVELS: usize = 4;

/// A checked sounding: heights rise, pressures fall.
#[derive(Clone, Debug, PartialEq)]
pub struct Sounding {
    /// The file.
    pub path: PathBuf,
    /// The levels from below.
    pub levels: Vec<SoundingLevel>,
}

impl Sounding {
    /// Reads and checks the table of a sounding.
    ///
    /// # Errors
    ///
    /// Every fault of the file.
    pub fn read(path: &Path) -> Result<Self, Vec<Fault>> {
        let fields = [
            "height_m",
            "pressure_hpa",
            "temperature_c",
            "relative_humidity",
        ];
        let (sheet, mut faults) = sheet::read(path, None, &fields.map(Wanted::same));
        let Some(sheet) = sheet else {
            return Err(faults);
        };
        check(&sheet, &mut faults);
        if sheet.len() < FEWEST_LEVELS && faults.is_empty() {
            let finding = Finding::new(
                FaultKind::BadRow,
                format!("{} levels", sheet.len()),
                format!("{FEWEST_LEVELS} levels at least"),
                "add the levels above",
            );
            faults.push(Fault::of_file(path, "the sounding", finding));
        }
        if !faults.is_empty() {
            return Err(faults);
        }
        let level = |row: usize| SoundingLevel {
            height_m: sheet.columns[0][row],
            pressure_hpa: sheet.columns[1][row],
            temperature_c: sheet.columns[2][row],
            relative_humidity: sheet.columns[3][row],
        };
        Ok(Self {
            path: path.to_owned(),
            levels: (0..sheet.len()).map(level).collect(),
        })
    }
}

/// Units, ranges and order.
fn check(sheet: &Sheet, faults: &mut Vec<Fault>) {
    let all = |column: usize, test: &dyn Fn(f64) -> bool| {
        sheet.len() > 0 && sheet.columns[column].iter().all(|&it| test(it))
    };
    let guards: [(usize, bool, &str, &str, &str); 3] = [
        (
            1,
            sheet.columns[1].iter().any(|it| *it > 2000.0),
            "Pa",
            "0 to 1100 hPa",
            "divide by 100",
        ),
        (
            2,
            all(2, &|it| it > 150.0),
            "kelvin",
            "-150 to 60 C",
            "take 273.15 from each",
        ),
        (
            3,
            sheet.columns[3].iter().any(|it| *it > 1.5),
            "percent",
            "0 to 1, as a fraction",
            "divide by 100",
        ),
    ];
    for (column, wrong, unit, allowed, cure) in guards {
        if wrong {
            let found = format!("{}, which looks like {unit}", sheet.columns[column][0]);
            let finding = Finding::new(FaultKind::WrongUnit, found, allowed, cure);
            faults.push(sheet.fault(0, column, finding));
            continue;
        }
        let (range, unit) = [
            ((0.0001, 1100.0), "hPa"),
            ((-150.0, 60.0), "C"),
            ((0.0, 1.0), "as a fraction"),
        ][column - 1];
        sheet.check_range(column, range, unit, faults);
    }
    sheet.check_range(0, (-500.0, 100_000.0), "m", faults);
    for row in 1..sheet.len() {
        let rises = sheet.columns[0][row] > sheet.columns[0][row - 1];
        let falls = sheet.columns[1][row] < sheet.columns[1][row - 1];
        if !(rises && falls) {
            let finding = Finding::new(
                FaultKind::BadRow,
                format!(
                    "{} m, {} hPa above {} m, {} hPa",
                    sheet.columns[0][row],
                    sheet.columns[1][row],
                    sheet.columns[0][row - 1],
                    sheet.columns[1][row - 1]
                ),
                "heights that rise and pressures that fall from row to row",
                "sort the rows by height, or comment the row out with #",
            );
            faults.push(sheet.row_fault(row, "height_m", finding));
        }
    }
}
