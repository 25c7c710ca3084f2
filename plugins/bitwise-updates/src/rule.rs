//! The rule `multi-spin`.

use crate::group::Group;
use crate::packing::GRIDS;
use crate::simd::Level;
use crate::word::LANES;
use spinledger_sdk::{Error, Parameter, Params, Prepare, Result, Update, UpdateSpec};

/// The parameter `lanes`. Without a default of its own: it is chosen by size (`UpdateSpec::packing`).
const CHAINS: Parameter = Parameter {
    name: "lanes",
    kind: r#"{"either":{"of":[{"integer":{"min":1,"max":1}},{"integer":{"min":512,"max":512}}]}}"#,
    unit: "",
    default: "",
    required: false,
    about: "1: one lattice packed by sites; 512: as many chains packed together; by size when not given: 1 where every direction is periodic and \
            its size a multiple of the number of blocks in it (1 direction: 512; 2: 16, 32; 3: 8, 8, 8; 4: 4, 4, 4, 8), and at least twice that",
};

/// The update rule `multi-spin`.
#[derive(Debug)]
pub(crate) struct MultiSpin {
    lanes: Option<usize>,
}

impl Update for MultiSpin {
    const SPEC: UpdateSpec = UpdateSpec {
        name: "multi-spin",
        about: "single-spin Metropolis of two-state spins with one strength of coupling and no field, 512 spins at a time: one bit a spin, in colour \
                order, independent random numbers for every spin",
        formula: "a flip is accepted with min(1, exp(-x)), x = dE/T; with 7/8 where x = 0; with 1/(1 + exp(x)) at sites where |x| < ln 2 always",
        source: "Metropolis, Rosenbluth, Rosenbluth, Teller & Teller 1953 J. Chem. Phys. 21 1087; Glauber 1963 J. Math. Phys. 4 294; \
                 Jacobs & Rebbi 1981 J. Comput. Phys. 41 203; Bhanot, Duke & Salvador 1986 Phys. Rev. B 33 7841",
        parameters: &[CHAINS],
        forms: &["pair"],
        needs: &["inversion|permutation", "uniform"],
        most_states: 2,
        lanes: "lanes",
        together: LANES as u64,
        packing: GRIDS,
        ..UpdateSpec::EMPTY
    };
    type Instance<'a> = Group<'a>;

    fn new(params: &Params) -> Result<Self> {
        let lanes = match params.get("lanes") {
            None | Some(Params::Null) => None,
            Some(_) => Some(params.count("lanes")?),
        };
        Ok(MultiSpin { lanes })
    }

    fn prepare<'a>(&'a self, prepare: Prepare<'a>) -> Result<Self::Instance<'a>> {
        let chains = prepare.lane_keys.len();
        if self.lanes.is_some_and(|lanes| lanes != chains) {
            return Err(Error::new(format!(
                "a group of {chains} chains was asked for, with another number of `lanes`"
            )));
        }
        Group::new(prepare, Level::chosen()?)
    }
}
