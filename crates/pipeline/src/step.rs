//! One step: what it does, its parameters, what it needs.

use crate::scan::{self, Block};
use crate::yaml::Node;
use spinledger_terms::{Admission, Field, Kind, Path, Problem, StepSpec, Value, Vocabulary, admit_fields, nearest};
use std::collections::{BTreeMap, BTreeSet};
use std::sync::Arc;

/// A step of a pipeline, checked.
#[derive(Clone, Debug)]
pub struct Step {
    /// Its name.
    pub name: String,
    /// The word after `does`.
    pub does: String,
    /// Where it stands.
    pub path: Path,
    /// Its parameters as written, without `does` and `scan`, defaults not applied.
    pub body: BTreeMap<String, Value>,
    /// The blocks of its scan; none: the step is one point.
    pub scan: Vec<Block>,
    /// Names of the steps that it refers to, in byte order.
    pub needs: Vec<String>,
    /// What its kind says.
    pub spec: Arc<StepSpec>,
    /// Its canonical parameters, complete with defaults, where it has no scan.
    pub(crate) base: Arc<Value>,
}

/// What reading a step finds out, also when there is something wrong with it.
pub(crate) struct Outcome {
    /// The step, if there is nothing wrong with it.
    pub(crate) step: Option<Step>,
    /// Where it refers to which steps.
    pub(crate) references: Vec<(Path, String)>,
}

/// Reads the step at `path`.
pub(crate) fn read(
    name: &str,
    node: &Node,
    path: &Path,
    vocabulary: &Vocabulary,
    problems: &mut Vec<Problem>,
) -> Outcome {
    let before = problems.len();
    let nothing = Outcome { step: None, references: Vec::new() };
    let Value::Map(mut body) = node.value() else {
        let what = node.value().what();
        let problem = Problem::at_value(path, format!("{what} stands where a step is expected"));
        problems.push(problem.expected("a mapping: `does`, and what that kind of step takes"));
        return nothing;
    };
    let Some(spec) = kind(name, &body, path, vocabulary, problems) else { return nothing };
    let owner = format!("{} {} step", article(&spec.does), spec.does);
    if spec.scan.is_none() && body.contains_key("scan") {
        let problem = Problem::at_key(&path.key("scan"), format!("{owner} cannot be repeated over a scan"));
        let with: Vec<&str> = vocabulary.steps.iter().filter(|s| s.scan.is_some()).map(|s| s.does.as_str()).collect();
        let expected = match with.as_slice() {
            [] => "no `scan` here".to_owned(),
            with => format!("no `scan` here; kinds of step with one: {}", with.join(", ")),
        };
        problems.push(problem.expected(expected));
        body.remove("scan");
    }
    body.remove("does");
    let raw_scan = body.remove("scan");
    let spec = Arc::new(spec.clone());
    let mut references = Vec::new();
    let reader = Reader { path, owner: &owner, spec: &spec, body: &body, vocabulary };
    let (base, scan) = match &raw_scan {
        None => (reader.admit(&body, problems, &mut references), Vec::new()),
        Some(raw) => {
            let scan = scan::read(&reader, raw, problems, &mut references);
            (Some(Value::Null), scan)
        }
    };
    let needs: BTreeSet<String> = references.iter().map(|(_, name)| name.clone()).collect();
    let step = match base {
        Some(base) if problems.len() == before => Some(Step {
            name: name.to_owned(),
            does: spec.does.clone(),
            path: path.clone(),
            body: body.clone(),
            scan,
            needs: needs.into_iter().collect(),
            spec,
            base: Arc::new(base),
        }),
        _ => None,
    };
    Outcome { step, references }
}

/// The kind of a step, by its `does`.
fn kind<'a>(
    name: &str,
    body: &BTreeMap<String, Value>,
    path: &Path,
    vocabulary: &'a Vocabulary,
    problems: &mut Vec<Problem>,
) -> Option<&'a StepSpec> {
    let names = || vocabulary.steps.iter().map(|s| s.does.as_str());
    let expected = format!("one of: {}", names().collect::<Vec<_>>().join(", "));
    let problem = match body.get("does") {
        Some(Value::Text(does)) => match vocabulary.step(does) {
            Some(spec) => return Some(spec),
            None => Problem::at_value(&path.key("does"), format!("there is no kind of step `{does}`"))
                .nearest(nearest(does, names())),
        },
        Some(other) => Problem::at_value(&path.key("does"), format!("`does` is {}, not a word", other.what())),
        None => {
            let near =
                body.keys().find(|key| nearest(key, ["does"]).is_some() && vocabulary_word(body, key, vocabulary));
            match near {
                Some(key) => {
                    Problem::at_key(&path.key(key), format!("the step `{name}` has `{key}` instead of `does`"))
                        .nearest(Some("does"))
                }
                None => Problem::at_value(path, format!("the step `{name}` does not say what it does")),
            }
        }
    };
    let expected =
        if matches!(body.get("does"), Some(Value::Text(_))) { expected } else { format!("does: {expected}") };
    problems.push(problem.expected(expected));
    None
}

/// Whether the value of a key is a kind of step.
fn vocabulary_word(body: &BTreeMap<String, Value>, key: &str, vocabulary: &Vocabulary) -> bool {
    body.get(key).and_then(Value::as_str).is_some_and(|word| vocabulary.step(word).is_some())
}

/// What reading the parameters of one step needs.
pub(crate) struct Reader<'a> {
    pub(crate) path: &'a Path,
    /// "a sample step".
    pub(crate) owner: &'a str,
    pub(crate) spec: &'a StepSpec,
    pub(crate) body: &'a BTreeMap<String, Value>,
    pub(crate) vocabulary: &'a Vocabulary,
}

impl Reader<'_> {
    /// The canonical form of a whole body.
    pub(crate) fn admit(
        &self,
        body: &BTreeMap<String, Value>,
        problems: &mut Vec<Problem>,
        references: &mut Vec<(Path, String)>,
    ) -> Option<Value> {
        // `does` and `scan` are read elsewhere, and known here for the sake of those who misspell them.
        let mut fields = self.spec.fields.clone();
        fields.push(Field::new("does", Kind::Any {}, ""));
        if self.spec.scan.is_some() {
            fields.push(Field::new("scan", Kind::Any {}, ""));
        }
        let mut admission = Admission { vocabulary: self.vocabulary, problems, references };
        admit_fields(&fields, body, self.path, self.owner, &mut admission).map(Value::Map)
    }
}

/// The article of a word.
pub(crate) fn article(word: &str) -> &'static str {
    if word.starts_with(['a', 'e', 'i', 'o', 'u']) { "an" } else { "a" }
}
