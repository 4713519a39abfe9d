//! One image or cube of a FITS file, read plane by plane into a buffer that is used again.
//!
//! Planes are indexed from 0; row 0 of a plane is the first row of the file (y = 0), pixel (0, 0)
//! is FITS pixel (1, 1). BSCALE, BZERO and the unsigned convention are applied; BLANK and NaN give
//! NaN. A keyword that is missing in the image's own header is looked up in the primary one.

use std::path::Path;

use ndarray::Array2;

use super::error::FitsError;
use super::header::{self, Key};
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
    source: Source,
    hdu: usize,
    bitpix: i32,
    stored: Stored,
    compressed: bool,
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

    fn own_key(&self, name: &str) -> Result<Option<String>, FitsError> {
        self.source.handle.key_as_written(name)
    }

    fn scaling_key(&self, name: &str, absent: f64) -> Result<f64, FitsError> {
        let Some(written) = self.own_key(name)? else {
            return Ok(absent);
        };
        match header::real(&written) {
            Some(value) if value.is_finite() => Ok(value),
            _ => Err(self.bad_key(name, &written, "a finite number")),
        }
    }

    fn bad_key(&self, name: &str, found: &str, needed: &'static str) -> FitsError {
        FitsError::Keyword {
            path: self.path().to_owned(),
            name: name.to_owned(),
            found: found.to_owned(),
            needed,
        }
    }

    /// A keyword as text, CONTINUE cards joined; numbers as they are written.
    ///
    /// # Errors
    ///
    /// [`FitsError`] when the name or the card is malformed.
    pub fn key_text(&self, name: &str) -> Result<Option<String>, FitsError> {
        Ok(self.key(name)?.map(|it| match it {
            Key::Text(value) | Key::Other(value) => value,
        }))
    }

    /// A keyword as a number.
    ///
    /// # Errors
    ///
    /// [`FitsError::Keyword`] when it is no number.
    pub fn key_f64(&self, name: &str) -> Result<Option<f64>, FitsError> {
        match self.key(name)? {
            None => Ok(None),
            Some(Key::Other(written)) => match header::real(&written) {
                Some(value) => Ok(Some(value)),
                None => Err(self.bad_key(name, &written, "a number")),
            },
            Some(Key::Text(found)) => {
                Err(self.bad_key(name, &format!("the text '{found}'"), "a number"))
            }
        }
    }

    /// A keyword as a whole number; 12.75 is an error, 12.0 is not.
    ///
    /// # Errors
    ///
    /// [`FitsError::Keyword`] when it is no whole number.
    pub fn key_i64(&self, name: &str) -> Result<Option<i64>, FitsError> {
        match self.key(name)? {
            None => Ok(None),
            Some(Key::Other(written)) => match header::integer(&written) {
                Some(value) => Ok(Some(value)),
                None => Err(self.bad_key(name, &written, "a whole number")),
            },
            Some(Key::Text(found)) => {
                Err(self.bad_key(name, &format!("the text '{found}'"), "a whole number"))
            }
        }
    }

    fn key(&self, name: &str) -> Result<Option<Key>, FitsError> {
        if !header::is_name(name) {
            return Err(self.bad_key(name, "no keyword", "a name of A-Z, 0-9, - and _"));
        }
        let handle = &self.source.handle;
        let found = header::read(handle, name)?;
        if found.is_some() || self.hdu == 1 {
            return Ok(found);
        }
        handle.move_to(1)?;
        let inherited = header::read(handle, name);
        handle.move_to(self.hdu)?;
        inherited
    }

    /// Every card of the image's header, as written.
    ///
    /// # Errors
    ///
    /// [`FitsError`] when the header cannot be read.
    pub fn cards(&self) -> Result<Vec<String>, FitsError> {
        let mut cards = Vec::new();
        while let Some(card) = self.source.handle.record(cards.len() + 1)? {
            cards.push(card);
        }
        Ok(cards)
    }

    /// Whether (data, whole HDU) agree with CHECKSUM and DATASUM; `None` where there are none.
    ///
    /// # Errors
    ///
    /// [`FitsError`] when the file cannot be read to the end of the HDU.
    pub fn verify_checksums(&self) -> Result<(Option<bool>, Option<bool>), FitsError> {
        self.source.handle.verify_checksums()
    }

    /// Names the compression if it changed the values: quantised floats, scaled HCOMPRESS.
    pub fn lossy(&self) -> Option<String> {
        if !self.compressed {
            return None;
        }
        let word = |name: &str| match header::read(&self.source.handle, name) {
            Ok(Some(Key::Text(it) | Key::Other(it))) => Some(it),
            _ => None,
        };
        let method = word("ZCMPTYPE").unwrap_or_else(|| "unknown".to_owned());
        let quantised = word("ZQUANTIZ");
        let has_scale =
            word("ZSCALE").is_some() || matches!(self.source.handle.column("ZSCALE"), Ok(Some(_)));
        let off = quantised
            .as_deref()
            .is_some_and(|it| it.eq_ignore_ascii_case("NONE"));
        if self.bitpix < 0 && !off && (quantised.is_some() || has_scale) {
            let how = quantised.unwrap_or_else(|| "NO_DITHER".to_owned());
            return Some(format!("floats quantised ({how}) and packed by {method}"));
        }
        if method.starts_with("HCOMPRESS") {
            let scale = (1..=9).find_map(|n| {
                let is_scale = word(&format!("ZNAME{n}"))?.eq_ignore_ascii_case("SCALE");
                header::real(&word(&format!("ZVAL{n}"))?).filter(|_| is_scale)
            });
            if let Some(scale) = scale.filter(|it| *it > 0.0) {
                return Some(format!("{method} with scale {scale}"));
            }
        }
        None
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
