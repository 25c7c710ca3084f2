//! Same pipeline, same results: for any number of workers and threads, for any order, for chains asked for in turns, and after any
//! interruption. Parquet files are compared byte by byte.

use spinledger_tests::program::Desk;
use std::collections::BTreeMap;
use std::time::{Duration, Instant};

/// Every standard rule, two lattices, several blocks a chain (large lattices have short blocks).
fn pipeline(sizes: &str, chains: u32, measure: u64) -> String {
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
    let text = pipeline("[3, 4]", 2, 300);
    let reference = results(&text, &["--workers", "1", "--threads", "1"]);
    assert!(reference.len() > 10);
    assert!(reference == results(&text, &["--workers", "2", "--threads", "1"]), "two workers");
    assert!(reference == results(&text, &["--workers", "1", "--threads", "4"]), "four threads");
}

#[test]
fn turns_do_not_matter() {
    let whole = pipeline("[3, 4]", 4, 300);
    let reference = results(&whole, &[]);
    let desk = Desk::new();
    // Fewer chains, then a part of the scan, then all: what is on record is a subset each time.
    for text in [pipeline("[4]", 2, 300), pipeline("[3]", 3, 100), whole] {
        desk.write("same.yaml", &text);
        desk.run_pipeline("same.yaml", &[], 0);
    }
    assert!(reference == desk.parquet("results"));
}

/// Twenty kills at moments spread over the run, of the runner with its workers or of one worker alone; then the run is let through.
#[test]
fn kills_do_not_matter() {
    let text = pipeline("[3, 4]", 4, 3000);
    let start = Instant::now();
    let reference = results(&text, &[]);
    let whole = start.elapsed();
    let desk = Desk::new();
    desk.write("same.yaml", &text);
    let mut state = 1u64;
    let mut unfinished = 0;
    for kill in 0..20 {
        // Moments from a fixed sequence (Knuth's multiplier), over about the time that the whole run takes.
        state = state.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
        let wait = Duration::from_secs_f64(whole.as_secs_f64() * 0.6 * ((state >> 33) as f64 / (1u64 << 31) as f64));
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
    assert!(unfinished >= 5, "most kills came too late to prove anything: {unfinished} of 20 runs were broken off");
    desk.run_pipeline("same.yaml", &[], 0);
    assert!(reference == desk.parquet("results"), "the resumed results are not those of an undisturbed run");
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
