//! A file that grows by whole lines.

use super::faults::Operation;
use super::{Writes, parent_of, wrap};
use crate::error::WriteError;
use std::fs::File;
use std::io;
use std::os::unix::fs::MetadataExt;
use std::path::{Path, PathBuf};

/// A file that lines are appended to, each by a single write. One process writes to it; others may read it at any time, and
/// may replace it by a shorter one.
#[derive(Debug)]
pub struct LineFile {
    writes: Writes,
    file: File,
    path: PathBuf,
    /// Whether the file may end in a torn line, which the next one must not join.
    torn: bool,
}

impl LineFile {
    pub(super) fn open(writes: &Writes, path: &Path) -> Result<Self, WriteError> {
        let file = writes
            .gate(Operation::Create, path)
            .and_then(|()| File::options().append(true).create(true).open(path))
            .map_err(wrap("open for appending", path))?;
        writes.sync_folder(&parent_of(path))?;
        Ok(LineFile { writes: writes.clone(), file, path: path.to_owned(), torn: false })
    }

    /// Appends a line and forces it to the disk. `line` has no line feed.
    ///
    /// # Errors
    /// Where it cannot be written. A part of it may then be in the file, as a line of its own.
    pub fn append(&mut self, line: &str) -> Result<(), WriteError> {
        if !self.is_current() {
            *self = LineFile::open(&self.writes, &self.path)?;
        }
        let text = format!("{}{line}\n", if self.torn { "\n" } else { "" });
        let before = self.file.metadata().map(|m| m.len());
        match self.writes.write(&mut self.file, &self.path, text.as_bytes(), Operation::Append) {
            Ok(()) => {
                self.torn = false;
                self.writes.sync(&self.file, &self.path)
            }
            Err(error) => {
                self.torn = !before.is_ok_and(|length| self.cut(length).is_ok());
                Err(wrap("append to", &self.path)(error))
            }
        }
    }

    fn cut(&self, length: u64) -> io::Result<()> {
        self.writes.gate(Operation::Remove, &self.path)?;
        self.file.set_len(length)
    }

    /// Whether the name still stands for the open file.
    fn is_current(&self) -> bool {
        match (self.file.metadata(), std::fs::metadata(&self.path)) {
            (Ok(open), Ok(named)) => open.ino() == named.ino() && open.dev() == named.dev(),
            _ => false,
        }
    }
}
