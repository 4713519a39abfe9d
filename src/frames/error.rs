//! Why a file of frames could not be read or written.

use std::path::{Path, PathBuf};

/// Anything wrong with one input or output file; each variant names the file.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum FitsError {
    /// The operating system refused.
    #[error("{}: cannot {action}: {reason}", path.display())]
    Io {
        /// The file.
        path: PathBuf,
        /// What was tried.
        action: &'static str,
        /// What the system answered.
        reason: String,
    },
    /// The file is of another kind.
    #[error(
        "{}: not a FITS file: it starts with {found}, a FITS file starts with \"SIMPLE  =\"",
        path.display()
    )]
    NotFits {
        /// The file.
        path: PathBuf,
        /// Its first bytes, made printable.
        found: String,
    },
    /// A header that contradicts itself or the standard.
    #[error("{}: damaged: {found}", path.display())]
    Damaged {
        /// The file.
        path: PathBuf,
        /// Where and what.
        found: String,
    },
    /// The FITS library gave up.
    #[error("{}: cannot {action}: FITS library status {status}, {message}", path.display())]
    Library {
        /// The file.
        path: PathBuf,
        /// What was tried.
        action: &'static str,
        /// Status number of the library.
        status: i32,
        /// The library's own messages, oldest first.
        message: String,
    },
    /// There is no image of pixels in the file, or not in the place asked for.
    #[error("{}: no image to read: {found}; two axes, or three for a cube, are needed", path.display())]
    NoImage {
        /// The file.
        path: PathBuf,
        /// What is there instead.
        found: String,
    },
    /// The header promises more data than the file holds or than is allowed.
    #[error(
        "{}: damaged or incomplete: the header announces {announced} {unit} of {what}, {allowed} at most can be there",
        path.display()
    )]
    TooLarge {
        /// The file.
        path: PathBuf,
        /// What was counted.
        what: &'static str,
        /// As the header says.
        announced: u128,
        /// As the length of the file or the limit says.
        allowed: u128,
        /// Unit of both.
        unit: &'static str,
    },
    /// A plane or row that the image does not have.
    #[error("{}: {what} {found} asked for, the image has 0..{count}", path.display())]
    OutOfRange {
        /// The file.
        path: PathBuf,
        /// `plane` or `row`.
        what: &'static str,
        /// Index asked for.
        found: usize,
        /// Number there are.
        count: usize,
    },
    /// A header keyword whose value cannot be used.
    #[error("{}: HDU {hdu}: keyword {name} is {found}, {needed} is needed", path.display())]
    Keyword {
        /// The file.
        path: PathBuf,
        /// The HDU that was asked, the primary one being 0.
        hdu: usize,
        /// Name of the keyword.
        name: Box<str>,
        /// Its value as written.
        found: String,
        /// What would have been right.
        needed: &'static str,
    },
    /// The header does not say when the frames were taken.
    #[error("{}: no time of the frames: {looked_for}", path.display())]
    NoTime {
        /// The file.
        path: PathBuf,
        /// What was looked for and not found.
        looked_for: String,
    },
    /// Two files that belong together differ in size.
    #[error(
        "{}: frames of {width} x {height} pixels, those of {} have {first_width} x {first_height}",
        path.display(), first.display()
    )]
    SizeMismatch {
        /// The file.
        path: PathBuf,
        /// Its columns.
        width: usize,
        /// Its rows.
        height: usize,
        /// The file compared with.
        first: PathBuf,
        /// Columns of that.
        first_width: usize,
        /// Rows of that.
        first_height: usize,
    },
    /// Something that cannot be written as asked.
    #[error("{}: cannot write {what}: {reason}", path.display())]
    Unwritable {
        /// The file.
        path: PathBuf,
        /// Card, column or image, by its name.
        what: String,
        /// The rule it breaks.
        reason: String,
    },
}

impl FitsError {
    pub(super) fn io(path: &Path, action: &'static str, reason: &std::io::Error) -> Self {
        Self::Io {
            path: path.to_owned(),
            action,
            reason: reason.to_string(),
        }
    }

    pub(super) fn unwritable(path: &Path, what: &str, reason: impl Into<String>) -> Self {
        Self::Unwritable {
            path: path.to_owned(),
            what: what.to_owned(),
            reason: reason.into(),
        }
    }

    /// The file this is about.
    pub fn path(&self) -> &Path {
        match self {
            Self::Io { path, .. }
            | Self::NotFits { path, .. }
            | Self::Damaged { path, .. }
            | Self::Library { path, .. }
            | Self::NoImage { path, .. }
            | Self::TooLarge { path, .. }
            | Self::OutOfRange { path, .. }
            | Self::Keyword { path, .. }
            | Self::NoTime { path, .. }
            | Self::SizeMismatch { path, .. }
            | Self::Unwritable { path, .. } => path,
        }
    }

    /// What to do about it, where something can be done.
    pub fn cure(&self) -> Option<&'static str> {
        Some(match self {
            Self::Io { action, .. } if *action == "open" || *action == "read" => {
                "see that the path is right and the file may be read"
            }
            Self::Io { .. } | Self::Unwritable { .. } => return None,
            Self::NotFits { .. } => "name FITS files only, and convert others to FITS first",
            Self::Damaged { .. } | Self::Library { .. } | Self::TooLarge { .. } => {
                "copy the file again from where it was made, or leave it out"
            }
            Self::NoImage { .. } => {
                "give a file that holds an image of the disk, or a cube of them"
            }
            Self::OutOfRange { .. } => "planes and rows are counted from 0",
            Self::Keyword { .. } => {
                "correct the keyword, or name the right one under [headers] in the session file"
            }
            Self::NoTime { .. } => {
                "name the keyword that holds the time under [headers] in the session file, or write DATE-BEG and XPOSURE into the header"
            }
            Self::SizeMismatch { .. } => {
                "put frames of another size into a [[sequence]] of their own"
            }
        })
    }

    /// The sentence without the file, for a place that names it already.
    pub fn without_path(&self) -> String {
        let whole = self.to_string();
        let path = format!("{}: ", self.path().display());
        whole
            .strip_prefix(&path)
            .map_or(whole.clone(), str::to_owned)
    }
}
