//! The folder of a made session: filled beside its place, then put there file by file.

use std::fs;
use std::path::{Path, PathBuf};

use tempfile::TempDir;

use super::SynthError;
use crate::frames::write_whole;

/// The file whose presence makes a folder a session.
const SESSION: &str = "session.toml";
/// The file by which a made session is known.
const TRUTH: &str = "truth.json";

/// A folder that is being filled. Dropped before [`publish`](Folder::publish), it leaves what was
/// there before.
#[derive(Debug)]
pub(super) struct Folder {
    path: PathBuf,
    staging: TempDir,
    is_new: bool,
    is_published: bool,
}

impl Folder {
    /// Opens or creates a folder; refuses one with a session of another origin.
    pub(super) fn open(folder: &Path) -> Result<Self, SynthError> {
        if folder.join(SESSION).exists() && !folder.join(TRUTH).exists() {
            return Err(SynthError::NotOurs {
                folder: folder.to_owned(),
            });
        }
        let is_new = !folder.exists();
        fs::create_dir_all(folder).map_err(SynthError::io(folder, "create the folder"))?;
        let staging = tempfile::Builder::new()
            .prefix(".part-")
            .tempdir_in(folder)
            .map_err(SynthError::io(folder, "write into the folder"))?;
        Ok(Self {
            path: folder.to_owned(),
            staging,
            is_new,
            is_published: false,
        })
    }

    /// Where a file grows.
    pub(super) fn staged(&self, name: &str) -> PathBuf {
        self.staging.path().join(name)
    }

    /// Writes a small file.
    pub(super) fn stage(&self, name: &str, content: &str) -> Result<(), SynthError> {
        Ok(write_whole(&self.staged(name), content.as_bytes())?)
    }

    /// Takes away the session that was made here before and puts the new one in its place.
    pub(super) fn publish(mut self) -> Result<(), SynthError> {
        // Without its session file the old session is gone before its frames change.
        for name in self.made_before()? {
            let path = self.path.join(name);
            fs::remove_file(&path).map_err(SynthError::io(&path, "remove the old file"))?;
        }
        for name in self.names(self.staging.path())? {
            if name != SESSION {
                self.place(&name)?;
            }
        }
        self.place(SESSION)?;
        self.is_published = true;
        Ok(())
    }

    fn place(&self, name: &str) -> Result<(), SynthError> {
        let path = self.path.join(name);
        fs::rename(self.staged(name), &path).map_err(SynthError::io(&path, "put in place"))
    }

    /// Files of a session made here, the session file first; none where there is no truth.
    fn made_before(&self) -> Result<Vec<String>, SynthError> {
        if !self.path.join(TRUTH).exists() {
            return Ok(Vec::new());
        }
        let is_cube = |it: &str| {
            let number = ["burst_", "drift_", "scan_"]
                .iter()
                .find_map(|kind| it.strip_prefix(kind))
                .and_then(|it| it.strip_suffix(".fits"));
            number.is_some_and(|it| it.len() >= 3 && it.bytes().all(|it| it.is_ascii_digit()))
        };
        let mut names = self.names(&self.path)?;
        names.retain(|it| it == SESSION || is_cube(it));
        names.sort_by_key(|it| it != SESSION);
        Ok(names)
    }

    fn names(&self, of: &Path) -> Result<Vec<String>, SynthError> {
        let entries = fs::read_dir(of).map_err(SynthError::io(of, "list the folder"))?;
        let mut names = Vec::new();
        for entry in entries {
            let entry = entry.map_err(SynthError::io(&self.path, "list the folder"))?;
            names.extend(entry.file_name().into_string());
        }
        names.sort();
        Ok(names)
    }
}

impl Drop for Folder {
    fn drop(&mut self) {
        if self.is_new && !self.is_published {
            // Leaves no empty folder behind; where it is not empty, the system refuses.
            let _ = fs::remove_dir_all(self.staging.path());
            let _ = fs::remove_dir(&self.path);
        }
    }
}
