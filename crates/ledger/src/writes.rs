//! The one way to the disk. Every change of this crate, and of others to the folder of results, goes through [`Writes`]:
//! what is complete appears under its name by a rename within one file system, after it was forced to the disk, so that a
//! reader sees all of a file or none.

pub(crate) mod faults;
mod file;
mod leftover;
mod line;

use crate::error::WriteError;
use faults::{Faults, Mishap, Operation};
pub use file::NewFile;
pub use line::LineFile;
use std::fs::{self, File};
use std::io::{self, Write as _};
use std::path::{Path, PathBuf};
use std::sync::Arc;

/// Makes changes to the disk. Cheap to clone.
#[derive(Clone, Debug)]
pub struct Writes {
    sync: bool,
    faults: Option<Arc<dyn Faults>>,
}

impl Default for Writes {
    fn default() -> Self {
        Self::new()
    }
}

impl Writes {
    /// Changes that survive a power cut.
    pub fn new() -> Self {
        Writes { sync: true, faults: None }
    }

    /// Changes that survive a kill, but not a power cut: for scratch folders and measurements of speed.
    #[must_use]
    pub fn without_sync(mut self) -> Self {
        self.sync = false;
        self
    }

    /// Changes that fail when they are told to: for tests.
    #[must_use]
    pub fn with_faults(mut self, faults: Arc<dyn Faults>) -> Self {
        self.faults = Some(faults);
        self
    }

    /// Makes a folder and those above it where they are missing.
    ///
    /// # Errors
    /// Where a folder cannot be made.
    pub fn make_folder(&self, path: &Path) -> Result<(), WriteError> {
        if path.is_dir() {
            return Ok(());
        }
        let parent = path.parent().filter(|p| !p.as_os_str().is_empty());
        if let Some(parent) = parent {
            self.make_folder(parent)?;
        }
        match self.gate(Operation::MakeFolder, path).and_then(|()| fs::create_dir(path)) {
            Err(error) if error.kind() == io::ErrorKind::AlreadyExists && path.is_dir() => Ok(()),
            other => other,
        }
        .map_err(wrap("make the folder", path))?;
        self.sync_folder(parent.unwrap_or(Path::new(".")))
    }

    /// A file that appears under its name when it is finished; until then it stands hidden beside it.
    ///
    /// # Errors
    /// Where the file cannot be made.
    pub fn new_file(&self, target: &Path) -> Result<NewFile, WriteError> {
        self.new_file_via(target, &parent_of(target))
    }

    /// A file that appears under its name when it is finished; until then it stands in a folder of the same file system.
    ///
    /// # Errors
    /// Where the file cannot be made.
    pub fn new_file_via(&self, target: &Path, temporary: &Path) -> Result<NewFile, WriteError> {
        NewFile::create(self, target, temporary)
    }

    /// Writes a whole file, replacing one of that name in a single step.
    ///
    /// # Errors
    /// Where it cannot be written; what stood there before is then untouched.
    pub fn write_file(&self, target: &Path, bytes: &[u8]) -> Result<(), WriteError> {
        self.write_file_via(target, &parent_of(target), bytes)
    }

    /// As [`Writes::write_file`], with the temporary file in a given folder of the same file system.
    ///
    /// # Errors
    /// Where it cannot be written; what stood there before is then untouched.
    pub fn write_file_via(&self, target: &Path, temporary: &Path, bytes: &[u8]) -> Result<(), WriteError> {
        let mut file = self.new_file_via(target, temporary)?;
        file.write_all(bytes).map_err(wrap("write", target))?;
        file.finish()
    }

    /// Copies a file, replacing one of that name in a single step.
    ///
    /// # Errors
    /// Where it cannot be read or written.
    pub fn copy_file(&self, from: &Path, to: &Path) -> Result<(), WriteError> {
        let mut source = File::open(from).map_err(wrap("open, to copy it,", from))?;
        let mut file = self.new_file(to)?;
        io::copy(&mut source, &mut file).map_err(wrap("copy to", to))?;
        file.finish()
    }

    /// Writes a file that must not exist yet: the name appears with its content, and to one caller only. Not forced to the
    /// disk. Returns whether the name was free.
    ///
    /// # Errors
    /// Where it cannot be written.
    pub(crate) fn claim_file(&self, target: &Path, temporary: &Path, bytes: &[u8]) -> Result<bool, WriteError> {
        let scratch = temporary.join(leftover::name());
        let outcome = self.put(&scratch, bytes, false).and_then(|()| {
            match self.gate(Operation::Link, target).and_then(|()| fs::hard_link(&scratch, target)) {
                Ok(()) => Ok(true),
                Err(error) if error.kind() == io::ErrorKind::AlreadyExists => Ok(false),
                Err(error) => Err(wrap("write", target)(error)),
            }
        });
        let _ = self.gate(Operation::Remove, &scratch).and_then(|()| fs::remove_file(&scratch));
        outcome
    }

    /// Waits for the exclusive use of a file that serves as a lock, until what is returned is dropped. On a file system
    /// without locks there is no waiting.
    pub(crate) fn lock(&self, path: &Path) -> Result<File, WriteError> {
        let file = self
            .gate(Operation::Create, path)
            .and_then(|()| File::options().append(true).create(true).open(path))
            .map_err(wrap("open the lock", path))?;
        match file.lock() {
            Err(error) if error.kind() != io::ErrorKind::Unsupported => Err(wrap("lock", path)(error)),
            _ => Ok(file),
        }
    }

    /// Sets a file's time to now.
    pub(crate) fn touch(&self, path: &Path) -> Result<(), WriteError> {
        self.gate(Operation::Write, path)
            .and_then(|()| File::options().append(true).open(path))
            .and_then(|file| file.set_modified(std::time::SystemTime::now()))
            .map_err(wrap("touch", path))
    }

    /// Publishes a folder of files under a name that appears complete or not at all. Returns whether it was this call that
    /// published it: false means that a folder with files was there, which is left as it is.
    ///
    /// # Errors
    /// Where it cannot be written; nothing has then appeared under the name.
    pub fn publish_folder(
        &self,
        target: &Path,
        temporary: &Path,
        files: &[(String, Vec<u8>)],
    ) -> Result<bool, WriteError> {
        let scratch = temporary.join(leftover::name());
        let outcome = self.build_and_rename(target, &scratch, files);
        if !matches!(outcome, Ok(true)) {
            // What could not be published is of no use; what cannot be removed now goes when the ledger is next opened.
            let _ = self.remove_folder(&scratch);
        }
        outcome
    }

    fn build_and_rename(&self, target: &Path, scratch: &Path, files: &[(String, Vec<u8>)]) -> Result<bool, WriteError> {
        self.gate(Operation::MakeFolder, scratch)
            .and_then(|()| fs::create_dir(scratch))
            .map_err(wrap("make the folder", scratch))?;
        for (name, bytes) in files {
            self.put(&scratch.join(name), bytes, self.sync)?;
        }
        self.sync_folder(scratch)?;
        let parent = parent_of(target);
        self.make_folder(&parent)?;
        match self.gate(Operation::Rename, target).and_then(|()| fs::rename(scratch, target)) {
            Ok(()) => {}
            Err(error) if matches!(error.kind(), io::ErrorKind::DirectoryNotEmpty | io::ErrorKind::AlreadyExists) => {
                return Ok(false);
            }
            Err(error) => return Err(wrap("rename a finished folder to", target)(error)),
        }
        self.sync_folder(&parent)?;
        Ok(true)
    }

    /// Opens a file that lines are appended to, making it where it is missing.
    ///
    /// # Errors
    /// Where it cannot be opened.
    pub fn line_file(&self, path: &Path) -> Result<LineFile, WriteError> {
        LineFile::open(self, path)
    }

    /// Removes a file; one that is not there is no error.
    ///
    /// # Errors
    /// Where it cannot be removed.
    pub fn remove_file(&self, path: &Path) -> Result<(), WriteError> {
        absent_is_fine(self.gate(Operation::Remove, path).and_then(|()| fs::remove_file(path)))
            .map_err(wrap("remove", path))
    }

    /// Removes a folder and what is in it; one that is not there is no error.
    ///
    /// # Errors
    /// Where it cannot be removed.
    pub fn remove_folder(&self, path: &Path) -> Result<(), WriteError> {
        absent_is_fine(self.gate(Operation::Remove, path).and_then(|()| fs::remove_dir_all(path)))
            .map_err(wrap("remove the folder", path))
    }

    /// Renames a file or folder within a file system, replacing a file of that name.
    ///
    /// # Errors
    /// Where it cannot be renamed.
    pub fn rename(&self, from: &Path, to: &Path) -> Result<(), WriteError> {
        self.gate(Operation::Rename, to).and_then(|()| fs::rename(from, to)).map_err(wrap("rename to", to))?;
        self.sync_folder(&parent_of(to))
    }

    /// Removes what dead processes left unfinished in a folder: temporary files and folders whose process is dead on this
    /// host, or which are of another host and older than a day. What cannot be removed stays.
    pub fn clear_leftovers(&self, folder: &Path) {
        for path in leftover::of_the_dead(folder) {
            let _ = if path.is_dir() { self.remove_folder(&path) } else { self.remove_file(&path) };
        }
    }

    /// A name in a folder under which something can be built or set aside; [`Writes::clear_leftovers`] knows it.
    pub(crate) fn scratch(&self, temporary: &Path) -> PathBuf {
        temporary.join(leftover::name())
    }

    /// Writes a new file under its final name, inside a folder that has not appeared yet.
    fn put(&self, path: &Path, bytes: &[u8], sync: bool) -> Result<(), WriteError> {
        let mut file =
            self.gate(Operation::Create, path).and_then(|()| File::create_new(path)).map_err(wrap("create", path))?;
        self.write(&mut file, path, bytes, Operation::Write).map_err(wrap("write", path))?;
        if sync { self.sync(&file, path) } else { Ok(()) }
    }

    /// Writes all bytes; on a mishap some of them.
    fn write(&self, file: &mut File, path: &Path, bytes: &[u8], operation: Operation) -> io::Result<()> {
        match self.mishap(operation, path) {
            None => file.write_all(bytes),
            Some(Mishap::Error(error)) => Err(error),
            Some(Mishap::Short(length)) => {
                file.write_all(&bytes[..length.min(bytes.len())])?;
                Err(io::ErrorKind::StorageFull.into())
            }
        }
    }

    fn sync(&self, file: &File, path: &Path) -> Result<(), WriteError> {
        if !self.sync {
            return Ok(());
        }
        self.gate(Operation::Sync, path).and_then(|()| file.sync_all()).map_err(wrap("force to the disk", path))
    }

    fn sync_folder(&self, path: &Path) -> Result<(), WriteError> {
        if !self.sync {
            return Ok(());
        }
        self.gate(Operation::SyncFolder, path)
            .and_then(|()| File::open(path))
            .and_then(|folder| match folder.sync_all() {
                // Some network file systems cannot force a folder; their renames are as safe as they get.
                Err(error) if matches!(error.kind(), io::ErrorKind::InvalidInput | io::ErrorKind::Unsupported) => {
                    Ok(())
                }
                other => other,
            })
            .map_err(wrap("force to the disk the folder", path))
    }

    fn mishap(&self, operation: Operation, path: &Path) -> Option<Mishap> {
        self.faults.as_ref()?.before(operation, path)
    }

    fn gate(&self, operation: Operation, path: &Path) -> io::Result<()> {
        match self.mishap(operation, path) {
            None => Ok(()),
            Some(Mishap::Error(error)) => Err(error),
            Some(Mishap::Short(_)) => Err(io::ErrorKind::StorageFull.into()),
        }
    }
}

fn wrap(attempted: &'static str, path: &Path) -> impl FnOnce(io::Error) -> WriteError {
    move |source| WriteError { attempted, path: path.to_owned(), source }
}

fn absent_is_fine(outcome: io::Result<()>) -> io::Result<()> {
    match outcome {
        Err(error) if error.kind() == io::ErrorKind::NotFound => Ok(()),
        other => other,
    }
}

/// The folder that a path stands in; `.` for a bare name.
fn parent_of(path: &Path) -> PathBuf {
    match path.parent() {
        Some(parent) if !parent.as_os_str().is_empty() => parent.to_owned(),
        _ => PathBuf::from("."),
    }
}
