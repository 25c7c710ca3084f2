//! A plugin library for tests whose update rules go wrong when they are asked to sweep, each in its own way.

use spinledger_sdk::{Params, Prepare, Result, Spins, Tallies, Update, UpdateInstance, UpdateSpec, View};

/// What a rule does instead of sweeping.
#[derive(Clone, Copy, PartialEq)]
enum Fault {
    Panic,
    Abort,
    Null,
    Loop,
    Garbage,
    Energy,
}

/// Chains that nothing happens to, until the fault does.
struct Chains {
    fault: Fault,
    chains: Vec<Vec<u8>>,
}

impl UpdateInstance for Chains {
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
            type Instance<'a> = Chains;

            fn new(_: &Params) -> Result<Self> {
                Ok($rule)
            }

            fn prepare<'a>(&'a self, prepare: Prepare<'a>) -> Result<Chains> {
                let chains = vec![vec![0; prepare.problem.graph.total]; prepare.lane_keys.len()];
                Ok(Chains { fault: Fault::$rule, chains })
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
    Energy, "faulty-energy", "Says that it tracks an energy, and does not.";
}

spinledger_sdk::export! {
    library: "test-faulty", version: env!("CARGO_PKG_VERSION"), licence: "MIT OR Apache-2.0",
    updates: [Panic, Abort, Null, Loop, Garbage, Energy],
}
