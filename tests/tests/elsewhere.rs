//! The same digits elsewhere: the pipeline as the record has it, in another folder, run by another copy of the program, with nothing on record.

use serde_json::Value as Json;
use spinledger_tests::program::{Desk, program};
use std::collections::BTreeMap;
use std::path::Path;
use std::process::Command;

/// Every kind of step that computes, with sizes, lengths and starts of several sorts.
const PIPELINE: &str = "spinledger: 1
pipeline: elsewhere
title: What a colleague runs
seed: 4
steps:
  chains:
    does: sample
    lattice: { plugin: square, size: 4 }
    model: ising
    update: [heat-bath, { plugin: wolff, clusters: 2 }]
    observe: [energy, magnetisation]
    scan:
      - lattice.size: [4, 6, 8]
        temperature: [2.1, 2.25, 2.4]
      - lattice.size: [12]
        temperature: [2.2, 2.3]
        measure: 1500
    equilibrate: 100
    measure: 1000
  cold:
    does: sample
    lattice: { plugin: triangular, size: [5, 4], boundary: [periodic, free] }
    model: { plugin: potts, q: 3 }
    update: swendsen-wang
    observe: [energy, order-parameter]
    temperature: 1.2
    start: both
    measure: 400
  means: { does: averages, of: chains }
  curves: { does: reweight, of: chains, temperature: { from: 2.1, to: 2.4, count: 31 } }
  tc: { does: crossing, of: curves }
  local: { does: crossing, of: chains }
  held:
    does: compare
    items:
      - take: { step: tc, quantity: critical_temperature }
        against: { step: local, quantity: critical_temperature }
  chart: { does: chart, of: means, quantity: binder, x: temperature }
  page: { does: report, of: [means, curves, tc, held] }
";

/// Contents by step and file, and the text of the pipeline.
fn record(results: &Path) -> (BTreeMap<(String, String), String>, String) {
    let text = std::fs::read_to_string(results.join("record.json")).expect("a record of the results");
    let record: Json = serde_json::from_str(&text).expect("JSON");
    let text = |value: &Json| value.as_str().expect("text").to_owned();
    let files = record["files"].as_array().expect("a list of files");
    let contents = files.iter().map(|file| ((text(&file["step"]), text(&file["file"])), text(&file["content"])));
    (contents.collect(), text(&record["text"]))
}

/// Another copy of the program with its plugins.
fn installed(folder: &Path) -> std::path::PathBuf {
    std::fs::create_dir_all(folder).expect("a folder can be made");
    let from = program().parent().expect("a folder");
    let mut libraries = 0;
    for entry in std::fs::read_dir(from).expect("the folder of the program") {
        let path = entry.expect("an entry").path();
        let library = path.extension().is_some_and(|end| end == std::env::consts::DLL_EXTENSION);
        if library {
            std::fs::copy(&path, folder.join(path.file_name().expect("a name"))).expect("a file can be copied");
            libraries += 1;
        }
    }
    assert!(libraries >= 5, "{libraries} plugins beside the program");
    let copy = folder.join("lattice-runner");
    std::fs::copy(program(), &copy).expect("the program can be copied");
    copy
}

#[test]
fn the_record_alone_gives_the_same_contents_elsewhere() {
    let here = Desk::new();
    here.write("elsewhere.yaml", PIPELINE);
    let events = here.run_pipeline("elsewhere.yaml", &[], 0);
    let (contents, shown) = record(&here.path("results/elsewhere"));
    assert!(contents.len() > 15, "{}", contents.len());

    // The text comes from what is kept: the record of a result names its hash, the ledger has it.
    let kept = here.path(".spinledger/texts").join(hash_of_the_text(&here));
    let kept = std::fs::read_to_string(&kept).unwrap_or_else(|error| panic!("{}: {error}", kept.display()));
    assert_eq!(kept, PIPELINE, "the text is kept as it was");
    assert_eq!(shown, PIPELINE, "the record of the results has it, too");

    let there = Desk::new();
    std::fs::create_dir_all(there.path("a colleague's desk/work")).expect("a folder can be made");
    let program = installed(&there.path("a colleague's desk/tools"));
    there.write("a colleague's desk/work/from record.yaml", &kept);
    let output = Command::new(program)
        .args(["run", "from record.yaml", "--ledger", "new", "--out", "out", "--workers", "1", "--json"])
        .current_dir(there.path("a colleague's desk/work"))
        .env_remove("SPINLEDGER_LEDGER")
        .env_remove("SPINLEDGER_PLUGINS")
        .output()
        .expect("the copy starts");
    let said = String::from_utf8_lossy(&output.stdout);
    assert_eq!(output.status.code(), Some(0), "{said}{}", String::from_utf8_lossy(&output.stderr));
    let finished: Json = serde_json::from_str(said.lines().last().expect("events")).expect("JSON");
    assert_eq!(finished["computed"], events.finished()["computed"], "nothing was on record");
    assert_eq!(finished["reused"], 0);
    let (again, _) = record(&there.path("a colleague's desk/work/out"));
    assert_eq!(again, contents);
}

/// The hash of the pipeline's text, from the record of the crossing, which is the last that its trace prints.
fn hash_of_the_text(desk: &Desk) -> String {
    let ran = desk.run(&["trace", "results/elsewhere/tc.parquet", "--json"]);
    assert_eq!(ran.status, Some(0), "{}", ran.err);
    let record: Json = serde_json::from_str(ran.out.lines().last().expect("records")).expect("JSON");
    assert_eq!(record["kind"], "crossing");
    record["provenance"]["pipeline"].as_str().expect("the hash of a text").to_owned()
}
