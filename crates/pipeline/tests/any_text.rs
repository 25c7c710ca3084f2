//! Whatever the text: no panic, every place within it; and the same pipeline however it is written.

mod common;

use common::vocabulary;
use proptest::prelude::*;
use spinledger_pipeline::{Expansion, Pipeline, Source, located, read, render};
use spinledger_terms::Value;

/// Reads, locates and renders; checks that every place lies in the text.
fn digest(source: &Source) {
    let Err(problems) = read(source, &vocabulary()) else { return };
    assert!(!problems.is_empty());
    let lines: Vec<&str> = source.text().split('\n').collect();
    let inside = |line: usize, column: usize, width: usize| {
        let length = lines[line - 1].chars().count();
        assert!((1..=length + 1).contains(&column), "{line}:{column} of {length}");
        assert!(width >= 1 && column + width <= length.max(column) + 1, "{line}:{column} width {width} of {length}");
    };
    for problem in located(source, &problems) {
        inside(problem.line, problem.column, problem.width);
        if let Some(other) = problem.other {
            inside(other.line, other.column, other.width);
        }
    }
    let told = render(source, &problems);
    assert!(told.starts_with(&format!("{}:", source.name())));
}

/// A good pipeline with anchors, merge keys, blocks and references.
const GOOD: &str = r#"spinledger: 1
pipeline: good
title: "A: title, with # signs"
seed: 20261201
units: { energy: meV, moment: 3.0 }
plugins: [./mine]
steps:
  chains:
    does: sample
    lattice: &lattice { plugin: square, size: 16, boundary: [periodic, free] }
    model: { plugin: ising, coupling: { first: 1, first.x: 0.5 } }
    update: [metropolis, { plugin: wolff, clusters: 2 }]
    observe:
      - energy
      - magnetisation
    temperature: 2.27
    scan:
      - lattice.size: [8, [12, 16]]
        temperature: { from: 2.2, to: 2.4, count: 3 }
      - { lattice.size: 8, temperature: [2.4, 3.0], measure: 50 }
    measure: 200
  more:
    <<: { every: 2, chains: 3 }
    does: sample
    lattice: *lattice
    model: ising
    update: wolff
    observe: [energy]
    temperature: 1
    measure: 10
  means: { does: averages, of: [chains, more] }
"#;

fn good() -> Pipeline {
    let source = Source::new("good.yaml", GOOD);
    read(&source, &vocabulary()).unwrap_or_else(|problems| panic!("{}", render(&source, &problems)))
}

#[test]
fn the_good_one_is_good() {
    let pipeline = good();
    assert_eq!((pipeline.name.as_str(), pipeline.seed), ("good", 20261201));
    assert_eq!(pipeline.units.field_unit(), "T");
    assert_eq!(pipeline.plugins, ["./mine"]);
    assert_eq!(pipeline.step("means").unwrap().needs, ["chains", "more"]);
    let more = pipeline.step("more").unwrap();
    let Ok(Expansion::Points(points)) = more.expand(&|_| None, &vocabulary()) else { panic!("no points") };
    assert_eq!(points[0].body().at("every"), Some(&Value::Integer(2)));
    assert_eq!(points[0].body().at("lattice.boundary.1"), Some(&Value::text("free")));
}

/// What a pipeline means, without its text.
fn meaning(pipeline: &Pipeline) -> String {
    let mut out = format!(
        "{} {:?} {} {:?} {:?}\n",
        pipeline.name, pipeline.title, pipeline.seed, pipeline.units, pipeline.plugins
    );
    let mut steps: Vec<_> = pipeline.steps.iter().collect();
    steps.sort_by_key(|step| &step.name);
    for step in steps {
        out.push_str(&format!("{} {} {:?}\n", step.name, step.does, step.needs));
        let Ok(Expansion::Points(points)) = step.expand(&|_| None, &vocabulary()) else { panic!("no points") };
        for point in points {
            let columns: Vec<String> = point.columns.iter().map(|(n, v)| format!("{n}={}", v.canonical())).collect();
            out.push_str(&format!("  {} {}\n", columns.join(" "), point.body().canonical()));
        }
    }
    out
}

/// How a document is written anew.
#[derive(Clone, Debug)]
struct Manner {
    /// Turns of keys, used round and round.
    turns: Vec<usize>,
    flow: bool,
    quotes: bool,
    comments: bool,
    crlf: bool,
}

fn manner() -> impl Strategy<Value = Manner> {
    (prop::collection::vec(0usize..7, 1..20), any::<bool>(), any::<bool>(), any::<bool>(), any::<bool>())
        .prop_map(|(turns, flow, quotes, comments, crlf)| Manner { turns, flow, quotes, comments, crlf })
}

struct Writer {
    manner: Manner,
    used: usize,
}

impl Writer {
    fn turned<'a>(&mut self, value: &'a tree::Tree) -> Vec<(&'a str, &'a tree::Tree)> {
        let mut entries: Vec<_> = value.entries().collect();
        if !entries.is_empty() {
            let turn = self.manner.turns[self.used % self.manner.turns.len()];
            self.used += 1;
            let at = turn % entries.len();
            entries.rotate_left(at);
            if turn % 2 == 1 {
                entries.reverse();
            }
        }
        entries
    }

    fn text(&self, text: &str) -> String {
        if self.manner.quotes { format!("{text:?}") } else { format!("'{text}'") }
    }

    fn flow(&mut self, value: &tree::Tree) -> String {
        match value {
            tree::Tree::Leaf(leaf) => leaf.clone(),
            tree::Tree::Text(text) => self.text(text),
            tree::Tree::List(items) => {
                let items: Vec<String> = items.iter().map(|item| self.flow(item)).collect();
                format!("[{}]", items.join(", "))
            }
            tree::Tree::Map(_) => {
                let entries = self.turned(value);
                let entries: Vec<String> =
                    entries.into_iter().map(|(k, v)| format!("{}: {}", self.text(k), self.flow(v))).collect();
                format!("{{ {} }}", entries.join(",   "))
            }
        }
    }

    fn block(&mut self, value: &tree::Tree, indent: usize, out: &mut String) {
        let pad = " ".repeat(indent);
        match value {
            tree::Tree::Map(map) if !map.is_empty() && (indent <= 4 || !self.manner.flow) => {
                for (key, value) in self.turned(value) {
                    if self.manner.comments {
                        out.push_str(&format!("\n{pad}# about {key}: [it\n"));
                    }
                    out.push_str(&format!("{pad}{}:", self.text(key)));
                    self.under(value, indent, out);
                }
            }
            tree::Tree::List(items) if !items.is_empty() && !self.manner.flow => {
                for item in items {
                    out.push_str(&format!("{pad}-"));
                    self.under(item, indent, out);
                }
            }
            flow => out.push_str(&format!("{pad}{}\n", self.flow(flow))),
        }
    }

    fn under(&mut self, value: &tree::Tree, indent: usize, out: &mut String) {
        match value {
            tree::Tree::Leaf(_) | tree::Tree::Text(_) => {
                out.push_str(&format!("   {}\n", self.flow(value)));
            }
            _ => {
                out.push('\n');
                self.block(value, indent + 3, out);
            }
        }
    }
}

/// A tree that remembers how scalars were written.
mod tree {
    use spinledger_terms::Value;

    pub(crate) enum Tree {
        Leaf(String),
        Text(String),
        List(Vec<Tree>),
        Map(Vec<(String, Tree)>),
    }

    impl Tree {
        pub(crate) fn of(value: &Value) -> Tree {
            match value {
                Value::Text(text) => Tree::Text(text.clone()),
                Value::List(items) => Tree::List(items.iter().map(Tree::of).collect()),
                Value::Map(map) => Tree::Map(map.iter().map(|(k, v)| (k.clone(), Tree::of(v))).collect()),
                other => Tree::Leaf(other.canonical()),
            }
        }

        pub(crate) fn entries(&self) -> impl Iterator<Item = (&str, &Tree)> {
            let entries = match self {
                Tree::Map(entries) => entries.as_slice(),
                _ => &[],
            };
            entries.iter().map(|(k, v)| (k.as_str(), v))
        }
    }
}

/// The good pipeline without anchors, as a plain value.
fn plain() -> Value {
    let text = |t: &str| Value::text(t);
    let pipeline = good();
    let steps = pipeline.steps.iter().map(|step| {
        let mut body = step.body.clone();
        body.insert("does".into(), text(&step.does));
        (step.name.clone(), Value::Map(body))
    });
    let mut steps: std::collections::BTreeMap<String, Value> = steps.collect();
    let range = Value::map([("from", Value::Number(2.2)), ("to", Value::Number(2.4)), ("count", Value::Integer(3))]);
    let sizes = Value::List(vec![Value::Integer(8), Value::List(vec![Value::Integer(12), Value::Integer(16)])]);
    let temperatures = Value::List(vec![Value::Number(2.4), Value::Number(3.0)]);
    let blocks = Value::List(vec![
        Value::map([("lattice.size", sizes), ("temperature", range)]),
        Value::map([
            ("lattice.size", Value::Integer(8)),
            ("temperature", temperatures),
            ("measure", Value::Integer(50)),
        ]),
    ]);
    if let Some(Value::Map(chains)) = steps.get_mut("chains") {
        chains.insert("scan".into(), blocks);
    }
    Value::map([
        ("spinledger", Value::Integer(1)),
        ("pipeline", text("good")),
        ("title", text("A: title, with # signs")),
        ("seed", Value::Integer(20261201)),
        ("units", Value::map([("energy", text("meV")), ("moment", Value::Number(3.0))])),
        ("plugins", Value::List(vec![text("./mine")])),
        ("steps", Value::Map(steps)),
    ])
}

/// A piece of text that has some chance to mean something.
fn piece() -> impl Strategy<Value = String> {
    let words = prop::sample::select(vec![
        "spinledger",
        "pipeline",
        "steps",
        "does",
        "sample",
        "scan",
        "lattice",
        "size",
        "temperature",
        "of",
        "from",
        "to",
        "count",
        "step",
        "plugin",
        "square",
        "ising",
        "&a ",
        "*a",
        "<<",
        "!t ",
        "- ",
        ": ",
        ":",
        "\n",
        "\n  ",
        "\n    ",
        "{",
        "}",
        "[",
        "]",
        ", ",
        "'",
        "\"",
        "#",
        " # ",
        "|\n",
        ">\n",
        "1",
        "-3",
        "2.5",
        ".nan",
        "~",
        "null",
        "\t",
        "? ",
        "---\n",
        "...\n",
        "é",
        "温",
        "\u{85}",
        "\u{2028}",
        "\r",
        "\r\n",
        "%YAML 1.1\n",
        "@",
        "`",
        "\u{feff}",
        "!!int x",
        "\\x",
    ]);
    prop_oneof![4 => words.prop_map(str::to_owned), 1 => ".{0,3}"]
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 2000, ..ProptestConfig::default() })]

    #[test]
    fn any_bytes(bytes in prop::collection::vec(any::<u8>(), 0..60)) {
        digest(&Source::from_bytes("any.yaml", &bytes));
    }

    #[test]
    fn any_pieces(pieces in prop::collection::vec(piece(), 0..40)) {
        digest(&Source::new("any.yaml", pieces.concat()));
    }

    /// The good pipeline with a part replaced.
    #[test]
    fn any_slip(at in 0usize..GOOD.len(), length in 0usize..12, piece in piece()) {
        let mut text = GOOD.to_owned();
        text.replace_range(at..(at + length).min(GOOD.len()), &piece);
        digest(&Source::new("slip.yaml", text));
    }

    #[test]
    fn the_same_pipeline_however_it_is_written(manner in manner()) {
        let mut text = String::new();
        let crlf = manner.crlf;
        Writer { manner, used: 0 }.block(&tree::Tree::of(&plain()), 0, &mut text);
        if crlf {
            text = text.replace('\n', "\r\n");
        }
        let source = Source::new("again.yaml", &*text);
        let again = read(&source, &vocabulary());
        let again = again.map_err(|problems| TestCaseError::fail(format!("{text}\n{}", render(&source, &problems))))?;
        prop_assert_eq!(meaning(&again), meaning(&good()));
    }
}
