//! The standard cluster rules: `wolff`.
//!
//! A cluster is grown from a random site by adding bonds with a probability that makes its flip rejection-free, for any graph and any pair
//! energy with a symmetry: an involution of states (S -> -S) or all permutations of colours. `README.md` has the derivation and fixes the
//! order of draws.
#![deny(unsafe_code)]

mod adjacency;
mod bonds;
mod symmetry;
#[cfg(test)]
mod tests;
mod wolff;
// One source of buffered half words serves both libraries; plugins are shared libraries and cannot be linked to each other.
#[allow(dead_code, reason = "single-spin rules draw in more ways")]
#[path = "../../local-updates/src/words.rs"]
mod words;

use wolff::Wolff;

#[allow(unsafe_code)]
mod export {
    use super::Wolff;

    spinledger_sdk::export! {
        library: "cluster-updates", version: env!("CARGO_PKG_VERSION"), licence: env!("CARGO_PKG_LICENSE"),
        updates: [Wolff],
    }
}
