//! Who is writing: a process named so that another one can tell whether it still lives.

use std::fs;
use std::io::Read;
use std::sync::OnceLock;
use std::sync::atomic::{AtomicU64, Ordering};

/// A process on a host. Written into claims and into the names of temporary files.
#[derive(Clone, Debug, PartialEq, Eq)]
pub(crate) struct Process {
    /// Eight digits that stand for host, boot and process namespace: equal only where process numbers can be compared.
    pub(crate) realm: String,
    /// The process number.
    pub(crate) pid: u32,
    /// When it started, in the kernel's ticks since boot; 0 where that cannot be learned.
    pub(crate) start: u64,
}

/// What is known of a process from here.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) enum Life {
    Alive,
    Dead,
    /// It is of another host, boot or namespace.
    Unknown,
}

impl Process {
    /// This process.
    pub(crate) fn this() -> Process {
        let pid = std::process::id();
        Process { realm: realm().to_owned(), pid, start: start_of(pid).unwrap_or(0) }
    }

    /// Whether the process lives.
    pub(crate) fn life(&self) -> Life {
        if self.realm != realm() {
            return Life::Unknown;
        }
        let Some(pid) = i32::try_from(self.pid).ok().and_then(rustix::process::Pid::from_raw) else {
            return Life::Dead;
        };
        match rustix::process::test_kill_process(pid) {
            Err(rustix::io::Errno::SRCH) => Life::Dead,
            // A number used again belongs to a process that started later.
            _ => match start_of(self.pid) {
                Some(start) if self.start != 0 && start != self.start => Life::Dead,
                _ => Life::Alive,
            },
        }
    }
}

/// The host's name.
pub(crate) fn name() -> String {
    rustix::system::uname().nodename().to_string_lossy().into_owned()
}

fn realm() -> &'static str {
    static REALM: OnceLock<String> = OnceLock::new();
    REALM.get_or_init(|| {
        // Two containers may share a host's name and boot, yet count processes apart.
        let boot = fs::read_to_string("/proc/sys/kernel/random/boot_id").unwrap_or_default();
        let namespace =
            fs::read_link("/proc/self/ns/pid").map(|p| p.to_string_lossy().into_owned()).unwrap_or_default();
        let text = format!("{}\n{}\n{namespace}", name(), boot.trim());
        blake3::hash(text.as_bytes()).to_hex()[..8].to_owned()
    })
}

/// The start time of a process, field 22 of its `stat`; None where there is no /proc.
fn start_of(pid: u32) -> Option<u64> {
    let stat = fs::read_to_string(format!("/proc/{pid}/stat")).ok()?;
    // The second field is the program's name in brackets and may hold anything, brackets included.
    stat.rsplit_once(')')?.1.split_ascii_whitespace().nth(19)?.parse().ok()
}

/// Sixteen hexadecimal digits that no other call returns, here or elsewhere. For file names only.
pub(crate) fn unique() -> String {
    static CALLS: AtomicU64 = AtomicU64::new(0);
    let mut bytes = [0u8; 32];
    // Where there is no such device the time, the process and the count must do.
    let _ = fs::File::open("/dev/urandom").and_then(|mut device| device.read_exact(&mut bytes));
    let time = std::time::SystemTime::now().duration_since(std::time::UNIX_EPOCH).map_or(0, |d| d.as_nanos());
    let call = CALLS.fetch_add(1, Ordering::Relaxed);
    let mut hasher = blake3::Hasher::new();
    hasher.update(&bytes).update(&time.to_le_bytes()).update(&call.to_le_bytes());
    hasher.update(&std::process::id().to_le_bytes()).update(realm().as_bytes());
    hasher.finalize().to_hex()[..16].to_owned()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn this_process_lives_and_a_finished_one_does_not() {
        let this = Process::this();
        assert_eq!(this.life(), Life::Alive);
        let mut child = std::process::Command::new("true").spawn().unwrap();
        let gone = Process { pid: child.id(), ..this.clone() };
        child.wait().unwrap();
        assert_eq!(gone.life(), Life::Dead);
        assert_eq!(Process { realm: "elsewhere".into(), ..this.clone() }.life(), Life::Unknown);
        if this.start != 0 {
            assert_eq!(Process { start: this.start + 1, ..this }.life(), Life::Dead, "the number was used again");
        }
    }

    #[test]
    fn names_do_not_repeat() {
        assert_ne!(unique(), unique());
    }
}
