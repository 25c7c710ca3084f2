//! Plugin libraries for tests, built from `tests/plugins` once for a test program: with cargo into `target/test-plugins`, and with the C compiler.
//!
//! Also taken into the tests of `spinledger-host` by path, since that crate cannot depend on this one's dependencies: it uses `std` only.

use std::path::{Path, PathBuf};
use std::process::Command;
use std::sync::OnceLock;

/// The top of the source tree.
fn root() -> PathBuf {
    let here = Path::new(env!("CARGO_MANIFEST_DIR"));
    let is_root = |folder: &&Path| folder.join("tests/plugins/Cargo.toml").is_file();
    here.ancestors().find(is_root).expect("the source tree has tests/plugins").to_owned()
}

/// Where the libraries are built.
fn target() -> PathBuf {
    root().join("target/test-plugins")
}

/// Builds a workspace outside the project's own.
fn build(folder: &Path) {
    // The versions that the root pins, so that what is built there can be built here, also without a network. By way of
    // another name, since several test programs may do this at once.
    let lock = folder.join(format!("Cargo.lock.{}", std::process::id()));
    std::fs::copy(root().join("Cargo.lock"), &lock).expect("the lock file can be copied");
    std::fs::rename(&lock, folder.join("Cargo.lock")).expect("the lock file can be put in its place");
    let cargo = std::env::var_os("CARGO").unwrap_or_else(|| "cargo".into());
    let mut command = Command::new(cargo);
    command.args(["build", "--quiet", "--manifest-path"]).arg(folder.join("Cargo.toml"));
    let status = command.arg("--target-dir").arg(target()).status().expect("cargo runs");
    assert!(status.success(), "{} cannot be built", folder.display());
}

/// The file of a library that was built.
fn library(name: &str) -> PathBuf {
    let file = format!("{}{name}{}", std::env::consts::DLL_PREFIX, std::env::consts::DLL_SUFFIX);
    target().join("debug").join(file).canonicalize().expect("the library was built")
}

/// The two Rust libraries.
fn built() -> &'static (PathBuf, PathBuf) {
    static BUILT: OnceLock<(PathBuf, PathBuf)> = OnceLock::new();
    BUILT.get_or_init(|| {
        build(&root().join("tests/plugins"));
        (library("spinledger_test_forms"), library("spinledger_test_faulty"))
    })
}

/// The example of a plugin (`minimal-lattice`) with the lattice `ladder`, as its author would build it.
///
/// # Panics
/// Where it cannot be built.
pub fn minimal_lattice() -> &'static Path {
    static BUILT: OnceLock<PathBuf> = OnceLock::new();
    BUILT.get_or_init(|| {
        build(&root().join("plugins/examples/minimal-lattice"));
        library("minimal_lattice")
    })
}

/// A library (`test-forms`) with every kind of item and every form of energy: lattice `test-grid`; models `test-ising`, `test-four-spin`,
/// `test-rotor`, `test-chain-term`; rules `probe-pair`, `probe-factors`, `probe-vectors`, `probe-custom`; observables `probe-mean`,
/// `probe-overlap`.
///
/// # Panics
/// Where it cannot be built.
pub fn forms() -> &'static Path {
    &built().0
}

/// A library (`test-faulty`) whose update rules go wrong when they sweep: `faulty-panic`, `faulty-abort`, `faulty-null`, `faulty-loop`,
/// `faulty-garbage`, `faulty-tile` (in a parallel loop), `faulty-patient` (until it is asked to stop), `faulty-energy` (a wrong tally).
///
/// # Panics
/// Where it cannot be built.
pub fn faulty() -> &'static Path {
    &built().1
}

/// A library in C (`test-c-forms`): lattice `c-ring`; models `c-triple` (callbacks) and `c-factor`; rule `c-heat-bath`; observable `c-mean`.
///
/// # Panics
/// Where there is no C compiler.
pub fn c_forms() -> &'static Path {
    static BUILT: OnceLock<PathBuf> = OnceLock::new();
    BUILT.get_or_init(|| compile("tests/plugins/c/forms.c", "", "c-forms"))
}

/// The example of a plugin in C (`neighbours`) with the observable `neighbour-product`.
///
/// # Panics
/// Where there is no C compiler.
pub fn c_observable() -> &'static Path {
    static BUILT: OnceLock<PathBuf> = OnceLock::new();
    BUILT.get_or_init(|| compile("plugins/examples/c-observable/neighbours.c", "", "neighbours"))
}

/// A library in C with the lattice `pair-of-sites`, and with the one thing wrong with it that `switch` names (see `tests/plugins/c/variant.c`);
/// a proper one for an empty `switch`.
///
/// # Panics
/// Where there is no C compiler.
pub fn variant(switch: &str) -> PathBuf {
    compile("tests/plugins/c/variant.c", switch, &format!("variant-{}", switch.to_lowercase().replace('_', "-")))
}

/// Compiles a library, by way of another name, since several test programs may do this at once.
fn compile(source: &str, switch: &str, name: &str) -> PathBuf {
    let (root, folder) = (root(), target().join("c"));
    std::fs::create_dir_all(&folder).expect("a folder can be made");
    let file = folder.join(format!("{name}{}", std::env::consts::DLL_SUFFIX));
    let draft = folder.join(format!("{name}.{}.{:?}", std::process::id(), std::thread::current().id()));
    let compiler = std::env::var_os("CC").unwrap_or_else(|| "cc".into());
    let mut command = Command::new(compiler);
    command.args(["-shared", "-fPIC", "-std=c99", "-O1", "-ffp-contract=off", "-Wall", "-Wextra", "-Werror"]);
    if !switch.is_empty() {
        command.arg(format!("-D{switch}"));
    }
    command.arg("-I").arg(root.join("crates/abi/include")).arg(root.join(source));
    let status = command.arg("-o").arg(&draft).status().expect("a C compiler runs");
    assert!(status.success(), "{source} cannot be compiled with {switch:?}");
    std::fs::rename(&draft, &file).expect("the library can be put in its place");
    file
}

/// The first half of a library, as an interrupted copy leaves it, in `folder`.
///
/// # Panics
/// Where files cannot be read and written.
pub fn truncated(library: &Path, folder: &Path) -> PathBuf {
    let bytes = std::fs::read(library).expect("the library can be read");
    let file = folder.join(format!("truncated{}", std::env::consts::DLL_SUFFIX));
    std::fs::write(&file, &bytes[..bytes.len() / 2]).expect("a file can be written");
    file
}
