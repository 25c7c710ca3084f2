//! Magnetisation per site, of scalar and of vector spins.

use spinledger_numerics::sum::sum_by;
use spinledger_sdk::{
    ColumnInfo, Error, Host, Observable, ObservableInstance, ObservableSpec, Params, Problem, Result, Tallies, View,
    views,
};

/// Columns of the components of vector spins.
const COMPONENTS: [&str; 3] = ["magnetisation_x", "magnetisation_y", "magnetisation_z"];

/// The observable `magnetisation`.
#[derive(Debug)]
pub(crate) struct Magnetisation;

impl Observable for Magnetisation {
    const SPEC: ObservableSpec = ObservableSpec {
        name: "magnetisation",
        about: "magnetisation per site: signed for scalar spins; components and length for vector spins",
        formula: "scalar spins: magnetisation = m = sum s/N; vector spins: magnetisation_x, _y, _z = components of m = sum S/N, \
                  magnetisation = |m|",
        needs: &["scalar|vectors"],
        // Mostly read from totals: a configuration that is not looked at should not be unpacked.
        views: views::ANY,
        // No columns are listed, since they depend on the model.
        ..ObservableSpec::EMPTY
    };
    type Instance<'a> = Instance<'a>;

    fn new(_: &Params) -> Result<Self> {
        Ok(Magnetisation)
    }

    fn prepare<'a>(&'a self, _: Host<'a>, problem: Problem<'a>) -> Result<Self::Instance<'a>> {
        let energy = &problem.energy;
        if energy.components > COMPONENTS.len() || (energy.components == 0 && energy.values.is_empty()) {
            return Err(Error::new("the states of this model carry no spin values, so that there is no magnetisation"));
        }
        Ok(Instance { sites: problem.graph.sites, values: energy.values, components: energy.components })
    }
}

/// On a graph.
pub(crate) struct Instance<'a> {
    sites: usize,
    values: &'a [f64],
    /// 0 for scalar spins.
    components: usize,
}

impl Instance<'_> {
    /// Sum of spins over free sites.
    fn sum(&self, view: &View<'_>) -> Result<[f64; 3]> {
        let mut sum = [0.0; 3];
        match (view, self.components) {
            (View::Vectors { .. }, 0) | (View::Bytes { .. } | View::Bits { .. }, 1..) => {
                return Err(Error::new("the configuration does not fit the model's spins"));
            }
            (_, 0) => {
                // Whole numbers times values, in order of states: exact for the usual values, whatever the order of sites.
                let mut counts = vec![0_u64; self.values.len()];
                (0..self.sites).for_each(|site| counts[view.state(site) as usize] += 1);
                sum[0] = counts.iter().zip(self.values).map(|(count, value)| *count as f64 * value).sum();
            }
            (_, components) => {
                for (c, sum) in sum.iter_mut().enumerate().take(components) {
                    *sum = sum_by(self.sites, |site| view.component(site, c));
                }
            }
        }
        Ok(sum)
    }
}

impl ObservableInstance for Instance<'_> {
    fn columns(&self) -> Vec<ColumnInfo> {
        let column = |name: &str, invariant| ColumnInfo { name: name.into(), unit: String::new(), invariant, width: 1 };
        let mut columns: Vec<ColumnInfo> =
            COMPONENTS[..self.components].iter().map(|name| column(name, false)).collect();
        // The sign of scalar spins turns under inversion; the length of vectors does not turn with them.
        columns.push(column("magnetisation", self.components > 0));
        columns
    }

    fn measure(&mut self, views: &[View<'_>], tallies: &[Tallies], values: &mut [f64]) -> Result<()> {
        let sum = match tallies[0].magnetisation {
            Some(sum) => sum,
            None => self.sum(&views[0])?,
        };
        let mean = sum.map(|component| component / self.sites as f64);
        if self.components == 0 {
            values[0] = mean[0];
            return Ok(());
        }
        let mean = &mean[..self.components];
        values[..self.components].copy_from_slice(mean);
        values[self.components] = mean.iter().map(|component| component * component).sum::<f64>().sqrt();
        Ok(())
    }
}
