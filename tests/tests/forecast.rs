//! What would run, and why: each change of a pipeline is named as the reason for what it makes due, and for nothing else.

use serde_json::Value as Json;
use spinledger_tests::program::Desk;

const SOUND: &str = "\
spinledger: 1
pipeline: why
seed: 7
steps:
  chains:
    does: sample
    lattice: { plugin: square, size: 4 }
    model: { plugin: ising, coupling: 1 }
    update: { plugin: metropolis }
    observe: [energy, magnetisation]
    scan:
      lattice.size: [4, 6]
      temperature: [2.2, 2.3]
    equilibrate: 20
    measure: 200
    chains: 2
  means: { does: averages, of: chains }
  tc: { does: crossing, of: chains }
  look:
    does: compare
    items:
      - take: { step: means, quantity: energy, where: { size: 4, temperature: 2.2 } }
        against: { value: -1.5 }
        precision: 1
";

fn desk() -> Desk {
    let desk = Desk::new();
    desk.write("why.yaml", SOUND);
    let ran = desk.run(&["run", "why.yaml", "--quiet"]);
    assert!(ran.status.is_some_and(|status| status < 2), "{}", ran.err);
    desk
}

fn forecast(desk: &Desk, text: &str) -> Json {
    desk.write("why.yaml", text);
    let ran = desk.run(&["forecast", "why.yaml", "--json", "--workers", "2"]);
    assert_eq!(ran.status, Some(0), "{}", ran.err);
    serde_json::from_str(ran.out.trim()).expect("one event")
}

fn step<'a>(event: &'a Json, name: &str) -> &'a Json {
    let steps = event["steps"].as_array().expect("steps");
    steps.iter().find(|step| step["step"] == name).expect("the step")
}

/// What, before, now, and how many parcels.
fn reasons(event: &Json, name: &str) -> Vec<(String, String, String, u64)> {
    let text = |reason: &Json, part: &str| reason[part].as_str().expect("text").to_owned();
    let reasons = step(event, name)["reasons"].as_array().expect("reasons").iter();
    reasons
        .map(|r| (text(r, "what"), text(r, "before"), text(r, "now"), r["parcels"].as_u64().expect("a number")))
        .collect()
}

/// A change of the text, and the reasons for sampling that it must have.
type Case = (&'static str, &'static str, &'static [(&'static str, &'static str, &'static str, u64)]);

const CASES: &[Case] = &[
    ("seed: 7", "seed: 8", &[("seed", "7", "8", 8)]),
    ("coupling: 1 ", "coupling: 1.1 ", &[("model.coupling", "1", "1.1", 8)]),
    (
        "[2.2, 2.3]",
        "[2.2, 2.25, 2.3]",
        &[("new point", "", "size 4, temperature 2.25", 2), ("new point", "", "size 6, temperature 2.25", 2)],
    ),
    ("chains: 2", "chains: 3", &[("chains", "2", "3", 4)]),
    ("equilibrate: 20", "equilibrate: 30", &[("equilibrate", "20", "30", 8)]),
    ("plugin: metropolis", "plugin: heat-bath", &[("update", "metropolis", "heat-bath", 8)]),
    ("plugin: metropolis", "plugin: metropolis, lanes: 64", &[("lanes", "1", "64", 4), ("update.lanes", "1", "64", 4)]),
    ("[energy, magnetisation]", "[energy]", &[("observe", "energy, magnetisation", "energy", 8)]),
    ("size: 4 }", "size: 4, boundary: free }", &[("lattice.boundary", "periodic", "free", 8)]),
    ("seed: 7", "seed: 7\nunits: meV", &[]),
];

#[test]
fn each_change_is_the_reason() {
    let desk = desk();
    for (from, to, expected) in CASES {
        assert!(SOUND.contains(from), "{from}");
        let event = forecast(&desk, &SOUND.replacen(from, to, 1));
        let told = reasons(&event, "chains");
        if expected.is_empty() {
            assert!(
                told.iter().any(|(what, before, now, _)| what == "energy_unit" && before.is_empty() && now == "meV"),
                "{told:?}"
            );
            continue;
        }
        let told: Vec<_> = told.iter().map(|(a, b, c, n)| (a.as_str(), b.as_str(), c.as_str(), *n)).collect();
        assert_eq!(told, *expected, "{from} -> {to}");
    }
}

#[test]
fn a_longer_run_continues() {
    let desk = desk();
    let event = forecast(&desk, &SOUND.replace("measure: 200", "measure: 300"));
    let chains = step(&event, "chains");
    assert_eq!(
        chains["reasons"][0],
        serde_json::json!({ "what": "measure", "before": "200", "now": "300", "continues": true, "parcels": 8 })
    );
    assert_eq!((&chains["partial"], &chains["due"]), (&8.into(), &0.into()));
    assert!(chains["seconds"].as_f64().unwrap() > 0.0 && event["seconds"].as_f64().unwrap() > 0.0);
    // 100 rows of 8 chains, of some bytes for each of three columns; the files are written whole.
    let (ledger, results) = (chains["ledger_bytes"].as_f64().unwrap(), chains["results_bytes"].as_f64().unwrap());
    assert!((800.0..800.0 * 80.0).contains(&ledger), "{ledger}");
    assert!((results / ledger - 3.0).abs() < 1e-9, "{results}");
    assert_eq!(event["disks"][0]["enough"], true);
    let ran = desk.run(&["forecast", "why.yaml"]);
    assert!(ran.out.contains("measure     200     300 (continues)"), "{}", ran.out);
    assert!(ran.out.contains("by the times on record"), "{}", ran.out);
}

/// An analysis is due for its own parameters, or for what came in; nothing else is touched.
#[test]
fn analyses_have_reasons_too() {
    let desk = desk();
    let event = forecast(&desk, &SOUND.replace("precision: 1", "precision: 2"));
    assert_eq!(reasons(&event, "look"), [("items.0.precision".into(), "1".into(), "2".into(), 1)]);
    assert!(reasons(&event, "means").is_empty() && reasons(&event, "chains").is_empty());
    // One more temperature: the means of the others are there.
    let event = forecast(&desk, &SOUND.replace("[2.2, 2.3]", "[2.2, 2.25, 2.3]"));
    let means = step(&event, "means");
    assert_eq!((&means["parcels"], &means["recorded"], &means["due"]), (&6.into(), &4.into(), &2.into()));
    assert_eq!(reasons(&event, "means"), [("input \"of\"".into(), String::new(), "chains is not complete".into(), 2)]);
    // The new chains are there, by another step of the same physics; what is made of them is not.
    let ran = desk.run(&["run", "why.yaml", "--quiet", "--only", "chains"]);
    assert_eq!(ran.status, Some(0), "{}", ran.err);
    let event = forecast(&desk, &SOUND.replace("[2.2, 2.3]", "[2.2, 2.25, 2.3]"));
    let told = reasons(&event, "means");
    assert_eq!(told.len(), 2, "{told:?}");
    assert_eq!(told[0], ("new point".into(), String::new(), "size 4, temperature 2.25".into(), 1));
    assert_eq!(reasons(&event, "tc")[0], ("input \"of\" (chains)".into(), "4 parts".into(), "6 parts".into(), 1));
    // Twice the length changes what comes in at the same points.
    let longer = SOUND.replace("measure: 200", "measure: 210");
    desk.write("why.yaml", &longer);
    desk.run_pipeline("why.yaml", &["--only", "chains"], 0);
    let event = forecast(&desk, &longer);
    assert_eq!(reasons(&event, "means"), [("input \"of\" (chains)".into(), String::new(), "changed".into(), 4)]);
}

#[test]
fn nothing_on_record_is_said() {
    let desk = Desk::new();
    let event = forecast(&desk, SOUND);
    assert_eq!(
        reasons(&event, "chains"),
        [("nothing of this kind is on record".into(), String::new(), String::new(), 8)]
    );
    assert_eq!((&event["seconds"], &step(&event, "chains")["seconds"]), (&Json::Null, &Json::Null));
    let ran = desk.run(&["forecast", "why.yaml"]);
    assert!(ran.out.contains("how long it takes is not known"), "{}", ran.out);
    assert!(ran.out.contains("are free"), "{}", ran.out);
    assert!(!desk.path(".spinledger").exists() && !desk.path("results").exists(), "nothing is written");
    // More than any disk holds: 8 bytes a cell.
    desk.write("why.yaml", &SOUND.replace("measure: 200", "measure: 100000000000000"));
    let ran = desk.run(&["forecast", "why.yaml"]);
    assert_eq!(ran.status, Some(0), "{}", ran.err);
    assert!(ran.err.contains("there is not enough room on the disk"), "{}{}", ran.out, ran.err);
    assert!(ran.out.contains("PB") || ran.out.contains("TB"), "{}", ran.out);
}

#[test]
fn a_forecast_fits_the_terminal() {
    let desk = desk();
    desk.write(
        "why.yaml",
        &SOUND.replace("[2.2, 2.3]", "{ from: 2, to: 2.5, count: 6 }").replace("seed: 7", "seed: 8"),
    );
    for width in [24, 60, 120] {
        let shown = desk.at_terminal(&["forecast", "why.yaml"], width);
        assert_eq!(shown.status, Some(0));
        let lines = shown.lines();
        assert!(lines.iter().all(|line| line.chars().count() <= usize::from(width)), "{width}: {lines:#?}");
    }
}
