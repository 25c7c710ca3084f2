//! Same pipeline, same results: for any number of workers and threads, for any order, for chains asked for in turns, and after any
//! interruption. Parquet files are compared byte by byte.

use spinledger_tests::program::Desk;
use std::collections::BTreeMap;
use std::time::Duration;

/// Every standard rule, two lattices, several blocks a chain (large lattices have short blocks).
fn pipeline(sizes: &str, chains: u32, measure: u64) -> String {
    // Blocks of the large lattice have 128 rows: a chain has some.
    let large = measure / 4;
    format!(
        r#"spinledger: 1
pipeline: same
seed: 11
steps:
  spins:
    does: sample
    lattice: {{ plugin: triangular, size: 4, boundary: [periodic, free] }}
    model: {{ plugin: ising, coupling: {{ first: 1, first.xy: 0.5 }} }}
    update: [heat-bath, {{ plugin: wolff, clusters: 2 }}, {{ plugin: metropolis, times: 2 }}]
    observe: [energy, magnetisation]
    scan: {{ lattice.size: {sizes}, temperature: [2.5, 3.0] }}
    equilibrate: 20
    measure: {measure}
    every: 3
    chains: {chains}
    start: both
  colours:
    does: sample
    lattice: {{ plugin: square, size: 128, boundary: [periodic, plus] }}
    model: {{ plugin: potts, q: 3 }}
    update: {{ plugin: metropolis, lanes: 64 }}
    observe: [energy, order-parameter]
    inverse_temperature: 0.9
    equilibrate: 5
    measure: 150
    every: 2
    chains: {chains}
  large:
    does: sample
    lattice: {{ plugin: square, size: 256, boundary: [antiperiodic, periodic] }}
    model: {{ plugin: ising, coupling: {{ first.x: 1, first.y: 0.7 }} }}
    update: metropolis
    observe: [energy, magnetisation]
    temperature: 2.0
    equilibrate: 500
    measure: {large}
    every: 16
    chains: {chains}
  means: {{ does: averages, of: spins }}
  more: {{ does: averages, of: colours }}
"#
    )
}

fn results(text: &str, options: &[&str]) -> BTreeMap<String, Vec<u8>> {
    let desk = Desk::new();
    desk.write("same.yaml", text);
    desk.run_pipeline("same.yaml", options, 0);
    desk.parquet("results")
}

#[test]
fn workers_and_threads_do_not_matter() {
    let text = pipeline("[3, 4]", 2, 800);
    let reference = results(&text, &["--workers", "1", "--threads", "1"]);
    assert!(reference.len() > 10);
    assert!(reference == results(&text, &["--workers", "2", "--threads", "1"]), "two workers");
    assert!(reference == results(&text, &["--workers", "1", "--threads", "4"]), "four threads");
}

#[test]
fn turns_do_not_matter() {
    let whole = pipeline("[3, 4]", 4, 800);
    let reference = results(&whole, &[]);
    let desk = Desk::new();
    // Fewer chains, then a part of the scan, then all: what is on record is a subset each time.
    for text in [pipeline("[4]", 2, 800), pipeline("[3]", 3, 300), whole] {
        desk.write("same.yaml", &text);
        desk.run_pipeline("same.yaml", &[], 0);
    }
    assert!(reference == desk.parquet("results"));
}

/// Twenty kills at moments spread over the first third of a second, of the runner with its workers or of one worker alone. Each run asks for more
/// than the one before, so that there is always something to be in the middle of; the last is let through.
#[test]
fn kills_do_not_matter() {
    const KILLS: u64 = 20;
    let text = |kill: u64| pipeline("[3, 4]", 4, 400 * (kill + 1));
    let desk = Desk::new();
    let mut state = 1u64;
    let mut unfinished = 0;
    for kill in 0..KILLS {
        desk.write("same.yaml", &text(kill));
        // Moments from a fixed sequence (Knuth's multiplier).
        state = state.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
        let wait = Duration::from_secs_f64(0.02 + 0.33 * ((state >> 33) as f64 / (1u64 << 31) as f64));
        let mut child = desk.start(&["run", "same.yaml", "--quiet"]);
        std::thread::sleep(wait);
        let pid = rustix::process::Pid::from_child(&child);
        if kill % 4 == 3 {
            kill_a_child_of(child.id());
        } else {
            // The group: runner and workers.
            let _ = rustix::process::kill_process_group(pid, rustix::process::Signal::KILL);
        }
        let status = child.wait().expect("the run ends");
        unfinished += u32::from(!status.success());
    }
    assert!(
        unfinished >= 10,
        "most kills came too late to prove anything: {unfinished} of {KILLS} runs were broken off"
    );
    let whole = text(KILLS);
    desk.write("same.yaml", &whole);
    desk.run_pipeline("same.yaml", &[], 0);
    assert!(results(&whole, &[]) == desk.parquet("results"), "the resumed results are not those of an undisturbed run");
    let again = desk.run_pipeline("same.yaml", &[], 0);
    assert_eq!(again.counts().0, 0);
}

/// Kills one worker of a runner, if it has one by now.
fn kill_a_child_of(pid: u32) {
    let children = std::fs::read_to_string(format!("/proc/{pid}/task/{pid}/children")).unwrap_or_default();
    let child = children.split_whitespace().next().and_then(|c| c.parse::<i32>().ok());
    if let Some(pid) = child.and_then(rustix::process::Pid::from_raw) {
        let _ = rustix::process::kill_process(pid, rustix::process::Signal::KILL);
    }
}

/// Two runs at once on one ledger: each entry is published once, and both end well with the same results.
#[test]
fn two_runs_share_a_ledger() {
    let text = pipeline("[3, 4]", 4, 1500);
    let reference = results(&text, &[]);
    let desk = Desk::new();
    desk.write("same.yaml", &text);
    let mut one = desk.start(&["run", "same.yaml", "--quiet", "--out", "one"]);
    let mut two = desk.start(&["run", "same.yaml", "--quiet", "--out", "two"]);
    assert!(one.wait().expect("one ends").success());
    assert!(two.wait().expect("two ends").success());
    let strip = |files: BTreeMap<String, Vec<u8>>| -> BTreeMap<String, Vec<u8>> {
        files.into_iter().map(|(name, bytes)| (name.trim_start_matches("same/").to_owned(), bytes)).collect()
    };
    let reference = strip(reference);
    assert!(reference == desk.parquet("one") && reference == desk.parquet("two"));
    // Each key has one journal line from its one publisher; a second writer adds none.
    let mut published: BTreeMap<String, u32> = BTreeMap::new();
    for (name, bytes) in desk.files(".spinledger/journal") {
        for line in String::from_utf8(bytes).expect("text").lines() {
            let line: serde_json::Value = serde_json::from_str(line).unwrap_or_else(|e| panic!("{name}: {e}"));
            if line["t"] == "block" {
                *published.entry(line["k"].as_str().expect("a key").to_owned()).or_default() += 1;
            }
        }
    }
    let entries = desk.files(".spinledger/entries").keys().filter(|name| name.ends_with("record.json")).count();
    assert!(entries > published.len(), "series and averages are entries too");
    assert!(desk.files(".spinledger/temporary").is_empty(), "nothing half-written is left");
}
