//! What a lattice and a Hamiltonian become once they are checked: adjacency, tables, colours, total energies.
//!
//! A plugin says its lattice and its Hamiltonian call by call ([`LatticeParts`], [`ModelParts`]); every call is checked when
//! it is made, the whole when it is [finished](LatticeParts::finish). The results, [`GraphData`] and [`EnergyData`], are what update
//! rules and observables see. [`total`] is the energy of a configuration by definition, term by term, and [`scale`] the
//! size of numbers that go into it.
//!
//! This crate is an implementation detail, and stands by itself because two sides need it that must not know each other: `host`, which
//! flattens what a loaded library says, and the `testing` module of `sdk`, which flattens the same for unit tests of a plugin without
//! loading anything. A rule that passes its unit tests has then seen the very tables that it will see in a run.
//!
//! ```
//! use spinledger_flatten::{LatticeParts, ModelParts, Spins, total};
//! let mut ring = LatticeParts::default();
//! ring.geometry(&[1.0], &[3], &[true])?;
//! ring.sites(&[0.0, 1.0, 2.0], &[0, 0, 0])?;
//! ring.class_name("first")?;
//! let bond = |i, j| spinledger_abi::SlBond { i, j, class_index: 0, sign: 1, reserved: 0 };
//! ring.bonds(&[bond(0, 1), bond(1, 2), bond(2, 0)], Some(&[0, 0, 1]))?;
//! let graph = ring.finish()?;
//!
//! let mut ising = ModelParts::new(&graph);
//! ising.spins(2, Some(&[1.0, -1.0]), Some(&[1, 0]), 0, 1)?;
//! ising.pair(0, &[-1.0, 1.0, 1.0, -1.0])?;
//! let energy = ising.finish(&graph, None)?;
//! assert_eq!(total(&graph, &energy, Spins::States(&[0, 0, 0])), -3.0);
//! assert_eq!(total(&graph, &energy, Spins::States(&[0, 1, 0])), 1.0);
//! # Ok::<(), spinledger_flatten::Unsound>(())
//! ```
//!
//! Left to others: reading pointers (`host`, `sdk`), callbacks of custom models, random numbers.
#![forbid(unsafe_code)]

mod colouring;
mod energy;
mod graph;
mod lattice;
mod model;
mod symmetry;
mod total;
mod unsound;

pub use energy::EnergyData;
pub use graph::GraphData;
pub use lattice::LatticeParts;
pub use model::ModelParts;
pub use total::{Shown, Spins, Terms, scale, total};
pub use unsound::{Result, Unsound};
