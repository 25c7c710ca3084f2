//! The tables against the formulas, and what is refused.

mod published;

use crate::standard::{BlumeCapel, Ising, Potts};
use spinledger_sdk::testing::{Bench, params};
use spinledger_sdk::{Lattice, LatticeBuilder, LatticeSpec, Model, Params, Result};

/// Two bond classes and a pinned site: 0 -a- 1 -b- 2 (pinned down).
struct Triple;

impl Lattice for Triple {
    const SPEC: LatticeSpec = LatticeSpec { name: "triple", ..LatticeSpec::EMPTY };

    fn new(_: &Params) -> Result<Self> {
        Ok(Triple)
    }

    fn build(&self, builder: &mut LatticeBuilder) -> Result<()> {
        builder.geometry(&[vec![1.0]], &[2], &[false]);
        builder.site(&[0.0], 0);
        builder.site(&[1.0], 0);
        builder.pinned(&[2.0], 0, -1);
        let (a, b) = (builder.class("first.x"), builder.class("first.y"));
        builder.bond(0, 1, a);
        builder.bond(1, 2, b);
        Ok(())
    }
}

fn bench<M: Model>(model: &str) -> Bench {
    Bench::new::<Triple, M>(&params("{}"), &params(model))
}

#[test]
fn ising_energies_follow_the_formula() {
    let bench = bench::<Ising>(r#"{"coupling": {"first.x": 2.0, "first.y": -0.5}, "field": 0.25}"#);
    let spin = |s: u8| if s == 0 { 1.0 } else { -1.0 };
    for states in [[0, 0, 1], [0, 1, 1], [1, 0, 1], [1, 1, 1]] {
        let [a, b, c] = states.map(spin);
        assert_eq!(bench.total(&states), -2.0 * a * b + 0.5 * b * c - 0.25 * (a + b), "{states:?}");
    }
}

#[test]
fn potts_energies_follow_the_formula() {
    let bench = bench::<Potts>(r#"{"q": 3, "coupling": {"first": 1.5}}"#);
    let equal = |a: u8, b: u8| f64::from(u8::from(a == b));
    for a in 0..3 {
        for b in 0..3 {
            assert_eq!(bench.total(&[a, b, 1]), -1.5 * (equal(a, b) + equal(b, 1)));
        }
    }
    assert_eq!(bench.energy().pinned_states, [1], "pinned down is colour 2");
    assert!(bench.energy().permutations);
}

#[test]
fn blume_capel_energies_follow_the_formula() {
    let model = r#"{"coupling": {"first.x": 2.0, "first.y": -0.5}, "anisotropy": 0.75, "field": 0.25}"#;
    let bench = bench::<BlumeCapel>(model);
    let spin = |s: u8| 1.0 - f64::from(s);
    for number in 0..9u8 {
        let states = [number % 3, number / 3, 2];
        let [a, b, c] = states.map(spin);
        let expected = -2.0 * a * b + 0.5 * b * c + 0.75 * (a * a + b * b) - 0.25 * (a + b);
        assert_eq!(bench.total(&states), expected, "{states:?}");
    }
    assert_eq!(bench.energy().pinned_states, [2], "pinned down is -1");
    assert!(bench.energy().involutions.is_empty());
    assert_eq!(self::bench::<BlumeCapel>("{}").energy().involutions, [&[2, 1, 0]]);
}

#[test]
fn a_field_takes_the_inversion_away() {
    assert_eq!(bench::<Ising>("{}").energy().involutions, [&[1, 0]]);
    assert!(bench::<Ising>(r#"{"field": 0.1}"#).energy().involutions.is_empty());
}

#[test]
fn classes_without_a_coupling_are_not_coupled() {
    let bench = bench::<Ising>(r#"{"coupling": {"first.y": 1}}"#);
    assert_eq!(bench.total(&[0, 1, 1]), -1.0);
    assert_eq!(bench.total(&[0, 0, 1]), 1.0);
}

#[test]
fn unknown_classes_are_refused() {
    let message =
        Bench::try_new::<Triple, Ising>(&params("{}"), &params(r#"{"coupling": {"second": 1}}"#)).unwrap_err().0;
    assert!(message.contains("`second`") && message.contains("first.x"), "{message}");
}
