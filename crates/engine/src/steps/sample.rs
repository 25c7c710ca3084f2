//! `sample`: time series from chains.

mod course;
mod packing;

use course::Known;
pub(crate) use course::{StartStep, must_keep, start_step};

use self::packing::{by_class, check_lanes, check_packing};
use super::{Checked, Output, Split, StepError, StepKind, Task, as_is};
use spinledger_pipeline::Point;
use spinledger_plan::blocks::{block_rows, most_rows};
use spinledger_plan::dynamics::nominal_sites;
use spinledger_plan::sample::Ask;
use spinledger_plan::states::{Start, StateRef};
use spinledger_terms::{
    Field, Item, ItemKind, Kind, ModelTraits, Problem, ScanSpec, StepSpec, Trait, Value, Vocabulary, nearest,
};
use std::collections::BTreeSet;

/// The kind.
pub const KIND: StepKind = StepKind {
    does: "sample",
    revision: spinledger_plan::dynamics::REVISION,
    split: Split::Chains,
    spec,
    check,
    complete: as_is,
    analyse,
};

/// Most sites of a lattice: they are numbered with 32 bits.
const MOST_SITES: u64 = u32::MAX as u64;

/// Most sweeps of a chain: doubles count no further.
const MOST_SWEEPS: u64 = 1 << 53;

/// Smallest temperature, and reciprocal of the largest.
const SMALLEST: f64 = 1e-300;

fn spec() -> StepSpec {
    let plugin = |of| Kind::Plugin { of };
    let rules = Kind::Either { of: vec![plugin(ItemKind::Update), Kind::list(plugin(ItemKind::Update))] };
    let equilibrate = Kind::Either { of: vec![Kind::COUNT_FROM_ZERO, Kind::words(&["auto"])] };
    StepSpec {
        does: "sample".into(),
        about: "time series of observables from Markov chains".into(),
        fields: vec![
            Field::new("lattice", plugin(ItemKind::Lattice), "sites and bonds").required(),
            Field::new("model", plugin(ItemKind::Model), "the Hamiltonian").required(),
            Field::new("update", rules, "the rule, or several that make one sweep in turn").required(),
            Field::new("observe", Kind::list(plugin(ItemKind::Observable)), "what is measured").required(),
            Field::new("temperature", Kind::POSITIVE, "temperature").unit("temperature"),
            Field::new("inverse_temperature", Kind::NOT_NEGATIVE, "1/(k_B T)").unit("1/energy"),
            Field::new("equilibrate", equilibrate, "sweeps before the first measurement").default(Value::text("auto")),
            Field::new("measure", Kind::COUNT, "measurements per chain").required(),
            Field::new("every", Kind::COUNT, "sweeps between measurements").default(Value::Integer(1)),
            Field::new("chains", Kind::Integer { min: Some(1), max: Some(1 << 20) }, "independent chains per point")
                .default(Value::Integer(4)),
            Field::new("start", course::start_kind(), "configuration to start from").default(Value::text("random")),
            Field::new("keep", course::keep_kind(), "configurations to keep"),
            Field::new("follow", Kind::Text {}, "a scanned parameter along which points follow each other"),
            Field::new("settle", Kind::COUNT_FROM_ZERO, "sweeps of adapting step widths before everything")
                .default(Value::Integer(0)),
        ],
        scan: Some(ScanSpec {
            no_column: ["measure", "equilibrate", "every", "chains", "settle", "keep", "keep.every", "keep.states"]
                .map(String::from)
                .to_vec(),
            larger: ["measure", "chains"].map(String::from).to_vec(),
            follow: "follow".into(),
        }),
    }
}

fn analyse(_: &Task<'_>) -> Result<Output, StepError> {
    Err(StepError("sampling is not an analysis".into()))
}

/// What a point asks for beside its dynamics; `kept` are the configurations that it begins from, where it begins from an earlier step's.
pub fn ask(body: &Value, kept: Option<Vec<StateRef>>) -> Ask {
    let count = |name: &str| body.get(name).and_then(Value::as_i64).unwrap_or(1);
    let starts = match (kept, body.get("start").and_then(Value::as_str)) {
        (Some(kept), _) => vec![Start::States(kept)],
        (None, Some("both")) => vec![Start::Ordered, Start::Random],
        (None, Some("ordered")) => vec![Start::Ordered],
        (None, _) => vec![Start::Random],
    };
    let discard = body.get("equilibrate").and_then(Value::as_i64).is_none();
    let chains = u32::try_from(count("chains")).unwrap_or(1);
    Ask { measure: count("measure") as u64, chains, starts, discard, keep: course::kept_of(body) }
}

fn check(step: &Checked<'_>, problems: &mut Vec<Problem>) {
    // Many points share their mistakes: each is told once, at the first point that has it.
    let mut told = BTreeSet::new();
    let mut known = Known::default();
    for point in step.points {
        let mut found = Vec::new();
        check_point(step, point, &mut known, &mut found);
        for problem in found {
            if told.insert((problem.path.clone(), problem.message.clone())) {
                problems.push(problem);
            }
        }
    }
}

fn check_point(step: &Checked<'_>, point: &Point, known: &mut Known, problems: &mut Vec<Problem>) {
    let body = &point.body();
    match (body.get("temperature"), body.get("inverse_temperature")) {
        (None, None) => problems.push(
            Problem::at_value(step.path, "a sample step needs a temperature")
                .expected("`temperature` or `inverse_temperature`, in the step or in its scan"),
        ),
        (Some(_), Some(_)) => problems.push(
            Problem::at_key(&point.place("inverse_temperature"), "temperature and inverse temperature are both given")
                .expected("one of them")
                .other(point.place("temperature"), "the other"),
        ),
        _ => {}
    }
    check_temperature(point, body, problems);
    course::check(step, point, body, known, problems);
    let item = |kind: ItemKind, value: Option<&Value>| -> Option<Item> {
        Some(step.vocabulary.item(kind, value?.get("plugin")?.as_str()?)?.1.clone())
    };
    let Some(lattice) = item(ItemKind::Lattice, body.get("lattice")) else { return };
    let Some(model) = item(ItemKind::Model, body.get("model")) else { return };
    check_lattice(point, body, &lattice, &model, problems);
    check_lengths(point, body, &lattice, problems);
    check_model(point, body, &lattice, &model, problems);
    if let Some(update) = body.get("update") {
        let coupled = by_class(body.get("model"), &model, &lattice);
        let listed = update.as_list().is_some();
        for (i, rule) in update.as_list().unwrap_or(std::slice::from_ref(update)).iter().enumerate() {
            let place = if listed { format!("update.{i}") } else { "update".to_owned() };
            if let Some(rule) = item(ItemKind::Update, Some(rule)) {
                let able = check_rule(step.vocabulary, point, coupled.as_ref(), &place, &rule, &model, problems);
                check_packing(point, body, &place, &rule, &lattice, &able, problems);
            }
        }
        check_lanes(step.vocabulary, point, update, body, &lattice, problems);
    }
    let mut columns: BTreeSet<String> = BTreeSet::new();
    for (i, observable) in body.get("observe").and_then(Value::as_list).unwrap_or_default().iter().enumerate() {
        let Some(observable) = item(ItemKind::Observable, Some(observable)) else { continue };
        let place = point.place(&format!("observe.{i}"));
        let Some(traits) = &observable.observable else { continue };
        for need in &traits.needs {
            if !offers(&model, body.get("model"), need) {
                let message =
                    format!("the observable `{}` cannot be measured with the model `{}`", observable.name, model.name);
                problems.push(Problem::at_value(&place, message).expected(format!("a model that offers: {need}")));
            }
        }
        if traits.chains != 1 {
            let message = format!("the observable `{}` reads two chains at once", observable.name);
            problems.push(Problem::at_value(&place, message).expected("an observable of one chain"));
        }
        for column in &traits.columns {
            if !columns.insert(column.name.clone()) {
                problems.push(Problem::at_value(&place, format!("the column `{}` is observed twice", column.name)));
            }
        }
    }
}

/// Temperatures whose reciprocal cannot be told from infinity or zero.
fn check_temperature(point: &Point, body: &Value, problems: &mut Vec<Problem>) {
    for name in ["temperature", "inverse_temperature"] {
        let value = body.get(name).and_then(Value::as_f64).filter(|value| *value != 0.0);
        if value.is_some_and(|value| !(SMALLEST..=1.0 / SMALLEST).contains(&value)) {
            let expected = if name == "temperature" {
                format!("from {SMALLEST:e} to {:e}; infinite is `inverse_temperature: 0`", 1.0 / SMALLEST)
            } else {
                format!("0, or from {SMALLEST:e} to {:e}", 1.0 / SMALLEST)
            };
            let message = format!("no number has the reciprocal of this {}", name.replace('_', " "));
            problems.push(Problem::at_value(&point.place(name), message).expected(expected));
        }
    }
}

/// Sweeps and blocks must be countable; what is more could not be run in a lifetime either.
fn check_lengths(point: &Point, body: &Value, lattice: &Item, problems: &mut Vec<Problem>) {
    let count = |name: &str| body.get(name).and_then(Value::as_i64).and_then(|n| u64::try_from(n).ok());
    let (measure, every) = (count("measure").unwrap_or(1), count("every").unwrap_or(1));
    let before = count("settle").unwrap_or(0).saturating_add(count("equilibrate").unwrap_or(0));
    if measure.saturating_mul(every).saturating_add(before) > MOST_SWEEPS {
        let message = "a chain would have more sweeps than can be counted";
        let expected = format!("settle + equilibrate + measure * every of at most {MOST_SWEEPS}");
        problems.push(Problem::at_value(&point.place("measure"), message).expected(expected));
        return;
    }
    let most = most_rows(block_rows(nominal_sites(body.get("lattice").unwrap_or(&Value::Null), lattice), every));
    if measure > most {
        let message = "a chain would have more blocks than can be numbered";
        problems.push(Problem::at_value(&point.place("measure"), message).expected(format!("at most {most}")));
    }
}

fn check_lattice(point: &Point, body: &Value, lattice: &Item, model: &Item, problems: &mut Vec<Problem>) {
    let Some(traits) = &lattice.lattice else { return };
    let Some(parameters) = body.get("lattice") else { return };
    let size_place = point.place(&format!("lattice.{}", traits.size));
    if nominal_sites(parameters, lattice) > MOST_SITES {
        let message = "the lattice would have more sites than can be numbered";
        problems.push(Problem::at_value(&size_place, message).expected(format!("at most {MOST_SITES} sites")));
    }
    let Some(boundaries) = &traits.boundaries else { return };
    let place = point.place(&format!("lattice.{}", boundaries.parameter));
    let per_direction = |name: &str| -> Vec<Value> {
        match parameters.at(name) {
            Some(Value::List(list)) => list.clone(),
            Some(value) => vec![value.clone(); traits.dimension as usize],
            None => Vec::new(),
        }
    };
    let words = per_direction(&boundaries.parameter);
    let sizes = per_direction(&traits.size);
    let any = |word: &str| words.iter().any(|w| w.as_str() == Some(word));
    if any("antiperiodic") && !offers(model, body.get("model"), "negation") {
        let message = format!("`antiperiodic` needs spins with a negative; the model `{}` has none", model.name);
        problems.push(Problem::at_value(&place, message).expected("periodic, free, plus or minus"));
    }
    if (any("plus") || any("minus")) && !offers(model, body.get("model"), "directions") {
        let message = format!("the model `{}` does not know up and down, which pinned boundaries need", model.name);
        problems.push(Problem::at_value(&place, message).expected("periodic or free"));
    }
    for (word, size) in words.iter().zip(&sizes) {
        let small = size.as_i64().is_some_and(|n| n < boundaries.antiperiodic_minimum);
        if word.as_str() == Some("antiperiodic") && small {
            let message = "an antiperiodic direction cannot be this short";
            let expected = format!("a size of at least {}", boundaries.antiperiodic_minimum);
            problems
                .push(Problem::at_value(&size_place, message).expected(expected).other(place.clone(), "the boundary"));
        }
    }
}

/// Couplings by class must name classes that the lattice has.
fn check_model(point: &Point, body: &Value, lattice: &Item, model: &Item, problems: &mut Vec<Problem>) {
    let (Some(lattice), Some(model)) = (&lattice.lattice, &model.model) else { return };
    if lattice.classes.is_empty() {
        return;
    }
    for name in &model.by_class {
        let Some(Value::Map(map)) = body.get("model").and_then(|m| m.at(name)) else { continue };
        for key in map.keys() {
            let prefix = format!("{key}.");
            if lattice.classes.iter().all(|class| class != key && !class.starts_with(&prefix)) {
                let mut known: Vec<&str> = lattice.classes.iter().map(String::as_str).collect();
                known.extend(lattice.classes.iter().filter_map(|class| class.split('.').next()));
                known.sort_unstable();
                known.dedup();
                let place = point.place(&format!("model.{name}")).key(key);
                let near = nearest(key, known.iter().copied());
                let problem = Problem::at_key(&place, format!("the lattice has no bond class `{key}`"));
                problems.push(problem.expected(format!("one of: {}", known.join(", "))).nearest(near));
            }
        }
    }
}

/// Checks a rule against a model; returns the rules that serve it.
fn check_rule<'a>(
    vocabulary: &'a Vocabulary,
    point: &Point,
    parameters: Option<&Value>,
    place: &str,
    rule: &Item,
    model: &Item,
    problems: &mut Vec<Problem>,
) -> Vec<&'a str> {
    let able: BTreeSet<&str> = vocabulary
        .items
        .iter()
        .map(|(_, item)| item)
        .filter(|item| item.kind == ItemKind::Update && refusals(item, model, parameters).is_empty())
        .map(|item| item.name.as_str())
        .collect();
    let able: Vec<&str> = able.into_iter().collect();
    let reasons = refusals(rule, model, parameters);
    if !reasons.is_empty() {
        let expected = if able.is_empty() {
            "no rule that was found serves it".into()
        } else {
            format!("one of: {}", able.join(", "))
        };
        let reasons = reasons.join("; ");
        let message = format!("the rule `{}` cannot serve the model `{}`: {reasons}", rule.name, model.name);
        problems.push(Problem::at_value(&point.place(place), message).expected(expected));
    }
    able
}

/// Why a rule cannot serve a model with these parameters; empty where it can.
fn refusals(rule: &Item, model: &Item, parameters: Option<&Value>) -> Vec<String> {
    let (Some(rule), Some(traits)) = (&rule.update, &model.model) else {
        return vec!["its manifest is incomplete".into()];
    };
    let mut reasons = Vec::new();
    for form in traits.forms.iter().filter(|form| !rule.forms.contains(form)) {
        reasons.push(format!("it does not serve energies of the form `{form}`"));
    }
    if let (Some(most), Some(states)) = (rule.most_states, states_of(traits, parameters))
        && states > most
    {
        reasons.push(format!("it serves at most {most} states, here are {states}"));
    }
    for need in rule.needs.iter().filter(|need| !offers(model, parameters, need)) {
        reasons.push(missing(model, parameters, need));
    }
    reasons
}

/// How many states the spins of a model with these parameters have, as far as its manifest tells.
pub(crate) fn states_of(traits: &ModelTraits, parameters: Option<&Value>) -> Option<u64> {
    let given = || parameters?.at(&traits.states_parameter)?.as_i64().and_then(|q| u64::try_from(q).ok());
    traits.states.or_else(given)
}

/// How the spins of a model with these parameters are shown: `spins` by their values, `colours`, `angles`, `states` by number.
pub(crate) fn shown_as(model: &Item, parameters: Option<&Value>) -> &'static str {
    [("scalar", "spins"), ("colours", "colours"), ("vectors", "angles")]
        .into_iter()
        .find(|(offer, _)| offers(model, parameters, offer))
        .map_or("states", |(_, shown)| shown)
}

/// In words, why a need is not met: never offered, or spoiled by a parameter.
fn missing(model: &Item, parameters: Option<&Value>, need: &str) -> String {
    let wanted: Vec<&str> = need.split('|').collect();
    let spoiled =
        model.model.iter().flat_map(|m| &m.offers).filter(|t| wanted.contains(&t.name.as_str())).find_map(|t| {
            let condition = t.unless.iter().find(|c| parameters.is_some_and(|p| c.holds(p)))?;
            Some(format!("it needs {}, and `{}` is {}", words_of(&t.name), condition.parameter, condition.is))
        });
    spoiled.unwrap_or_else(|| {
        let wanted: Vec<&str> = wanted.into_iter().map(words_of).collect();
        format!("it needs {}", wanted.join(" or "))
    })
}

/// What a trait means, for messages.
fn words_of(name: &str) -> &str {
    match name {
        "scalar" => "states with spin values",
        "negation" => "spins with a negative",
        "directions" => "known directions",
        "inversion" => "an energy that is unchanged when all spins are reversed",
        "permutation" => "an energy that is unchanged when colours are permuted",
        "ferromagnetic" => "couplings that are not negative",
        "uniform" => "couplings of one strength",
        "colours" => "Potts colours",
        "vectors" => "vector spins",
        other => other,
    }
}

/// Whether a model with these parameters offers one of the traits in `need` (`a|b`).
fn offers(model: &Item, parameters: Option<&Value>, need: &str) -> bool {
    let traits: &[Trait] = model.model.as_ref().map_or(&[], |m| m.offers.as_slice());
    need.split('|').any(|name| {
        traits
            .iter()
            .any(|t| t.name == name && !t.unless.iter().any(|condition| parameters.is_some_and(|p| condition.holds(p))))
    })
}
