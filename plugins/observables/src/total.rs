//! Energy of a configuration, by definition.

use spinledger_numerics::sum::sum_by;
use spinledger_sdk::{Energy, Error, Problem, Result, View};

/// Total energy of all forms, each by ordered sums. Cost: one pass over bonds, sites and many-body terms.
///
/// # Errors
/// Where the view shows vectors for discrete spins or the other way round, and what callbacks of the model say.
pub(crate) fn total(problem: &Problem<'_>, view: &View<'_>) -> Result<f64> {
    let vectors = matches!(view, View::Vectors { .. });
    if vectors != (problem.energy.states == 0) {
        return Err(Error::new("the configuration does not fit the model's spins"));
    }
    let mut total = if vectors { of_vectors(problem, view) } else { of_states(problem, view) };
    if let Some(custom) = &problem.energy.custom {
        total += custom.total(view)?;
    }
    Ok(total)
}

fn of_states(problem: &Problem<'_>, view: &View<'_>) -> f64 {
    let (graph, energy) = (&problem.graph, &problem.energy);
    let q = energy.states;
    let state = |site: u32| view.state(site as usize) as usize;
    let mut total = 0.0;
    if !energy.pair_tables.is_empty() {
        total += sum_by(graph.bonds.len(), |number| {
            let bond = graph.bonds[number];
            let pair = energy.bond_tables[number] as usize * q * q + state(bond.i) * q + state(bond.j);
            one_or(energy.bond_strengths, number) * energy.pair_tables[pair]
        });
    }
    if !energy.site_tables.is_empty() {
        total += sum_by(graph.sites, |site| {
            one_or(energy.site_strengths, site)
                * energy.site_tables[energy.site_class[site] as usize * q + state(site as u32)]
        });
    }
    total
        + sum_by(energy.factors.len(), |number| {
            let factor = energy.factors[number];
            let table = energy.factor_tables[factor.table as usize];
            let sites = &energy.factor_sites[factor.first as usize..][..table.order];
            table.energies[sites.iter().fold(0, |index, site| index * q + state(*site))]
        })
}

fn of_vectors(problem: &Problem<'_>, view: &View<'_>) -> f64 {
    let (graph, energy) = (&problem.graph, &problem.energy);
    let n = energy.components;
    // u^T M v over the components of two sites.
    let form = |matrix: &[f64], i: usize, j: usize| {
        let row = |a: usize| (0..n).map(|b| matrix[a * n + b] * view.component(j, b)).sum::<f64>();
        (0..n).map(|a| view.component(i, a) * row(a)).sum::<f64>()
    };
    let mut total = 0.0;
    if !energy.couplings.is_empty() {
        total += sum_by(graph.bonds.len(), |number| {
            let bond = graph.bonds[number];
            let matrix = &energy.couplings[energy.bond_tables[number] as usize * n * n..][..n * n];
            one_or(energy.bond_strengths, number) * form(matrix, bond.i as usize, bond.j as usize)
        });
    }
    total += sum_by(graph.sites, |site| one_or(energy.site_strengths, site) * alone(energy, site, view, form));
    total
}

/// Energy of one vector by itself: anisotropy and field.
fn alone(energy: &Energy<'_>, site: usize, view: &View<'_>, form: impl Fn(&[f64], usize, usize) -> f64) -> f64 {
    let n = energy.components;
    let class = energy.site_class.get(site).map_or(0, |class| *class as usize);
    let mut own = 0.0;
    if !energy.anisotropies.is_empty() {
        own += form(&energy.anisotropies[class * n * n..][..n * n], site, site);
    }
    if !energy.fields.is_empty() {
        own += (0..n).map(|c| energy.fields[class * n + c] * view.component(site, c)).sum::<f64>();
    }
    own
}

/// A strength; without a list all are 1.
fn one_or(strengths: &[f64], number: usize) -> f64 {
    strengths.get(number).copied().unwrap_or(1.0)
}
