//! Spins of q equal colours.

use super::COUPLING;
use spinledger_sdk::{Graph, Model, ModelBuilder, ModelSpec, Parameter, Params, Result};

/// H = -sum J delta(s_i, s_j), s = 0 .. q - 1 (colours 1 .. q).
#[derive(Debug)]
pub(crate) struct Potts {
    states: usize,
    /// Kept whole: `coupling` is read by the classes of the lattice.
    params: Params,
}

impl Model for Potts {
    const SPEC: ModelSpec = ModelSpec {
        name: "potts",
        about: "Potts model: q equal colours, neighbours of one colour gain J",
        formula: "H = -sum J delta(s_i, s_j), s one of q colours; J > 0 is ferromagnetic",
        source: "Potts 1952 Proc. Camb. Phil. Soc. 48 106",
        parameters: &[Parameter::required("q", r#"{"integer":{"min":2,"max":256}}"#, "number of colours"), COUPLING],
        states_parameter: "q",
        offers: &[
            ("colours", &[]),
            ("permutation", &[]),
            ("directions", &[]),
            ("ferromagnetic", &[("coupling", "negative")]),
            ("uniform", &[("coupling", "uneven")]),
        ],
        by_class: &["coupling"],
        ..ModelSpec::EMPTY
    };

    fn new(params: &Params) -> Result<Self> {
        Ok(Potts { states: params.count("q")?, params: params.clone() })
    }

    fn describe(&self, graph: &Graph<'_>, builder: &mut ModelBuilder) -> Result<()> {
        let q = self.states;
        // Rims pinned up and down show colours 1 and 2.
        builder.spins(q, &[], &[], Some(0), Some(1));
        let couplings = self.params.numbers_by_class("coupling", &graph.class_names)?;
        for (class, &j) in couplings.iter().enumerate() {
            if j != 0.0 {
                let mut energies = vec![0.0; q * q];
                energies.iter_mut().step_by(q + 1).for_each(|e| *e = -j);
                builder.pair(class as u16, &energies);
            }
        }
        builder.permutations();
        Ok(())
    }
}
