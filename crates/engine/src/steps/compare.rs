//! `compare`: results against published values, other results, or brackets.

use super::cell::{self, Found};
use super::{Checked, Output, Split, StepError, StepKind, Surroundings, Task, flags_text};
use spinledger_terms::{Column, Field, Kind, Problem, StepSpec, Table, Value};

/// The kind.
pub(super) const KIND: StepKind =
    StepKind { does: "compare", revision: 1, split: Split::Whole, spec, check, complete, analyse };

/// Values without errors are the same when they differ by rounding only.
const ROUNDING: f64 = 1e-12;

fn spec() -> StepSpec {
    let mut take = cell::fields();
    let mut against = take.clone();
    take[0].required = true;
    against.extend([
        Field::new("value", Kind::NUMBER, "a value"),
        Field::new("error", Kind::NOT_NEGATIVE, "its standard error").default(Value::Integer(0)),
        Field::new("source", Kind::Text {}, "where it is published"),
        Field::new("lower", Kind::NUMBER, "lower end of a bracket"),
        Field::new("upper", Kind::NUMBER, "upper end of a bracket"),
    ]);
    let item = vec![
        Field::new("name", Kind::Text {}, "name of the row; `<step>.<quantity>` by default"),
        Field::new("take", Kind::Tree { fields: take }, "the result").required(),
        Field::new("against", Kind::Tree { fields: against }, "what it is held against").required(),
        Field::new("within", Kind::POSITIVE, "standard errors").default(Value::Integer(3)),
        Field::new("precision", Kind::POSITIVE, "a larger error than this makes the verdict `undecided`"),
    ];
    StepSpec {
        does: "compare".into(),
        about: "results held against published values, other results or brackets".into(),
        fields: vec![Field::new("items", Kind::list(Kind::Tree { fields: item }), "what is compared").required()],
        scan: None,
    }
}

/// What can be told without a table: which step has tables, what a result is held against.
fn check(step: &Checked<'_>, problems: &mut Vec<Problem>) {
    let Some(point) = step.points.first() else { return };
    let items = point.get("items").and_then(|items| items.as_list().map(<[Value]>::len)).unwrap_or(0);
    for item in 0..items {
        for side in ["take", "against"] {
            super::must_have_tables(step, &format!("items.{item}.{side}.step"), problems);
        }
        let place = format!("items.{item}.against");
        let Some(against) = point.get(&place) else { continue };
        let has = |name: &str| against.get(name).is_some();
        let number = |name: &str| against.get(name).and_then(Value::as_f64);
        let given =
            [has("value"), has("lower") || has("upper"), has("step")].into_iter().filter(|given| *given).count();
        if given != 1 {
            let message = if given == 0 {
                "there is nothing to hold the result against"
            } else {
                "the result is held against several things"
            };
            let problem = Problem::at_value(&point.place(&place), message);
            problems.push(problem.expected("one of: `value`, a bracket (`lower`, `upper` or both), `step`"));
        }
        if let (Some(lower), Some(upper)) = (number("lower"), number("upper"))
            && lower > upper
        {
            let problem = Problem::at_value(&point.place(&format!("{place}.lower")), "the bracket is empty");
            problems.push(
                problem
                    .expected("`lower` at most `upper`")
                    .other(point.place(&format!("{place}.upper")), "the upper end"),
            );
        }
    }
}

/// Names rows after the step and quantity, which do not enter the key otherwise.
fn complete(parameters: &mut Value, _: &Surroundings<'_>) {
    let count = parameters.get("items").and_then(Value::as_list).map_or(0, <[Value]>::len);
    for item in 0..count {
        let at = |name: &str| parameters.at(&format!("items.{item}.{name}")).and_then(Value::as_str).map(str::to_owned);
        if at("name").is_none() {
            let quantity = at("take.quantity").or_else(|| at("take.column"));
            let step = at("take.step").unwrap_or_default();
            let name = quantity.map_or(step.clone(), |quantity| format!("{step}.{quantity}"));
            parameters.set(&format!("items.{item}.name"), Value::text(name));
        }
    }
}

/// What it is held against.
enum Against {
    /// An error that is not known is not zero.
    Value {
        value: f64,
        error: Option<f64>,
        flags: String,
    },
    Bracket {
        lower: Option<f64>,
        upper: Option<f64>,
        flags: String,
    },
}

/// One row.
struct Row {
    name: String,
    found: Found,
    reference: Option<f64>,
    reference_error: Option<f64>,
    deviation: Option<f64>,
    verdict: &'static str,
    flags: String,
}

fn analyse(task: &Task<'_>) -> Result<Output, StepError> {
    let items = task.parameters.get("items").and_then(Value::as_list).unwrap_or_default();
    let mut rows = Vec::new();
    for (number, item) in items.iter().enumerate() {
        let name = item.get("name").and_then(Value::as_str).unwrap_or_default().to_owned();
        let in_item = |error: StepError| StepError(format!("{name}: {error}"));
        let role = |side: &str| format!("items.{number}.{side}.step");
        let found =
            cell::take(&task.inputs(), &role("take"), item.get("take").unwrap_or(&Value::Null)).map_err(in_item)?;
        let against = against(task, &role("against"), item.get("against").unwrap_or(&Value::Null)).map_err(in_item)?;
        let number = |key: &str| item.get(key).and_then(Value::as_f64);
        rows.push(judge(name.clone(), found, against, number("within").unwrap_or(3.0), number("precision")));
    }
    Ok(vec![("main".into(), table(&rows))].into())
}

fn against(task: &Task<'_>, role: &str, which: &Value) -> Result<Against, StepError> {
    let number = |key: &str| which.get(key).and_then(Value::as_f64);
    if let Some(value) = number("value") {
        return Ok(Against::Value { value, error: Some(number("error").unwrap_or(0.0)), flags: String::new() });
    }
    if number("lower").is_some() || number("upper").is_some() {
        return Ok(Against::Bracket { lower: number("lower"), upper: number("upper"), flags: String::new() });
    }
    if task.tables.iter().all(|table| table.role != role) {
        return Err(StepError("`against` needs a value, a bracket or a step".into()));
    }
    if which.get("quantity").is_none() && which.get("column").is_none() {
        let table = task.table(role, "main")?;
        if let (Some(side), Some(value)) = (table.column("side"), table.column("value")) {
            // The sharpest of each side.
            let best = |word: &str, better: fn(f64, f64) -> f64| {
                let rows = (0..table.rows()).filter(|row| side.cells.text(*row) == Some(word));
                rows.filter_map(|row| value.cells.number(row)).reduce(better)
            };
            let flags = (0..table.rows()).filter_map(|row| table.text("flags", row)).collect::<Vec<_>>().join(";");
            let (lower, upper) = (best("lower", f64::max), best("upper", f64::min));
            if lower.is_none() && upper.is_none() {
                return Err(StepError("the step has no bound".into()));
            }
            return Ok(Against::Bracket { lower, upper, flags });
        }
    }
    let found = cell::take(&task.inputs(), role, which)?;
    let value = found.value.ok_or_else(|| StepError("the reference is not known".into()))?;
    Ok(Against::Value { value, error: found.error, flags: found.flags })
}

fn judge(name: String, found: Found, against: Against, within: f64, precision: Option<f64>) -> Row {
    let (reference, reference_error, other_flags) = match &against {
        Against::Value { value, error, flags } => (Some(*value), *error, flags),
        Against::Bracket { lower, upper, flags } => {
            let near = found.value.and_then(|value| match (lower, upper) {
                (Some(lower), _) if value < *lower => Some(*lower),
                (_, Some(upper)) if value > *upper => Some(*upper),
                (Some(lower), Some(upper)) => Some(if value - lower < upper - value { *lower } else { *upper }),
                (one, other) => one.or(*other),
            });
            (near, Some(0.0), flags)
        }
    };
    let mut flags: Vec<&str> = found.flags.split(';').chain(other_flags.split(';')).filter(|f| !f.is_empty()).collect();
    let inside = match &against {
        Against::Bracket { lower, upper, .. } => found
            .value
            .is_some_and(|value| lower.is_none_or(|lower| value >= lower) && upper.is_none_or(|upper| value <= upper)),
        Against::Value { .. } => false,
    };
    let combined = found.error.zip(reference_error).map(|(error, other)| (error * error + other * other).sqrt());
    let difference = found.value.zip(reference).map(|(value, reference)| if inside { 0.0 } else { value - reference });
    let deviation = match (difference, combined) {
        (Some(difference), Some(error)) if error > 0.0 => Some(difference / error),
        (Some(difference), Some(_)) => {
            let size = reference.unwrap_or(0.0).abs().max(1.0);
            (difference.abs() <= ROUNDING * size).then_some(0.0)
        }
        _ => None,
    };
    if combined.is_none() {
        flags.push("no-error");
    }
    if precision.is_some_and(|precision| found.error.is_some_and(|error| error > precision)) {
        flags.push("imprecise");
    }
    let verdict = if !flags.is_empty() || found.value.is_none() {
        "undecided"
    } else if deviation.is_some_and(|deviation| deviation.abs() <= within) {
        "agrees"
    } else {
        "disagrees"
    };
    let flags = flags_text(&flags);
    Row { name, found, reference, reference_error, deviation, verdict, flags }
}

fn table(rows: &[Row]) -> Table {
    let numbers = |name: &str, get: fn(&Row) -> Option<f64>| Column::numbers(name, "", rows.iter().map(get).collect());
    Table {
        columns: vec![
            Column::texts("name", rows.iter().map(|r| Some(r.name.clone())).collect()),
            numbers("value", |r| r.found.value),
            numbers("error", |r| r.found.error),
            numbers("reference", |r| r.reference),
            numbers("reference_error", |r| r.reference_error),
            numbers("deviation", |r| r.deviation),
            Column::texts("verdict", rows.iter().map(|r| Some(r.verdict.to_owned())).collect()),
            Column::texts("flags", rows.iter().map(|r| Some(r.flags.clone())).collect()),
        ],
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn found(value: f64, error: f64, flags: &str) -> Found {
        Found { value: Some(value), error: Some(error), flags: flags.into() }
    }

    fn value(value: f64, error: f64) -> Against {
        Against::Value { value, error: Some(error), flags: String::new() }
    }

    fn verdict(found: Found, against: Against, precision: Option<f64>) -> (&'static str, Option<f64>) {
        let row = judge("x".into(), found, against, 3.0, precision);
        (row.verdict, row.deviation)
    }

    #[test]
    fn verdicts_follow_errors_flags_and_precision() {
        assert_eq!(verdict(found(2.0, 0.3, ""), value(1.0, 0.4), None), ("agrees", Some(2.0)));
        assert_eq!(verdict(found(3.0, 0.3, ""), value(1.0, 0.4), None), ("disagrees", Some(4.0)));
        assert_eq!(verdict(found(2.0, 0.3, "bad-fit"), value(1.0, 0.4), None).0, "undecided");
        assert_eq!(verdict(found(2.0, 0.3, ""), value(1.0, 0.4), Some(0.2)).0, "undecided");
        let without = Found { value: Some(1.0), error: None, flags: String::new() };
        assert_eq!(verdict(without, value(1.0, 0.0), None), ("undecided", None));
        assert_eq!(verdict(found(1.0, 0.0, ""), value(1.0, 0.0), None), ("agrees", Some(0.0)));
        assert_eq!(verdict(found(1.1, 0.0, ""), value(1.0, 0.0), None), ("disagrees", None));
        let unknown = Against::Value { value: 9.0, error: None, flags: String::new() };
        assert_eq!(verdict(found(1.0, 0.1, ""), unknown, None), ("undecided", None), "an unknown error is not zero");
    }

    #[test]
    fn brackets_hold_what_is_inside_or_near() {
        let bracket = || Against::Bracket { lower: Some(2.0), upper: Some(2.5), flags: String::new() };
        assert_eq!(verdict(found(2.2, 0.01, ""), bracket(), None), ("agrees", Some(0.0)));
        assert_eq!(verdict(found(1.98, 0.01, ""), bracket(), None).0, "agrees");
        assert_eq!(verdict(found(2.6, 0.01, ""), bracket(), None).0, "disagrees");
        let open = Against::Bracket { lower: None, upper: Some(2.5), flags: String::new() };
        assert_eq!(verdict(found(-7.0, 0.01, ""), open, None).0, "agrees");
    }
}
