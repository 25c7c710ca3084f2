//! Results do not change without a new revision: contents of small runs that touch every standard item and every kind of step are compared
//! with those in `tests/reference/frozen.csv`. Only values and schemas enter a content: no time, no path, no build.

use serde_json::Value as Json;
use spinledger_ledger::Ledger;
use spinledger_terms::Key;
use spinledger_tests::program::{Desk, top};
use std::collections::{BTreeMap, BTreeSet};

/// Set to write the table anew.
const REWRITE: &str = "SPINLEDGER_REWRITE";

const LATTICES: [(&str, &str); 9] = [
    ("chain", "6"),
    ("square", "[4, 3]"),
    ("triangular", "[3, 4]"),
    ("honeycomb", "[3, 2]"),
    ("kagome", "[2, 3]"),
    ("cubic", "[2, 3, 2]"),
    ("bcc", "[2, 3, 2]"),
    ("fcc", "2"),
    ("diamond", "2"),
];
const BOUNDARIES: [&str; 5] = ["periodic", "free", "plus", "minus", "antiperiodic"];
const RULES: [(&str, &str); 6] = [
    ("metropolis-1", "{ plugin: metropolis, lanes: 1 }"),
    ("metropolis-64", "{ plugin: metropolis, lanes: 64 }"),
    ("heat-bath-1", "{ plugin: heat-bath, lanes: 1 }"),
    ("heat-bath-64", "{ plugin: heat-bath, lanes: 64 }"),
    ("wolff", "{ plugin: wolff, clusters: 2 }"),
    ("swendsen-wang", "swendsen-wang"),
];

/// A sample step with its averages.
fn step(name: &str, lattice: &str, model: &str, update: &str, observe: &str, more: &str) -> String {
    format!(
        "  {name}:
    does: sample
    lattice: {{ {lattice} }}
    model: {model}
    update: {update}
    observe: [{observe}]
    chains: 2
    {more}
  {name}-means: {{ does: averages, of: {name} }}
"
    )
}

/// Every lattice with every boundary, every rule with every model, every way to start and to discard, every analysis.
fn pipeline() -> String {
    let ising = "{ plugin: ising, coupling: 0.7 }";
    let both = "energy, magnetisation";
    let colours = "energy, order-parameter";
    let short = "temperature: 1.9\n    equilibrate: 10\n    measure: 40";
    let mut steps = String::new();
    for (lattice, size) in LATTICES {
        for boundary in BOUNDARIES {
            let place = format!("plugin: {lattice}, size: {size}, boundary: {boundary}");
            steps += &step(&format!("{lattice}-{boundary}"), &place, ising, "heat-bath", both, short);
        }
    }
    let square = "plugin: square, size: 6";
    for (rule, update) in RULES {
        steps += &step(&format!("ising-{rule}"), square, ising, update, both, short);
        steps += &step(&format!("potts-{rule}"), square, "{ plugin: potts, q: 3 }", update, colours, short);
        // Cluster rules need the symmetry that a field breaks.
        if !["wolff", "swendsen-wang"].contains(&rule) {
            let field = "{ plugin: ising, coupling: { first.x: 1, first.y: -0.4 }, field: 0.3 }";
            steps += &step(&format!("field-{rule}"), square, field, update, both, short);
            let spin_one = "{ plugin: blume-capel, coupling: 0.9, anisotropy: 0.4, field: -0.2 }";
            steps += &step(&format!("spin-one-{rule}"), square, spin_one, update, both, short);
        }
        let hot = "inverse_temperature: 0\n    equilibrate: 10\n    measure: 40";
        steps += &step(&format!("hot-{rule}"), square, ising, update, both, hot);
    }
    for (name, place) in [
        ("multi-spin-chains", square),
        ("multi-spin-sites", "plugin: square, size: 64"),
        ("multi-spin-cubic", "plugin: cubic, size: 16"),
        ("multi-spin-edges", "plugin: triangular, size: 3, boundary: [antiperiodic, plus]"),
    ] {
        steps += &step(name, place, "ising", "multi-spin", both, short);
    }
    let hot = "inverse_temperature: 0\n    equilibrate: 10\n    measure: 40";
    steps += &step("multi-spin-hot", square, "ising", "{ plugin: multi-spin, lanes: 512 }", both, hot);
    steps +=
        &step("multi-spin-1", "plugin: square, size: 64", "ising", "{ plugin: multi-spin, lanes: 1 }", both, short);
    let mixed = "[heat-bath, { plugin: wolff, clusters: 2 }, { plugin: metropolis, times: 2 }]";
    let both_starts = "temperature: 2.2\n    start: both\n    measure: 400\n    every: 3";
    steps += &step("mixed", square, ising, mixed, both, both_starts);
    // Several blocks of 16 rows.
    let large = "plugin: square, size: 256";
    let blocks =
        "temperature: 2.2\n    start: ordered\n    settle: 1\n    equilibrate: 5\n    measure: 40\n    every: 128";
    steps += &step("blocks", large, ising, "metropolis", both, blocks);
    let sizes =
        "scan: { lattice.size: [4, 6, 8, 12], temperature: [2.1, 2.25, 2.4] }\n    equilibrate: 100\n    measure: 2000";
    steps += &step("sizes", square, "ising", "wolff", both, sizes);
    // Configurations that are kept, begun from and followed, and a picture of each kind.
    let kept = "temperature: 2.2\n    equilibrate: 10\n    measure: 40\n    start: both\n    keep: { every: 16 }";
    let triangular = "plugin: triangular, size: 6, boundary: [periodic, free]";
    steps += &step("kept", triangular, "{ plugin: potts, q: 3 }", "heat-bath", colours, kept);
    let from_kept =
        "temperature: 1.2\n    equilibrate: 0\n    measure: 20\n    start: { step: kept }\n    keep: { states: last }";
    steps += &step("from-kept", triangular, "{ plugin: potts, q: 3 }", mixed, colours, from_kept);
    let path = "temperature: 1.9\n    scan: { model.field: [1, 0, -1, 0] }\n    follow: model.field\n    equilibrate: 2\n    measure: 20\n    \
                keep: { states: last }";
    steps += &step("followed", square, ising, "{ plugin: metropolis, lanes: 64 }", both, path);
    steps += "  picture: { does: picture, of: from-kept, chain: 1 }
  picture-followed: { does: picture, of: followed, where: { position: 3 } }
";
    steps += "  crossing: { does: crossing, of: sizes }
  crossing-known: { does: crossing, of: sizes, one_over_nu: 1, correction: 1.75 }
  curves: { does: reweight, of: sizes, temperature: { from: 2, to: 2.5, count: 11 } }
  crossing-curves: { does: crossing, of: curves }
  chart: { does: chart, of: curves, quantity: binder, points: sizes-means, marks: [{ value: 2.27, label: here }] }
  compare:
    does: compare
    items:
      - take: { step: crossing, quantity: critical_temperature }
        against: { lower: 0, upper: 10 }
      - take: { step: mixed-means, quantity: energy }
        against: { step: blocks-means, quantity: energy }
        within: 1e9
  page: { does: report, of: [sizes-means, curves, crossing, compare, chart, picture] }
";
    format!("spinledger: 1\npipeline: frozen\nseed: 20261201\nsteps:\n{steps}")
}

/// A line of the table: which result, what made it with revisions, the content.
#[derive(Clone, Debug, PartialEq)]
struct Line {
    result: String,
    revisions: String,
    content: String,
}

/// Revisions of all plugins, steps and parts of the engine that an entry was made by, directly or through its inputs.
fn revisions(ledger: &Ledger, key: &Key, found: &mut BTreeSet<String>) {
    let record = ledger.read_record(key).expect("a record");
    // Preimages are canonical text: unlike JSON it has infinite numbers, so it is not read as JSON.
    let (_, after) = record.preimage.split_once("\"revision\":").expect("a preimage names its revision");
    let revision = after.split(|c: char| !c.is_ascii_digit()).next().unwrap_or_default();
    found.insert(format!("{}@{revision}", record.kind));
    found.extend(record.provenance.plugins.iter().map(|plugin| plugin.canonical()));
    record.provenance.inputs.iter().for_each(|input| revisions(ledger, &input.key, found));
}

/// The lines of what this program computes: one for each entry that a file of results shows. Where a step has several they are numbered in the
/// order of their files' names.
fn computed(desk: &Desk) -> Vec<Line> {
    let ledger = Ledger::open(&desk.path(".spinledger")).expect("a ledger");
    let read = std::fs::read_to_string(desk.path("results/frozen/record.json")).expect("a record of the results");
    let record: Json = serde_json::from_str(&read).expect("JSON");
    let mut entries: BTreeMap<&str, Vec<(&str, &str)>> = BTreeMap::new();
    for file in record["files"].as_array().expect("a list of files") {
        let text = |name: &str| file[name].as_str().expect("text");
        let entry = (text("key"), text("content"));
        let of_step = entries.entry(text("step")).or_default();
        if !of_step.contains(&entry) {
            of_step.push(entry);
        }
    }
    let mut lines = Vec::new();
    for (step, entries) in entries {
        for (at, (key, content)) in entries.iter().enumerate() {
            let mut found = BTreeSet::new();
            revisions(&ledger, &key.parse().expect("a key"), &mut found);
            let result = if entries.len() > 1 { format!("{step} {}", at + 1) } else { step.to_owned() };
            let revisions = found.into_iter().collect::<Vec<_>>().join(" ");
            lines.push(Line { result, revisions, content: (*content).to_owned() });
        }
    }
    lines
}

/// What stands in one list of revisions and not in another.
fn moved(before: &str, now: &str) -> String {
    let only = |these: &str, those: &str| -> Vec<String> {
        these.split(' ').filter(|one| !those.split(' ').any(|other| other == *one)).map(str::to_owned).collect()
    };
    format!("{} instead of {}", only(now, before).join(" "), only(before, now).join(" "))
}

#[test]
fn results_change_with_revisions_only() {
    let desk = Desk::new();
    desk.write("frozen.yaml", &pipeline());
    desk.run_pipeline("frozen.yaml", &[], 0);
    let now = computed(&desk);
    let path = top().join("tests/reference/frozen.csv");
    if std::env::var_os(REWRITE).is_some() {
        let mut text = "result,revisions,content\n".to_owned();
        now.iter().for_each(|line| text += &format!("{},{},{}\n", line.result, line.revisions, line.content));
        std::fs::write(&path, text).expect("the table can be written");
    }
    let text = std::fs::read_to_string(&path).unwrap_or_else(|error| panic!("{}: {error}", path.display()));
    let frozen: BTreeMap<String, Line> = text
        .lines()
        .skip(1)
        .map(|line| {
            let [result, revisions, content] = line.split(',').collect::<Vec<_>>()[..] else { panic!("{line}") };
            let [result, revisions, content] = [result, revisions, content].map(str::to_owned);
            (result.clone(), Line { result, revisions, content })
        })
        .collect();
    let (mut silent, mut other) = (Vec::new(), BTreeMap::<String, Vec<&str>>::new());
    for line in &now {
        match frozen.get(&line.result) {
            Some(before) if before == line => {}
            Some(before) if before.revisions == line.revisions => {
                silent.push(format!("  {} ({})", line.result, line.revisions));
            }
            Some(before) => other.entry(moved(&before.revisions, &line.revisions)).or_default().push(&line.result),
            None => other.entry("new".into()).or_default().push(&line.result),
        }
    }
    let results: BTreeSet<&str> = now.iter().map(|line| line.result.as_str()).collect();
    let gone = frozen.keys().map(String::as_str).filter(|result| !results.contains(result));
    gone.for_each(|result| other.entry("gone".into()).or_default().push(result));
    let other: Vec<String> = other.iter().map(|(why, results)| format!("  {why}: {}", results.join(", "))).collect();
    assert!(
        silent.is_empty(),
        "{} of {} results changed and no revision did:\n{}\nOld ledgers would be mixed with new results. Either the change is a mistake: find it. \
         Or it is meant: raise the revision of the item (in its SPEC), of the step kind (in its KIND) or of `plan::dynamics::REVISION`, \
         write the table anew with {REWRITE}=1, and say so in CHANGELOG.md.",
        silent.len(),
        now.len(),
        silent.join("\n")
    );
    assert!(
        other.is_empty(),
        "the table of frozen results is not that of this program:\n{}\nIf this is meant, write it anew with {REWRITE}=1 and commit it.",
        other.join("\n")
    );
}

/// The pipeline leaves nothing out: every standard item, every boundary, every choice of lanes, every kind of step.
#[test]
fn nothing_standard_is_left_out() {
    let text = pipeline();
    let desk = Desk::new();
    let ran = desk.run(&["plugins", "--json"]);
    assert_eq!(ran.status, Some(0), "{}", ran.err);
    let items: Vec<Json> = ran.out.lines().map(|line| serde_json::from_str(line).expect("JSON")).collect();
    assert!(items.len() >= 12, "{}", items.len());
    let frozen = std::fs::read_to_string(top().join("tests/reference/frozen.csv")).expect("the table");
    for item in items.iter().filter(|item| item["identity"]["standard"] == true) {
        let identity = format!(
            "{}/{}@",
            item["identity"]["library"].as_str().expect("text"),
            item["item"]["name"].as_str().expect("text")
        );
        assert!(frozen.contains(&identity), "{identity} is in no frozen result: add it to the pipeline of this test");
        for parameter in item["item"]["parameters"].as_array().into_iter().flatten() {
            let (kind, name) = (parameter["kind"].to_string(), parameter["name"].as_str().expect("text"));
            if name == "boundary" {
                let words = kind.split('"').filter(|word| BOUNDARIES.contains(word)).collect::<BTreeSet<_>>();
                assert_eq!(words, BTreeSet::from(BOUNDARIES), "boundaries of {identity} in {kind}");
            }
            if name == "lanes" {
                let lanes: BTreeSet<&str> =
                    kind.split(|c: char| !c.is_ascii_digit()).filter(|n| !n.is_empty()).collect();
                let known = if identity.contains("/multi-spin@") { ["1", "512"] } else { ["1", "64"] };
                assert_eq!(lanes, BTreeSet::from(known), "lanes of {identity} in {kind}");
            }
        }
    }
    // Which kinds of step there are, the program says when it is given none of them.
    desk.write("none.yaml", "spinledger: 1\npipeline: none\nseed: 1\nsteps: { one: { does: nothing } }\n");
    let ran = desk.run(&["check", "none.yaml", "--json"]);
    let problem: Json = serde_json::from_str(ran.out.lines().next().expect("a problem")).expect("JSON");
    let expected = problem["expected"].as_str().and_then(|text| text.split_once(": ")).expect("a list of kinds").1;
    for kind in expected.split(", ") {
        assert!(
            text.contains(&format!("does: {kind}")),
            "no step of the kind {kind}: add one to the pipeline of this test"
        );
    }
}
