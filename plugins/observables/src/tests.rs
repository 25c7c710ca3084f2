//! Each observable against its formula, from totals and from views of every form.

#[allow(dead_code, unused_imports, reason = "the standard lattices as they are; not all are needed here")]
#[path = "../../lattices/src/standard/mod.rs"]
mod lattices;
#[allow(dead_code, unused_imports, reason = "the standard models as they are; not all are needed here")]
#[path = "../../models/src/standard/mod.rs"]
mod models;

use crate::energy::EnergyPerSite;
use crate::magnetisation::Magnetisation;
use crate::order_parameter::OrderParameter;
use lattices::Square;
use models::{Ising, Potts};
use spinledger_sdk::testing::{Bench, params};
use spinledger_sdk::{
    Graph, Host, Model, ModelBuilder, ModelSpec, Observable, ObservableInstance, Params, Result, Tallies, View,
};

fn observable<O: Observable>() -> O {
    O::new(&params("{}")).expect("an observable")
}

fn measure<O: Observable>(bench: &Bench, view: View<'_>, tallies: Tallies) -> Vec<f64> {
    let observable = observable::<O>();
    let mut instance = observable.prepare(Host::NONE, bench.problem()).expect("prepared");
    let mut values = vec![f64::NAN; instance.columns().len()];
    instance.measure(&[view], &[tallies], &mut values).expect("measured");
    values
}

fn columns<O: Observable>(bench: &Bench) -> Vec<(String, String, bool)> {
    let observable = observable::<O>();
    let instance = observable.prepare(Host::NONE, bench.problem()).expect("prepared");
    instance.columns().into_iter().map(|c| (c.name, c.unit, c.invariant)).collect()
}

const NONE: Tallies = Tallies { energy: None, magnetisation: None, acceptance: None };

#[test]
fn scalar_spins_are_measured_from_bytes_and_bits() {
    let size = r#"{"size": [2, 3], "boundary": ["periodic", "plus"]}"#;
    let bench = Bench::new::<Square, Ising>(&params(size), &params(r#"{"field": 0.5}"#));
    let (sites, total) = (bench.graph().sites, bench.graph().total);
    for seed in 0..20 {
        let states = bench.random_states(seed);
        let energy = bench.total(&states) / sites as f64;
        let down = states[..sites].iter().filter(|s| **s == 1).count() as f64;
        let m = 1.0 - 2.0 * down / sites as f64;
        // The same configuration as bits that begin somewhere and are spaced.
        let mut words = vec![0_u64; 1 + (5 + 3 * total) / 64];
        states
            .iter()
            .enumerate()
            .for_each(|(s, state)| words[(5 + 3 * s) / 64] |= u64::from(*state) << ((5 + 3 * s) % 64));
        let bits = View::Bits { sites: total, words: &words, offset: 5, stride: 3, positions: None };
        for view in [View::bytes(&states), bits] {
            assert!((measure::<EnergyPerSite>(&bench, view, NONE)[0] - energy).abs() < 1e-14);
            assert!((measure::<Magnetisation>(&bench, view, NONE)[0] - m).abs() < 1e-15);
        }
    }
    assert_eq!(columns::<EnergyPerSite>(&bench), [("energy".into(), "energy".into(), true)]);
    assert_eq!(columns::<Magnetisation>(&bench), [("magnetisation".into(), String::new(), false)]);
}

#[test]
fn totals_of_the_rule_are_taken_where_it_keeps_them() {
    let bench = Bench::new::<Square, Ising>(&params(r#"{"size": 2}"#), &params("{}"));
    let tallies = Tallies { energy: Some(-6.0), magnetisation: Some([3.0, 0.0, 0.0]), acceptance: None };
    assert_eq!(measure::<EnergyPerSite>(&bench, View::bytes(&[0; 4]), tallies), [-1.5]);
    assert_eq!(measure::<Magnetisation>(&bench, View::bytes(&[0; 4]), tallies), [0.75]);
}

#[test]
fn colours_have_an_order_parameter() {
    let bench = Bench::new::<Square, Potts>(&params(r#"{"size": [2, 3]}"#), &params(r#"{"q": 3}"#));
    let order = |states: [u8; 6]| measure::<OrderParameter>(&bench, View::bytes(&states), NONE);
    assert_eq!(order([1; 6]), [1.0, 1.0]);
    assert_eq!(order([0, 1, 2, 0, 1, 2]), [0.0, 0.0]);
    // Shares 1/2, 1/3, 1/6.
    let values = order([0, 0, 0, 1, 1, 2]);
    assert!((values[0] - 0.25).abs() < 1e-15);
    assert!((values[1] - (3.0 * 14.0 / 36.0 - 1.0) / 2.0).abs() < 1e-15);
    assert_eq!(values, order([2, 1, 1, 2, 0, 2]), "colours are equal");
    assert!(columns::<OrderParameter>(&bench).iter().all(|(_, unit, invariant)| unit.is_empty() && *invariant));
    let observable = observable::<Magnetisation>();
    assert!(observable.prepare(Host::NONE, bench.problem()).err().expect("a refusal").0.contains("no spin values"));
}

/// Three states, many-body terms, strengths and callbacks, or vectors with everything that they can have.
struct Motley<const COMPONENTS: usize>;

impl<const COMPONENTS: usize> Model for Motley<COMPONENTS> {
    const SPEC: ModelSpec = ModelSpec { name: "motley", ..ModelSpec::EMPTY };

    fn new(_: &Params) -> Result<Self> {
        Ok(Motley)
    }

    fn describe(&self, graph: &Graph<'_>, builder: &mut ModelBuilder) -> Result<()> {
        let n = COMPONENTS;
        let numbers = |count: usize, seed: usize| {
            (0..count).map(|k| ((k * 7 + seed) % 11) as f64 / 8.0 - 0.5).collect::<Vec<_>>()
        };
        if n == 0 {
            builder.spins(3, &[1.0, 0.0, -1.0], &[2, 1, 0], Some(0), Some(2));
            builder.pair(0, &numbers(9, 1));
            builder.pair(1, &numbers(9, 4));
            builder.site(0, &numbers(3, 2));
            builder.bond_strengths(&numbers(graph.bonds.len(), 3));
            let table = builder.factor_table(3, &numbers(27, 5));
            builder.factors(table, &[0, 2, 3, 5, 1, 0]);
            builder.custom();
        } else {
            let up: Vec<f64> = (0..n).map(|c| f64::from(u8::from(c == 0))).collect();
            builder.vectors(&up);
            builder.coupling(0, &numbers(n * n, 1));
            builder.coupling(1, &numbers(n * n, 6));
            let symmetric: Vec<f64> = (0..n * n).map(|k| ((k / n + 1) * (k % n + 1)) as f64 / 8.0).collect();
            builder.anisotropy(0, &symmetric);
            builder.field(0, &numbers(n, 2));
        }
        Ok(())
    }

    fn total(&self, graph: &Graph<'_>, view: &View<'_>) -> Result<f64> {
        Ok(f64::from(view.state(0) * 2 + view.state(graph.sites - 1)) / 3.0)
    }
}

#[test]
fn every_form_of_energy_is_measured() {
    let size = params(r#"{"size": [2, 3], "boundary": ["antiperiodic", "minus"]}"#);
    let bench = Bench::new::<Square, Motley<0>>(&size, &params("{}"));
    for seed in 0..20 {
        let states = bench.random_states(seed);
        let energy = measure::<EnergyPerSite>(&bench, View::bytes(&states), NONE)[0];
        assert!((energy - bench.total(&states) / 6.0).abs() < 1e-13);
    }
    check_vectors::<2>(&Bench::new::<Square, Motley<2>>(&size, &params("{}")));
    check_vectors::<3>(&Bench::new::<Square, Motley<3>>(&size, &params("{}")));
}

fn check_vectors<const N: usize>(bench: &Bench) {
    let (sites, total) = (bench.graph().sites, bench.graph().total);
    // Unit vectors from Pythagorean numbers; pinned ones as the model has them.
    let units = [[0.6, 0.8, 0.0], [-0.8, 0.6, 0.0], [0.28, -0.96, 0.0], [1.0, 0.0, 0.0]];
    let mut vectors: Vec<f64> = (0..sites).flat_map(|s| units[s % 4][..N].to_vec()).collect();
    vectors.extend_from_slice(bench.energy().pinned_vectors);
    let view = View::vectors(&vectors, N);
    let energy = measure::<EnergyPerSite>(bench, view, NONE)[0];
    assert!((energy - bench.total_vectors(&vectors) / sites as f64).abs() < 1e-13);

    let values = measure::<Magnetisation>(bench, view, NONE);
    let mean = |c: usize| (0..sites).map(|s| vectors[s * N + c]).sum::<f64>() / sites as f64;
    (0..N).for_each(|c| assert!((values[c] - mean(c)).abs() < 1e-15));
    let length = (0..N).map(|c| mean(c) * mean(c)).sum::<f64>().sqrt();
    assert!((values[N] - length).abs() < 1e-15);
    let names: Vec<(String, bool)> =
        columns::<Magnetisation>(bench).into_iter().map(|(name, _, i)| (name, i)).collect();
    let expected = [("magnetisation_x", false), ("magnetisation_y", false), ("magnetisation_z", false)];
    assert!(names.iter().zip(expected).take(N).all(|(a, b)| (a.0.as_str(), a.1) == b));
    assert_eq!(names[N], ("magnetisation".into(), true));

    // Components one after the other instead of innermost.
    let columns: Vec<f64> =
        (0..N).flat_map(|c| (0..total).map(move |s| (s, c))).map(|(s, c)| vectors[s * N + c]).collect();
    let view = View::Vectors { sites: total, components: N, data: &columns, stride: 1, component_stride: total };
    assert_eq!(measure::<EnergyPerSite>(bench, view, NONE)[0], energy);
    assert_eq!(measure::<Magnetisation>(bench, view, NONE), values);
}
