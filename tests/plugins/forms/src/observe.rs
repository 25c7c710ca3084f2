//! Observables of one chain and of two.

use spinledger_sdk::{
    Column, ColumnInfo, Host, Observable, ObservableInstance, ObservableSpec, Params, Problem, Result, Tallies, View,
};
use std::sync::Mutex;

/// Sites of a tile.
const TILE: usize = 10;

/// What is compared or averaged: the value of a state, or the components of a vector.
pub struct Reader<'a> {
    host: Host<'a>,
    problem: Problem<'a>,
    name: &'static str,
}

impl Reader<'_> {
    fn spin(&self, view: &View<'_>, site: usize) -> [f64; 3] {
        let energy = &self.problem.energy;
        match energy.components {
            0 => [energy.values.get(usize::from(view.state(site))).copied().unwrap_or(0.0), 0.0, 0.0],
            n => std::array::from_fn(|c| if c < n { view.component(site, c) } else { 0.0 }),
        }
    }
}

impl ObservableInstance for Reader<'_> {
    fn columns(&self) -> Vec<ColumnInfo> {
        vec![ColumnInfo { name: self.name.into(), unit: String::new(), invariant: false, width: 1 }]
    }

    /// Of one chain the mean (of the first component), of two the overlap, per free site.
    fn measure(&mut self, views: &[View<'_>], _: &[Tallies], values: &mut [f64]) -> Result<()> {
        let sites = self.problem.graph.sites;
        let one = |s: usize| match views {
            [one] => self.spin(one, s)[0],
            [a, b] => dot(self.spin(a, s), self.spin(b, s)),
            _ => 0.0,
        };
        // Tiles of a fixed size, and their sums added in order: the same bits with any number of threads.
        let sums: Vec<Mutex<f64>> = (0..sites.div_ceil(TILE)).map(|_| Mutex::new(0.0)).collect();
        self.host.parallel_for(sums.len(), |tile| {
            let sum = (tile * TILE..sites.min((tile + 1) * TILE)).map(one).sum();
            *sums[tile].lock().expect("nobody panics with it") = sum;
        });
        let sum: f64 = sums.into_iter().map(|sum| sum.into_inner().expect("nobody panics with it")).sum();
        values[0] = sum / sites as f64;
        Ok(())
    }
}

fn dot(a: [f64; 3], b: [f64; 3]) -> f64 {
    a.iter().zip(b).map(|(x, y)| x * y).sum()
}

macro_rules! reader {
    ($($observable:ident, $name:literal, $column:literal, $chains:literal;)*) => {$(
        /// Reads chains.
        pub struct $observable;

        impl Observable for $observable {
            const SPEC: ObservableSpec = ObservableSpec {
                name: $name,
                about: "For tests.",
                needs: &["scalar|vectors"],
                chains: $chains,
                columns: &[Column { name: $column, unit: "", invariant: false, about: "Per free site." }],
                ..ObservableSpec::EMPTY
            };
            type Instance<'a> = Reader<'a>;

            fn new(_: &Params) -> Result<Self> {
                Ok($observable)
            }

            fn prepare<'a>(&'a self, host: Host<'a>, problem: Problem<'a>) -> Result<Reader<'a>> {
                host.log(concat!($name, " is prepared"));
                Ok(Reader { host, problem, name: $column })
            }
        }
    )*};
}

reader! {
    Mean, "probe-mean", "probe_mean", 1;
    Overlap, "probe-overlap", "probe_overlap", 2;
}
