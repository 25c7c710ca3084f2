//! The standard cluster rules: `wolff`.
//!
//! A cluster is grown from a random site by adding bonds with a probability that makes its flip rejection-free, for any graph and any pair
//! energy with a symmetry: an involution of states (S -> -S) or all permutations of colours. `README.md` has the derivation and fixes the
//! order of draws.
#![deny(unsafe_code)]

mod adjacency;
mod bonds;
mod even;
mod symmetry;
#[cfg(test)]
mod tests;
mod wolff;

use wolff::Wolff;

#[allow(unsafe_code)]
mod export {
    use super::Wolff;

    spinledger_sdk::export! {
        library: "cluster-updates", version: env!("CARGO_PKG_VERSION"), licence: env!("CARGO_PKG_LICENSE"),
        updates: [Wolff],
    }
}
