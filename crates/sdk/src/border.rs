//! Where Rust meets the C tables. Public for [`crate::export!`] only: nothing here is part of the promise to plugin authors.
//!
//! - [`Lattices`], [`Models`], [`Updates`], [`Observables`]: tables of generic wrappers, one instantiation an item type.
//! - [`Manifest`]: the JSON text, written while the library is compiled.
//! - `raw`: slices and enums from pointers; `status`: no panic leaves, and messages arrive.

mod entry;
mod instances;
mod items;
mod manifest;
mod raw;
mod replay;
mod status;

pub use entry::{Shared, item, library};
pub use instances::{Observables, Updates};
pub use items::{Lattices, Models};
pub use manifest::{ItemSpec, Manifest};
pub(crate) use raw::{energy, graph};
pub(crate) use replay::{replay_lattice, replay_model};
pub use spinledger_abi as abi;
