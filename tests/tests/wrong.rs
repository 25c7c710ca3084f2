//! Wrong pipelines: each mistake is found by `check` before anything runs, with its place, in words, with what was expected; all mistakes of
//! a pipeline at once; nothing is left on the disk.

use spinledger_tests::program::Desk;

/// A sound sample step, to be spoilt.
const SOUND: &str = r#"spinledger: 1
pipeline: wrong
seed: 1
steps:
  chains:
    does: sample
    lattice: { plugin: square, size: 8 }
    model: { plugin: ising }
    update: { plugin: metropolis }
    observe: [energy, magnetisation]
    temperature: 2.0
    measure: 10
  means: { does: averages, of: chains }
"#;

/// What is replaced, by what, the place of the problem, and what the message must contain.
type Case = (&'static str, &'static str, &'static str, &'static [&'static str]);

const CASES: &[Case] = &[
    ("    measure: 10", "    mesure: 10", "12:5", &["`mesure` is not a key of a sample step", "nearest: measure"]),
    ("    measure: 10", "    measure: 10\n    speed: 3", "13:5", &["`speed` is not a key of a sample step"]),
    ("    measure: 10", "    measure: 10\n    measure: 20", "13:5", &["measure"]),
    ("    measure: 10", "    measure: ten", "12:14", &["text stands where", "a whole number of at least 1"]),
    ("    measure: 10", "    measure: 0", "12:14", &["0 is out of range", "a whole number of at least 1"]),
    ("    measure: 10", "    measure: 10.5", "12:14", &["a whole number of at least 1"]),
    ("    temperature: 2.0", "    temperature: -2.0", "11:18", &["-2 is out of range", "a number above 0"]),
    ("    temperature: 2.0", "    temperature: .nan", "11:18", &["not a finite number"]),
    ("    temperature: 2.0\n", "", "", &["needs a temperature"]),
    ("    temperature: 2.0", "    temperature: 2.0\n    inverse_temperature: 0.5", "12:5", &["both given"]),
    ("plugin: square", "plugin: sqare", "7:24", &["no lattice `sqare`", "nearest: square"]),
    ("size: 8", "size: 8, boundary: periodik", "7:51", &["`periodik` is not known here", "nearest: periodic"]),
    ("size: 8", "size: 0", "7:38", &["out of range"]),
    ("size: 8", "size: [8, 8, 8]", "7:38", &["2"]),
    ("size: 8", "size: 100000", "7:38", &["more sites than can be numbered"]),
    ("size: 8", "size: [1, 8], boundary: antiperiodic", "7:38", &["antiperiodic", "at least 2"]),
    (
        "model: { plugin: ising }\n    update: { plugin: metropolis }",
        "model: { plugin: ising, field: 0.1 }\n    update: { plugin: wolff }",
        "9:13",
        &["`wolff` cannot serve the model `ising`", "`field` is nonzero", "metropolis"],
    ),
    (
        "model: { plugin: ising }\n    update: { plugin: metropolis }",
        "model: { plugin: potts, q: 3, coupling: -1 }\n    update: { plugin: wolff }",
        "9:13",
        &["`wolff` cannot serve the model `potts`", "`coupling` is negative"],
    ),
    (
        "square, size: 8 }\n    model: { plugin: ising }",
        "square, size: 8, boundary: antiperiodic }\n    model: { plugin: potts, q: 3 }",
        "7:51",
        &["`antiperiodic` needs spins with a negative"],
    ),
    ("model: { plugin: ising }", "model: { plugin: potts }", "8:12", &["the model `potts` needs `q`"]),
    (
        "model: { plugin: ising }",
        "model: { plugin: potts, q: 3 }",
        "10:23",
        &["`magnetisation` cannot be measured with the model `potts`"],
    ),
    (
        "model: { plugin: ising }",
        "model: { plugin: ising, coupling: { first.z: 1 } }",
        "8:41",
        &["no bond class `first.z`", "first.x"],
    ),
    ("[energy, magnetisation]", "[energy, energy]", "10:23", &["observed twice"]),
    ("[energy, magnetisation]", "[]", "10:14", &["a list of 0"]),
    (
        "update: { plugin: metropolis }",
        "update: [{ plugin: metropolis }, { plugin: metropolis, lanes: 64 }]",
        "9:38",
        &["64 chains together"],
    ),
    ("update: { plugin: metropolis }", "update: { plugin: metropolis, lanes: 7 }", "9:42", &["out of range"]),
    ("of: chains }", "of: chain }", "13:32", &["no step `chain`", "nearest: chains"]),
    ("of: chains }", "of: means }", "13:32", &["means"]),
    (
        "  means: { does: averages, of: chains }",
        "  a: { does: averages, of: b }\n  b: { does: averages, of: a }",
        "13:28",
        &["circle"],
    ),
    (
        "  means: { does: averages, of: chains }",
        "  means: { does: averages, of: chains }\n  tc: { does: crossing, of: means }",
        "14:29",
        &["`means` does averages", "a step that does: sample"],
    ),
    ("does: averages", "does: average", "13:18", &["average", "nearest: averages"]),
    ("  means: { does: averages, of: chains }", "  means: { does: averages, of: chains", "", &["13"]),
    (
        "    temperature: 2.0",
        "    scan: { temperature: { from: 2.0, to: 3.0, count: 1 } }",
        "11:26",
        &["a range of one value cannot have two different ends"],
    ),
    ("    temperature: 2.0", "    scan: { temprature: [2.0] }", "11:13", &["nearest: temperature"]),
    ("seed: 1", "seed: 1\nplugins: [./nothing-here.so]", "4:11", &["there is no such file or folder"]),
    ("spinledger: 1", "spinledger: 2", "1:13", &["2"]),
];

/// Sound steps that begin from others, follow and keep, to be spoilt.
const SEQUENCES: &str = r#"spinledger: 1
pipeline: wrong
seed: 1
steps:
  hot:
    does: sample
    lattice: { plugin: square, size: 8 }
    model: { plugin: ising }
    update: metropolis
    observe: [energy, magnetisation]
    measure: 10
    temperature: 3.0
    scan: { model.field: [0, 1] }
    keep: { states: last }
  cold:
    does: sample
    lattice: { plugin: square, size: 8 }
    model: { plugin: ising }
    update: metropolis
    observe: [energy, magnetisation]
    measure: 10
    start: { step: hot }
    follow: temperature
    scan: { temperature: [3, 2, 3], model.field: [1] }
  means: { does: averages, of: cold }
"#;

const SEQUENCE_CASES: &[Case] = &[
    ("{ states: last }", "{}", "14:11", &["`keep` does not say which", "`states: last`, or `every: n`"]),
    ("{ states: last }", "{ states: last, every: 2 }", "14:11", &["cannot both be asked for"]),
    ("{ states: last }", "{ states: first }", "14:21", &["`first` is not known here", "last"]),
    ("{ states: last }", "{ every: 11 }", "14:20", &["of 10 measurements every 11th is none", "at most 10"]),
    (
        "    keep: { states: last }\n",
        "",
        "21:20",
        &["`hot` keeps no configurations", "`keep: { states: last }` in `hot`"],
    ),
    ("start: { step: hot }", "start: { step: hut }", "22:20", &["no step `hut`", "nearest: hot"]),
    ("start: { step: hot }", "start: { step: cold }", "22:20", &["refers to itself"]),
    ("start: { step: hot }", "start: { step: means }", "22:20", &["circle"]),
    ("start: { step: hot }", "start: hot", "22:12", &["`hot` is not known here", "random, ordered, both"]),
    ("start: { step: hot }", "start: { step: hot, where: { sise: 8 } }", "22:20", &["no column `sise`", "size, field"]),
    (
        "start: { step: hot }",
        "start: { step: hot, where: { size: 9 } }",
        "22:20",
        &["`hot` has no point with field 1.0, size 9"],
    ),
    (", model.field: [1]", "", "22:20", &["2 points of `hot` with size 8 could be meant", "`field` (0.0, 1.0)"]),
    ("model.field: [1]", "model.field: [2]", "22:20", &["`hot` has no point with size 8, field 2.0"]),
    (
        "model.field: [1] }",
        "lattice.size: [9], model.field: [1] }",
        "22:20",
        &["`hot` has no point with size 9, field 1.0"],
    ),
    ("model.field: [1] }", "model.field: [1], start: [{ step: hot }] }", "24:63", &["a scan cannot name the step"]),
    (
        "follow: temperature",
        "follow: temprature",
        "23:13",
        &["`temprature`, which is not scanned", "nearest: temperature"],
    ),
    ("follow: temperature", "follow: 3", "23:13", &["a whole number stands where"]),
    (
        "    scan: { temperature: [3, 2, 3], model.field: [1] }",
        "    temperature: 2.0",
        "23:13",
        &["`follow` names `temperature`, which is not scanned"],
    ),
    (
        "follow: temperature\n    scan: { temperature: [3, 2, 3],",
        "follow: lattice.size\n    temperature: 3.0\n    scan: { lattice.size: [8],",
        "23:13",
        &["chains cannot go on where `lattice.size` has changed", "or a parameter of the"],
    ),
    ("    measure: 10\n    start", "    measure: 1\n    start", "21:14", &["at no position would the chains be swept"]),
    (
        "{ does: averages, of: cold }",
        "{ does: crossing, of: cold }",
        "25:32",
        &["the points of `cold` follow each other: they are not in equilibrium"],
    ),
    (
        "{ does: averages, of: cold }",
        "{ does: reweight, of: cold, temperature: [2, 3] }",
        "25:32",
        &["the points of `cold` follow each other", "a sample step without `follow`"],
    ),
    (
        "model: { plugin: ising }\n    update: metropolis\n    observe: [energy, magnetisation]\n    measure: 10\n    start",
        "model: { plugin: potts, q: 3 }\n    update: metropolis\n    observe: [energy]\n    measure: 10\n    start",
        "",
        &["`potts`"],
    ),
];

/// A start from configurations of another lattice or of other spins.
#[test]
fn configurations_must_fit() {
    let desk = Desk::new();
    let plain = SEQUENCES.replace("    scan: { model.field: [0, 1] }\n", "").replace(", model.field: [1]", "");
    desk.write("plain.yaml", &plain);
    assert_eq!(desk.run(&["check", "plain.yaml"]).status, Some(0));
    let (hot, cold) = plain.split_once("  cold:").expect("two steps");
    for (from, to, wanted) in [
        ("{ plugin: ising }", "{ plugin: potts, q: 3 }", "the spins of `hot` have 3 states, and here they have 2"),
        ("plugin: square", "plugin: triangular", "the lattice of `hot` is triangular, and here it is square"),
    ] {
        let hot = hot.replace(from, to).replace(", magnetisation]", "]");
        desk.write("case.yaml", &format!("{hot}  cold:{cold}"));
        let ran = desk.run(&["check", "case.yaml"]);
        assert!(ran.status == Some(2) && ran.err.contains(wanted), "{}", ran.err);
    }
}

#[test]
fn each_mistake_is_found_at_its_place() {
    let desk = Desk::new();
    let mut failures = Vec::new();
    let plain = CASES.iter().map(|case| (SOUND, case));
    let all = plain.chain(SEQUENCE_CASES.iter().map(|case| (SEQUENCES, case)));
    for (number, (sound, (from, to, place, wanted))) in all.enumerate() {
        assert!(sound.contains(from), "case {number} replaces what is there");
        let name = format!("case-{number}.yaml");
        desk.write(&name, &sound.replacen(from, to, 1));
        let ran = desk.run(&["check", &name]);
        let start = format!("{name}:{place}");
        let place_found = ran
            .err
            .lines()
            .any(|line| line.strip_prefix(&start).is_some_and(|rest| place.is_empty() || rest.starts_with(": ")));
        let words = wanted.iter().all(|word| ran.err.contains(word));
        if ran.status != Some(2) || !place_found || !words || ran.err.contains("panicked") {
            failures.push(format!(
                "case {number} ({to}), status {:?}, wanted {start} {wanted:?}:\n{}",
                ran.status, ran.err
            ));
        }
    }
    assert!(failures.is_empty(), "{}", failures.join("\n"));
    assert!(!desk.path(".spinledger").exists() && !desk.path("results").exists(), "check leaves nothing");
}

/// The sound one is sound: otherwise the cases above would prove nothing.
#[test]
fn the_sound_pipeline_is_sound() {
    let desk = Desk::new();
    for sound in [SOUND, SEQUENCES] {
        desk.write("sound.yaml", sound);
        let ran = desk.run(&["check", "sound.yaml"]);
        assert_eq!(ran.status, Some(0), "{}", ran.err);
    }
}

#[test]
fn several_mistakes_are_all_told() {
    let desk = Desk::new();
    let text = SOUND
        .replace("size: 8", "size: 8, boundry: free")
        .replace("metropolis", "metropolys")
        .replace("measure: 10", "measure: -1")
        .replace("of: chains", "of: chain");
    desk.write("several.yaml", &text);
    let ran = desk.run(&["check", "several.yaml"]);
    assert_eq!(ran.status, Some(2));
    for wanted in ["several.yaml:7:", "several.yaml:9:", "several.yaml:12:", "several.yaml:13:", "4 problems"] {
        assert!(ran.err.contains(wanted), "{wanted} in\n{}", ran.err);
    }
    let json = desk.run(&["check", "several.yaml", "--json"]);
    assert_eq!((json.status, json.out.lines().count()), (Some(2), 4), "{}", json.out);
    assert!(json.out.lines().all(|line| serde_json::from_str::<serde_json::Value>(line).is_ok()));
}

/// A document that expands without bound is refused at once.
#[test]
fn alias_bombs_are_refused() {
    let desk = Desk::new();
    let mut text = String::from("a0: &a0 [x, x, x, x, x, x, x, x, x, x]\n");
    for level in 1..12 {
        let before = format!("*a{}", level - 1);
        text.push_str(&format!("a{level}: &a{level} [{}]\n", vec![before; 10].join(", ")));
    }
    desk.write("bomb.yaml", &text);
    let ran = desk.run(&["check", "bomb.yaml"]);
    assert_eq!(ran.status, Some(2));
    assert!(ran.err.starts_with("bomb.yaml:"), "{}", ran.err);
}

/// `run` refuses the same pipelines before anything runs, with the same status.
#[test]
fn run_refuses_what_check_refuses() {
    let desk = Desk::new();
    desk.write("wrong.yaml", &SOUND.replace("measure: 10", "mesure: 10"));
    for command in ["run", "forecast"] {
        let ran = desk.run(&[command, "wrong.yaml"]);
        assert_eq!(ran.status, Some(2), "{command}");
        assert!(ran.err.contains("wrong.yaml:12:5:"), "{command}: {}", ran.err);
    }
    assert!(!desk.path(".spinledger").exists() && !desk.path("results").exists());
    assert_eq!(desk.run(&["check", "absent.yaml"]).status, Some(2));
    assert_eq!(desk.run(&["run", "--workers", "0", "wrong.yaml"]).status, Some(2));
    assert_eq!(desk.run(&["no-such-command"]).status, Some(2));
}
