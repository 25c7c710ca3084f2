//! Times the kernels against a plain loop, in alternation: `cargo run --release -p spinledger-bitwise-updates --example time`.
//!
//! The plain baseline is what one writes first: single-spin Metropolis over an array of bytes in sequential order, with a table of acceptance
//! probabilities and xoshiro256++. Ratios are medians over rounds, each of which times both, so that a busy machine hits both alike.
//! `SPINLEDGER_SIMD` chooses instructions as in a run. With arguments, only cases whose name begins with one of them are timed.
#![allow(dead_code, reason = "the modules of the library, of which timing needs a part")]

// A library that is loaded at run time cannot be linked: its modules are compiled again.
#[path = "../src/count.rs"]
mod count;
#[path = "../src/coupling.rs"]
mod coupling;
#[path = "../src/decision.rs"]
mod decision;
#[path = "../src/group.rs"]
mod group;
#[path = "../src/kernel.rs"]
mod kernel;
#[path = "../../lattices/src/standard/mod.rs"]
#[allow(unused_imports)]
mod lattices;
#[path = "../src/layout.rs"]
mod layout;
#[path = "../../models/src/standard/mod.rs"]
#[allow(unused_imports)]
mod models;
#[path = "../src/packing.rs"]
mod packing;
#[path = "../src/rare.rs"]
mod rare;
#[path = "../src/simd.rs"]
mod simd;
#[path = "../src/turn.rs"]
mod turn;
#[path = "../src/vectors.rs"]
mod vectors;
#[path = "../src/word.rs"]
mod word;

use group::Group;
use lattices::{Cubic, Square, Triangular};
use models::Ising;
use simd::Level;
use spinledger_numerics::random::{StreamKey, Xoshiro, unit_f64};
use spinledger_sdk::testing::{Bench, params};
use spinledger_sdk::{Lattice, UpdateInstance, View};
use std::hint::black_box;
use std::time::Instant;

/// The critical temperature of the square lattice, where the baseline is timed.
const CRITICAL: f64 = 2.269_185_314_213_022;
/// Rounds of which the median is taken.
const ROUNDS: usize = 9;
/// Seconds that each side is timed in a round.
const SECONDS: f64 = 0.1;

/// The plain baseline.
struct Plain {
    side: usize,
    spins: Vec<i8>,
    accept: [f64; 9],
    stream: Xoshiro,
}

impl Plain {
    fn new(side: usize, temperature: f64) -> Self {
        let accept = std::array::from_fn(|k| (-2.0 * (k as f64 - 4.0) / temperature).exp());
        let stream = Xoshiro::from_key(&StreamKey::from_text("plain baseline"));
        Plain { side, spins: vec![1; side * side], accept, stream }
    }

    fn sweep(&mut self) {
        let side = self.side;
        for y in 0..side {
            let up = if y == 0 { side - 1 } else { y - 1 } * side;
            let down = if y == side - 1 { 0 } else { y + 1 } * side;
            let row = y * side;
            for x in 0..side {
                let left = if x == 0 { side - 1 } else { x - 1 };
                let right = if x == side - 1 { 0 } else { x + 1 };
                let around =
                    self.spins[row + left] + self.spins[row + right] + self.spins[up + x] + self.spins[down + x];
                let spin = self.spins[row + x];
                let product = spin * around;
                if product <= 0 || unit_f64(self.stream.next()) < self.accept[(product + 4) as usize] {
                    self.spins[row + x] = -spin;
                }
            }
        }
    }
}

/// Nanoseconds of one call, over about [`SECONDS`].
fn time(mut call: impl FnMut()) -> f64 {
    let (start, mut calls) = (Instant::now(), 0);
    while start.elapsed().as_secs_f64() < SECONDS {
        call();
        calls += 1;
    }
    start.elapsed().as_secs_f64() * 1e9 / f64::from(calls)
}

fn median(mut values: Vec<f64>) -> f64 {
    values.sort_by(f64::total_cmp);
    values[values.len() / 2]
}

fn case<L: Lattice>(name: &str, lattice: &str, lanes: usize, temperature: f64, plain: &mut Plain) {
    let wanted: Vec<String> = std::env::args().skip(1).collect();
    if !wanted.is_empty() && !wanted.iter().any(|begin| name.starts_with(begin.as_str())) {
        return;
    }
    let bench = Bench::new::<L, Ising>(&params(lattice), &params("{}"));
    let level = Level::chosen().expect("instructions that this processor has");
    let mut group = Group::new(bench.prepare(1.0 / temperature, lanes, 1), level).expect("served");
    // Half magnetised: closer to what a chain looks like than any start that is quickly made.
    let mut states = bench.random_states(1);
    states.iter_mut().enumerate().filter(|(site, _)| site % 4 != 0).for_each(|(_, state)| *state = 0);
    (0..lanes).for_each(|lane| group.import(lane, &View::bytes(&states)).expect("fits"));
    let spins = (bench.graph().sites * lanes) as f64;
    let sweeps = (4e6 / spins).ceil() as u64;
    group.sweep(10 * sweeps).expect("swept");
    let (mut rates, mut ratios, mut shares) = (Vec::new(), Vec::new(), Vec::new());
    for _ in 0..ROUNDS {
        let base = (plain.side * plain.side) as f64 / time(|| plain.sweep());
        let sweep = time(|| group.sweep(sweeps).expect("swept")) / sweeps as f64;
        let observed = time(|| {
            group.sweep(1).expect("swept");
            black_box(group.tallies(0));
        });
        rates.push(spins / sweep);
        ratios.push(spins / sweep / base);
        shares.push(observed / sweep - 1.0);
    }
    println!(
        "{name:<28} T = {temperature:<8.4} {:>7.2} updates/ns  {:>6.1} x plain   totals of every sweep: +{:.0} %",
        median(rates),
        median(ratios),
        100.0 * median(shares)
    );
    black_box(&plain.spins);
}

fn main() {
    let mut plain = Plain::new(512, CRITICAL);
    (0..50).for_each(|_| plain.sweep());
    let rate = median((0..ROUNDS).map(|_| (512.0 * 512.0) / time(|| plain.sweep())).collect());
    println!("plain baseline, 512 x 512 at the critical temperature: {rate:.3} updates/ns; {:?}", Level::chosen());
    for side in [64, 512, 2048] {
        case::<Square>(&format!("sites, square {side}"), &format!(r#"{{"size": {side}}}"#), 1, CRITICAL, &mut plain);
    }
    for temperature in [1.5, 4.0, 20.0] {
        case::<Square>("sites, square 512", r#"{"size": 512}"#, 1, temperature, &mut plain);
    }
    case::<Triangular>("sites, triangular 768", r#"{"size": 768}"#, 1, 3.641, &mut plain);
    case::<Cubic>("sites, cubic 64", r#"{"size": 64}"#, 1, 4.5115, &mut plain);
    for side in [8, 16, 32, 64] {
        case::<Square>(&format!("chains, square {side}"), &format!(r#"{{"size": {side}}}"#), 512, CRITICAL, &mut plain);
    }
    case::<Triangular>("chains, triangular 24", r#"{"size": 24}"#, 512, 3.641, &mut plain);
    case::<Cubic>("chains, cubic 12", r#"{"size": 12}"#, 512, 4.5115, &mut plain);
}
