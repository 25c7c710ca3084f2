//! Configurations of an earlier step that chains begin from: which point of it, and which chain for which.

use super::columns::add_size;
use super::{Product, Products, Series, Unplanned};
use crate::steps::sample::{StartStep, start_step, states_of};
use spinledger_pipeline::{Pipeline, Point};
use spinledger_plan::dynamics::Dynamics;
use spinledger_plan::states::StateRef;
use spinledger_terms::{ItemKind, Value, Vocabulary};
use std::collections::BTreeMap;

/// Columns that need not agree: chains may begin at another temperature, and anywhere in a sequence.
const FREE: [&str; 3] = ["temperature", "inverse_temperature", "position"];

/// A point, as far as it matters which begins from which.
pub(crate) struct Place {
    /// Scan columns, with `size` and `temperature` where they are not scanned.
    pub(crate) columns: Vec<(String, Value)>,
    lattice: String,
    states: Option<u64>,
}

impl Place {
    /// Of a point of a checked sample step.
    pub(crate) fn of(point: &Point, pipeline: &Pipeline, vocabulary: &Vocabulary) -> Option<Place> {
        let body = point.body();
        let dynamics = Dynamics::of(&body, pipeline.seed, &pipeline.units, vocabulary)?;
        let mut columns = point.columns.clone();
        add_size(&mut columns, &body, vocabulary);
        Some(Place::new(columns, &dynamics, vocabulary))
    }

    fn new(mut columns: Vec<(String, Value)>, dynamics: &Dynamics, vocabulary: &Vocabulary) -> Self {
        if columns.iter().all(|(name, _)| name != "temperature") {
            columns.push(("temperature".into(), Value::Number(dynamics.temperature)));
        }
        let model = &dynamics.model;
        let item = vocabulary.item(ItemKind::Model, &model.identity.item);
        let states = item.and_then(|(_, item)| states_of(item.model.as_ref()?, Some(&model.parameters)));
        Place { columns, lattice: dynamics.lattice.identity.item.clone(), states }
    }

    fn column(&self, name: &str) -> Option<&Value> {
        self.columns.iter().find(|(column, _)| column == name).map(|(_, value)| value)
    }
}

/// The place that chains at `own` begin from, as an index into `places`, those of the step named: the one that agrees in the columns of `where` and in
/// all columns that both have, but for the temperature; where several do, the one among them of the same temperature.
///
/// # Errors
/// In words, where none or several are left, or the one has another lattice or other states.
pub(crate) fn choose(start: &StartStep, places: &[Place], own: &Place) -> Result<usize, String> {
    let step = &start.step;
    for name in start.filter.keys() {
        if let Some(place) = places.iter().find(|place| place.column(name).is_none()) {
            let known: Vec<&str> = place.columns.iter().map(|(name, _)| name.as_str()).collect();
            return Err(format!("`{step}` has no column `{name}`; it has: {}", known.join(", ")));
        }
    }
    let filtered: Vec<usize> = (0..places.len())
        .filter(|at| {
            start.filter.iter().all(|(name, wanted)| places[*at].column(name).is_some_and(|v| same(v, wanted)))
        })
        .collect();
    let agrees = |at: usize, name: &str| match (places[at].column(name), own.column(name)) {
        (Some(theirs), Some(mine)) => same(theirs, mine),
        _ => true,
    };
    let shared: Vec<&str> = own
        .columns
        .iter()
        .map(|(name, _)| name.as_str())
        .filter(|name| !FREE.contains(name) && !start.filter.contains_key(*name))
        .filter(|name| places.iter().any(|place| place.column(name).is_some()))
        .collect();
    let fit: Vec<usize> = filtered.into_iter().filter(|at| shared.iter().all(|name| agrees(*at, name))).collect();
    let of = |names: &[&str]| {
        let words = names.iter().filter_map(|name| Some(format!("{name} {}", words(own.column(name)?))));
        words.collect::<Vec<_>>().join(", ")
    };
    let found = match fit.as_slice() {
        [one] => *one,
        [] => {
            let filter = start.filter.iter().map(|(name, value)| format!("{name} {}", words(value)));
            let wanted: Vec<String> =
                Some(of(&shared)).filter(|text| !text.is_empty()).into_iter().chain(filter).collect();
            return Err(format!("`{step}` has no point with {}", wanted.join(", ")));
        }
        several => {
            let here: Vec<usize> = several.iter().copied().filter(|at| agrees(*at, "temperature")).collect();
            match here.as_slice() {
                [one] => *one,
                _ => {
                    let left = if here.is_empty() { several } else { &here };
                    return Err(ambiguous(step, &of(&shared), places, left));
                }
            }
        }
    };
    let (theirs, mine) = (&places[found], own);
    if theirs.lattice != mine.lattice {
        return Err(format!("the lattice of `{step}` is {}, and here it is {}", theirs.lattice, mine.lattice));
    }
    if let (Some(a), Some(b)) = (theirs.states, mine.states)
        && a != b
    {
        return Err(format!("the spins of `{step}` have {a} states, and here they have {b}"));
    }
    Ok(found)
}

/// Says in which columns the places that are left differ.
fn ambiguous(step: &str, shared: &str, places: &[Place], left: &[usize]) -> String {
    let with = if shared.is_empty() { String::new() } else { format!(" with {shared}") };
    let count = left.len();
    let left: Vec<&[(String, Value)]> = left.iter().map(|at| places[*at].columns.as_slice()).collect();
    let differ = differing(&left);
    format!("{count} points of `{step}`{with} could be meant; name one with `where`: they differ in {differ}")
}

/// The columns in which points differ, with their values, the first of them where there are many.
pub(crate) fn differing(points: &[&[(String, Value)]]) -> String {
    const MOST: usize = 8;
    let mut differ = Vec::new();
    for (name, _) in points.first().copied().unwrap_or_default() {
        let mut values: Vec<String> = Vec::new();
        for columns in points {
            let value = columns.iter().find(|(column, _)| column == name).map_or_else(String::new, |(_, v)| words(v));
            if !values.contains(&value) {
                values.push(value);
            }
        }
        if values.len() > 1 {
            let more = if values.len() > MOST { " ..." } else { "" };
            values.truncate(MOST);
            differ.push(format!("`{name}` ({}{more})", values.join(", ")));
        }
    }
    if differ.is_empty() { "nothing".to_owned() } else { differ.join(", ") }
}

fn words(value: &Value) -> String {
    value.as_str().map_or_else(|| value.canonical(), str::to_owned)
}

/// Whether two cells are equal, whole numbers and doubles of one value included.
pub(crate) fn same(a: &Value, b: &Value) -> bool {
    a == b || (a.as_f64().is_some() && a.as_f64() == b.as_f64())
}

/// The points that a sample step's chains may begin from, for one planning.
pub(super) struct Sources<'a> {
    vocabulary: &'a Vocabulary,
    products: &'a Products,
    known: BTreeMap<String, (Vec<Place>, Vec<&'a Series>)>,
}

impl<'a> Sources<'a> {
    pub(super) fn new(vocabulary: &'a Vocabulary, products: &'a Products) -> Self {
        Sources { vocabulary, products, known: BTreeMap::new() }
    }

    /// The configurations that the chains of a point begin from, where it begins from an earlier step's: the last one of each chain there.
    pub(super) fn states(
        &mut self,
        body: &Value,
        columns: &[(String, Value)],
        dynamics: &Dynamics,
    ) -> Result<Option<Vec<StateRef>>, Unplanned> {
        let Some(start) = start_step(body) else { return Ok(None) };
        if !self.known.contains_key(&start.step) {
            let waits = || Unplanned::Waits(vec![start.step.clone()]);
            let Some(Product::Series(series)) = self.products.get(&start.step) else { return Err(waits()) };
            // Which of the points is meant is known only when all are there.
            let series: Vec<&Series> = series.iter().map(Option::as_ref).collect::<Option<_>>().ok_or_else(waits)?;
            let place =
                |series: &&Series| Place::new(series.point.columns.clone(), &series.point.dynamics, self.vocabulary);
            self.known.insert(start.step.clone(), (series.iter().map(place).collect(), series));
        }
        let Some((places, series)) = self.known.get(&start.step) else { return Ok(None) };
        let own = Place::new(columns.to_vec(), dynamics, self.vocabulary);
        let at = choose(&start, places, &own).map_err(Unplanned::Failed)?;
        let mut last: BTreeMap<(usize, u32), (u64, StateRef)> = BTreeMap::new();
        for kept in &series[at].kept {
            let state = (kept.sweep, StateRef { key: kept.key, content: kept.content });
            let known = last.entry((kept.start, kept.chain)).or_insert(state);
            if known.0 < state.0 {
                *known = state;
            }
        }
        if last.is_empty() {
            return Err(Unplanned::Failed(format!("`{}` keeps no configuration at that point", start.step)));
        }
        Ok(Some(last.into_values().map(|(_, state)| state).collect()))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn place(columns: &[(&str, f64)]) -> Place {
        let columns = columns.iter().map(|(name, x)| ((*name).to_owned(), Value::Number(*x))).collect();
        Place { columns, lattice: "square".into(), states: Some(2) }
    }

    fn start(filter: &[(&str, f64)]) -> StartStep {
        let filter = filter.iter().map(|(name, x)| ((*name).to_owned(), Value::Number(*x))).collect();
        StartStep { step: "hot".into(), filter }
    }

    #[test]
    fn points_agree_in_what_both_have_but_for_the_temperature() {
        let places = [
            place(&[("size", 4.0), ("field", 0.0), ("temperature", 3.0)]),
            place(&[("size", 8.0), ("field", 0.0), ("temperature", 3.0)]),
        ];
        let from = |own: &[(&str, f64)], filter: &[(&str, f64)]| choose(&start(filter), &places, &place(own));
        assert_eq!(from(&[("size", 8.0), ("temperature", 1.0)], &[]), Ok(1), "another temperature");
        assert_eq!(from(&[("size", 4.0), ("coupling", 2.0), ("temperature", 3.0)], &[]), Ok(0), "a column of one only");
        let none = from(&[("size", 16.0), ("temperature", 3.0)], &[]).unwrap_err();
        assert_eq!(none, "`hot` has no point with size 16.0");
        assert_eq!(from(&[("size", 16.0), ("temperature", 3.0)], &[("size", 8.0)]), Ok(1), "`where` goes before");
        let unknown = from(&[("size", 8.0)], &[("sise", 8.0)]).unwrap_err();
        assert_eq!(unknown, "`hot` has no column `sise`; it has: size, field, temperature");
    }

    #[test]
    fn of_several_temperatures_the_same_one_is_taken() {
        let places = [2.0, 3.0, 3.0].map(|t| place(&[("size", 4.0), ("position", t), ("temperature", t)]));
        let from = |t: f64, filter: &[(&str, f64)]| {
            choose(&start(filter), &places, &place(&[("size", 4.0), ("temperature", t)]))
        };
        assert_eq!(from(2.0, &[]), Ok(0));
        let several = from(5.0, &[]).unwrap_err();
        assert!(several.starts_with("3 points of `hot` with size 4.0 could be meant"), "{several}");
        assert!(several.ends_with("`position` (2.0, 3.0), `temperature` (2.0, 3.0)"), "{several}");
        assert_eq!(from(5.0, &[("temperature", 2.0)]), Ok(0));
    }

    #[test]
    fn lattices_and_states_must_fit() {
        let mut other = place(&[("size", 4.0)]);
        other.states = Some(3);
        let message = choose(&start(&[]), &[other], &place(&[("size", 4.0)])).unwrap_err();
        assert_eq!(message, "the spins of `hot` have 3 states, and here they have 2");
        let mut other = place(&[("size", 4.0)]);
        other.lattice = "triangular".into();
        let message = choose(&start(&[]), &[other], &place(&[("size", 4.0)])).unwrap_err();
        assert_eq!(message, "the lattice of `hot` is triangular, and here it is square");
    }
}
