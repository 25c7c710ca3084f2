//! Bytes that a run will write, and whether there is room for them.

use std::path::{Path, PathBuf};

/// Bytes to be written to a folder, and the room on its disk.
#[derive(Clone, Debug, PartialEq, serde::Serialize)]
pub struct Disk {
    /// The folder.
    pub path: PathBuf,
    /// Bytes to be written, about.
    pub bytes: f64,
    /// Bytes free on its disk for this user; None where that cannot be told.
    pub free: Option<f64>,
    /// Whether that suffices, together with what else is to be written to the same disk.
    pub enough: bool,
}

/// Looks at the disks of some folders, which need not be there yet.
pub(super) fn disks(folders: &[(&Path, f64)]) -> Vec<Disk> {
    let known: Vec<Option<(u64, f64)>> = folders.iter().map(|(path, _)| room(path)).collect();
    let on = |device: u64| {
        let same = known.iter().zip(folders).filter(|(room, _)| room.is_some_and(|(d, _)| d == device));
        same.map(|(_, (_, bytes))| bytes).sum::<f64>()
    };
    let disk = |((path, bytes), room): (&(&Path, f64), &Option<(u64, f64)>)| Disk {
        path: path.to_path_buf(),
        bytes: *bytes,
        free: room.map(|(_, free)| free),
        enough: room.is_none_or(|(device, free)| on(device) <= free),
    };
    folders.iter().zip(&known).map(disk).collect()
}

/// Device and free bytes of the nearest folder above that is there.
fn room(path: &Path) -> Option<(u64, f64)> {
    let path = std::path::absolute(path).ok()?;
    let there = path.ancestors().find(|path| path.is_dir())?;
    let device = rustix::fs::stat(there).ok()?.st_dev;
    let room = rustix::fs::statvfs(there).ok()?;
    Some((device as u64, room.f_bavail as f64 * room.f_frsize as f64))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn what_goes_to_one_disk_is_added_up() {
        let folder = tempfile::tempdir().unwrap();
        let (one, two) = (folder.path().join("not/there/yet"), folder.path().join("nor this"));
        let free = disks(&[(&one, 0.0)])[0].free.unwrap();
        assert!(free > 0.0);
        let disks = disks(&[(&one, free * 0.7), (&two, free * 0.7)]);
        assert!(!disks[0].enough && !disks[1].enough, "each alone would fit");
        assert!(super::disks(&[(&one, free * 0.1)])[0].enough);
    }
}
