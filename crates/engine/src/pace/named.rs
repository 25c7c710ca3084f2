//! What is to be measured: named as in a pipeline, and checked as one.

use super::ordering;
use crate::study;
use spinledger_pipeline::{Expansion, Source};
use spinledger_plan::dynamics::Dynamics;
use spinledger_terms::{ItemKind, Path, Problem, Segment, Vocabulary};
use std::collections::BTreeSet;

/// A combination as named: each a value as it stands in a pipeline, on one line.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Named {
    /// The lattice: `{ plugin: square, size: 512 }`.
    pub lattice: String,
    /// The model: `ising`.
    pub model: String,
    /// The rule: `{ plugin: metropolis, lanes: 64 }`.
    pub update: String,
    /// Whether the combination may be left out where the rule is not there or cannot serve: nobody asked for this rule.
    pub optional: bool,
}

/// A combination that may be run.
#[derive(Clone, Debug)]
pub struct Case {
    /// As named.
    pub named: Named,
    /// As it is run.
    pub dynamics: Dynamics,
}

/// What was named is wrong. The source is the pipeline that was made of it, for showing where.
#[derive(Debug)]
pub struct Refused {
    /// The text that was checked.
    pub source: Source,
    /// All that is wrong with it.
    pub problems: Vec<Problem>,
}

/// What is observed, in order of preference: energy and the magnetisation, or what the model has in its place.
const OBSERVED: [&str; 3] = ["[energy, magnetisation]", "[energy, order-parameter]", "[energy]"];

/// Admits combinations by the rules of a pipeline. Without a temperature each is run near that at which it orders, where that is known. Values that go
/// over several lines are refused, as they could say anything.
///
/// # Errors
/// Everything that is wrong, once for each value that is named.
pub fn admit(named: &[Named], temperature: Option<&str>, vocabulary: &Vocabulary) -> Result<Vec<Case>, Refused> {
    let mut wanted = Vec::with_capacity(named.len());
    for one in named {
        let alone = |observed| checked(&[(one, observed)], temperature, vocabulary);
        let of_observing = |problem: &Problem| part(problem) == Some("observe");
        let mut fits = OBSERVED.into_iter().map(|observed| (observed, alone(observed)));
        let fit = fits.find(|(_, outcome)| match outcome {
            Ok(_) => true,
            Err(refused) => !refused.problems.iter().any(of_observing),
        });
        match fit {
            Some((_, Err(refused)))
                if one.optional && refused.problems.iter().all(|problem| part(problem) == Some("update")) => {}
            Some((observed, _)) => wanted.push((one, observed)),
            None => wanted.push((one, OBSERVED[0])),
        }
    }
    let dynamics = checked(&wanted, temperature, vocabulary)?;
    Ok(wanted.iter().zip(dynamics).map(|((named, _), dynamics)| Case { named: (*named).clone(), dynamics }).collect())
}

/// The key of a step that a problem is about.
fn part(problem: &Problem) -> Option<&str> {
    match problem.path.0.get(2) {
        Some(Segment::Key(key)) => Some(key),
        _ => None,
    }
}

/// The name of a combination's step in the pipeline that is made of it.
fn step_name(number: usize) -> String {
    format!("case-{}", number + 1)
}

/// A pipeline of a step for each combination with what it observes.
fn pipeline(wanted: &[(&Named, &str)], temperature: Option<&str>) -> String {
    let mut text = String::from("spinledger: 1\npipeline: pace\nseed: 1\nsteps:\n");
    for (number, (named, observed)) in wanted.iter().enumerate() {
        let Named { lattice, model, update, .. } = named;
        let (name, temperature) = (step_name(number), temperature.unwrap_or("1"));
        text.push_str(&format!(
            "  {name}:\n    does: sample\n    lattice: {lattice}\n    model: {model}\n    update: {update}\n    \
             observe: {observed}\n    temperature: {temperature}\n    measure: 1\n"
        ));
    }
    text
}

fn checked(
    wanted: &[(&Named, &str)],
    temperature: Option<&str>,
    vocabulary: &Vocabulary,
) -> Result<Vec<Dynamics>, Refused> {
    let source = Source::new("command line", pipeline(wanted, temperature));
    let mut problems = lines(wanted, temperature);
    if !problems.is_empty() {
        return Err(Refused { source, problems });
    }
    let mut all = Vec::new();
    match spinledger_pipeline::read(&source, vocabulary) {
        Err(found) => problems.extend(found),
        Ok(pipeline) => {
            study::check(&pipeline, vocabulary, &mut problems);
            for number in 0..wanted.len() {
                let Some(step) = pipeline.step(&step_name(number)) else { continue };
                let Ok(Expansion::Points(points)) = step.expand(&|_| None, vocabulary) else { continue };
                let [point] = points.as_slice() else { continue };
                let Some(mut dynamics) = Dynamics::of(&point.body(), pipeline.seed, &pipeline.units, vocabulary) else {
                    continue;
                };
                if dynamics.update.len() != 1 {
                    let message = "rules are measured one by one";
                    problems.push(Problem::at_value(&point.place("update"), message).expected("one rule"));
                }
                if temperature.is_none() {
                    dynamics.temperature = ordering::near(&dynamics.lattice, &dynamics.model);
                    dynamics.inverse_temperature = 1.0 / dynamics.temperature;
                }
                all.push(dynamics);
            }
        }
    }
    if problems.is_empty() && all.len() != wanted.len() {
        // A value that closes its own mapping and opens others.
        problems.push(Problem::at_value(&Path::top().key("steps"), "not every value is one value"));
    }
    if problems.is_empty() { Ok(all) } else { Err(Refused { source, problems: once(wanted, problems) }) }
}

/// Values that are not one line.
fn lines(wanted: &[(&Named, &str)], temperature: Option<&str>) -> Vec<Problem> {
    let mut problems = Vec::new();
    for (number, (named, _)) in wanted.iter().enumerate() {
        let place = Path::top().key("steps").key(step_name(number));
        let values = [("lattice", &*named.lattice), ("model", &*named.model), ("update", &*named.update)];
        for (key, value) in values.into_iter().chain(temperature.map(|t| ("temperature", t))) {
            if value.chars().any(char::is_control) {
                problems.push(
                    Problem::at_key(&place.key(key), format!("the {key} does not stand on one line"))
                        .expected("one line, as in `{ plugin: square, size: 512 }`"),
                );
            }
        }
    }
    once(wanted, problems)
}

/// Each problem of a value once, however many combinations it takes part in.
fn once(wanted: &[(&Named, &str)], problems: Vec<Problem>) -> Vec<Problem> {
    let mut told = BTreeSet::new();
    let mut first = |problem: &Problem| {
        let Some(Segment::Key(step)) = problem.path.0.get(1) else { return true };
        let Some((named, _)) = (0..wanted.len()).find(|n| step_name(*n) == *step).map(|n| wanted[n]) else {
            return true;
        };
        let value = match part(problem) {
            Some("lattice") => named.lattice.clone(),
            Some("model") => named.model.clone(),
            // What is wrong with a rule may be that it does not serve this model on this lattice.
            _ => format!("{}\n{}\n{}", named.lattice, named.model, named.update),
        };
        let by_name = problem.message.starts_with("there is no");
        let value = if by_name { String::new() } else { value };
        told.insert((problem.path.0[2..].to_vec(), problem.message.clone(), value))
    };
    problems.into_iter().filter(|problem| first(problem)).collect()
}

/// What is measured for who names nothing: standard rules as far as they are found, on lattices of usual sizes.
pub fn standard(vocabulary: &Vocabulary) -> Vec<Named> {
    const ISING: &str = "ising";
    const THREE: &str = "{ plugin: potts, q: 3 }";
    const SETS: [(&str, &str, &[&str]); 6] = [
        (
            "{ plugin: square, size: 512 }",
            ISING,
            &[
                "metropolis",
                "{ plugin: metropolis, lanes: 64 }",
                "heat-bath",
                "multi-spin",
                "{ plugin: multi-spin, lanes: 512 }",
                "wolff",
                "swendsen-wang",
            ],
        ),
        ("{ plugin: square, size: 2048 }", ISING, &["metropolis", "heat-bath", "multi-spin", "wolff", "swendsen-wang"]),
        ("{ plugin: square, size: 512 }", THREE, &["metropolis", "{ plugin: metropolis, lanes: 64 }", "swendsen-wang"]),
        ("{ plugin: cubic, size: 64 }", ISING, &["metropolis", "multi-spin", "swendsen-wang"]),
        ("{ plugin: triangular, size: 512 }", ISING, &["metropolis", "multi-spin", "swendsen-wang"]),
        ("{ plugin: square, size: 64 }", ISING, &["{ plugin: metropolis, lanes: 64 }"]),
    ];
    let there = |kind: ItemKind, value: &str| {
        let word = value.split_once("plugin: ").map_or(value, |(_, rest)| rest);
        let word = word.split([',', ' ', '}']).next().unwrap_or(word);
        vocabulary.item(kind, word).is_some()
    };
    let mut all = Vec::new();
    for (lattice, model, rules) in SETS {
        if !there(ItemKind::Lattice, lattice) || !there(ItemKind::Model, model) {
            continue;
        }
        all.extend(rules.iter().map(|rule| Named {
            lattice: lattice.into(),
            model: model.into(),
            update: (*rule).into(),
            optional: true,
        }));
    }
    all
}
