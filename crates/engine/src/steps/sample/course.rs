//! What chains begin from, what is kept of them, what they follow: `start`, `keep` and `follow` of a sample step.

use crate::planning::starts::{Place, choose};
use crate::steps::Checked;
use crate::steps::cell::conditions;
use spinledger_pipeline::Point;
use spinledger_plan::states::Keep;
use spinledger_terms::{Field, Kind, Path, Problem, Value};
use std::collections::BTreeMap;

/// The kind of `start`.
pub(super) fn start_kind() -> Kind {
    let from = vec![
        Field::new("step", Kind::Step {}, "an earlier step that keeps configurations").required(),
        Field::new("where", conditions(), "which of its points").default(Value::Map(Default::default())),
    ];
    Kind::Either { of: vec![Kind::words(&["random", "ordered", "both"]), Kind::Tree { fields: from }] }
}

/// The kind of `keep`.
pub(super) fn keep_kind() -> Kind {
    Kind::Tree {
        fields: vec![
            Field::new("states", Kind::words(&["last"]), "that of the last measurement"),
            Field::new("every", Kind::COUNT, "that of every n-th measurement"),
        ],
    }
}

/// Which configurations a point keeps.
pub(crate) fn kept_of(body: &Value) -> Option<Keep> {
    let keep = body.get("keep")?;
    let every = keep.get("every").and_then(Value::as_i64).and_then(|n| u64::try_from(n).ok());
    Some(every.map_or(Keep::Last, Keep::Every))
}

/// An earlier step whose configurations chains begin from.
pub(crate) struct StartStep {
    /// Its name.
    pub(crate) step: String,
    /// Columns and values that its point must have.
    pub(crate) filter: BTreeMap<String, Value>,
}

/// The step that a point begins from, if any.
pub(crate) fn start_step(body: &Value) -> Option<StartStep> {
    let start = body.get("start")?;
    let filter = start.get("where").and_then(Value::as_map).cloned().unwrap_or_default();
    Some(StartStep { step: start.get("step")?.as_str()?.to_owned(), filter })
}

/// What was found out about steps to begin from: it is the same for all points that begin from one.
#[derive(Default)]
pub(super) struct Known {
    /// The places of their points, by name; None where something is wrong with the step, or its points wait for a table.
    places: BTreeMap<String, Option<Vec<Place>>>,
}

/// Checks them at a point.
pub(super) fn check(step: &Checked<'_>, point: &Point, body: &Value, known: &mut Known, problems: &mut Vec<Problem>) {
    check_keep(point, body, problems);
    check_follow(step, point, body, problems);
    if let Some(start) = start_step(body) {
        check_start(step, point, &start, known, problems);
    }
}

fn check_keep(point: &Point, body: &Value, problems: &mut Vec<Problem>) {
    let Some(keep) = body.get("keep") else { return };
    let expected = "`states: last`, or `every: n`";
    let place = point.place("keep");
    match (keep.get("states"), keep.get("every").and_then(Value::as_i64)) {
        (None, None) => {
            problems.push(Problem::at_value(&place, "`keep` does not say which configurations").expected(expected))
        }
        (Some(_), Some(_)) => problems.push(
            Problem::at_value(&place, "the last configuration and every n-th one cannot both be asked for")
                .expected(expected),
        ),
        (None, Some(every)) => {
            let measure = body.get("measure").and_then(Value::as_i64).unwrap_or(every);
            if every > measure {
                let message = format!("of {measure} measurements every {every}th is none");
                let problem = Problem::at_value(&point.place("keep.every"), message);
                problems.push(problem.expected(format!("at most {measure}")));
            }
        }
        (Some(_), None) => {}
    }
}

fn check_follow(step: &Checked<'_>, point: &Point, body: &Value, problems: &mut Vec<Problem>) {
    let Some(word) = body.get("follow").and_then(Value::as_str) else { return };
    let place = point.place("follow");
    if point.column("follow").is_some() {
        let problem = Problem::at_value(&place, "what is followed cannot be scanned");
        return problems.push(problem.expected("`follow` in the step itself"));
    }
    if point.column("position").is_none() {
        let problem = Problem::at_value(&place, format!("`follow` names `{word}`, which is not scanned"));
        return problems.push(problem.expected(format!("`scan: {{ {word}: ... }}`, in the order of the visits")));
    }
    let count = |name: &str| body.get(name).and_then(Value::as_i64).unwrap_or(0);
    if count("settle") == 0 && count("equilibrate") == 0 && count("measure") <= 1 {
        let message =
            "at no position would the chains be swept: the first measurement comes after `equilibrate` sweeps";
        let problem = Problem::at_value(&point.place("measure"), message);
        problems.push(problem.expected("`measure` of at least 2, or `equilibrate` of at least 1"));
    }
    let may = |path: &String| path == "temperature" || path == "inverse_temperature" || path.starts_with("model.");
    if let Some(path) = step.step.followed_paths().into_iter().find(|path| !may(path)) {
        let problem = Problem::at_value(&place, format!("chains cannot go on where `{path}` has changed"));
        problems
            .push(problem.expected("temperature, inverse_temperature, or a parameter of the model: model.field ..."));
    }
}

/// The sample step that a parameter names must keep configurations.
pub(crate) fn must_keep(step: &Checked<'_>, parameter: &str, problems: &mut Vec<Problem>) {
    let Some(own) = step.points.first() else { return };
    let name = own.get(parameter);
    if let Some(name) = name.as_ref().and_then(Value::as_str) {
        keeps(step, name, &own.place(parameter), problems);
    }
}

/// Whether a sample step keeps configurations at all of its points; said where it does not. Also where its points are not known yet.
fn keeps(step: &Checked<'_>, name: &str, place: &Path, problems: &mut Vec<Problem>) -> bool {
    let sampled = step.kinds.get(name).is_some_and(|does| does == "sample");
    let points = step.earlier.get(name).filter(|_| sampled).map_or(&[][..], Vec::as_slice);
    let Some(without) = points.iter().find(|point| kept_of(&point.body()).is_none()) else { return true };
    let problem = Problem::at_value(place, format!("`{name}` keeps no configurations"));
    let problem = problem.other(without.place("measure"), format!("`{name}` measures here"));
    problems.push(problem.expected(format!("`keep: {{ states: last }}` in `{name}`")));
    false
}

fn check_start(step: &Checked<'_>, point: &Point, start: &StartStep, known: &mut Known, problems: &mut Vec<Problem>) {
    if point.column("start").is_some() {
        // The column would name the step, and no result depends on names of steps.
        let problem = Problem::at_value(&point.place("start"), "a scan cannot name the step to begin from");
        return problems.push(problem.expected("`start: { step: ... }` in the step itself"));
    }
    let name = &start.step;
    let place = point.place("start.step");
    if !known.places.contains_key(name) {
        known.places.insert(name.clone(), places(step, name, &place, problems));
    }
    let Some(Some(places)) = known.places.get(name) else { return };
    if let Some(own) = Place::of(point, step.pipeline, step.vocabulary)
        && let Err(message) = choose(start, places, &own)
    {
        let expected = format!("a point of `{name}` for each point here: the same in all columns that both have");
        problems.push(Problem::at_value(&place, message).expected(expected));
    }
}

/// The places of the points of a step to begin from; None where it is none, or they are not known yet.
fn places(step: &Checked<'_>, name: &str, place: &Path, problems: &mut Vec<Problem>) -> Option<Vec<Place>> {
    let does = step.kinds.get(name)?;
    if does != "sample" {
        let problem = Problem::at_value(place, format!("`{name}` does {does}"));
        problems.push(problem.expected("a step that does: sample, and keeps configurations"));
        return None;
    }
    // Empty where its scan waits for a table.
    let points = step.earlier.get(name).filter(|points| !points.is_empty())?;
    if !keeps(step, name, place, problems) {
        return None;
    }
    points.iter().map(|point| Place::of(point, step.pipeline, step.vocabulary)).collect()
}
