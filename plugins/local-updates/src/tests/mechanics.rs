//! Totals, tables against direct computation, saved states, and frozen chains.

use super::systems::{System, others, symmetric};
use crate::group::Group;
use crate::heat_bath::{HeatBath, HeatBathRule};
use crate::kind::Budget;
use crate::metropolis::{Metropolis, MetropolisRule};
use crate::rule::Rule;
use crate::simd::Level;
use spinledger_sdk::testing::params;
use spinledger_sdk::{Spins, Update, UpdateInstance, View};

fn all() -> Vec<System> {
    symmetric().into_iter().chain(others()).collect()
}

fn start<'a, R: Rule>(system: &'a System, rule: R, lanes: usize, budget: Budget) -> Group<'a, R> {
    let prepare = system.bench.prepare(system.inverse_temperature, lanes, 5);
    let level = Some(Level::chosen().expect("a level"));
    let mut group = Group::with(rule, lanes, prepare, budget, level).expect("prepared");
    for lane in 0..lanes {
        group.import(lane, &View::bytes(&system.bench.random_states(lane as u64))).expect("imported");
    }
    group
}

fn configuration(group: &impl UpdateInstance, system: &System, lane: usize) -> Vec<u8> {
    let mut states = vec![0; system.bench.graph().total];
    group.export(lane, &mut Spins::States(&mut states));
    states
}

fn check_totals<R: Rule>(rule: impl Fn(f64) -> R) {
    for system in all() {
        for lanes in [1, 64] {
            let mut group = start(&system, rule(system.inverse_temperature), lanes, Budget::STANDARD);
            group.sweep(201).expect("swept");
            for lane in 0..lanes {
                let states = configuration(&group, &system, lane);
                let (graph, energy) = (system.bench.graph(), system.bench.energy());
                assert_eq!(states[graph.sites..], *energy.pinned_states, "{}: pinned sites stay", system.name);
                let tallies = group.tallies(lane);
                let kept = tallies.energy.expect("energy is kept");
                let computed = system.bench.total(&states);
                assert!((kept - computed).abs() < 1e-9, "{}: {kept} kept, {computed} computed", system.name);
                let sum: f64 = states[..graph.sites].iter().filter_map(|s| energy.values.get(*s as usize)).sum();
                assert_eq!(
                    tallies.magnetisation.map(|m| m[0]),
                    (!energy.values.is_empty()).then_some(sum),
                    "{}",
                    system.name
                );
                if let Some((proposed, accepted)) = tallies.acceptance {
                    assert_eq!(proposed, 201 * graph.sites as u64);
                    assert!(0 < accepted && accepted < proposed, "{}: {accepted} of {proposed}", system.name);
                }
            }
        }
    }
}

#[test]
fn totals_are_those_of_the_configuration() {
    check_totals(|inverse_temperature| MetropolisRule { inverse_temperature });
    check_totals(|inverse_temperature| HeatBathRule { inverse_temperature });
}

/// Couplings of all systems but the last field are such that sums of energies are exact, and so tables and direct computation agree.
fn check_tables<R: Rule>(rule: impl Fn(f64) -> R) {
    for system in all().iter().filter(|s| !s.name.contains("field")) {
        for lanes in [1, 64] {
            let rule = rule(system.inverse_temperature);
            let mut with = start(system, rule, lanes, Budget::STANDARD);
            let mut without = start(system, rule, lanes, Budget::NOTHING);
            with.sweep(50).expect("swept");
            without.sweep(50).expect("swept");
            for lane in 0..lanes {
                let (a, b) = (configuration(&with, system, lane), configuration(&without, system, lane));
                assert_eq!(a, b, "{} chain {lane} of {lanes}", system.name);
            }
        }
    }
}

#[test]
fn tables_choose_as_direct_computation_does() {
    check_tables(|inverse_temperature| MetropolisRule { inverse_temperature });
    check_tables(|inverse_temperature| HeatBathRule { inverse_temperature });
}

fn check_saving<R: Rule>(rule: impl Fn(f64) -> R) {
    for system in all() {
        for lanes in [1, 64] {
            let rule = rule(system.inverse_temperature);
            let mut first = start(&system, rule, lanes, Budget::STANDARD);
            first.sweep(7).expect("swept");
            let mut saved = Vec::new();
            first.save(&mut saved);
            let mut second =
                Group::new(rule, lanes, system.bench.prepare(system.inverse_temperature, lanes, 5)).expect("prepared");
            second.restore(&saved).expect("restored");
            first.sweep(300).expect("swept");
            // In pieces: where calls end cannot be seen.
            (0..3).for_each(|_| second.sweep(100).expect("swept"));
            let (mut a, mut b) = (Vec::new(), Vec::new());
            first.save(&mut a);
            second.save(&mut b);
            assert_eq!(a, b, "{}", system.name);
            assert!(
                second.restore(&saved[1..]).is_err() && second.restore(&[saved.as_slice(), &[0]].concat()).is_err()
            );
        }
    }
}

#[test]
fn saved_groups_go_on_to_the_bit() {
    check_saving(|inverse_temperature| MetropolisRule { inverse_temperature });
    check_saving(|inverse_temperature| HeatBathRule { inverse_temperature });
}

/// A chain of a group depends on its own start only, not on the other chains'.
#[test]
fn chains_of_a_group_do_not_see_each_other() {
    for system in all() {
        let rule = MetropolisRule { inverse_temperature: system.inverse_temperature };
        let mut one = start(&system, rule, 64, Budget::STANDARD);
        let mut other = start(&system, rule, 64, Budget::STANDARD);
        for lane in (0..64).filter(|lane| *lane != 17) {
            other.import(lane, &View::bytes(&system.bench.random_states(1000 + lane as u64))).expect("imported");
        }
        one.sweep(40).expect("swept");
        other.sweep(40).expect("swept");
        assert_eq!(configuration(&one, &system, 17), configuration(&other, &system, 17), "{}", system.name);
        assert_eq!(one.tallies(17), other.tallies(17));
    }
}

#[test]
fn wrong_configurations_and_groups_are_refused() {
    let system = &symmetric()[0];
    let rule = MetropolisRule { inverse_temperature: 0.2 };
    let mut group = start(system, rule, 1, Budget::STANDARD);
    assert!(group.import(1, &View::bytes(&[0; 9])).is_err());
    assert!(group.import(0, &View::bytes(&[0; 8])).is_err());
    assert!(group.import(0, &View::bytes(&[2; 9])).unwrap_err().0.contains("state 2"));
    assert!(Group::new(rule, 64, system.bench.prepare(0.2, 1, 1)).is_err());
    assert!(Group::new(rule, 8, system.bench.prepare(0.2, 8, 1)).is_err());
}

/// FNV-1a of all configurations after each of some sweeps.
fn fingerprint<U: Update>(rule: &U, system: &System, lanes: usize) -> u64 {
    let mut group = rule.prepare(system.bench.prepare(system.inverse_temperature, lanes, 5)).expect("prepared");
    for lane in 0..lanes {
        group.import(lane, &View::bytes(&system.bench.random_states(lane as u64))).expect("imported");
    }
    let mut hash = 0xcbf2_9ce4_8422_2325_u64;
    for _ in 0..200 {
        group.sweep(1).expect("swept");
        for lane in 0..lanes {
            for state in configuration(&group, system, lane) {
                hash = (hash ^ u64::from(state)).wrapping_mul(0x0100_0000_01b3);
            }
        }
    }
    hash
}

fn fingerprints<U: Update>() -> Vec<u64> {
    let rule = |lanes: usize| U::new(&params(&format!(r#"{{"lanes": {lanes}}}"#))).expect("a rule");
    let systems = all();
    let named = |name: &str| systems.iter().find(|s| s.name == name).expect("a system of this name");
    ["3x3, periods odd", "2x3, three colours", "motley, callbacks"]
        .into_iter()
        .flat_map(|name| [1, 64].map(|lanes| fingerprint(&rule(lanes), named(name), lanes)))
        .collect()
}

/// Change the revision of a rule where these change.
#[test]
fn value_stability() {
    let metropolis = [
        14_649_682_013_202_280_855,
        10_593_236_920_676_145_655,
        2_740_734_613_808_624_102,
        966_665_806_505_697_987,
        1_371_950_546_454_320_340,
        4_494_700_093_321_299_460,
    ];
    assert_eq!(fingerprints::<Metropolis>(), metropolis);
    let heat_bath = [
        11_321_326_123_654_087_467,
        17_171_031_810_805_348_240,
        15_250_495_938_338_485_646,
        13_833_206_943_002_234_712,
        14_820_440_557_687_370_755,
        9_927_613_280_641_543_840,
    ];
    assert_eq!(fingerprints::<HeatBath>(), heat_bath);
}
