//! Kept configurations: they are those that were measured, keeping changes nothing else, and chains that begin from them begin with exactly them.

use spinledger_terms::{Cells, Table};
use spinledger_tests::program::Desk;
use std::collections::{BTreeMap, BTreeSet};
use std::time::Duration;

fn pipeline(model: &str, observe: &str, more: &str) -> String {
    format!(
        "spinledger: 1\npipeline: keep\nseed: 3\nsteps:\n  spins:\n    does: sample\n    lattice: {{ plugin: square, size: [5, 6] }}\n    \
         model: {model}\n    update: heat-bath\n    observe: [energy, {observe}]\n    equilibrate: 10\n    every: 3\n{more}"
    )
}

const ISING: &str = "{ plugin: ising, coupling: { first.x: 1, first.y: 0.5 }, field: 0.25 }";

fn number(table: &Table, column: &str, row: usize) -> f64 {
    table.column(column).and_then(|c| c.cells.number(row)).unwrap_or_else(|| panic!("{column} in row {row}"))
}

/// Configurations by temperature (its bits), chain and sweep.
fn states(table: &Table) -> BTreeMap<(u64, i64, i64), Vec<f64>> {
    let mut states: BTreeMap<(u64, i64, i64), Vec<f64>> = BTreeMap::new();
    for row in 0..table.rows() {
        let key = (
            number(table, "temperature", row).to_bits(),
            number(table, "chain", row) as i64,
            number(table, "sweep", row) as i64,
        );
        let spins = states.entry(key).or_default();
        assert_eq!(number(table, "site", row) as usize, spins.len(), "sites in order");
        spins.push(number(table, "value", row));
    }
    states
}

/// Sum over the bonds of a periodic rectangle, the last direction fastest.
fn bonds(spins: &[f64], x: usize, y: usize, term: impl Fn(f64, f64, bool) -> f64) -> f64 {
    let at = |i: usize, j: usize| spins[i % x * y + j % y];
    (0..x * y)
        .map(|n| (n / y, n % y))
        .map(|(i, j)| term(at(i, j), at(i + 1, j), true) + term(at(i, j), at(i, j + 1), false))
        .sum()
}

/// Keys of entries of a kind, by the journals.
fn entries(desk: &Desk, kind: &str) -> BTreeSet<String> {
    let mut keys = BTreeSet::new();
    for (name, bytes) in desk.files(".spinledger/journal") {
        for line in String::from_utf8(bytes).expect("text").lines() {
            let line: serde_json::Value = serde_json::from_str(line).unwrap_or_else(|e| panic!("{name}: {e}"));
            if line["t"] == kind {
                keys.insert(line["k"].as_str().expect("a key").to_owned());
            }
        }
    }
    keys
}

/// Spin updates that are due, by the forecast.
fn updates_due(desk: &Desk, step: &str) -> f64 {
    let ran = desk.run(&["forecast", "keep.yaml", "--json"]);
    let forecast: serde_json::Value = serde_json::from_str(ran.out.lines().last().expect("a forecast")).expect("JSON");
    let steps = forecast["steps"].as_array().expect("steps").clone();
    steps.iter().find(|s| s["step"] == step).and_then(|s| s["updates"].as_f64()).expect("updates")
}

fn run(text: &str) -> Desk {
    let desk = Desk::new();
    desk.write("keep.yaml", text);
    desk.run_pipeline("keep.yaml", &[], 0);
    desk
}

/// Energy and order of a configuration, per site.
type Sums = fn(&[f64]) -> (f64, f64);

/// Energy and magnetisation of each kept configuration, summed here bond by bond, are those that were recorded at its sweep.
#[test]
fn kept_configurations_are_those_that_were_measured() {
    let more = "    scan: { temperature: [1.0, 3.0] }\n    measure: 20\n    chains: 2\n    keep: { every: 7 }\n";
    let cases: [(&str, &str, Sums); 2] = [
        (ISING, "magnetisation", |spins| {
            let energy =
                bonds(spins, 5, 6, |a, b, x| -a * b * if x { 1.0 } else { 0.5 }) - 0.25 * spins.iter().sum::<f64>();
            (energy / 30.0, spins.iter().sum::<f64>() / 30.0)
        }),
        ("{ plugin: potts, q: 4 }", "order-parameter", |spins| {
            let most = (0..4).map(|q| spins.iter().filter(|s| **s == f64::from(q)).count()).max().unwrap_or(0);
            (
                bonds(spins, 5, 6, |a, b, _| if a == b { -1.0 } else { 0.0 }) / 30.0,
                (4.0 * most as f64 / 30.0 - 1.0) / 3.0,
            )
        }),
    ];
    for (model, observe, of) in cases {
        let desk = run(&pipeline(model, observe, more));
        let table = desk.table("results/keep/spins.states.parquet");
        let names: Vec<&str> = table.columns.iter().map(|c| c.name.as_str()).collect();
        let expected = ["size", "size_x", "size_y", "temperature", "sites", "chain", "sweep", "site", "value"];
        assert_eq!(names, expected);
        assert!(["chain", "sweep", "site"].iter().all(|n| matches!(table.column(n).unwrap().cells, Cells::Integer(_))));
        let states = states(&table);
        // Two temperatures, two chains, rows 6 and 13 after 10 sweeps, three apart.
        assert_eq!(states.len(), 8);
        assert_eq!(states.keys().map(|k| k.2).collect::<BTreeSet<_>>(), BTreeSet::from([28, 49]));
        let column = if observe == "magnetisation" { "magnetisation" } else { "order" };
        let mut looked_at = 0;
        for file in desk.files("results/keep/spins").keys() {
            let series = desk.table(&format!("results/keep/spins/{file}"));
            for row in 0..series.rows() {
                let whole = |name: &str| number(&series, name, row) as i64;
                let key = (number(&series, "temperature", row).to_bits(), whole("chain"), whole("sweep"));
                let Some(spins) = states.get(&key) else { continue };
                let (energy, other) = of(spins);
                assert!((energy - number(&series, "energy", row)).abs() < 1e-12, "{model} {key:?}");
                assert!((other - number(&series, column, row)).abs() < 1e-12, "{model} {key:?}");
                looked_at += 1;
            }
        }
        assert_eq!(looked_at, 8);
        let different: BTreeSet<Vec<u64>> = states.values().map(|s| s.iter().map(|x| x.to_bits()).collect()).collect();
        assert!(different.len() > 4, "they are not all alike");
    }
}

/// Keeping can be asked for later, in any way: no block is recorded anew, series stay as they are, and configurations are those of keeping from the
/// start. That of the last measurement is at hand: nothing is swept for it.
#[test]
fn keeping_later_is_keeping_from_the_start() {
    let text = |measure: u64, update: &str, keep: &str| {
        let more = format!("    scan: {{ temperature: [1.0, 3.0] }}\n    measure: {measure}\n    chains: 3\n{keep}");
        pipeline(ISING, "magnetisation", &more).replace("heat-bath", update)
    };
    for update in ["heat-bath", "{ plugin: metropolis, lanes: 64 }", "[metropolis, { plugin: heat-bath, times: 2 }]"] {
        let desk = run(&text(200, update, ""));
        let (blocks, series) = (entries(&desk, "block"), desk.parquet("results/keep/spins"));
        assert!(entries(&desk, "state").is_empty() && !desk.path("results/keep/spins.states.parquet").exists());
        let parcels = if update.contains("64") { 2 } else { 6 };
        for (keep, due, kept) in [
            ("    keep: { states: last }\n", false, 6),
            ("    keep: { every: 60 }\n", true, 24),
            ("    keep: { every: 200 }\n", false, 24),
        ] {
            desk.write("keep.yaml", &text(200, update, keep));
            assert_eq!(updates_due(&desk, "spins") > 0.0, due, "{update} {keep}");
            let events = desk.run_pipeline("keep.yaml", &[], 0);
            let computed = if keep.contains("200") { 0 } else { parcels };
            assert_eq!(events.counts(), (computed, parcels - computed, 0), "{update} {keep}");
            assert_eq!(entries(&desk, "state").len(), kept, "{update} {keep}");
            assert_eq!(entries(&desk, "block"), blocks, "{update} {keep}");
            assert!(desk.parquet("results/keep/spins") == series, "{update} {keep}");
            let fresh = run(&text(200, update, keep));
            assert!(fresh.parquet("results") == desk.parquet("results"), "{update} {keep}");
            assert_eq!(desk.run_pipeline("keep.yaml", &[], 0).counts(), (0, parcels, 0), "{update} {keep}");
        }
        // Twice the length goes on, and keeps the new last one.
        for measure in [400, 300] {
            desk.write("keep.yaml", &text(measure, update, "    keep: { states: last }\n"));
            desk.run_pipeline("keep.yaml", &[], 0);
            let fresh = run(&text(measure, update, "    keep: { states: last }\n"));
            assert!(fresh.parquet("results") == desk.parquet("results"), "{update}: {measure} measurements");
        }
        desk.write("keep.yaml", &text(200, update, ""));
        desk.run_pipeline("keep.yaml", &[], 0);
        assert!(!desk.path("results/keep/spins.states.parquet").exists(), "what is not asked for is not shown");
    }
}

/// A configuration that is asked for from before the end of what is on record costs no later state: a longer run goes on from where the record ends.
#[test]
fn the_newest_state_stays() {
    let text = |measure: u64, keep: &str| {
        pipeline(
            ISING,
            "magnetisation",
            &format!("    temperature: 2.0\n    measure: {measure}\n    chains: 1\n{keep}"),
        )
    };
    let desk = run(&text(1000, ""));
    let state = desk.files(".spinledger/states");
    desk.write("keep.yaml", &text(100, "    keep: { states: last }\n"));
    desk.run_pipeline("keep.yaml", &[], 0);
    assert!(desk.files(".spinledger/states") == state);
}

/// Killed again and again on its way, the run ends with the same configurations.
#[test]
fn kills_do_not_matter() {
    const KILLS: u64 = 12;
    let text = |kill: u64| {
        let measure = 120 * (kill + 1);
        let more = format!(
            "    scan: {{ temperature: [1.0, 3.0] }}\n    measure: {measure}\n    chains: 4\n    keep: {{ every: 60 }}\n    start: both\n"
        );
        pipeline(ISING, "magnetisation", &more).replace("[5, 6]", "48")
    };
    let desk = Desk::new();
    let mut unfinished = 0;
    for kill in 0..KILLS {
        desk.write("keep.yaml", &text(kill));
        // Moments that are spread over a quarter of a second.
        unfinished +=
            u32::from(desk.killed(&["run", "keep.yaml", "--quiet"], Duration::from_millis(20 + kill * 83 % 250)));
    }
    assert!(unfinished >= 6, "most kills came too late to prove anything: {unfinished} of {KILLS}");
    let whole = text(KILLS);
    desk.write("keep.yaml", &whole);
    desk.run_pipeline("keep.yaml", &[], 0);
    assert!(run(&whole).parquet("results") == desk.parquet("results"));
    assert_eq!(desk.run_pipeline("keep.yaml", &[], 0).counts().0, 0);
}

fn two_steps(hot: &str, cold: &str, measure: u64) -> String {
    let step = |name: &str, more: &str| {
        format!(
            "  {name}:\n    does: sample\n    lattice: {{ plugin: square, size: 6 }}\n    model: ising\n    update: wolff\n    \
             observe: [energy, magnetisation]\n    scan: {{ lattice.size: [6, 8] }}\n{more}"
        )
    };
    let first = step(
        hot,
        &format!(
            "    temperature: 4.0\n    equilibrate: 5\n    measure: {measure}\n    chains: 2\n    keep: {{ states: last }}\n"
        ),
    );
    let second = step(
        cold,
        &format!(
            "    temperature: 2.0\n    equilibrate: 0\n    measure: 4\n    chains: 5\n    start: {{ step: {hot} }}\n    keep: {{ every: 1 }}\n"
        ),
    );
    // The order in the file does not matter.
    format!(
        "spinledger: 1\npipeline: keep\nseed: 3\nsteps:\n{second}{first}  means: {{ does: averages, of: {cold} }}\n"
    )
}

/// Chain c begins from the last configuration of chain c modulo the number of chains there, at the same size; keys see contents, not names.
#[test]
fn chains_begin_from_what_was_kept() {
    let desk = run(&two_steps("hot", "cold", 20));
    let by_size = |file: &str, sweep: i64| {
        let table = desk.table(file);
        let mut states: BTreeMap<(i64, i64), Vec<f64>> = BTreeMap::new();
        for row in (0..table.rows()).filter(|row| number(&table, "sweep", *row) as i64 == sweep) {
            let key = (number(&table, "size", row) as i64, number(&table, "chain", row) as i64);
            states.entry(key).or_default().push(number(&table, "value", row));
        }
        states
    };
    let (hot, cold) = (by_size("results/keep/hot.states.parquet", 24), by_size("results/keep/cold.states.parquet", 0));
    assert_eq!((hot.len(), cold.len()), (4, 10));
    for ((size, chain), spins) in &cold {
        assert_eq!(spins, &hot[&(*size, chain % 2)], "size {size}, chain {chain}");
    }
    // Chains that begin alike go their own ways.
    let later = by_size("results/keep/cold.states.parquet", 3);
    assert_ne!(later[&(8, 0)], later[&(8, 2)]);
    let kept = desk.parquet("results");
    desk.write("keep.yaml", &two_steps("warm", "quenched", 20));
    let events = desk.run_pipeline("keep.yaml", &[], 0);
    assert_eq!(events.counts(), (0, 16, 0), "names are in no key");
    let renamed: BTreeMap<String, Vec<u8>> = desk
        .parquet("results")
        .into_iter()
        .map(|(name, bytes)| (name.replace("warm", "hot").replace("quenched", "cold"), bytes))
        .collect();
    assert!(renamed == kept);
    // Another length there is another configuration here.
    desk.write("keep.yaml", &two_steps("warm", "quenched", 21));
    let events = desk.run_pipeline("keep.yaml", &[], 0);
    assert_eq!((events.counts_of("warm").0, events.counts_of("quenched").0), (4, 10));
}

/// Configurations that someone has removed break what would begin from them, with what to do, and nothing else.
#[test]
fn nothing_begins_from_what_was_removed() {
    let text = two_steps("hot", "cold", 20);
    let desk = run(&text);
    for state in entries(&desk, "state") {
        std::fs::remove_file(desk.path(&format!(".spinledger/entries/{}/{state}/main.parquet", &state[..2]))).unwrap();
    }
    desk.write("keep.yaml", &text.replace("chains: 5", "chains: 6"));
    let events = desk.run_pipeline("keep.yaml", &["--only", "cold"], 1);
    assert_eq!(events.counts_of("cold"), (0, 10, 2), "the sixth chain of each size");
    let messages = events.broken();
    assert_eq!(messages.len(), 2);
    assert!(messages.iter().all(|m| m.contains("is not on record; to have it made again, remove ")), "{messages:?}");
}
