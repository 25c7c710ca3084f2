//! The examples of plugins, built as their own pages say and far from this source tree, and used in pipelines. How the host takes them is tested
//! in `crates/host`.

use spinledger_terms::Table;
use spinledger_tests::program::{Desk, top};
use std::path::{Path, PathBuf};
use std::process::Command;
use std::sync::OnceLock;
use tempfile::TempDir;

/// Runs a command to its end.
fn succeed(command: &mut Command) {
    let output = command.output().unwrap_or_else(|error| panic!("{command:?}: {error}"));
    let said = [output.stdout, output.stderr].map(|bytes| String::from_utf8_lossy(&bytes).into_owned()).concat();
    assert!(output.status.success(), "{command:?}\n{said}");
}

/// The plugins, built once, and the folder that holds them.
fn built() -> &'static (PathBuf, PathBuf) {
    static BUILT: OnceLock<(TempDir, (PathBuf, PathBuf))> = OnceLock::new();
    &BUILT
        .get_or_init(|| {
            let folder = TempDir::new().expect("a folder");
            let libraries = (rust(folder.path()), c(folder.path()));
            (folder, libraries)
        })
        .1
}

/// The lattice in Rust: its folder is copied elsewhere, told where the SDK is, tested and built by the command on its page.
fn rust(folder: &Path) -> PathBuf {
    let (example, copy) = (top().join("plugins/examples/minimal-lattice"), folder.join("my-lattice"));
    std::fs::create_dir_all(copy.join("src")).expect("a folder can be made");
    std::fs::copy(example.join("src/lib.rs"), copy.join("src/lib.rs")).expect("a file can be copied");
    let manifest = std::fs::read_to_string(example.join("Cargo.toml")).expect("a manifest");
    assert!(manifest.contains("Build it with `cargo build --release`"), "the page names the command");
    let sdk = top().join("crates/sdk").canonicalize().expect("the SDK is there");
    let told = manifest.replace("../../../crates/sdk", &sdk.display().to_string());
    assert_ne!(told, manifest);
    std::fs::write(copy.join("Cargo.toml"), told).expect("a file can be written");
    // The versions that are here already, so that no network is needed.
    std::fs::copy(top().join("Cargo.lock"), copy.join("Cargo.lock")).expect("the lock file can be copied");
    let cargo = std::env::var_os("CARGO").unwrap_or_else(|| "cargo".into());
    // What is built stays for the next time; a plugin's author would find it in `target`.
    let target = top().join("target/test-plugins/stranger");
    for command in ["test", "build"] {
        let mut command_line = Command::new(&cargo);
        command_line.args([command, "--release", "--quiet"]).current_dir(&copy);
        succeed(command_line.env("CARGO_TARGET_DIR", &target));
    }
    let file = format!("{}minimal_lattice{}", std::env::consts::DLL_PREFIX, std::env::consts::DLL_SUFFIX);
    target.canonicalize().expect("it was built").join("release").join(file)
}

/// The observable in C: its file is copied elsewhere and compiled by the command in its first comment.
fn c(folder: &Path) -> PathBuf {
    let source = std::fs::read_to_string(top().join("plugins/examples/c-observable/neighbours.c")).expect("a source");
    let folder = folder.join("my-observable");
    std::fs::create_dir_all(&folder).expect("a folder can be made");
    std::fs::write(folder.join("neighbours.c"), &source).expect("a file can be written");
    let line = source.lines().find_map(|line| line.strip_prefix(" *     cc ")).expect("the page names the command");
    let line = line.replace("<spinledger>", &top().canonicalize().expect("the tree is there").display().to_string());
    let compiler = std::env::var_os("CC").unwrap_or_else(|| "cc".into());
    succeed(Command::new(compiler).args(line.split(' ')).current_dir(&folder));
    folder.join("neighbours.so")
}

/// Spins on a ladder of three rungs.
fn pipeline(head: &str) -> String {
    format!(
        "spinledger: 1
pipeline: examples
seed: 20261201
{head}steps:
  chains:
    does: sample
    lattice: {{ plugin: ladder, size: 3 }}
    model: {{ plugin: ising, coupling: {{ first.leg: 1, first.rung: 0.5 }} }}
    update: heat-bath
    observe: [energy, magnetisation, neighbour-product]
    temperature: 2
    equilibrate: 100
    measure: 10000
    chains: 2
  means: {{ does: averages, of: chains }}
"
    )
}

/// Exact means on the ladder at T = 2, over all 64 states: energy per site, |m|, the product over bonds.
fn exact() -> [f64; 3] {
    let legs = (0..3).flat_map(|x| [0, 1].map(|side| (2 * x + side, 2 * ((x + 1) % 3) + side, 1.0)));
    let bonds: Vec<(usize, usize, f64)> = legs.chain((0..3).map(|x| (2 * x, 2 * x + 1, 0.5))).collect();
    let mut sums = [0.0; 4];
    for state in 0..64_u32 {
        let spin = |site: usize| if state >> site & 1 == 0 { 1.0 } else { -1.0 };
        let energy: f64 = bonds.iter().map(|(i, j, coupling)| -coupling * spin(*i) * spin(*j)).sum();
        let product: f64 = bonds.iter().map(|(i, j, _)| spin(*i) * spin(*j)).sum();
        let m: f64 = (0..6).map(spin).sum();
        let weight = (-energy / 2.0).exp();
        let terms = [1.0, energy / 6.0, m.abs() / 6.0, product / 9.0];
        terms.iter().zip(&mut sums).for_each(|(term, sum)| *sum += weight * term);
    }
    [1, 2, 3].map(|k| sums[k] / sums[0])
}

/// Within 4.8 standard errors: three values, seeds fixed, false alarm once in 2e5.
fn near(means: &Table, quantity: &str, exact: f64) {
    let of = |column| spinledger_tests::program::number(means, quantity, column);
    let (value, error) = (of("value"), of("error"));
    assert!(error > 0.0 && (value - exact).abs() < 4.8 * error, "{quantity}: {value} +- {error}, exactly {exact}");
}

#[test]
fn examples_are_used_through_the_pipeline_and_through_the_environment() {
    let (lattice, observable) = built();
    let named = Desk::new();
    // Paths are relative to the pipeline's folder: one file by its path from there, one as a folder that holds it.
    std::fs::copy(lattice, named.path("ladder.so")).expect("a library can be copied");
    let folder = observable.parent().expect("a folder").display();
    named.write("examples.yaml", &pipeline(&format!("plugins: [./ladder.so, \"{folder}\"]\n")));
    named.run_pipeline("examples.yaml", &[], 0);

    let means = named.table("results/examples/means.parquet");
    let [energy, magnetisation, product] = exact();
    near(&means, "energy", energy);
    near(&means, "magnetisation_abs", magnetisation);
    near(&means, "neighbour_product", product);

    // The same through the environment: nothing else is found out, and the key, which has the files' hashes, is the same.
    let paths = std::env::join_paths([lattice, observable]).expect("paths").into_string().expect("text");
    let found = Desk::new().with("SPINLEDGER_PLUGINS", &paths);
    found.write("examples.yaml", &pipeline(""));
    found.run_pipeline("examples.yaml", &[], 0);
    assert!(named.parquet("results") == found.parquet("results"));
    let listed = found.run(&["plugins", "ladder"]);
    assert!(listed.status == Some(0) && listed.out.contains("foreign"), "{}{}", listed.out, listed.err);

    // Without either, `check` says what is missing.
    let lost = Desk::new();
    lost.write("examples.yaml", &pipeline(""));
    let ran = lost.run(&["check", "examples.yaml"]);
    assert_eq!(ran.status, Some(2));
    assert!(
        ran.err.contains("no lattice `ladder`") && ran.err.contains("no observable `neighbour-product`"),
        "{}",
        ran.err
    );
}
