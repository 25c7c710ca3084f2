//! The standard cluster rules: `wolff` and `swendsen-wang`.
//!
//! Clusters are grown along bonds that are added with a probability that makes their flips rejection-free, for any graph and any pair
//! energy with a symmetry: an involution of states (S -> -S) or all permutations of colours. Wolff grows one cluster from a random site;
//! Swendsen-Wang decomposes the whole lattice. `README.md` has the derivation and fixes the order of draws.
#![deny(unsafe_code)]

mod adjacency;
mod bonds;
mod configuration;
mod even;
mod links;
mod swendsen_wang;
mod symmetry;
#[cfg(test)]
mod tests;
mod wolff;

use swendsen_wang::SwendsenWang;
use wolff::Wolff;

#[allow(unsafe_code)]
mod export {
    use super::{SwendsenWang, Wolff};

    spinledger_sdk::export! {
        library: "cluster-updates", version: env!("CARGO_PKG_VERSION"), licence: env!("CARGO_PKG_LICENSE"),
        updates: [Wolff, SwendsenWang],
    }
}
