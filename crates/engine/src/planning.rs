//! From steps to jobs: plans against the index, one step at a time, as soon as what the step needs is there.

use crate::job::{AnalyseJob, SeriesFacts, SeriesInput, SeriesNote, TableInput};
use crate::steps::{self, Split, StepKind, sample};
use crate::study::Study;
use spinledger_ledger::{Index, Ledger};
use spinledger_pipeline::{Expansion, FromStep, Step};
use spinledger_plan::analysis::{self, InputRef};
use spinledger_plan::dynamics::Dynamics;
use spinledger_plan::sample::{Piece, Point, plan_point};
use spinledger_terms::{ColumnSpec, ContentHash, Field, ItemKind, Key, Kind, Problem, Table, Value};
use std::collections::BTreeMap;

/// What a step has given.
#[derive(Clone, Debug)]
pub enum Product {
    /// Series, one a point; None where a parcel broke.
    Series(Vec<Option<Series>>),
    /// Tables in one entry.
    Tables {
        /// The entry.
        key: Key,
        /// Its content.
        content: ContentHash,
    },
    /// Nothing: something that it needs, or itself, is broken.
    Incomplete,
}

/// The series of a point.
#[derive(Clone, Debug)]
pub struct Series {
    /// Its entry.
    pub key: Key,
    /// Its content.
    pub content: ContentHash,
    /// The point.
    pub point: Point,
    /// Its blocks.
    pub pieces: Vec<Piece>,
    /// What only loaded plugins know.
    pub note: SeriesNote,
    /// Constant columns of the point in tables, with units, `sites` last.
    pub columns: Vec<(String, String, Value)>,
}

/// Products by step.
pub type Products = BTreeMap<String, Product>;

/// A step that cannot be planned.
#[derive(Debug)]
pub enum Unplanned {
    /// It waits for these steps.
    Waits(Vec<String>),
    /// The values it takes from an earlier step's table are wrong.
    Problems(Vec<Problem>),
    /// A table cannot be read.
    Failed(String),
}

/// The points of a sample step, planned against the index.
///
/// # Errors
/// Where the scan waits for an earlier step, or takes values from it that the parameters cannot have.
pub fn sample_points(
    study: &Study,
    step: &Step,
    products: &Products,
    ledger: Option<&Ledger>,
    index: &Index,
) -> Result<Vec<Point>, Unplanned> {
    let failed = std::cell::RefCell::new(None);
    let lookup = |from: &FromStep| -> Option<Vec<Value>> {
        let Some(Product::Tables { key, .. }) = products.get(&from.step) else { return None };
        match ledger?.read_table(key, from.table.as_deref().unwrap_or("main")) {
            Ok(table) => Some(values_from(&table, from)),
            Err(error) => {
                *failed.borrow_mut() = Some(crate::chain_text(&error));
                None
            }
        }
    };
    let expansion = step.expand(&lookup, &study.vocabulary).map_err(Unplanned::Problems)?;
    if let Some(error) = failed.borrow_mut().take() {
        return Err(Unplanned::Failed(error));
    }
    let points = match expansion {
        Expansion::Points(points) => points,
        Expansion::Waits(steps) => return Err(Unplanned::Waits(steps)),
    };
    let mut planned = Vec::with_capacity(points.len());
    for point in points {
        let body = point.body();
        let dynamics = Dynamics::of(&body, study.pipeline.seed, &study.pipeline.units, &study.vocabulary)
            .ok_or_else(|| Unplanned::Failed("a point has parameters that are not those of a sample step".into()))?;
        let mut columns = point.columns.clone();
        add_size(&mut columns, &body, study);
        planned.push(plan_point(columns, dynamics, &sample::ask(&body), index));
    }
    Ok(planned)
}

/// `size` stands in tables even when it is not scanned.
fn add_size(columns: &mut Vec<(String, Value)>, body: &Value, study: &Study) {
    if columns.iter().any(|(name, _)| name == "size") {
        return;
    }
    let Some(lattice) = body.get("lattice") else { return };
    let name = lattice.get("plugin").and_then(Value::as_str).unwrap_or_default();
    let traits = study.vocabulary.item(ItemKind::Lattice, name).and_then(|(_, item)| item.lattice.as_ref());
    let Some(traits) = traits.filter(|t| !t.size.is_empty()) else { return };
    let Some(size) = lattice.at(&traits.size) else { return };
    if let Some(size) = size.as_i64() {
        columns.insert(0, ("size".into(), Value::Integer(size)));
        return;
    }
    let Some((text, parts)) = spinledger_pipeline::size_parts(size, Some(traits.dimension as usize)) else { return };
    let words = ["x", "y", "z"];
    let part = |at: usize| words.get(at).map_or_else(|| (at + 1).to_string(), |word| (*word).to_owned());
    let parts = parts.into_iter().enumerate().map(|(at, n)| (format!("size_{}", part(at)), Value::Integer(n)));
    columns.splice(0..0, std::iter::once(("size".to_owned(), Value::Text(text))).chain(parts));
}

/// The values of a column, in the rows asked for.
fn values_from(table: &Table, from: &FromStep) -> Vec<Value> {
    let Some(column) = table.column(&from.column) else { return Vec::new() };
    let same = |a: &Value, b: &Value| a == b || (a.as_f64().is_some() && a.as_f64() == b.as_f64());
    let fits = |row: usize| {
        let filter = from
            .filter
            .iter()
            .all(|(name, value)| table.column(name).is_some_and(|column| same(&column.cells.value(row), value)));
        filter
            && from
                .beside
                .iter()
                .all(|(name, value)| table.column(name).is_none_or(|column| same(&column.cells.value(row), value)))
    };
    (0..table.rows())
        .filter(|row| fits(*row))
        .map(|row| column.cells.value(row))
        .filter(|v| *v != Value::Null)
        .collect()
}

/// The constant columns of a point with their units: scan columns, then `temperature`; `sites` follows where it is known.
pub fn point_columns(study: &Study, step: &Step, point: &Point) -> Vec<(String, String, Value)> {
    let unit = |name: &str| unit_of(study, step, name);
    let mut columns: Vec<(String, String, Value)> =
        point.columns.iter().map(|(name, value)| (name.clone(), unit(name), value.clone())).collect();
    if columns.iter().all(|(name, _, _)| name != "temperature") {
        let temperature = Value::Number(point.dynamics.temperature);
        columns.push(("temperature".into(), study.pipeline.units.temperature_unit().into(), temperature));
    }
    columns
}

/// The unit of a scan column: that of the parameter it is named after.
fn unit_of(study: &Study, step: &Step, column: &str) -> String {
    let units = &study.pipeline.units;
    let axes = step.scan.iter().flat_map(|block| &block.axes);
    let named =
        axes.filter(|axis| axis.address.last().is_some_and(|word| word == column) || axis.address.join("_") == column);
    for axis in named {
        if let Some(word) = field_unit(study, step, &axis.address) {
            return match word.as_str() {
                "energy" => units.energy_unit().into(),
                "field" => units.field_unit().into(),
                "temperature" => units.temperature_unit().into(),
                "1/energy" if units.energy_unit().is_empty() => String::new(),
                "1/energy" => format!("1/{}", units.energy_unit()),
                other => other.to_owned(),
            };
        }
    }
    if column == "temperature" { units.temperature_unit().into() } else { String::new() }
}

fn field_unit(study: &Study, step: &Step, address: &[String]) -> Option<String> {
    let (first, rest) = address.split_first()?;
    let field: &Field = step.spec.fields.iter().find(|field| field.name == *first)?;
    let (Kind::Plugin { of }, [name, ..]) = (&field.kind, rest) else { return Some(field.unit.clone()) };
    let value = step.body.get(first)?;
    let plugin = value.as_str().or_else(|| value.get("plugin").and_then(Value::as_str))?;
    let (_, item) = study.vocabulary.item(*of, plugin)?;
    Some(item.parameters.iter().find(|p| p.name == *name)?.unit.clone())
}

/// The series of a point, where it is complete and closed.
pub fn closed_series(study: &Study, step: &Step, point: &Point, index: &Index) -> Option<Series> {
    let mut columns = point_columns(study, step, point);
    let preimage = point.series_preimage(&columns);
    let line = index.get(&Key::of(&preimage))?;
    let note = SeriesNote::from_text(&line.note)?;
    columns.push(("sites".into(), String::new(), Value::Integer(note.sites as i64)));
    let pieces = point.pieces(index)?;
    Some(Series { key: line.key, content: line.content, point: point.clone(), pieces, note, columns })
}

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

/// Plans an analysis step from the products of the steps that it needs; None where one that it needs as a whole is broken.
pub fn analysis_parcels(study: &Study, step: &Step, kind: &StepKind, products: &Products) -> Option<AnalysisPlan> {
    let mut parameters = Value::Map(step.body.clone());
    if let Ok(Expansion::Points(points)) = step.expand(&|_| None, &study.vocabulary)
        && let Some(point) = points.first()
    {
        parameters = point.body();
    }
    (kind.complete)(&mut parameters);
    let roles = references(&step.spec.fields, &parameters);
    for (role, _) in &roles {
        remove(&mut parameters, role);
    }
    let units = &study.pipeline.units;
    let pipeline = Some(ContentHash(*blake3::hash(study.pipeline.text.as_bytes()).as_bytes()));
    let make = |series: Vec<SeriesInput>, tables: Vec<TableInput>, columns: Vec<(String, String, Value)>| {
        let split = kind.split == Split::Points;
        let facts = series.iter().map(|s| facts_value(s, !split)).collect();
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

/// Names of steps in a step's parameters: path and name.
pub fn references(fields: &[Field], parameters: &Value) -> Vec<(String, String)> {
    fn walk(kind: &Kind, value: &Value, path: &str, out: &mut Vec<(String, String)>) {
        let under = |word: &str| if path.is_empty() { word.to_owned() } else { format!("{path}.{word}") };
        match (kind, value) {
            (Kind::Step {}, Value::Text(name)) => out.push((path.to_owned(), name.clone())),
            (Kind::List { of, .. }, Value::List(list)) => {
                for (i, item) in list.iter().enumerate() {
                    walk(of, item, &under(&i.to_string()), out);
                }
            }
            (Kind::Map { of }, Value::Map(map)) => map.iter().for_each(|(k, v)| walk(of, v, &under(k), out)),
            (Kind::Tree { fields }, Value::Map(map)) => {
                for field in fields {
                    if let Some(value) = map.get(&field.name) {
                        walk(&field.kind, value, &under(&field.name), out);
                    }
                }
            }
            (Kind::Either { of }, value) => {
                // Only one alternative took the value; a text that is a word of another alternative is no name of a step.
                let taken = of.iter().find(|kind| {
                    let (mut problems, mut references) = (Vec::new(), Vec::new());
                    let vocabulary = Default::default();
                    let mut admission = spinledger_terms::Admission {
                        vocabulary: &vocabulary,
                        problems: &mut problems,
                        references: &mut references,
                    };
                    spinledger_terms::admit(kind, value, &spinledger_terms::Path::top(), &mut admission).is_some()
                });
                if let Some(kind) = taken {
                    walk(kind, value, path, out);
                }
            }
            _ => {}
        }
    }
    let mut out = Vec::new();
    for field in fields {
        if let Some(value) = parameters.get(&field.name) {
            walk(&field.kind, value, &field.name, &mut out);
        }
    }
    out
}

/// Takes the name of a step out of parameters: null stands in a list, nothing in a mapping.
fn remove(parameters: &mut Value, role: &str) {
    let (parent, last) = match role.rsplit_once('.') {
        Some((parent, last)) => (at_mut(parameters, parent), last),
        None => (Some(parameters), role),
    };
    match parent {
        Some(Value::Map(map)) => {
            map.remove(last);
        }
        Some(Value::List(list)) => {
            if let Some(item) = last.parse::<usize>().ok().and_then(|i| list.get_mut(i)) {
                *item = Value::Null;
            }
        }
        _ => {}
    }
}

fn at_mut<'a>(value: &'a mut Value, path: &str) -> Option<&'a mut Value> {
    path.split('.').try_fold(value, |value, word| match value {
        Value::Map(map) => map.get_mut(word),
        Value::List(list) => list.get_mut(word.parse::<usize>().ok()?),
        _ => None,
    })
}

/// The kind of a step; every step of a checked pipeline has one.
pub fn kind_of(step: &Step) -> &'static StepKind {
    steps::kind(&step.does).unwrap_or(&sample::KIND)
}

/// Files of plugins that did not come with the program, as far as a step uses them.
pub fn foreign_files(study: &Study, step: &Step) -> Vec<String> {
    fn walk(kind: &Kind, value: &Value, study: &Study, out: &mut Vec<String>) {
        match (kind, value) {
            (Kind::Plugin { of }, value) => {
                let name = value.as_str().or_else(|| value.get("plugin").and_then(Value::as_str));
                if let Some((identity, _)) = name.and_then(|name| study.vocabulary.item(*of, name))
                    && !identity.standard
                {
                    out.push(identity.file.clone());
                }
            }
            (Kind::List { of, .. }, Value::List(list)) => list.iter().for_each(|v| walk(of, v, study, out)),
            (Kind::Either { of }, value) => of.iter().for_each(|kind| walk(kind, value, study, out)),
            _ => {}
        }
    }
    let mut out = Vec::new();
    for field in &step.spec.fields {
        if let Some(value) = step.body.get(&field.name) {
            walk(&field.kind, value, study, &mut out);
        }
    }
    // A scan over plugins names them in its values.
    for axis in step.scan.iter().flat_map(|block| &block.axes) {
        if let spinledger_pipeline::AxisValues::Listed(values) = &axis.values {
            values.iter().for_each(|value| walk(&axis.kind, value, study, &mut out));
        }
    }
    out
}
