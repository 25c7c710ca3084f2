//! Spins of two directions that may also be missing.

use super::{COUPLING, FIELD};
use spinledger_sdk::{Graph, Model, ModelBuilder, ModelSpec, Parameter, Params, Result, kinds};

/// Values of the states.
const VALUES: [f64; 3] = [1.0, 0.0, -1.0];

/// H = -sum J s_i s_j + sum D s_i^2 - sum h s_i with s = +1 (state 0, up), 0 (state 1) or -1 (state 2, down).
#[derive(Debug)]
pub(crate) struct BlumeCapel {
    /// Kept whole: `coupling` is read by the classes of the lattice.
    params: Params,
    anisotropy: f64,
    field: f64,
}

impl Model for BlumeCapel {
    const SPEC: ModelSpec = ModelSpec {
        name: "blume-capel",
        about: "Blume-Capel model: spins +1, 0 and -1, exchange coupling, single-ion anisotropy and field",
        formula: "H = -sum J s_i s_j + sum D s_i^2 - sum h s_i, s = +1, 0 or -1; J > 0 is ferromagnetic, D > 0 favours 0",
        source: "Blume 1966 Phys. Rev. 141 517; Capel 1966 Physica 32 966",
        parameters: &[
            COUPLING,
            Parameter::optional("anisotropy", kinds::NUMBER, "0", "D: what a spin that is not 0 costs").unit("energy"),
            FIELD,
        ],
        states: 3,
        // Not the inversion, although it is a symmetry without a field: a cluster rule alone would never move a spin that is 0.
        offers: &[
            ("scalar", &[]),
            ("negation", &[]),
            ("directions", &[]),
            ("ferromagnetic", &[("coupling", "negative")]),
        ],
        by_class: &["coupling"],
        ..ModelSpec::EMPTY
    };

    fn new(params: &Params) -> Result<Self> {
        Ok(BlumeCapel {
            params: params.clone(),
            anisotropy: params.number("anisotropy")?,
            field: params.number("field")?,
        })
    }

    fn describe(&self, graph: &Graph<'_>, builder: &mut ModelBuilder) -> Result<()> {
        builder.spins(3, &VALUES, &[2, 1, 0], Some(0), Some(2));
        let couplings = self.params.numbers_by_class("coupling", &graph.class_names)?;
        for (class, &j) in couplings.iter().enumerate() {
            if j != 0.0 {
                builder.pair(class as u16, &[-j, 0.0, j, 0.0, 0.0, 0.0, j, 0.0, -j]);
            }
        }
        if self.anisotropy != 0.0 || self.field != 0.0 {
            builder.site(0, &[self.anisotropy - self.field, 0.0, self.anisotropy + self.field]);
        }
        if self.field == 0.0 {
            builder.involution(&[2, 1, 0]);
        }
        Ok(())
    }
}
