//! Chi-squared tests: fixed seeds, false-alarm rate 1e-4 for each of the two statistics of each system.

use super::exact::{Effort, Enumeration, excess};
use super::systems::{System, others, symmetric};
use crate::group::Group;
use crate::heat_bath::HeatBathRule;
use crate::metropolis::MetropolisRule;
use crate::rule::{Draw, Entry, Rule};

/// Samples of each system, of one chain and of 64 together.
const SAMPLES: [usize; 2] = [80_000, 400_000];

fn run<R: Rule>(system: &System, rule: R, lanes: usize) -> [f64; 2] {
    let prepare = system.bench.prepare(system.inverse_temperature, lanes, 1);
    let mut group = Group::new(rule, lanes, prepare).expect("prepared");
    let exact = Enumeration::new(&system.bench, system.inverse_temperature);
    excess(&exact, &system.bench, &mut group, Effort { lanes, samples: SAMPLES[usize::from(lanes > 1)] })
}

fn check<R: Rule>(systems: &[System], rule: impl Fn(f64) -> R, lanes: usize) {
    for system in systems {
        let excess = run(system, rule(system.inverse_temperature), lanes);
        assert!(excess.iter().all(|x| *x < 1.0), "{}: chi-squared is {excess:?} times its critical value", system.name);
    }
}

fn metropolis(inverse_temperature: f64) -> MetropolisRule {
    MetropolisRule { inverse_temperature }
}

fn heat_bath(inverse_temperature: f64) -> HeatBathRule {
    HeatBathRule { inverse_temperature }
}

#[test]
fn metropolis_samples_the_boltzmann_distribution() {
    check(&symmetric(), metropolis, 1);
    check(&others(), metropolis, 1);
}

#[test]
fn metropolis_does_so_in_64_chains() {
    check(&symmetric(), metropolis, 64);
    check(&others(), metropolis, 64);
}

#[test]
fn the_heat_bath_samples_the_boltzmann_distribution() {
    check(&symmetric(), heat_bath, 1);
    check(&others(), heat_bath, 1);
}

#[test]
fn the_heat_bath_does_so_in_64_chains() {
    check(&symmetric(), heat_bath, 64);
    check(&others(), heat_bath, 64);
}

/// Metropolis with a planted fault.
#[derive(Clone, Copy)]
struct Faulty {
    right: MetropolisRule,
    fault: Fault,
}

#[derive(Clone, Copy, PartialEq)]
enum Fault {
    /// Uphill moves are accepted 2 percent less often than they should.
    Acceptance,
    /// From state 1, one in 32 proposals of the last state goes to the first instead.
    Proposals,
    /// Ties are always accepted, as the textbook has it.
    Ties,
}

impl Rule for Faulty {
    const PROPOSES: bool = true;

    fn lines(states: usize) -> usize {
        MetropolisRule::lines(states)
    }

    fn tabulate(&self, energies: &[f64], soft: bool, lines: &mut [Entry]) {
        let soft = soft && self.fault != Fault::Ties;
        self.right.tabulate(energies, soft, lines);
        for line in lines {
            match self.fault {
                Fault::Acceptance if line.change > 0.0 => line.limit -= line.limit / 50,
                Fault::Ties if line.change == 0.0 => line.limit = 1 << 32,
                _ => {}
            }
        }
    }

    fn toggled(state: u8, hit: u8) -> u8 {
        MetropolisRule::toggled(state, hit)
    }

    fn chosen(lines: &[Entry], states: usize, state: u8, draw: Draw) -> (u8, f64) {
        let swayed = draw.proposal + 2 == states as u32 && draw.word.is_multiple_of(32);
        // Only from state 1, so that ways there and back differ.
        let proposal = if swayed && state == 1 { 0 } else { draw.proposal };
        MetropolisRule::chosen(lines, states, state, Draw { proposal, ..draw })
    }

    fn decided(&self, states: usize, soft: bool, state: u8, draw: Draw, change: impl FnMut(u8) -> f64) -> (u8, f64) {
        self.right.decided(states, soft, state, draw, change)
    }

    fn inverse_temperature(&self) -> f64 {
        self.right.inverse_temperature()
    }
}

fn worst(system: &System, fault: Fault) -> f64 {
    let rule = Faulty { right: metropolis(system.inverse_temperature), fault };
    let [classes, configurations] = run(system, rule, 64);
    classes.max(configurations)
}

fn find(systems: Vec<System>, name: &str) -> System {
    systems.into_iter().find(|s| s.name == name).expect("a system of this name")
}

/// The tests above mean something: the same test with the effort of 64 chains sees small faults.
#[test]
fn planted_faults_are_found() {
    let free = find(symmetric(), "2x3, free");
    assert!(worst(&free, Fault::Acceptance) > 1.0, "two percent in the acceptance of uphill moves");
    let colours = find(symmetric(), "2x3, three colours");
    assert!(worst(&colours, Fault::Proposals) > 1.0, "biased proposals");
    // Closed orbits: see README.md.
    let ring = find(symmetric(), "ring of 4");
    assert!(worst(&ring, Fault::Ties) > 1.0, "ties that are always accepted");
}
