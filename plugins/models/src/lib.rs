//! The standard models: `ising`, `potts`. Each is one file in `standard/`.
#![deny(unsafe_code)]

mod standard;
#[cfg(test)]
mod tests;

use standard::{Ising, Potts};

#[allow(unsafe_code)]
mod export {
    use super::{Ising, Potts};

    spinledger_sdk::export! {
        library: "models", version: env!("CARGO_PKG_VERSION"), licence: env!("CARGO_PKG_LICENSE"),
        models: [Ising, Potts],
    }
}
