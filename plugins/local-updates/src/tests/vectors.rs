//! Vectors of all levels against visits one after the other, to the bit.

use super::lattices::{Chain, Cubic, Honeycomb, Square, Triangular};
use super::models::Ising;
use crate::group::Group;
use crate::heat_bath::HeatBathRule;
use crate::kind::Budget;
use crate::metropolis::MetropolisRule;
use crate::rule::Rule;
use crate::simd::Level;
use spinledger_sdk::testing::{Bench, params};
use spinledger_sdk::{Lattice, Model, Spins, UpdateInstance, View};

/// Everything that a group is: its saved state, its configurations, also as shown, and its totals.
fn everything<R: Rule>(group: &mut Group<'_, R>, lanes: usize, total: usize) -> (Vec<u8>, Vec<u8>, Vec<String>) {
    let mut saved = Vec::new();
    group.save(&mut saved);
    let (mut states, mut tallies) = (Vec::new(), Vec::new());
    for lane in 0..lanes {
        let mut exported = vec![0; total];
        group.export(lane, &mut Spins::States(&mut exported));
        let view = group.view(lane);
        let shown: Vec<u8> = (0..total).map(|site| view.state(site)).collect();
        assert_eq!(shown, exported);
        states.extend(exported);
        tallies.push(format!("{:?}", group.tallies(lane)));
    }
    (saved, states, tallies)
}

fn compare<R: Rule>(name: &str, bench: &Bench, lanes: usize, rule: R, vectors: Option<bool>) {
    let total = bench.graph().total;
    let start = |level| {
        let prepare = bench.prepare(rule.inverse_temperature(), lanes, 3);
        let mut group = Group::with(rule, lanes, prepare, Budget::STANDARD, level).expect("prepared");
        for lane in 0..lanes {
            group.import(lane, &View::bytes(&bench.random_states(lane as u64))).expect("imported");
        }
        group
    };
    for level in Level::ALL.into_iter().filter(|level| level.is_there()) {
        let (mut plain, mut wide) = (start(None), start(Some(level)));
        if let Some(vectors) = vectors {
            assert_eq!(wide.is_in_rows(), vectors, "{name}");
        }
        for round in 0..6 {
            let context =
                format!("{name}, {lanes} chains, {level:?}, beta {}, round {round}", rule.inverse_temperature());
            plain.sweep(1 + round % 3).expect("swept");
            wide.sweep(1 + round % 3).expect("swept");
            let (a, b) = (everything(&mut plain, lanes, total), everything(&mut wide, lanes, total));
            assert_eq!(a.2, b.2, "{context}");
            assert!(a.0 == b.0 && a.1 == b.1, "{context}");
            // What either saved, both go on from.
            if round == 2 {
                plain.restore(&b.0).expect("restored");
                wide = start(Some(level));
                wide.restore(&a.0).expect("restored");
            }
        }
    }
}

/// Both rules at temperatures from where some limits are 0 to where sites are soft.
fn case<L: Lattice, M: Model>(lattice: &str, model: &str, lanes: usize, vectors: Option<bool>) {
    let name = format!("{} {lattice} {model}", L::SPEC.name);
    let bench = Bench::new::<L, M>(&params(lattice), &params(model));
    for inverse_temperature in [0.0, 0.05, 0.44, 20.0] {
        compare(&name, &bench, lanes, MetropolisRule { inverse_temperature }, vectors);
        compare(&name, &bench, lanes, HeatBathRule { inverse_temperature }, vectors);
    }
}

#[test]
fn square_lattices() {
    for size in ["[32, 32]", "[6, 64]", "[8, 34]", "[4, 36]", "[8, 128]", "[6, 190]", "[4, 514]"] {
        case::<Square, Ising>(&format!(r#"{{"size": {size}}}"#), "{}", 1, Some(true));
    }
    for boundary in [r#""free""#, r#""plus""#, r#"["plus", "minus"]"#, r#"["antiperiodic", "periodic"]"#] {
        for size in ["[6, 66]", "[5, 129]"] {
            case::<Square, Ising>(&format!(r#"{{"size": {size}, "boundary": {boundary}}}"#), "{}", 1, Some(true));
        }
    }
}

#[test]
fn odd_periods() {
    for size in ["[9, 99]", "[7, 101]", "[5, 64]", "[6, 65]"] {
        case::<Square, Ising>(&format!(r#"{{"size": {size}}}"#), "{}", 1, None);
    }
}

#[test]
fn small_lattices_go_one_after_the_other() {
    for size in ["[8, 8]", "[3, 3]", "[4, 1]"] {
        case::<Square, Ising>(&format!(r#"{{"size": {size}}}"#), "{}", 1, Some(false));
    }
}

#[test]
fn other_lattices() {
    case::<Chain, Ising>(r#"{"size": 1000}"#, "{}", 1, Some(true));
    case::<Chain, Ising>(r#"{"size": 333, "boundary": "free"}"#, "{}", 1, Some(true));
    case::<Triangular, Ising>(r#"{"size": [6, 96]}"#, "{}", 1, Some(true));
    case::<Cubic, Ising>(r#"{"size": [4, 4, 40]}"#, "{}", 1, Some(true));
    case::<Cubic, Ising>(r#"{"size": [4, 3, 41], "boundary": "free"}"#, "{}", 1, None);
    case::<Honeycomb, Ising>(r#"{"size": [6, 40]}"#, "{}", 1, None);
}

#[test]
fn fields_and_couplings() {
    let lattice = r#"{"size": [6, 66]}"#;
    case::<Square, Ising>(lattice, r#"{"field": 0.25}"#, 1, Some(true));
    case::<Square, Ising>(lattice, r#"{"coupling": -1}"#, 1, Some(true));
    case::<Square, Ising>(lattice, r#"{"coupling": 0.5, "field": -1}"#, 1, Some(true));
    // Not plain, and not exact.
    case::<Square, Ising>(lattice, r#"{"coupling": {"first.x": 1, "first.y": 0.5}}"#, 1, None);
    case::<Square, Ising>(lattice, r#"{"coupling": 0.3}"#, 1, None);
    case::<Square, Ising>(lattice, r#"{"field": 0.1}"#, 1, None);
}

#[test]
fn chains_side_by_side() {
    case::<Square, Ising>(r#"{"size": 6}"#, "{}", 64, Some(false));
    case::<Square, Ising>(r#"{"size": [5, 7], "boundary": "free"}"#, r#"{"field": 0.25}"#, 64, Some(false));
    case::<Square, Ising>(r#"{"size": [4, 5], "boundary": "plus"}"#, r#"{"field": 0.3}"#, 64, Some(false));
    case::<Triangular, Ising>(r#"{"size": [3, 40]}"#, r#"{"coupling": -1}"#, 64, Some(false));
    case::<Cubic, Ising>(r#"{"size": 4}"#, r#"{"coupling": 0.5}"#, 64, Some(false));
}
