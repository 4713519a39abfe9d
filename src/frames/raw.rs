//! The one file that talks to the FITS library: each call checks its status.
//!
//! A [`Handle`] holds the library's pointer and closes it. It is neither `Send` nor `Sync`: the
//! library allows many handles on one file, each used by one thread.

use std::ffi::{CString, c_char, c_int, c_ulong, c_void};
use std::path::{Path, PathBuf};
use std::ptr::{self, NonNull};

use fitsio_sys as c;

use super::error::FitsError;

const TBYTE: c_int = 11;
const TUSHORT: c_int = 20;
const TSHORT: c_int = 21;
const TINT: c_int = 31;
const TFLOAT: c_int = 42;
const TLONGLONG: c_int = 81;
const TDOUBLE: c_int = 82;
const RICE_1: c_int = 11;
const BINARY_TBL: c_int = 2;

const END_OF_FILE: c_int = 107;
const KEY_NO_EXIST: c_int = 202;
const VALUE_UNDEFINED: c_int = 204;
const BAD_HDU_NUM: c_int = 301;
const COL_NOT_FOUND: c_int = 219;

/// The library copies names into buffers of 1025 bytes and may add a suffix.
const MAX_PATH_BYTES: usize = 1000;

/// A kind of HDU.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum HduKind {
    /// Image, plain or tile-compressed.
    Image,
    /// ASCII table.
    AsciiTable,
    /// Binary table that holds no compressed image.
    BinaryTable,
}

/// An element type of images and columns, with the library's number for it.
pub(super) trait Element: Copy {
    /// The library's number.
    const CODE: c_int;
    /// What undefined pixels become; `None` leaves them as stored.
    const UNDEFINED: Option<Self>;
}

macro_rules! element {
    ($kind:ty, $code:expr, $undefined:expr) => {
        impl Element for $kind {
            const CODE: c_int = $code;
            const UNDEFINED: Option<Self> = $undefined;
        }
    };
}
element!(u8, TBYTE, None);
element!(u16, TUSHORT, None);
element!(i16, TSHORT, None);
element!(i32, TINT, None);
element!(i64, TLONGLONG, None);
element!(f32, TFLOAT, Some(f32::NAN));
element!(f64, TDOUBLE, Some(f64::NAN));

/// One open file of the library.
#[derive(Debug)]
pub(super) struct Handle {
    pointer: NonNull<c::fitsfile>,
    path: PathBuf,
}

impl Drop for Handle {
    fn drop(&mut self) {
        let mut status = 0;
        // SAFETY: the pointer came from a successful open and is closed once, here.
        unsafe { c::ffclos(self.pointer.as_ptr(), &raw mut status) };
        if status != 0 {
            take_messages();
        }
    }
}

/// A length as the library counts.
fn count_of(it: usize) -> i64 {
    i64::try_from(it).unwrap_or(i64::MAX)
}

/// The number of an HDU, record or column as the library counts.
fn number_of(it: usize) -> c_int {
    c_int::try_from(it).unwrap_or(c_int::MAX)
}

/// The library's message stack, emptied, oldest first.
fn take_messages() -> String {
    let mut lines = Vec::new();
    // SAFETY: each message fits the 81 bytes that the library states (FLEN_ERRMSG), and is
    // terminated inside them.
    unsafe {
        let mut line = [0u8; 128];
        while lines.len() < 64 && c::ffgmsg(line.as_mut_ptr().cast::<c_char>()) != 0 {
            lines.push(text(&line));
        }
    }
    lines.join("; ")
}

/// The bytes up to the first zero.
fn text(bytes: &[u8]) -> String {
    let end = bytes.iter().position(|it| *it == 0).unwrap_or(bytes.len());
    String::from_utf8_lossy(&bytes[..end]).trim_end().to_owned()
}

/// An error with the library's short text and its message stack.
fn library_error(path: &Path, action: &'static str, status: c_int) -> FitsError {
    let mut short = [0u8; 64];
    // SAFETY: the short text fits the 31 bytes that the library states (FLEN_STATUS).
    unsafe { c::ffgerr(status, short.as_mut_ptr().cast::<c_char>()) };
    let (short, mut stack) = (text(&short), take_messages());
    // The library repeats the name; the error says it once.
    let name = path.to_string_lossy();
    stack = stack
        .split("; ")
        .filter(|it| *it != name)
        .collect::<Vec<_>>()
        .join("; ");
    let message = if stack.is_empty() {
        short
    } else {
        format!("{short} ({stack})")
    };
    FitsError::Library {
        path: path.to_owned(),
        action,
        status,
        message,
    }
}

/// The name in the form the library takes literally: absolute, so that no leading blank, dash or
/// tilde is left for it to interpret.
fn literal_name(path: &Path) -> Result<CString, FitsError> {
    use std::os::unix::ffi::OsStrExt;
    let refuse = |reason: &str| FitsError::Io {
        path: path.to_owned(),
        action: "use the name",
        reason: reason.to_owned(),
    };
    let whole = std::path::absolute(path).map_err(|it| FitsError::io(path, "use the name", &it))?;
    let bytes = whole.as_os_str().as_bytes();
    if bytes.len() > MAX_PATH_BYTES {
        return Err(refuse(&format!(
            "the path has {} bytes, {MAX_PATH_BYTES} are allowed",
            bytes.len()
        )));
    }
    CString::new(bytes).map_err(|_| refuse("it contains a zero byte"))
}

impl Handle {
    fn check(&self, action: &'static str, status: c_int) -> Result<(), FitsError> {
        if status == 0 {
            Ok(())
        } else {
            Err(library_error(&self.path, action, status))
        }
    }

    fn c_text(&self, value: &str) -> Result<CString, FitsError> {
        CString::new(value)
            .map_err(|_| FitsError::unwritable(&self.path, value, "it contains a zero byte"))
    }

    /// Opens `path` read-only; errors and messages speak of `shown`.
    pub(super) fn open(path: &Path, shown: &Path) -> Result<Self, FitsError> {
        let name = literal_name(path)?;
        let (mut pointer, mut status) = (ptr::null_mut(), 0);
        // SAFETY: all pointers live over the call; the name is terminated and shorter than the
        // library's buffers.
        unsafe { c::ffdkopn(&raw mut pointer, name.as_ptr(), 0, &raw mut status) };
        Self::from_new(pointer, status, shown, "open")
    }

    /// Creates `path`, which must not exist.
    pub(super) fn create(path: &Path, shown: &Path) -> Result<Self, FitsError> {
        let name = literal_name(path)?;
        let (mut pointer, mut status) = (ptr::null_mut(), 0);
        // SAFETY: as in `open`.
        unsafe { c::ffdkinit(&raw mut pointer, name.as_ptr(), &raw mut status) };
        Self::from_new(pointer, status, shown, "create")
    }

    fn from_new(
        pointer: *mut c::fitsfile,
        status: c_int,
        shown: &Path,
        action: &'static str,
    ) -> Result<Self, FitsError> {
        // SAFETY: takes no argument and only reports how the library was built.
        if unsafe { c::fits_is_reentrant() } == 0 {
            let message = "the library was built without thread safety, which is needed".to_owned();
            return Err(FitsError::Library {
                path: shown.to_owned(),
                action,
                status,
                message,
            });
        }
        match NonNull::new(pointer) {
            Some(pointer) if status == 0 => Ok(Self {
                pointer,
                path: shown.to_owned(),
            }),
            _ => Err(library_error(shown, action, status)),
        }
    }

    /// The file as errors show it.
    pub(super) fn path(&self) -> &Path {
        &self.path
    }

    /// Closes the file and reports what closing found, such as a full disk.
    pub(super) fn close(mut self) -> Result<(), FitsError> {
        let path = std::mem::take(&mut self.path);
        let open = std::mem::ManuallyDrop::new(self);
        let mut status = 0;
        // SAFETY: the pointer is open; `ManuallyDrop` keeps it from being closed a second time.
        unsafe { c::ffclos(open.pointer.as_ptr(), &raw mut status) };
        if status == 0 {
            Ok(())
        } else {
            Err(library_error(&path, "close", status))
        }
    }

    /// Moves to HDU `number`, counted from 1; `None` past the last.
    pub(super) fn move_to(&self, number: usize) -> Result<Option<HduKind>, FitsError> {
        let (mut kind, mut status) = (0, 0);
        // SAFETY: the handle is open and the out-pointers live over the call.
        unsafe {
            c::ffmahd(
                self.pointer.as_ptr(),
                number_of(number),
                &raw mut kind,
                &raw mut status,
            );
        };
        if number > 1 && (status == END_OF_FILE || status == BAD_HDU_NUM) {
            take_messages();
            return Ok(None);
        }
        self.check("read the header", status)?;
        Ok(Some(match kind {
            0 => HduKind::Image,
            1 => HduKind::AsciiTable,
            _ if self.is_compressed_image()? => HduKind::Image,
            _ => HduKind::BinaryTable,
        }))
    }

    /// Whether the present HDU is a tile-compressed image.
    pub(super) fn is_compressed_image(&self) -> Result<bool, FitsError> {
        let mut status = 0;
        // SAFETY: the handle is open.
        let answer = unsafe { c::fits_is_compressed_image(self.pointer.as_ptr(), &raw mut status) };
        self.check("read the header", status)?;
        Ok(answer != 0)
    }

    /// BITPIX of the present image, that of the pixels when compressed.
    pub(super) fn bitpix(&self) -> Result<i32, FitsError> {
        let (mut bitpix, mut status) = (0, 0);
        // SAFETY: the handle is open and the out-pointers live over the call.
        unsafe { c::ffgidt(self.pointer.as_ptr(), &raw mut bitpix, &raw mut status) };
        self.check("read BITPIX", status)?;
        Ok(bitpix)
    }

    /// Lengths of the axes of the present image, the fastest first.
    pub(super) fn axes(&self) -> Result<Vec<i64>, FitsError> {
        let (mut naxis, mut status) = (0, 0);
        // SAFETY: the handle is open; the second call fills at most `naxis` numbers.
        unsafe { c::ffgidm(self.pointer.as_ptr(), &raw mut naxis, &raw mut status) };
        self.check("read NAXIS", status)?;
        let mut axes = vec![0i64; usize::try_from(naxis).unwrap_or(0)];
        // SAFETY: as above.
        unsafe {
            c::ffgiszll(
                self.pointer.as_ptr(),
                naxis,
                axes.as_mut_ptr(),
                &raw mut status,
            );
        };
        self.check("read the axes", status)?;
        Ok(axes)
    }

    /// Where the data of the present HDU start and end, in bytes from the start of the file.
    pub(super) fn data_range(&self) -> Result<(u64, u64), FitsError> {
        let (mut head, mut start, mut end, mut status) = (0, 0, 0, 0);
        // SAFETY: the handle is open and the out-pointers live over the call.
        unsafe {
            c::ffghadll(
                self.pointer.as_ptr(),
                &raw mut head,
                &raw mut start,
                &raw mut end,
                &raw mut status,
            );
        };
        self.check("find the data", status)?;
        Ok((start.max(0) as u64, end.max(0) as u64))
    }

    /// Header record `number` of the present HDU, counted from 1; `None` past the last.
    pub(super) fn record(&self, number: usize) -> Result<Option<String>, FitsError> {
        let (mut card, mut status) = ([0u8; 128], 0);
        // SAFETY: a card is 80 bytes and a zero.
        unsafe {
            let buffer = card.as_mut_ptr().cast::<c_char>();
            c::ffgrec(
                self.pointer.as_ptr(),
                number_of(number),
                buffer,
                &raw mut status,
            );
        };
        if status == 203 || status == END_OF_FILE {
            take_messages();
            return Ok(None);
        }
        self.check("read a header record", status)?;
        Ok(Some(text(&card)))
    }

    /// The value of a keyword of the present HDU as written, quotes included.
    pub(super) fn key_as_written(&self, name: &str) -> Result<Option<String>, FitsError> {
        let c_name = self.c_text(name)?;
        // Record 0 rewinds: without it a search starts behind the last card that was read.
        self.record(0)?;
        let (mut value, mut comment, mut status) = ([0u8; 128], [0u8; 128], 0);
        // SAFETY: value and comment are at most 71 and 73 bytes (FLEN_VALUE, FLEN_COMMENT).
        unsafe {
            c::ffgkey(
                self.pointer.as_ptr(),
                c_name.as_ptr(),
                value.as_mut_ptr().cast::<c_char>(),
                comment.as_mut_ptr().cast::<c_char>(),
                &raw mut status,
            );
        };
        if status == KEY_NO_EXIST {
            take_messages();
            return Ok(None);
        }
        self.check("read a keyword", status)?;
        Ok(Some(text(&value).trim().to_owned()))
    }

    /// A text keyword of the present HDU with its CONTINUE cards joined.
    pub(super) fn key_long_text(&self, name: &str) -> Result<Option<String>, FitsError> {
        let c_name = self.c_text(name)?;
        self.record(0)?;
        let (mut value, mut comment, mut status) = (ptr::null_mut(), [0u8; 128], 0);
        // SAFETY: on success the library allocates `value`, which is copied and given back.
        unsafe {
            c::ffgkls(
                self.pointer.as_ptr(),
                c_name.as_ptr(),
                &raw mut value,
                comment.as_mut_ptr().cast::<c_char>(),
                &raw mut status,
            );
        };
        let found = if value.is_null() {
            None
        } else {
            let mut freed = 0;
            // SAFETY: as above.
            unsafe {
                let copy = std::ffi::CStr::from_ptr(value)
                    .to_string_lossy()
                    .trim_end()
                    .to_owned();
                c::fffree(value.cast::<c_void>(), &raw mut freed);
                Some(copy)
            }
        };
        if status == KEY_NO_EXIST || status == VALUE_UNDEFINED {
            take_messages();
            return Ok(None);
        }
        self.check("read a keyword", status)?;
        Ok(found)
    }

    /// Reads pixels of the present image from `first` (0-based) on, scaled; undefined ones become
    /// NaN in floats.
    pub(super) fn read_pixels<T: Element>(
        &self,
        first: usize,
        into: &mut [T],
    ) -> Result<(), FitsError> {
        let (mut any, mut status) = (0, 0);
        let mut undefined = T::UNDEFINED;
        let null = undefined
            .as_mut()
            .map_or(ptr::null_mut(), |it| ptr::from_mut(it).cast());
        // SAFETY: the library writes exactly `into.len()` elements of the stated type, and the
        // null value is of that type too.
        unsafe {
            c::ffgpv(
                self.pointer.as_ptr(),
                T::CODE,
                count_of(first) + 1,
                count_of(into.len()),
                null,
                into.as_mut_ptr().cast::<c_void>(),
                &raw mut any,
                &raw mut status,
            );
        };
        self.check("read pixels", status)
    }

    /// The number of a column of the present table, by name in any case.
    pub(super) fn column(&self, name: &str) -> Result<Option<i32>, FitsError> {
        let name = self.c_text(name)?;
        let (mut column, mut status) = (0, 0);
        // SAFETY: the name is only read, whatever the signature says.
        unsafe {
            let template = name.as_ptr().cast_mut();
            c::ffgcno(
                self.pointer.as_ptr(),
                0,
                template,
                &raw mut column,
                &raw mut status,
            );
        };
        if status == COL_NOT_FOUND {
            take_messages();
            return Ok(None);
        }
        self.check("find a column", status)?;
        Ok(Some(column))
    }

    /// Number of rows of the present table.
    pub(super) fn rows(&self) -> Result<usize, FitsError> {
        let (mut rows, mut status) = (0, 0);
        // SAFETY: the handle is open and the out-pointers live over the call.
        unsafe { c::ffgnrwll(self.pointer.as_ptr(), &raw mut rows, &raw mut status) };
        self.check("count the rows", status)?;
        Ok(usize::try_from(rows).unwrap_or(0))
    }

    /// A numeric column of the present table; undefined values become NaN.
    pub(super) fn read_column(&self, column: i32, into: &mut [f64]) -> Result<(), FitsError> {
        if into.is_empty() {
            return Ok(());
        }
        let (mut any, mut status) = (0, 0);
        // SAFETY: the library writes exactly `into.len()` doubles.
        unsafe {
            c::ffgcvd(
                self.pointer.as_ptr(),
                column,
                1,
                1,
                count_of(into.len()),
                f64::NAN,
                into.as_mut_ptr(),
                &raw mut any,
                &raw mut status,
            );
        };
        self.check("read a column", status)
    }

    /// Appends an image HDU; `rice` compresses it without loss (integers only).
    pub(super) fn create_image(
        &self,
        bitpix: i32,
        axes: &[usize],
        rice: bool,
    ) -> Result<(), FitsError> {
        let mut status = 0;
        let mut lengths: Vec<i64> = axes.iter().map(|it| count_of(*it)).collect();
        // SAFETY: the handle is open; the library reads `axes.len()` lengths.
        unsafe {
            let kind = if rice { RICE_1 } else { 0 };
            c::fits_set_compression_type(self.pointer.as_ptr(), kind, &raw mut status);
            c::ffcrimll(
                self.pointer.as_ptr(),
                bitpix,
                number_of(axes.len()),
                lengths.as_mut_ptr(),
                &raw mut status,
            );
        };
        self.check("create an image", status)
    }

    /// Writes pixels of the present image from `first` (0-based) on.
    pub(super) fn write_pixels<T: Element>(
        &self,
        first: usize,
        from: &[T],
    ) -> Result<(), FitsError> {
        let mut status = 0;
        // SAFETY: the library only reads `from.len()` elements of the stated type.
        unsafe {
            c::ffppr(
                self.pointer.as_ptr(),
                T::CODE,
                count_of(first) + 1,
                count_of(from.len()),
                from.as_ptr().cast::<c_void>().cast_mut(),
                &raw mut status,
            );
        };
        self.check("write pixels", status)
    }

    /// Appends a binary table of `rows` rows; columns are (name, TFORM, unit).
    pub(super) fn create_table(
        &self,
        name: &str,
        rows: usize,
        columns: &[(&str, String, &str)],
    ) -> Result<(), FitsError> {
        let own = |pick: &dyn Fn(&(&str, String, &str)) -> String| {
            columns
                .iter()
                .map(|it| self.c_text(&pick(it)))
                .collect::<Result<Vec<_>, _>>()
        };
        let names = own(&|it| it.0.to_owned())?;
        let forms = own(&|it| it.1.clone())?;
        let units = own(&|it| it.2.to_owned())?;
        let pointers = |it: &[CString]| -> Vec<*mut c_char> {
            it.iter().map(|text| text.as_ptr().cast_mut()).collect()
        };
        let (mut names_p, mut forms_p, mut units_p) =
            (pointers(&names), pointers(&forms), pointers(&units));
        let (name, mut status) = (self.c_text(name)?, 0);
        // SAFETY: three arrays of `columns.len()` terminated texts that outlive the call and are
        // only read.
        unsafe {
            c::ffcrtb(
                self.pointer.as_ptr(),
                BINARY_TBL,
                count_of(rows),
                number_of(columns.len()),
                names_p.as_mut_ptr(),
                forms_p.as_mut_ptr(),
                units_p.as_mut_ptr(),
                name.as_ptr(),
                &raw mut status,
            );
        };
        self.check("create a table", status)
    }

    /// Writes a numeric column of the present table, counted from 1.
    pub(super) fn write_column<T: Element>(
        &self,
        column: usize,
        from: &[T],
    ) -> Result<(), FitsError> {
        let mut status = 0;
        // SAFETY: the library only reads `from.len()` elements of the stated type.
        unsafe {
            c::ffpcl(
                self.pointer.as_ptr(),
                T::CODE,
                number_of(column),
                1,
                1,
                count_of(from.len()),
                from.as_ptr().cast::<c_void>().cast_mut(),
                &raw mut status,
            );
        };
        self.check("write a column", status)
    }

    /// Writes a text column of the present table, counted from 1.
    pub(super) fn write_text_column(
        &self,
        column: usize,
        from: &[String],
    ) -> Result<(), FitsError> {
        let texts = from
            .iter()
            .map(|it| self.c_text(it))
            .collect::<Result<Vec<_>, _>>()?;
        let mut pointers: Vec<*mut c_char> =
            texts.iter().map(|it| it.as_ptr().cast_mut()).collect();
        let mut status = 0;
        // SAFETY: an array of `from.len()` terminated texts that outlive the call.
        unsafe {
            c::ffpcls(
                self.pointer.as_ptr(),
                number_of(column),
                1,
                1,
                count_of(from.len()),
                pointers.as_mut_ptr(),
                &raw mut status,
            );
        };
        self.check("write a column", status)
    }

    /// Appends one header card, complete as written.
    pub(super) fn write_card(&self, card: &str) -> Result<(), FitsError> {
        let (card, mut status) = (self.c_text(card)?, 0);
        // SAFETY: the card is terminated and only read.
        unsafe { c::ffprec(self.pointer.as_ptr(), card.as_ptr(), &raw mut status) };
        self.check("write a header card", status)
    }

    /// Deletes a keyword of the present HDU if it is there.
    pub(super) fn delete_key(&self, name: &str) -> Result<(), FitsError> {
        let (name, mut status) = (self.c_text(name)?, 0);
        // SAFETY: the name is terminated and only read.
        unsafe { c::ffdkey(self.pointer.as_ptr(), name.as_ptr(), &raw mut status) };
        if status == KEY_NO_EXIST {
            take_messages();
            return Ok(());
        }
        self.check("delete a header card", status)
    }

    /// Sets CHECKSUM and DATASUM of the present HDU. Their comments carry no time of day, so that
    /// the same content gives the same bytes.
    pub(super) fn write_checksums(&self) -> Result<(), FitsError> {
        let fptr = self.pointer.as_ptr();
        let (mut data_sum, mut hdu_sum): (c_ulong, c_ulong) = (0, 0);
        let (mut code, mut status) = ([0 as c_char; 32], 0);
        // SAFETY: all texts are terminated; the encoded sum is 16 characters and a zero.
        unsafe {
            c::ffpcks(fptr, &raw mut status);
            c::ffgcks(fptr, &raw mut data_sum, &raw mut hdu_sum, &raw mut status);
        }
        self.check("compute the checksums", status)?;
        let data_text = self.c_text(&data_sum.to_string())?;
        // SAFETY: as above.
        unsafe {
            let note = c"data unit checksum".as_ptr();
            c::ffmkys(
                fptr,
                c"DATASUM".as_ptr(),
                data_text.as_ptr(),
                note,
                &raw mut status,
            );
            let (zeros, note) = (c"0000000000000000".as_ptr(), c"HDU checksum".as_ptr());
            c::ffmkys(fptr, c"CHECKSUM".as_ptr(), zeros, note, &raw mut status);
            c::ffgcks(fptr, &raw mut data_sum, &raw mut hdu_sum, &raw mut status);
            c::ffesum(hdu_sum, 1, code.as_mut_ptr());
            c::ffmkys(
                fptr,
                c"CHECKSUM".as_ptr(),
                code.as_ptr(),
                note,
                &raw mut status,
            );
        }
        self.check("write the checksums", status)
    }

    /// Whether (data, whole HDU) agree with their checksums; `None` where there is no checksum.
    pub(super) fn verify_checksums(&self) -> Result<(Option<bool>, Option<bool>), FitsError> {
        let (mut data, mut hdu, mut status) = (0, 0, 0);
        // SAFETY: the handle is open and the out-pointers live over the call.
        unsafe {
            c::ffvcks(
                self.pointer.as_ptr(),
                &raw mut data,
                &raw mut hdu,
                &raw mut status,
            );
        };
        self.check("verify the checksums", status)?;
        let verdict = |it: c_int| if it == 0 { None } else { Some(it == 1) };
        Ok((verdict(data), verdict(hdu)))
    }
}
