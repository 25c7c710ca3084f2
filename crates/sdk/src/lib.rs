//! What the author of a plugin writes against: a trait per kind of item, one export macro, and safe faces of what the host hands over.
//!
//! The story of a plugin, in order:
//! 1. The program reads the manifest in the library file. Nothing is loaded yet.
//! 2. To run, it loads the library and makes items from parameters: [`Lattice::new`], [`Model::new`], [`Update::new`], [`Observable::new`].
//! 3. [`Lattice::build`] gives sites and bonds; the host checks them and keeps the [`Graph`].
//! 4. [`Model::describe`] gives the Hamiltonian on that graph; the host flattens it into an [`Energy`].
//! 5. [`Update::prepare`] gets graph, energy, temperature and random streams, and makes an instance for a group of chains; so does
//!    [`Observable::prepare`], without chains.
//! 6. The host imports start configurations, asks for sweeps, shows views to the observables, saves and restores.
//!
//! Left to others: loading and checking (`host`), what is computed when (`engine`).
#![deny(unsafe_op_in_unsafe_fn)]

#[doc(hidden)]
pub mod border;
mod build;
mod energy;
mod error;
mod export;
mod graph;
mod host;
mod instructions;
mod neighbours;
mod params;
mod spec;
pub mod testing;
mod traits;
mod view;

pub use build::{ClassIndex, LatticeBuilder, ModelBuilder};
pub use energy::{Custom, Energy, Factor, FactorTable};
pub use error::{Error, Result};
pub use graph::{Bond, Graph};
pub use host::Host;
pub use instructions::{INSTRUCTIONS_VARIABLE, instructions, instructions_named};
pub use neighbours::Neighbours;
pub use params::Params;
pub use spec::{Column, LatticeSpec, ModelSpec, ObservableSpec, Parameter, Trait, UpdateSpec, kinds, views};
pub use spinledger_numerics as numerics;
pub use traits::{
    ColumnInfo, Lattice, Model, Observable, ObservableInstance, Prepare, Problem, Update, UpdateInstance,
};
pub use view::{PositionList, Positions, Spins, Tallies, View};
