//! `report`: one HTML page with the question, the answers, figures, tables, what is not settled, and the record behind each number.
//!
//! Nothing on it depends on when, where or by which build it was made, nor on what steps are called: the same results make the same page.

mod answers;
mod figures;
mod lineage;
mod views;

use super::{Checked, KINDS, Output, Split, StepError, StepKind, Surroundings, Task, flags_text, must_be_of};
use lineage::Lineage;
use spinledger_ledger::Record;
use spinledger_report::{Again, Page};
use spinledger_terms::{Column, Field, Kind, Problem, StepSpec, Table, Value};
use std::collections::BTreeSet;

/// The kind.
pub(super) const KIND: StepKind =
    StepKind { does: "report", revision: 3, split: Split::Whole, spec, check, complete, analyse };

fn spec() -> StepSpec {
    let figures = Kind::Either {
        of: vec![Kind::words(&["auto", "none"]), Kind::List { of: Box::new(Kind::Text {}), min: 0, max: None }],
    };
    StepSpec {
        does: "report".into(),
        about: "one HTML page: question, answers, figures, tables, what is not settled, records".into(),
        fields: vec![
            Field::new("of", Kind::list(Kind::Step {}), "the steps that it shows, in order").required(),
            Field::new("title", Kind::Text {}, "the question; the pipeline's title by default"),
            Field::new("figures", figures, "quantities that are drawn from tables, beside steps that draw")
                .default(Value::text("auto")),
        ],
        scan: None,
    }
}

fn check(step: &Checked<'_>, problems: &mut Vec<Problem>) {
    let Some(point) = step.points.first() else { return };
    let shown: Vec<&str> =
        KINDS.iter().filter(|k| k.split != Split::Chains && k.does != "report").map(|kind| kind.does).collect();
    let count = point.get("of").and_then(|of| of.as_list().map(<[Value]>::len)).unwrap_or(0);
    for number in 0..count {
        must_be_of(step, &format!("of.{number}"), &shown, problems);
    }
}

/// The page says which pipeline it is of.
fn complete(parameters: &mut Value, surroundings: &Surroundings<'_>) {
    let pipeline = surroundings.pipeline;
    if parameters.get("title").is_none() {
        parameters.set("title", Value::text(pipeline.title.as_ref().unwrap_or(&pipeline.name)));
    }
    parameters.set("pipeline", Value::text(&pipeline.name));
    parameters.set("seed", Value::Integer(pipeline.seed as i64));
    parameters.set("units", Value::text(pipeline.units.word()));
}

/// An entry that the page shows.
struct Part {
    /// The kind of step.
    does: String,
    /// Its record.
    record: Record,
}

impl Part {
    /// A table of it.
    fn table(&self, task: &Task<'_>, name: &str) -> Result<Table, StepError> {
        Ok(task.ledger.read_table(&self.record.key, name)?)
    }
}

fn analyse(task: &Task<'_>) -> Result<Output, StepError> {
    let parts: Vec<Part> = task
        .tables
        .iter()
        .map(|input| {
            let record = task.ledger.read_record(&input.key)?;
            let does = record.kind.strip_suffix(".gathered").unwrap_or(&record.kind).to_owned();
            Ok(Part { does, record })
        })
        .collect::<Result<_, StepError>>()?;
    let text = |name: &str| task.parameters.get(name).and_then(Value::as_str).unwrap_or_default();
    let lineage = Lineage::new(task.ledger);
    let mut page = Page::new(text("pipeline"), text("title"));
    page.answers = answers::answers(task, &parts, &lineage)?;
    page.figures = figures::figures(task, &parts, &lineage)?;
    (task.progress)();
    page.tables = views::tables(task, &parts, &lineage)?;
    page.again = again(text("pipeline"));
    page.record = Value::map([
        ("pipeline", Value::text(text("pipeline"))),
        ("seed", task.parameters.get("seed").cloned().unwrap_or(Value::Null)),
        ("units", Value::text(text("units"))),
        ("plugins", lineage.plugins(&parts)),
    ]);
    page.made = "Made by spinledger. Times, machines and the build that computed each entry are in its record.".into();
    let html = page.html().into_bytes();
    Ok(Output { tables: vec![("main".into(), main(task, &parts)?)], files: vec![("main.html".into(), html)] })
}

fn again(pipeline: &str) -> Vec<Again> {
    let step = |words: &str, command: String| Again { words: words.into(), command };
    vec![
        step(
            "Run the pipeline. Its text is in record.json beside this page, with the content of every result; the same text, seed and plugins give the same contents on any machine.",
            format!("spinledger run {pipeline}.yaml"),
        ),
        step(
            "See what made a number, from record to record: name this page, a figure or table beside it, or a key.",
            "spinledger trace KEY".into(),
        ),
    ]
}

/// What the page shows, with all flags of each part.
fn main(task: &Task<'_>, parts: &[Part]) -> Result<Table, StepError> {
    let mut flags = Vec::new();
    for part in parts {
        let mut found: BTreeSet<String> = BTreeSet::new();
        for table in &part.record.tables {
            let table = part.table(task, &table.name)?;
            for row in 0..table.rows() {
                let own = table.text("flags", row).unwrap_or_default();
                found.extend(own.split(';').filter(|flag| !flag.is_empty()).map(str::to_owned));
            }
        }
        flags.push(Some(flags_text(&found.iter().map(String::as_str).collect::<Vec<_>>())));
    }
    let texts =
        |name: &str, get: fn(&Part) -> String| Column::texts(name, parts.iter().map(|part| Some(get(part))).collect());
    let columns = vec![
        texts("does", |part| part.does.clone()),
        texts("key", |part| part.record.key.to_string()),
        texts("content", |part| part.record.content.to_string()),
        Column::texts("flags", flags),
    ];
    Ok(Table { columns })
}
