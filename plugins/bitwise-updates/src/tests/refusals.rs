//! What is not served is said, with what to do.

use super::lattices::{Chain, Cubic, Square, Triangular};
use super::models::{Ising, Potts};
use super::systems::Complete;
use crate::group::Group;
use crate::simd::Level;
use spinledger_sdk::testing::{Bench, params};
use spinledger_sdk::{Lattice, Model};

fn refused<L: Lattice, M: Model>(lattice: &str, model: &str, lanes: usize) -> String {
    let bench = Bench::new::<L, M>(&params(lattice), &params(model));
    match Group::new(bench.prepare(0.4, lanes, 1), Level::Portable) {
        Ok(_) => panic!("{lattice} {model} is served"),
        Err(error) => error.0,
    }
}

#[test]
fn other_hamiltonians() {
    let square = r#"{"size": 4}"#;
    let check = |text: String, what: &str| {
        assert!(text.contains(what) && text.contains("`metropolis` and `heat-bath`"), "{text}");
    };
    check(refused::<Square, Ising>(square, r#"{"field": 0.1}"#, 512), "no field");
    check(refused::<Square, Potts>(square, r#"{"q": 3}"#, 512), "two states");
    check(refused::<Square, Ising>(square, r#"{"coupling": {"first.x": 1, "first.y": 0.5}}"#, 512), "one strength");
    check(refused::<Complete, Ising>(r#"{"size": 14}"#, "{}", 512), "at most 12 neighbours, here are 13");
}

#[test]
fn other_lattices() {
    let check = |text: String, what: &str| assert!(text.contains(what) && text.contains("`lanes: 512`"), "{text}");
    check(
        refused::<Square, Ising>(r#"{"size": 48}"#, "{}", 1),
        "a multiple of 16, at least 32 and a multiple of 32, at least 64",
    );
    check(refused::<Square, Ising>(r#"{"size": 64, "boundary": ["periodic", "free"]}"#, "{}", 1), "not periodic");
    check(
        refused::<Square, Ising>(r#"{"size": 64, "boundary": "antiperiodic"}"#, "{}", 1),
        "every cell has the same bonds",
    );
    check(refused::<Cubic, Ising>(r#"{"size": 8}"#, "{}", 1), "multiple of 8");
    check(refused::<Chain, Ising>(r#"{"size": 512}"#, "{}", 1), "at least 1024");
    check(refused::<Triangular, Ising>(r#"{"size": 32}"#, "{}", 1), "at least 64");
    let bench = Bench::new::<Square, Ising>(&params(r#"{"size": 64}"#), &params("{}"));
    assert!(Group::new(bench.prepare(0.4, 2, 1), Level::Portable).is_err_and(|e| e.0.contains("1 or 512")));
}
