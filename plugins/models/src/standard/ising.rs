//! Spins of two directions.

use super::{COUPLING, FIELD};
use spinledger_sdk::{Graph, Model, ModelBuilder, ModelSpec, Params, Result};

/// H = -sum J s_i s_j - sum h s_i with s = +1 (state 0, up) or -1 (state 1, down).
#[derive(Debug)]
pub(crate) struct Ising {
    /// Kept whole: `coupling` is read by the classes of the lattice.
    params: Params,
    field: f64,
}

impl Model for Ising {
    const SPEC: ModelSpec = ModelSpec {
        name: "ising",
        about: "Ising model: spins +1 and -1, exchange coupling and field",
        formula: "H = -sum J s_i s_j - sum h s_i, s = +1 or -1; J > 0 is ferromagnetic",
        source: "Ising 1925 Z. Phys. 31 253",
        parameters: &[COUPLING, FIELD],
        states: 2,
        offers: &[
            ("scalar", &[]),
            ("negation", &[]),
            ("directions", &[]),
            ("inversion", &[("field", "nonzero")]),
            ("ferromagnetic", &[("coupling", "negative")]),
            ("uniform", &[("coupling", "uneven")]),
        ],
        by_class: &["coupling"],
        ..ModelSpec::EMPTY
    };

    fn new(params: &Params) -> Result<Self> {
        Ok(Ising { params: params.clone(), field: params.number("field")? })
    }

    fn describe(&self, graph: &Graph<'_>, builder: &mut ModelBuilder) -> Result<()> {
        builder.spins(2, &[1.0, -1.0], &[1, 0], Some(0), Some(1));
        let couplings = self.params.numbers_by_class("coupling", &graph.class_names)?;
        for (class, &j) in couplings.iter().enumerate() {
            if j != 0.0 {
                builder.pair(class as u16, &[-j, j, j, -j]);
            }
        }
        if self.field == 0.0 {
            builder.involution(&[1, 0]);
        } else {
            builder.site(0, &[-self.field, self.field]);
        }
        Ok(())
    }
}
