//! Pictures of kept configurations: their tables hold the configuration and its walls, on every lattice that has a picture, and nothing is drawn again
//! that is drawn already.

use spinledger_ledger::file_key;
use spinledger_terms::Table;
use spinledger_tests::plugins;
use spinledger_tests::program::Desk;
use std::collections::BTreeSet;

fn pipeline(lattice: &str, model: &str, update: &str, steps: &str) -> String {
    format!(
        "spinledger: 1\npipeline: pictures\nseed: 4\nsteps:\n  spins:\n    does: sample\n    lattice: {lattice}\n    model: {model}\n    \
         update: {update}\n    observe: [energy]\n    temperature: 2.4\n    equilibrate: 30\n    measure: 6\n    chains: 2\n    \
         keep: {{ every: 2 }}\n{steps}"
    )
}

fn numbers(table: &Table, name: &str) -> Vec<f64> {
    let numbers = table.numbers(name).unwrap_or_else(|| panic!("{name}"));
    numbers.into_iter().map(|x| x.expect("a number")).collect()
}

fn run(text: &str) -> Desk {
    let desk = Desk::new();
    desk.write("pictures.yaml", text);
    desk.run_pipeline("pictures.yaml", &[], 0);
    desk
}

/// Two places.
type Pair = ([f64; 2], [f64; 2]);

/// The picture's walls, and sites that have neighbours at distance 1 within the picture in another state: pairs of places.
fn walls(desk: &Desk, step: &str) -> (Table, Vec<[f64; 4]>, Vec<Pair>) {
    let main = desk.table(&format!("results/pictures/{step}.parquet"));
    let walls = desk.table(&format!("results/pictures/{step}.walls.parquet"));
    let ends = ["x0", "y0", "x1", "y1"].map(|name| numbers(&walls, name));
    let segments = (0..walls.rows()).map(|i| [ends[0][i], ends[1][i], ends[2][i], ends[3][i]]).collect();
    let (x, y, state) = (numbers(&main, "x"), numbers(&main, "y"), numbers(&main, "state"));
    let mut unlike = Vec::new();
    for i in 0..x.len() {
        for j in 0..i {
            let near = ((x[i] - x[j]).powi(2) + (y[i] - y[j]).powi(2) - 1.0).abs() < 1e-9;
            if near && state[i] != state[j] {
                unlike.push(([x[i], y[i]], [x[j], y[j]]));
            }
        }
    }
    (main, segments, unlike)
}

/// Between each two neighbours of different states, and nowhere else, is a wall across the middle, as long as a side of the dual lattice.
#[test]
fn walls_stand_between_unlike_neighbours() {
    let steps = "  shot: { does: picture, of: spins, chain: 1, title: Shot }\n";
    for (lattice, length) in [
        ("{ plugin: square, size: [7, 9], boundary: [periodic, free] }", 1.0),
        ("{ plugin: triangular, size: 8 }", 1.0 / 3f64.sqrt()),
        ("{ plugin: honeycomb, size: 6, boundary: [free, plus] }", 3f64.sqrt()),
    ] {
        for model in ["ising", "{ plugin: potts, q: 3 }"] {
            let desk = run(&pipeline(lattice, model, "metropolis", steps).replace("2.4", "5.0"));
            let (main, segments, unlike) = walls(&desk, "shot");
            let names: Vec<&str> = main.columns.iter().map(|c| c.name.as_str()).collect();
            assert_eq!(names, ["site", "x", "y", "value", "state", "flags"]);
            assert!(unlike.len() > 10, "{lattice} {model}");
            // In thousandths, since both are computed in floating point.
            let rounded = |x: f64| (x * 1000.0).round() as i64;
            let expected: BTreeSet<[i64; 2]> =
                unlike.iter().map(|(a, b)| [rounded((a[0] + b[0]) / 2.0), rounded((a[1] + b[1]) / 2.0)]).collect();
            let found: BTreeSet<[i64; 2]> =
                segments.iter().map(|s| [rounded((s[0] + s[2]) / 2.0), rounded((s[1] + s[3]) / 2.0)]).collect();
            assert!(found == expected && segments.len() == unlike.len(), "{lattice} {model}");
            for s in &segments {
                let (dx, dy) = (s[2] - s[0], s[3] - s[1]);
                assert!((dx.hypot(dy) - length).abs() < 1e-9, "{lattice}: {s:?}");
            }
            // The configuration is the last of chain 1.
            let kept = desk.table("results/pictures/spins.states.parquet");
            let here = |row: &usize| {
                let of = |name: &str| kept.column(name).and_then(|c| c.cells.number(*row)).expect("a number");
                of("chain") == 1.0 && of("sweep") == 35.0
            };
            let values = numbers(&kept, "value");
            let last: Vec<f64> = (0..kept.rows()).filter(here).map(|row| values[row]).collect();
            assert_eq!(last, numbers(&main, "value"), "{lattice} {model}");
            let svg = String::from_utf8(desk.files("results/pictures")["shot.svg"].clone()).expect("text");
            let name = if model == "ising" { "\u{2212}1: " } else { "colour 3: " };
            assert!(svg.contains("<svg") && svg.contains("Shot") && svg.contains(name), "{svg:.300}");
            let key = file_key(&desk.path("results/pictures/shot.svg")).expect("a figure");
            assert!(key.is_some() && key == file_key(&desk.path("results/pictures/shot.png")).expect("a figure"));
            assert_eq!(key, file_key(&desk.path("results/pictures/shot.parquet")).expect("a table"));
        }
    }
}

/// Around the middle of each face the number of walls of two states is even: walls go on, or around. Beyond the rim is no face.
#[test]
fn walls_go_on_from_face_to_face() {
    let steps = "  shot: { does: picture, of: spins }\n";
    // How far from its middle a face has how many corners.
    let faces: [(&str, &[(usize, f64)]); 4] = [
        ("square", &[(4, 0.5f64.sqrt())]),
        ("triangular", &[(3, 1.0 / 3f64.sqrt())]),
        ("honeycomb", &[(6, 1.0)]),
        ("kagome", &[(3, 1.0 / 3f64.sqrt()), (6, 1.0)]),
    ];
    for (lattice, faces) in faces {
        let text = pipeline(&format!("{{ plugin: {lattice}, size: 7, boundary: free }}"), "ising", "metropolis", steps);
        let desk = run(&text.replace("2.4", "9.0"));
        let (main, segments, _) = walls(&desk, "shot");
        let (x, y) = (numbers(&main, "x"), numbers(&main, "y"));
        let mut ends: Vec<([f64; 2], usize)> = Vec::new();
        for end in segments.iter().flat_map(|s| [[s[0], s[1]], [s[2], s[3]]]) {
            match ends.iter_mut().find(|(known, _)| (known[0] - end[0]).hypot(known[1] - end[1]) < 1e-6) {
                Some((_, count)) => *count += 1,
                None => ends.push((end, 1)),
            }
        }
        let corners = |end: &[f64; 2], distance: f64| {
            x.iter().zip(&y).filter(|(x, y)| ((**x - end[0]).hypot(**y - end[1]) - distance).abs() < 1e-6).count()
        };
        let inside: Vec<_> =
            ends.iter().filter(|(end, _)| faces.iter().any(|(n, distance)| corners(end, *distance) == *n)).collect();
        assert!(inside.len() > 20, "{lattice}: {} of {}", inside.len(), ends.len());
        assert!(inside.iter().all(|(_, count)| count % 2 == 0), "{lattice}");
    }
}

/// A chain is a strip, of three dimensions a layer is seen.
#[test]
fn chains_and_layers() {
    let steps = "  shot: { does: picture, of: spins }\n";
    let desk = run(&pipeline("{ plugin: chain, size: 30 }", "ising", "heat-bath", steps));
    let (main, segments, unlike) = walls(&desk, "shot");
    assert_eq!(numbers(&main, "y"), vec![0.0; 30]);
    assert_eq!(segments.len(), unlike.len());
    let steps = "  shot: { does: picture, of: spins, layer: 3, walls: false }\n  none: { does: picture, of: spins, layer: 5 }\n";
    let desk = Desk::new();
    desk.write("pictures.yaml", &pipeline("{ plugin: cubic, size: [6, 4, 5] }", "ising", "heat-bath", steps));
    let events = desk.run_pipeline("pictures.yaml", &[], 1);
    assert_eq!(events.broken(), ["there is no layer 5; there are layers 0 to 4"]);
    let (main, segments, unlike) = walls(&desk, "shot");
    let sites = numbers(&main, "site");
    assert_eq!(sites.len(), 24);
    for (row, site) in sites.iter().enumerate() {
        // The last direction is fastest.
        let (x, y, z) = (site.div_euclid(20.0), site.div_euclid(5.0) % 4.0, site % 5.0);
        assert_eq!((z, numbers(&main, "x")[row], numbers(&main, "y")[row]), (3.0, x, y));
    }
    assert_eq!(segments.len(), unlike.len(), "the table has walls that are not drawn");
}

/// A picture is known by the configuration that it shows: not by the rest of the scan, names, or how it was asked for.
#[test]
fn pictures_are_known_by_what_they_show() {
    let text = |more: &str, picture: &str| {
        let steps = format!("{more}  shot: {picture}\n");
        pipeline("{ plugin: square, size: 6 }", "ising", "metropolis", &steps)
    };
    let desk = run(&text("", "{ does: picture, of: spins }"));
    let files = desk.files("results/pictures");
    for picture in [
        "{ does: picture, of: spins, where: { temperature: 2.4, size: 6 }, chain: 0, sweep: 35 }",
        "{ does: picture, of: spins, sweep: 35, walls: true }",
    ] {
        desk.write("pictures.yaml", &text("", picture));
        assert_eq!(desk.run_pipeline("pictures.yaml", &[], 0).counts_of("shot"), (0, 1, 0), "{picture}");
    }
    let renamed = text("", "{ does: picture, of: magnets }").replace("  spins:", "  magnets:");
    desk.write("pictures.yaml", &renamed);
    assert_eq!(desk.run_pipeline("pictures.yaml", &[], 0).counts().0, 0);
    // More temperatures and chains leave it as it is.
    let more = "    scan: { temperature: [2.0, 2.4] }\n";
    let picture = "{ does: picture, of: spins, where: { temperature: 2.4 } }";
    desk.write("pictures.yaml", &text(more, picture).replace("chains: 2", "chains: 3"));
    assert_eq!(desk.run_pipeline("pictures.yaml", &[], 0).counts_of("shot"), (0, 1, 0));
    assert!(desk.files("results/pictures")["shot.png"] == files["shot.png"]);
    // A longer run has another last one.
    desk.write("pictures.yaml", &text(more, picture).replace("measure: 6", "measure: 8"));
    assert_eq!(desk.run_pipeline("pictures.yaml", &[], 0).counts_of("shot"), (1, 0, 0));
    let unclear = text(more, "{ does: picture, of: spins }");
    desk.write("pictures.yaml", &unclear);
    let ran = desk.run(&["check", "pictures.yaml"]);
    assert!(ran.status == Some(2) && ran.err.contains("they differ in `temperature` (2.0, 2.4)"), "{}", ran.err);
    for (asked, wanted) in [
        ("chain: 7", "nothing is kept of chain 7; there are chains 0, 1"),
        ("sweep: 30", "nothing is kept at sweep 30; there are sweeps 31, 33, 35"),
        ("start: ordered", "`start` tells chains apart only where they began from both"),
    ] {
        desk.write("pictures.yaml", &text("", &format!("{{ does: picture, of: spins, {asked} }}")));
        let events = desk.run_pipeline("pictures.yaml", &[], 1);
        assert_eq!(events.broken(), [wanted]);
    }
    let wrong = text("  means: { does: averages, of: spins }\n", "{ does: picture, of: means }");
    desk.write("pictures.yaml", &wrong);
    let ran = desk.run(&["check", "pictures.yaml"]);
    assert!(ran.status == Some(2) && ran.err.contains("`means` does averages"), "{}", ran.err);
    desk.write("pictures.yaml", &text("", "{ does: picture, of: spins }").replace("    keep: { every: 2 }\n", ""));
    let ran = desk.run(&["check", "pictures.yaml"]);
    assert!(ran.status == Some(2) && ran.err.contains("`spins` keeps no configurations"), "{}", ran.err);
}

/// Vector spins, of a foreign plugin, are kept as vectors, begun from, and drawn by their angle.
#[test]
fn vectors_are_kept_and_drawn() {
    let desk = Desk::new();
    let library = plugins::forms();
    let more =
        "    chains: 3\n    start: { step: spins }\n    equilibrate: 0\n    measure: 2\n    keep: { every: 1 }\n";
    let step = "    does: sample\n    lattice: { plugin: square, size: [4, 5] }\n    model: test-rotor\n    update: probe-vectors\n    observe: [energy]\n    temperature: 2.4\n";
    let steps = format!("  after:\n{step}{more}  shot: {{ does: picture, of: spins }}\n");
    let text = pipeline("{ plugin: square, size: [4, 5] }", "test-rotor", "probe-vectors", &steps)
        .replace("seed: 4", &format!("seed: 4\nplugins: [\"{}\"]", library.display()));
    desk.write("pictures.yaml", &text);
    desk.run_pipeline("pictures.yaml", &[], 0);
    let (spins, after) =
        (desk.table("results/pictures/spins.states.parquet"), desk.table("results/pictures/after.states.parquet"));
    let components: Vec<&str> =
        spins.columns.iter().map(|c| c.name.as_str()).filter(|n| ["x", "y", "z", "value"].contains(n)).collect();
    assert_eq!(components[..2], ["x", "y"]);
    let rows = |table: &Table, chain: f64, sweep: f64| -> Vec<usize> {
        let (chains, sweeps) = (numbers(table, "chain"), numbers(table, "sweep"));
        (0..table.rows()).filter(|row| chains[*row] == chain && sweeps[*row] == sweep).collect()
    };
    let vectors = |table: &Table, rows: &[usize]| -> Vec<Vec<u64>> {
        let of = |name: &&str| rows.iter().map(|row| numbers(table, name)[*row].to_bits()).collect();
        components.iter().map(of).collect()
    };
    for chain in 0..3 {
        let begun = vectors(&after, &rows(&after, f64::from(chain), 0.0));
        assert!(begun == vectors(&spins, &rows(&spins, f64::from(chain % 2), 35.0)), "chain {chain}, bit by bit");
    }
    let main = desk.table("results/pictures/shot.parquet");
    let last = rows(&spins, 0.0, 35.0);
    let (x, y) = (numbers(&spins, "x"), numbers(&spins, "y"));
    for (row, angle) in numbers(&main, "value").into_iter().enumerate() {
        assert!((angle - y[last[row]].atan2(x[last[row]])).abs() < 1e-12);
    }
    assert_eq!(desk.table("results/pictures/shot.walls.parquet").rows(), 0, "angles have no walls");
    // Vectors cannot begin a model of states; that is known when the configuration is read.
    let text = text.replace(
        &format!("  after:\n{step}"),
        &format!("  after:\n{}", step.replace("test-rotor", "ising").replace("probe-vectors", "metropolis")),
    );
    desk.write("pictures.yaml", &text);
    let events = desk.run_pipeline("pictures.yaml", &[], 1);
    let wanted =
        "the configuration to begin from does not fit: it holds vectors, and the spins of the model here are states";
    assert_eq!(events.broken(), [wanted; 3]);
}
