//! Averages of long runs against exact values: `cargo run --release -p spinledger-bitwise-updates --example exactness -- 9`.
//!
//! The number says how much longer than the short form, which the library's tests are (default 9: three times smaller errors, some minutes).
#![allow(dead_code, reason = "the modules of the library, of which this needs a part")]

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
#[path = "../src/tests/moments.rs"]
mod moments;
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

use moments::{Estimate, critical, packed};

fn show(estimates: &[Estimate]) {
    for e in estimates {
        println!(
            "{:<58} {:>12.8} +- {:.8}  exact {:>12.8}  relative error {:.1e}  deviation {:+.2}",
            e.name,
            e.value,
            e.error,
            e.exact,
            e.precision(),
            e.deviation()
        );
    }
}

fn main() {
    let longer: usize = std::env::args().nth(1).map_or(9, |n| n.parse().expect("a whole number"));
    show(&critical(8, 80_000 * longer));
    show(&critical(12, 90_000 * longer));
    show(&packed(2.0, 600_000 * longer, 8, false));
    show(&packed(2.269_185_314_213_022, 100_000 * longer, 200, false));
    show(&packed(2.4, 650_000 * longer, 20, false));
    show(&packed(2.6, 180_000 * longer, 16, true));
}
