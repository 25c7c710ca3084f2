//! Times the rules against a plain loop, in alternation: `cargo run --release -p spinledger-local-updates --example time`.
//!
//! The plain baseline is what one writes first: single-spin Metropolis over an array of bytes in sequential order, with a table of acceptance
//! probabilities and xoshiro256++. Ratios are medians over rounds, each of which times both, so that a busy machine hits both alike; quartiles follow.
//! `SPINLEDGER_SIMD` chooses instructions as in a run. With arguments, only cases whose name begins with one of them are timed.
#![allow(dead_code, reason = "the modules of the library, of which timing needs a part")]

// A library that is loaded at run time cannot be linked: its modules are compiled again.
#[path = "../src/bytes.rs"]
mod bytes;
#[path = "../src/group.rs"]
mod group;
#[path = "../src/heat_bath.rs"]
mod heat_bath;
#[path = "../src/kind.rs"]
mod kind;
#[path = "../src/landscape.rs"]
mod landscape;
#[path = "../../lattices/src/standard/mod.rs"]
#[allow(unused_imports)]
mod lattices;
#[path = "../src/lines.rs"]
mod lines;
#[path = "../src/metropolis.rs"]
mod metropolis;
#[path = "../../models/src/standard/mod.rs"]
#[allow(unused_imports)]
mod models;
#[path = "../src/ordered.rs"]
mod ordered;
#[path = "../src/plan.rs"]
mod plan;
#[path = "../src/rows.rs"]
mod rows;
#[path = "../src/rule.rs"]
mod rule;
#[path = "../src/simd.rs"]
mod simd;
#[path = "../src/source.rs"]
mod source;
#[path = "../src/stretches.rs"]
mod stretches;
#[path = "../src/sweep.rs"]
mod sweep;
#[path = "../src/tally.rs"]
mod tally;
#[path = "../src/together.rs"]
mod together;
#[path = "../src/two.rs"]
mod two;
#[path = "../src/vector.rs"]
mod vector;

use heat_bath::HeatBath;
use lattices::{Cubic, Square, Triangular};
use metropolis::Metropolis;
use models::{Ising, Potts};
use simd::Level;
use spinledger_numerics::random::{StreamKey, Xoshiro, below, unit_f64};
use spinledger_sdk::testing::{Bench, params};
use spinledger_sdk::{
    Lattice, LatticeBuilder, LatticeSpec, Model, Parameter, Params, Result, Update, UpdateInstance, View, kinds,
};
use std::hint::black_box;
use std::sync::OnceLock;
use std::time::Instant;

/// The critical temperature of the square lattice, where the baseline is timed.
const CRITICAL: f64 = 2.269_185_314_213_022;
/// That of three states on it.
const CRITICAL_POTTS: f64 = 0.994_972_861_587_403;
/// Rounds of which the median is taken.
const ROUNDS: usize = 11;
/// Seconds that each side is timed in a round.
const SECONDS: f64 = 0.08;

/// A graph without order: two rings through all sites, each in an order of its own. Four neighbours a site.
struct Rings(usize);

impl Lattice for Rings {
    const SPEC: LatticeSpec = LatticeSpec {
        name: "rings",
        dimension: 1,
        size: "size",
        parameters: &[Parameter::required("size", kinds::COUNT, "Sites.")],
        ..LatticeSpec::EMPTY
    };

    fn new(params: &Params) -> Result<Self> {
        Ok(Rings(params.count("size")?))
    }

    fn build(&self, builder: &mut LatticeBuilder) -> Result<()> {
        let mut stream = Xoshiro::from_key(&StreamKey::from_text("rings"));
        builder.geometry(&[vec![1.0]], &[self.0], &[false]);
        for site in 0..self.0 {
            builder.site(&[site as f64], 0);
        }
        let class = builder.class("first");
        let mut order: Vec<u32> = (0..self.0 as u32).collect();
        for _ in 0..2 {
            for place in (1..order.len()).rev() {
                order.swap(place, below(place as u64 + 1, || stream.next()) as usize);
            }
            for place in 0..order.len() {
                builder.bond(order[place], order[(place + 1) % order.len()], class);
            }
        }
        Ok(())
    }
}

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

/// Nanoseconds that this thread was on a processor, where the system tells (other programs may run meanwhile); else those that passed.
fn clock() -> f64 {
    static START: OnceLock<Instant> = OnceLock::new();
    let told = std::fs::read_to_string("/proc/thread-self/schedstat").ok();
    let told = told.and_then(|text| text.split_whitespace().next().and_then(|word| word.parse().ok()));
    told.unwrap_or_else(|| START.get_or_init(Instant::now).elapsed().as_secs_f64() * 1e9)
}

/// Nanoseconds of one call, over about [`SECONDS`].
fn time(mut call: impl FnMut()) -> f64 {
    let (start, begin, mut calls) = (Instant::now(), clock(), 0);
    while start.elapsed().as_secs_f64() < SECONDS {
        call();
        calls += 1;
    }
    (clock() - begin) / f64::from(calls)
}

/// Lower quartile, median, upper quartile.
fn quartiles(mut values: Vec<f64>) -> [f64; 3] {
    values.sort_by(f64::total_cmp);
    [1, 2, 3].map(|quarter| values[values.len() * quarter / 4])
}

/// What is timed.
struct Case<'c> {
    name: &'c str,
    lattice: &'c str,
    model: &'c str,
    lanes: usize,
    temperature: f64,
}

fn case<U: Update, L: Lattice, M: Model>(case: Case<'_>, plain: &mut Plain) {
    let Case { name, lattice, model, lanes, temperature } = case;
    let wanted: Vec<String> = std::env::args().skip(1).collect();
    if !wanted.is_empty() && !wanted.iter().any(|begin| name.starts_with(begin.as_str())) {
        return;
    }
    let bench = Bench::new::<L, M>(&params(lattice), &params(model));
    let rule = U::new(&params(&format!(r#"{{"lanes": {lanes}}}"#))).expect("a rule");
    let mut group = rule.prepare(bench.prepare(1.0 / temperature, lanes, 1)).expect("served");
    // Half magnetised: closer to what a chain looks like than any start that is quickly made.
    let mut states = bench.random_states(1);
    states.iter_mut().enumerate().filter(|(site, _)| site % 4 != 0).for_each(|(_, state)| *state = 0);
    (0..lanes).for_each(|lane| group.import(lane, &View::bytes(&states)).expect("fits"));
    let spins = (bench.graph().sites * lanes) as f64;
    let sweeps = (4e6 / spins).ceil() as u64;
    group.sweep(10 * sweeps).expect("swept");
    let (mut rates, mut ratios, mut seen) = (Vec::new(), Vec::new(), Vec::new());
    for _ in 0..ROUNDS {
        let base = (plain.side * plain.side) as f64 / time(|| plain.sweep());
        let sweep = time(|| group.sweep(sweeps).expect("swept")) / sweeps as f64;
        let observed = time(|| {
            group.sweep(1).expect("swept");
            black_box(group.tallies(0));
        });
        rates.push(spins / sweep);
        ratios.push(spins / sweep / base);
        seen.push(observed / sweep - 1.0);
    }
    let [_, rate, _] = quartiles(rates);
    let [low, ratio, high] = quartiles(ratios);
    let [_, seen, _] = quartiles(seen);
    println!(
        "{name:<34} T = {temperature:<7.4} {rate:>7.3} updates/ns  {ratio:>6.2} x plain ({low:.2} to {high:.2})   totals of every sweep: +{:.0} %",
        100.0 * seen
    );
    black_box(&plain.spins);
}

fn main() {
    let mut plain = Plain::new(512, CRITICAL);
    (0..50).for_each(|_| plain.sweep());
    let rates = (0..ROUNDS).map(|_| (512.0 * 512.0) / time(|| plain.sweep())).collect();
    let [low, rate, high] = quartiles(rates);
    println!(
        "plain baseline, 512 x 512 at the critical temperature: {rate:.3} updates/ns ({low:.3} to {high:.3}); {:?}",
        Level::chosen()
    );
    for side in [8, 16, 32, 64, 128, 512, 2048] {
        let (name, lattice) = (format!("one chain, square {side}"), format!(r#"{{"size": {side}}}"#));
        let what = Case { name: &name, lattice: &lattice, model: "{}", lanes: 1, temperature: CRITICAL };
        case::<Metropolis, Square, Ising>(what, &mut plain);
    }
    let square = r#"{"size": 512}"#;
    let what = |name, lattice, model, lanes, temperature| Case { name, lattice, model, lanes, temperature };
    for temperature in [1.5, 4.0] {
        case::<Metropolis, Square, Ising>(what("one chain, square 512", square, "{}", 1, temperature), &mut plain);
    }
    let free = r#"{"size": 512, "boundary": "free"}"#;
    case::<Metropolis, Square, Ising>(what("one chain, square 512, free", free, "{}", 1, CRITICAL), &mut plain);
    let field = r#"{"field": 0.25}"#;
    case::<Metropolis, Square, Ising>(what("one chain, square 512, field", square, field, 1, CRITICAL), &mut plain);
    case::<HeatBath, Square, Ising>(what("heat bath, square 512", square, "{}", 1, CRITICAL), &mut plain);
    let triangular = r#"{"size": 768}"#;
    case::<Metropolis, Triangular, Ising>(what("one chain, triangular 768", triangular, "{}", 1, 3.641), &mut plain);
    let cubic = r#"{"size": 64}"#;
    case::<Metropolis, Cubic, Ising>(what("one chain, cubic 64", cubic, "{}", 1, 4.5115), &mut plain);
    let three = r#"{"q": 3}"#;
    case::<Metropolis, Square, Potts>(what("three states, square 512", square, three, 1, CRITICAL_POTTS), &mut plain);
    let random = r#"{"size": 65536}"#;
    case::<Metropolis, Rings, Ising>(what("one chain, random graph", random, "{}", 1, 2.885), &mut plain);
    let random = r#"{"size": 4096}"#;
    case::<Metropolis, Rings, Ising>(what("64 chains, random graph", random, "{}", 64, 2.885), &mut plain);
    let small = r#"{"size": 64}"#;
    case::<Metropolis, Square, Ising>(what("64 chains, square 64", small, "{}", 64, CRITICAL), &mut plain);
    case::<HeatBath, Square, Ising>(what("64 chains, heat bath", small, "{}", 64, CRITICAL), &mut plain);
    case::<Metropolis, Square, Potts>(what("64 chains, three states", small, three, 64, CRITICAL_POTTS), &mut plain);
}
