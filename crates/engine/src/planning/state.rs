//! Parcels of one kept configuration: which it is, and what their keys see of it.

use super::Series;
use crate::job::StateInput;
use crate::steps::StepKind;
use crate::steps::picture::{Seen, chosen, describe};
use crate::steps::sample::{shown_as, states_of};
use crate::study::Study;
use spinledger_plan::analysis::{self, InputRef};
use spinledger_terms::{ItemKind, Value};

/// The preimage, the completed parameters and the configuration of a parcel.
type Found = (String, Value, Option<StateInput>);

/// Finds the configuration among those of the points. The key sees its content, lattice and model, and nothing of the series around it.
///
/// # Errors
/// In words, with what there is, where exactly one is not meant.
pub(super) fn of_state(
    study: &Study,
    kind: &StepKind,
    role: &str,
    mut parameters: Value,
    points: &[&Series],
) -> Result<Found, String> {
    let columns: Vec<Vec<(String, Value)>> = points
        .iter()
        .map(|series| series.columns.iter().map(|(name, _, value)| (name.clone(), value.clone())).collect())
        .collect();
    let seen = |at: usize| {
        let starts = points[at].point.starts();
        let of = |k: &spinledger_plan::states::Kept| Seen {
            start: starts.get(k.start).cloned().unwrap_or_default(),
            chain: k.chain,
            sweep: k.sweep,
        };
        points[at].kept.iter().map(of).collect::<Vec<_>>()
    };
    let (at, number) = chosen(&parameters, &columns, &seen)?;
    let (series, kept) = (points[at], &points[at].kept[number]);
    let dynamics = &series.point.dynamics;
    let mut words: Vec<String> = series
        .columns
        .iter()
        .filter(|(name, _, _)| name != "sites" && !name.starts_with("size_"))
        .map(|(name, unit, value)| {
            let value = value.as_str().map_or_else(|| value.canonical(), str::to_owned);
            format!("{name} {value} {unit}").trim_end().to_owned()
        })
        .collect();
    let starts = series.point.starts();
    let start = if starts.len() > 1 { format!("{} ", starts[kept.start]) } else { String::new() };
    words.push(format!("{start}chain {}", kept.chain));
    words.push(format!("sweep {}", kept.sweep));
    if let Some(layer) = parameters.get("layer").and_then(Value::as_i64).filter(|layer| *layer != 0) {
        words.push(format!("layer {layer}"));
    }
    let state = StateInput {
        role: role.to_owned(),
        key: kept.key,
        content: kept.content,
        lattice: dynamics.lattice.clone(),
        model: dynamics.model.clone(),
        words: words.join(", "),
    };
    let model = study.vocabulary.item(ItemKind::Model, &dynamics.model.identity.item).map(|(_, item)| item);
    let of_model = Some(&dynamics.model.parameters);
    let shown = model.map_or("states", |model| shown_as(model, of_model));
    let states = model.and_then(|model| states_of(model.model.as_ref()?, of_model));
    describe(&mut parameters, &state, (shown, states));
    let facts = Value::map([("lattice", state.lattice.key_value()), ("model", state.model.key_value())]);
    let input = InputRef { role: state.role.clone(), key: state.key, content: state.content };
    // How it was asked for does not matter.
    let mut shown = parameters.clone();
    if let Value::Map(map) = &mut shown {
        map.retain(|name, _| !["where", "start", "chain", "sweep"].contains(&name.as_str()));
    }
    let preimage = analysis::preimage(kind.does, kind.revision, &shown, &facts, &[input]);
    Ok((preimage, parameters, Some(state)))
}
