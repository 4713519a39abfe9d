//! FITS files written whole or not at all.
//!
//! A file grows under a temporary name in its own folder and takes its final name when all is
//! written and synced. Each HDU carries CHECKSUM and DATASUM, nothing carries the time of day:
//! the same content gives the same bytes.

use std::fs::File;
use std::path::{Path, PathBuf};

use ndarray::{Array2, ArrayRef, Dimension};
use tempfile::TempPath;

use super::card::Card;
use super::column::{self, Column, Values};
use super::error::FitsError;
use super::raw::{Element, Handle};

/// BITPIX codes of the library for image types.
const BYTE: i32 = 8;
const UNSIGNED_SHORT: i32 = 20;
const FLOAT: i32 = -32;
const DOUBLE: i32 = -64;

/// A FITS file being written. Dropped before [`finish`](Self::finish), it leaves nothing.
#[derive(Debug)]
pub struct FitsWriter {
    // Declared first: it closes before the file under it goes.
    handle: Handle,
    temporary: TempPath,
    path: PathBuf,
    is_empty: bool,
    cube: Option<Cube>,
}

/// A cube that waits for planes.
#[derive(Debug)]
struct Cube {
    width: usize,
    height: usize,
    planes: usize,
    written: usize,
}

/// Size and packing of a cube of unsigned 16-bit integers.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct CubeShape {
    /// Columns.
    pub width: usize,
    /// Rows.
    pub height: usize,
    /// Planes; 1 makes a plain image.
    pub planes: usize,
    /// Whether to compress row by row with Rice's code, without loss.
    pub compressed: bool,
}

impl FitsWriter {
    /// Starts a file that will be `path`; a file of that name stays until then.
    ///
    /// # Errors
    ///
    /// [`FitsError`] when nothing can be created in that folder.
    pub fn create(path: &Path) -> Result<Self, FitsError> {
        let mut failure = None;
        let made = tempfile::Builder::new()
            .prefix(".")
            .suffix(".part")
            .make_in(folder_of(path), |temporary| {
                if temporary.exists() {
                    return Err(std::io::ErrorKind::AlreadyExists.into());
                }
                Handle::create(temporary, path).map_err(|it| {
                    failure = Some(it);
                    std::io::Error::other("refused by the FITS library")
                })
            });
        match (made, failure) {
            (Ok(made), _) => {
                let (handle, temporary) = made.into_parts();
                let path = path.to_owned();
                Ok(Self {
                    handle,
                    temporary,
                    path,
                    is_empty: true,
                    cube: None,
                })
            }
            (Err(_), Some(failure)) => Err(failure),
            (Err(error), None) => Err(FitsError::io(path, "create", &error)),
        }
    }

    /// Writes an HDU without data, to carry cards; the first of a file only.
    ///
    /// # Errors
    ///
    /// [`FitsError`] when a card is malformed or the file cannot be written.
    pub fn primary_without_data(&mut self, cards: &[Card]) -> Result<(), FitsError> {
        self.complete_cube()?;
        if !self.is_empty {
            return Err(self.refuse("primary HDU", "the file has one already"));
        }
        self.is_empty = false;
        self.handle.create_image(BYTE, &[], false)?;
        self.cards(None, cards)?;
        self.handle.write_checksums()
    }

    /// Writes a single-precision image, or a cube with the slowest axis first.
    ///
    /// # Errors
    ///
    /// [`FitsError`] when a card is malformed or the file cannot be written.
    pub fn image_f32<D: Dimension>(
        &mut self,
        name: Option<&str>,
        pixels: &ArrayRef<f32, D>,
        cards: &[Card],
    ) -> Result<(), FitsError> {
        self.image(FLOAT, name, pixels, cards)
    }

    /// Writes a double-precision image, or a cube with the slowest axis first.
    ///
    /// # Errors
    ///
    /// [`FitsError`] when a card is malformed or the file cannot be written.
    pub fn image_f64<D: Dimension>(
        &mut self,
        name: Option<&str>,
        pixels: &ArrayRef<f64, D>,
        cards: &[Card],
    ) -> Result<(), FitsError> {
        self.image(DOUBLE, name, pixels, cards)
    }

    /// Writes an image of bytes, such as a map of bad pixels.
    ///
    /// # Errors
    ///
    /// [`FitsError`] when a card is malformed or the file cannot be written.
    pub fn image_u8<D: Dimension>(
        &mut self,
        name: Option<&str>,
        pixels: &ArrayRef<u8, D>,
        cards: &[Card],
    ) -> Result<(), FitsError> {
        self.image(BYTE, name, pixels, cards)
    }

    fn image<T: Element, D: Dimension>(
        &mut self,
        bitpix: i32,
        name: Option<&str>,
        pixels: &ArrayRef<T, D>,
        cards: &[Card],
    ) -> Result<(), FitsError> {
        self.complete_cube()?;
        if pixels.is_empty() {
            return Err(self.refuse("image", "it has no pixels"));
        }
        self.is_empty = false;
        let axes: Vec<usize> = pixels.shape().iter().rev().copied().collect();
        self.handle.create_image(bitpix, &axes, false)?;
        self.cards(name, cards)?;
        let ordered = pixels.as_standard_layout();
        self.handle
            .write_pixels(0, ordered.as_slice().unwrap_or_default())?;
        self.handle.write_checksums()
    }

    /// Starts an image or cube of unsigned 16-bit integers (BZERO = 32768); its planes follow by
    /// [`plane_u16`](Self::plane_u16).
    ///
    /// # Errors
    ///
    /// [`FitsError`] when a card is malformed or the file cannot be written.
    pub fn begin_u16(
        &mut self,
        name: Option<&str>,
        shape: CubeShape,
        cards: &[Card],
    ) -> Result<(), FitsError> {
        self.complete_cube()?;
        let CubeShape {
            width,
            height,
            planes,
            compressed,
        } = shape;
        if width * height * planes == 0 {
            return Err(self.refuse("image", "it has no pixels"));
        }
        if compressed && self.is_empty {
            self.primary_without_data(&[])?;
        }
        self.is_empty = false;
        let mut axes = vec![width, height];
        if planes > 1 {
            axes.push(planes);
        }
        self.handle
            .create_image(UNSIGNED_SHORT, &axes, compressed)?;
        if compressed {
            // The library names the table by itself.
            self.handle.delete_key("EXTNAME")?;
        }
        self.cards(name, cards)?;
        self.cube = Some(Cube {
            width,
            height,
            planes,
            written: 0,
        });
        Ok(())
    }

    /// Writes the next plane of the cube that was begun.
    ///
    /// # Errors
    ///
    /// [`FitsError`] when no plane is due, its size is another, or it cannot be written.
    pub fn plane_u16(&mut self, plane: &Array2<u16>) -> Result<(), FitsError> {
        let Some(cube) = self.cube.as_mut().filter(|it| it.written < it.planes) else {
            return Err(self.refuse("plane", "no cube was begun, or it has all its planes"));
        };
        if plane.dim() != (cube.height, cube.width) {
            let (rows, columns) = plane.dim();
            let reason = format!(
                "it has {columns} x {rows} pixels, the cube {} x {}",
                cube.width, cube.height
            );
            return Err(self.refuse("plane", &reason));
        }
        let start = cube.written * cube.width * cube.height;
        let ordered = plane.as_standard_layout();
        self.handle
            .write_pixels(start, ordered.as_slice().unwrap_or_default())?;
        cube.written += 1;
        Ok(())
    }

    /// Writes a binary table. A column's description becomes its TCOMM card, its UCD TUCD.
    ///
    /// # Errors
    ///
    /// [`FitsError`] when a column or card is malformed or the file cannot be written.
    pub fn table(
        &mut self,
        name: &str,
        columns: &[Column],
        cards: &[Card],
    ) -> Result<(), FitsError> {
        self.complete_cube()?;
        if self.is_empty {
            self.primary_without_data(&[])?;
        }
        if let Some((what, reason)) = column::fault(columns, true) {
            return Err(self.refuse(&what, &reason));
        }
        if columns.is_empty() || columns.len() > 999 {
            return Err(self.refuse("table", "1 to 999 columns are allowed"));
        }
        let forms: Vec<(&str, String, &str)> = columns
            .iter()
            .map(|it| {
                (
                    it.name.as_str(),
                    form(&it.values),
                    it.unit.as_deref().unwrap_or(""),
                )
            })
            .collect();
        self.handle
            .create_table(name, columns[0].values.len(), &forms)?;
        for (index, it) in columns.iter().enumerate() {
            for (stem, text) in [("TUCD", &it.ucd), ("TCOMM", &it.description)] {
                if let Some(text) = text {
                    let card = Card::text("PLACE", text.clone(), "");
                    self.records(&card, &format!("{stem}{}", index + 1))?;
                }
            }
        }
        self.cards(None, cards)?;
        for (index, it) in columns.iter().enumerate() {
            self.column(index + 1, &it.values)?;
        }
        self.handle.write_checksums()
    }

    fn column(&self, number: usize, values: &Values) -> Result<(), FitsError> {
        if values.is_empty() {
            return Ok(());
        }
        match values {
            Values::F64(it) => self.handle.write_column(number, it),
            Values::Gaps(it) => {
                let filled: Vec<f64> = it.iter().map(|it| it.unwrap_or(f64::NAN)).collect();
                self.handle.write_column(number, &filled)
            }
            Values::F32(it) => self.handle.write_column(number, it),
            Values::I32(it) => self.handle.write_column(number, it),
            Values::I64(it) => self.handle.write_column(number, it),
            Values::U8(it) => self.handle.write_column(number, it),
            Values::Text(it) => self.handle.write_text_column(number, it),
        }
    }

    /// Closes and syncs the file and gives it its name.
    ///
    /// # Errors
    ///
    /// [`FitsError`] when a cube lacks planes or the disk refuses; nothing is left under the name
    /// then but what was there before.
    pub fn finish(mut self) -> Result<(), FitsError> {
        self.complete_cube()?;
        if self.is_empty {
            return Err(self.refuse("file", "it has no HDU"));
        }
        self.handle.close()?;
        put_in_place(self.temporary, &self.path)
    }

    fn complete_cube(&mut self) -> Result<(), FitsError> {
        match self.cube.take() {
            None => Ok(()),
            Some(cube) if cube.written == cube.planes => self.handle.write_checksums(),
            Some(cube) => {
                let reason = format!("{} of {} planes were written", cube.written, cube.planes);
                Err(self.refuse("cube", &reason))
            }
        }
    }

    fn refuse(&self, what: &str, reason: &str) -> FitsError {
        FitsError::unwritable(&self.path, what, reason)
    }

    /// Writes the cards, and room for the checksums, so that no data must move later.
    fn cards(&self, name: Option<&str>, cards: &[Card]) -> Result<(), FitsError> {
        if let Some(name) = name {
            self.records(&Card::text("PLACE", name, "name of this HDU"), "EXTNAME")?;
        }
        for (index, card) in cards.iter().enumerate() {
            let repeats = |it: &Card| it.name == card.name;
            let is_free = card.name == "COMMENT" || card.name == "HISTORY";
            if !is_free && cards[..index].iter().any(repeats) {
                return Err(self.refuse(&card.name, "this keyword is given twice"));
            }
            self.records(card, &card.name)?;
        }
        self.handle
            .write_card("CHECKSUM= '0000000000000000'   / HDU checksum")?;
        self.handle
            .write_card("DATASUM = '0       '           / data unit checksum")
    }

    /// Writes one card under `name`, which may be a keyword that callers must not set.
    fn records(&self, card: &Card, name: &str) -> Result<(), FitsError> {
        let records = card
            .records()
            .map_err(|reason| self.refuse(name, &reason))?;
        for (index, record) in records.iter().enumerate() {
            let is_renamed = index == 0 && card.name != name;
            let record = if is_renamed {
                format!("{name:<8}{}", &record[8..])
            } else {
                record.clone()
            };
            self.handle.write_card(&record)?;
        }
        Ok(())
    }
}

/// TFORM of a column.
fn form(values: &Values) -> String {
    match values {
        Values::F64(_) | Values::Gaps(_) => "1D".to_owned(),
        Values::F32(_) => "1E".to_owned(),
        Values::I32(_) => "1J".to_owned(),
        Values::I64(_) => "1K".to_owned(),
        Values::U8(_) => "1B".to_owned(),
        Values::Text(it) => format!("{}A", it.iter().map(String::len).max().unwrap_or(0).max(1)),
    }
}

/// Writes `bytes` to `path` through a temporary file beside it.
///
/// # Errors
///
/// [`FitsError::Io`] when the disk refuses; what was there before stays then.
pub fn write_whole(path: &Path, bytes: &[u8]) -> Result<(), FitsError> {
    let made = tempfile::Builder::new()
        .prefix(".")
        .suffix(".part")
        .make_in(folder_of(path), |temporary| {
            std::fs::OpenOptions::new()
                .write(true)
                .create_new(true)
                .open(temporary)
        })
        .map_err(|it| FitsError::io(path, "create", &it))?;
    let (mut file, temporary) = made.into_parts();
    std::io::Write::write_all(&mut file, bytes).map_err(|it| FitsError::io(path, "write", &it))?;
    drop(file);
    put_in_place(temporary, path)
}

fn folder_of(path: &Path) -> &Path {
    match path.parent() {
        Some(folder) if !folder.as_os_str().is_empty() => folder,
        _ => Path::new("."),
    }
}

fn put_in_place(temporary: TempPath, path: &Path) -> Result<(), FitsError> {
    let sync = |it: &Path| File::open(it).and_then(|file| file.sync_all());
    sync(&temporary).map_err(|it| FitsError::io(path, "sync", &it))?;
    temporary
        .persist(path)
        .map_err(|it| FitsError::io(path, "rename", &it.error))?;
    // The new name itself must survive a power cut; not every file system lets a folder be synced.
    let _ = sync(folder_of(path));
    Ok(())
}
