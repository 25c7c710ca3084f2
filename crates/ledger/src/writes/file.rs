//! A file that appears when it is finished.

use super::faults::Operation;
use super::{Writes, leftover, parent_of, wrap};
use crate::error::WriteError;
use std::fs::{self, File};
use std::io::{self, Write};
use std::path::{Path, PathBuf};

/// A file being written, under a temporary name. Dropped unfinished, it leaves nothing.
#[derive(Debug)]
pub struct NewFile {
    writes: Writes,
    file: File,
    temporary: PathBuf,
    target: PathBuf,
    finished: bool,
}

impl NewFile {
    pub(super) fn create(writes: &Writes, target: &Path, folder: &Path) -> Result<Self, WriteError> {
        let temporary = folder.join(leftover::name());
        let file = writes
            .gate(Operation::Create, &temporary)
            .and_then(|()| File::create_new(&temporary))
            .map_err(wrap("create a temporary file for", target))?;
        Ok(NewFile { writes: writes.clone(), file, temporary, target: target.to_owned(), finished: false })
    }

    /// The name that the file will have.
    pub fn target(&self) -> &Path {
        &self.target
    }

    /// Forces the file to the disk and gives it its name, replacing a file of that name in a single step.
    ///
    /// # Errors
    /// Where that fails; what stood there before is then untouched, unless forcing the folder to the disk was the last and
    /// only thing to fail.
    pub fn finish(mut self) -> Result<(), WriteError> {
        self.writes.sync(&self.file, &self.target)?;
        self.writes
            .gate(Operation::Rename, &self.target)
            .and_then(|()| fs::rename(&self.temporary, &self.target))
            .map_err(wrap("rename a finished file to", &self.target))?;
        self.finished = true;
        self.writes.sync_folder(&parent_of(&self.target))
    }
}

impl Write for NewFile {
    fn write(&mut self, bytes: &[u8]) -> io::Result<usize> {
        self.writes.write(&mut self.file, &self.target, bytes, Operation::Write)?;
        Ok(bytes.len())
    }

    fn flush(&mut self) -> io::Result<()> {
        self.file.flush()
    }
}

impl Drop for NewFile {
    fn drop(&mut self) {
        if !self.finished {
            let _ = self.writes.remove_file(&self.temporary);
        }
    }
}
