//! The constant columns of a point: what is scanned, sizes, the temperature, with units.

use crate::study::Study;
use spinledger_pipeline::Step;
use spinledger_plan::sample::Point;
use spinledger_terms::{Field, ItemKind, Kind, Value, Vocabulary};

/// `size` stands in tables even when it is not scanned.
pub(super) fn add_size(columns: &mut Vec<(String, Value)>, body: &Value, vocabulary: &Vocabulary) {
    if columns.iter().any(|(name, _)| name == "size") {
        return;
    }
    let Some(lattice) = body.get("lattice") else { return };
    let name = lattice.get("plugin").and_then(Value::as_str).unwrap_or_default();
    let traits = vocabulary.item(ItemKind::Lattice, name).and_then(|(_, item)| item.lattice.as_ref());
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
