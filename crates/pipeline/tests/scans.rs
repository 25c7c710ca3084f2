//! Scans and their points.

mod common;

use common::{vocabulary, with_scan};
use spinledger_pipeline::{Expansion, FromStep, Pipeline, Point, Source, locate, read, render};
use spinledger_terms::{Problem, Value};

fn pipeline(text: &str) -> Pipeline {
    let source = Source::new("p.yaml", text);
    read(&source, &vocabulary()).unwrap_or_else(|problems| panic!("{}", render(&source, &problems)))
}

fn points(text: &str) -> Vec<Point> {
    match pipeline(text).step("s").unwrap().expand(&|_| None, &vocabulary()) {
        Ok(Expansion::Points(points)) => points,
        other => panic!("{other:?}"),
    }
}

fn row(point: &Point) -> String {
    let cells: Vec<String> =
        point.columns.iter().map(|(name, value)| format!("{name}={}", value.canonical())).collect();
    cells.join(" ")
}

fn rows(scan: &str) -> Vec<String> {
    points(&with_scan(scan)).iter().map(row).collect()
}

fn told(scan: &str) -> String {
    let source = Source::new("p.yaml", with_scan(scan));
    let problems = read(&source, &vocabulary()).expect_err("a wrong scan");
    problems.iter().map(|p| p.message.clone()).collect::<Vec<_>>().join("; ")
}

#[test]
fn the_grid_has_canonical_values_and_an_order_of_its_own() {
    let expected = [
        "size=12 temperature=2.0",
        "size=12 temperature=2.1",
        "size=12 temperature=2.2",
        "size=16 temperature=2.0",
        "size=16 temperature=2.1",
        "size=16 temperature=2.2",
    ];
    assert_eq!(rows("{ lattice.size: [16, 12], temperature: { from: 2.2, to: 2, count: 3 } }"), expected);
    assert_eq!(rows("{ temperature: [2, 2.1, 2.20, 2.0], lattice.size: [12, 16, 12] }"), expected);
    assert_eq!(
        rows("[{ temperature: [2, 2.1, 2.2], lattice.size: 16 }, { temperature: [2, 2.1, 2.2], lattice.size: 12 }]"),
        expected
    );
    assert_eq!(rows("{ lattice.size: { from: 12, to: 16, count: 2 }, temperature: [2, 2.1, 2.2] }"), expected);
}

#[test]
fn bodies_are_complete() {
    let points = points(&with_scan("{ model.coupling: [0.5, 2], temperature: [1, 3] }"));
    assert_eq!(points.len(), 4);
    let body = points[3].body();
    assert_eq!(
        body.canonical(),
        r#"{"chains":4,"equilibrate":"auto","every":1,"lattice":{"boundary":"periodic","plugin":"square","shells":1,"size":8},"measure":100,"model":{"coupling":2.0,"field":0.0,"plugin":"ising"},"observe":[{"plugin":"energy"}],"settle":0,"start":"random","temperature":3.0,"update":{"clusters":1,"plugin":"wolff","times":1}}"#
    );
    for point in &points {
        for path in ["model.coupling", "temperature", "lattice.size", "model", "lattice.plugin", "nothing"] {
            assert_eq!(point.get(path).as_ref(), point.body().at(path), "{path}");
        }
    }
}

#[test]
fn a_step_without_scan_is_one_point() {
    let text = with_scan("{ temperature: [2] }");
    let text = &text[..text.find("    scan:").unwrap()];
    let points = points(text);
    assert_eq!((points.len(), points[0].columns.len()), (1, 0));
    assert_eq!(points[0].get("temperature"), Some(Value::Number(2.0)));
}

#[test]
fn lengths_make_no_column_and_the_longer_wins() {
    let scan = "[{ temperature: [2, 3], measure: 500 }, { temperature: [3, 4], measure: 200 }, { temperature: 3 }]";
    let points = points(&with_scan(scan));
    assert_eq!(points.iter().map(row).collect::<Vec<_>>(), ["temperature=2.0", "temperature=3.0", "temperature=4.0"]);
    let measure: Vec<_> = points.iter().map(|p| p.get("measure").unwrap().as_i64().unwrap()).collect();
    assert_eq!(measure, [500, 500, 200]);
    assert_eq!(points[1].body().at("measure"), Some(&Value::Integer(500)));
    // The same, named the other way round.
    let swapped = "[{ temperature: [3, 4], measure: 200 }, { temperature: 3 }, { temperature: [2, 3], measure: 500 }]";
    for (a, b) in points.iter().zip(self::points(&with_scan(swapped))) {
        assert_eq!(a.body(), b.body());
    }
    // A block that does not say has the body's.
    assert_eq!(
        self::points(&with_scan("[{ temperature: 3, measure: 20 }, { temperature: 3 }]"))[0].get("measure"),
        Some(Value::Integer(100))
    );
}

#[test]
fn other_differences_are_refused() {
    let scan = "[{ temperature: [2, 3], settle: 5 }, { temperature: [3, 2] }]";
    assert_eq!(told(scan), "`settle` is 0 here and 5 elsewhere for one and the same point");
    assert_eq!(rows("[{ temperature: [2, 3], settle: 5 }, { temperature: [3, 4], settle: 5 }]").len(), 3);
}

#[test]
fn what_one_block_scans_is_a_column_of_all() {
    let scan = "[{ temperature: [2], model.field: [0.5, 1] }, { temperature: [2, 3] }]";
    let expected = [
        "field=0.0 temperature=2.0",
        "field=0.0 temperature=3.0",
        "field=0.5 temperature=2.0",
        "field=1.0 temperature=2.0",
    ];
    assert_eq!(rows(scan), expected);
}

#[test]
fn sizes_by_direction() {
    assert_eq!(
        rows("{ lattice.size: [[12, 8], 6] }"),
        ["size=\"12x8\" size_x=12 size_y=8", "size=\"6x6\" size_x=6 size_y=6"]
    );
    assert_eq!(rows("{ lattice.size: [[6, 6], 6] }"), ["size=\"6x6\" size_x=6 size_y=6"]);
    for scan in ["{ lattice.size: [[6, 6], 6] }", "[{ lattice.size: 6 }, { lattice.size: [[6, 6]] }]"] {
        assert_eq!(points(&with_scan(scan))[0].get("lattice.size"), Some(Value::Integer(6)));
    }
    assert_eq!(rows("{ lattice.size: [8, 12] }"), ["size=8", "size=12"]);
    let cubic = with_scan("{ lattice.size: [[2, 3, 4]] }").replace("square", "cubic");
    assert_eq!(row(&points(&cubic)[0]), "size=\"2x3x4\" size_x=2 size_y=3 size_z=4");
}

#[test]
fn plugins_and_their_parts_are_scanned() {
    assert_eq!(
        rows("{ update: [metropolis, { plugin: wolff, clusters: 3 }, wolff], temperature: 2 }"),
        [
            "update=\"metropolis\" temperature=2.0",
            "update=\"wolff\" temperature=2.0",
            "update=\"wolff clusters=3\" temperature=2.0"
        ]
    );
    let list = with_scan("{ update.1.clusters: [1, 5] }").replace("update: wolff", "update: [metropolis, wolff]");
    let points = points(&list);
    assert_eq!(points.iter().map(row).collect::<Vec<_>>(), ["clusters=1", "clusters=5"]);
    assert_eq!(points[1].body().at("update.1.clusters"), Some(&Value::Integer(5)));
    assert_eq!(points[1].body().at("update.0.plugin"), Some(&Value::text("metropolis")));
    // Whole models in one block, a part in another.
    assert_eq!(
        rows("[{ model: [{ plugin: potts, states: 3 }], temperature: 1 }, { model.coupling: [1, 2], temperature: 1 }]"),
        [
            "coupling=1.0 model=\"ising\" temperature=1.0",
            "coupling=1.0 model=\"potts states=3\" temperature=1.0",
            "coupling=2.0 model=\"ising coupling=2.0\" temperature=1.0",
        ]
    );
    assert_eq!(rows("{ observe: [energy, magnetisation], temperature: [1, 2] }").len(), 2);
}

#[test]
fn names_of_bond_classes_contain_dots() {
    let points = points(&with_scan("{ model.coupling.first.x: [1, 2], model.coupling.first: 0.5 }"));
    assert_eq!(points.iter().map(row).collect::<Vec<_>>(), ["first=0.5 first_x=1.0", "first=0.5 first_x=2.0"]);
    assert_eq!(points[1].body().at("model.coupling").unwrap().canonical(), r#"{"first":0.5,"first.x":2.0}"#);
}

#[test]
fn equal_last_words_take_the_whole_path() {
    let text = with_scan("{ update.0.times: [1, 2], update.1.times: [3] }")
        .replace("update: wolff", "update: [metropolis, wolff]");
    assert_eq!(
        points(&text).iter().map(row).collect::<Vec<_>>(),
        ["update_0_times=1 update_1_times=3", "update_0_times=2 update_1_times=3"]
    );
}

#[test]
fn places_lead_to_the_scan_or_the_body() {
    let text = with_scan(
        "\n      - { lattice.size: [8, [4, 4]], measure: 7 }\n      - temperature: { from: 1, to: 2, count: 2 }\n",
    );
    let source = Source::new("p.yaml", &*text);
    let points = points(&text);
    let at = |point: &Point, path: &str| {
        let place = locate(&source, &Problem::at_value(&point.place(path), ""));
        let line: Vec<char> = text.lines().nth(place.line - 1).unwrap().chars().collect();
        line[place.column - 1..place.column - 1 + place.width].iter().collect::<String>()
    };
    let of = |size: &str, temperature: f64| {
        let is = |p: &&Point| {
            p.column("size") == Some(&Value::text(size)) && p.get("temperature") == Some(Value::Number(temperature))
        };
        points.iter().find(is).unwrap()
    };
    let (listed, single, ranged) = (of("4x4", 2.0), of("8x8", 2.0), of("8x8", 1.0));
    assert_eq!(at(listed, "lattice.size"), "[4, 4]");
    assert_eq!(at(listed, "lattice.size.1"), "4");
    assert_eq!(at(single, "lattice.size"), "8");
    // Named in both blocks: the body's measure is the longer.
    assert_eq!((single.get("measure"), at(single, "measure").as_str()), (Some(Value::Integer(100)), "100"));
    assert_eq!(at(listed, "measure"), "7");
    assert_eq!(at(ranged, "temperature"), "{ from: 1, to: 2, count: 2 }");
    assert_eq!(at(ranged, "model.coupling"), "ising");
    assert_eq!(at(ranged, "every"), "s");
    assert_eq!(at(listed, "lattice.plugin"), "square");
}

#[test]
fn values_from_a_table_wait_for_it_and_may_depend_on_the_rest() {
    let text = with_scan("{ lattice.size: [8, 12], temperature: { step: placed, where: { kind: warm } } }")
        + "  placed: { does: averages, of: first }\n  first: { does: place, of: third }\n  third:\n    does: sample\n    \
           lattice: { plugin: square, size: 4 }\n    model: ising\n    update: wolff\n    observe: [energy]\n    temperature: 1\n    measure: 5\n";
    let pipeline = pipeline(&text);
    let order: Vec<&str> = pipeline.steps.iter().map(|s| s.name.as_str()).collect();
    assert_eq!(order, ["third", "first", "placed", "s"]);
    let step = pipeline.step("s").unwrap();
    assert_eq!(step.needs, ["placed"]);
    assert!(matches!(step.expand(&|_| None, &vocabulary()), Ok(Expansion::Waits(names)) if names == ["placed"]));
    let table = |from: &FromStep| {
        assert_eq!((from.step.as_str(), from.column.as_str(), &from.table), ("placed", "temperature", &None));
        assert_eq!(from.filter["kind"], Value::text("warm"));
        let size = from.beside["size"].as_i64().unwrap();
        Some((1..=size / 4).map(Value::Integer).collect())
    };
    let Ok(Expansion::Points(points)) = step.expand(&table, &vocabulary()) else { panic!("no points") };
    let expected = [
        "size=8 temperature=1.0",
        "size=8 temperature=2.0",
        "size=12 temperature=1.0",
        "size=12 temperature=2.0",
        "size=12 temperature=3.0",
    ];
    assert_eq!(points.iter().map(row).collect::<Vec<_>>(), expected);
    assert_eq!(points[4].body().at("temperature"), Some(&Value::Number(3.0)));
    let wrong = step.expand(&|_| Some(vec![Value::Integer(-1)]), &vocabulary()).unwrap_err();
    assert_eq!(wrong[0].message, "the table of `placed` gives `temperature` the value -1");
    let none = step.expand(&|_| Some(Vec::new()), &vocabulary()).unwrap_err();
    assert_eq!(none[0].message, "the table of `placed` gives no `temperature` for size 8");
}

#[test]
fn a_mapping_that_the_parameter_takes_is_no_table() {
    let text = with_scan("{ start: [{ step: hot }, random], temperature: 1 }")
        + "  hot: { does: place, of: other }\n  other: { does: report, of: hot2 }\n  hot2: { does: compare, items: [{ take: { step: third }, against: { value: 1 } }] }\n";
    let source = Source::new("p.yaml", text);
    let problems = read(&source, &vocabulary()).unwrap_err();
    assert_eq!(problems.iter().map(|p| p.message.as_str()).collect::<Vec<_>>(), ["there is no step `third`"]);
}

#[test]
fn a_followed_parameter_keeps_its_order_and_repetitions() {
    let text = with_scan("{ temperature: [2, 1, 2], model.field: [0.5, 0] }")
        .replace("    measure", "    follow: temperature\n    measure");
    let expected = [
        "field=0.0 position=0 temperature=2.0",
        "field=0.0 position=1 temperature=1.0",
        "field=0.0 position=2 temperature=2.0",
        "field=0.5 position=0 temperature=2.0",
        "field=0.5 position=1 temperature=1.0",
        "field=0.5 position=2 temperature=2.0",
    ];
    assert_eq!(points(&text).iter().map(row).collect::<Vec<_>>(), expected);
    let by_last_word = text.replace("follow: temperature", "follow: field");
    let expected = [
        "temperature=1.0 position=0 field=0.5",
        "temperature=1.0 position=1 field=0.0",
        "temperature=2.0 position=0 field=0.5",
        "temperature=2.0 position=1 field=0.0",
    ];
    let followed: Vec<String> = points(&by_last_word).iter().map(row).collect();
    assert_eq!(followed, expected, "temperature is named twice here, where it is not followed");
}

/// A sequence goes on in a later block; one that only begins there begins at 0.
#[test]
fn sequences_go_on_from_block_to_block() {
    let text = with_scan(
        "[{ temperature: [3, 1], measure: 5 }, { temperature: [2, 3], measure: 7 }, { temperature: [4], lattice.size: [16] }]",
    )
    .replace("    measure", "    follow: temperature\n    measure");
    let expected = [
        "size=8 position=0 temperature=3.0",
        "size=8 position=1 temperature=1.0",
        "size=8 position=2 temperature=2.0",
        "size=8 position=3 temperature=3.0",
        "size=16 position=0 temperature=4.0",
    ];
    let points = points(&text);
    assert_eq!(points.iter().map(row).collect::<Vec<_>>(), expected);
    let measures: Vec<_> = points.iter().map(|p| p.get("measure").and_then(|m| m.as_i64())).collect();
    assert_eq!(measures, [5, 5, 7, 7, 100].map(Some));
}

#[test]
fn a_value_of_the_body_that_the_scan_replaces_is_checked() {
    let source =
        Source::new("p.yaml", with_scan("{ temperature: [1] }").replace("temperature: 2.0", "temperature: cold"));
    let problems = read(&source, &vocabulary()).unwrap_err();
    assert_eq!(problems.len(), 1);
    assert_eq!(locate(&source, &problems[0]).line, 11);
}

#[test]
fn required_parameters_may_come_from_the_scan_alone() {
    let text = with_scan("{ lattice.size: [4], temperature: [1], measure: 5 }");
    let text = text.replace("    temperature: 2.0\n    measure: 100\n", "").replace(", size: 8", "");
    assert_eq!(points(&text).len(), 1);
}

/// Planning reads large scans often: ten thousand points in well under a second even here, where nothing is optimised for it.
#[test]
fn large_scans_are_quick() {
    let text = with_scan(
        "{ temperature: { from: 1, to: 3, count: 1000 }, model.field: { from: 0, to: 1, count: 10 }, lattice.size: [8] }",
    );
    let start = std::time::Instant::now();
    let points = points(&text);
    let bodies = points.iter().map(|p| p.body().canonical().len()).sum::<usize>();
    let time = start.elapsed();
    assert_eq!(points.len(), 10_000);
    assert!(bodies > 1_000_000);
    assert!(time.as_secs_f64() < 5.0, "{time:?}");
}
