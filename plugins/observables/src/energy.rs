//! Energy per site.

use spinledger_sdk::{
    Column, ColumnInfo, Host, Observable, ObservableInstance, ObservableSpec, Params, Problem, Result, Tallies, View,
    views,
};

const COLUMN: Column = Column { name: "energy", unit: "energy", invariant: true, about: "energy per free site" };

/// The observable `energy`.
#[derive(Debug)]
pub(crate) struct EnergyPerSite;

impl Observable for EnergyPerSite {
    const SPEC: ObservableSpec = ObservableSpec {
        name: "energy",
        about: "energy per site, bonds to pinned sites and fields included",
        formula: "energy = E/N",
        columns: &[COLUMN],
        // Mostly read from totals: a configuration that is not looked at should not be unpacked.
        views: views::ANY,
        ..ObservableSpec::EMPTY
    };
    type Instance<'a> = Instance<'a>;

    fn new(_: &Params) -> Result<Self> {
        Ok(EnergyPerSite)
    }

    fn prepare<'a>(&'a self, _: Host<'a>, problem: Problem<'a>) -> Result<Self::Instance<'a>> {
        Ok(Instance(problem))
    }
}

/// On a graph.
pub(crate) struct Instance<'a>(Problem<'a>);

impl ObservableInstance for Instance<'_> {
    fn columns(&self) -> Vec<ColumnInfo> {
        vec![ColumnInfo { name: COLUMN.name.into(), unit: COLUMN.unit.into(), invariant: COLUMN.invariant, width: 1 }]
    }

    fn measure(&mut self, views: &[View<'_>], tallies: &[Tallies], values: &mut [f64]) -> Result<()> {
        let energy = match tallies[0].energy {
            Some(energy) => energy,
            None => self.0.total(&views[0])?,
        };
        values[0] = energy / self.0.graph.sites as f64;
        Ok(())
    }
}
