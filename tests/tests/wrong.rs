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

#[test]
fn each_mistake_is_found_at_its_place() {
    let desk = Desk::new();
    let mut failures = Vec::new();
    for (number, (from, to, place, wanted)) in CASES.iter().enumerate() {
        assert!(SOUND.contains(from), "case {number} replaces what is there");
        let name = format!("case-{number}.yaml");
        desk.write(&name, &SOUND.replacen(from, to, 1));
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
    desk.write("sound.yaml", SOUND);
    let ran = desk.run(&["check", "sound.yaml"]);
    assert_eq!(ran.status, Some(0), "{}", ran.err);
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
