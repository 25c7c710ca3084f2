//! Chi-squared tests: fixed seeds, false-alarm rate 1e-4 for each of the two statistics of each system.

use super::exact::{Effort, Enumeration, excess};
use super::systems::{System, small};
use crate::group::Group;
use crate::simd::Level;
use spinledger_numerics::random::StreamKey;
use spinledger_sdk::{Result, Spins, UpdateInstance, View};

/// Samples of each system.
const SAMPLES: usize = 512 * 1000;

fn start(system: &System) -> Group<'_> {
    let prepare = system.bench.prepare(system.inverse_temperature, 512, 1);
    Group::new(prepare, Level::chosen().expect("a level")).expect("prepared")
}

fn run(system: &System, instance: &mut impl UpdateInstance) -> [f64; 2] {
    let exact = Enumeration::new(&system.bench, system.inverse_temperature);
    excess(&exact, &system.bench, instance, Effort { lanes: 512, samples: SAMPLES })
}

#[test]
fn chains_sample_the_boltzmann_distribution() {
    for system in small() {
        let excess = run(&system, &mut start(&system));
        assert!(excess.iter().all(|x| *x < 1.0), "{}: chi-squared is {excess:?} times its critical value", system.name);
    }
}

fn find(name: &str) -> System {
    small().into_iter().find(|s| s.name == name).expect("a system of this name")
}

/// A group that uses the same random numbers in several sweeps.
struct Repeating<'a> {
    group: Group<'a>,
    every: u64,
    done: u64,
}

impl UpdateInstance for Repeating<'_> {
    fn import(&mut self, lane: usize, view: &View<'_>) -> Result<()> {
        self.group.import(lane, view)
    }

    fn export(&self, lane: usize, spins: &mut Spins<'_>) {
        self.group.export(lane, spins);
    }

    fn sweep(&mut self, count: u64) -> Result<()> {
        for _ in 0..count {
            self.group.set_stream(&StreamKey::from_text("again").lane((self.done / self.every) as u32));
            self.group.sweep(1)?;
            self.done += 1;
        }
        Ok(())
    }

    fn view(&mut self, lane: usize) -> View<'_> {
        self.group.view(lane)
    }

    fn save(&self, _: &mut Vec<u8>) {}

    fn restore(&mut self, _: &[u8]) -> Result<()> {
        Ok(())
    }
}

/// The test above means something: small faults are seen.
#[test]
fn planted_faults_are_found() {
    let worst = |excess: [f64; 2]| excess[0].max(excess[1]);
    // Uphill flips of one class in 2^4 more, or less, than they should be.
    let free = find("3x3, periods odd");
    let mut group = start(&free);
    let decision = &mut group.kinds()[4].as_mut().expect("four neighbours").decision;
    let place = decision.digits.len() - 5;
    decision.digits[place] ^= 1;
    assert!(worst(run(&free, &mut group)) > 1.0, "a digit of an acceptance");
    // Random numbers that serve two sweeps.
    let mut repeating = Repeating { group: start(&free), every: 2, done: 0 };
    assert!(worst(run(&free, &mut repeating)) > 1.0, "random numbers that are used twice");
}
