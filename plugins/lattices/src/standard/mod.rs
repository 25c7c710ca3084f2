//! The lattices. Modules refer to each other by `super`, since the tests of the standard update rules compile this folder into their own
//! crates: plugins are shared libraries, and cannot be linked.

mod boundary;
mod brick;
mod chain;
mod colouring;
mod cubic;
mod place;
mod square;
mod triangular;

pub(crate) use chain::Chain;
pub(crate) use cubic::Cubic;
pub(crate) use square::Square;
pub(crate) use triangular::Triangular;
