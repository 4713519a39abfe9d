//! What a path leads to, settled before the FITS library sees it.
//!
//! Only a regular file whose headers make sense as FITS is handed on. A file packed as a whole with gzip
//! is unpacked to a temporary file first: the library would unpack it into memory, however large.

use std::fs::File;
use std::io::{self, BufReader, BufWriter, Read, Write};
use std::path::Path;

use tempfile::TempPath;

use super::error::FitsError;
use super::raw::Handle;
use super::survey::{self, Survey};

/// A gzip file that holds more than this is refused.
const MAX_UNPACKED_BYTES: u64 = 2 << 30;

/// A FITS file opened for reading.
#[derive(Debug)]
pub(super) struct Source {
    // Declared first: it closes before the file under it goes.
    pub(super) handle: Handle,
    /// Length of the FITS file, in bytes.
    pub(super) bytes: u64,
    /// HDUs that are safe to open.
    pub(super) survey: Survey,
    _unpacked: Option<TempPath>,
}

/// Opens `path` read-only.
pub(super) fn open(path: &Path) -> Result<Source, FitsError> {
    let io_error = |it: io::Error| FitsError::io(path, "open", &it);
    let meta = std::fs::metadata(path).map_err(io_error)?;
    if !meta.is_file() {
        return Err(io_error(io::Error::other("it is not a regular file")));
    }
    let start = first_bytes(path).map_err(io_error)?;
    let unpacked = if start.starts_with(&[0x1f, 0x8b]) {
        Some(unpack(path)?)
    } else {
        None
    };
    let plain = unpacked.as_deref().unwrap_or(path);
    let mut file = File::open(plain).map_err(io_error)?;
    let bytes = file.metadata().map_err(io_error)?.len();
    must_be_fits(path, &first_bytes(plain).map_err(io_error)?)?;
    let survey = survey::survey(&mut file, bytes).map_err(io_error)?;
    if survey.hdus == 0 {
        let found = survey.stopped.unwrap_or_default();
        return Err(FitsError::Damaged {
            path: path.to_owned(),
            found,
        });
    }
    Ok(Source {
        handle: Handle::open(plain, path)?,
        bytes,
        survey,
        _unpacked: unpacked,
    })
}

fn first_bytes(path: &Path) -> io::Result<Vec<u8>> {
    let mut start = Vec::new();
    File::open(path)?.take(9).read_to_end(&mut start)?;
    Ok(start)
}

fn must_be_fits(path: &Path, start: &[u8]) -> Result<(), FitsError> {
    if start == b"SIMPLE  =" {
        return Ok(());
    }
    let found = if start.is_empty() {
        "nothing".to_owned()
    } else {
        format!("\"{}\"", start.escape_ascii())
    };
    Err(FitsError::NotFits {
        path: path.to_owned(),
        found,
    })
}

fn unpack(path: &Path) -> Result<TempPath, FitsError> {
    let copy = || -> io::Result<TempPath> {
        let mut packed = flate2::bufread::MultiGzDecoder::new(BufReader::new(File::open(path)?));
        let (file, unpacked) = tempfile::NamedTempFile::new()?.into_parts();
        let mut out = BufWriter::with_capacity(1 << 18, file);
        let copied = io::copy(&mut packed.by_ref().take(MAX_UNPACKED_BYTES + 1), &mut out)?;
        if copied > MAX_UNPACKED_BYTES {
            let limit = format!("more than {MAX_UNPACKED_BYTES} bytes inside, unpack it by hand");
            return Err(io::Error::other(limit));
        }
        out.flush()?;
        Ok(unpacked)
    };
    copy().map_err(|it| FitsError::io(path, "unpack the gzip file", &it))
}
