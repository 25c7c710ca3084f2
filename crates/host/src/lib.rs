//! Finds, reads and loads plugin libraries, and gives them safe faces.
//!
//! - [`Search`] says where to look, in order; [`Catalogue::find`] reads the manifests it finds there. Nothing is loaded: a library's code, its
//!   initialisers included, does not run.
//! - [`Loader`] loads a library once, checks it and keeps it for the life of the process.
//! - [`LatticeItem`], [`ModelItem`], [`UpdateItem`] and [`ObservableItem`] are items made from parameters. A lattice builds a [`Graph`], a model
//!   describes an [`Energy`] on it, an update rule prepares a [`Sampler`] for a group of chains, an observable an [`Observer`].
//!
//! What plugins say is checked before anybody relies on it, and every refusal names the plugin and what is wrong. What cannot be checked is
//! whether their code keeps to the rules of the interface: a library that writes where it must not can do anything to the process. Foreign
//! libraries therefore run in workers of their own (`engine`).
//!
//! ```no_run
//! use spinledger_host::{Catalogue, Loader, Search, Services};
//! use spinledger_terms::{ItemKind, Value};
//!
//! let catalogue = Catalogue::find(&Search::usual(&[]));
//! let loader = Loader::new(Services::default())?;
//! let (square, _) = catalogue.item(ItemKind::Lattice, "square").expect("standard plugins are installed");
//! let graph = loader.lattice(square, &Value::map([("size", Value::Integer(8))]))?.build()?;
//! assert_eq!(graph.sites, 64);
//! # Ok::<(), spinledger_host::HostError>(())
//! ```
//!
//! Left to others: which parameters an item takes and whether they fit (`terms`, `pipeline`), when what is run (`engine`).

mod answer;
mod catalogue;
mod collected;
mod configuration;
mod energy;
mod error;
mod graph;
mod item;
mod lattice;
mod library;
mod loader;
mod model;
mod object_file;
mod observable;
mod saved;
mod search;
mod services;
mod shown;
mod update;
mod value;

pub use catalogue::{Catalogue, Note, Refusal};
pub use configuration::{Configuration, ordered_start, random_start};
pub use energy::{Energy, energy_scale, energy_total};
pub use error::{FindError, HostError, LoadError};
pub use graph::Graph;
pub use item::Label;
pub use lattice::LatticeItem;
pub use loader::Loader;
pub use model::ModelItem;
pub use observable::{ObservableItem, Observer, measure_all, measure_all_pair};
pub use search::{STANDARD, Search};
pub use services::{Level, Services};
pub use update::{Sampler, Tallies, UpdateItem};
