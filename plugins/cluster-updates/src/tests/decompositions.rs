//! `swendsen-wang`, on the systems of the other rules.

use super::exact::{Effort, Enumeration, excess};
use super::lattices::{Chain as Ring, Square};
use super::mechanics::{SpinOne, all, glass};
use super::models::{Ising, Potts};
use super::systems::others;
use crate::swendsen_wang::{Chain, SwendsenWang};
use spinledger_sdk::testing::{Bench, params};
use spinledger_sdk::{Spins, Update, UpdateInstance, View};

static RULE: SwendsenWang = SwendsenWang;

fn start(bench: &Bench, inverse_temperature: f64) -> Chain<'_> {
    let mut chain = RULE.prepare(bench.prepare(inverse_temperature, 1, 3)).expect("prepared");
    chain.import(0, &View::bytes(&bench.random_states(3))).expect("imported");
    chain
}

fn configuration(chain: &Chain<'_>, bench: &Bench) -> Vec<u8> {
    let mut states = vec![0; bench.graph().total];
    chain.export(0, &mut Spins::States(&mut states));
    states
}

const SAMPLES: usize = 400_000;

/// False-alarm rate 1e-4 for each of the two statistics of each system; the seed is fixed.
#[test]
fn swendsen_wang_samples_the_boltzmann_distribution() {
    for system in all() {
        let exact = Enumeration::new(&system.bench, system.inverse_temperature);
        let mut chain = start(&system.bench, system.inverse_temperature);
        let excess = excess(&exact, &system.bench, &mut chain, Effort { lanes: 1, samples: SAMPLES });
        assert!(excess.iter().all(|x| *x < 1.0), "{}: chi-squared is {excess:?} times its critical value", system.name);
    }
}

/// The same test sees a bond probability that is wrong by two percent.
#[test]
fn a_planted_fault_is_found() {
    for name in ["3x3, periods odd", "2x3, three colours"] {
        let system = all().into_iter().find(|s| s.name == name).expect("a system of this name");
        let exact = Enumeration::new(&system.bench, system.inverse_temperature);
        let mut chain = start(&system.bench, system.inverse_temperature);
        chain.spoil();
        let [classes, configurations] =
            excess(&exact, &system.bench, &mut chain, Effort { lanes: 1, samples: SAMPLES });
        assert!(classes.max(configurations) > 1.0, "{name}: {classes} {configurations}");
    }
}

#[test]
fn totals_are_those_of_the_configuration() {
    for system in all().into_iter().chain([glass(r#"{"size": 30}"#)]) {
        let mut chain = start(&system.bench, system.inverse_temperature);
        for _ in 0..50 {
            chain.sweep(3).expect("swept");
            let states = configuration(&chain, &system.bench);
            let (graph, energy) = (system.bench.graph(), system.bench.energy());
            assert_eq!(states[graph.sites..], *energy.pinned_states, "{}: pinned sites stay", system.name);
            let tallies = chain.tallies(0);
            assert!((tallies.energy.expect("told") - system.bench.total(&states)).abs() < 1e-9, "{}", system.name);
            let sum: f64 = states[..graph.sites].iter().filter_map(|s| energy.values.get(*s as usize)).sum();
            assert_eq!(tallies.magnetisation.map(|m| m[0]), (!energy.values.is_empty()).then_some(sum));
        }
    }
}

#[test]
fn tables_choose_as_direct_computation_does() {
    let colours = Bench::new::<Square, Potts>(
        &params(r#"{"size": 7}"#),
        &params(r#"{"q": 5, "coupling": {"first.x": 1, "first.y": 0.5}}"#),
    );
    for bench in [glass(r#"{"size": 8}"#).bench, colours] {
        let (mut with, mut without) = (start(&bench, 0.7), start(&bench, 0.7));
        without.forget_tables();
        with.sweep(50).expect("swept");
        without.sweep(50).expect("swept");
        assert_eq!(configuration(&with, &bench), configuration(&without, &bench));
    }
}

/// Clusters of one colour are joined to the rim at a temperature of almost nothing: nothing moves.
#[test]
fn clusters_that_touch_pinned_sites_stay() {
    let bench = Bench::new::<Square, Potts>(&params(r#"{"size": 5, "boundary": "plus"}"#), &params(r#"{"q": 3}"#));
    let mut chain = start(&bench, 50.0);
    let up = vec![0; bench.graph().total];
    chain.import(0, &View::bytes(&up)).expect("imported");
    chain.sweep(100).expect("swept");
    assert_eq!(configuration(&chain, &bench), up);
}

/// The zero state stays under inversion, and every sign of the others is seen.
#[test]
fn states_that_the_operation_leaves_stay() {
    let bench = Bench::new::<Square, SpinOne>(&params(r#"{"size": [2, 3], "boundary": "free"}"#), &params("{}"));
    let mut chain = start(&bench, 0.5);
    chain.import(0, &View::bytes(&[0, 1, 0, 2, 0, 1])).expect("imported");
    let mut seen = std::collections::BTreeSet::new();
    for _ in 0..500 {
        chain.sweep(1).expect("swept");
        let states = configuration(&chain, &bench);
        assert_eq!((states[1], states[5]), (1, 1));
        seen.insert(states);
    }
    assert_eq!(seen.len(), 16, "all configurations of the four other spins");
}

#[test]
fn saved_chains_go_on_to_the_bit() {
    for system in all() {
        let mut first = start(&system.bench, system.inverse_temperature);
        first.sweep(13).expect("swept");
        let mut saved = Vec::new();
        first.save(&mut saved);
        let mut second = RULE.prepare(system.bench.prepare(system.inverse_temperature, 1, 3)).expect("prepared");
        second.restore(&saved).expect("restored");
        first.sweep(300).expect("swept");
        (0..3).for_each(|_| second.sweep(100).expect("swept"));
        let (mut a, mut b) = (Vec::new(), Vec::new());
        first.save(&mut a);
        second.save(&mut b);
        assert_eq!(a, b, "{}", system.name);
        assert!(second.restore(&saved[1..]).is_err());
        saved.push(0);
        assert!(second.restore(&saved).is_err());
    }
}

#[test]
fn what_cannot_be_served_is_refused() {
    let refusal = |bench: &Bench| RULE.prepare(bench.prepare(0.5, 1, 1)).err().expect("a refusal").0;
    for system in others().iter().filter(|s| s.name != "four rings of 2") {
        let message = refusal(&system.bench);
        assert!(message.contains("S -> -S") || message.contains("pair energies only"), "{}: {message}", system.name);
    }
    let colours = Bench::new::<Ring, Potts>(&params(r#"{"size": 4}"#), &params(r#"{"q": 3, "coupling": -1}"#));
    assert!(refusal(&colours).contains("favour equal ones, and bond 0 does not"));
    let bench = Bench::new::<Ring, Ising>(&params(r#"{"size": 4}"#), &params("{}"));
    assert!(RULE.prepare(bench.prepare(0.5, 64, 1)).err().expect("a refusal").0.contains("one chain"));
}

/// FNV-1a of the configurations after each of some sweeps. Change the revision of the rule where these change.
#[test]
fn value_stability() {
    let fingerprint = |bench: &Bench, inverse_temperature: f64| {
        let mut chain = start(bench, inverse_temperature);
        let mut hash = 0xcbf2_9ce4_8422_2325_u64;
        for _ in 0..100 {
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
        [1_440_687_619_858_411_153, 11_247_835_615_380_750_585]
    );
}
