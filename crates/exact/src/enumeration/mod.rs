//! Complete enumeration of small discrete systems.
//!
//! A [`PairSystem`] is counted state by state into [`Degeneracies`]: how many states have which energy and order.
//! Counts are integers; every average at every temperature follows from them.

mod averages;
mod degeneracies;
mod system;
mod walk;

pub use averages::Averages;
pub use degeneracies::{Degeneracies, Level};
pub use system::{EnumerationError, MOST_STATES, Order, PairSystem};
