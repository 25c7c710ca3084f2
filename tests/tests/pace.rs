//! `pace`: what is named is measured through the loaded plugins, in turn with plain code; what is wrong is refused before anything runs.

use serde_json::Value as Json;
use spinledger_tests::program::{Desk, Ran};

/// The events of a run that went well.
fn events(ran: &Ran) -> Vec<Json> {
    assert_eq!(ran.status, Some(0), "{}{}", ran.out, ran.err);
    ran.out.lines().map(|line| serde_json::from_str(line).expect("JSON lines")).collect()
}

fn number(event: &Json, path: &str) -> f64 {
    event.pointer(path).and_then(Json::as_f64).unwrap_or_else(|| panic!("no number at {path} in {event}"))
}

/// Rates, quartiles in order, and what belongs to every event.
fn is_sane(event: &Json) {
    for spread in ["per_nanosecond", "plain_per_nanosecond", "ratio"] {
        let [low, median, high] = ["low", "median", "high"].map(|part| number(event, &format!("/{spread}/{part}")));
        assert!(low > 0.0 && low <= median && median <= high && high < 1e6, "{spread} in {event}");
    }
    // A ratio is that of rates taken at the same time: it lies between the extremes of what the quartiles allow, generously.
    let guess = number(event, "/per_nanosecond/median") / number(event, "/plain_per_nanosecond/median");
    let ratio = number(event, "/ratio/median");
    assert!(ratio > guess / 5.0 && ratio < guess * 5.0, "{event}");
    assert!(number(event, "/rounds") >= 3.0 && number(event, "/round_seconds") > 0.0, "{event}");
    assert!(number(event, "/observing/median").is_finite(), "{event}");
    assert!(number(event, "/state_bytes") > 0.1, "{event}");
}

#[test]
fn every_combination_that_is_named_is_measured() {
    let desk = Desk::new();
    let lattices = ["{ plugin: square, size: 16 }", "{ plugin: square, size: [8, 12] }"];
    let updates = ["metropolis", "{ plugin: metropolis, lanes: 64 }", "wolff", "swendsen-wang"];
    let mut args = vec!["pace", "--json", "--seconds", "0.1", "--temperature", "2.5", "--model", "ising"];
    lattices.iter().for_each(|lattice| args.extend(["--lattice", lattice]));
    updates.iter().for_each(|update| args.extend(["--update", update]));
    let events = events(&desk.run(&args));
    assert_eq!(events.len(), lattices.len() * updates.len());
    let mut events = events.iter();
    for (lattice, sites) in lattices.iter().zip([256.0, 96.0]) {
        for (update, (chains, counted, plain)) in updates.iter().zip([
            (1.0, "updates", "metropolis"),
            (64.0, "updates", "metropolis"),
            (1.0, "flips", "wolff"),
            (1.0, "sites", "swendsen-wang"),
        ]) {
            let event = events.next().expect("an event for each");
            assert_eq!((event["event"].as_str(), event["lattice"].as_str()), (Some("pace"), Some(*lattice)));
            assert_eq!((event["model"].as_str(), event["update"].as_str()), (Some("ising"), Some(*update)));
            assert_eq!((number(event, "/sites"), number(event, "/chains")), (sites, chains), "{event}");
            assert_eq!((event["counted"].as_str(), event["plain"].as_str()), (Some(counted), Some(plain)));
            assert_eq!((number(event, "/temperature"), number(event, "/plain_temperature")), (2.5, 2.5));
            assert!(event["observed"].as_array().is_some_and(|columns| columns.len() >= 2), "{event}");
            is_sane(event);
        }
    }
}

#[test]
fn a_rule_tells_which_of_its_code_runs() {
    let desk = Desk::new().with("SPINLEDGER_SIMD", "portable");
    let args = ["pace", "--json", "--seconds", "0.05", "--lattice", "{ plugin: square, size: 64 }"];
    let one = |update| events(&desk.run(&[&args[..], &["--update", update]].concat())).remove(0);
    let packed = one("multi-spin");
    assert_eq!(packed["path"].as_str(), Some("portable"), "{packed}");
    // A bit a spin, and little else.
    assert!(number(&packed, "/state_bytes") < 1.0, "{packed}");
    is_sane(&packed);
    // Where the square lattice orders, to which nothing was said.
    assert!((number(&packed, "/temperature") - 2.269_185_314).abs() < 1e-6, "{packed}");
    assert_eq!(one("metropolis")["path"].as_str(), Some(""));
}

#[test]
fn rules_that_nobody_named_are_left_out_where_they_cannot_serve() {
    let desk = Desk::new();
    let model = "{ plugin: potts, q: 3 }";
    let lattice = "{ plugin: triangular, size: 12 }";
    let args = ["pace", "--json", "--seconds", "0.02", "--lattice", lattice, "--model", model];
    let events = events(&desk.run(&args));
    let rules: Vec<&str> = events.iter().filter_map(|event| event["update"].as_str()).collect();
    assert_eq!(rules, ["metropolis", "{ plugin: metropolis, lanes: 64 }", "heat-bath", "wolff", "swendsen-wang"]);
    // Without spin values nobody knows how many spins a cluster has: sites and flips are not compared.
    let wolff = events.iter().find(|event| event["update"] == "wolff").expect("found");
    assert_eq!((wolff["counted"].as_str(), &wolff["ratio"]), (Some("sites"), &Json::Null));
    assert!(wolff["observed"].as_array().is_some_and(|columns| columns.iter().any(|name| name == "order")));
    // But named, it is refused like in a pipeline.
    let named = desk.run(&[&args[..], &["--update", "multi-spin"]].concat());
    assert_eq!(named.status, Some(2));
    assert!(named.out.contains("`multi-spin` cannot serve the model `potts`"), "{}", named.out);
}

#[test]
fn a_person_gets_a_table_and_is_told_what_the_numbers_are() {
    let desk = Desk::new();
    let ran =
        desk.run(&["pace", "--seconds", "0.02", "--lattice", "{ plugin: square, size: 16 }", "--update", "wolff"]);
    assert_eq!((ran.status, ran.err.as_str()), (Some(0), ""));
    let lines: Vec<&str> = ran.out.lines().collect();
    assert!(lines[0].starts_with("lattice") && lines[0].contains("over plain"), "{}", ran.out);
    assert!(lines[1].starts_with("square, size: 16  ising  wolff") && lines[1].contains("flips"), "{}", ran.out);
    assert!(ran.out.contains("compare ratios"), "{}", ran.out);
}

#[test]
fn what_is_wrong_is_refused_with_the_place_and_the_nearest_word() {
    let desk = Desk::new();
    let cases: [(&[&str], &[&str]); 7] = [
        (
            &["--update", "metropolos"],
            &["command line:9:13: ", "there is no update `metropolos`", "nearest: metropolis"],
        ),
        (&["--lattice", "{ plugin: sqare, size: 8 }"], &["command line:7:24: ", "`sqare`", "nearest: square"]),
        (&["--lattice", "{ plugin: square, sise: 8 }"], &["`sise`", "nearest: size"]),
        (&["--model", "isin"], &["`isin`", "nearest: ising"]),
        (&["--temperature=-1"], &["-1 is out of range"]),
        (&["--update", "[metropolis, wolff]"], &["rules are measured one by one"]),
        (&["--update", "metropolis\n    measure: 7"], &["does not stand on one line"]),
    ];
    for (args, expected) in cases {
        let ran = desk.run(&[&["pace", "--seconds", "0.02"], args].concat());
        assert_eq!((ran.status, ran.out.as_str()), (Some(2), ""), "{args:?}");
        for text in expected {
            assert!(ran.err.contains(text), "{args:?} without `{text}`:\n{}", ran.err);
        }
    }
    // A mistake is told once, however many combinations it is in.
    let ran = desk.run(&["pace", "--update", "metropolos", "--model", "ising", "--model", "{ plugin: potts, q: 3 }"]);
    assert_eq!((ran.status, ran.err.matches("`metropolos`").count()), (Some(2), 1), "{}", ran.err);
    let ran = desk.run(&["pace", "--json", "--update", "metropolos"]);
    let problem: Json = serde_json::from_str(ran.out.lines().next().unwrap_or_default()).expect("an event");
    assert_eq!((ran.status, problem["nearest"].as_str()), (Some(2), Some("metropolis")), "{}", ran.out);
}
