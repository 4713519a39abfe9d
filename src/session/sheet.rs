//! A table of numbers in a text file: comma-separated, named columns in any order, comments after
//! `#`, blank lines allowed. Every row that cannot be used is a fault with its line.

use std::ops::Range;
use std::path::Path;

use super::document::text_of;
use super::fault::{Fault, FaultKind, Finding};
use super::nearest;
use super::source::{Source, shortened};
use crate::sky::Utc;

/// Longest table that is read, in bytes: a year of readings a second apart would be longer.
const LONGEST_BYTES: u64 = 256 << 20;

/// Most bad rows that are shown one by one.
const MOST_SHOWN: usize = 20;

/// A column that is asked for.
#[derive(Clone, Debug, PartialEq)]
pub(super) struct Wanted {
    /// Name in the file.
    pub(super) column: String,
    /// Key it stands for, where it has a name of its own.
    pub(super) field: &'static str,
}

impl Wanted {
    /// A column whose name is that of its field.
    pub(super) fn same(field: &'static str) -> Self {
        Self {
            column: field.to_owned(),
            field,
        }
    }
}

/// A table as read.
#[derive(Debug)]
pub(super) struct Sheet {
    source: Source,
    /// Start of each row in the text.
    starts: Vec<usize>,
    /// Index in the file of each column of numbers.
    indices: Vec<usize>,
    /// Names of the columns of numbers.
    pub(super) names: Vec<String>,
    /// The time of each row, where a column of times was asked for.
    pub(super) times: Vec<Utc>,
    /// The times as written.
    pub(super) stamps: Vec<String>,
    /// The columns of numbers.
    pub(super) columns: Vec<Vec<f64>>,
}

/// Reads the columns asked for; all others than the time where none are asked for. Gives what
/// could be read and every fault.
pub(super) fn read(
    path: &Path,
    time: Option<&str>,
    wanted: &[Wanted],
) -> (Option<Sheet>, Vec<Fault>) {
    let text = match text_of(path, LONGEST_BYTES) {
        Ok(text) => text,
        Err(finding) => return (None, vec![Fault::of_file(path, "", finding)]),
    };
    let source = Source {
        path: path.to_owned(),
        text,
    };
    let mut lines = lines_of(&source.text);
    let Some(header) = lines.next() else {
        let finding = Finding::new(
            FaultKind::BadRow,
            "no line",
            "a line of column names, then rows",
            "",
        );
        return (None, vec![Fault::of_file(path, "", finding)]);
    };
    let names: Vec<&str> = cells(&source.text, header.clone())
        .map(|it| source.text[it].trim())
        .collect();
    let mut faults = Vec::new();
    let mut index_of = |column: &str, field: &str| {
        let index = names.iter().position(|it| *it == column);
        if index.is_none() {
            let cure = match nearest::of(column, names.iter().copied()) {
                Some(near) => {
                    format!("rename \"{near}\", or name it in the session file's `columns`")
                }
                None => "add the column, or name it in the session file's `columns`".to_owned(),
            };
            let finding = Finding::new(
                FaultKind::MissingKey,
                format!("columns {}", shortened(&names.join(", "))),
                format!("a column \"{column}\""),
                cure,
            );
            faults.push(Fault::at(&source, &header, field, finding));
        }
        index
    };
    let time_index = time.map(|column| index_of(column, "time_utc"));
    let asked: Vec<Option<usize>> = wanted
        .iter()
        .map(|it| index_of(&it.column, it.field))
        .collect();
    if !faults.is_empty() {
        return (None, faults);
    }
    let time_index = time_index.flatten();
    let indices: Vec<usize> = if wanted.is_empty() {
        (0..names.len())
            .filter(|index| Some(*index) != time_index)
            .collect()
    } else {
        asked.into_iter().flatten().collect()
    };
    let names: Vec<String> = indices
        .iter()
        .map(|&index| names[index].to_owned())
        .collect();
    let mut sheet = Sheet {
        columns: vec![Vec::new(); indices.len()],
        source: Source {
            path: path.to_owned(),
            text: String::new(),
        },
        starts: Vec::new(),
        indices,
        names,
        times: Vec::new(),
        stamps: Vec::new(),
    };
    let mut bad_rows = 0;
    for line in lines {
        match row(&source.text, &line, time_index, &sheet) {
            Ok((stamp, numbers)) => {
                sheet.starts.push(line.start);
                if let Some((utc, text)) = stamp {
                    sheet.times.push(utc);
                    sheet.stamps.push(text);
                }
                for (column, number) in sheet.columns.iter_mut().zip(numbers) {
                    column.push(number);
                }
            }
            Err((span, key, finding)) => {
                bad_rows += 1;
                if bad_rows <= MOST_SHOWN {
                    faults.push(Fault::at(&source, &span, &key, finding));
                }
            }
        }
    }
    if bad_rows > MOST_SHOWN {
        let more = bad_rows - MOST_SHOWN;
        let finding = Finding::new(FaultKind::BadRow, format!("{more} more bad rows"), "", "");
        faults.push(Fault::of_file(path, "the table", finding));
    }
    sheet.source = source;
    if sheet.starts.is_empty() && bad_rows == 0 {
        let finding = Finding::new(
            FaultKind::BadRow,
            "column names and no row",
            "one row at least",
            "add the readings",
        );
        faults.push(Fault::of_file(path, "the table", finding));
    }
    (Some(sheet), faults)
}

/// What a row holds, or where and why it holds nothing.
type Row = Result<(Option<(Utc, String)>, Vec<f64>), (Range<usize>, String, Finding)>;

fn row(text: &str, line: &Range<usize>, time_index: Option<usize>, sheet: &Sheet) -> Row {
    let spans: Vec<Range<usize>> = cells(text, line.clone()).collect();
    let cell = |index: usize, name: &str| {
        spans.get(index).cloned().ok_or_else(|| {
            let finding = Finding::new(
                FaultKind::BadRow,
                format!("{} cells", spans.len()),
                format!("a cell {} for \"{name}\"", index + 1),
                "complete the row, or comment it out with #",
            );
            (line.clone(), name.to_owned(), finding)
        })
    };
    let stamp = match time_index {
        None => None,
        Some(index) => {
            let span = cell(index, "time_utc")?;
            let written = text[span.clone()].trim();
            let utc = utc_of(written).map_err(|why| {
                let finding = Finding::new(
                    FaultKind::BadRow,
                    format!("\"{}\" ({why})", shortened(written)),
                    "a time in UTC such as 2026-06-21T09:30:00Z",
                    "write the time in UTC, or comment the row out with #",
                );
                (span, "time_utc".to_owned(), finding)
            })?;
            Some((utc, written.to_owned()))
        }
    };
    let mut numbers = Vec::with_capacity(sheet.indices.len());
    for (&index, name) in sheet.indices.iter().zip(&sheet.names) {
        let span = cell(index, name)?;
        let written = text[span.clone()].trim();
        match written.parse::<f64>() {
            Ok(number) if number.is_finite() => numbers.push(number),
            _ => {
                let found = if written.is_empty() {
                    "an empty cell".to_owned()
                } else {
                    format!("\"{}\"", shortened(written))
                };
                let finding = Finding::new(
                    FaultKind::BadRow,
                    found,
                    "a finite number with a decimal point",
                    "complete the row, or comment it out with #",
                );
                return Err((span, name.clone(), finding));
            }
        }
    }
    Ok((stamp, numbers))
}

/// A time in UTC; a final Z or +00:00 says nothing more.
fn utc_of(written: &str) -> Result<Utc, String> {
    let bare = written
        .strip_suffix(['Z', 'z'])
        .or_else(|| written.strip_suffix("+00:00"))
        .unwrap_or(written)
        .trim_end();
    Utc::parse(&bare.replacen(' ', "T", 1)).map_err(|error| error.to_string())
}

impl Sheet {
    /// How many rows.
    pub(super) fn len(&self) -> usize {
        self.starts.len()
    }

    /// A fault in a cell of a column of numbers.
    pub(super) fn fault(&self, row: usize, column: usize, finding: Finding) -> Fault {
        let line = self.line(row);
        let span = cells(&self.source.text, line.clone())
            .nth(self.indices[column])
            .unwrap_or(line);
        Fault::at(&self.source, &span, &self.names[column], finding)
    }

    /// A fault of a row.
    pub(super) fn row_fault(&self, row: usize, key: &str, finding: Finding) -> Fault {
        Fault::at(&self.source, &self.line(row), key, finding)
    }

    /// Notes each value of a column outside its range.
    pub(super) fn check_range(
        &self,
        column: usize,
        (low, high): (f64, f64),
        unit: &str,
        faults: &mut Vec<Fault>,
    ) {
        let bad = |value: &f64| !(low..=high).contains(value);
        let values = &self.columns[column];
        let found = values.iter().enumerate().filter(|(_, value)| bad(value));
        for (row, value) in found.clone().take(MOST_SHOWN) {
            let finding = Finding::new(
                FaultKind::BadRow,
                format!("{value}"),
                format!("{low} to {high} {unit}"),
                "correct the value, or comment the row out with #",
            );
            faults.push(self.fault(row, column, finding));
        }
        let more = found.count().saturating_sub(MOST_SHOWN);
        if more > 0 {
            let finding = Finding::new(FaultKind::BadRow, format!("{more} more bad rows"), "", "");
            faults.push(Fault::of_file(
                &self.source.path,
                &self.names[column],
                finding,
            ));
        }
    }

    /// Notes each row whose time does not come after the one before.
    pub(super) fn check_times(&self, faults: &mut Vec<Fault>) {
        let back = |row: &usize| self.times[*row].minus(self.times[row - 1]) <= 0.0;
        for row in (1..self.times.len()).filter(back).take(MOST_SHOWN) {
            let finding = Finding::new(
                FaultKind::BadRow,
                format!("{} after {}", self.stamps[row], self.stamps[row - 1]),
                "times that increase from row to row",
                "sort the rows, and keep one of each time",
            );
            faults.push(self.row_fault(row, "time_utc", finding));
        }
    }

    fn line(&self, row: usize) -> Range<usize> {
        let start = self.starts[row];
        let text = &self.source.text[start..];
        start..start + text.find('\n').unwrap_or(text.len())
    }
}

/// The lines that say something, as spans.
fn lines_of(text: &str) -> impl Iterator<Item = Range<usize>> + '_ {
    let mut at = 0;
    text.split_inclusive('\n').filter_map(move |line| {
        let start = at
            + if at == 0 && line.starts_with('\u{feff}') {
                '\u{feff}'.len_utf8()
            } else {
                0
            };
        at += line.len();
        let bare = text[start..at].trim();
        (!bare.is_empty() && !bare.starts_with('#'))
            .then(|| start..start + text[start..at].trim_end().len())
    })
}

/// The cells of a line, as spans without their quotes.
fn cells(text: &str, line: Range<usize>) -> impl Iterator<Item = Range<usize>> + '_ {
    let bytes = text.as_bytes();
    let mut next = Some(line.start);
    std::iter::from_fn(move || {
        let start = next?;
        let mut quoted = false;
        let mut end = start;
        while end < line.end && (quoted || bytes[end] != b',') {
            quoted ^= bytes[end] == b'"';
            end += 1;
        }
        next = (end < line.end).then_some(end + 1);
        let cell = &text[start..end];
        let lead = cell.len() - cell.trim_start().len();
        let bare = cell.trim();
        let start = start + lead;
        if bare.len() >= 2 && bare.starts_with('"') && bare.ends_with('"') {
            Some(start + 1..start + bare.len() - 1)
        } else {
            Some(start..start + bare.len())
        }
    })
}
