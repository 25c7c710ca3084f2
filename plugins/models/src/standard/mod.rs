//! The models. Like the standard lattices, this folder is also compiled into the tests of the standard update rules.

mod blume_capel;
mod ising;
mod potts;

pub(crate) use blume_capel::BlumeCapel;
pub(crate) use ising::Ising;
pub(crate) use potts::Potts;
