//! Answers: rows of comparisons, and ordering temperatures that nothing was held against.

use super::lineage::Lineage;
use super::{Part, StepError, Task};
use crate::steps::words;
use spinledger_report::{Answer, Reference, Verdict};
use spinledger_terms::{Table, Value};

/// The answers, in the order of the parts.
pub(super) fn answers(task: &Task<'_>, parts: &[Part], lineage: &Lineage<'_>) -> Result<Vec<Answer>, StepError> {
    let mut answers = Vec::new();
    for part in parts.iter().filter(|part| part.does == "compare") {
        let table = part.table(task, "main")?;
        answers.extend((0..table.rows()).map(|row| compared(task, part, &table, row, lineage)));
    }
    for part in parts.iter().filter(|part| part.does == "crossing" && !is_compared(part, parts)) {
        let table = part.table(task, "main")?;
        let rows = (0..table.rows()).filter(|row| table.text("quantity", *row) == Some("critical_temperature"));
        answers.extend(rows.map(|row| found(task, part, &table, row, lineage)));
    }
    Ok(answers)
}

/// Whether a comparison on the page took a result of the part.
fn is_compared(part: &Part, parts: &[Part]) -> bool {
    let comparisons = parts.iter().filter(|part| part.does == "compare");
    comparisons.flat_map(|c| &c.record.provenance.inputs).any(|input| input.content == part.record.content)
}

fn compared(task: &Task<'_>, part: &Part, table: &Table, row: usize, lineage: &Lineage<'_>) -> Answer {
    let number = |name: &str| table.column(name).and_then(|column| column.cells.number(row));
    let parameters = &part.record.provenance.parameters;
    let item = parameters.at(&format!("items.{row}")).cloned().unwrap_or(Value::Null);
    let text = |path: &str| item.at(path).and_then(Value::as_str).unwrap_or_default().to_owned();
    let ends = (item.at("against.lower").and_then(Value::as_f64), item.at("against.upper").and_then(Value::as_f64));
    let reference = match (ends, number("reference")) {
        ((None, None), Some(value)) => Reference::Value { value, error: number("reference_error").unwrap_or(0.0) },
        ((None, None), None) => Reference::None,
        ((lower, upper), _) => Reference::Bracket { lower, upper },
    };
    let role = format!("items.{row}.take.step");
    let input = part.record.provenance.inputs.iter().find(|input| input.name == role);
    let quantity = if text("take.quantity").is_empty() { text("take.column") } else { text("take.quantity") };
    Answer {
        name: table.text("name", row).unwrap_or_default().to_owned(),
        value: number("value"),
        error: number("error"),
        unit: words::unit(&quantity, task.units),
        reference,
        source: text("against.source"),
        deviation: number("deviation"),
        within: item.get("within").and_then(Value::as_f64).unwrap_or(3.0),
        verdict: match table.text("verdict", row) {
            Some("agrees") => Verdict::Agrees,
            Some("disagrees") => Verdict::Disagrees,
            _ => Verdict::Undecided,
        },
        flags: flags(table, row),
        record: input.map_or(Value::Null, |input| lineage.of(&input.key)),
    }
}

fn found(task: &Task<'_>, part: &Part, table: &Table, row: usize, lineage: &Lineage<'_>) -> Answer {
    let number = |name: &str| table.column(name).and_then(|column| column.cells.number(row));
    // Curves of several sets have columns that tell them apart.
    let before = table.columns.iter().take_while(|column| column.name != "quantity");
    let set =
        before.map(|column| format!(", {} = {}", words::label(&column.name), column.cells.value(row).canonical()));
    Answer {
        name: format!("{}{}", words::label("critical_temperature"), set.collect::<String>()),
        value: number("value"),
        error: number("error"),
        unit: task.units.temperature.clone(),
        reference: Reference::None,
        source: String::new(),
        deviation: None,
        within: 3.0,
        verdict: Verdict::None,
        flags: flags(table, row),
        record: lineage.of(&part.record.key),
    }
}

fn flags(table: &Table, row: usize) -> Vec<String> {
    let flags = table.text("flags", row).unwrap_or_default();
    flags.split(';').filter(|flag| !flag.is_empty()).map(str::to_owned).collect()
}
