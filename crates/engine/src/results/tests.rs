use super::*;
use spinledger_ledger::write_table;
use spinledger_terms::{Column, Table, Value};

const ENTRY: Key = Key([1; 32]);
const CONTENT: ContentHash = ContentHash([2; 32]);

struct Desk {
    folder: tempfile::TempDir,
}

impl Desk {
    fn new() -> Self {
        Desk { folder: tempfile::tempdir().unwrap() }
    }

    fn path(&self, file: &str) -> PathBuf {
        self.folder.path().join("out").join(file)
    }

    fn open(&self) -> Results {
        Results::open(&self.path(""), &Writes::new())
    }

    /// A table of an entry, to be copied.
    fn table(&self, key: &Key) -> PathBuf {
        let path = self.folder.path().join(key.short());
        let table = Table { columns: vec![Column::integers("n", "", vec![Some(1)])] };
        std::fs::write(&path, write_table(&table, key).unwrap()).unwrap();
        path
    }

    /// A run that shows these files, of steps named like them.
    fn show(&self, files: &[(&str, Key)], idle: &[&str]) {
        let mut results = self.open();
        for (file, key) in files {
            let step = file.split(['/', '.']).next().unwrap();
            if !results.keep(step, file, key, &CONTENT) {
                results.announce([(step, *file, *key)].into_iter()).unwrap();
                results.copy(step, file, key, &CONTENT, &self.table(key)).unwrap();
            }
        }
        results.finish(serde_json::Map::new(), &idle.iter().copied().collect()).unwrap();
    }

    fn files(&self) -> Vec<String> {
        fn walk(folder: &Path, top: &Path, out: &mut Vec<String>) {
            for entry in std::fs::read_dir(folder).unwrap() {
                let path = entry.unwrap().path();
                if path.is_dir() {
                    walk(&path, top, out);
                } else {
                    out.push(path.strip_prefix(top).unwrap().display().to_string());
                }
            }
        }
        let mut files = Vec::new();
        walk(&self.path(""), &self.path(""), &mut files);
        files.sort();
        files
    }
}

#[test]
fn what_is_not_shown_any_more_goes() {
    let desk = Desk::new();
    desk.show(&[("a.parquet", ENTRY), ("s/1.parquet", ENTRY), ("s/2.parquet", ENTRY)], &[]);
    assert_eq!(desk.files(), ["a.parquet", "record.json", "s/1.parquet", "s/2.parquet"]);
    desk.show(&[("a.parquet", ENTRY), ("s/2.parquet", ENTRY)], &[]);
    assert_eq!(desk.files(), ["a.parquet", "record.json", "s/2.parquet"]);
    desk.show(&[("a.parquet", ENTRY)], &[]);
    assert_eq!(desk.files(), ["a.parquet", "record.json"]);
    assert!(!desk.path("s").exists(), "an empty folder goes too");
}

/// Files that are as they were written are kept; others are written again, also where only the time or the key is another.
#[test]
fn files_are_kept_while_they_are_what_was_written() {
    let desk = Desk::new();
    desk.show(&[("a.parquet", ENTRY)], &[]);
    let kept = |key: &Key| desk.open().keep("a", "a.parquet", key, &CONTENT);
    assert!(kept(&ENTRY));
    assert!(!kept(&Key([9; 32])));
    let file = std::fs::File::options().append(true).open(desk.path("a.parquet")).unwrap();
    file.set_modified(UNIX_EPOCH).unwrap();
    assert!(!kept(&ENTRY));
    std::fs::remove_file(desk.path("a.parquet")).unwrap();
    assert!(!kept(&ENTRY));
}

#[test]
fn nothing_is_written_where_nothing_changed() {
    let desk = Desk::new();
    desk.show(&[("a.parquet", ENTRY)], &[]);
    let file = std::fs::File::options().append(true).open(desk.path(RECORD)).unwrap();
    file.set_modified(UNIX_EPOCH).unwrap();
    desk.show(&[("a.parquet", ENTRY)], &[]);
    assert_eq!(std::fs::metadata(desk.path(RECORD)).unwrap().modified().unwrap(), UNIX_EPOCH);
}

/// Whatever stands in the folder that was not written by a run stays, also under a name that a run once used.
#[test]
fn files_of_the_user_stay() {
    let desk = Desk::new();
    desk.show(&[("s/1.parquet", ENTRY), ("s/2.parquet", ENTRY), ("b.parquet", ENTRY)], &[]);
    std::fs::write(desk.path("s/mine.parquet"), "mine").unwrap();
    std::fs::write(desk.path("b.parquet"), "mine now").unwrap();
    std::fs::copy(desk.table(&Key([7; 32])), desk.path("s/2.parquet")).unwrap();
    desk.show(&[], &[]);
    assert_eq!(desk.files(), ["b.parquet", "record.json", "s/2.parquet", "s/mine.parquet"]);
}

/// A record could name anything: nothing outside the folder is removed.
#[test]
fn nothing_outside_is_removed() {
    let desk = Desk::new();
    desk.show(&[("a.parquet", ENTRY)], &[]);
    let outside = desk.table(&ENTRY);
    let text = std::fs::read_to_string(desk.path(RECORD)).unwrap();
    let place = format!("../{}", ENTRY.short());
    std::fs::write(desk.path(RECORD), text.replace("a.parquet", &place)).unwrap();
    desk.show(&[], &[]);
    assert!(outside.exists());
}

/// What a run wrote before it was killed is known to the next.
#[test]
fn files_of_a_killed_run_go() {
    let desk = Desk::new();
    let mut results = desk.open();
    results.announce([("s", "s/1.parquet", ENTRY), ("s", "s/2.parquet", ENTRY)].into_iter()).unwrap();
    results.copy("s", "s/1.parquet", &ENTRY, &CONTENT, &desk.table(&ENTRY)).unwrap();
    drop(results);
    assert_eq!(desk.files(), ["record.json", "s/1.parquet"]);
    assert!(!desk.open().keep("s", "s/1.parquet", &ENTRY, &CONTENT), "it may be half of what was meant");
    desk.show(&[("s/2.parquet", ENTRY)], &[]);
    assert_eq!(desk.files(), ["record.json", "s/2.parquet"]);
}

/// Steps that were not asked for keep their results, until a run that does ask for them.
#[test]
fn results_of_idle_steps_stay() {
    let desk = Desk::new();
    desk.show(&[("a.parquet", ENTRY), ("b.parquet", ENTRY), ("c.parquet", ENTRY)], &[]);
    desk.show(&[("a.parquet", ENTRY)], &["b"]);
    assert_eq!(desk.files(), ["a.parquet", "b.parquet", "record.json"]);
    assert!(desk.open().keep("b", "b.parquet", &ENTRY, &CONTENT));
    desk.show(&[("a.parquet", ENTRY)], &[]);
    assert_eq!(desk.files(), ["a.parquet", "record.json"]);
}

#[test]
fn a_damaged_record_is_told_and_replaced() {
    let desk = Desk::new();
    desk.show(&[("a.parquet", ENTRY)], &[]);
    assert_eq!(desk.open().warning(), None);
    std::fs::write(desk.path(RECORD), "{\"files\": [").unwrap();
    assert!(desk.open().warning().unwrap().contains("record.json cannot be understood"));
    desk.show(&[("a.parquet", ENTRY)], &[]);
    assert_eq!(desk.open().warning(), None);
    assert!(desk.open().keep("a", "a.parquet", &ENTRY, &CONTENT));
}

#[test]
fn a_file_in_the_way_is_told_before_anything_runs() {
    let desk = Desk::new();
    assert!(desk.open().check().is_ok(), "a folder that is not there yet can be made");
    std::fs::write(desk.folder.path().join("out"), "in the way").unwrap();
    assert!(desk.open().check().is_err());
}

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
