//! The models. Like the standard lattices, this folder is also compiled into the tests of the standard update rules.

mod blume_capel;
mod ising;
mod potts;

use spinledger_sdk::{Parameter, kinds};

pub(crate) use blume_capel::BlumeCapel;
pub(crate) use ising::Ising;
pub(crate) use potts::Potts;

/// J, which several models have.
const COUPLING: Parameter =
    Parameter::optional("coupling", kinds::NUMBER_BY_CLASS, "1", "J: a number, or a mapping from bond class to number")
        .unit("energy");

/// h, which several models have.
const FIELD: Parameter =
    Parameter::optional("field", kinds::NUMBER, "0", "h: an energy, or in tesla where the pipeline gives a moment")
        .unit("field");
