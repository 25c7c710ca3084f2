//! A model for each form of energy.

use spinledger_sdk::{Error, Graph, Model, ModelBuilder, ModelSpec, Parameter, Params, Result, View, kinds};

const COUPLING: Parameter = Parameter::optional("coupling", kinds::NUMBER, "1", "J.").unit("energy");
const FIELD: Parameter = Parameter::optional("field", kinds::NUMBER, "0", "h.").unit("energy");

/// The value of a state: 0 is up.
fn spin(state: u8) -> f64 {
    1.0 - 2.0 * f64::from(state)
}

/// Says what two-state spins are.
fn two_states(b: &mut ModelBuilder) {
    b.spins(2, &[1.0, -1.0], &[1, 0], Some(0), Some(1));
}

/// The same energy for every bond class.
fn pairs(b: &mut ModelBuilder, graph: &Graph<'_>, energies: &[f64]) {
    (0..graph.class_names.len()).for_each(|class| b.pair(class as u16, energies));
}

/// Pairs, with a part that is not symmetric, and strengths that differ from bond to bond and site to site.
pub struct Ising {
    coupling: f64,
    field: f64,
    tilt: f64,
    uneven: bool,
}

impl Model for Ising {
    const SPEC: ModelSpec = ModelSpec {
        name: "test-ising",
        about: "Two-state spins with a tilted coupling, for tests.",
        formula: "H = sum_b w_b (-J s_i s_j + t (s_i - s_j)) - h sum_i w_i s_i",
        parameters: &[
            COUPLING,
            FIELD,
            Parameter::optional("tilt", kinds::NUMBER, "0", "t, which tells the ends of a bond apart.").unit("energy"),
            Parameter::optional("uneven", kinds::BOOLEAN, "false", "Strengths 1, 1.25, 1.5 in turn instead of 1."),
        ],
        states: 2,
        offers: &[
            ("scalar", &[]),
            ("negation", &[]),
            ("directions", &[]),
            ("inversion", &[("field", "nonzero"), ("tilt", "nonzero")]),
            ("ferromagnetic", &[("coupling", "negative")]),
        ],
        ..ModelSpec::EMPTY
    };

    fn new(params: &Params) -> Result<Self> {
        let uneven = matches!(params.need("uneven")?, Params::Boolean(true));
        let number = |name| params.number(name);
        Ok(Ising { coupling: number("coupling")?, field: number("field")?, tilt: number("tilt")?, uneven })
    }

    fn describe(&self, graph: &Graph<'_>, b: &mut ModelBuilder) -> Result<()> {
        two_states(b);
        let energy = |i: u8, j: u8| -self.coupling * spin(i) * spin(j) + self.tilt * (spin(i) - spin(j));
        pairs(b, graph, &[energy(0, 0), energy(0, 1), energy(1, 0), energy(1, 1)]);
        if self.field != 0.0 {
            b.site(0, &[-self.field, self.field]);
        }
        if self.uneven {
            let strengths = |count: usize| (0..count).map(|k| 1.0 + 0.25 * (k % 3) as f64).collect::<Vec<_>>();
            b.bond_strengths(&strengths(graph.bonds.len()));
            b.site_strengths(&strengths(graph.sites));
        }
        if self.field == 0.0 && self.tilt == 0.0 {
            b.involution(&[1, 0]);
        }
        Ok(())
    }
}

/// A four-spin term on every face.
pub struct FourSpin {
    coupling: f64,
}

impl Model for FourSpin {
    const SPEC: ModelSpec = ModelSpec {
        name: "test-four-spin",
        about: "A four-spin term on every face, for tests.",
        formula: "H = -K sum_faces s_1 s_2 s_3 s_4",
        parameters: &[COUPLING],
        forms: &["factors"],
        states: 2,
        offers: &[("scalar", &[]), ("negation", &[]), ("directions", &[]), ("inversion", &[])],
        ..ModelSpec::EMPTY
    };

    fn new(params: &Params) -> Result<Self> {
        Ok(FourSpin { coupling: params.number("coupling")? })
    }

    fn describe(&self, graph: &Graph<'_>, b: &mut ModelBuilder) -> Result<()> {
        if graph.face_offsets.windows(2).any(|w| w[1] - w[0] != 4) || graph.face_sites.is_empty() {
            return Err(Error::new("the lattice must have faces of four corners"));
        }
        two_states(b);
        let energies: Vec<f64> = (0..16u32)
            .map(|states| if states.count_ones() % 2 == 0 { -self.coupling } else { self.coupling })
            .collect();
        let table = b.factor_table(4, &energies);
        b.factors(table, graph.face_sites);
        b.involution(&[1, 0]);
        Ok(())
    }
}

/// Planar vectors.
pub struct Rotor {
    coupling: f64,
    field: f64,
    anisotropy: f64,
}

impl Model for Rotor {
    const SPEC: ModelSpec = ModelSpec {
        name: "test-rotor",
        about: "Planar vectors with a field and an anisotropy, for tests.",
        formula: "H = -J sum_b S_i . S_j - h sum_i S_i^x + A sum_i (S_i^y)^2",
        parameters: &[COUPLING, FIELD, Parameter::optional("anisotropy", kinds::NUMBER, "0", "A.").unit("energy")],
        forms: &["vectors"],
        offers: &[("vectors", &[]), ("negation", &[]), ("directions", &[]), ("inversion", &[("field", "nonzero")])],
        ..ModelSpec::EMPTY
    };

    fn new(params: &Params) -> Result<Self> {
        let number = |name| params.number(name);
        Ok(Rotor { coupling: number("coupling")?, field: number("field")?, anisotropy: number("anisotropy")? })
    }

    fn describe(&self, graph: &Graph<'_>, b: &mut ModelBuilder) -> Result<()> {
        b.vectors(&[1.0, 0.0]);
        for class in 0..graph.class_names.len() {
            b.coupling(class as u16, &[-self.coupling, 0.0, 0.0, -self.coupling]);
        }
        if self.field != 0.0 {
            b.field(0, &[-self.field, 0.0]);
        }
        if self.anisotropy != 0.0 {
            b.anisotropy(0, &[0.0, 0.0, 0.0, self.anisotropy]);
        }
        Ok(())
    }
}

/// Pairs as data, and a term over three sites that follow each other in numbering, as callbacks.
pub struct ChainTerm {
    coupling: f64,
    triple: f64,
}

impl ChainTerm {
    /// The term that begins at a site.
    fn term(&self, sites: usize, first: usize, state: impl Fn(usize) -> u8) -> f64 {
        -self.triple * (0..3).map(|k| spin(state((first + k) % sites))).product::<f64>()
    }

    /// The sites at which terms begin that hold this site.
    fn firsts(sites: usize, site: usize) -> impl Iterator<Item = usize> {
        (0..3).map(move |k| (site + sites - k) % sites)
    }
}

impl Model for ChainTerm {
    const SPEC: ModelSpec = ModelSpec {
        name: "test-chain-term",
        about: "Pairs, and a term over three sites that follow each other in numbering, for tests.",
        formula: "H = -J sum_b s_i s_j - K sum_i s_i s_(i+1) s_(i+2)",
        parameters: &[COUPLING, Parameter::optional("triple", kinds::NUMBER, "0.5", "K.").unit("energy")],
        forms: &["pair", "custom"],
        states: 2,
        offers: &[("scalar", &[]), ("negation", &[]), ("directions", &[])],
        ..ModelSpec::EMPTY
    };

    fn new(params: &Params) -> Result<Self> {
        Ok(ChainTerm { coupling: params.number("coupling")?, triple: params.number("triple")? })
    }

    fn describe(&self, graph: &Graph<'_>, b: &mut ModelBuilder) -> Result<()> {
        if graph.sites < 3 {
            return Err(Error::new("the lattice must have three sites"));
        }
        two_states(b);
        let j = self.coupling;
        pairs(b, graph, &[-j, j, j, -j]);
        b.custom();
        Ok(())
    }

    fn footprint(&self, graph: &Graph<'_>, site: usize, sites: &mut Vec<u32>) {
        let n = graph.sites;
        sites.extend([n - 2, n - 1, 1, 2].map(|k| ((site + k) % n) as u32).iter().filter(|&&s| s as usize != site));
    }

    fn total(&self, graph: &Graph<'_>, view: &View<'_>) -> Result<f64> {
        Ok((0..graph.sites).map(|first| self.term(graph.sites, first, |s| view.state(s))).sum())
    }

    fn delta(
        &self,
        graph: &Graph<'_>,
        view: &View<'_>,
        sites: &[u32],
        proposals: &[u8],
        changes: &mut [f64],
    ) -> Result<()> {
        let n = graph.sites;
        for ((&site, &new), change) in sites.iter().zip(proposals).zip(changes) {
            let site = site as usize;
            let now = |s: usize| view.state(s);
            let then = |s: usize| if s == site { new } else { view.state(s) };
            *change = Self::firsts(n, site).map(|f| self.term(n, f, then) - self.term(n, f, now)).sum();
        }
        Ok(())
    }
}
