//! The folder of results: which files are in it, from which entries, and whether they still are what was written.
//!
//! `record.json` ties them together. It is also how a later run knows, without opening them, that files need not be written again: key, size
//! and time of each are in it.

use serde::{Deserialize, Serialize};
use serde_json::json;
use spinledger_ledger::{LedgerError, Writes};
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
    /// The entry's content.
    pub content: ContentHash,
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
    unchanged: bool,
}

impl Results {
    /// What an earlier run left; nothing is changed yet. A `record.json` that cannot be understood counts as none.
    pub fn open(folder: &Path, writes: &Writes) -> Self {
        #[derive(Deserialize)]
        struct Old {
            files: Vec<FileRecord>,
        }
        let text = std::fs::read(folder.join(RECORD)).unwrap_or_default();
        let old = serde_json::from_slice::<Old>(&text).map(|old| old.files).unwrap_or_default();
        let before = old.into_iter().map(|file| (file.file.clone(), file)).collect();
        Results { folder: folder.to_owned(), writes: writes.clone(), before, now: BTreeMap::new(), unchanged: true }
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
            self.unchanged &= old.step == step && old.content == *content;
            let record = FileRecord { step: step.to_owned(), content: *content, ..old.clone() };
            self.now.insert(file.to_owned(), record);
        }
        same
    }

    /// Notes a file that was written for an entry.
    pub fn wrote(&mut self, step: &str, file: &str, key: &Key, content: &ContentHash) {
        self.unchanged = false;
        let (size, modified) = stamp(&self.path(file)).unwrap_or((0, 0));
        let record =
            FileRecord { file: file.to_owned(), step: step.to_owned(), key: *key, content: *content, size, modified };
        self.now.insert(file.to_owned(), record);
    }

    /// Copies a table of the ledger, unless it is there already.
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
        if !self.keep(step, file, key, content) {
            self.make_room(file)?;
            self.writes.copy_file(from, &self.path(file))?;
            self.wrote(step, file, key, content);
        }
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

    /// Removes what earlier runs wrote and this one does not show (only files that a `record.json` names: nothing of the user's), and
    /// writes `record.json` where anything changed. `about` is what it says beside the files.
    ///
    /// # Errors
    /// Where a file can be neither removed nor written.
    pub fn finish(mut self, mut about: serde_json::Map<String, serde_json::Value>) -> Result<(), LedgerError> {
        let mut folders = BTreeSet::new();
        for (file, _) in self.before.iter().filter(|(file, _)| !self.now.contains_key(*file)) {
            self.unchanged = false;
            let path = self.path(file);
            if stays_inside(file) && path.is_file() {
                self.writes.remove_file(&path)?;
                folders.extend(path.parent().map(Path::to_owned));
            }
        }
        for folder in folders.iter().filter(|f| **f != self.folder) {
            // Fails where anything is left in it, which is then someone's.
            let _ = std::fs::remove_dir(folder);
        }
        about.insert("files".into(), json!(self.now.values().collect::<Vec<_>>()));
        let mut text = serde_json::to_string_pretty(&about).unwrap_or_default();
        text.push('\n');
        let path = self.path(RECORD);
        if !self.unchanged || std::fs::read(&path).ok().as_deref() != Some(text.as_bytes()) {
            self.make_room(RECORD)?;
            self.writes.write_file(&path, text.as_bytes())?;
        }
        Ok(())
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
        let cut = name.char_indices().map(|(i, _)| i).take_while(|i| *i <= LONGEST - 17).last().unwrap_or(0);
        name.truncate(cut);
        name = format!("{name}_{}", &key.to_string()[..16]);
    }
    format!("{name}.parquet")
}

#[cfg(test)]
mod tests {
    use super::*;
    use spinledger_terms::Value;

    #[test]
    fn names_of_series_are_readable_and_safe() {
        let key = Key([0xab; 32]);
        let columns = [("size".to_owned(), Value::Integer(32)), ("temperature".to_owned(), Value::Number(2.26))];
        assert_eq!(series_file(&columns, &key), "size-32_temperature-2.26.parquet");
        assert_eq!(series_file(&[], &key), "series.parquet");
        let odd = series_file(&[("name".to_owned(), Value::text("../a b"))], &key);
        assert_eq!(odd, "name-..~a~b_abababababababab.parquet");
        let long = series_file(&[("name".to_owned(), Value::text("é".repeat(300)))], &key);
        assert!(long.len() < 200 && long.ends_with("_abababababababab.parquet"));
    }
}
