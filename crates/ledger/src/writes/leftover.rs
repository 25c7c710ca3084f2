//! Names of what is being written, by which what dead processes left behind is told from what is still growing.

use crate::host::{Life, Process, unique};
use std::fs;
use std::path::{Path, PathBuf};
use std::time::Duration;

/// The age at which a leftover of another host is given up.
const GIVEN_UP: Duration = Duration::from_secs(24 * 3600);
const ENDING: &str = ".temporary";

/// A new hidden name that says which process uses it.
pub(super) fn name() -> String {
    let Process { realm, pid, start } = Process::this();
    format!(".{pid}-{start}-{realm}-{}{ENDING}", unique())
}

/// The files and folders in a folder that no living process will finish.
pub(super) fn of_the_dead(folder: &Path) -> Vec<PathBuf> {
    let Ok(entries) = fs::read_dir(folder) else { return Vec::new() };
    let dead = |entry: &fs::DirEntry| {
        let Some(process) = entry.file_name().to_str().and_then(process_of) else { return false };
        match process.life() {
            Life::Dead => true,
            Life::Alive => false,
            Life::Unknown => entry
                .metadata()
                .and_then(|m| m.modified())
                .is_ok_and(|time| time.elapsed().is_ok_and(|age| age > GIVEN_UP)),
        }
    };
    entries.flatten().filter(dead).map(|entry| entry.path()).collect()
}

fn process_of(name: &str) -> Option<Process> {
    let mut parts = name.strip_prefix('.')?.strip_suffix(ENDING)?.split('-');
    let (pid, start, realm, _) = (parts.next()?, parts.next()?, parts.next()?, parts.next()?);
    Some(Process { pid: pid.parse().ok()?, start: start.parse().ok()?, realm: realm.to_owned() })
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::Writes;
    use std::time::SystemTime;

    #[test]
    fn only_leftovers_of_the_dead_go() {
        let folder = tempfile::tempdir().unwrap();
        let mut child = std::process::Command::new("true").spawn().unwrap();
        let (pid, realm) = (child.id(), Process::this().realm);
        child.wait().unwrap();
        let age = |name: &str, hours: u64| {
            let file = fs::File::create(folder.path().join(name)).unwrap();
            file.set_modified(SystemTime::now() - Duration::from_secs(hours * 3600)).unwrap();
        };
        let mine = name();
        age(&mine, 48);
        let dead = format!(".{pid}-0-{realm}-00{ENDING}");
        fs::create_dir(folder.path().join(&dead)).unwrap();
        fs::write(folder.path().join(&dead).join("record.json"), "{}").unwrap();
        age(".1-0-elsewhere-00.temporary", 1);
        age(".2-0-elsewhere-00.temporary", 25);
        age("data.temporary", 100);
        Writes::new().clear_leftovers(folder.path());
        let mut left: Vec<_> = fs::read_dir(folder.path()).unwrap().map(|e| e.unwrap().file_name()).collect();
        left.sort();
        let mut expected = [mine.as_str(), ".1-0-elsewhere-00.temporary", "data.temporary"];
        expected.sort_unstable();
        assert_eq!(left, expected);
    }
}
