//! A small vocabulary, invented for these tests.
#![allow(dead_code, reason = "each test program uses its part")]

use spinledger_terms::{
    ContentHash, Field, Identity, Item, ItemKind, Kind, LatticeTraits, ScanSpec, StepSpec, Value, Vocabulary,
};

fn item(kind: ItemKind, name: &str, parameters: Vec<Field>, lattice: Option<LatticeTraits>) -> (Identity, Item) {
    let identity = Identity {
        library: "test".into(),
        version: "1.0.0".into(),
        item: name.into(),
        revision: 1,
        standard: true,
        file: String::new(),
        file_hash: ContentHash([0; 32]),
    };
    let item = Item {
        kind,
        name: name.into(),
        revision: 1,
        about: String::new(),
        formula: String::new(),
        source: String::new(),
        parameters,
        lattice,
        model: None,
        update: None,
        observable: None,
    };
    (identity, item)
}

fn one_or_list(of: Kind) -> Kind {
    Kind::Either { of: vec![of.clone(), Kind::list(of)] }
}

fn lattice(name: &str, dimension: u32) -> (Identity, Item) {
    let boundary = Kind::words(&["periodic", "free", "plus", "minus", "antiperiodic"]);
    let parameters = vec![
        Field::new("size", one_or_list(Kind::COUNT), "unit cells").required(),
        Field::new("boundary", one_or_list(boundary), "the rim").default(Value::text("periodic")),
        Field::new("shells", Kind::COUNT, "shells of neighbours").default(Value::Integer(1)),
    ];
    let traits = LatticeTraits {
        dimension,
        size: "size".into(),
        sites_per_cell: 1,
        sites: String::new(),
        classes: vec!["first".into(), "first.x".into(), "first.y".into()],
        boundaries: None,
    };
    item(ItemKind::Lattice, name, parameters, Some(traits))
}

fn coupling() -> Field {
    let kind = Kind::Either { of: vec![Kind::NUMBER, Kind::Map { of: Box::new(Kind::NUMBER) }] };
    Field::new("coupling", kind, "J").default(Value::Integer(1))
}

fn items() -> Vec<(Identity, Item)> {
    let field = || Field::new("field", Kind::NUMBER, "h").default(Value::Integer(0));
    let states = Kind::Integer { min: Some(2), max: Some(256) };
    vec![
        lattice("square", 2),
        lattice("triangular", 2),
        lattice("cubic", 3),
        item(ItemKind::Model, "ising", vec![coupling(), field()], None),
        item(ItemKind::Model, "potts", vec![coupling(), Field::new("states", states, "q").required()], None),
        item(ItemKind::Update, "metropolis", vec![], None),
        item(ItemKind::Update, "swendsen-wang", vec![], None),
        item(ItemKind::Update, "wolff", vec![Field::new("clusters", Kind::COUNT, "").default(Value::Integer(1))], None),
        item(ItemKind::Observable, "energy", vec![], None),
        item(ItemKind::Observable, "magnetisation", vec![], None),
    ]
}

fn sample() -> StepSpec {
    let plugin = |of| Kind::Plugin { of };
    let start = Kind::Either {
        of: vec![
            Kind::words(&["random", "ordered", "both"]),
            Kind::Tree { fields: vec![Field::new("step", Kind::Step {}, "").required()] },
        ],
    };
    let equilibrate = Kind::Either { of: vec![Kind::words(&["auto"]), Kind::COUNT_FROM_ZERO] };
    let exchange = Kind::Tree { fields: vec![Field::new("every", Kind::COUNT, "").required()] };
    StepSpec {
        does: "sample".into(),
        about: "time series".into(),
        fields: vec![
            Field::new("lattice", plugin(ItemKind::Lattice), "").required(),
            Field::new("model", plugin(ItemKind::Model), "").required(),
            Field::new("update", one_or_list(plugin(ItemKind::Update)), "").required(),
            Field::new("observe", Kind::list(plugin(ItemKind::Observable)), "").required(),
            Field::new("temperature", Kind::POSITIVE, "T").required(),
            Field::new("measure", Kind::COUNT, "").required(),
            Field::new("equilibrate", equilibrate, "").default(Value::text("auto")),
            Field::new("every", Kind::COUNT, "").default(Value::Integer(1)),
            Field::new("chains", Kind::COUNT, "").default(Value::Integer(4)),
            Field::new("settle", Kind::COUNT_FROM_ZERO, "").default(Value::Integer(0)),
            Field::new("start", start, "").default(Value::text("random")),
            Field::new("exchange", exchange, ""),
            Field::new("follow", Kind::Text {}, ""),
        ],
        scan: Some(ScanSpec {
            no_column: ["measure", "equilibrate", "every", "chains", "settle"].map(String::from).to_vec(),
            larger: ["measure", "chains"].map(String::from).to_vec(),
            follow: "follow".into(),
        }),
    }
}

fn others() -> Vec<StepSpec> {
    let of = || Field::new("of", one_or_list(Kind::Step {}), "").required();
    let plain = |does: &str, fields| StepSpec { does: does.into(), about: String::new(), fields, scan: None };
    let take = Kind::Tree {
        fields: vec![
            Field::new("step", Kind::Step {}, "").required(),
            Field::new("quantity", Kind::Text {}, ""),
            Field::new("where", Kind::Map { of: Box::new(Kind::Any {}) }, ""),
        ],
    };
    let value = Kind::Tree {
        fields: vec![
            Field::new("value", Kind::NUMBER, "").required(),
            Field::new("error", Kind::NOT_NEGATIVE, "").default(Value::Integer(0)),
            Field::new("source", Kind::Text {}, ""),
        ],
    };
    let item = Kind::Tree {
        fields: vec![
            Field::new("take", take.clone(), "").required(),
            Field::new("against", Kind::Either { of: vec![value, take] }, "").required(),
            Field::new("within", Kind::POSITIVE, "").default(Value::Integer(3)),
        ],
    };
    vec![
        plain("averages", vec![of()]),
        plain("reweight", vec![of(), Field::new("temperature", Kind::Numbers {}, "").required()]),
        plain("crossing", vec![of(), Field::new("quantity", Kind::Text {}, "")]),
        plain("place", vec![of()]),
        plain("compare", vec![Field::new("items", Kind::list(item), "").required()]),
        plain("report", vec![of()]),
    ]
}

/// Lattices square, triangular, cubic; models ising, potts; three rules, two observables; seven kinds of step.
pub(crate) fn vocabulary() -> Vocabulary {
    let mut steps = vec![sample()];
    steps.extend(others());
    Vocabulary { steps, items: items() }
}

/// A pipeline of one step that samples, with this scan.
pub(crate) fn with_scan(scan: &str) -> String {
    format!(
        "spinledger: 1\npipeline: p\nseed: 7\nsteps:\n  s:\n    does: sample\n    lattice: {{ plugin: square, size: 8 }}\n    \
         model: ising\n    update: wolff\n    observe: [energy]\n    temperature: 2.0\n    measure: 100\n    scan: {scan}\n"
    )
}
