//! Energies of all forms against plain sums written here, and what the host makes of models that do not fit.

mod common;

use common::{Bench, all_states, json, key, plugins};
use spinledger_host::{Configuration, Graph, HostError, energy_scale, energy_total, ordered_start, random_start};
use spinledger_terms::ItemKind;
use std::sync::Arc;

fn spin(state: u8) -> f64 {
    1.0 - 2.0 * f64::from(state)
}

/// Compares for all configurations of free spins, with the rim that the model has.
fn compare(bench: &Bench, model: &str, parameters: &str, graph: &Arc<Graph>, by_hand: impl Fn(&Graph, &[u8]) -> f64) {
    let energy = bench.energy(model, parameters, graph);
    let scale = energy_scale(&energy, graph);
    for mut states in all_states(2, graph.sites) {
        states.extend_from_slice(&energy.pinned_states);
        let expected = by_hand(graph, &states);
        let total = energy_total(graph, &energy, &Configuration::States(states)).unwrap();
        assert!((total - expected).abs() <= 1e-13 * (1.0 + scale), "{model} {parameters}: {total} and {expected}");
        if !energy.custom {
            assert!(total.abs() <= scale * (1.0 + 1e-13), "the scale bounds the energy: {total} and {scale}");
        }
    }
}

#[test]
fn pairs_with_ends_strengths_fields_and_every_boundary() {
    let bench = Bench::forms();
    let (j, h, t) = (0.75, 0.3, 0.4);
    let parameters = r#"{"coupling": 0.75, "field": 0.3, "tilt": 0.4, "uneven": true}"#;
    for boundary in ["periodic", "antiperiodic", "free", "plus", "minus"] {
        for size in ["[3, 2]", "[2, 2]", "[4, 2]"] {
            let graph = bench.graph("test-grid", &format!(r#"{{"size": {size}, "boundary": ["{boundary}", "free"]}}"#));
            compare(&bench, "test-ising", parameters, &graph, |graph, states| {
                let strength = |k: usize| 1.0 + 0.25 * (k % 3) as f64;
                let bonds: f64 = graph
                    .bonds
                    .iter()
                    .enumerate()
                    .map(|(b, bond)| {
                        let (i, j_spin) = (spin(states[bond.i as usize]), spin(states[bond.j as usize]));
                        let seen = f64::from(bond.sign) * j_spin;
                        strength(b) * (-j * i * seen + t * (i - seen))
                    })
                    .sum();
                let sites: f64 = (0..graph.sites).map(|s| -h * strength(s) * spin(states[s])).sum();
                bonds + sites
            });
        }
    }
}

/// The tables that rules see from either end give the energy too: half the sum over neighbours where all sites are free.
#[test]
fn neighbours_see_the_transposed_and_folded_tables() {
    let bench = Bench::forms();
    let graph = bench.graph("test-grid", r#"{"size": [3, 2], "boundary": ["antiperiodic", "periodic"]}"#);
    let energy = bench.energy("test-ising", r#"{"coupling": 1, "field": 0, "tilt": 0.4, "uneven": true}"#, &graph);
    assert_eq!(energy.tables, 3, "plain from either end, and folded, which turns t (s_i - s_j) into a symmetric table");
    for states in all_states(2, 6) {
        let mut sum = 0.0;
        for s in 0..6 {
            for k in graph.offsets[s] as usize..graph.offsets[s + 1] as usize {
                let table = usize::from(energy.neighbour_tables[k]) * 4;
                let (own, other) = (usize::from(states[s]), usize::from(states[graph.neighbours[k] as usize]));
                sum += energy.neighbour_strengths[k] * energy.pair_tables[table + 2 * own + other];
            }
        }
        let total = energy_total(&graph, &energy, &Configuration::States(states)).unwrap();
        assert!((total - sum / 2.0).abs() < 1e-12, "{total} and {}", sum / 2.0);
    }
}

/// One antiperiodic seam in a chain of three frustrates it: the ground energy of a ring of three antiperiodic bonds is that of one broken bond.
#[test]
fn an_antiperiodic_ring_is_frustrated() {
    let bench = Bench::forms();
    let graph = bench.graph("test-grid", r#"{"size": [5, 1], "boundary": ["antiperiodic", "free"]}"#);
    let energy = bench.energy("test-ising", r#"{"coupling": 1, "field": 0, "tilt": 0, "uneven": false}"#, &graph);
    let lowest = all_states(2, 5)
        .map(|states| energy_total(&graph, &energy, &Configuration::States(states)).unwrap())
        .fold(f64::INFINITY, f64::min);
    assert_eq!(lowest, -3.0);
    assert_eq!(energy.tables, 2, "a symmetric table has one form from both ends");
}

#[test]
fn factors_on_faces() {
    let bench = Bench::forms();
    for boundary in [r#""periodic""#, r#"["free", "periodic"]"#, r#""free""#] {
        let graph = bench.graph("test-grid", &format!(r#"{{"size": [3, 4], "boundary": {boundary}}}"#));
        compare(&bench, "test-four-spin", r#"{"coupling": 0.5}"#, &graph, |graph, states| {
            graph
                .face_sites
                .chunks(4)
                .map(|face| -0.5 * face.iter().map(|&s| spin(states[s as usize])).product::<f64>())
                .sum()
        });
    }
}

/// Sites of one face interact although no bond joins opposite corners: the lattice's two colours do not serve.
#[test]
fn colours_serve_all_terms() {
    let bench = Bench::forms();
    let graph = bench.graph("test-grid", r#"{"size": 4, "boundary": "periodic"}"#);
    let pairs = bench.energy("test-ising", r#"{"coupling": 1, "field": 0, "tilt": 0, "uneven": false}"#, &graph);
    assert_eq!(pairs.colour_offsets, [0, 8, 16]);
    let faces = bench.energy("test-four-spin", r#"{"coupling": 1}"#, &graph);
    let chain = bench.energy("test-chain-term", r#"{"coupling": 1, "triple": 1}"#, &graph);
    for (energy, least) in [(&faces, 4), (&chain, 3)] {
        let mut colour = vec![usize::MAX; graph.sites];
        for c in 0..energy.colour_offsets.len() - 1 {
            let sites = &energy.colour_sites[energy.colour_offsets[c] as usize..energy.colour_offsets[c + 1] as usize];
            assert!(sites.is_sorted());
            sites.iter().for_each(|&s| colour[s as usize] = c);
        }
        assert!(colour.iter().all(|&c| c != usize::MAX), "every site has a colour");
        assert!(energy.colour_offsets.len() > least);
        for bond in &graph.bonds {
            assert_ne!(colour[bond.i as usize], colour[bond.j as usize]);
        }
        for face in graph.face_sites.chunks(4).filter(|_| !energy.factors.is_empty()) {
            assert!((0..4).all(|a| (0..a).all(|b| colour[face[a] as usize] != colour[face[b] as usize])));
        }
        for s in (0..16).filter(|_| energy.custom) {
            assert!(colour[s] != colour[(s + 1) % 16] && colour[s] != colour[(s + 2) % 16]);
        }
    }
}

#[test]
fn callbacks_and_their_changes() {
    let bench = Bench::forms();
    let graph = bench.graph("test-grid", r#"{"size": [2, 3], "boundary": "periodic"}"#);
    let parameters = r#"{"coupling": 0.8, "triple": 0.6}"#;
    let bonds = |graph: &Graph, states: &[u8]| -> f64 {
        graph.bonds.iter().map(|b| -0.8 * spin(states[b.i as usize]) * spin(states[b.j as usize])).sum()
    };
    let triples = |states: &[u8]| -> f64 {
        let n = states.len();
        (0..n).map(|s| -0.6 * spin(states[s]) * spin(states[(s + 1) % n]) * spin(states[(s + 2) % n])).sum()
    };
    compare(&bench, "test-chain-term", parameters, &graph, |graph, states| bonds(graph, states) + triples(states));
    let energy = bench.energy("test-chain-term", parameters, &graph);
    for states in all_states(2, 6) {
        let from = Configuration::States(states.clone());
        let flipped = Configuration::States(states.iter().map(|s| 1 - s).collect());
        let changes = energy.custom_changes(&from, &[0, 1, 2, 3, 4, 5], &flipped).unwrap();
        for (site, change) in changes.iter().enumerate() {
            let mut then = states.clone();
            then[site] = 1 - then[site];
            assert!((change - (triples(&then) - triples(&states))).abs() < 1e-13, "site {site} of {states:?}");
        }
    }
}

/// The same Hamiltonian as callbacks and as factors, in C: one code checks the other.
#[test]
fn a_library_in_c_says_the_same_by_callbacks_and_by_factors() {
    let bench = Bench::new(&[plugins::c_forms()]);
    let graph = bench.graph("c-ring", r#"{"size": 7}"#);
    let callbacks = bench.energy("c-triple", r#"{"triple": 0.3}"#, &graph);
    let factors = bench.energy("c-factor", r#"{"triple": 0.3}"#, &graph);
    assert!(callbacks.custom && !factors.custom && factors.factors.len() == 7);
    for states in all_states(2, 7) {
        let configuration = Configuration::States(states.clone());
        let a = energy_total(&graph, &callbacks, &configuration).unwrap();
        let b = energy_total(&graph, &factors, &configuration).unwrap();
        let by_hand: f64 = (0..7)
            .map(|s| {
                let (x, y, z) = (spin(states[s]), spin(states[(s + 1) % 7]), spin(states[(s + 2) % 7]));
                -x * y - 0.3 * x * y * z
            })
            .sum();
        assert!((a - by_hand).abs() < 1e-13 && (b - by_hand).abs() < 1e-13, "{a} {b} {by_hand}");
    }
}

#[test]
fn vectors_with_field_anisotropy_and_a_pinned_rim() {
    let bench = Bench::forms();
    let parameters = r#"{"coupling": 1.5, "field": 0.25, "anisotropy": 0.5}"#;
    for boundary in ["periodic", "antiperiodic", "plus", "minus"] {
        let graph = bench.graph("test-grid", &format!(r#"{{"size": [3, 3], "boundary": ["{boundary}", "periodic"]}}"#));
        let energy = bench.energy("test-rotor", parameters, &graph);
        for seed in 0..20 {
            let configuration = random_start(&energy, &graph, &key(&format!("seed {seed}")));
            let Configuration::Vectors(v) = &configuration else { panic!("vectors") };
            let vector = |s: usize| (v[2 * s], v[2 * s + 1]);
            let mut expected = 0.0;
            for bond in &graph.bonds {
                let ((a, b), (c, d)) = (vector(bond.i as usize), vector(bond.j as usize));
                expected -= 1.5 * f64::from(bond.sign) * (a * c + b * d);
            }
            for s in 0..graph.sites {
                expected += 0.5 * vector(s).1 * vector(s).1 - 0.25 * vector(s).0;
                assert!((vector(s).0.hypot(vector(s).1) - 1.0).abs() < 1e-14, "unit length");
            }
            for s in graph.sites..graph.total {
                assert_eq!(vector(s), (if boundary == "plus" { 1.0 } else { -1.0 }, 0.0));
            }
            let total = energy_total(&graph, &energy, &configuration).unwrap();
            assert!((total - expected).abs() < 1e-12, "{boundary}: {total} and {expected}");
        }
    }
}

#[test]
fn start_configurations_are_ordered_or_named_by_a_key() {
    let bench = Bench::forms();
    let graph = bench.graph("test-grid", r#"{"size": [3, 3], "boundary": ["minus", "free"]}"#);
    let energy = bench.energy("test-ising", r#"{"coupling": 1, "field": 0, "tilt": 0, "uneven": false}"#, &graph);
    let ordered = ordered_start(&energy, &graph);
    assert_eq!(ordered, Configuration::States([[0; 9].as_slice(), &[1; 6]].concat()));
    let first = random_start(&energy, &graph, &key("a"));
    assert_eq!(first, random_start(&energy, &graph, &key("a")));
    assert_ne!(first, random_start(&energy, &graph, &key("b")));
}

/// A start configuration that moves would orphan every chain on record.
#[test]
fn value_stability() {
    let bench = Bench::forms();
    let graph = bench.graph("test-grid", r#"{"size": [4, 4], "boundary": "periodic"}"#);
    let ising = bench.energy("test-ising", r#"{"coupling": 1, "field": 0, "tilt": 0, "uneven": false}"#, &graph);
    let Configuration::States(states) = random_start(&ising, &graph, &key("frozen")) else { panic!("states") };
    assert_eq!(states, FROZEN_STATES);
    let rotor = bench.energy("test-rotor", r#"{"coupling": 1, "field": 0, "anisotropy": 0}"#, &graph);
    let Configuration::Vectors(vectors) = random_start(&rotor, &graph, &key("frozen")) else { panic!("vectors") };
    assert_eq!(vectors[..4].iter().map(|x| x.to_bits()).collect::<Vec<_>>(), FROZEN_BITS);
}

const FROZEN_STATES: [u8; 16] = [1, 0, 1, 0, 0, 1, 1, 0, 0, 1, 1, 0, 0, 1, 1, 0];
const FROZEN_BITS: [u64; 4] = [4604791817015161379, 13827658743644260346, 4605898392924304953, 13826182149211334015];

#[test]
fn a_model_that_does_not_fit_the_lattice_is_refused_with_the_reason() {
    let bench = Bench::forms();
    let model =
        bench.loader.model(&bench.identity(ItemKind::Model, "test-four-spin"), &json(r#"{"coupling": 1}"#)).unwrap();
    // Two cells in a direction: the corners of a face are not four different sites in a grid of one row.
    let thin = bench.graph("test-grid", r#"{"size": [1, 4], "boundary": "periodic"}"#);
    let error = model.describe(&thin).unwrap_err();
    assert!(matches!(error, HostError::Wrong { .. }) && error.to_string().contains("twice"), "{error}");
    let open = bench.graph("test-grid", r#"{"size": [1, 4], "boundary": "free"}"#);
    let error = model.describe(&open).unwrap_err();
    assert!(matches!(error, HostError::Failed { .. }) && error.to_string().contains("faces"), "{error}");
}

#[test]
fn configurations_that_do_not_fit_have_no_energy() {
    let bench = Bench::forms();
    let graph = bench.graph("test-grid", r#"{"size": [2, 2], "boundary": ["plus", "free"]}"#);
    let energy = bench.energy("test-ising", r#"{"coupling": 1, "field": 0, "tilt": 0, "uneven": false}"#, &graph);
    let cases = [
        (Configuration::States(vec![0; 4]), "4 sites"),
        (Configuration::States(vec![0, 0, 2, 0, 0, 0, 0, 0]), "state 2"),
        (Configuration::States(vec![0, 0, 0, 0, 0, 1, 0, 0]), "site 5 is pinned"),
        (Configuration::Vectors(vec![1.0; 16]), "vectors"),
    ];
    for (configuration, what) in cases {
        let error = energy_total(&graph, &energy, &configuration).unwrap_err();
        assert!(matches!(error, HostError::Configuration { .. }) && error.to_string().contains(what), "{error}");
    }
}
