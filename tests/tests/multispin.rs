//! `multi-spin` in whole runs: the same bits with any instructions and any number of workers, chains that do not depend on how many were asked for, lanes
//! chosen by size, combinations that are refused, and averages that are those of another rule.

use serde_json::Value as Json;
use spinledger_ledger::Ledger;
use spinledger_tests::program::{Desk, number};
use std::collections::BTreeMap;

/// What chooses instructions.
const VARIABLE: &str = "SPINLEDGER_SIMD";

/// Both layouts, two, three and six neighbours more, rims and seams, one and several blocks.
fn pipeline(chains: u32) -> String {
    let step = |name: &str, lattice: &str, model: &str, more: &str| {
        format!(
            "  {name}:
    does: sample
    lattice: {{ {lattice} }}
    model: {model}
    update: multi-spin
    observe: [energy, magnetisation]
    equilibrate: 10
    chains: {chains}
    {more}
  {name}-means: {{ does: averages, of: {name} }}
"
        )
    };
    let anti = "{ plugin: ising, coupling: -1 }";
    let mut text = "spinledger: 1\npipeline: multispin\nseed: 5\nsteps:\n".to_owned();
    text += &step("packed", "plugin: square, size: 64", "ising", "temperature: 2.3\n    measure: 3000\n    every: 2");
    text += &step("cubic", "plugin: cubic, size: 16", anti, "temperature: 4.6\n    measure: 300");
    text += &step(
        "odd",
        "plugin: square, size: [5, 3]",
        "ising",
        "scan: { temperature: [0.9, 2.3, 60] }\n    measure: 400",
    );
    let edges = "plugin: square, size: [4, 6], boundary: [antiperiodic, plus]";
    text += &step("edges", edges, "ising", "temperature: 2\n    measure: 300\n    start: both");
    text += &step("triangular", "plugin: triangular, size: 6", anti, "inverse_temperature: 0.4\n    measure: 300");
    text
}

fn results(desk: Desk, chains: u32, options: &[&str]) -> BTreeMap<String, Vec<u8>> {
    desk.write("multispin.yaml", &pipeline(chains));
    desk.run_pipeline("multispin.yaml", options, 0);
    desk.parquet("results")
}

#[test]
fn instructions_and_workers_do_not_matter() {
    let reference = results(Desk::new().with(VARIABLE, "portable"), 3, &["--workers", "1"]);
    assert!(reference.len() > 10);
    assert!(reference == results(Desk::new(), 3, &["--workers", "2"]), "what this processor has, two workers");
    #[cfg(target_arch = "x86_64")]
    for (word, there) in [("avx2", is_x86_feature_detected!("avx2")), ("avx512", is_x86_feature_detected!("avx512f"))] {
        if there {
            assert!(reference == results(Desk::new().with(VARIABLE, word), 3, &["--workers", "2"]), "{word}");
        }
    }
}

#[test]
fn words_that_name_no_instructions_break_parcels() {
    let desk = Desk::new().with(VARIABLE, "mmx");
    desk.write("multispin.yaml", &pipeline(1));
    let broken = desk.run_pipeline("multispin.yaml", &[], 1).broken();
    assert!(
        broken.iter().any(|text| text.contains("SPINLEDGER_SIMD is `mmx`") && text.contains("avx512")),
        "{broken:?}"
    );
}

/// First 2 chains, then 600: more than one group of 512.
#[test]
fn chains_do_not_depend_on_how_many_were_asked_for() {
    let text = |chains: u32| {
        format!(
            "spinledger: 1
pipeline: many
seed: 9
steps:
  chains:
    does: sample
    lattice: {{ plugin: square, size: 6 }}
    model: ising
    update: multi-spin
    observe: [energy, magnetisation]
    temperature: 2.3
    equilibrate: 5
    measure: 20
    chains: {chains}
"
        )
    };
    let (turns, once) = (Desk::new(), Desk::new());
    turns.write("many.yaml", &text(2));
    turns.run_pipeline("many.yaml", &[], 0);
    turns.write("many.yaml", &text(600));
    turns.run_pipeline("many.yaml", &[], 0);
    once.write("many.yaml", &text(600));
    once.run_pipeline("many.yaml", &[], 0);
    assert!(turns.parquet("results") == once.parquet("results"));
}

/// The preimages of the chains' keys by step, joined.
fn preimages(desk: &Desk, pipeline: &str) -> BTreeMap<String, String> {
    let ledger = Ledger::open(&desk.path(".spinledger")).expect("a ledger");
    let read = std::fs::read_to_string(desk.path(&format!("results/{pipeline}/record.json"))).expect("a record");
    let record: Json = serde_json::from_str(&read).expect("JSON");
    let mut found: BTreeMap<String, String> = BTreeMap::new();
    for file in record["files"].as_array().expect("files") {
        let key = file["key"].as_str().expect("a key").parse().expect("a key");
        let series = ledger.read_record(&key).expect("a record");
        for input in &series.provenance.inputs {
            let block = ledger.read_record(&input.key).expect("a record");
            *found.entry(file["step"].as_str().expect("a step").to_owned()).or_default() += &block.preimage;
        }
    }
    found
}

#[test]
fn lanes_are_chosen_by_size_and_recorded() {
    let desk = Desk::new();
    desk.write("multispin.yaml", &pipeline(1));
    desk.run_pipeline("multispin.yaml", &[], 0);
    let preimages = preimages(&desk, "multispin");
    for (step, lanes) in [("packed", 1), ("cubic", 1), ("odd", 512), ("edges", 512), ("triangular", 512)] {
        let preimage = &preimages[step];
        for written in [format!(r#""lanes":{lanes},"#), format!(r#""parameters":{{"lanes":{lanes}}}"#)] {
            assert!(preimage.contains(&written), "{step}: {preimage}");
        }
    }
    // Written out, it is the same chain.
    let text = pipeline(1).replace(
        "size: 64 }\n    model: ising\n    update: multi-spin",
        "size: 64 }\n    model: ising\n    update: { plugin: multi-spin, lanes: 1 }",
    );
    assert!(text.contains("lanes: 1"));
    desk.write("multispin.yaml", &text);
    assert_eq!(desk.run_pipeline("multispin.yaml", &[], 0).counts().0, 0, "nothing is computed again");
}

#[test]
fn what_is_not_served_is_refused() {
    let text = |lattice: &str, model: &str, update: &str| {
        format!(
            "spinledger: 1
pipeline: refused
seed: 1
steps:
  chains:
    does: sample
    lattice: {{ plugin: {lattice} }}
    model: {model}
    update: {{ plugin: multi-spin{update} }}
    observe: [energy]
    temperature: 2.3
    measure: 20
"
        )
    };
    let desk = Desk::new();
    let others = ["heat-bath", "metropolis"];
    for (lattice, model, update, place, parts) in [
        (
            "square, size: 8",
            "{ plugin: ising, field: 0.1 }",
            "",
            "9:13",
            &["`multi-spin` cannot serve the model `ising`", "`field` is nonzero"][..],
        ),
        (
            "square, size: 8",
            "{ plugin: potts, q: 3 }",
            "",
            "9:13",
            &["`multi-spin` cannot serve the model `potts`", "at most 2 states, here are 3"],
        ),
        (
            "square, size: 8",
            "{ plugin: ising, coupling: { first.x: 1, first.y: 0.5 } }",
            "",
            "9:13",
            &["couplings of one strength", "`coupling` is uneven", "wolff"],
        ),
        ("square, size: 8", "{ plugin: ising, coupling: { first.x: 1 } }", "", "9:13", &["`coupling` is uneven"]),
        (
            "square, size: 100",
            "ising",
            ", lanes: 1",
            "9:42",
            &["cannot pack this lattice by sites", "a size of 100", "`lanes: 512`", "96 or 128"],
        ),
        ("square, size: [32, 32]", "ising", ", lanes: 1", "9:42", &["a size of 32 x 32", "32 x 64"]),
        ("cubic, size: 8", "ising", ", lanes: 1", "9:42", &["a size of 8", "16"]),
        (
            "square, size: 64, boundary: [periodic, free]",
            "ising",
            ", lanes: 1",
            "9:42",
            &["some boundary is not periodic", "`lanes: 512`"],
        ),
        ("square, size: 8", "ising", ", lanes: 64", "9:42", &["64"]),
    ] {
        desk.write("refused.yaml", &text(lattice, model, update));
        let ran = desk.run(&["check", "refused.yaml"]);
        assert_eq!(ran.status, Some(2), "{lattice} {model} {update}: {}", ran.err);
        let said = format!("{}{}", ran.out, ran.err);
        assert!(said.contains(&format!("refused.yaml:{place}:")), "{lattice} {model} {update}: {said}");
        let rules = if update == ", lanes: 64" { &[][..] } else { &others[..] };
        // Long lines are broken, and what is expected stands behind a mark.
        let said = said.lines().map(|line| line.trim().trim_start_matches(':').trim()).collect::<Vec<_>>().join(" ");
        for part in parts.iter().chain(rules) {
            assert!(said.contains(part), "`{part}` is not in: {said}");
        }
    }
    for (lattice, model, update) in [
        ("square, size: 8", "{ plugin: ising, coupling: { first: -1 } }", ""),
        ("square, size: 64", "{ plugin: ising, coupling: { first.x: 1, first.y: 1 } }", ", lanes: 1"),
        ("square, size: 7, boundary: free", "{ plugin: potts, q: 2 }", ""),
    ] {
        desk.write("refused.yaml", &text(lattice, model, update));
        let ran = desk.run(&["check", "refused.yaml"]);
        assert_eq!(ran.status, Some(0), "{lattice} {model} {update}: {}{}", ran.out, ran.err);
    }
}

/// One lattice packed by sites against clusters, below and above the critical point: ten comparisons, of which one deviates by more than 4.5
/// standard errors with a probability of 7e-5.
#[test]
fn averages_are_those_of_a_cluster_rule() {
    let step = |name: &str, temperature: f64, update: &str, more: &str| {
        format!(
            "  {name}:
    does: sample
    lattice: {{ plugin: square, size: 64 }}
    model: ising
    update: {update}
    observe: [energy, magnetisation]
    temperature: {temperature}
    start: ordered
    {more}
  {name}-means: {{ does: averages, of: {name} }}
"
        )
    };
    let mut text = "spinledger: 1\npipeline: both\nseed: 3\nsteps:\n".to_owned();
    for (name, temperature) in [("cold", 2.2), ("warm", 2.4)] {
        let bits = "equilibrate: 20000\n    measure: 100000\n    every: 40\n    chains: 4";
        text += &step(&format!("{name}-bits"), temperature, "multi-spin", bits);
        let clusters = "equilibrate: 200\n    measure: 30000\n    chains: 4";
        text += &step(&format!("{name}-clusters"), temperature, "swendsen-wang", clusters);
    }
    let desk = Desk::new();
    desk.write("both.yaml", &text);
    desk.run_pipeline("both.yaml", &[], 0);
    for name in ["cold", "warm"] {
        let [bits, clusters] =
            ["bits", "clusters"].map(|rule| desk.table(&format!("results/both/{name}-{rule}-means.parquet")));
        // Above the critical point m^2 of one lattice is as broad as its mean.
        let broad = if name == "warm" { 1e-2 } else { 2e-3 };
        for (quantity, precision) in [
            ("energy", 3e-4),
            ("heat_capacity", 2e-2),
            ("magnetisation_abs", broad),
            ("magnetisation_squared", 2.0 * broad),
            ("binder", 5.0 * broad),
        ] {
            let [(a, da), (b, db)] =
                [&bits, &clusters].map(|table| (number(table, quantity, "value"), number(table, quantity, "error")));
            let error = da.hypot(db);
            assert!((a - b).abs() < 4.5 * error, "{name} {quantity}: {a} +- {da} and {b} +- {db}");
            assert!(error < precision * b.abs(), "{name} {quantity}: {:.1e} is not fine enough", error / b.abs());
        }
    }
}
