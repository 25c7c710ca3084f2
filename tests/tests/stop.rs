//! Runs that are asked to end: by Ctrl-C at a terminal, which reaches workers, too, and by SIGTERM. They put what they have on record, say so, and
//! the same command goes on to the same bits.

use rustix::process::{Pid, Signal, kill_process, kill_process_group};
use spinledger_tests::program::Desk;
use std::os::unix::process::ExitStatusExt;
use std::process::Child;
use std::time::{Duration, Instant};

/// Blocks of 4096 rows take about a second: a stop falls into the middle of one.
fn pipeline(measure: u64) -> String {
    format!(
        "spinledger: 1\npipeline: stopped\nseed: 3\nsteps:\n  chains:\n    does: sample\n    lattice: {{ plugin: square, size: 64 }}\n    model: ising\n    \
         update: swendsen-wang\n    observe: [energy, magnetisation]\n    scan: {{ temperature: [2.2, 2.3] }}\n    equilibrate: 10\n    every: 8\n    \
         measure: {measure}\n    chains: 2\n  means: {{ does: averages, of: chains }}\n"
    )
}

/// Attempted updates on record.
fn updates(desk: &Desk) -> u64 {
    if !desk.path(".spinledger/journal").exists() {
        return 0;
    }
    let journals = desk.files(".spinledger/journal");
    let lines = journals
        .values()
        .flat_map(|bytes| String::from_utf8_lossy(bytes).lines().map(String::from).collect::<Vec<_>>());
    lines.filter_map(|line| serde_json::from_str::<serde_json::Value>(&line).ok()?["u"].as_u64()).sum()
}

fn states(desk: &Desk) -> usize {
    if desk.path(".spinledger/states").exists() { desk.files(".spinledger/states").len() } else { 0 }
}

fn wait_until(what: &str, done: impl Fn() -> bool) {
    let begun = Instant::now();
    while !done() {
        assert!(begun.elapsed() < Duration::from_secs(60), "{what}");
        std::thread::sleep(Duration::from_millis(10));
    }
}

fn group(child: &Child, signal: Signal) {
    kill_process_group(Pid::from_child(child), signal).unwrap();
}

/// Nothing is lost, nothing is done twice: what both runs put on record is what one run does, to the update and to the byte.
#[test]
fn an_end_that_is_asked_for_costs_nothing() {
    let desk = Desk::new();
    let text = pipeline(12_000);
    desk.write("stopped.yaml", &text);
    for (signal, status) in [(Signal::INT, 130), (Signal::TERM, 143), (Signal::INT, 130)] {
        let before = (updates(&desk), states(&desk));
        let run = desk.start_at_terminal(&["run", "stopped.yaml", "--workers", "2"], 80);
        // Some way into the blocks.
        wait_until("chains begin", || states(&desk) >= 2);
        std::thread::sleep(Duration::from_millis(700));
        let asked = Instant::now();
        group(&run.child, signal);
        let shown = run.end();
        assert!(asked.elapsed() < Duration::from_secs(3), "{:?}", asked.elapsed());
        assert_eq!(shown.status, Some(status), "{}", shown.raw);
        let lines = shown.lines().join("\n");
        for wanted in [
            "stopping: blocks in flight are being put on record",
            "step    on record  partial  due",
            "chains          0  ",
            "means",
            "what was computed is on record",
            "the same command goes on from here",
        ] {
            assert!(lines.contains(wanted), "{wanted} in\n{lines}");
        }
        assert!(!lines.contains("broken"), "{lines}");
        assert!(updates(&desk) > before.0, "what was measured of a block is on record");
        assert!(states(&desk) >= 2);
    }
    let ran = desk.run(&["forecast", "stopped.yaml"]);
    assert!(ran.out.contains("(continues)"), "{}", ran.out);
    desk.run_pipeline("stopped.yaml", &["--workers", "2"], 0);
    let fresh = Desk::new();
    fresh.write("stopped.yaml", &text);
    fresh.run_pipeline("stopped.yaml", &[], 0);
    assert!(desk.parquet("results") == fresh.parquet("results"), "stopped and undisturbed differ");
    assert_eq!(updates(&desk), updates(&fresh), "no update is lost or done twice");
}

/// Programs get events, and the last one is `finished` as always.
#[test]
fn programs_are_told_of_the_end() {
    let desk = Desk::new();
    desk.write("stopped.yaml", &pipeline(1_000_000));
    let run = desk.start_at_terminal(&["run", "stopped.yaml", "--workers", "2", "--json"], 80);
    wait_until("chains begin", || states(&desk) >= 2);
    kill_process(Pid::from_child(&run.child), Signal::TERM).unwrap();
    let shown = run.end();
    assert_eq!(shown.status, Some(143));
    let events: Vec<serde_json::Value> =
        shown.lines().iter().filter(|l| !l.is_empty()).map(|line| serde_json::from_str(line).expect(line)).collect();
    let of = |kind: &str| events.iter().find(|e| e["event"] == kind).unwrap_or_else(|| panic!("{kind} in {events:?}"));
    of("stopping");
    assert_eq!(of("stopped")["steps"][0]["step"], "chains");
    assert_eq!(events.last().unwrap()["event"], "finished");
    assert_eq!(events.last().unwrap()["broken"], 0);
}

/// A second signal ends the run at once; its workers end by themselves, and put on record what they have.
#[test]
fn asked_twice_it_ends_at_once() {
    let desk = Desk::new();
    // One sweep of the large lattice takes long: a worker cannot come to an end between two signals.
    let text = pipeline(1_000).replace("size: 64", "size: 8192");
    desk.write("stopped.yaml", &text);
    let run = desk.start_at_terminal(&["run", "stopped.yaml", "--workers", "1"], 80);
    wait_until("work begins", || {
        desk.path(".spinledger/claims").exists() && !desk.files(".spinledger/claims").is_empty()
    });
    std::thread::sleep(Duration::from_millis(300));
    group(&run.child, Signal::INT);
    std::thread::sleep(Duration::from_millis(150));
    let asked = Instant::now();
    group(&run.child, Signal::INT);
    let mut run = run;
    let status = run.child.wait().unwrap();
    assert!(asked.elapsed() < Duration::from_millis(500), "{:?}", asked.elapsed());
    assert_eq!((status.code(), status.signal()), (Some(130), None));
    let _ = kill_process_group(Pid::from_child(&run.child), Signal::KILL);
}

/// Before anything is planned, and in the middle of analyses: a stop at any moment is followed by the same results.
#[test]
fn a_stop_at_any_moment_is_harmless() {
    let text = "spinledger: 1\npipeline: stopped\nseed: 4\nsteps:\n  chains:\n    does: sample\n    lattice: { plugin: square, size: 6 }\n    model: ising\n    \
         update: [heat-bath, wolff]\n    observe: [energy, magnetisation]\n    scan: { temperature: { from: 2, to: 3, count: 12 } }\n    equilibrate: auto\n    \
         settle: 30\n    measure: 4000\n    chains: 2\n    start: both\n  means: { does: averages, of: chains }\n";
    let fresh = Desk::new();
    fresh.write("stopped.yaml", text);
    fresh.run_pipeline("stopped.yaml", &[], 0);
    let desk = Desk::new();
    desk.write("stopped.yaml", text);
    let mut stopped = 0;
    for round in 0..40 {
        let mut child = desk.start(&["run", "stopped.yaml", "--quiet", "--workers", "2"]);
        std::thread::sleep(Duration::from_millis(40 + 7 * round % 100));
        let _ = kill_process_group(Pid::from_child(&child), Signal::INT);
        let status = child.wait().unwrap();
        match (status.code(), status.signal()) {
            (Some(130), _) => stopped += 1,
            // Before signals are heeded.
            (None, Some(2)) => {}
            (Some(0 | 1), _) => break,
            other => panic!("{other:?}"),
        }
    }
    assert!(stopped > 3, "{stopped} stops");
    desk.run_pipeline("stopped.yaml", &[], 0);
    assert!(desk.parquet("results") == fresh.parquet("results"), "stopped and undisturbed differ");
}

/// Points that follow each other, with kept configurations: a stop within the sequence is as harmless.
#[test]
fn a_sequence_can_be_stopped() {
    let text = "spinledger: 1\npipeline: stopped\nseed: 8\nsteps:\n  cool:\n    does: sample\n    lattice: { plugin: square, size: 48 }\n    model: ising\n    \
         update: swendsen-wang\n    observe: [energy, magnetisation]\n    follow: temperature\n    scan: { temperature: [3.0, 2.5, 2.0] }\n    equilibrate: 20\n    \
         every: 8\n    measure: 3000\n    chains: 2\n    keep: { states: last }\n";
    let fresh = Desk::new();
    fresh.write("stopped.yaml", text);
    fresh.run_pipeline("stopped.yaml", &[], 0);
    let desk = Desk::new();
    desk.write("stopped.yaml", text);
    let mut stopped = 0;
    for _ in 0..20 {
        let mut child = desk.start(&["run", "stopped.yaml", "--quiet", "--workers", "2"]);
        std::thread::sleep(Duration::from_millis(120));
        let _ = kill_process_group(Pid::from_child(&child), Signal::TERM);
        match child.wait().unwrap().code() {
            Some(143) => stopped += 1,
            Some(0) => break,
            _ => {}
        }
    }
    assert!(stopped > 0, "it was over before it could be stopped");
    desk.run_pipeline("stopped.yaml", &[], 0);
    assert!(desk.parquet("results") == fresh.parquet("results"), "stopped and undisturbed differ");
    let files = desk.parquet("results/stopped/cool");
    let last = files.keys().find(|name| name.contains("temperature-2.parquet") || name.contains("temperature-2.0"));
    let last = last.unwrap_or_else(|| panic!("{:?}", files.keys().collect::<Vec<_>>()));
    let ran = desk.run(&["trace", &format!("results/stopped/cool/{last}")]);
    assert!(ran.status == Some(0) && ran.out.lines().count() <= 40, "{}{}", ran.out, ran.err);
    assert!(ran.out.contains("begun from: ") && ran.out.contains("configurations"), "{}", ran.out);
}
