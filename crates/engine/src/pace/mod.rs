//! How fast update rules are on this machine, as pipelines run them: through the loaded plugin, and against plain code that is timed in turn with it.
//!
//! - [`Named`] is what a person names; [`admit`] checks it by the rules of a pipeline; [`standard`] is the set for who names nothing.
//! - [`Bench`] holds what is loaded; [`Bench::measure`] times one [`Case`] and gives [`Measured`].
//! - [`plain`] has the plain versions.
//!
//! Absolute times are those of a machine in its present mood: other programs, temperature and neighbours on the same host move them by tens of
//! percent. Ratios to the plain version, taken within the same fraction of a second, are what can be compared.

mod baseline;
mod measure;
mod named;
mod ordering;
pub mod plain;
mod spread;

pub use baseline::Plain;
pub use measure::{Bench, Counted, Measured, SHORTEST, Settings};
pub use named::{Case, Named, Refused, admit, standard};
pub use spread::Spread;
