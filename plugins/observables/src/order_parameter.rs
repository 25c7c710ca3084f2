//! Order parameter of the Potts model.

use spinledger_sdk::{
    Column, ColumnInfo, Error, Host, Observable, ObservableInstance, ObservableSpec, Params, Problem, Result, Tallies,
    View,
};

const COLUMNS: [Column; 2] = [
    Column {
        name: "order",
        unit: "",
        invariant: true,
        about: "(q max rho - 1)/(q - 1), rho the shares of the colours: 0 where all are equal, 1 where one has all",
    },
    Column {
        name: "order_squared",
        unit: "",
        invariant: true,
        about: "(q sum rho^2 - 1)/(q - 1), the squared length of the (q - 1)-component order parameter",
    },
];

/// The observable `order-parameter`.
#[derive(Debug)]
pub(crate) struct OrderParameter;

impl Observable for OrderParameter {
    const SPEC: ObservableSpec = ObservableSpec {
        name: "order-parameter",
        about: "order parameter of Potts colours, from the share of free sites in each",
        formula: "order = (q max rho - 1)/(q - 1), order_squared = (q sum rho^2 - 1)/(q - 1)",
        source: "Wu 1982 Rev. Mod. Phys. 54 235",
        needs: &["colours"],
        columns: &COLUMNS,
        ..ObservableSpec::EMPTY
    };
    type Instance<'a> = Instance;

    fn new(_: &Params) -> Result<Self> {
        Ok(OrderParameter)
    }

    fn prepare<'a>(&'a self, _: Host<'a>, problem: Problem<'a>) -> Result<Self::Instance<'a>> {
        if problem.energy.states < 2 {
            return Err(Error::new("the order parameter of colours needs discrete spins"));
        }
        Ok(Instance { sites: problem.graph.sites, counts: vec![0; problem.energy.states] })
    }
}

/// On a graph.
pub(crate) struct Instance {
    sites: usize,
    /// Free sites in each colour, at the last measurement.
    counts: Vec<u64>,
}

impl ObservableInstance for Instance {
    fn columns(&self) -> Vec<ColumnInfo> {
        let info =
            |c: &Column| ColumnInfo { name: c.name.into(), unit: c.unit.into(), invariant: c.invariant, width: 1 };
        COLUMNS.iter().map(info).collect()
    }

    fn measure(&mut self, views: &[View<'_>], _: &[Tallies], values: &mut [f64]) -> Result<()> {
        if matches!(views[0], View::Vectors { .. }) {
            return Err(Error::new("the configuration does not fit the model's spins"));
        }
        self.counts.fill(0);
        (0..self.sites).for_each(|site| self.counts[views[0].state(site) as usize] += 1);
        let (q, n) = (self.counts.len() as f64, self.sites as f64);
        // In whole numbers as far as possible, so that equal configurations up to colours give equal bits.
        let most = self.counts.iter().copied().max().unwrap_or(0) as f64;
        let squares = self.counts.iter().map(|c| c * c).sum::<u64>() as f64;
        values[0] = (q * most / n - 1.0) / (q - 1.0);
        values[1] = (q * squares / (n * n) - 1.0) / (q - 1.0);
        Ok(())
    }
}
