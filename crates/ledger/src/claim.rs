//! Claims: who works on what, so that two runs do not compute the same. Advisory: an entry is published once whatever claims say.

use crate::error::{LedgerError, WriteError};
use crate::host::{self, Life, Process, unique};
use crate::ledger::Ledger;
use crate::record::now;
use crate::writes::Writes;
use serde::{Deserialize, Serialize};
use spinledger_terms::Key;
use std::fs;
use std::io::ErrorKind;
use std::path::{Path, PathBuf};
use std::time::{Duration, SystemTime};

/// The age at which a claim of another host is void unless it was touched.
const VOID: Duration = Duration::from_secs(600);

/// Who has a key.
#[derive(Debug)]
pub enum Claim {
    /// This caller, until the guard is dropped.
    Mine(ClaimGuard),
    /// Someone else.
    Theirs {
        /// The host's name.
        host: String,
        /// The process number there.
        pid: u32,
        /// Since when, RFC 3339 in UTC.
        since: String,
        /// What the claim is about, in words.
        about: String,
    },
}

/// A claim held. Dropping it gives it up.
#[derive(Debug)]
pub struct ClaimGuard {
    writes: Writes,
    path: PathBuf,
    token: String,
}

/// A claim's file: a JSON object.
#[derive(Debug, Default, Serialize, Deserialize)]
#[serde(default)]
struct Note {
    host: String,
    realm: String,
    pid: u32,
    start: u64,
    since: String,
    about: String,
    token: String,
}

impl Ledger {
    /// Claims a key; `about` says in words what for. A claim is void when its process is dead, which can be told on its own
    /// host, or when nobody touched it for ten minutes, elsewhere; it is then taken over, by one caller only.
    ///
    /// # Errors
    /// Where the claim can be neither read nor written.
    pub fn claim(&self, key: &Key, about: &str) -> Result<Claim, LedgerError> {
        let path = self.root.join("claims").join(key.to_string());
        let Process { realm, pid, start } = Process::this();
        let token = unique();
        let note =
            Note { host: host::name(), realm, pid, start, since: now(), about: about.into(), token: token.clone() };
        let text = serde_json::to_vec(&note).map_err(|error| LedgerError::damaged(&path, error.to_string()))?;
        loop {
            if self.writes.claim_file(&path, &self.temporary(), &text)? {
                return Ok(Claim::Mine(ClaimGuard { writes: self.writes.clone(), path, token }));
            }
            // None: given up since; the next round is likely to get it.
            let Some(theirs) = read(&path)? else { continue };
            if !is_void(&theirs, &path) {
                let Note { host, pid, since, about, .. } = theirs;
                return Ok(Claim::Theirs { host, pid, since, about });
            }
            remove_if(&self.writes, &path, |now| now.token == theirs.token && is_void(now, &path))?;
        }
    }
}

impl ClaimGuard {
    /// Says that work goes on; to be called every few minutes. Returns false where the claim was lost to another host,
    /// which may then compute the same.
    ///
    /// # Errors
    /// Where the claim cannot be read or touched.
    pub fn touch(&self) -> Result<bool, LedgerError> {
        let held = read(&self.path)?.is_some_and(|note| note.token == self.token);
        if held {
            self.writes.touch(&self.path)?;
        }
        Ok(held)
    }
}

impl Drop for ClaimGuard {
    fn drop(&mut self) {
        // What stays is void as soon as this process ends.
        let _ = remove_if(&self.writes, &self.path, |note| note.token == self.token);
    }
}

fn read(path: &Path) -> Result<Option<Note>, LedgerError> {
    match fs::read(path) {
        // A damaged claim is one of nobody: it is void by age only.
        Ok(bytes) => Ok(Some(serde_json::from_slice(&bytes).unwrap_or_default())),
        Err(error) if error.kind() == ErrorKind::NotFound => Ok(None),
        Err(error) => Err(LedgerError::read("read the claim", path)(error)),
    }
}

fn is_void(note: &Note, path: &Path) -> bool {
    let process = Process { realm: note.realm.clone(), pid: note.pid, start: note.start };
    match process.life() {
        Life::Dead => true,
        Life::Alive => false,
        Life::Unknown => {
            let touched = fs::metadata(path).and_then(|m| m.modified()).unwrap_or(SystemTime::now());
            touched.elapsed().is_ok_and(|age| age > VOID)
        }
    }
}

/// Removes a claim if it still is as expected. Under a lock, since between looking and removing another process might
/// otherwise have taken over and lose its new claim.
fn remove_if(writes: &Writes, path: &Path, expected: impl FnOnce(&Note) -> bool) -> Result<(), LedgerError> {
    let _lock = writes.lock(&path.with_file_name("lock"))?;
    if let Some(note) = read(path)?
        && expected(&note)
    {
        writes.remove_file(path).map_err(|error: WriteError| LedgerError::from(error))?;
    }
    Ok(())
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::sync::atomic::{AtomicUsize, Ordering};

    fn ledger() -> (tempfile::TempDir, Ledger) {
        let folder = tempfile::tempdir().unwrap();
        let ledger = Ledger::open(folder.path()).unwrap();
        (folder, ledger)
    }

    fn write(ledger: &Ledger, key: &Key, note: &Note, age: u64) -> PathBuf {
        let path = ledger.root().join("claims").join(key.to_string());
        fs::write(&path, serde_json::to_vec(note).unwrap()).unwrap();
        let file = fs::File::options().append(true).open(&path).unwrap();
        file.set_modified(SystemTime::now() - Duration::from_secs(age)).unwrap();
        path
    }

    #[test]
    fn a_claim_is_held_until_dropped() {
        let (_folder, ledger) = ledger();
        let key = Key([1; 32]);
        let Claim::Mine(guard) = ledger.claim(&key, "block 3").unwrap() else { panic!("nobody had it") };
        assert!(guard.touch().unwrap());
        let Claim::Theirs { pid, about, .. } = ledger.claim(&key, "again").unwrap() else {
            panic!("it was given twice")
        };
        assert_eq!((pid, about.as_str()), (std::process::id(), "block 3"));
        drop(guard);
        assert!(matches!(ledger.claim(&key, "later").unwrap(), Claim::Mine(_)));
        assert_eq!(fs::read_dir(ledger.temporary()).unwrap().count(), 0);
    }

    #[test]
    fn void_claims_are_taken_over() {
        let (_folder, ledger) = ledger();
        let key = Key([1; 32]);
        let mut child = std::process::Command::new("true").spawn().unwrap();
        child.wait().unwrap();
        let this = Process::this();
        let dead = || Note { realm: this.realm.clone(), pid: child.id(), token: "t".into(), ..Note::default() };
        let cases = [(dead(), 0, true), (Note { pid: this.pid, start: this.start, ..dead() }, 10_000, false)];
        let elsewhere = || Note { realm: "elsewhere".into(), pid: 1, ..Note::default() };
        let cases = cases.into_iter().chain([(elsewhere(), 700, true), (elsewhere(), 300, false)]);
        for (note, age, taken) in cases {
            write(&ledger, &key, &note, age);
            assert_eq!(matches!(ledger.claim(&key, "").unwrap(), Claim::Mine(_)), taken, "{note:?} {age}");
        }
        let path = ledger.root().join("claims").join(key.to_string());
        fs::write(&path, "").unwrap();
        assert!(
            matches!(ledger.claim(&key, "").unwrap(), Claim::Theirs { .. }),
            "a damaged claim counts while it is young"
        );
    }

    #[test]
    fn a_lost_claim_is_noticed_and_left_to_its_new_owner() {
        let (_folder, ledger) = ledger();
        let key = Key([1; 32]);
        let Claim::Mine(guard) = ledger.claim(&key, "").unwrap() else { panic!("nobody had it") };
        let path = write(&ledger, &key, &Note { token: "new".into(), ..Note::default() }, 0);
        assert!(!guard.touch().unwrap());
        drop(guard);
        assert!(path.exists());
    }

    #[test]
    fn one_of_many_takes_a_void_claim_over() {
        let (_folder, ledger) = ledger();
        for round in 0..20 {
            let key = Key([round; 32]);
            write(&ledger, &key, &Note { realm: "elsewhere".into(), ..Note::default() }, 1000);
            let (mine, barrier) = (AtomicUsize::new(0), std::sync::Barrier::new(4));
            std::thread::scope(|scope| {
                for _ in 0..4 {
                    scope.spawn(|| {
                        barrier.wait();
                        let claim = ledger.claim(&key, "").unwrap();
                        mine.fetch_add(usize::from(matches!(claim, Claim::Mine(_))), Ordering::SeqCst);
                        // Nobody gives up before all have asked.
                        barrier.wait();
                    });
                }
            });
            assert_eq!(mine.into_inner(), 1);
        }
    }
}
