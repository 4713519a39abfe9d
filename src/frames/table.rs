//! A binary table of a FITS file, read column by column.

use std::path::Path;

use super::error::FitsError;
use super::header::{self, Key};
use super::raw::HduKind;
use super::source::{self, Source};

/// An open table.
#[derive(Debug)]
pub struct TableFile {
    source: Source,
    /// The HDU, the primary one being 0.
    hdu: usize,
    rows: usize,
}

impl TableFile {
    /// Opens the first binary table of that EXTNAME, or the first of any name.
    ///
    /// # Errors
    ///
    /// [`FitsError`] when the file cannot be opened, is damaged or holds no such table.
    pub fn open(path: &Path, name: Option<&str>) -> Result<Self, FitsError> {
        let source = source::open(path)?;
        for hdu in 2..=source.survey.hdus {
            let Some(kind) = source.handle.move_to(hdu)? else {
                break;
            };
            let named = name.is_none_or(|name| {
                matches!(header::read(&source.handle, "EXTNAME"), Ok(Some(Key::Text(it)))
                    if it.eq_ignore_ascii_case(name))
            });
            if kind != HduKind::BinaryTable || !named || source.handle.is_compressed_image()? {
                continue;
            }
            let rows = source.handle.rows()?;
            if rows as u64 > source.bytes {
                return Err(FitsError::TooLarge {
                    path: path.to_owned(),
                    what: "a table",
                    announced: rows as u128,
                    allowed: u128::from(source.bytes),
                    unit: "rows",
                });
            }
            return Ok(Self {
                source,
                hdu: hdu - 1,
                rows,
            });
        }
        Err(FitsError::Damaged {
            path: path.to_owned(),
            found: match name {
                Some(name) => format!("no binary table {name} in it"),
                None => "no binary table in it".to_owned(),
            },
        })
    }

    /// Number of rows.
    pub fn rows(&self) -> usize {
        self.rows
    }

    /// A column of numbers by its name in any case; undefined values are NaN.
    ///
    /// # Errors
    ///
    /// [`FitsError`] when the column is there and cannot be read as numbers.
    pub fn column(&self, name: &str) -> Result<Option<Vec<f64>>, FitsError> {
        let Some(column) = self.source.handle.column(name)? else {
            return Ok(None);
        };
        let mut values = vec![0.0; self.rows];
        self.source.handle.read_column(column, &mut values)?;
        Ok(Some(values))
    }

    /// The same; a table without it is refused.
    ///
    /// # Errors
    ///
    /// [`FitsError::Damaged`] when it is not there.
    pub fn needed(&self, name: &str) -> Result<Vec<f64>, FitsError> {
        self.column(name)?.ok_or_else(|| FitsError::Damaged {
            path: self.source.handle.path().to_owned(),
            found: format!("the table has no column {name}"),
        })
    }

    /// Unit of a column; empty where the table gives none.
    ///
    /// # Errors
    ///
    /// [`FitsError`] when the header cannot be read.
    pub fn unit(&self, name: &str) -> Result<String, FitsError> {
        let Some(column) = self.source.handle.column(name)? else {
            return Ok(String::new());
        };
        Ok(self.text(&format!("TUNIT{column}"))?.unwrap_or_default())
    }

    /// A keyword of the table's header, as text.
    ///
    /// # Errors
    ///
    /// [`FitsError`] when the header cannot be read.
    pub fn text(&self, name: &str) -> Result<Option<String>, FitsError> {
        Ok(header::read(&self.source.handle, name)?.map(|it| match it {
            Key::Text(it) | Key::Other(it) => it.trim().to_owned(),
        }))
    }

    /// A keyword of the table's header as a number.
    ///
    /// # Errors
    ///
    /// [`FitsError::Keyword`] when it is there and no number.
    pub fn real(&self, name: &str) -> Result<Option<f64>, FitsError> {
        let Some(written) = self.text(name)? else {
            return Ok(None);
        };
        match header::real(&written) {
            Some(value) => Ok(Some(value)),
            None => Err(FitsError::Keyword {
                path: self.source.handle.path().to_owned(),
                hdu: self.hdu,
                name: name.into(),
                found: written,
                needed: "a number",
            }),
        }
    }
}
