//! The standard observables: `energy`, `magnetisation`, `order-parameter`.
//!
//! Each is one file. All are per free site. Energy and magnetisation come from the rule's own totals where it keeps them, and are computed from
//! the configuration otherwise.
#![deny(unsafe_code)]

mod energy;
mod magnetisation;
mod order_parameter;
#[cfg(test)]
mod tests;

use energy::EnergyPerSite;
use magnetisation::Magnetisation;
use order_parameter::OrderParameter;

#[allow(unsafe_code)]
mod export {
    use super::{EnergyPerSite, Magnetisation, OrderParameter};

    spinledger_sdk::export! {
        library: "observables", version: env!("CARGO_PKG_VERSION"), licence: env!("CARGO_PKG_LICENSE"),
        observables: [EnergyPerSite, Magnetisation, OrderParameter],
    }
}
