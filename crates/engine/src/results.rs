//! The folder of results: which files are in it, from which entries, and whether they still are what was written.
//!
//! `record.json` ties them together. It is also how a later run knows, without opening them, that files need not be written again: key, size
//! and time of each are in it. Files are announced in it before they are written, so that also what a run that was killed has left can be told
//! from files of the user's, and goes when no run shows it any more: a folder of series is read as a whole.

use serde::{Deserialize, Serialize};
use serde_json::json;
use spinledger_ledger::{LedgerError, Writes, file_key};
use spinledger_terms::{ContentHash, Key};
use std::collections::{BTreeMap, BTreeSet};
use std::path::{Path, PathBuf};
use std::time::UNIX_EPOCH;

/// Name of the file that ties the results together.
pub const RECORD: &str = "record.json";

/// A file of results.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct FileRecord {
    /// Path within the folder.
    pub file: String,
    /// The step that gave it.
    pub step: String,
    /// The ledger entry that it shows.
    pub key: Key,
    /// The entry's content; None while the file is only announced.
    pub content: Option<ContentHash>,
    /// Length in bytes.
    pub size: u64,
    /// When it was written, in nanoseconds since 1970.
    pub modified: u64,
}

/// The folder of results of one run.
pub struct Results {
    folder: PathBuf,
    writes: Writes,
    before: BTreeMap<String, FileRecord>,
    now: BTreeMap<String, FileRecord>,
    warning: Option<String>,
}

impl Results {
    /// What an earlier run left; nothing is changed yet. A `record.json` that cannot be understood counts as none, with a warning.
    pub fn open(folder: &Path, writes: &Writes) -> Self {
        #[derive(Deserialize)]
        struct Old {
            files: Vec<FileRecord>,
        }
        let path = folder.join(RECORD);
        let (mut before, mut warning) = (BTreeMap::new(), None);
        if let Ok(text) = std::fs::read(&path) {
            match serde_json::from_slice::<Old>(&text) {
                Ok(old) => before = old.files.into_iter().map(|file| (file.file.clone(), file)).collect(),
                Err(_) => {
                    warning = Some(format!(
                        "{} cannot be understood: all results are written anew, and files of earlier runs that are not shown any more are left",
                        path.display()
                    ));
                }
            }
        }
        let (folder, writes) = (folder.to_owned(), writes.clone());
        // A run that was killed may have left files half-written, hidden beside those that they would have become.
        let files = before.keys().filter(|file| stays_inside(file));
        let folders: BTreeSet<PathBuf> = files
            .filter_map(|file| folder.join(file).parent().map(Path::to_owned))
            .chain([folder.to_owned()])
            .collect();
        folders.iter().for_each(|folder| writes.clear_leftovers(folder));
        Results { folder, writes, before, now: BTreeMap::new(), warning }
    }

    /// What is wrong with what an earlier run left, in words.
    pub fn warning(&self) -> Option<&str> {
        self.warning.as_deref()
    }

    /// Whether results can be written, as far as that can be told before there are any. Nothing is made.
    ///
    /// # Errors
    /// Where the folder, or the nearest one above it that there is, cannot be written.
    pub fn check(&self) -> std::io::Result<()> {
        // Without a slash at the end, behind which no file exists.
        let absolute: PathBuf = std::path::absolute(&self.folder)?.components().collect();
        let there = absolute.ancestors().find(|path| path.exists()).unwrap_or(Path::new("/"));
        if !there.is_dir() {
            return Err(std::io::ErrorKind::NotADirectory.into());
        }
        Ok(rustix::fs::access(there, rustix::fs::Access::WRITE_OK)?)
    }

    /// Where a file stands.
    pub fn path(&self, file: &str) -> PathBuf {
        self.folder.join(file)
    }

    /// Whether the file shows this entry already; then it is kept.
    pub fn keep(&mut self, step: &str, file: &str, key: &Key, content: &ContentHash) -> bool {
        let Some(old) = self.before.get(file) else { return false };
        let same = old.key == *key && stamp(&self.path(file)) == Some((old.size, old.modified));
        if same {
            let record = FileRecord { step: step.to_owned(), content: Some(*content), ..old.clone() };
            self.now.insert(file.to_owned(), record);
        }
        same
    }

    /// Notes a file that was written for an entry.
    pub fn wrote(&mut self, step: &str, file: &str, key: &Key, content: &ContentHash) {
        let (size, modified) = stamp(&self.path(file)).unwrap_or((0, 0));
        let (file_name, step, content) = (file.to_owned(), step.to_owned(), Some(*content));
        let record = FileRecord { file: file_name, step, key: *key, content, size, modified };
        self.now.insert(file.to_owned(), record);
    }

    /// Announces files (step, file, key of the entry) that are about to be written, in `record.json`.
    ///
    /// # Errors
    /// Where that cannot be written.
    pub fn announce<'a>(&mut self, files: impl Iterator<Item = (&'a str, &'a str, Key)>) -> Result<(), LedgerError> {
        let mut any = false;
        for (step, file, key) in files {
            any = true;
            self.make_room(file)?;
            let (file, step) = (file.to_owned(), step.to_owned());
            let record = FileRecord { file: file.clone(), step, key, content: None, size: 0, modified: 0 };
            self.before.insert(file, record);
        }
        if !any {
            return Ok(());
        }
        let left = self.before.iter().filter(|(file, _)| !self.now.contains_key(*file)).map(|(_, record)| record);
        let files: Vec<&FileRecord> = left.chain(self.now.values()).collect();
        let record = json!({ "record": 1, "unfinished": true, "files": files });
        self.write_record(&record)
    }

    fn write_record(&self, record: &serde_json::Value) -> Result<(), LedgerError> {
        let mut text = serde_json::to_string_pretty(record).unwrap_or_default();
        text.push('\n');
        let path = self.path(RECORD);
        if std::fs::read(&path).ok().as_deref() != Some(text.as_bytes()) {
            self.make_room(RECORD)?;
            self.writes.write_file(&path, text.as_bytes())?;
        }
        Ok(())
    }

    /// Copies a table of the ledger.
    ///
    /// # Errors
    /// Where it cannot be written.
    pub fn copy(
        &mut self,
        step: &str,
        file: &str,
        key: &Key,
        content: &ContentHash,
        from: &Path,
    ) -> Result<(), LedgerError> {
        self.make_room(file)?;
        self.writes.copy_file(from, &self.path(file))?;
        self.wrote(step, file, key, content);
        Ok(())
    }

    /// Makes the folder that a file stands in.
    ///
    /// # Errors
    /// Where it cannot be made.
    pub fn make_room(&self, file: &str) -> Result<(), LedgerError> {
        let path = self.path(file);
        Ok(self.writes.make_folder(path.parent().unwrap_or(&self.folder))?)
    }

    /// Removes what earlier runs wrote and this one does not show, and writes `record.json` where anything changed. Only files that a `record.json`
    /// names and that carry the key named there are removed: nothing of the user's. Files of `idle` steps stay as they are. `about` is what the
    /// record says beside the files.
    ///
    /// # Errors
    /// Where a file can be neither removed nor written.
    pub fn finish(
        &mut self,
        mut about: serde_json::Map<String, serde_json::Value>,
        idle: &BTreeSet<&str>,
    ) -> Result<(), LedgerError> {
        let mut folders = BTreeSet::new();
        for (file, old) in std::mem::take(&mut self.before) {
            if self.now.contains_key(&file) {
                continue;
            }
            let path = self.path(&file);
            if idle.contains(old.step.as_str()) {
                self.now.insert(file, old);
                continue;
            }
            if stays_inside(&file) && path.is_file() && file_key(&path).is_ok_and(|key| key == Some(old.key)) {
                self.writes.remove_file(&path)?;
                folders.extend(path.parent().map(Path::to_owned));
            }
        }
        for folder in folders.iter().filter(|f| **f != self.folder) {
            // Fails where anything is left in it, which is then someone's.
            let _ = std::fs::remove_dir(folder);
        }
        about.insert("files".into(), json!(self.now.values().collect::<Vec<_>>()));
        self.write_record(&about.into())
    }
}

/// A name in a record could point anywhere; only files below the folder are ever removed.
fn stays_inside(file: &str) -> bool {
    Path::new(file).components().all(|part| matches!(part, std::path::Component::Normal(_)))
}

fn stamp(path: &Path) -> Option<(u64, u64)> {
    let data = std::fs::metadata(path).ok()?;
    let modified = data.modified().ok()?.duration_since(UNIX_EPOCH).ok()?;
    Some((data.len(), u64::try_from(modified.as_nanos()).ok()?))
}

/// The name of a point's file: its scan columns in words. Names that would be too long for a file system end in digits of the key.
pub fn series_file(columns: &[(String, spinledger_terms::Value)], key: &Key) -> String {
    const LONGEST: usize = 120;
    let mut name = String::new();
    for (column, value) in columns {
        let value = value.as_str().map_or_else(|| value.canonical(), str::to_owned);
        let word = format!("{column}-{value}");
        let word: String =
            word.chars().map(|c| if c.is_alphanumeric() || "-.+".contains(c) { c } else { '~' }).collect();
        if !name.is_empty() {
            name.push('_');
        }
        name.push_str(&word);
    }
    if name.is_empty() {
        name.push_str("series");
    }
    // Two values may meet in one name only where characters were replaced or cut.
    if name.len() > LONGEST || name.contains('~') {
        let mut cut = name.len().min(LONGEST - 17);
        while !name.is_char_boundary(cut) {
            cut -= 1;
        }
        name.truncate(cut);
        name = format!("{name}_{}", &key.to_string()[..16]);
    }
    format!("{name}.parquet")
}

#[cfg(test)]
mod tests;
