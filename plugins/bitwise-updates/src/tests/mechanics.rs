//! Totals, registers of all widths, saved states, chains that do not see each other, and frozen chains.

use super::lattices::{Chain, Cubic, Square, Triangular};
use super::models::Ising;
use super::systems::{System, small};
use crate::group::Group;
use crate::simd::Level;
use spinledger_sdk::testing::{Bench, params};
use spinledger_sdk::{Spins, UpdateInstance, View};

/// The small systems, and larger ones of which one can be packed by sites.
fn all() -> Vec<(System, usize)> {
    let system = |name, bench, inverse_temperature| (System { name, bench, inverse_temperature }, 1);
    let square = |size: &str, model: &str| Bench::new::<Square, Ising>(&params(size), &params(model));
    let mut all: Vec<(System, usize)> = small().into_iter().map(|system| (system, 512)).collect();
    all.extend([
        system("square 64", square(r#"{"size": 64}"#, "{}"), 0.44),
        system("square 96 (blocks with an odd side)", square(r#"{"size": 96}"#, "{}"), 0.44),
        system("square 32 x 128, antiferromagnet", square(r#"{"size": [32, 128]}"#, r#"{"coupling": -1}"#), 0.3),
        system("square 64, infinite temperature", square(r#"{"size": 64}"#, "{}"), 0.0),
        system("triangular 64", Bench::new::<Triangular, Ising>(&params(r#"{"size": 64}"#), &params("{}")), 0.27),
        system("triangular 96", Bench::new::<Triangular, Ising>(&params(r#"{"size": 96}"#), &params("{}")), 0.27),
        system("cubic 16", Bench::new::<Cubic, Ising>(&params(r#"{"size": 16}"#), &params("{}")), 0.22),
        system(
            "cubic 24 x 16 x 40",
            Bench::new::<Cubic, Ising>(&params(r#"{"size": [24, 16, 40]}"#), &params("{}")),
            0.22,
        ),
        system("ring of 1536", Bench::new::<Chain, Ising>(&params(r#"{"size": 1536}"#), &params("{}")), 0.7),
    ]);
    all
}

fn start<'a>(system: &'a System, lanes: usize, level: Level) -> Group<'a> {
    let mut group = Group::new(system.bench.prepare(system.inverse_temperature, lanes, 5), level).expect("prepared");
    for lane in 0..lanes {
        group.import(lane, &View::bytes(&system.bench.random_states(lane as u64))).expect("imported");
    }
    group
}

fn best() -> Level {
    Level::chosen().expect("a level")
}

fn configuration(group: &Group<'_>, system: &System, lane: usize) -> Vec<u8> {
    let mut states = vec![0; system.bench.graph().total];
    group.export(lane, &mut Spins::States(&mut states));
    states
}

fn saved(group: &Group<'_>) -> Vec<u8> {
    let mut bytes = Vec::new();
    group.save(&mut bytes);
    bytes
}

#[test]
fn configurations_come_out_as_they_went_in() {
    for (system, lanes) in all() {
        let mut group = start(&system, lanes, best());
        for lane in 0..lanes {
            let states = system.bench.random_states(lane as u64);
            assert_eq!(configuration(&group, &system, lane), states, "{} chain {lane}", system.name);
            let view = group.view(lane);
            assert!((0..states.len()).all(|site| view.state(site) == states[site]), "{} chain {lane}", system.name);
        }
    }
}

#[test]
fn totals_are_those_of_the_configuration() {
    for (system, lanes) in all() {
        let mut group = start(&system, lanes, best());
        for sweeps in [0, 1, 200] {
            group.sweep(sweeps).expect("swept");
            for lane in 0..lanes {
                let states = configuration(&group, &system, lane);
                let (graph, energy) = (system.bench.graph(), system.bench.energy());
                assert_eq!(states[graph.sites..], *energy.pinned_states, "{}: pinned sites stay", system.name);
                let tallies = group.tallies(lane);
                let (kept, computed) = (tallies.energy.expect("energy is kept"), system.bench.total(&states));
                assert!((kept - computed).abs() < 1e-9, "{}: {kept} kept, {computed} computed", system.name);
                let sum: f64 = states[..graph.sites].iter().filter_map(|s| energy.values.get(*s as usize)).sum();
                let expected = (!energy.values.is_empty()).then_some(sum);
                assert_eq!(tallies.magnetisation.map(|m| m[0]), expected, "{}", system.name);
            }
        }
    }
}

#[test]
fn registers_of_all_widths_give_equal_bits() {
    for (system, lanes) in all() {
        let mut groups: Vec<Group<'_>> =
            Level::ALL.into_iter().filter(|l| l.is_there()).map(|level| start(&system, lanes, level)).collect();
        for sweeps in [1, 2, 61, 3000] {
            groups.iter_mut().for_each(|group| group.sweep(sweeps).expect("swept"));
            let first = saved(&groups[0]);
            for group in &groups[1..] {
                assert!(saved(group) == first, "{} after {sweeps} more", system.name);
                assert!((0..lanes).all(|lane| group.tallies(lane) == groups[0].tallies(lane)), "{}", system.name);
            }
        }
    }
}

#[test]
fn saved_groups_go_on_to_the_bit() {
    for (system, lanes) in all() {
        let mut first = start(&system, lanes, best());
        let fresh = saved(&first);
        for sweeps in [0, 7, 64] {
            first.sweep(sweeps).expect("swept");
            let middle = saved(&first);
            let prepare = system.bench.prepare(system.inverse_temperature, lanes, 5);
            let mut second = Group::new(prepare, best()).expect("prepared");
            // Whatever it did before.
            second.sweep(3).expect("swept");
            second.restore(&middle).expect("restored");
            assert!(saved(&second) == middle, "{}", system.name);
            first.sweep(300).expect("swept");
            // In pieces: where calls end cannot be seen.
            (0..3).for_each(|_| second.sweep(100).expect("swept"));
            assert!(saved(&second) == saved(&first), "{}", system.name);
            assert!((0..lanes).all(|lane| second.tallies(lane) == first.tallies(lane)), "{}", system.name);
            for wrong in [&middle[1..], &[middle.as_slice(), &[0]].concat(), &[]] {
                assert!(second.restore(wrong).is_err());
            }
        }
        assert!(fresh != saved(&first), "{}", system.name);
    }
}

/// A chain of a group depends on its own start only, not on the other chains'.
#[test]
fn chains_of_a_group_do_not_see_each_other() {
    for (system, _) in all().iter().filter(|(_, lanes)| *lanes == 512) {
        let mut one = start(system, 512, best());
        let mut other = start(system, 512, best());
        for lane in (0..512).filter(|lane| *lane != 170) {
            other.import(lane, &View::bytes(&system.bench.random_states(1000 + lane as u64))).expect("imported");
        }
        one.sweep(40).expect("swept");
        other.sweep(40).expect("swept");
        assert_eq!(configuration(&one, system, 170), configuration(&other, system, 170), "{}", system.name);
        assert_eq!(one.tallies(170), other.tallies(170));
    }
}

#[test]
fn wrong_configurations_are_refused() {
    let system = &small()[0];
    let mut group = start(system, 512, best());
    assert!(group.import(512, &View::bytes(&[0; 9])).is_err());
    assert!(group.import(0, &View::bytes(&[0; 8])).is_err());
    assert!(group.import(0, &View::bytes(&[2; 9])).unwrap_err().0.contains("state 2"));
}

/// FNV-1a of the saved state after 200 sweeps.
fn fingerprint(system: &System, lanes: usize) -> u64 {
    let mut group = start(system, lanes, best());
    group.sweep(200).expect("swept");
    saved(&group)
        .iter()
        .fold(0xcbf2_9ce4_8422_2325, |hash, byte| (hash ^ u64::from(*byte)).wrapping_mul(0x0100_0000_01b3))
}

/// Change the revision of the rule where these change.
#[test]
fn value_stability() {
    let all = all();
    let found =
        ["3x3, periods odd", "2x2x3, open", "3x2, a seam", "square 64", "triangular 64", "cubic 16"].map(|name| {
            let (system, lanes) = all.iter().find(|(system, _)| system.name == name).expect("a system of this name");
            fingerprint(system, *lanes)
        });
    let frozen = [
        1_101_006_205_028_273_556,
        10_467_361_023_110_499_925,
        15_726_272_652_591_348_238,
        2_320_876_081_797_642_928,
        87_181_084_988_435_880,
        15_934_793_595_458_284_078,
    ];
    assert_eq!(found, frozen);
}
