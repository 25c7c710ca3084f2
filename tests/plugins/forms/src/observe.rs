//! Observables of one chain and of two.

use spinledger_sdk::{
    Column, ColumnInfo, Host, Observable, ObservableInstance, ObservableSpec, Params, Problem, Result, Tallies, View,
};

/// What is compared or averaged: the value of a state, or the components of a vector.
pub struct Reader<'a> {
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
        let sum: f64 = match views {
            [one] => (0..sites).map(|s| self.spin(one, s)[0]).sum(),
            [a, b] => (0..sites).map(|s| dot(self.spin(a, s), self.spin(b, s))).sum(),
            _ => 0.0,
        };
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

            fn prepare<'a>(&'a self, _: Host<'a>, problem: Problem<'a>) -> Result<Reader<'a>> {
                Ok(Reader { problem, name: $column })
            }
        }
    )*};
}

reader! {
    Mean, "probe-mean", "probe_mean", 1;
    Overlap, "probe-overlap", "probe_overlap", 2;
}
