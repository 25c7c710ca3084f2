//! A plugin library for tests with every kind of item and every form of energy: plain code, small systems.
#![forbid(unsafe_code)]

mod chains;
mod grid;
mod models;
mod observe;
mod probe;

spinledger_sdk::export! {
    library: "test-forms", version: env!("CARGO_PKG_VERSION"), licence: "MIT OR Apache-2.0",
    lattices: [grid::Grid],
    models: [models::Ising, models::FourSpin, models::Rotor, models::ChainTerm],
    updates: [probe::ProbePair, probe::ProbeFactors, probe::ProbeVectors, probe::ProbeCustom],
    observables: [observe::Mean, observe::Overlap],
}
