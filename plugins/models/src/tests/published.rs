//! Lattices and models together against the counted states of `tests/reference/density_of_states.csv` (sources stand there).

#[allow(dead_code, unused_imports, reason = "the standard lattices as they are; not all are needed here")]
#[path = "../../../lattices/src/standard/mod.rs"]
mod lattices;

use crate::standard::{BlumeCapel, Ising, Potts};
use lattices::{Chain, Cubic, Square, Triangular};
use spinledger_sdk::testing::{Bench, params};
use spinledger_sdk::{Lattice, Model};
use std::collections::BTreeMap;

const REFERENCE: &str = include_str!("../../../../tests/reference/density_of_states.csv");

/// Number of states by energy and magnetisation (of colours: sites in the most common one).
type Degeneracies = BTreeMap<(i64, i64), u64>;

fn reference(system: &str) -> Degeneracies {
    let mut degeneracies = Degeneracies::new();
    for line in REFERENCE.lines().filter(|line| line.split(',').next() == Some(system)) {
        let number =
            |column: usize| line.split(',').nth(column).and_then(|text| text.parse::<i64>().ok()).expect("a number");
        degeneracies.insert((number(2), number(3)), number(4) as u64);
    }
    assert!(!degeneracies.is_empty(), "{system} is in the table");
    degeneracies
}

fn counted<L: Lattice, M: Model>(lattice: &str, model: &str) -> Degeneracies {
    let bench = Bench::new::<L, M>(&params(lattice), &params(model));
    let (graph, energy) = (bench.graph(), bench.energy());
    let q = energy.states;
    let mut degeneracies = Degeneracies::new();
    let mut states = vec![0; graph.sites];
    states.extend_from_slice(energy.pinned_states);
    for number in 0..q.pow(graph.sites as u32) {
        let mut rest = number;
        let mut counts = vec![0; q];
        for state in &mut states[..graph.sites] {
            *state = (rest % q) as u8;
            counts[rest % q] += 1;
            rest /= q;
        }
        let m =
            if energy.values.is_empty() { counts.iter().copied().max().unwrap_or(0) } else { counts[0] - counts[1] };
        *degeneracies.entry((bench.total(&states) as i64, m)).or_insert(0) += 1;
    }
    degeneracies
}

#[test]
fn degeneracies_are_those_counted() {
    let ising = |name: &str, counted: Degeneracies| assert_eq!(counted, reference(name), "{name}");
    ising("square_4x4_periodic", counted::<Square, Ising>(r#"{"size": 4}"#, "{}"));
    ising("square_4x4_plus_ring", counted::<Square, Ising>(r#"{"size": 4, "boundary": "plus"}"#, "{}"));
    ising("square_3x3_free", counted::<Square, Ising>(r#"{"size": 3, "boundary": "free"}"#, "{}"));
    ising("square_2x2_periodic_double", counted::<Square, Ising>(r#"{"size": 2}"#, "{}"));
    ising("square_2x4_periodic_double", counted::<Square, Ising>(r#"{"size": [2, 4]}"#, "{}"));
    ising("triangular_4x4_periodic", counted::<Triangular, Ising>(r#"{"size": 4}"#, "{}"));
    ising("cubic_2x2x3_free", counted::<Cubic, Ising>(r#"{"size": [2, 2, 3], "boundary": "free"}"#, "{}"));
    ising("potts3_3x3_periodic", counted::<Square, Potts>(r#"{"size": 3}"#, r#"{"q": 3}"#));
}

/// The Blume-Capel model against `tests/reference/density_of_states_blume_capel.csv` (sources stand there): at J = 1 and D = 0 states by exchange energy,
/// zeros and magnetisation; D adds its share for each spin that is not zero.
#[test]
fn blume_capel_degeneracies_are_those_counted() {
    const REFERENCE: &str = include_str!("../../../../tests/reference/density_of_states_blume_capel.csv");
    let model = params(r#"{"anisotropy": 0.125}"#);
    let square = Bench::new::<Square, BlumeCapel>(&params(r#"{"size": [2, 3], "boundary": "free"}"#), &model);
    let ring = Bench::new::<Chain, BlumeCapel>(&params(r#"{"size": 6}"#), &model);
    for (system, bench) in [("blume_capel_2x3_free", square), ("blume_capel_1x6_ring", ring)] {
        let mut expected: BTreeMap<(i64, i64, i64), u64> = BTreeMap::new();
        for line in REFERENCE.lines().filter(|line| line.split(',').next() == Some(system)) {
            let cells: Vec<&str> = line.split(',').collect();
            let number = |column: usize| cells[column].parse::<i64>().expect("a number");
            expected.insert((number(1), number(2), number(3)), number(4) as u64);
        }
        assert!(!expected.is_empty(), "{system} is in the table");
        let sites = bench.graph().sites;
        let mut found = BTreeMap::new();
        let mut states = vec![0u8; sites];
        for number in 0..3usize.pow(sites as u32) {
            let mut rest = number;
            for state in &mut states {
                *state = (rest % 3) as u8;
                rest /= 3;
            }
            let zeros = states.iter().filter(|s| **s == 1).count();
            let m: i64 = states.iter().map(|s| 1 - i64::from(*s)).sum();
            let exchange = bench.total(&states) - 0.125 * (sites - zeros) as f64;
            *found.entry((exchange as i64, zeros as i64, m)).or_insert(0) += 1;
        }
        assert_eq!(found, expected, "{system}");
    }
}

/// Going around a ring, spins turn an even number of times, across a seam an odd number: 2 C(n, k) states have k broken bonds.
#[test]
fn rings_break_an_even_number_of_bonds() {
    for (boundary, parity) in [("periodic", 0), ("antiperiodic", 1)] {
        let lattice = format!(r#"{{"size": 7, "boundary": "{boundary}"}}"#);
        let mut by_energy = BTreeMap::new();
        for ((energy, _), count) in counted::<Chain, Ising>(&lattice, "{}") {
            *by_energy.entry(energy).or_insert(0) += count;
        }
        let choose = |k: u64| (0..k).fold(1, |c, j| c * (7 - j) / (j + 1));
        let expected: BTreeMap<i64, u64> =
            (0..=7).filter(|k| k % 2 == parity).map(|k| (2 * k as i64 - 7, 2 * choose(k))).collect();
        assert_eq!(by_energy, expected, "{boundary}");
    }
}
