//! The standard models: `ising`, `potts`, `blume-capel`. Each is one file in `standard/`.
#![deny(unsafe_code)]

mod standard;
#[cfg(test)]
mod tests;

use standard::{BlumeCapel, Ising, Potts};

#[allow(unsafe_code)]
mod export {
    use super::{BlumeCapel, Ising, Potts};

    spinledger_sdk::export! {
        library: "models", version: env!("CARGO_PKG_VERSION"), licence: env!("CARGO_PKG_LICENSE"),
        models: [Ising, Potts, BlumeCapel],
    }
}
