//! Every form of energy through the whole program, with the plugin libraries of `tests/plugins`, one in Rust and one in C: what is found is
//! compared with exact values; contents depend neither on workers nor on interruptions; records name what is foreign; `check` refuses what cannot be.

#[path = "../reference/table.rs"]
mod table;

use spinledger_exact::enumeration::{Averages, Order, PairSystem};
use spinledger_ledger::Ledger;
use spinledger_terms::{ContentHash, Table};
use spinledger_tests::plugins;
use spinledger_tests::program::Desk;
use std::path::Path;

/// Standard errors that a value may be off: seeds are fixed and 94 values are checked, so that a sound program would fail once in 7000 seeds.
const WIDE: f64 = 4.8;

/// A step: its name, lattice, model, update, observe and scan.
type Step = [&'static str; 6];

/// Factors, callbacks, pairs with strengths, vectors; Rust and C, foreign and standard items mixed.
const STEPS: &[Step] = &[
    [
        "plaquettes",
        "{ plugin: test-grid, size: [4, 3] }",
        "{ plugin: test-four-spin, coupling: 0.8 }",
        "probe-factors",
        "[energy, magnetisation, probe-mean]",
        "temperature: [1.7, 3]",
    ],
    [
        "plaquettes-by-standard-rules",
        "{ plugin: square, size: [4, 3] }",
        "{ plugin: test-four-spin, coupling: 0.8 }",
        "[heat-bath, metropolis]",
        "[energy, magnetisation, probe-mean]",
        "temperature: [1.7, 3]",
    ],
    [
        "triples-as-factors",
        "{ plugin: c-ring, size: 7 }",
        "{ plugin: c-factor, triple: 0.375 }",
        "probe-factors",
        "[energy, magnetisation, c-mean]",
        "temperature: [1.5, 3]",
    ],
    [
        "triples-in-c",
        "{ plugin: c-ring, size: 7 }",
        "{ plugin: c-triple, triple: 0.375 }",
        "c-heat-bath",
        "[energy, magnetisation, c-mean]",
        "temperature: [1.5, 3]",
    ],
    [
        "triples-from-c-in-rust",
        "{ plugin: chain, size: 7 }",
        "{ plugin: c-triple, triple: 0.375 }",
        "probe-custom",
        "[energy, magnetisation, probe-mean]",
        "temperature: [1.5, 3]",
    ],
    [
        "triples-in-rust",
        "{ plugin: c-ring, size: 7 }",
        "{ plugin: test-chain-term, triple: 0.375 }",
        "[probe-custom, metropolis]",
        "[energy, magnetisation, c-mean]",
        "temperature: [1.5, 3]",
    ],
    [
        "uneven-pairs",
        "{ plugin: chain, size: 6, boundary: free }",
        "{ plugin: test-ising, coupling: 0.75, field: 0.25, tilt: 0.125, uneven: true }",
        "[probe-pair, heat-bath]",
        "[energy, magnetisation, c-mean]",
        "temperature: [1.2, 2]",
    ],
    [
        "uneven-clusters",
        "{ plugin: chain, size: 6, boundary: free }",
        "{ plugin: test-ising, coupling: 0.75, uneven: true }",
        "{ plugin: wolff, clusters: 3 }",
        "[energy, magnetisation, probe-mean]",
        "temperature: [1.2, 2]",
    ],
    [
        "rings-of-rotors",
        "{ plugin: chain, size: 3 }",
        "test-rotor",
        "probe-vectors",
        "[energy, magnetisation]",
        "lattice.size: [3, 4], inverse_temperature: [0.5, 1, 2]",
    ],
    [
        "chains-of-rotors",
        "{ plugin: chain, size: 2, boundary: free }",
        "test-rotor",
        "probe-vectors",
        "[energy, magnetisation]",
        "lattice.size: [2, 5], inverse_temperature: [0.5, 1, 2]",
    ],
    [
        "lone-rotors",
        "{ plugin: test-grid, size: [3, 2] }",
        "{ plugin: test-rotor, coupling: 0, field: 0.7, anisotropy: 0.4 }",
        "probe-vectors",
        "[energy, magnetisation, probe-mean]",
        "temperature: [0.5, 1.5]",
    ],
];

fn step([name, lattice, model, update, observe, scan]: &Step, measure: u64) -> String {
    format!(
        "  {name}:
    does: sample
    lattice: {lattice}
    model: {model}
    update: {update}
    observe: {observe}
    scan: {{ {scan} }}
    equilibrate: 100
    measure: {measure}
    every: 2
    chains: 2
  {name}-means: {{ does: averages, of: {name} }}
"
    )
}

/// All steps, each with its averages.
fn pipeline(measure: u64) -> String {
    head() + &STEPS.iter().map(|one| step(one, measure)).collect::<String>()
}

fn head() -> String {
    let (rust, c) = (plugins::forms().display(), plugins::c_forms().display());
    format!("spinledger: 1\npipeline: forms\nseed: 20261201\nplugins: [\"{rust}\", \"{c}\"]\nsteps:\n")
}

/// Holds what is found against exact values.
struct Held {
    far: Vec<String>,
    count: usize,
}

impl Held {
    /// The value of `quantity` in the one row in which the columns `at` have these values.
    fn take(&mut self, step: &str, found: &Table, at: &[(&str, f64)], quantity: &str, exact: f64) {
        let number = |column: &str, row: usize| found.column(column).and_then(|c| c.cells.number(row));
        let mut rows = (0..found.rows()).filter(|row| {
            found.text("quantity", *row) == Some(quantity) && at.iter().all(|(name, x)| number(name, *row) == Some(*x))
        });
        let row = rows.next().unwrap_or_else(|| panic!("{step}: no {quantity} at {at:?}"));
        assert_eq!(rows.next(), None, "{step}: {quantity} at {at:?}");
        assert_eq!(found.text("flags", row), Some(""), "{step}: {quantity} at {at:?}");
        let (value, error) = (number("value", row).expect("a value"), number("error", row).expect("an error"));
        self.count += 1;
        if error <= 0.0 || error.is_nan() || (value - exact).abs() > WIDE * error {
            self.far.push(format!("{step}: {quantity} at {at:?} is {value} +- {error}, exactly {exact}"));
        }
    }

    /// Quantities of scalar spins.
    fn averages(&mut self, step: &str, found: &Table, t: f64, exact: &Averages, mean: Option<&str>) {
        let at = [("temperature", t)];
        self.take(step, found, &at, "energy", exact.energy);
        self.take(step, found, &at, "heat_capacity", exact.heat_capacity);
        self.take(step, found, &at, "magnetisation_abs", exact.order_abs);
        self.take(step, found, &at, "magnetisation_squared", exact.order_squared);
        if let Some(mean) = mean {
            self.take(step, found, &at, mean, exact.order[0]);
        }
    }
}

/// Spins of two states, up first.
fn spins(sites: usize) -> PairSystem {
    PairSystem::new(2, sites, Order::Values(vec![vec![1.0, -1.0]]))
}

/// The energy of a product of `order` spins, by their states.
fn product(order: u32, coupling: f64) -> Vec<f64> {
    let of = |states: u32| if states.count_ones().is_multiple_of(2) { -coupling } else { coupling };
    (0..1 << order).map(of).collect()
}

/// Four-spin terms on the faces of a torus of 4 x 3.
fn plaquettes() -> PairSystem {
    let at = |x: u32, y: u32| x % 4 * 3 + y % 3;
    let face = |x: u32, y: u32| (0, vec![at(x, y), at(x + 1, y), at(x + 1, y + 1), at(x, y + 1)]);
    let factors = (0..4).flat_map(|x| (0..3).map(move |y| (x, y))).map(|(x, y)| face(x, y)).collect();
    PairSystem { factors, factor_tables: vec![product(4, 0.8)], ..spins(12) }
}

/// Pairs and triples of neighbours on a ring of seven.
fn triples() -> PairSystem {
    PairSystem {
        bonds: (0..7).map(|s| (s, (s + 1) % 7, 0)).collect(),
        tables: vec![product(2, 1.0)],
        factors: (0..7).map(|s| (0, vec![s, (s + 1) % 7, (s + 2) % 7])).collect(),
        factor_tables: vec![product(3, 0.375)],
        ..spins(7)
    }
}

/// An open chain of six with strengths 1, 1.25, 1.5 in turn on bonds and sites.
fn uneven(field: f64, tilt: f64) -> PairSystem {
    let strength = |k: u32| 1.0 + 0.25 * f64::from(k);
    let pair = |w: f64| vec![-0.75 * w, (0.75 + 2.0 * tilt) * w, (0.75 - 2.0 * tilt) * w, -0.75 * w];
    PairSystem {
        bonds: (0..5).map(|b| (b, b + 1, b % 3)).collect(),
        tables: (0..3).map(|k| pair(strength(k))).collect(),
        site_tables: (0..3).map(|k| vec![-field * strength(k), field * strength(k)]).collect(),
        classes: (0..6).map(|s| s % 3).collect(),
        ..spins(6)
    }
}

/// Mean energy, its fluctuation and the mean cosine of one planar vector with E = -h cos + A sin^2: the midpoint rule converges exponentially on
/// a circle.
fn lone_rotor(t: f64) -> [f64; 3] {
    const POINTS: u32 = 200;
    let mut sums = [0.0; 4];
    for k in 0..POINTS {
        let (sin, cos) = (f64::from(k) * std::f64::consts::TAU / f64::from(POINTS)).sin_cos();
        let energy = -0.7 * cos + 0.4 * sin * sin;
        let weight = (-energy / t).exp();
        [1.0, energy, energy * energy, cos].iter().zip(&mut sums).for_each(|(x, sum)| *sum += weight * x);
    }
    let [e, square, cos] = [1, 2, 3].map(|k| sums[k] / sums[0]);
    [e, (square - e * e) / (t * t), cos]
}

#[test]
fn all_forms_have_exact_averages() {
    let desk = Desk::new();
    desk.write("forms.yaml", &pipeline(8000));
    desk.run_pipeline("forms.yaml", &[], 0);
    let means = |step: &str| desk.table(&format!("results/forms/{step}-means.parquet"));
    let mut held = Held { far: Vec::new(), count: 0 };
    let discrete: [(&str, PairSystem, [f64; 2], Option<&str>); 8] = [
        ("plaquettes", plaquettes(), [1.7, 3.0], None),
        ("plaquettes-by-standard-rules", plaquettes(), [1.7, 3.0], None),
        ("triples-as-factors", triples(), [1.5, 3.0], Some("c_mean")),
        ("triples-in-c", triples(), [1.5, 3.0], Some("c_mean")),
        ("triples-from-c-in-rust", triples(), [1.5, 3.0], Some("probe_mean")),
        ("triples-in-rust", triples(), [1.5, 3.0], Some("c_mean")),
        ("uneven-pairs", uneven(0.25, 0.125), [1.2, 2.0], Some("c_mean")),
        ("uneven-clusters", uneven(0.0, 0.0), [1.2, 2.0], None),
    ];
    for (name, system, temperatures, mean) in discrete {
        let levels = system.degeneracies().expect("it is small");
        for t in temperatures {
            held.averages(name, &means(name), t, &levels.averages(1.0 / t), mean);
        }
    }
    let reference = table::Table::parse(include_str!("../reference/small_continuous.csv"));
    let rotors = |system: &str, k: f64| {
        let row = reference.rows().find(|row| row.text("system") == system && row.number("K") == k);
        row.expect("the table has it").number("mean_cos_per_bond")
    };
    for k in [0.5, 1.0, 2.0] {
        for size in [3.0, 4.0] {
            let at = [("size", size), ("inverse_temperature", k)];
            let exact = -rotors(&format!("xy_ring_{size}"), k);
            held.take("rings-of-rotors", &means("rings-of-rotors"), &at, "energy", exact);
        }
        for size in [2.0, 5.0] {
            let at = [("size", size), ("inverse_temperature", k)];
            let exact = -rotors(&format!("xy_open_chain_{size}"), k) * (size - 1.0) / size;
            held.take("chains-of-rotors", &means("chains-of-rotors"), &at, "energy", exact);
        }
    }
    for t in [0.5, 1.5] {
        let [energy, capacity, cosine] = lone_rotor(t);
        let quantities =
            [("energy", energy), ("heat_capacity", capacity), ("magnetisation_x", cosine), ("probe_mean", cosine)];
        for (quantity, exact) in quantities {
            held.take("lone-rotors", &means("lone-rotors"), &[("temperature", t)], quantity, exact);
        }
    }
    assert!(held.far.is_empty(), "{}", held.far.join("\n"));
    assert_eq!(held.count, 94);
}

/// Attempted updates on record, and how many entries.
fn work(desk: &Desk) -> (u64, usize) {
    let ledger = Ledger::open(&desk.path(".spinledger")).expect("a ledger");
    let records = blocks(desk, &ledger);
    (records.iter().map(|record| record.provenance.updates).sum(), records.len())
}

/// The records of all blocks.
fn blocks(desk: &Desk, ledger: &Ledger) -> Vec<spinledger_ledger::Record> {
    let names = desk.files(".spinledger/entries").into_keys().filter(|name| name.ends_with("record.json"));
    let keys = names.map(|name| {
        let folder = Path::new(&name).parent().and_then(Path::file_name).expect("a folder");
        folder.to_str().and_then(|key| key.parse().ok()).expect("a key")
    });
    keys.map(|key| ledger.read_record(&key).expect("a record")).filter(|record| record.kind == "block").collect()
}

/// One worker or two, at once or in two turns: the same bytes. The second turn goes on from states that each rule saved and takes back.
#[test]
fn contents_depend_neither_on_workers_nor_on_interruptions() {
    let run = |turns: &[u64], workers: &str| {
        let desk = Desk::new();
        for measure in turns {
            desk.write("forms.yaml", &pipeline(*measure));
            desk.run_pipeline("forms.yaml", &["--workers", workers], 0);
        }
        desk
    };
    let (one, two, turns) = (run(&[300], "1"), run(&[300], "2"), run(&[170, 300], "2"));
    let reference = one.parquet("results");
    assert!(reference.len() > 60, "{}", reference.len());
    assert!(reference == two.parquet("results"), "two workers");
    assert!(reference == turns.parquet("results"), "two turns");
    // Gone on and not done again: the second turn did no more than what was missing.
    let ledger = Ledger::open(&turns.path(".spinledger")).expect("a ledger");
    let notes: Vec<_> = blocks(&turns, &ledger).into_iter().flat_map(|record| record.provenance.notes).collect();
    assert!(notes.is_empty(), "no state was refused: {notes:?}");
    let ((at_once, entries), (in_turns, more)) = (work(&one), work(&turns));
    assert_eq!((at_once, 2 * entries), (in_turns, more), "updates at once and in turns; blocks");
}

/// Records say which file a foreign item came from, and the file's hash, which is also in the key; standard items are named by revision.
#[test]
fn records_name_what_is_foreign() {
    let desk = Desk::new();
    let mixed = STEPS.iter().find(|one| one[0] == "triples-from-c-in-rust").expect("it is there");
    desk.write("forms.yaml", &(head() + &step(mixed, 20)));
    let ran = desk.run(&["run", "forms.yaml"]);
    assert_eq!(ran.status, Some(0), "{}", ran.err);
    let ledger = Ledger::open(&desk.path(".spinledger")).expect("a ledger");
    let records = blocks(&desk, &ledger);
    assert_eq!(records.len(), 4);
    for record in records {
        let plugin = |item: &str| record.provenance.plugins.iter().find(|p| p.item == item).expect("it took part");
        for (item, file) in
            [("c-triple", plugins::c_forms()), ("probe-custom", plugins::forms()), ("probe-mean", plugins::forms())]
        {
            let plugin = plugin(item);
            let hash = ContentHash(*blake3::hash(&std::fs::read(file).expect("the library")).as_bytes());
            assert_eq!((plugin.standard, plugin.file_hash), (false, hash), "{item}");
            assert_eq!(Path::new(&plugin.file), file, "{item}");
            assert!(record.preimage.contains(&format!("/{item}@1#{hash}")), "{item} in {}", record.preimage);
            // Long lines are broken between words.
            let said = ran.out.split_whitespace().collect::<Vec<_>>().join(" ");
            assert!(said.contains(&format!("did not come with spinledger: {}", file.display())), "{}", ran.out);
        }
        for item in ["chain", "energy", "magnetisation"] {
            let plugin = plugin(item);
            assert!(plugin.standard && record.preimage.contains(&format!("{}/{item}@1\"", plugin.library)), "{item}");
        }
    }
    let traced = desk.run(&["trace", "results/forms/triples-from-c-in-rust-means.parquet"]);
    assert_eq!(traced.status, Some(0), "{}", traced.err);
    assert!(traced.out.contains("foreign plugin c-triple from"), "{}", traced.out);
}

/// A combination that cannot be, what is refused, and what stands in the message.
type Refusal = (&'static str, [&'static str; 5], &'static [&'static str]);

const REFUSED: &[Refusal] = &[
    (
        "a cluster rule for factors",
        ["{ plugin: test-grid, size: 4 }", "test-four-spin", "wolff", "[energy]", "temperature: [1]"],
        &["`wolff` cannot serve the model `test-four-spin`", "form `factors`", "probe-factors"],
    ),
    (
        "a cluster rule for callbacks",
        ["{ plugin: c-ring, size: 7 }", "c-triple", "wolff", "[energy]", "temperature: [1]"],
        &["`wolff` cannot serve the model `c-triple`", "form `custom`", "c-heat-bath"],
    ),
    (
        "a rule for states given vectors",
        ["{ plugin: chain, size: 4 }", "test-rotor", "metropolis", "[energy]", "temperature: [1]"],
        &["`metropolis` cannot serve the model `test-rotor`", "form `vectors`", "probe-vectors"],
    ),
    (
        "a rule for vectors given states",
        ["{ plugin: chain, size: 4 }", "ising", "probe-vectors", "[energy]", "temperature: [1]"],
        &["`probe-vectors` cannot serve the model `ising`", "form `pair`"],
    ),
    (
        "more states than a rule in C can hold",
        ["{ plugin: c-ring, size: 7 }", "{ plugin: potts, q: 3 }", "c-heat-bath", "[energy]", "temperature: [1]"],
        &["`c-heat-bath` cannot serve the model `potts`", "at most 2 states, here are 3"],
    ),
    (
        "a cluster rule and a foreign parameter that spoils the symmetry",
        ["{ plugin: chain, size: 4 }", "{ plugin: test-ising, tilt: 0.1 }", "wolff", "[energy]", "temperature: [1]"],
        &["`wolff` cannot serve the model `test-ising`", "`tilt` is nonzero"],
    ),
    (
        "a foreign model that knows no up and down",
        ["{ plugin: chain, size: 7, boundary: plus }", "c-triple", "c-heat-bath", "[energy]", "temperature: [1]"],
        &["the model `c-triple` does not know up and down"],
    ),
    (
        "a foreign observable for spin values, and colours",
        ["{ plugin: chain, size: 4 }", "{ plugin: potts, q: 2 }", "heat-bath", "[c-mean]", "temperature: [1]"],
        &["`c-mean` cannot be measured with the model `potts`"],
    ),
    (
        "an observable of two chains",
        ["{ plugin: chain, size: 4 }", "ising", "heat-bath", "[probe-overlap]", "temperature: [1]"],
        &["`probe-overlap` reads two chains at once"],
    ),
    (
        "a size that a lattice in C does not have",
        ["{ plugin: c-ring, size: 2 }", "ising", "heat-bath", "[energy]", "temperature: [1]"],
        &["2 is out of range", "at least 3"],
    ),
    (
        "a misspelt parameter of a foreign model",
        [
            "{ plugin: c-ring, size: 7 }",
            "{ plugin: c-triple, tripel: 1 }",
            "c-heat-bath",
            "[energy]",
            "temperature: [1]",
        ],
        &["`tripel`", "nearest: triple"],
    ),
];

#[test]
fn check_refuses_what_cannot_be() {
    let desk = Desk::new();
    for (what, [lattice, model, update, observe, scan], wanted) in REFUSED {
        desk.write("forms.yaml", &(head() + &step(&["spoilt", lattice, model, update, observe, scan], 10)));
        let ran = desk.run(&["check", "forms.yaml"]);
        assert_eq!(ran.status, Some(2), "{what}: {}", ran.err);
        assert!(ran.err.starts_with("forms.yaml:"), "{what}: {}", ran.err);
        for word in *wanted {
            assert!(ran.err.contains(word), "{what}: {word} in\n{}", ran.err);
        }
        assert!(ran.err.contains("1 problem in"), "{what}: {}", ran.err);
    }
    desk.write("forms.yaml", &pipeline(10));
    assert_eq!(desk.run(&["check", "forms.yaml"]).status, Some(0), "what can be is not refused");
}
