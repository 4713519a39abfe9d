//! One image or cube of a FITS file, read plane by plane into a buffer that is used again.
//!
//! Planes are indexed from 0; row 0 of a plane is the first row of the file (y = 0), pixel (0, 0)
//! is FITS pixel (1, 1). BSCALE, BZERO and the unsigned convention are applied; BLANK and NaN give
//! NaN.

use std::path::Path;

use ndarray::Array2;

use super::error::FitsError;
use super::header;
use super::raw::{Element, Handle, HduKind};
use super::source::{self, Source};

/// A plane of more pixels is refused.
const MAX_PLANE_PIXELS: u128 = 1_000_000_000;
/// A cube of more planes is refused.
const MAX_PLANES: u128 = 1_000_000;
/// No tile compression packs closer than this (the limit of deflate), small images apart.
const MAX_PACKING: u128 = 1032;
/// Compressed planes up to this size are taken without a look at the packing.
const SMALL_PLANE_PIXELS: u128 = 1 << 24;

/// How the stored numbers become values.
#[derive(Clone, Copy, Debug, PartialEq)]
enum Stored {
    /// 8 bits, or 16 with BZERO = 32768: the values are whole and in 0..=65535.
    Unsigned,
    /// 16 bits, unscaled: whole, and perhaps negative.
    Short,
    /// Everything else.
    Other,
}

/// One open file and the image in it. Each thread opens its own.
#[derive(Debug)]
pub struct ImageFile {
    pub(super) source: Source,
    pub(super) hdu: usize,
    pub(super) bitpix: i32,
    stored: Stored,
    pub(super) compressed: bool,
    width: usize,
    height: usize,
    planes: usize,
    planes_present: usize,
    unsigned: Vec<u16>,
    short: Vec<i16>,
}

impl ImageFile {
    /// Opens the first HDU that holds an image of two or three axes.
    ///
    /// # Errors
    ///
    /// [`FitsError`] when the file cannot be opened, is damaged or holds no such image.
    pub fn open(path: &Path) -> Result<Self, FitsError> {
        let source = source::open(path)?;
        let mut seen = Vec::new();
        for hdu in 1..=source.survey.hdus {
            let kind = match source.handle.move_to(hdu) {
                Ok(Some(kind)) => kind,
                Ok(None) => break,
                Err(error) if hdu == 1 => return Err(error),
                Err(error) => {
                    seen.push(format!(
                        "HDU {} cannot be read ({})",
                        hdu - 1,
                        error.without_path()
                    ));
                    break;
                }
            };
            match kind {
                HduKind::Image => {
                    let axes = source.handle.axes()?;
                    if axes.iter().filter(|it| **it > 0).count() >= 2 && !axes.contains(&0) {
                        return Self::with_source(source, hdu, &axes);
                    }
                    seen.push(format!("HDU {} has {}", hdu - 1, shown(&axes)));
                }
                HduKind::AsciiTable | HduKind::BinaryTable => {
                    seen.push(format!("HDU {} is a table", hdu - 1));
                }
            }
        }
        if let Some(stopped) = &source.survey.stopped {
            return Err(FitsError::Damaged {
                path: path.to_owned(),
                found: stopped.clone(),
            });
        }
        if seen.len() > 4 {
            let more = seen.len() - 4;
            seen.truncate(4);
            seen.push(format!("and {more} more of such"));
        }
        Err(FitsError::NoImage {
            path: path.to_owned(),
            found: seen.join(", "),
        })
    }

    /// Opens the image in HDU `hdu`, the primary one being 0.
    ///
    /// # Errors
    ///
    /// As [`open`](Self::open).
    pub fn open_hdu(path: &Path, hdu: usize) -> Result<Self, FitsError> {
        let source = source::open(path)?;
        if hdu >= source.survey.hdus
            && let Some(stopped) = source.survey.stopped
        {
            return Err(FitsError::Damaged {
                path: path.to_owned(),
                found: stopped,
            });
        }
        let found = match source.handle.move_to(hdu + 1)? {
            Some(HduKind::Image) => {
                let axes = source.handle.axes()?;
                if axes.len() >= 2 && !axes.contains(&0) {
                    return Self::with_source(source, hdu + 1, &axes);
                }
                shown(&axes)
            }
            Some(_) => "a table".to_owned(),
            None => "nothing".to_owned(),
        };
        let found = format!("HDU {hdu} has {found}");
        Err(FitsError::NoImage {
            path: path.to_owned(),
            found,
        })
    }

    fn with_source(source: Source, hdu: usize, axes: &[i64]) -> Result<Self, FitsError> {
        let path = source.handle.path().to_owned();
        let long_axes = axes[2..].iter().filter(|it| **it > 1).count();
        if long_axes > 1 || axes.iter().any(|it| *it < 1) {
            let found = format!("HDU {} has {}", hdu - 1, shown(axes));
            return Err(FitsError::NoImage { path, found });
        }
        let count = |it: i64| u128::from(it.unsigned_abs());
        let (width, height) = (count(axes[0]), count(axes[1]));
        let planes: u128 = axes[2..].iter().map(|it| count(*it)).max().unwrap_or(1);
        let limit = |what, announced, allowed, unit| {
            if announced <= allowed {
                return Ok(());
            }
            Err(FitsError::TooLarge {
                path: path.clone(),
                what,
                announced,
                allowed,
                unit,
            })
        };
        limit("one plane", width * height, MAX_PLANE_PIXELS, "pixels")?;
        limit("the cube", planes, MAX_PLANES, "planes")?;

        let bitpix = source.handle.bitpix()?;
        let compressed = source.handle.is_compressed_image()?;
        let (start, end) = source.handle.data_range()?;
        let held = u128::from(source.bytes.saturating_sub(start));
        let mut planes_present = planes;
        if compressed {
            limit(
                "compressed data",
                u128::from(end.saturating_sub(start)),
                held,
                "bytes",
            )?;
            let allowed = SMALL_PLANE_PIXELS.max(held * MAX_PACKING);
            limit("one plane", width * height, allowed, "pixels")?;
        } else {
            let plane_bytes = width * height * u128::from(bitpix.unsigned_abs() / 8);
            limit("one plane", plane_bytes, held, "bytes")?;
            planes_present = planes_present.min(held / plane_bytes.max(1));
        }
        let mut it = Self {
            source,
            hdu,
            bitpix,
            stored: Stored::Other,
            compressed,
            width: width as usize,
            height: height as usize,
            planes: planes as usize,
            planes_present: planes_present as usize,
            unsigned: Vec::new(),
            short: Vec::new(),
        };
        it.stored = it.how_stored()?;
        Ok(it)
    }

    fn how_stored(&self) -> Result<Stored, FitsError> {
        let scale = self.scaling_key("BSCALE", 1.0)?;
        let zero = self.scaling_key("BZERO", 0.0)?;
        if scale == 0.0 {
            return Err(self.bad_key("BSCALE", "0", "a number other than zero"));
        }
        let blank = self.own_key("BLANK")?.or(self.own_key("ZBLANK")?).is_some();
        Ok(match (self.bitpix, scale, zero, blank) {
            (8, 1.0, 0.0, false) | (16, 1.0, 32768.0, false) => Stored::Unsigned,
            (16, 1.0, 0.0, false) => Stored::Short,
            _ => Stored::Other,
        })
    }

    /// The file.
    pub fn path(&self) -> &Path {
        self.source.handle.path()
    }

    /// Which HDU the image is in, the primary one being 0.
    pub fn hdu(&self) -> usize {
        self.hdu - 1
    }

    /// Columns (NAXIS1).
    pub fn width(&self) -> usize {
        self.width
    }

    /// Rows (NAXIS2).
    pub fn height(&self) -> usize {
        self.height
    }

    /// Planes that the header announces; 1 for a plain image.
    pub fn planes(&self) -> usize {
        self.planes
    }

    /// Whole planes that the length of the file allows: fewer than [`planes`](Self::planes) when
    /// the file was cut. For a compressed image this is not known before reading.
    pub fn planes_present(&self) -> usize {
        self.planes_present
    }

    /// BITPIX of the pixels: 8, 16, 32, 64 (integers), -32, -64 (floats).
    pub fn bitpix(&self) -> i32 {
        self.bitpix
    }

    /// Whether the image is tile-compressed.
    pub fn is_compressed(&self) -> bool {
        self.compressed
    }

    /// Length of the file, in bytes; unpacked, if it was packed as a whole.
    pub fn bytes_on_disk(&self) -> u64 {
        self.source.bytes
    }

    /// Whether every value is sure to fit [`read_plane_u16`](Self::read_plane_u16).
    pub fn is_u16(&self) -> bool {
        self.stored == Stored::Unsigned
    }

    /// Reads a plane as floats. `into` takes the size of the image if it has another.
    ///
    /// # Errors
    ///
    /// [`FitsError`] when there is no such plane or it cannot be read.
    pub fn read_plane(&mut self, plane: usize, into: &mut Array2<f32>) -> Result<(), FitsError> {
        self.read_rows(plane, 0, self.height, into)
    }

    /// Reads rows `first..end` of a plane as floats.
    ///
    /// # Errors
    ///
    /// [`FitsError`] when there is no such plane or row or it cannot be read.
    pub fn read_rows(
        &mut self,
        plane: usize,
        first: usize,
        end: usize,
        into: &mut Array2<f32>,
    ) -> Result<(), FitsError> {
        let start = self.start_of(plane, first, end)?;
        let pixels = sized(into, end - first, self.width);
        let handle = &self.source.handle;
        match self.stored {
            Stored::Unsigned => widened(handle, start, &mut self.unsigned, pixels),
            Stored::Short => widened(handle, start, &mut self.short, pixels),
            Stored::Other => handle.read_pixels(start, pixels),
        }
    }

    /// Reads a plane of unsigned integers as they are: 8 or 16 bits, BZERO 0 or 32768, no BLANK.
    ///
    /// # Errors
    ///
    /// [`FitsError`] when the image is of another kind, a 16-bit value is negative, or as
    /// [`read_plane`](Self::read_plane).
    pub fn read_plane_u16(
        &mut self,
        plane: usize,
        into: &mut Array2<u16>,
    ) -> Result<(), FitsError> {
        if self.stored == Stored::Other {
            let needed = "8 or 16 with BZERO 0 or 32768 and no BLANK";
            return Err(self.bad_key("BITPIX", &self.bitpix.to_string(), needed));
        }
        let start = self.start_of(plane, 0, self.height)?;
        let pixels = sized(into, self.height, self.width);
        self.source.handle.read_pixels(start, pixels)
    }

    /// Index of the first pixel of a row, after all is checked: the library checks nothing.
    fn start_of(&self, plane: usize, first: usize, end: usize) -> Result<usize, FitsError> {
        let outside = |what, found, count| {
            Err(FitsError::OutOfRange {
                path: self.path().to_owned(),
                what,
                found,
                count,
            })
        };
        if plane >= self.planes {
            return outside("plane", plane, self.planes);
        }
        if plane >= self.planes_present {
            return Err(FitsError::TooLarge {
                path: self.path().to_owned(),
                what: "the cube",
                announced: self.planes as u128,
                allowed: self.planes_present as u128,
                unit: "planes",
            });
        }
        if first > end || end > self.height {
            return outside("row", first.max(end), self.height);
        }
        Ok((plane * self.height + first) * self.width)
    }

    /// Column TIME of the binary table FRAMES, in seconds after DATEREF; `None` without one.
    ///
    /// # Errors
    ///
    /// [`FitsError`] when the table is there and its TIME is not usable.
    pub fn time_column(&mut self) -> Result<Option<Vec<f64>>, FitsError> {
        Ok(self.frames_table()?.map(|it| it.time_s))
    }

    /// The table FRAMES, if there is one.
    pub(super) fn frames_table(&self) -> Result<Option<header::FramesTable>, FitsError> {
        let read = header::frames_table(
            &self.source.handle,
            self.source.bytes,
            self.source.survey.hdus,
        );
        self.source.handle.move_to(self.hdu)?;
        read
    }
}

/// Reads pixels of a narrow type and widens them: faster than to let the library do both.
fn widened<T: Element + Default>(
    handle: &Handle,
    start: usize,
    narrow: &mut Vec<T>,
    pixels: &mut [f32],
) -> Result<(), FitsError>
where
    f32: From<T>,
{
    narrow.resize(pixels.len(), T::default());
    handle.read_pixels(start, narrow)?;
    for (wide, narrow) in pixels.iter_mut().zip(narrow.iter()) {
        *wide = f32::from(*narrow);
    }
    Ok(())
}

/// The buffer as one slice, made anew if its size or order is another.
fn sized<T: Clone + Default>(into: &mut Array2<T>, height: usize, width: usize) -> &mut [T] {
    if into.dim() != (height, width) || !into.is_standard_layout() {
        *into = Array2::default((height, width));
    }
    into.as_slice_mut().unwrap_or_default()
}

fn shown(axes: &[i64]) -> String {
    match axes.len() {
        0 => "no axes".to_owned(),
        1 => format!("one axis of {}", axes[0]),
        _ => {
            axes.iter()
                .map(i64::to_string)
                .collect::<Vec<_>>()
                .join(" x ")
                + " pixels"
        }
    }
}
