//! Parcels of analysis steps.

use super::references::{references, remove};
use super::{Product, Products, Series, state};
use crate::job::{AnalyseJob, SeriesFacts, SeriesInput, TableInput, UnitNames};
use crate::steps::{Split, StepKind, Surroundings, WITHIN_GROUP};
use crate::study::Study;
use spinledger_pipeline::{Expansion, Step};
use spinledger_plan::analysis::{self, InputRef};
use spinledger_terms::{ColumnSpec, ContentHash, Key, Value};

/// An analysis step, planned: its parcels.
#[derive(Clone, Debug)]
pub struct AnalysisPlan {
    /// The parcels, with the constant columns of the point where the step is split by points. None where what it needs is broken.
    pub parcels: Vec<Option<Parcel>>,
}

/// An analysis parcel.
#[derive(Clone, Debug)]
pub struct Parcel {
    /// Its key.
    pub key: Key,
    /// The work.
    pub job: AnalyseJob,
    /// Constant columns of its point.
    pub columns: Vec<(String, String, Value)>,
}

/// Name, unit and value of constant columns.
type Columns = Vec<(String, String, Value)>;

/// What an analysis step takes: roles and names of steps.
pub fn inputs_of(study: &Study, step: &Step) -> Vec<(String, String)> {
    references(&step.spec.fields, &parameters_of(study, step))
}

/// The parameters of an analysis step, which has one point.
fn parameters_of(study: &Study, step: &Step) -> Value {
    match step.expand(&|_| None, &study.vocabulary) {
        Ok(Expansion::Points(points)) if !points.is_empty() => points[0].body(),
        _ => Value::Map(step.body.clone()),
    }
}

/// Plans an analysis step from the products of the steps that it needs; None where one that it needs as a whole is broken.
pub fn analysis_parcels(study: &Study, step: &Step, kind: &StepKind, products: &Products) -> Option<AnalysisPlan> {
    let mut parameters = parameters_of(study, step);
    (kind.complete)(&mut parameters, &Surroundings { pipeline: &study.pipeline });
    let roles = references(&step.spec.fields, &parameters);
    for (role, _) in &roles {
        remove(&mut parameters, role);
    }
    let units = &study.pipeline.units;
    let names = UnitNames { energy: units.energy_unit().into(), temperature: units.temperature_unit().into() };
    let pipeline = Some(ContentHash(*blake3::hash(study.pipeline.text.as_bytes()).as_bytes()));
    let make = |series: Vec<SeriesInput>, tables: Vec<TableInput>, columns: Vec<(String, String, Value)>| {
        let whole = kind.split == Split::Whole;
        let facts = series.iter().map(|s| facts_value(s, whole)).collect();
        let facts = Value::map([
            ("energy_unit", Value::text(units.energy_unit())),
            ("series", Value::List(facts)),
            ("temperature_unit", Value::text(units.temperature_unit())),
        ]);
        let inputs: Vec<InputRef> = series
            .iter()
            .map(|s| InputRef { role: s.role.clone(), key: s.key, content: s.content })
            .chain(tables.iter().map(|t| InputRef { role: t.role.clone(), key: t.key, content: t.content }))
            .collect();
        let preimage = analysis::preimage(kind.does, kind.revision, &parameters, &facts, &inputs);
        let key = Key::of(&preimage);
        let job = AnalyseJob {
            does: kind.does.to_owned(),
            preimage,
            parameters: parameters.clone(),
            series,
            tables,
            state: None,
            refused: None,
            units: names.clone(),
            pipeline,
        };
        Parcel { key, job, columns }
    };
    if kind.split == Split::Points {
        let (role, name) = roles.first()?;
        let Some(Product::Series(points)) = products.get(name) else { return None };
        let parcels = points
            .iter()
            .map(|series| {
                let series = series.as_ref()?;
                Some(make(vec![series_input(study, role, series)], Vec::new(), series.columns.clone()))
            })
            .collect();
        return Some(AnalysisPlan { parcels });
    }
    if kind.split == Split::State {
        let (role, name) = roles.first()?;
        let Some(Product::Series(points)) = products.get(name) else { return None };
        let points: Vec<&Series> = points.iter().map(Option::as_ref).collect::<Option<_>>()?;
        let mut parcel = make(Vec::new(), Vec::new(), Vec::new());
        match state::of_state(study, kind, role, parameters, &points) {
            Ok(found) => {
                (parcel.job.preimage, parcel.job.parameters, parcel.job.state) = found;
                parcel.key = Key::of(&parcel.job.preimage);
            }
            Err(reason) => parcel.job.refused = Some(reason),
        }
        return Some(AnalysisPlan { parcels: vec![Some(parcel)] });
    }
    if kind.split == Split::Groups {
        let (role, name) = roles.first()?;
        let Some(Product::Series(points)) = products.get(name) else { return None };
        let points: Vec<&Series> = points.iter().map(Option::as_ref).collect::<Option<_>>()?;
        let parcels = groups(&points).into_iter().map(|(columns, members)| {
            let series = members.into_iter().map(|series| series_input(study, role, series)).collect();
            Some(make(series, Vec::new(), columns))
        });
        return Some(AnalysisPlan { parcels: parcels.collect() });
    }
    let (mut series, mut tables) = (Vec::new(), Vec::new());
    for (role, name) in &roles {
        match products.get(name)? {
            Product::Series(points) => {
                for point in points {
                    series.push(series_input(study, role, point.as_ref()?));
                }
            }
            Product::Tables { key, content } => {
                tables.push(TableInput { role: role.clone(), key: *key, content: *content });
            }
            Product::Incomplete => return None,
        }
    }
    Some(AnalysisPlan { parcels: vec![Some(make(series, tables, Vec::new()))] })
}

/// Constant columns and members of each group, groups in the order of their first points, members by temperature: the order of points is the scan's, on
/// which no key may depend.
fn groups<'a>(points: &[&'a Series]) -> Vec<(Columns, Vec<&'a Series>)> {
    let mut groups: Vec<(Columns, Vec<&Series>)> = Vec::new();
    for point in points {
        let own: Columns =
            point.columns.iter().filter(|(name, _, _)| !WITHIN_GROUP.contains(&name.as_str())).cloned().collect();
        match groups.iter_mut().find(|(columns, _)| *columns == own) {
            Some((_, members)) => members.push(point),
            None => groups.push((own, vec![point])),
        }
    }
    for (_, members) in &mut groups {
        let place = |series: &Series| series.point.dynamics.inverse_temperature;
        members.sort_by(|a, b| place(a).total_cmp(&place(b)).then_with(|| a.key.cmp(&b.key)));
    }
    groups
}

fn series_input(study: &Study, role: &str, series: &Series) -> SeriesInput {
    let dynamics = &series.point.dynamics;
    let units = &study.pipeline.units;
    SeriesInput {
        role: role.to_owned(),
        key: series.key,
        content: series.content,
        columns: series.columns.iter().map(|(name, _, value)| (name.clone(), value.clone())).collect(),
        facts: SeriesFacts {
            sites: series.note.sites,
            temperature: Some(dynamics.temperature).filter(|t| t.is_finite()),
            thermal_energy: Some(1.0 / dynamics.inverse_temperature).filter(|t| t.is_finite()),
            energy_unit: units.energy_unit().to_owned(),
            temperature_unit: units.temperature_unit().to_owned(),
            every: dynamics.every,
            from_start: series.point.discard,
            starts: series.point.starts(),
            observed: series.note.observed.clone(),
        },
        pieces: series.pieces.clone(),
    }
}

/// What of a series' facts enters keys; scan columns only where the step concludes over them.
fn facts_value(series: &SeriesInput, with_columns: bool) -> Value {
    let facts = &series.facts;
    let number = |x: Option<f64>| x.map_or(Value::Null, Value::Number);
    // Without the line of explanation, on which nothing depends.
    let column =
        |c: &ColumnSpec| Value::List(vec![Value::text(&c.name), Value::text(&c.unit), Value::Bool(c.invariant)]);
    let mut value = Value::map([
        ("every", Value::Integer(facts.every as i64)),
        ("from_start", Value::Bool(facts.from_start)),
        ("observed", Value::List(facts.observed.iter().map(column).collect())),
        ("sites", Value::Integer(facts.sites as i64)),
        ("starts", Value::List(facts.starts.iter().map(Value::text).collect())),
        ("thermal_energy", number(facts.thermal_energy)),
    ]);
    if with_columns {
        let columns = series.columns.iter().map(|(name, v)| Value::List(vec![Value::text(name), v.clone()])).collect();
        value.set("columns", Value::List(columns));
        value.set("temperature", number(facts.temperature));
    }
    value
}
