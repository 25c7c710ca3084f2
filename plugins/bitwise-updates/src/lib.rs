//! `multi-spin`: Metropolis for Ising spins, one bit a spin, 512 spins at a time.
//!
//! Spins stand in vectors of 512 bits (`word.rs`), either one lattice cut into 512 blocks (`packing.rs`) or 512 chains side by side; both are
//! a list of vectors with their neighbours (`layout.rs`), and one kernel serves them (`kernel.rs`). Acceptance is a comparison of a uniform number with
//! a probability, digit by digit in all lanes at once (`decision.rs`); what some ten digits leave out is made up for by rare events (`rare.rs`).
//!
//! `README.md` fixes the order of visits and draws, and says why the probabilities are right.
#![deny(unsafe_code)]

mod count;
mod coupling;
mod decision;
mod group;
mod kernel;
mod layout;
mod packing;
mod rare;
mod rule;
#[allow(unsafe_code)]
mod simd;
#[cfg(test)]
mod tests;
mod turn;
mod vectors;
mod word;

use rule::MultiSpin;

#[allow(unsafe_code)]
mod export {
    use super::MultiSpin;

    spinledger_sdk::export! {
        library: "bitwise-updates", version: env!("CARGO_PKG_VERSION"), licence: env!("CARGO_PKG_LICENSE"),
        updates: [MultiSpin],
    }
}
