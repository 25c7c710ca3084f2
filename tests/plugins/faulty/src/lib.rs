//! A plugin library for tests whose update rules go wrong when they are asked to sweep, each in its own way.

use spinledger_sdk::{Error, Host, Params, Prepare, Result, Spins, Tallies, Update, UpdateInstance, UpdateSpec, View};

/// What a rule does instead of sweeping.
#[derive(Clone, Copy, PartialEq)]
enum Fault {
    Panic,
    Abort,
    Null,
    Loop,
    Garbage,
    /// In a tile of a parallel loop.
    Tile,
    /// Works until it is asked to stop.
    Patient,
    /// Says that it tracks an energy.
    Energy,
}

/// Chains that nothing happens to, until the fault does.
struct Chains<'a> {
    fault: Fault,
    host: Host<'a>,
    chains: Vec<Vec<u8>>,
}

impl UpdateInstance for Chains<'_> {
    fn import(&mut self, lane: usize, view: &View<'_>) -> Result<()> {
        self.chains[lane] = (0..view.sites()).map(|s| view.state(s)).collect();
        Ok(())
    }

    fn export(&self, lane: usize, spins: &mut Spins<'_>) {
        if let Spins::States(out) = spins {
            out.copy_from_slice(&self.chains[lane]);
        }
    }

    fn sweep(&mut self, _: u64) -> Result<()> {
        match self.fault {
            Fault::Panic => panic!("this rule panics"),
            Fault::Abort => std::process::abort(),
            // An offset from null, as of a field in a struct that is not there: null itself is caught by a check of debug builds.
            // SAFETY: there is none: the test is that the process dies of it.
            Fault::Null => drop(unsafe { std::ptr::without_provenance::<u64>(8).read_volatile() }),
            Fault::Loop => loop {
                std::thread::sleep(std::time::Duration::from_millis(20));
            },
            Fault::Garbage => self.chains.iter_mut().for_each(|states| states.fill(200)),
            Fault::Tile => self.host.parallel_for(9, |tile| assert!(tile < 3, "tile {tile} panics")),
            Fault::Patient => loop {
                if self.host.cancelled() {
                    return Err(Error::cancelled());
                }
                std::thread::sleep(std::time::Duration::from_millis(1));
            },
            Fault::Energy => {}
        }
        Ok(())
    }

    fn view(&mut self, lane: usize) -> View<'_> {
        View::bytes(&self.chains[lane])
    }

    fn tallies(&self, _: usize) -> Tallies {
        Tallies { energy: (self.fault == Fault::Energy).then_some(1234.5), ..Tallies::default() }
    }

    fn save(&self, out: &mut Vec<u8>) {
        self.chains.iter().for_each(|states| out.extend_from_slice(states));
    }

    fn restore(&mut self, bytes: &[u8]) -> Result<()> {
        let mut rest = bytes.iter().copied();
        self.chains.iter_mut().flatten().zip(&mut rest).for_each(|(state, saved)| *state = saved);
        Ok(())
    }
}

macro_rules! faulty {
    ($($rule:ident, $name:literal, $about:literal;)*) => {$(
        struct $rule;

        impl Update for $rule {
            const SPEC: UpdateSpec = UpdateSpec { name: $name, about: $about, ..UpdateSpec::EMPTY };
            type Instance<'a> = Chains<'a>;

            fn new(_: &Params) -> Result<Self> {
                Ok($rule)
            }

            fn prepare<'a>(&'a self, prepare: Prepare<'a>) -> Result<Chains<'a>> {
                let chains = vec![vec![0; prepare.problem.graph.total]; prepare.lane_keys.len()];
                Ok(Chains { fault: Fault::$rule, host: prepare.host, chains })
            }
        }
    )*};
}

faulty! {
    Panic, "faulty-panic", "Panics when it is to sweep.";
    Abort, "faulty-abort", "Aborts the process when it is to sweep.";
    Null, "faulty-null", "Reads through a null pointer when it is to sweep.";
    Loop, "faulty-loop", "Never ends when it is to sweep.";
    Garbage, "faulty-garbage", "Has states that do not exist after a sweep.";
    Tile, "faulty-tile", "Panics in a tile of a parallel loop.";
    Patient, "faulty-patient", "Sweeps until it is asked to stop.";
    Energy, "faulty-energy", "Says that it tracks an energy, and does not.";
}

spinledger_sdk::export! {
    library: "test-faulty", version: env!("CARGO_PKG_VERSION"), licence: "MIT OR Apache-2.0",
    updates: [Panic, Abort, Null, Loop, Garbage, Tile, Patient, Energy],
}
