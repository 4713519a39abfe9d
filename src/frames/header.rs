//! Header values as they are written, and the table of frame times.

use super::error::FitsError;
use super::raw::{Handle, HduKind};

/// A header value.
#[derive(Clone, Debug, PartialEq)]
pub(super) enum Key {
    /// Was in quotes.
    Text(String),
    /// Number, logical or complex value, as written.
    Other(String),
}

/// Whether `name` may be looked up: the library would take `*`, `?` and `#` for wild cards.
pub(super) fn is_name(name: &str) -> bool {
    let ok = |it: u8| it.is_ascii_alphanumeric() || matches!(it, b'-' | b'_' | b' ' | b'.');
    !name.trim().is_empty() && name.len() <= 60 && name.bytes().all(ok)
}

/// A keyword of the present HDU; an undefined value counts as none.
pub(super) fn read(handle: &Handle, name: &str) -> Result<Option<Key>, FitsError> {
    let Some(written) = handle.key_as_written(name)? else {
        return Ok(None);
    };
    if written.starts_with('\'') {
        return Ok(handle.key_long_text(name)?.map(Key::Text));
    }
    Ok(if written.is_empty() {
        None
    } else {
        Some(Key::Other(written))
    })
}

/// A real number in FITS form: the exponent letter may be D.
pub(super) fn real(written: &str) -> Option<f64> {
    let plain = written.trim().replace(['D', 'd'], "E");
    // Rust reads "inf" and "nan" as numbers, FITS does not.
    let starts = plain
        .trim_start_matches(['+', '-'])
        .starts_with(|it: char| it.is_ascii_digit() || it == '.');
    if starts { plain.parse().ok() } else { None }
}

/// Whole numbers below 2^53 are exact in a double.
const EXACT_BELOW: f64 = 9_007_199_254_740_992.0;

/// A whole number, with or without a decimal point.
pub(super) fn integer(written: &str) -> Option<i64> {
    if let Ok(value) = written.trim().parse() {
        return Some(value);
    }
    real(written)
        .filter(|it| it.fract() == 0.0 && it.abs() < EXACT_BELOW)
        .map(|it| it as i64)
}

/// Seconds in a unit of time of the FITS standard.
pub(super) fn seconds_per(unit: &str) -> Option<f64> {
    match unit.trim() {
        "" | "s" => Some(1.0),
        "ms" => Some(1e-3),
        "us" => Some(1e-6),
        "min" => Some(60.0),
        "h" => Some(3600.0),
        "d" => Some(86_400.0),
        _ => None,
    }
}

/// The binary table FRAMES of a cube.
#[derive(Clone, Debug, PartialEq)]
pub(super) struct FramesTable {
    /// Column TIME, in seconds after the reference.
    pub(super) time_s: Vec<f64>,
    /// Column XPOSURE, in seconds, if there is one.
    pub(super) exposure_s: Option<Vec<f64>>,
    /// Its own DATEREF, if it has one.
    pub(super) reference: Option<String>,
}

/// Finds the table FRAMES; leaves the handle at any HDU.
pub(super) fn frames_table(
    handle: &Handle,
    file_bytes: u64,
    hdus: usize,
) -> Result<Option<FramesTable>, FitsError> {
    for hdu in 2..=hdus {
        let Some(kind) = handle.move_to(hdu)? else {
            return Ok(None);
        };
        let named = matches!(read(handle, "EXTNAME")?, Some(Key::Text(it))
            if it.eq_ignore_ascii_case("FRAMES"));
        if kind != HduKind::BinaryTable || !named {
            continue;
        }
        let rows = handle.rows()?;
        // A row of a table with a column TIME has at least one byte.
        if rows as u64 > file_bytes {
            return Err(FitsError::TooLarge {
                path: handle.path().to_owned(),
                what: "the table FRAMES",
                announced: rows as u128,
                allowed: u128::from(file_bytes),
                unit: "rows",
            });
        }
        let Some(time_s) = seconds_column(handle, hdu, "TIME", rows)? else {
            return Err(FitsError::NoTime {
                path: handle.path().to_owned(),
                looked_for: "the table FRAMES has no column TIME".to_owned(),
            });
        };
        let exposure_s = seconds_column(handle, hdu, "XPOSURE", rows)?;
        let reference = match read(handle, "DATEREF")? {
            Some(Key::Text(it)) => Some(it),
            _ => None,
        };
        return Ok(Some(FramesTable {
            time_s,
            exposure_s,
            reference,
        }));
    }
    Ok(None)
}

fn seconds_column(
    handle: &Handle,
    hdu: usize,
    name: &str,
    rows: usize,
) -> Result<Option<Vec<f64>>, FitsError> {
    let Some(column) = handle.column(name)? else {
        return Ok(None);
    };
    let unit_key = format!("TUNIT{column}");
    let unit = match read(handle, &unit_key)? {
        Some(Key::Text(it) | Key::Other(it)) => it,
        None => String::new(),
    };
    let keyword = |name: String, found: String, needed| FitsError::Keyword {
        path: handle.path().to_owned(),
        hdu: hdu - 1,
        name: name.into(),
        found,
        needed,
    };
    let Some(factor) = seconds_per(&unit) else {
        return Err(keyword(
            unit_key,
            unit,
            "a unit of time (s, ms, us, min, h or d)",
        ));
    };
    let mut values = vec![0.0; rows];
    handle.read_column(column, &mut values)?;
    if let Some(row) = values.iter().position(|it| !it.is_finite()) {
        let where_it_is = format!("undefined in row {}", row + 1);
        return Err(keyword(
            format!("column {name}"),
            where_it_is,
            "a finite number",
        ));
    }
    for value in &mut values {
        *value *= factor;
    }
    Ok(Some(values))
}

#[cfg(test)]
mod tests {
    use super::*;

    // FITS Standard 4.0, section 4.2: integers, reals with E or D exponent.
    #[test]
    fn numbers_as_the_standard_writes_them() {
        assert_eq!(real("1.5D+03"), Some(1500.0));
        assert_eq!(real("-.25E2"), Some(-25.0));
        assert_eq!(real("NaN"), None);
        assert_eq!(real("T"), None);
        assert_eq!(integer("9223372036854775807"), Some(i64::MAX));
        assert_eq!(integer("12.0"), Some(12));
        assert_eq!(integer("12.75"), None);
        assert_eq!(integer("+7"), Some(7));
    }

    #[test]
    fn wild_cards_are_no_names() {
        assert!(is_name("DATE-OBS") && is_name("TEL MOUNT TEMP"));
        assert!(!is_name("DATE*") && !is_name("") && !is_name("N?") && !is_name("CRVAL#"));
    }
}
