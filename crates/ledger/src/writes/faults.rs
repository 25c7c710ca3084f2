//! Mishaps on demand, so that tests can show that a full disk or a kill loses nothing.

use std::io;
use std::path::Path;
use std::sync::atomic::{AtomicUsize, Ordering};

/// A single change to the disk, as the kernel sees it.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Operation {
    /// Make a folder.
    MakeFolder,
    /// Open a file for writing.
    Create,
    /// Write bytes to a temporary file.
    Write,
    /// Append a line to a journal.
    Append,
    /// Force a file to the disk.
    Sync,
    /// Force a folder's names to the disk.
    SyncFolder,
    /// Rename a file or a folder.
    Rename,
    /// Give a file a second name.
    Link,
    /// Remove a file or a folder.
    Remove,
}

/// What happens instead of a change.
#[derive(Debug)]
pub enum Mishap {
    /// Nothing is done, and this error comes back.
    Error(io::Error),
    /// So many bytes are written, then the disk is full. For changes other than writes: as a full disk.
    Short(usize),
}

/// Decides, before each change, whether it happens.
pub trait Faults: Send + Sync + std::fmt::Debug {
    /// None: the change happens.
    fn before(&self, operation: Operation, path: &Path) -> Option<Mishap>;
}

/// Lets `at` changes happen, then fails.
#[derive(Debug)]
pub struct FailAt {
    at: usize,
    kind: Kind,
    seen: AtomicUsize,
}

#[derive(Clone, Copy, Debug)]
enum Kind {
    Full,
    Short(usize),
    Crash(usize),
}

impl FailAt {
    /// After `at` changes one fails as on a full disk; later ones happen again.
    pub fn full(at: usize) -> Self {
        FailAt { at, kind: Kind::Full, seen: AtomicUsize::new(0) }
    }

    /// After `at` changes one write stops after `bytes` bytes; later ones happen again.
    pub fn short(at: usize, bytes: usize) -> Self {
        FailAt { at, kind: Kind::Short(bytes), seen: AtomicUsize::new(0) }
    }

    /// As if the process were killed after `at` changes: the next one, if it is a write, gets `bytes` bytes out, and then
    /// nothing happens any more, so that cleaning up fails too.
    pub fn crash(at: usize, bytes: usize) -> Self {
        FailAt { at, kind: Kind::Crash(bytes), seen: AtomicUsize::new(0) }
    }

    /// How many changes were asked for so far.
    pub fn seen(&self) -> usize {
        self.seen.load(Ordering::SeqCst)
    }
}

impl Faults for FailAt {
    fn before(&self, _: Operation, _: &Path) -> Option<Mishap> {
        let count = self.seen.fetch_add(1, Ordering::SeqCst);
        match self.kind {
            Kind::Full if count == self.at => Some(Mishap::Error(io::ErrorKind::StorageFull.into())),
            Kind::Short(bytes) if count == self.at => Some(Mishap::Short(bytes)),
            Kind::Crash(bytes) if count == self.at => Some(Mishap::Short(bytes)),
            Kind::Crash(_) if count > self.at => Some(Mishap::Error(io::Error::other("the process was killed"))),
            _ => None,
        }
    }
}
