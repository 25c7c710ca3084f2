//! Configurations as tables, and back: one row for each free site, with its spin as observables see it.

use crate::loaded::Problem;
use spinledger_host::{Configuration, Energy};
use spinledger_terms::{Cells, Column, Table};

/// Names of a vector's components.
const COMPONENTS: [&str; 3] = ["x", "y", "z"];

/// The spin value of each state, by which the states can be told apart; None where the model has none, or two states share one: there states stand in
/// tables by number.
pub(crate) fn spin_values(energy: &Energy) -> Option<&[f64]> {
    let values = energy.values.as_slice();
    let told_apart = values.iter().enumerate().all(|(i, a)| values[..i].iter().all(|b| a != b));
    (!values.is_empty() && values.len() == energy.states && told_apart).then_some(values)
}

/// The table of a configuration: `site`, and `value` (the spin value, or the number of the state), or the vector's components.
pub(crate) fn table(configuration: &Configuration, problem: &Problem) -> Table {
    let (sites, energy) = (problem.graph.sites, &problem.energy);
    let mut columns = vec![Column::integers("site", "", (0..sites).map(|site| Some(site as i64)).collect())];
    match configuration {
        Configuration::States(states) => {
            let values = spin_values(energy);
            let of = |state: &u8| values.map_or(f64::from(*state), |values| values[usize::from(*state)]);
            columns.push(Column::numbers("value", "", states[..sites].iter().map(|state| Some(of(state))).collect()));
        }
        Configuration::Vectors(vectors) => {
            let n = energy.components.max(1);
            for (k, name) in COMPONENTS.iter().enumerate().take(n) {
                let component = vectors.iter().skip(k).step_by(n).take(sites).map(|x| Some(*x));
                columns.push(Column::numbers(name, "", component.collect()));
            }
        }
    }
    Table { columns }
}

/// The configuration of a table, with the model's pinned spins behind the free ones.
///
/// # Errors
/// In words, where it does not fit the lattice or the model.
pub(crate) fn configuration(table: &Table, problem: &Problem) -> Result<Configuration, String> {
    let (sites, energy) = (problem.graph.sites, &problem.energy);
    if table.rows() != sites {
        return Err(format!("it has {} sites, and the lattice here has {sites}", table.rows()));
    }
    let numbers = |column: &Column| match &column.cells {
        Cells::Number(cells) => cells.iter().copied().collect::<Option<Vec<f64>>>(),
        _ => None,
    };
    let of: Vec<Vec<f64>> = table
        .columns
        .iter()
        .skip(1)
        .map(|column| numbers(column).ok_or_else(|| format!("a number is missing in its column `{}`", column.name)))
        .collect::<Result<_, _>>()?;
    let has_states = table.column("value").is_some();
    let free = match (energy.components, has_states) {
        (0, true) => {
            let values = spin_values(energy);
            let state_of = |value: f64| match values {
                Some(values) => values.iter().position(|v| *v == value),
                None => Some(value as usize).filter(|n| value >= 0.0 && *n as f64 == value && *n < energy.states),
            };
            let refuse = |site: usize, value: f64| match values {
                Some(values) => {
                    let known: Vec<String> = values.iter().map(f64::to_string).collect();
                    format!("site {site} has the spin value {value}, and the model here has: {}", known.join(", "))
                }
                None => format!("site {site} has state {value}, and the model here has {}", energy.states),
            };
            let state = |(site, value): (usize, &f64)| state_of(*value).map(|n| n as u8).ok_or(refuse(site, *value));
            Configuration::States(of[0].iter().enumerate().map(state).collect::<Result<_, _>>()?)
        }
        (0, false) => return Err("it holds vectors, and the spins of the model here are states".into()),
        (_, true) => return Err("it holds states, and the spins of the model here are vectors".into()),
        (n, false) if of.len() != n => {
            return Err(format!("its vectors have {} components, and those of the model here {n}", of.len()));
        }
        (n, false) => Configuration::Vectors((0..sites * n).map(|k| of[k % n][k / n]).collect()),
    };
    Ok(Configuration::with_rim(free, energy))
}
