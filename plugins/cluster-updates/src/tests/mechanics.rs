use super::exact::{Effort, Enumeration, excess};
use super::lattices::{Chain as Ring, Square};
use super::models::{Ising, Potts};
use super::systems::{System, others, symmetric};
use crate::adjacency::Adjacency;
use crate::wolff::{Chain, Wolff};
use spinledger_sdk::testing::{Bench, params};
use spinledger_sdk::{Graph, Model, ModelBuilder, ModelSpec, Params, Result, Spins, Update, UpdateInstance, View};

fn rule(clusters: usize) -> Wolff {
    Wolff::new(&params(&format!(r#"{{"clusters": {clusters}}}"#))).expect("a rule")
}

fn start<'a>(rule: &'a Wolff, bench: &'a Bench, inverse_temperature: f64) -> Chain<'a> {
    let mut chain = rule.prepare(bench.prepare(inverse_temperature, 1, 3)).expect("prepared");
    chain.import(0, &View::bytes(&bench.random_states(3))).expect("imported");
    chain
}

fn configuration(chain: &Chain<'_>, bench: &Bench) -> Vec<u8> {
    let mut states = vec![0; bench.graph().total];
    chain.export(0, &mut Spins::States(&mut states));
    states
}

/// Ising with as many couplings as bonds, of both signs: rows for each kind of bond or, with many, none.
struct Glass;

impl Model for Glass {
    const SPEC: ModelSpec = ModelSpec { name: "glass", states: 2, ..ModelSpec::EMPTY };

    fn new(_: &Params) -> Result<Self> {
        Ok(Glass)
    }

    fn describe(&self, graph: &Graph<'_>, builder: &mut ModelBuilder) -> Result<()> {
        builder.spins(2, &[1.0, -1.0], &[1, 0], Some(0), Some(1));
        (0..graph.class_names.len()).for_each(|class| builder.pair(class as u16, &[-1.0, 1.0, 1.0, -1.0]));
        let strength = |bond: usize| (bond * 37 % 101) as f64 / 50.0 - 1.0 + bond as f64 * 1e-6;
        builder.bond_strengths(&(0..graph.bonds.len()).map(strength).collect::<Vec<_>>());
        builder.involution(&[1, 0]);
        Ok(())
    }
}

/// Spin one with a zero state that the inversion leaves as it is, and a site energy that it leaves unchanged.
pub(super) struct SpinOne;

impl Model for SpinOne {
    const SPEC: ModelSpec = ModelSpec { name: "spin-one", states: 3, ..ModelSpec::EMPTY };

    fn new(_: &Params) -> Result<Self> {
        Ok(SpinOne)
    }

    fn describe(&self, graph: &Graph<'_>, builder: &mut ModelBuilder) -> Result<()> {
        builder.spins(3, &[1.0, 0.0, -1.0], &[2, 1, 0], Some(0), Some(2));
        for class in 0..graph.class_names.len() {
            builder.pair(class as u16, &[-1.0, 0.0, 1.0, 0.0, 0.0, 0.0, 1.0, 0.0, -1.0]);
        }
        builder.site(0, &[0.5, 0.0, 0.5]);
        builder.involution(&[2, 1, 0]);
        Ok(())
    }
}

pub(super) fn glass(size: &str) -> System {
    let bench = Bench::new::<Square, Glass>(&params(size), &params("{}"));
    System { name: "glass", bench, inverse_temperature: 0.4 }
}

pub(super) fn all() -> Vec<System> {
    symmetric().into_iter().chain([glass(r#"{"size": 3}"#)]).collect()
}

const SAMPLES: usize = 400_000;

/// False-alarm rate 1e-4 for each of the two statistics of each system; the seed is fixed.
#[test]
fn wolff_samples_the_boltzmann_distribution() {
    for system in all() {
        let exact = Enumeration::new(&system.bench, system.inverse_temperature);
        let rule = rule(4);
        let mut chain = start(&rule, &system.bench, system.inverse_temperature);
        let excess = excess(&exact, &system.bench, &mut chain, Effort { lanes: 1, samples: SAMPLES });
        assert!(excess.iter().all(|x| *x < 1.0), "{}: chi-squared is {excess:?} times its critical value", system.name);
    }
}

/// The same test sees a bond probability that is wrong by two percent.
#[test]
fn a_planted_fault_is_found() {
    for name in ["3x3, periods odd", "2x3, three colours"] {
        let system = symmetric().into_iter().find(|s| s.name == name).expect("a system of this name");
        let exact = Enumeration::new(&system.bench, system.inverse_temperature);
        let rule = rule(4);
        let mut chain = start(&rule, &system.bench, system.inverse_temperature);
        chain.spoil();
        let [classes, configurations] =
            excess(&exact, &system.bench, &mut chain, Effort { lanes: 1, samples: SAMPLES });
        assert!(classes.max(configurations) > 1.0, "{name}: {classes} {configurations}");
    }
}

#[test]
fn totals_are_those_of_the_configuration() {
    let large = glass(r#"{"size": 30}"#);
    assert!(Adjacency::new(&large.bench.problem()).is_varied(), "more kinds of bonds than rows are kept for");
    for system in all().into_iter().chain([large]) {
        let rule = rule(3);
        let mut chain = start(&rule, &system.bench, system.inverse_temperature);
        for _ in 0..50 {
            chain.sweep(7).expect("swept");
            let states = configuration(&chain, &system.bench);
            let (graph, energy) = (system.bench.graph(), system.bench.energy());
            assert_eq!(states[graph.sites..], *energy.pinned_states, "{}: pinned sites stay", system.name);
            let tallies = chain.tallies(0);
            let (kept, computed) = (tallies.energy.expect("energy is kept"), system.bench.total(&states));
            assert!((kept - computed).abs() < 1e-9, "{}: {kept} kept, {computed} computed", system.name);
            let sum: f64 = states[..graph.sites].iter().filter_map(|s| energy.values.get(*s as usize)).sum();
            assert_eq!(tallies.magnetisation.map(|m| m[0]), (!energy.values.is_empty()).then_some(sum));
        }
    }
}

/// Rows and direct computation give the same chains: here the same glass with its bonds sorted into kinds or not.
#[test]
fn rows_choose_as_direct_computation_does() {
    let system = glass(r#"{"size": 8}"#);
    let rule = rule(2);
    let mut with = start(&rule, &system.bench, 0.4);
    let mut without = start(&rule, &system.bench, 0.4);
    without.forget_rows();
    with.sweep(100).expect("swept");
    without.sweep(100).expect("swept");
    assert_eq!(configuration(&with, &system.bench), configuration(&without, &system.bench));
}

/// The same on lattices that look alike from nearly everywhere.
#[test]
fn steps_lead_where_the_adjacency_does() {
    for (model, inverse_temperature) in [("{}", 0.44), (r#"{"coupling": -1}"#, 0.6)] {
        let bench = Bench::new::<Square, Ising>(&params(r#"{"size": [8, 9]}"#), &params(model));
        let rule = rule(2);
        let mut with = start(&rule, &bench, inverse_temperature);
        let mut without = start(&rule, &bench, inverse_temperature);
        without.forget_steps();
        with.sweep(300).expect("swept");
        without.sweep(300).expect("swept");
        let (mut a, mut b) = (Vec::new(), Vec::new());
        with.save(&mut a);
        without.save(&mut b);
        assert_eq!(a, b);
    }
}

/// Only the inversion is offered, and the zero state stays: the number of zeros is conserved, and given it, the distribution is Boltzmann's.
#[test]
fn states_that_the_operation_leaves_stay() {
    let bench = Bench::new::<Square, SpinOne>(&params(r#"{"size": [2, 3], "boundary": "free"}"#), &params("{}"));
    let rule = rule(2);
    let mut chain = start(&rule, &bench, 0.5);
    chain.import(0, &View::bytes(&[0, 1, 0, 2, 0, 1])).expect("imported");
    let mut seen = std::collections::BTreeSet::new();
    for _ in 0..500 {
        chain.sweep(1).expect("swept");
        let states = configuration(&chain, &bench);
        assert_eq!((states[1], states[5]), (1, 1));
        assert!((chain.tallies(0).energy.expect("kept") - bench.total(&states)).abs() < 1e-12);
        seen.insert(states);
    }
    assert_eq!(seen.len(), 16, "all configurations of the four other spins");
}

#[test]
fn saved_chains_go_on_to_the_bit() {
    for system in all() {
        let rule = rule(1);
        let mut first = start(&rule, &system.bench, system.inverse_temperature);
        first.sweep(13).expect("swept");
        let mut saved = Vec::new();
        first.save(&mut saved);
        let mut second = rule.prepare(system.bench.prepare(system.inverse_temperature, 1, 3)).expect("prepared");
        second.restore(&saved).expect("restored");
        first.sweep(300).expect("swept");
        (0..3).for_each(|_| second.sweep(100).expect("swept"));
        let (mut a, mut b) = (Vec::new(), Vec::new());
        first.save(&mut a);
        second.save(&mut b);
        assert_eq!(a, b, "{}", system.name);
        assert!(second.restore(&saved[1..]).is_err());
    }
}

#[test]
fn what_cannot_be_served_is_refused() {
    let rule = rule(1);
    let refusal = |bench: &Bench| rule.prepare(bench.prepare(0.5, 1, 1)).err().expect("a refusal").0;
    for system in others().iter().filter(|s| s.name != "four rings of 2") {
        let message = refusal(&system.bench);
        let said = message.contains("S -> -S") || message.contains("pair energies only");
        assert!(said, "{}: {message}", system.name);
    }
    let bench = Bench::new::<Ring, Ising>(&params(r#"{"size": 4}"#), &params("{}"));
    assert!(rule.prepare(bench.prepare(0.5, 64, 1)).err().expect("a refusal").0.contains("one chain"));
}

/// FNV-1a of the configurations after each of some sweeps. Change the revision of the rule where these change.
#[test]
fn value_stability() {
    let fingerprint = |bench: &Bench, inverse_temperature: f64| {
        let rule = rule(1);
        let mut chain = start(&rule, bench, inverse_temperature);
        let mut hash = 0xcbf2_9ce4_8422_2325_u64;
        for _ in 0..300 {
            chain.sweep(1).expect("swept");
            for state in configuration(&chain, bench) {
                hash = (hash ^ u64::from(state)).wrapping_mul(0x0100_0000_01b3);
            }
        }
        hash
    };
    let square = r#"{"size": 8}"#;
    let ising = Bench::new::<Square, Ising>(&params(square), &params("{}"));
    let potts = Bench::new::<Square, Potts>(&params(square), &params(r#"{"q": 3}"#));
    assert_eq!(
        [fingerprint(&ising, 0.44), fingerprint(&potts, 1.0)],
        [4_917_168_555_021_503_852, 4_364_887_673_477_473_713]
    );
}
