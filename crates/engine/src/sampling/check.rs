//! Whether energies are what they should be, at each block's end.

use super::course::Course;
use crate::failure::Failure;
use crate::loaded::Problem;
use spinledger_host::{energy_scale, energy_total};
use spinledger_ledger::BlockData;

/// How far a tracked energy may be from a recomputation, in parts of the sum of the largest absolute values of all terms: rounding
/// errors of 10^12 additions stay below it, and a wrong energy change of a single spin in 10^8 does not.
const TOLERANCE: f64 = 1e-9;

/// The energy that the rule tracks against a recomputation.
pub(super) fn tracked(course: &mut Course<'_>, problem: &Problem, lane: usize) -> Result<(), Failure> {
    energy(course, problem, lane, &BlockData::default())
}

/// The energy that the rule tracks, and the one just recorded, if any, against a recomputation.
pub(super) fn energy(course: &mut Course<'_>, problem: &Problem, lane: usize, data: &BlockData) -> Result<(), Failure> {
    let swept = course.swept();
    let configuration = course.holder().export(lane)?;
    let tracked = course.holder().tallies(lane)?.energy;
    let energy = energy_total(&problem.graph, &problem.energy, &configuration)?;
    let scale = energy_scale(&problem.energy, &problem.graph).max(energy.abs());
    let off = |found: f64| (found - energy).abs() > TOLERANCE * scale || found.is_nan();
    if let Some(tracked) = tracked
        && off(tracked)
    {
        let rule = course.holder_name();
        return Err(Failure::Broken(format!(
            "after {swept} sweeps the rule `{rule}` tracks a total energy of {tracked}, recomputed it is {energy}: the \
             rule's or the model's change of energy is wrong"
        )));
    }
    let observe = &course.point().dynamics.observe;
    let standard = observe.iter().any(|o| o.identity.standard && o.identity.item == "energy");
    let column = data.columns.iter().find(|c| standard && c.name == "energy");
    if let Some(recorded) = column.and_then(|c| c.values.last()) {
        let sites = problem.graph.sites as f64;
        if off(recorded * sites) {
            return Err(Failure::Broken(format!(
                "after {swept} sweeps an energy of {recorded} per site was recorded, recomputed it is {}",
                energy / sites
            )));
        }
    }
    Ok(())
}
