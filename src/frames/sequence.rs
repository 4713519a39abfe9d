//! Many files as one list of frames, and the reader that walks it.

use std::path::PathBuf;

use ndarray::Array2;

use super::error::FitsError;
use super::image::ImageFile;

/// One frame of a [`Sequence`].
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub struct FrameRef {
    /// Index of its file in [`Sequence::files`].
    pub file: usize,
    /// Plane in that file.
    pub plane: usize,
}

/// The frames of several files, all of one size.
#[derive(Clone, Debug, PartialEq)]
pub struct Sequence {
    /// The files, as they were given.
    pub files: Vec<PathBuf>,
    /// Every frame, in the order of files and planes.
    pub frames: Vec<FrameRef>,
    /// Columns of each frame.
    pub width: usize,
    /// Rows of each frame.
    pub height: usize,
    /// Files that could not be opened, with the reason; no frame of theirs is listed.
    pub unreadable: Vec<(usize, FitsError)>,
}

/// Lists the frames of `files`; only headers are read.
///
/// # Errors
///
/// [`FitsError::SizeMismatch`] when two files differ in size; the first file's error when none can
/// be opened; [`FitsError::NoImage`] when there is no file at all.
pub fn list(files: &[PathBuf]) -> Result<Sequence, FitsError> {
    let mut sequence = Sequence {
        files: files.to_vec(),
        frames: Vec::new(),
        width: 0,
        height: 0,
        unreadable: Vec::new(),
    };
    let mut first: Option<usize> = None;
    for (file, path) in files.iter().enumerate() {
        let image = match ImageFile::open(path) {
            Ok(image) => image,
            Err(error) => {
                sequence.unreadable.push((file, error));
                continue;
            }
        };
        let (width, height) = (image.width(), image.height());
        match first {
            None => {
                first = Some(file);
                (sequence.width, sequence.height) = (width, height);
            }
            Some(first) if (width, height) != (sequence.width, sequence.height) => {
                return Err(FitsError::SizeMismatch {
                    path: path.clone(),
                    width,
                    height,
                    first: files[first].clone(),
                    first_width: sequence.width,
                    first_height: sequence.height,
                });
            }
            Some(_) => {}
        }
        sequence
            .frames
            .extend((0..image.planes()).map(|plane| FrameRef { file, plane }));
    }
    match (first, sequence.unreadable.first()) {
        (Some(_), _) => Ok(sequence),
        (None, Some((_, error))) => Err(error.clone()),
        (None, None) => Err(FitsError::NoImage {
            path: PathBuf::new(),
            found: "no file is given".to_owned(),
        }),
    }
}

/// Reads frames of a sequence and keeps the last file open. Each thread has its own.
#[derive(Debug, Default)]
pub struct Reader {
    open: Option<(usize, ImageFile)>,
}

impl Reader {
    /// A reader with no file open yet.
    pub fn new() -> Self {
        Self::default()
    }

    /// The file of `frame`, opened if it is not yet.
    ///
    /// # Errors
    ///
    /// As [`ImageFile::open`].
    pub fn file<'a>(
        &'a mut self,
        sequence: &Sequence,
        frame: FrameRef,
    ) -> Result<&'a mut ImageFile, FitsError> {
        let kept = self.open.take().filter(|(file, _)| *file == frame.file);
        let image = match kept {
            Some((_, image)) => image,
            None => ImageFile::open(&sequence.files[frame.file])?,
        };
        if (image.width(), image.height()) != (sequence.width, sequence.height) {
            // The file was replaced since it was listed.
            return Err(FitsError::SizeMismatch {
                path: image.path().to_owned(),
                width: image.width(),
                height: image.height(),
                first: sequence.files[0].clone(),
                first_width: sequence.width,
                first_height: sequence.height,
            });
        }
        Ok(&mut self.open.insert((frame.file, image)).1)
    }

    /// Reads one frame into a buffer that is used again.
    ///
    /// # Errors
    ///
    /// As [`ImageFile::open`] and [`ImageFile::read_plane`].
    pub fn read(
        &mut self,
        sequence: &Sequence,
        frame: FrameRef,
        into: &mut Array2<f32>,
    ) -> Result<(), FitsError> {
        self.file(sequence, frame)?.read_plane(frame.plane, into)
    }
}
