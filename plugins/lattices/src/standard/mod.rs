//! The lattices. Modules refer to each other by `super`, since the tests of the standard update rules compile this folder into their own
//! crates: plugins are shared libraries, and cannot be linked.

mod bcc;
mod boundary;
mod brick;
mod chain;
mod colouring;
mod cubic;
mod diamond;
mod fcc;
mod honeycomb;
mod kagome;
mod place;
mod square;
mod triangular;

pub(crate) use bcc::Bcc;
pub(crate) use chain::Chain;
pub(crate) use cubic::Cubic;
pub(crate) use diamond::Diamond;
pub(crate) use fcc::Fcc;
pub(crate) use honeycomb::Honeycomb;
pub(crate) use kagome::Kagome;
pub(crate) use square::Square;
pub(crate) use triangular::Triangular;
