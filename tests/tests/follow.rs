//! Sequences: each position begins where the one before was left, for any number of workers and after any interruption; what is appended is all that is
//! computed.

use spinledger_terms::Table;
use spinledger_tests::program::Desk;
use std::collections::{BTreeMap, BTreeSet};
use std::time::Duration;

fn pipeline(size: u32, scan: &str, more: &str) -> String {
    format!(
        "spinledger: 1\npipeline: follow\nseed: 9\nsteps:\n  loop:\n    does: sample\n    lattice: {{ plugin: square, size: {size} }}\n    model: ising\n    \
         update: metropolis\n    observe: [energy, magnetisation]\n    scan: {scan}\n{more}  means: {{ does: averages, of: loop }}\n"
    )
}

fn hysteresis(size: u32, measure: u64, fields: &str) -> String {
    let more = format!(
        "    temperature: 1.6\n    follow: model.field\n    equilibrate: 0\n    measure: {measure}\n    chains: 3\n    start: ordered\n"
    );
    pipeline(size, &format!("{{ model.field: {fields} }}"), &more)
}

const LOOP: &str = "[1.5, 0.75, 0, -0.75, -1.5, -0.75, 0, 0.75, 1.5]";

fn number(table: &Table, column: &str, row: usize) -> f64 {
    table.column(column).and_then(|c| c.cells.number(row)).unwrap_or_else(|| panic!("{column} in row {row}"))
}

/// Value of a quantity by position.
fn by_position(table: &Table, quantity: &str) -> Vec<f64> {
    let rows = (0..table.rows()).filter(|row| table.text("quantity", *row) == Some(quantity));
    let values: BTreeMap<i64, f64> =
        rows.map(|row| (number(table, "position", row) as i64, number(table, "value", row))).collect();
    assert!(values.keys().copied().eq(0..values.len() as i64), "positions from 0 on");
    values.into_values().collect()
}

fn run(text: &str, options: &[&str]) -> Desk {
    let desk = Desk::new();
    desk.write("follow.yaml", text);
    desk.run_pipeline("follow.yaml", options, 0);
    desk
}

fn blocks(desk: &Desk) -> BTreeSet<String> {
    let lines = desk.files(".spinledger/journal").into_values().map(|bytes| String::from_utf8(bytes).expect("text"));
    let lines: Vec<serde_json::Value> = lines
        .flat_map(|text| text.lines().map(|l| serde_json::from_str(l).expect("JSON")).collect::<Vec<_>>())
        .collect();
    lines.iter().filter(|l| l["t"] == "block").map(|l| l["k"].as_str().expect("a key").to_owned()).collect()
}

/// Down from infinite temperature: energies fall, parcels are chains, each size is a sequence of its own.
#[test]
fn annealing_from_infinite_temperature() {
    let scan = "{ lattice.size: [8, 12], inverse_temperature: [0, 0.2, 0.4, 0.6, 0.8] }";
    let more = "    follow: inverse_temperature\n    equilibrate: 50\n    measure: 400\n    chains: 2\n";
    let desk = Desk::new();
    desk.write("follow.yaml", &pipeline(8, scan, more));
    let events = desk.run_pipeline("follow.yaml", &[], 0);
    assert_eq!(events.counts_of("loop"), (4, 0, 0), "a parcel is a chain along the whole path");
    assert_eq!(events.counts_of("means"), (10, 0, 0));
    let table = desk.table("results/follow/means.parquet");
    let names: Vec<&str> = table.columns.iter().map(|c| c.name.as_str()).collect();
    assert_eq!(names[..5], ["size", "position", "inverse_temperature", "temperature", "sites"]);
    for size in [8.0, 12.0] {
        let rows: Vec<usize> = (0..table.rows()).filter(|r| number(&table, "size", *r) == size).collect();
        let energies: Vec<f64> = rows
            .iter()
            .filter(|row| table.text("quantity", **row) == Some("energy"))
            .map(|row| number(&table, "value", *row))
            .collect();
        assert_eq!(energies.len(), 5);
        assert!(energies[0].abs() < 0.1, "no order at infinite temperature: {energies:?}");
        assert!(energies.is_sorted_by(|a, b| a > b) && energies[4] < -1.9, "{energies:?}");
    }
}

/// A field that goes down and up again: at its zeros the magnetisation remembers where it came from. The same value twice is two positions.
#[test]
fn a_loop_remembers() {
    let desk = run(&hysteresis(16, 20, LOOP), &[]);
    let m = by_position(&desk.table("results/follow/means.parquet"), "magnetisation");
    assert_eq!(m.len(), 9);
    assert!(m[0] > 0.9 && m[2] > 0.8 && m[4] < -0.8 && m[6] < -0.8 && m[8] > 0.8, "{m:?}");
}

/// Each position begins with exactly the configuration that its predecessor left, also in chains that are advanced together, from both starts, and where
/// several rules make one sweep.
#[test]
fn each_position_begins_where_the_one_before_ended() {
    for (update, start) in [("{ plugin: metropolis, lanes: 64 }", "both"), ("[metropolis, wolff]", "random")] {
        let scan = "{ temperature: [3.0, 2.0, 2.5, 2.0] }";
        let more = format!(
            "    follow: temperature\n    equilibrate: 0\n    measure: 6\n    every: 2\n    chains: 2\n    start: {start}\n    keep: {{ every: 1 }}\n"
        );
        let desk = run(&pipeline(4, scan, &more).replace("update: metropolis", &format!("update: {update}")), &[]);
        let table = desk.table("results/follow/loop.states.parquet");
        let mut states: BTreeMap<(String, i64, i64, i64), Vec<f64>> = BTreeMap::new();
        for row in 0..table.rows() {
            let of = |name: &str| number(&table, name, row) as i64;
            let start = table.text("start", row).unwrap_or_default().to_owned();
            states
                .entry((start, of("chain"), of("position"), of("sweep")))
                .or_default()
                .push(number(&table, "value", row));
        }
        let starts: BTreeSet<String> = states.keys().map(|k| k.0.clone()).collect();
        assert_eq!(starts.len(), if start == "both" { 2 } else { 1 });
        assert_eq!(states.len(), starts.len() * 2 * 4 * 6);
        let mut moved = 0;
        for start in &starts {
            for chain in 0..2 {
                for position in 1..4 {
                    let at = |position: i64, sweep: i64| &states[&(start.clone(), chain, position, sweep)];
                    assert_eq!(
                        at(position, 0),
                        at(position - 1, 10),
                        "{update} {start} chain {chain} position {position}"
                    );
                    moved += usize::from(at(position, 0) != at(position, 10));
                }
            }
        }
        assert!(moved > 3, "chains move: {moved}");
    }
}

/// The same bits for one worker and two, and after kills at moments spread over the run.
#[test]
fn workers_and_kills_do_not_matter() {
    const KILLS: u64 = 12;
    let text =
        |kill: u64| hysteresis(96, 240 + kill, LOOP).replace("start: ordered", "start: both\n    keep: { every: 20 }");
    let whole = text(KILLS);
    let reference = run(&whole, &["--workers", "1"]).parquet("results");
    assert!(reference == run(&whole, &["--workers", "2"]).parquet("results"), "two workers");
    let desk = Desk::new();
    let mut unfinished = 0;
    for kill in 0..KILLS {
        // The last kills are on the way to what is asked for in the end.
        desk.write("follow.yaml", &text(if kill < 4 { kill } else { KILLS }));
        unfinished +=
            u32::from(desk.killed(&["run", "follow.yaml", "--quiet"], Duration::from_millis(20 + kill * 97 % 260)));
    }
    assert!(unfinished >= 5, "most kills came too late to prove anything: {unfinished} of {KILLS}");
    desk.write("follow.yaml", &whole);
    desk.run_pipeline("follow.yaml", &[], 0);
    assert!(reference == desk.parquet("results"), "after kills");
    assert_eq!(desk.run_pipeline("follow.yaml", &[], 0).counts().0, 0);
}

/// A position that is appended is the one thing that is computed; keeping configurations later records no block anew.
#[test]
fn only_what_is_appended_is_computed() {
    let short = "[1.5, 0, -1.5]";
    let desk = run(&hysteresis(8, 20, short), &[]);
    let before = blocks(&desk);
    assert_eq!(before.len(), 9, "three chains at three positions");
    let longer = "[1.5, 0, -1.5, 0]";
    desk.write("follow.yaml", &hysteresis(8, 20, longer));
    let forecast = desk.run(&["forecast", "follow.yaml", "--json"]);
    let forecast: serde_json::Value = serde_json::from_str(forecast.out.lines().last().unwrap()).unwrap();
    let step = &forecast["steps"][0];
    assert_eq!((step["parcels"].as_u64(), step["partial"].as_u64(), step["due"].as_u64()), (Some(3), Some(3), Some(0)));
    assert_eq!(step["updates"].as_f64(), Some(3.0 * 20.0 * 64.0), "one position of 20 sweeps");
    let events = desk.run_pipeline("follow.yaml", &[], 0);
    assert_eq!((events.counts_of("loop"), events.counts_of("means")), ((3, 0, 0), (1, 3, 0)));
    let after = blocks(&desk);
    assert!(after.is_superset(&before) && after.len() == 12);
    assert!(desk.parquet("results") == run(&hysteresis(8, 20, longer), &[]).parquet("results"));
    let keep = hysteresis(8, 20, longer).replace("start: ordered", "start: ordered\n    keep: { every: 8 }");
    desk.write("follow.yaml", &keep);
    assert_eq!(desk.run_pipeline("follow.yaml", &[], 0).counts_of("loop"), (3, 0, 0));
    assert_eq!(blocks(&desk), after, "no block is recorded anew");
    assert!(desk.parquet("results") == run(&keep, &[]).parquet("results"));
    let last = keep.replace("every: 8", "states: last");
    desk.write("follow.yaml", &last);
    assert_eq!(desk.run_pipeline("follow.yaml", &[], 0).counts_of("loop"), (0, 3, 0), "the last ones are there");
    // A position that is longer changes those behind it.
    desk.write("follow.yaml", &hysteresis(8, 21, longer));
    desk.run_pipeline("follow.yaml", &[], 0);
    assert!(desk.parquet("results") == run(&hysteresis(8, 21, longer), &[]).parquet("results"));
}

/// A quench: chains of one step go down a path from the configurations of another, and a third begins from a position of theirs.
#[test]
fn sequences_begin_from_kept_configurations_and_leave_some() {
    let text = "spinledger: 1\npipeline: follow\nseed: 9\nsteps:\n  hot: &hot\n    does: sample\n    lattice: { plugin: square, size: 8 }\n    model: ising\n    \
                update: metropolis\n    observe: [energy]\n    temperature: 5.0\n    equilibrate: 20\n    measure: 5\n    chains: 2\n    keep: { states: last }\n  \
                path:\n    <<: *hot\n    scan: { temperature: [3.0, 2.0, 3.0] }\n    follow: temperature\n    equilibrate: 0\n    start: { step: hot }\n    keep: { every: 1 }\n  \
                after:\n    <<: *hot\n    temperature: 3.0\n    equilibrate: 0\n    start: { step: path, where: { position: 2 } }\n    keep: { every: 1 }\n";
    let desk = run(text, &[]);
    let of = |file: &str, position: Option<i64>, sweep: i64| {
        let table = desk.table(&format!("results/follow/{file}.states.parquet"));
        let here = |row: &usize| {
            position.is_none_or(|p| number(&table, "position", *row) as i64 == p)
                && number(&table, "sweep", *row) as i64 == sweep
        };
        (0..table.rows()).filter(here).map(|row| number(&table, "value", row)).collect::<Vec<f64>>()
    };
    assert_eq!(of("hot", None, 24).len(), 128);
    assert_eq!(of("hot", None, 24), of("path", Some(0), 0));
    assert_eq!(of("path", Some(2), 4), of("after", None, 0));
    assert_ne!(of("path", Some(2), 0), of("after", None, 0));
    // Two points have the temperature of the third step, and none is named.
    desk.write("follow.yaml", &text.replace(", where: { position: 2 }", ""));
    let ran = desk.run(&["check", "follow.yaml"]);
    assert_eq!(ran.status, Some(2), "{}", ran.err);
    assert!(
        ran.err.contains("2 points of `path` with size 8 could be meant") && ran.err.contains("`position` (0, 2)"),
        "{}",
        ran.err
    );
}
