//! Small systems with everything that can go wrong: odd and folded periods, rims, seams, fields, more states, and a motley Hamiltonian.
//! Also compiled into the tests of the cluster rules.

use super::lattices::{Chain, Cubic, Square, Triangular};
use super::models::{Ising, Potts};
use spinledger_sdk::testing::{Bench, params};
use spinledger_sdk::{Graph, Lattice, Model, ModelBuilder, ModelSpec, Params, Result, View};

/// A system at a temperature.
pub(crate) struct System {
    pub(crate) name: &'static str,
    pub(crate) bench: Bench,
    pub(crate) inverse_temperature: f64,
}

fn system<L: Lattice, M: Model>(name: &'static str, lattice: &str, model: &str, inverse_temperature: f64) -> System {
    System { name, bench: Bench::new::<L, M>(&params(lattice), &params(model)), inverse_temperature }
}

/// Systems that have the symmetry that cluster rules need.
pub(crate) fn symmetric() -> Vec<System> {
    vec![
        system::<Square, Ising>("3x3, periods odd", r#"{"size": 3}"#, "{}", 0.2),
        system::<Square, Ising>("2x3, free", r#"{"size": [2, 3], "boundary": "free"}"#, "{}", 0.4),
        system::<Square, Ising>("2x2, rim pinned up", r#"{"size": 2, "boundary": "plus"}"#, "{}", 0.25),
        system::<Square, Ising>(
            "3x2, a seam",
            r#"{"size": [3, 2], "boundary": ["antiperiodic", "periodic"]}"#,
            "{}",
            0.3,
        ),
        system::<Square, Ising>("3x3, antiferromagnet", r#"{"size": 3}"#, r#"{"coupling": -1}"#, 0.3),
        system::<Square, Ising>("1x4, a period of one", r#"{"size": [1, 4]}"#, "{}", 0.3),
        system::<Triangular, Ising>(
            "triangular 3x3",
            r#"{"size": 3}"#,
            r#"{"coupling": {"first.x": 1, "first.xy": 0.5}}"#,
            0.2,
        ),
        system::<Cubic, Ising>("2x2x2, double bonds", r#"{"size": 2}"#, "{}", 0.1),
        system::<Chain, Ising>("ring of 5", r#"{"size": 5}"#, "{}", 0.4),
        system::<Chain, Ising>("ring of 4", r#"{"size": 4}"#, "{}", 0.4),
        system::<Square, Ising>("3x3, infinite temperature", r#"{"size": 3}"#, "{}", 0.0),
        system::<Square, Potts>("2x3, three colours", r#"{"size": [2, 3], "boundary": "free"}"#, r#"{"q": 3}"#, 0.6),
        system::<Square, Potts>(
            "2x2, four colours, rim",
            r#"{"size": 2, "boundary": ["plus", "minus"]}"#,
            r#"{"q": 4}"#,
            0.5,
        ),
    ]
}

/// Systems without.
pub(crate) fn others() -> Vec<System> {
    vec![
        system::<Square, Ising>("2x3, field", r#"{"size": [2, 3], "boundary": "free"}"#, r#"{"field": 0.3}"#, 0.35),
        system::<Chain, Ising>("one site, weak field", r#"{"size": 1, "boundary": "free"}"#, r#"{"field": 0.2}"#, 1.0),
        system::<Chain, Ising>(
            "one site, strong field",
            r#"{"size": 1, "boundary": "free"}"#,
            r#"{"field": 0.4}"#,
            1.0,
        ),
        system::<Square, Ising>("four rings of 2", r#"{"size": [2, 4]}"#, r#"{"coupling": {"first.y": 1}}"#, 0.4),
        system::<Square, Motley<0>>("motley, pairs", r#"{"size": [2, 3]}"#, "{}", 0.5),
        system::<Square, Motley<1>>("motley, factors", r#"{"size": [2, 3], "boundary": ["free", "plus"]}"#, "{}", 0.5),
        system::<Square, Motley<2>>("motley, callbacks", r#"{"size": [2, 3], "boundary": "free"}"#, "{}", 0.5),
        system::<Square, Motley<0>>("motley, folded", r#"{"size": [1, 4]}"#, "{}", 0.5),
    ]
}

/// Three states, pair tables that are not symmetric, site classes, strengths; with `MORE` = 1 many-body terms too, with 2 callbacks.
/// The numbers mean nothing; they only avoid accidental symmetries.
pub(crate) struct Motley<const MORE: u8>;

impl<const MORE: u8> Model for Motley<MORE> {
    const SPEC: ModelSpec =
        ModelSpec { name: "motley", states: 3, forms: &["pair", "factors", "custom"], ..ModelSpec::EMPTY };

    fn new(_: &Params) -> Result<Self> {
        Ok(Motley)
    }

    fn describe(&self, graph: &Graph<'_>, builder: &mut ModelBuilder) -> Result<()> {
        builder.spins(3, &[1.0, 0.0, -1.0], &[2, 1, 0], Some(0), Some(2));
        builder.pair(0, &[-1.0, 0.25, 0.5, 0.75, -0.5, 0.0, 1.0, -0.25, -0.75]);
        builder.pair(1, &[0.5, -0.25, 0.0, 0.25, 0.75, -1.0, -0.5, 0.25, 0.5]);
        let sites = graph.sites as u32;
        builder.site_classes(&(0..graph.sites).map(|s| (s % 2) as u16).collect::<Vec<_>>());
        builder.site(0, &[0.25, -0.25, 0.5]);
        builder.site(1, &[-0.5, 0.0, 0.25]);
        builder.bond_strengths(&(0..graph.bonds.len()).map(|b| [1.0, 0.5, -1.0][b % 3]).collect::<Vec<_>>());
        builder.site_strengths(&(0..graph.sites).map(|s| 1.0 + 0.5 * (s % 3) as f64).collect::<Vec<_>>());
        if MORE == 1 {
            let energies: Vec<f64> = (0..27).map(|k| f64::from(k * 7 % 11) / 8.0 - 0.5).collect();
            let table = builder.factor_table(3, &energies);
            builder.factors(table, &[0, 2, 3, sites - 1, 1, 0]);
        }
        if MORE == 2 {
            builder.custom();
        }
        Ok(())
    }

    fn footprint(&self, graph: &Graph<'_>, site: usize, sites: &mut Vec<u32>) {
        // Site 0 meets the last one.
        match site {
            0 => sites.push(graph.sites as u32 - 1),
            last if last == graph.sites - 1 => sites.push(0),
            _ => {}
        }
    }

    fn total(&self, graph: &Graph<'_>, view: &View<'_>) -> Result<f64> {
        Ok(meeting(view.state(0), view.state(graph.sites - 1)))
    }

    fn delta(
        &self,
        graph: &Graph<'_>,
        view: &View<'_>,
        sites: &[u32],
        proposals: &[u8],
        changes: &mut [f64],
    ) -> Result<()> {
        let last = graph.sites - 1;
        for ((site, proposal), change) in sites.iter().zip(proposals).zip(changes) {
            let (a, b) = (view.state(0), view.state(last));
            *change = match *site as usize {
                0 => meeting(*proposal, b) - meeting(a, b),
                s if s == last => meeting(a, *proposal) - meeting(a, b),
                _ => 0.0,
            };
        }
        Ok(())
    }
}

fn meeting(a: u8, b: u8) -> f64 {
    f64::from((3 * a + 2 * b) % 5) / 4.0 - 0.5
}
