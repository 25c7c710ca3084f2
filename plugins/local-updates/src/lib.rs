//! The standard single-spin rules: `metropolis` and `heat-bath`.
//!
//! Both visit sites in colour order and serve any graph and any energy of discrete spins: pair tables, site energies, strengths, many-body
//! terms and custom callbacks. Sites whose surroundings are alike share a table of decisions (`kind.rs`), so that a visit costs a look at the
//! neighbours and one at the table; other sites are computed directly (`landscape.rs`). A group is one chain, or 64 chains whose states lie
//! side by side (`group.rs`).
//!
//! Two states in plain surroundings go 64 at a time: along rows (`rows.rs`, `stretches.rs`, `ordered.rs`, `vector.rs`), or side by side
//! (`together.rs`), with the instructions that the processor has (`bytes.rs`, `simd.rs`).
//!
//! `README.md` fixes the order of visits and draws, and says where Metropolis departs from the textbook and why.
#![deny(unsafe_code)]

mod bytes;
mod group;
mod heat_bath;
mod kind;
mod landscape;
mod lines;
mod metropolis;
mod ordered;
mod plan;
mod rows;
mod rule;
#[allow(unsafe_code)]
mod simd;
mod source;
mod stretches;
mod sweep;
mod tally;
#[cfg(test)]
mod tests;
mod together;
mod two;
mod vector;

use heat_bath::HeatBath;
use metropolis::Metropolis;

#[allow(unsafe_code)]
mod export {
    use super::{HeatBath, Metropolis};

    spinledger_sdk::export! {
        library: "local-updates", version: env!("CARGO_PKG_VERSION"), licence: env!("CARGO_PKG_LICENSE"),
        updates: [Metropolis, HeatBath],
    }
}
