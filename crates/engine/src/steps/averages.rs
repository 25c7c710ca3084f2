//! `averages`: means and derived quantities of a point, with errors that know about autocorrelation, and whether the chains have
//! forgotten where they began.

pub(crate) mod family;
mod table;

use super::settled::{self, Chains};
use super::{Checked, Output, Split, StepError, StepKind, Task, as_is};
use family::{Facts, Member, Quantity, families};
use spinledger_stats::autocorrelation::AutocorrelationParams;
use spinledger_stats::equilibration::{EquilibrationInfo, Verdict};
use spinledger_terms::{Field, Kind, Problem, StepSpec};
use table::Row;

/// The kind.
pub(super) const KIND: StepKind =
    StepKind { does: "averages", revision: 3, split: Split::Points, spec, check, complete: as_is, analyse };

/// Fewer independent measurements than this are flagged: an error estimated from 50 is itself uncertain by a tenth (common practice).
const FEW: f64 = 50.0;

fn spec() -> StepSpec {
    StepSpec {
        does: "averages".into(),
        about: "means, errors, autocorrelation times and derived quantities of each point".into(),
        fields: vec![Field::new("of", Kind::Step {}, "the sample step").required()],
        scan: None,
    }
}

fn check(step: &Checked<'_>, problems: &mut Vec<Problem>) {
    super::must_be_of(step, "of", &["sample"], problems);
}

fn analyse(task: &Task<'_>) -> Result<Output, StepError> {
    let series = task.series.first().ok_or_else(|| StepError("there is no series".into()))?;
    let reader = task.read(series);
    let facts = Facts {
        sites: series.facts.sites as f64,
        inverse: series.facts.thermal_energy.map_or(0.0, |t| 1.0 / t),
        every: series.facts.every as f64,
    };
    let families = families(&series.facts.observed);
    let discarded = settled::discarded(&reader)?;
    (task.progress)();
    let mut rows: Vec<Row> = Vec::new();
    let mut correlations = table::Correlations::default();
    let mut unsettled = discarded.at_limit;
    for family in &families {
        let mut chains = Chains::read(&reader, &family.column, discarded.rows)?;
        let mut members: Vec<(&Member, Quantity)> = Vec::new();
        let signed: Vec<&Member> = family.members.iter().filter(|m| m.signed).collect();
        let unsigned: Vec<&Member> = family.members.iter().filter(|m| !m.signed).collect();
        // The symmetry makes the mean of the magnetisation zero. Chains that never turn over may agree on another by chance.
        let stuck = family.signed_by_symmetry && chains.reversals() < FEW as usize;
        for member in signed {
            members.push((member, family::estimate(&chains, member, &facts)));
        }
        let mut verdict: Option<EquilibrationInfo> = None;
        if let Some(invariant) = family.invariant {
            chains.apply(invariant);
            let info = settled::test(&chains, 1);
            if family.decides {
                unsettled |= info.equilibrated() == Some(false);
            }
            verdict = Some(info);
            let own =
                spinledger_stats::autocorrelation::autocorrelation(&chains.slices(), &AutocorrelationParams::default());
            if let Ok(own) = own {
                correlations.push(&family.correlation, &own, series.facts.every);
            }
        }
        for member in unsigned {
            members.push((member, family::estimate(&chains, member, &facts)));
        }
        for (member, quantity) in members {
            let mut flags = Vec::new();
            if member.signed && stuck {
                flags.push("few-samples");
            }
            if !member.signed && matches!(verdict.map(|v| v.verdict), Some(Verdict::TooShort { .. })) {
                flags.push("few-samples");
            }
            match &quantity {
                Quantity::Found(found) => {
                    if !found.closed || found.effective.is_some_and(|n| n < FEW) {
                        flags.push("few-samples");
                    }
                }
                Quantity::NotFinite => flags.push("not-finite"),
                Quantity::TooShort => flags.push("few-samples"),
            }
            let verdict = verdict.filter(|_| !member.signed);
            rows.push(Row { member: member.clone(), quantity, verdict, flags });
        }
        (task.progress)();
    }
    if unsettled {
        rows.iter_mut().for_each(|row| row.flags.push("not-equilibrated"));
    }
    rows.sort_by_key(|row| row.member.rank);
    Ok(vec![
        ("main".into(), table::main(&rows)),
        ("wide".into(), table::wide(&rows, &series.facts.energy_unit)),
        ("autocorrelation".into(), correlations.table()),
    ]
    .into())
}
