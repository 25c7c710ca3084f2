//! Only what changed runs: what is on record is used again, whatever moves in the YAML around it.

use spinledger_tests::program::Desk;
use std::time::Instant;

fn pipeline(temperatures: &str, measure: u64) -> String {
    format!(
        r#"spinledger: 1
pipeline: reuse
title: What is reused
seed: 7
steps:
  chains:
    does: sample
    lattice: {{ plugin: square, size: 4 }}
    model: {{ plugin: ising, coupling: 1 }}
    update: {{ plugin: metropolis }}
    observe: [energy, magnetisation]
    scan:
      lattice.size: [4, 6]
      temperature: {temperatures}
    equilibrate: 50
    measure: {measure}
    chains: 2
  means: {{ does: averages, of: chains }}
"#
    )
}

const THREE: &str = "[2.2, 2.26, 2.3]";

/// A desk on which the pipeline with three temperatures has run: 12 parcels of sampling, 6 of averages.
fn desk() -> Desk {
    let desk = Desk::new();
    desk.write("reuse.yaml", &pipeline(THREE, 200));
    let events = desk.run_pipeline("reuse.yaml", &[], 0);
    assert_eq!(events.counts_of("chains"), (12, 0, 0));
    assert_eq!(events.counts_of("means"), (6, 0, 0));
    desk
}

/// Writes a changed pipeline and expects how much of it is computed.
fn expect(desk: &Desk, text: &str, chains: (u64, u64, u64), means: (u64, u64, u64)) {
    desk.write("reuse.yaml", text);
    let events = desk.run_pipeline("reuse.yaml", &[], 0);
    assert_eq!(events.counts_of("chains"), chains, "chains of\n{text}");
    assert_eq!(events.counts_of("means"), means, "means of\n{text}");
}

#[test]
fn the_same_again_computes_nothing_at_once() {
    let desk = desk();
    let before = desk.files("results");
    let mut best = f64::INFINITY;
    for _ in 0..3 {
        let start = Instant::now();
        let events = desk.run_pipeline("reuse.yaml", &[], 0);
        best = best.min(start.elapsed().as_secs_f64());
        assert_eq!(events.counts(), (0, 18, 0));
    }
    assert!(best < 0.5, "nothing to do took {best} s");
    assert!(before == desk.files("results"), "nothing is written");
}

#[test]
fn one_more_temperature_computes_that_temperature() {
    expect(&desk(), &pipeline("[2.2, 2.26, 2.3, 2.4]", 200), (4, 12, 0), (2, 6, 0));
}

#[test]
fn counted_and_listed_values_are_one() {
    expect(&desk(), &pipeline("{ from: 2.2, to: 2.3, count: 6 }", 200), (12, 12, 0), (6, 6, 0));
}

#[test]
fn formatting_order_and_names_change_nothing() {
    let desk = desk();
    let nothing = ((0, 12, 0), (0, 6, 0));
    let text = pipeline(THREE, 200);
    expect(&desk, &text.replace("What is reused", "Another title"), nothing.0, nothing.1);
    expect(&desk, &pipeline("[2.3, 2.2, 2.26]", 200), nothing.0, nothing.1);
    expect(&desk, &text.replace("coupling: 1 ", "coupling: 1.0 ").replace("[4, 6]", "[6, 4]"), nothing.0, nothing.1);
    expect(&desk, &text.replace(", coupling: 1 ", " "), nothing.0, nothing.1);
    expect(&desk, &text.replace("update: { plugin: metropolis }", "update: [metropolis]"), nothing.0, nothing.1);
    // Keys in another order, block style for flow style.
    let other = r#"
steps:
  means:
    of: chains
    does: averages
  chains:
    measure: 200
    chains: 2
    equilibrate: 50
    temperature: 2.2
    scan:
      - temperature: [2.2]
        lattice.size: [4, 6]
      - lattice.size: [6]
        temperature: [2.26, 2.3]
      - lattice.size: [4]
        temperature: [2.26, 2.3, 2.2]
    observe:
      - energy
      - plugin: magnetisation
    update: metropolis
    model: ising
    lattice:
      boundary: periodic
      plugin: square
      size: 6
    does: sample
seed: 7
pipeline: reuse
spinledger: 1
"#;
    expect(&desk, other, nothing.0, nothing.1);
    // Another name of the step: other names in the events, nothing computed.
    desk.write(
        "reuse.yaml",
        &text.replace("chains:\n    does", "renamed:\n    does").replace("of: chains", "of: renamed"),
    );
    let events = desk.run_pipeline("reuse.yaml", &[], 0);
    assert_eq!((events.counts_of("renamed"), events.counts_of("means")), nothing);
    assert!(!desk.path("results/reuse/chains").exists(), "results of the old name are gone");
}

/// Twice the length goes on from where the chains stand, and equals a fresh run of that length to the byte.
#[test]
fn a_longer_run_appends() {
    let desk = desk();
    expect(&desk, &pipeline(THREE, 400), (12, 0, 0), (6, 0, 0));
    let fresh = Desk::new();
    fresh.write("reuse.yaml", &pipeline(THREE, 400));
    fresh.run_pipeline("reuse.yaml", &[], 0);
    assert!(desk.parquet("results") == fresh.parquet("results"), "extended and fresh differ");
    // It was continued and not done again: the updates on record of both halves are those of one run.
    let updates = |desk: &Desk| -> u64 {
        let journals = desk.files(".spinledger/journal");
        let lines = journals
            .values()
            .flat_map(|bytes| String::from_utf8_lossy(bytes).lines().map(String::from).collect::<Vec<_>>());
        lines.filter_map(|line| serde_json::from_str::<serde_json::Value>(&line).ok()?["u"].as_u64()).sum()
    };
    assert_eq!(updates(&desk), updates(&fresh));
    // And back: a shorter run is cut from what is on record.
    expect(&desk, &pipeline(THREE, 300), (0, 12, 0), (6, 0, 0));
    let fresh = Desk::new();
    fresh.write("reuse.yaml", &pipeline(THREE, 300));
    fresh.run_pipeline("reuse.yaml", &[], 0);
    assert!(desk.parquet("results") == fresh.parquet("results"), "cut and fresh differ");
}

/// What depends on a value runs again; what does not, does not.
#[test]
fn a_changed_analysis_leaves_chains_alone() {
    let desk = desk();
    let text = pipeline(THREE, 200).replace("seed: 7", "seed: 8");
    expect(&desk, &text, (12, 0, 0), (6, 0, 0));
    let more = pipeline(THREE, 200)
        + "  look:\n    does: compare\n    items:\n      - take: { step: means, quantity: energy, where: { size: 4, temperature: 2.26 } }\n        against: { lower: -2, upper: 0 }\n";
    desk.write("reuse.yaml", &more);
    let events = desk.run_pipeline("reuse.yaml", &[], 0);
    assert_eq!(
        (events.counts_of("chains"), events.counts_of("means"), events.counts_of("look")),
        ((0, 12, 0), (0, 6, 0), (1, 0, 0))
    );
    // Renaming the compared step changes the name of the row, which the user sees, and nothing else.
    let table = desk.table("results/reuse/look.parquet");
    assert_eq!(table.text("name", 0), Some("means.energy"));
    assert_eq!(table.text("verdict", 0), Some("agrees"));
}

/// Chains asked for later are added; those on record are used.
#[test]
fn more_chains_are_added() {
    let desk = desk();
    expect(&desk, &pipeline(THREE, 200).replace("chains: 2", "chains: 4"), (12, 12, 0), (6, 0, 0));
    let fresh = Desk::new();
    fresh.write("reuse.yaml", &pipeline(THREE, 200).replace("chains: 2", "chains: 4"));
    fresh.run_pipeline("reuse.yaml", &[], 0);
    assert!(desk.parquet("results") == fresh.parquet("results"));
}

/// Planning is staged: the temperatures of one step are those that another step's table holds.
#[test]
fn a_scan_follows_a_table() {
    let desk = desk();
    let text = pipeline(THREE, 200)
        + r#"  again:
    does: sample
    lattice: { plugin: square, size: 5 }
    model: ising
    update: heat-bath
    observe: [energy]
    scan: { temperature: { step: means } }
    equilibrate: 10
    measure: 50
    chains: 1
  second: { does: averages, of: again }
"#;
    desk.write("reuse.yaml", &text);
    let ran = desk.run(&["forecast", "reuse.yaml", "--json"]);
    assert_eq!(ran.status, Some(0), "{}", ran.err);
    let events = desk.run_pipeline("reuse.yaml", &[], 0);
    assert_eq!(events.counts_of("again"), (3, 0, 0), "each temperature once");
    let table = desk.table("results/reuse/second.parquet");
    let mut temperatures: Vec<f64> = table.numbers("temperature").unwrap().into_iter().flatten().collect();
    temperatures.dedup();
    assert_eq!(temperatures, [2.2, 2.26, 2.3]);
    let fresh = Desk::new();
    fresh.write("reuse.yaml", &text);
    let events = fresh.run_pipeline("reuse.yaml", &[], 0);
    assert_eq!(events.counts_of("again"), (3, 0, 0), "also when the table is made in the same run");
}

/// `--only` runs a step and what it needs.
#[test]
fn only_what_is_asked_for_runs() {
    let desk = Desk::new();
    desk.write("reuse.yaml", &pipeline(THREE, 200));
    let events = desk.run_pipeline("reuse.yaml", &["--only", "chains"], 0);
    assert_eq!(events.counts(), (12, 0, 0));
    assert!(!desk.path("results/reuse/means.parquet").exists());
    assert_eq!(desk.run(&["run", "reuse.yaml", "--only", "nothing"]).status, Some(2));
}
