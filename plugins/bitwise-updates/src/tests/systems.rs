//! Small systems with everything that this library serves: odd, folded and free boundaries, rims, seams, both signs, few and many neighbours,
//! temperatures from very low to infinite.

use super::lattices::{Chain, Cubic, Square, Triangular};
use super::models::{Ising, Potts};
use spinledger_sdk::testing::{Bench, params};
use spinledger_sdk::{Lattice, LatticeBuilder, LatticeSpec, Model, Parameter, Params, Result, kinds};

/// A system at a temperature.
pub(super) struct System {
    pub(super) name: &'static str,
    pub(super) bench: Bench,
    pub(super) inverse_temperature: f64,
}

fn system<L: Lattice, M: Model>(name: &'static str, lattice: &str, model: &str, inverse_temperature: f64) -> System {
    System { name, bench: Bench::new::<L, M>(&params(lattice), &params(model)), inverse_temperature }
}

/// Systems of at most twelve sites.
pub(super) fn small() -> Vec<System> {
    let anti = r#"{"coupling": -1}"#;
    vec![
        system::<Square, Ising>("3x3, periods odd", r#"{"size": 3}"#, "{}", 0.2),
        system::<Square, Ising>("3x3, infinite temperature", r#"{"size": 3}"#, "{}", 0.0),
        system::<Square, Ising>("3x3, hot", r#"{"size": 3}"#, "{}", 0.08),
        system::<Square, Ising>("3x3, just hard", r#"{"size": 3}"#, "{}", 0.09),
        system::<Square, Ising>("3x3, cold", r#"{"size": 3}"#, "{}", 0.45),
        system::<Square, Ising>("3x3, antiferromagnet", r#"{"size": 3}"#, anti, 0.3),
        system::<Square, Ising>("3x3, antiferromagnet, cold", r#"{"size": 3}"#, anti, 1.5),
        system::<Square, Ising>("2x3, free", r#"{"size": [2, 3], "boundary": "free"}"#, r#"{"coupling": 0.7}"#, 0.5),
        system::<Square, Ising>("2x2, rim pinned up", r#"{"size": 2, "boundary": "plus"}"#, "{}", 0.25),
        system::<Square, Ising>("2x2, rims up and down", r#"{"size": 2, "boundary": ["plus", "minus"]}"#, anti, 0.4),
        system::<Square, Ising>(
            "3x2, a seam",
            r#"{"size": [3, 2], "boundary": ["antiperiodic", "periodic"]}"#,
            "{}",
            0.3,
        ),
        system::<Square, Ising>("3x2, seams, cold", r#"{"size": [3, 2], "boundary": "antiperiodic"}"#, "{}", 1.2),
        system::<Square, Ising>("1x4, a period of one", r#"{"size": [1, 4]}"#, "{}", 0.3),
        system::<Square, Ising>("four rings of 2", r#"{"size": [2, 4]}"#, r#"{"coupling": {"first.y": 1}}"#, 0.4),
        system::<Square, Ising>("2x2, not coupled", r#"{"size": 2}"#, r#"{"coupling": 0}"#, 0.4),
        system::<Triangular, Ising>("triangular 3x3", r#"{"size": 3}"#, "{}", 0.15),
        system::<Triangular, Ising>("triangular 3x3, antiferromagnet", r#"{"size": 3}"#, anti, 0.9),
        system::<Triangular, Ising>(
            "triangular 2x4, free",
            r#"{"size": [2, 4], "boundary": ["free", "periodic"]}"#,
            "{}",
            0.2,
        ),
        system::<Cubic, Ising>("2x2x2, double bonds", r#"{"size": 2}"#, "{}", 0.1),
        system::<Cubic, Ising>("2x2x2, double bonds, antiferromagnet", r#"{"size": 2}"#, anti, 0.12),
        system::<Cubic, Ising>(
            "2x2x3, open",
            r#"{"size": [2, 2, 3], "boundary": ["free", "periodic", "periodic"]}"#,
            "{}",
            0.12,
        ),
        system::<Chain, Ising>("ring of 5", r#"{"size": 5}"#, "{}", 0.4),
        system::<Chain, Ising>("ring of 4", r#"{"size": 4}"#, "{}", 0.4),
        system::<Chain, Ising>("open chain of 6, cold", r#"{"size": 6, "boundary": "free"}"#, "{}", 1.5),
        system::<Chain, Ising>("one site", r#"{"size": 1, "boundary": "free"}"#, "{}", 1.0),
        system::<Square, Potts>("2x3, two colours", r#"{"size": [2, 3], "boundary": "free"}"#, r#"{"q": 2}"#, 0.6),
        system::<Complete, Ising>("everyone with everyone, 8", r#"{"size": 8}"#, "{}", 0.08),
        system::<Complete, Ising>("everyone with everyone, 9", r#"{"size": 9}"#, "{}", 0.07),
        system::<Complete, Ising>("everyone with everyone, 12", r#"{"size": 12}"#, "{}", 0.06),
        system::<Complete, Ising>("everyone with everyone, 9, hot", r#"{"size": 9}"#, anti, 0.03),
    ]
}

/// Every site is a neighbour of every other.
pub(super) struct Complete(usize);

impl Lattice for Complete {
    const SPEC: LatticeSpec = LatticeSpec {
        name: "complete",
        parameters: &[Parameter::required("size", kinds::COUNT, "sites")],
        size: "size",
        ..LatticeSpec::EMPTY
    };

    fn new(params: &Params) -> Result<Self> {
        Ok(Complete(params.count("size")?))
    }

    fn build(&self, builder: &mut LatticeBuilder) -> Result<()> {
        builder.geometry(&[vec![1.0]], &[self.0], &[false]);
        (0..self.0).for_each(|site| _ = builder.site(&[site as f64], 0));
        let first = builder.class("first");
        (0..self.0 as u32).for_each(|j| (0..j).for_each(|i| builder.bond(i, j, first)));
        Ok(())
    }
}

/// Free sites with pinned neighbours only: for every number of neighbours up to 12 (0 aside) and every number of them that is down, one site.
pub(super) struct Islands;

impl Islands {
    /// Number of neighbours, and how many of them are down, of each site.
    pub(super) fn sites() -> impl Iterator<Item = (usize, usize)> {
        (1..=12).flat_map(|degree| (0..=degree).map(move |down| (degree, down)))
    }
}

impl Lattice for Islands {
    const SPEC: LatticeSpec = LatticeSpec { name: "islands", ..LatticeSpec::EMPTY };

    fn new(_: &Params) -> Result<Self> {
        Ok(Islands)
    }

    fn build(&self, builder: &mut LatticeBuilder) -> Result<()> {
        let count = Self::sites().count();
        builder.geometry(&[vec![1.0]], &[count], &[false]);
        (0..count).for_each(|site| _ = builder.site(&[site as f64], 0));
        let mut bonds = Vec::new();
        for (site, (degree, down)) in Self::sites().enumerate() {
            for k in 0..degree {
                let pinned = builder.pinned(&[site as f64], 0, if k < down { -1 } else { 1 });
                bonds.push((site as u32, pinned));
            }
        }
        let first = builder.class("first");
        bonds.into_iter().for_each(|(i, j)| builder.bond(i, j, first));
        Ok(())
    }
}
