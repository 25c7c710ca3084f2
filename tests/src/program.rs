//! The built program, run as its user would: in a folder of its own, with a ledger of its own.

use serde_json::Value as Json;
use spinledger_ledger::read_table;
use spinledger_terms::Table;
use std::collections::BTreeMap;
use std::path::{Path, PathBuf};
use std::process::{Child, Command, Output, Stdio};
use std::sync::OnceLock;
use std::time::Duration;
use tempfile::TempDir;

/// The top of the source tree.
pub fn top() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("..")
}

/// The program, built once for all tests in its own profile with the standard plugins beside it.
///
/// # Panics
/// Where it cannot be built.
pub fn program() -> &'static Path {
    static PROGRAM: OnceLock<PathBuf> = OnceLock::new();
    PROGRAM.get_or_init(|| {
        let cargo = std::env::var_os("CARGO").unwrap_or_else(|| "cargo".into());
        // Without `-p`, so that the default members are built: the program and the plugins.
        let status = Command::new(cargo).args(["build", "--release", "--quiet"]).current_dir(top()).status();
        assert!(status.is_ok_and(|s| s.success()), "the program cannot be built");
        let target = std::env::var_os("CARGO_TARGET_DIR").map_or_else(|| top().join("target"), PathBuf::from);
        target.join("release").join("spinledger").canonicalize().expect("the program was built")
    })
}

/// A folder with pipelines, a ledger and results.
pub struct Desk {
    folder: TempDir,
    variables: Vec<(String, String)>,
}

/// What a run said.
pub struct Ran {
    /// Exit status; None where it was ended by a signal.
    pub status: Option<i32>,
    /// Standard output.
    pub out: String,
    /// Standard error.
    pub err: String,
}

impl Default for Desk {
    fn default() -> Self {
        Desk::new()
    }
}

impl Desk {
    /// An empty one.
    ///
    /// # Panics
    /// Where no folder can be made.
    pub fn new() -> Self {
        Desk { folder: TempDir::new().expect("a folder"), variables: Vec::new() }
    }

    /// Sets a variable of the environment for the program.
    #[must_use]
    pub fn with(mut self, name: &str, value: &str) -> Self {
        self.variables.push((name.into(), value.into()));
        self
    }

    /// Where a file of the desk is.
    pub fn path(&self, name: &str) -> PathBuf {
        self.folder.path().join(name)
    }

    /// Writes a file.
    ///
    /// # Panics
    /// Where it cannot be written.
    pub fn write(&self, name: &str, text: &str) -> PathBuf {
        let path = self.path(name);
        std::fs::write(&path, text).expect("a file can be written");
        path
    }

    pub(crate) fn command(&self, args: &[&str]) -> Command {
        let mut command = Command::new(program());
        command.args(args).current_dir(self.folder.path());
        command.env_remove("SPINLEDGER_LEDGER").env_remove("SPINLEDGER_PLUGINS");
        command.envs(self.variables.iter().cloned());
        command
    }

    /// Runs the program to its end.
    ///
    /// # Panics
    /// Where it cannot be started.
    pub fn run(&self, args: &[&str]) -> Ran {
        let output: Output = self.command(args).output().expect("the program starts");
        let text = |bytes: Vec<u8>| String::from_utf8(bytes).expect("the program prints UTF-8");
        Ran { status: output.status.code(), out: text(output.stdout), err: text(output.stderr) }
    }

    /// Starts the program and leaves it running, in a process group of its own.
    ///
    /// # Panics
    /// Where it cannot be started.
    pub fn start(&self, args: &[&str]) -> Child {
        use std::os::unix::process::CommandExt;
        let mut command = self.command(args);
        command.stdout(Stdio::null()).stderr(Stdio::null()).process_group(0);
        command.spawn().expect("the program starts")
    }

    /// Starts the program and kills it after a while, with its workers; whether it had not come to a good end before.
    ///
    /// # Panics
    /// Where it cannot be started.
    pub fn killed(&self, args: &[&str], after: Duration) -> bool {
        let mut child = self.start(args);
        std::thread::sleep(after);
        let group = rustix::process::Pid::from_child(&child);
        // It may have ended by now.
        let _ = rustix::process::kill_process_group(group, rustix::process::Signal::KILL);
        !child.wait().expect("the program ends").success()
    }

    /// Runs a pipeline with `--json` and expects a status.
    ///
    /// # Panics
    /// Where the status is another, with everything that was said.
    pub fn run_pipeline(&self, name: &str, more: &[&str], status: i32) -> Events {
        let args = [&["run", name, "--json"], more].concat();
        let ran = self.run(&args);
        assert_eq!(ran.status, Some(status), "{args:?}\n{}\n{}", ran.out, ran.err);
        Events::of(&ran)
    }

    /// Reads a table of the results.
    ///
    /// # Panics
    /// Where it cannot be read.
    pub fn table(&self, file: &str) -> Table {
        read_table(&self.path(file)).unwrap_or_else(|error| panic!("{file}: {error}"))
    }

    /// All files below a folder of the desk, with their bytes.
    ///
    /// # Panics
    /// Where one cannot be read.
    pub fn files(&self, folder: &str) -> BTreeMap<String, Vec<u8>> {
        let mut files = BTreeMap::new();
        let top = self.path(folder);
        let mut open = vec![top.clone()];
        while let Some(folder) = open.pop() {
            for entry in std::fs::read_dir(&folder).expect("a folder can be read") {
                let path = entry.expect("an entry can be read").path();
                if path.is_dir() {
                    open.push(path);
                } else {
                    let name = path.strip_prefix(&top).expect("below").display().to_string();
                    files.insert(name, std::fs::read(&path).expect("a file can be read"));
                }
            }
        }
        files
    }

    /// The Parquet files of the results, with their bytes.
    pub fn parquet(&self, folder: &str) -> BTreeMap<String, Vec<u8>> {
        let mut files = self.files(folder);
        files.retain(|name, _| name.ends_with(".parquet"));
        files
    }
}

/// The events of a run.
pub struct Events(pub Vec<Json>);

impl Events {
    /// From what a run printed.
    ///
    /// # Panics
    /// Where a line is not JSON.
    pub fn of(ran: &Ran) -> Self {
        Events(ran.out.lines().map(|line| serde_json::from_str(line).expect("a line of JSON")).collect())
    }

    /// The last event, which is `finished`.
    ///
    /// # Panics
    /// Where it is another.
    pub fn finished(&self) -> &Json {
        let last = self.0.last().expect("there are events");
        assert_eq!(last["event"], "finished");
        last
    }

    /// Parcels computed, reused and broken.
    pub fn counts(&self) -> (u64, u64, u64) {
        let of = |name: &str| self.finished()[name].as_u64().unwrap_or(u64::MAX);
        (of("computed"), of("reused"), of("broken"))
    }

    /// The same of a step.
    pub fn counts_of(&self, step: &str) -> (u64, u64, u64) {
        let of = |name: &str| self.finished()["steps"][step][name].as_u64().unwrap_or(u64::MAX);
        (of("computed"), of("reused"), of("broken"))
    }

    /// Messages of broken parcels.
    pub fn broken(&self) -> Vec<String> {
        let broken = self.0.iter().filter(|e| e["event"] == "broken");
        broken.map(|e| e["message"].as_str().unwrap_or_default().to_owned()).collect()
    }
}

/// The number in the one row of a table in which the quantity is this.
///
/// # Panics
/// Where there is no such row or number.
pub fn number(table: &Table, quantity: &str, column: &str) -> f64 {
    let row = (0..table.rows()).find(|row| table.text("quantity", *row) == Some(quantity)).expect("a row");
    table.column(column).and_then(|c| c.cells.number(row)).expect("a number")
}
