//! The top of a pipeline.

use crate::expand::Expansion;
use crate::locate::Places;
use crate::order::order;
use crate::scan::AxisValues;
use crate::source::{Lines, Source};
use crate::step::{self, Step};
use crate::units::Units;
use crate::yaml::{self, Node};
use spinledger_terms::{Admission, Field, Kind, Mark, Path, Problem, Value, Vocabulary, admit_fields};
use std::collections::BTreeSet;

/// The version of the format that is read.
pub const FORMAT: i64 = 1;

/// Longest name of a pipeline or a step, since both name files.
const LONGEST_NAME: usize = 100;

/// A checked pipeline.
#[derive(Clone, Debug)]
pub struct Pipeline {
    /// Its name; names the results folder.
    pub name: String,
    /// What it is about.
    pub title: Option<String>,
    /// The seed of everything random in it; below 2^63.
    pub seed: u64,
    /// Its units.
    pub units: Units,
    /// Further plugin files and folders, as written.
    pub plugins: Vec<String>,
    /// The steps, each after those it needs, ties in the order of the file.
    pub steps: Vec<Step>,
    /// The text that it was read from.
    pub text: String,
}

impl Pipeline {
    /// The step of a name.
    pub fn step(&self, name: &str) -> Option<&Step> {
        self.steps.iter().find(|step| step.name == name)
    }
}

/// The plugin files and folders that a pipeline names, as far as they can be read: they are needed to build the vocabulary that the
/// pipeline is then checked against.
pub fn plugin_paths(source: &Source) -> Vec<String> {
    let document = yaml::read(source.text()).0;
    let plugins = document.as_ref().and_then(|d| d.root.get("plugins")).map(Node::value);
    let list = plugins.as_ref().and_then(Value::as_list).unwrap_or(&[]);
    list.iter().filter_map(Value::as_str).filter(|path| !path.is_empty()).map(str::to_owned).collect()
}

/// Reads and checks a pipeline. Scans are expanded as far as their values are known, so that every value is checked.
///
/// # Errors
/// Every problem found, in the order of the text as far as that is known; [`render`](crate::render) shows them.
pub fn read(source: &Source, vocabulary: &Vocabulary) -> Result<Pipeline, Vec<Problem>> {
    if let Some(before) = source.broken() {
        let path = Lines::new(source.text()).path(before);
        let problem = Problem::at_value(&path, "the file is not UTF-8 text from here on");
        return Err(vec![problem.expected("a text file in UTF-8")]);
    }
    let (document, mut problems) = yaml::read(source.text());
    let Some(document) = document else { return Err(problems) };
    let top = Path::top();
    let value = match document.root.value() {
        Value::Map(map) => map,
        Value::Null => {
            let problem = Problem::at_value(&Path::at(1, 1), "there is nothing in this file");
            problems.push(problem.expected(format!("a pipeline: `spinledger: {FORMAT}`, `pipeline`, `seed`, `steps`")));
            return Err(problems);
        }
        other => {
            let problem = Problem::at_value(&top, format!("{} stands where a pipeline is expected", other.what()));
            problems.push(problem.expected("a mapping: spinledger, pipeline, seed, steps"));
            return Err(problems);
        }
    };
    if let Some(version) = value.get("spinledger").and_then(Value::as_i64)
        && version != FORMAT
    {
        // Nothing else can be judged by the rules of this version.
        let (message, expected) = if version > FORMAT {
            let message = format!("this pipeline is in format {version}, and this program reads format {FORMAT}");
            (message, format!("{FORMAT}, or a newer spinledger"))
        } else {
            (format!("there is no format {version}"), FORMAT.to_string())
        };
        return Err(vec![Problem::at_value(&top.key("spinledger"), message).expected(expected)]);
    }
    let mut references = Vec::new();
    let mut admission = Admission { vocabulary, problems: &mut problems, references: &mut references };
    admit_fields(&fields(), &value, &top, "a pipeline", &mut admission);
    let units = value.get("units").map(|raw| Units::read(raw, &top.key("units"), &mut admission)).unwrap_or_default();
    let text = |key: &str| value.get(key).and_then(Value::as_str).map(str::to_owned);
    if let Some(name) = text("pipeline") {
        check_name(&name, "a pipeline", &top.key("pipeline"), Mark::Value, &mut problems);
    }
    let mut steps = Vec::new();
    if let Some(node @ Node::Map(_)) = document.root.get("steps") {
        steps = read_steps(source, node, vocabulary, &mut problems);
    }
    if !problems.is_empty() {
        let mut told = BTreeSet::new();
        problems.retain(|p| told.insert((p.path.clone(), p.message.clone())));
        return Err(problems);
    }
    let list = value.get("plugins").and_then(Value::as_list).unwrap_or(&[]);
    Ok(Pipeline {
        name: text("pipeline").unwrap_or_default(),
        title: text("title"),
        seed: value.get("seed").and_then(Value::as_i64).and_then(|seed| u64::try_from(seed).ok()).unwrap_or(0),
        units,
        plugins: list.iter().filter_map(Value::as_str).map(str::to_owned).collect(),
        steps,
        text: source.text().to_owned(),
    })
}

/// The keys of a pipeline.
fn fields() -> Vec<Field> {
    let format = Kind::Integer { min: None, max: None };
    let seed = Kind::Integer { min: Some(0), max: Some(i64::MAX) };
    vec![
        Field::new("spinledger", format, "version of the format").required(),
        Field::new("pipeline", Kind::Text {}, "the name").required(),
        Field::new("title", Kind::Text {}, "what it is about"),
        Field::new("seed", seed, "seed of everything random").required(),
        // Read by `Units`, which says what is wrong with them.
        Field::new("units", Kind::Any {}, "units of energies and temperatures"),
        Field::new("plugins", Kind::List { of: Box::new(Kind::Text {}), min: 0, max: None }, "further plugins"),
        Field::new("steps", Kind::Map { of: Box::new(Kind::Any {}) }, "the steps").required(),
    ]
}

fn read_steps(source: &Source, node: &Node, vocabulary: &Vocabulary, problems: &mut Vec<Problem>) -> Vec<Step> {
    let path = Path::top().key("steps");
    if node.entries().is_empty() {
        problems.push(Problem::at_value(&path, "a pipeline without steps").expected("at least one step"));
    }
    let (mut names, mut steps, mut references) = (Vec::<String>::new(), Vec::new(), Vec::new());
    for entry in node.entries() {
        let here = path.key(&entry.key);
        check_name(&entry.key, "a step", &here, Mark::Key, problems);
        if let Some(twin) = names.iter().find(|name| name.eq_ignore_ascii_case(&entry.key)) {
            let message =
                format!("`{}` and `{twin}` differ in case only: on some systems they would be one file", entry.key);
            problems.push(Problem::at_key(&here, message).other(path.key(twin), "the other"));
        }
        let outcome = step::read(&entry.key, &entry.value, &here, vocabulary, problems);
        if let Some(step) = &outcome.step {
            expand_early(step, vocabulary, problems);
        }
        names.push(entry.key.clone());
        steps.push(outcome.step);
        references.push(outcome.references);
    }
    let line = |name: &str| Places::new(source).place(&path.key(name), Mark::Key).line;
    let sorted = order(&names, &references, &line, problems);
    sorted.into_iter().filter_map(|i| steps[i].take()).collect()
}

/// Expands a scan that waits for no other step, for the sake of what may be wrong with it.
fn expand_early(step: &Step, vocabulary: &Vocabulary, problems: &mut Vec<Problem>) {
    let mut axes = step.scan.iter().flat_map(|block| &block.axes);
    if axes.any(|axis| matches!(axis.values, AxisValues::FromStep(_))) {
        return;
    }
    match step.expand(&|_| None, vocabulary) {
        Ok(Expansion::Points(_) | Expansion::Waits(_)) => {}
        Err(found) => problems.extend(found),
    }
}

/// Names become file names: letters, digits, `-` and `_`; a pipeline's also `.`, though not in front.
fn check_name(name: &str, of: &str, path: &Path, mark: Mark, problems: &mut Vec<Problem>) {
    let dots = of == "a pipeline";
    let good = |c: char| c.is_ascii_alphanumeric() || c == '-' || c == '_' || (dots && c == '.');
    let message = if name.is_empty() {
        format!("the name of {of} is empty")
    } else if let Some(bad) = name.chars().find(|c| !good(*c)) {
        format!("`{bad}` cannot be in the name of {of}, which names files")
    } else if name.starts_with('.') {
        format!("the name of {of} begins with `.`, which hides files")
    } else if name.len() > LONGEST_NAME {
        format!("the name of {of} has {} letters, and names files", name.len())
    } else {
        return;
    };
    let expected = if dots { "letters, digits, `-`, `_` and `.`" } else { "letters, digits, `-` and `_`" };
    let problem = Problem { mark, ..Problem::at_value(path, message) };
    problems.push(problem.expected(format!("at most {LONGEST_NAME} {expected}")));
}
