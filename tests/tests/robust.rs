//! What goes wrong around a pipeline: disks, folders, other ledgers, lengths without sense, steps that cannot be concluded. Each is told plainly,
//! and costs no more than it must.

use spinledger_ledger::read_table;
use spinledger_terms::Cells;
use spinledger_tests::program::{Desk, Events, program};
use std::collections::BTreeSet;
use std::process::Command;

fn pipeline(sample: &str, steps: &str) -> String {
    format!(
        "spinledger: 1\npipeline: robust\nseed: 5\nsteps:\n  chains:\n    does: sample\n    lattice: {{ plugin: square, size: 4 }}\n    \
         model: ising\n    update: metropolis\n    observe: [energy, magnetisation]\n    chains: 2\n{sample}{steps}"
    )
}

fn scanned(measure: u64) -> String {
    pipeline(
        &format!(
            "    equilibrate: 20\n    measure: {measure}\n    scan: {{ lattice.size: [4, 6], temperature: [2.0, 2.5, 3.0] }}\n"
        ),
        "  means: { does: averages, of: chains }\n  tc: { does: crossing, of: chains }\n",
    )
}

/// A run that is cut from a longer one is that of its own length to the byte, keys of all analyses included.
#[test]
fn a_shorter_run_is_cut_from_a_longer_one() {
    let desk = Desk::new();
    for measure in [400, 300] {
        desk.write("robust.yaml", &scanned(measure));
        desk.run_pipeline("robust.yaml", &[], 0);
    }
    let fresh = Desk::new();
    fresh.write("robust.yaml", &scanned(300));
    fresh.run_pipeline("robust.yaml", &[], 0);
    let (cut, short) = (desk.parquet("results"), fresh.parquet("results"));
    assert!(short.contains_key("robust/tc.parquet"));
    let differ: Vec<&String> =
        short.iter().filter(|(name, bytes)| cut.get(*name) != Some(bytes)).map(|(n, _)| n).collect();
    assert!(differ.is_empty() && cut.len() == short.len(), "{differ:?}");
}

/// A column that changes its unit and keeps its values is written anew.
#[test]
fn units_of_unchanged_columns_are_written() {
    let desk = Desk::new();
    let unit = |units: &str| {
        let sample = "    equilibrate: 5\n    measure: 20\n    temperature: 30\n    scan: { model.field: [0.0] }\n";
        let text = pipeline(sample, "  means: { does: averages, of: chains }\n");
        desk.write("robust.yaml", &text.replacen("seed: 5", &format!("seed: 5\nunits: {units}"), 1));
        desk.run_pipeline("robust.yaml", &[], 0);
        let folder = desk.path("results/robust/chains");
        let file = std::fs::read_dir(folder).unwrap().next().unwrap().unwrap().path();
        let units: Vec<String> = [read_table(&file).unwrap(), desk.table("results/robust/means.parquet")]
            .iter()
            .map(|table| table.column("field").unwrap().unit.clone())
            .collect();
        units
    };
    assert_eq!(unit("meV"), ["meV", "meV"]);
    assert_eq!(unit("{ energy: meV, moment: 2 }"), ["T", "T"]);
}

/// `equilibrate: auto` and `equilibrate: 0` record the same chains; only the first lets analyses leave out their beginning.
#[test]
fn leaving_out_the_beginning_is_up_to_analyses() {
    let desk = Desk::new();
    let run = |equilibrate: &str| {
        let sample =
            format!("    equilibrate: {equilibrate}\n    measure: 2000\n    temperature: 0.5\n    start: random\n");
        desk.write(
            "robust.yaml",
            &pipeline(&sample, "  means: { does: averages, of: chains }\n").replace("size: 4", "size: 24"),
        );
        let events = desk.run_pipeline("robust.yaml", &[], 0);
        let table = desk.table("results/robust/means.parquet");
        (events.counts_of("chains"), spinledger_tests::program::number(&table, "energy", "value"))
    };
    let (auto, zero) = (run("auto"), run("0"));
    assert_eq!((auto.0, zero.0), ((2, 0, 0), (0, 2, 0)));
    assert!(auto.1 < zero.1, "the hot beginning is left out: {} and {}", auto.1, zero.1);
}

/// `--only` leaves the results of other steps where they are.
#[test]
fn only_removes_nothing_of_other_steps() {
    let desk = Desk::new();
    desk.write("robust.yaml", &scanned(50));
    desk.run_pipeline("robust.yaml", &[], 0);
    let before = desk.parquet("results");
    desk.run_pipeline("robust.yaml", &["--only", "chains"], 0);
    assert!(before == desk.parquet("results"));
    desk.write("robust.yaml", &scanned(50).replace("  tc: { does: crossing, of: chains }\n", ""));
    desk.run_pipeline("robust.yaml", &["--only", "chains"], 0);
    assert!(!desk.path("results/robust/tc.parquet").exists(), "a step that is gone from the pipeline");
    assert!(desk.path("results/robust/means.parquet").exists());
}

/// Chains and points of a run that was killed before its end do not stay among those of the next.
#[test]
fn nothing_of_a_killed_run_stays_in_a_dataset() {
    let desk = Desk::new();
    let text = pipeline(
        "    equilibrate: 5\n    measure: 20\n    scan: { temperature: [2.0, 2.5] }\n",
        "  slow:\n    does: sample\n    of: nothing\n",
    );
    // The second step runs for ever behind the first, whose files are there by then.
    let slow = "  slow:\n    does: sample\n    lattice: { plugin: square, size: 64 }\n    model: ising\n    update: metropolis\n    observe: [energy]\n    \
                measure: 100000000\n    chains: 1\n    scan: { temperature: { step: means, where: { temperature: 2.0 } } }\n";
    let text = text.replace(
        "  slow:\n    does: sample\n    of: nothing\n",
        &format!("  means: {{ does: averages, of: chains }}\n{slow}"),
    );
    let text = text.replace("step: means, where", "step: means, column: temperature, where");
    desk.write("robust.yaml", &text);
    let mut child = desk.start(&["run", "robust.yaml", "--quiet"]);
    let file = desk.path("results/robust/chains/size-4_temperature-2.parquet");
    let other = desk.path("results/robust/chains/size-4_temperature-2.0.parquet");
    let begun = std::time::Instant::now();
    while !desk.path("results/robust/means.parquet").exists() {
        assert!(begun.elapsed().as_secs() < 60, "the first steps end");
        std::thread::sleep(std::time::Duration::from_millis(20));
    }
    let _ =
        rustix::process::kill_process_group(rustix::process::Pid::from_child(&child), rustix::process::Signal::KILL);
    child.wait().unwrap();
    assert!(file.exists() || other.exists(), "{:?}", desk.files("results").keys().collect::<Vec<_>>());
    std::fs::write(desk.path("results/robust/chains/mine.txt"), "mine").unwrap();
    desk.write("robust.yaml", &pipeline("    equilibrate: 5\n    measure: 20\n    scan: { temperature: [2.5] }\n", ""));
    desk.run_pipeline("robust.yaml", &[], 0);
    let names: Vec<String> = desk.files("results/robust").into_keys().collect();
    assert_eq!(names, ["chains/mine.txt", "chains/size-4_temperature-2.5.parquet", "record.json"]);
}

/// A disk that fails stops the run and breaks no parcel; with room again it goes on to the same results. The limit of file size stands for the
/// disk: with its signal ignored, writes fail as they do on a full one.
#[test]
fn a_disk_that_fails_breaks_nothing() {
    let text = pipeline(
        "    equilibrate: 5\n    measure: 20000\n    scan: { temperature: [2.0, 2.2, 2.4, 2.6] }\n",
        "  means: { does: averages, of: chains }\n",
    )
    .replace("size: 4", "size: 32");
    let desk = Desk::new();
    let path = desk.write("robust.yaml", &text);
    let limited = |blocks: u32| {
        let shell = format!("trap '' XFSZ; ulimit -f {blocks}; exec \"$0\" run robust.yaml --json");
        let mut command = Command::new("sh");
        command.arg("-c").arg(shell).arg(program()).current_dir(path.parent().unwrap());
        command.env_remove("SPINLEDGER_LEDGER").env_remove("SPINLEDGER_PLUGINS");
        let output = command.output().expect("sh starts");
        assert_eq!(output.status.code(), Some(1));
        (String::from_utf8(output.stdout).unwrap(), String::from_utf8(output.stderr).unwrap())
    };
    let (out, err) = limited(20);
    let ran = spinledger_tests::program::Ran { status: Some(1), out, err };
    let events = Events::of(&ran);
    assert_eq!(events.counts().2, 0, "no parcel is broken: {:?}", events.broken());
    assert!(ran.err.starts_with("stopped early: cannot "), "{}", ran.err);
    assert!(ran.err.contains("the same command goes on from there"), "{}", ran.err);
    desk.run_pipeline("robust.yaml", &[], 0);
    let fresh = Desk::new();
    fresh.write("robust.yaml", &text);
    fresh.run_pipeline("robust.yaml", &[], 0);
    assert!(desk.parquet("results") == fresh.parquet("results"));
}

/// Where entries were removed from the ledger, what needs them breaks and says how to have them made again; that computes what is missing and
/// nothing else.
#[test]
fn removed_entries_are_made_again_on_advice() {
    let desk = Desk::new();
    desk.write("robust.yaml", &scanned(60));
    desk.run_pipeline("robust.yaml", &[], 0);
    let before = desk.parquet("results");
    let mut removed = 0;
    for name in "01234567".chars() {
        for folder in std::fs::read_dir(desk.path(".spinledger/entries")).unwrap() {
            let folder = folder.unwrap().path();
            if folder.file_name().unwrap().to_str().unwrap().starts_with(name) {
                std::fs::remove_dir_all(folder).unwrap();
                removed += 1;
            }
        }
    }
    assert!(removed > 3);
    std::fs::remove_dir_all(desk.path("results")).unwrap();
    let events = desk.run_pipeline("robust.yaml", &[], 1);
    let broken = events.broken();
    assert!(!broken.is_empty() && broken.iter().all(|message| message.contains(".spinledger/journal")), "{broken:?}");
    std::fs::remove_dir_all(desk.path(".spinledger/journal")).unwrap();
    let events = desk.run_pipeline("robust.yaml", &[], 0);
    let (computed, reused, _) = events.counts();
    assert!(computed > 0 && reused > 0, "{computed} computed, {reused} reused");
    assert!(before == desk.parquet("results"));
}

/// What stands in the way of results or ledger is told before anything is computed.
#[test]
fn folders_that_cannot_be_used_are_told_first() {
    let desk = Desk::new();
    desk.write("robust.yaml", &scanned(20));
    desk.write("results", "a file in the way");
    let ran = desk.run(&["run", "robust.yaml"]);
    assert_eq!(ran.status, Some(2), "{}", ran.err);
    assert!(ran.err.contains("the results cannot be written to results/robust"), "{}", ran.err);
    assert!(desk.files(".spinledger/entries").is_empty());
    std::fs::write(desk.path(".spinledger/format"), "spinledger ledger 9\n").unwrap();
    for command in ["run", "forecast"] {
        let ran = desk.run(&[command, "robust.yaml"]);
        assert_eq!(ran.status, Some(2), "{}", ran.err);
        assert!(ran.err.contains("`spinledger ledger 9`, which this release cannot read"), "{}", ran.err);
    }
}

/// Lengths that cannot be counted and temperatures without a reciprocal are found by `check`.
#[test]
fn numbers_without_sense_are_refused() {
    let cases = [
        ("    temperature: 2\n    measure: 9000000000000000000\n    every: 1000\n", "more sweeps than can be counted"),
        ("    temperature: 2\n    measure: 9223372036854775807\n", "more sweeps than can be counted"),
        (
            "    temperature: 2\n    measure: 10\n    equilibrate: 9223372036854775807\n    settle: 9223372036854775807\n",
            "more sweeps",
        ),
        ("    temperature: 2\n    measure: 1000000000000000\n", "more blocks than can be numbered"),
        ("    temperature: 1e-320\n    measure: 10\n", "no number has the reciprocal of this temperature"),
        (
            "    inverse_temperature: 1e-320\n    measure: 10\n",
            "no number has the reciprocal of this inverse temperature",
        ),
    ];
    for (sample, message) in cases {
        let desk = Desk::new();
        desk.write("robust.yaml", &pipeline(sample, ""));
        for command in ["check", "forecast"] {
            let ran = desk.run(&[command, "robust.yaml"]);
            assert_eq!(ran.status, Some(2), "{sample}{}", ran.err);
            assert!(ran.err.starts_with("robust.yaml:") && ran.err.contains(message), "{sample}{}", ran.err);
        }
    }
    let desk = Desk::new();
    desk.write(
        "robust.yaml",
        &pipeline(
            "    inverse_temperature: 0\n    measure: 50\n    chains: 1\n",
            "  means: { does: averages, of: chains }\n",
        )
        .replacen("    chains: 2\n", "", 1),
    );
    desk.run_pipeline("robust.yaml", &[], 0);
}

/// Comparisons that can never be decided are found by `check`, all at once.
#[test]
fn comparisons_without_sense_are_refused() {
    let desk = Desk::new();
    let sample = "    temperature: 2\n    measure: 10\n";
    let items = "  means: { does: averages, of: chains }\n  look:\n    does: compare\n    items:\n      \
        - { take: { step: chains, quantity: energy }, against: { value: 1 } }\n      \
        - { take: { step: means, quantity: energy }, against: { source: somewhere } }\n      \
        - { take: { step: means, quantity: energy }, against: { value: 1, step: means } }\n      \
        - { take: { step: means, quantity: energy }, against: { lower: 2, upper: 1 } }\n";
    desk.write("robust.yaml", &pipeline(sample, items));
    let ran = desk.run(&["check", "robust.yaml"]);
    assert_eq!(ran.status, Some(2));
    for wanted in [
        "does sample",
        "nothing to hold the result against",
        "held against several things",
        "the bracket is empty",
        "4 problems",
    ] {
        assert!(ran.err.contains(wanted), "{wanted} in\n{}", ran.err);
    }
}

/// Analyses of almost nothing: every number is known with an error, or null with a flag; or the parcel breaks and says why.
#[test]
fn analyses_of_almost_nothing_are_flagged() {
    // One measurement; one chain; a series without fluctuations.
    let cases = [
        ("1", "1", "    temperature: 2\n"),
        ("2", "1", "    temperature: 2\n"),
        ("1", "2", "    temperature: 2\n"),
        ("500", "2", "    temperature: 0.01\n    start: ordered\n"),
    ];
    for (measure, chains, rest) in cases {
        let desk = Desk::new();
        let sample = format!("    measure: {measure}\n    equilibrate: 3\n{rest}");
        let text = pipeline(&sample, "  means: { does: averages, of: chains }\n  tc: { does: crossing, of: chains }\n");
        desk.write("robust.yaml", &text.replace("chains: 2\n", &format!("chains: {chains}\n")));
        let events = desk.run_pipeline("robust.yaml", &[], 1);
        assert_eq!(events.counts_of("means").2, 0);
        let broken = events.broken();
        assert_eq!(broken.len(), 1, "a crossing of one size: {broken:?}");
        assert!(!broken[0].contains("defect") && !broken[0].contains("panic"), "{broken:?}");
        let table = desk.table("results/robust/means.parquet");
        for row in 0..table.rows() {
            let flags = table.text("flags", row).unwrap();
            for name in ["value", "error", "tau", "effective", "spread"] {
                let Cells::Number(cells) = &table.column(name).unwrap().cells else { panic!("{name} holds numbers") };
                assert!(cells[row].is_none_or(f64::is_finite), "{name} in row {row}");
                let settled = matches!(name, "value" | "error") && flags.is_empty();
                assert!(!settled || cells[row].is_some(), "{name} in row {row} is unknown and not flagged");
            }
        }
    }
}

/// Values that a scan takes from an earlier step and cannot use break that step; the others go on.
#[test]
fn wrong_values_from_a_table_break_one_step() {
    let desk = Desk::new();
    let again = "  means: { does: averages, of: chains }\n  again:\n    does: sample\n    lattice: { plugin: square, size: 5 }\n    model: ising\n    \
        update: heat-bath\n    observe: [energy]\n    scan: { temperature: { step: means, column: value, where: { quantity: energy } } }\n    \
        equilibrate: 10\n    measure: 50\n  other: { does: averages, of: chains }\n  behind: { does: averages, of: again }\n";
    desk.write("robust.yaml", &pipeline("    temperature: 2\n    measure: 100\n", again));
    let events = desk.run_pipeline("robust.yaml", &[], 1);
    assert_eq!(events.counts_of("again"), (0, 0, 1));
    assert_eq!(events.counts_of("other").2, 0);
    assert!(events.broken()[0].contains("robust.yaml:"), "{:?}", events.broken());
    assert!(desk.path("results/robust/other.parquet").exists());
    let ran = desk.run(&["forecast", "robust.yaml"]);
    assert!(ran.status == Some(0) && ran.err.contains("again will break"), "{}{}", ran.out, ran.err);
}

/// A record of results that cannot be read costs a warning and a second writing.
#[test]
fn a_damaged_record_is_told() {
    let desk = Desk::new();
    desk.write("robust.yaml", &scanned(20));
    desk.run_pipeline("robust.yaml", &[], 0);
    let before = desk.files("results");
    std::fs::write(desk.path("results/robust/record.json"), "{ \"files\": ").unwrap();
    let events = desk.run_pipeline("robust.yaml", &[], 0);
    assert!(events.0.iter().any(|e| e["event"] == "warning" && e["text"].as_str().unwrap().contains("record.json")));
    assert_eq!(events.counts().0, 0);
    let mut after = desk.files("results");
    assert_eq!(before.len(), after.len());
    after.retain(|name, bytes| name.ends_with(".parquet") && before[name] != *bytes);
    assert!(after.is_empty());
}

/// Events: each parcel starts once and ends once, in steps that were planned; nothing else is on standard output.
#[test]
fn events_are_complete() {
    let desk = Desk::new();
    desk.write("robust.yaml", &scanned(100));
    let events = desk.run_pipeline("robust.yaml", &["--workers", "2"], 0);
    let of = |kind: &str| -> Vec<String> {
        let of_kind = events.0.iter().filter(|e| e["event"] == kind);
        of_kind.map(|e| format!("{} {}", e["step"].as_str().unwrap(), e["parcel"].as_str().unwrap_or(""))).collect()
    };
    let (started, done) = (of("started"), of("done"));
    assert_eq!(started.len(), 12 + 6 + 1);
    let set = |list: &[String]| list.iter().cloned().collect::<BTreeSet<_>>();
    assert_eq!(set(&started), set(&done));
    assert_eq!(set(&started).len(), started.len());
    assert_eq!(of("planned").len(), 3);
    assert_eq!(of("complete").len(), 3);
}

/// Plain lines when piped: nothing that only a terminal understands, columns in line, lines that fit.
#[test]
fn what_is_printed_is_plain() {
    let desk = Desk::new();
    let look = "  look:\n    does: compare\n    items:\n      - { take: { step: means, quantity: energy, where: { size: 4, temperature: 3.0 } }, against: { value: 7 } }\n";
    desk.write("robust.yaml", &(scanned(2000) + look));
    let ran = desk.run(&["run", "robust.yaml"]);
    assert_eq!(ran.status, Some(1));
    let all = format!("{}{}", ran.out, ran.err);
    assert!(!all.contains('\x1b') && !all.contains('\r'), "{all:?}");
    assert!(all.lines().all(|line| line.chars().count() <= 80), "{all}");
    assert!(ran.out.contains("chains: 12 parcels due") && ran.out.contains("disagrees"), "{}", ran.out);
    let lines: Vec<&str> = ran.out.lines().collect();
    let head = lines.iter().position(|line| line.starts_with("step  ")).expect("a closing table");
    let end = |line: &str| line.find("computed").map(|at| at + "computed".len());
    let width = end(lines[head]).unwrap();
    for line in &lines[head + 1..head + 5] {
        assert!(line.as_bytes()[width - 1].is_ascii_digit(), "{line}");
    }
    let ran = desk.run(&["run", "robust.yaml", "--quiet"]);
    assert_eq!((ran.status, ran.out.as_str()), (Some(1), ""));
    assert!(ran.err.contains("disagrees"), "what went wrong is told: {}", ran.err);
    let ran = desk.run(&["forecast", "robust.yaml"]);
    assert!(ran.out.ends_with("nothing is due\n"), "{}", ran.out);
}

/// Every result leads back to its chains.
#[test]
fn results_are_traced() {
    let desk = Desk::new();
    desk.write("robust.yaml", &scanned(20));
    desk.run_pipeline("robust.yaml", &[], 0);
    let series = "results/robust/chains/size-4_temperature-2.5.parquet";
    let mut key = String::new();
    for file in [series, "results/robust/means.parquet", "results/robust/tc.parquet", "results/robust/tc.pairs.parquet"]
    {
        let ran = desk.run(&["trace", file]);
        assert_eq!(ran.status, Some(0), "{}", ran.err);
        assert!(ran.out.contains("2 chains x 20 rows") && ran.out.contains("lattice square"), "{}", ran.out);
        assert_eq!(ran.out.matches("made by spinledger").count(), 1, "{}", ran.out);
        key = ran.out.split_whitespace().nth(1).unwrap().to_owned();
    }
    let ran = desk.run(&["trace", &key[..8]]);
    assert!(ran.status == Some(0) && ran.out.starts_with("crossing"), "{}{}", ran.out, ran.err);
    for wrong in ["abc", "00000000000000000000", "robust.yaml"] {
        let ran = desk.run(&["trace", wrong]);
        assert_eq!(ran.status, Some(2), "{wrong}: {}", ran.out);
        assert!(ran.err.starts_with("spinledger: "), "{}", ran.err);
    }
}
