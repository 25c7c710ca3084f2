//! The manifest that the compiler writes is the one that the program reads.

use spinledger_sdk::border::{ItemSpec, Manifest};
use spinledger_sdk::{Column, LatticeSpec, ModelSpec, ObservableSpec, Parameter, UpdateSpec, kinds};
use spinledger_terms::{ItemKind, Kind, LibraryManifest, Value};

const LATTICE: LatticeSpec = LatticeSpec {
    name: "ladder",
    revision: 12,
    about: "Two chains, with \"rungs\" \\ and\ta tab: \u{e9}\u{4e16}.",
    source: "Somebody 1970",
    parameters: &[
        Parameter::required("size", kinds::COUNT, "Rungs.").unit("sites"),
        Parameter::optional("boundary", r#"{"word":{"of":["free","periodic"]}}"#, r#""periodic""#, "The ends."),
    ],
    dimension: 1,
    size: "size",
    sites_per_cell: 2,
    classes: &["first.leg", "first.rung"],
    boundary: "boundary",
    antiperiodic_minimum: 3,
    ..LatticeSpec::EMPTY
};
const MODEL: ModelSpec = ModelSpec {
    name: "pair",
    forms: &["pair", "custom"],
    states: 2,
    offers: &[("scalar", &[]), ("inversion", &[("field", "nonzero"), ("x.y", "negative")])],
    by_class: &["coupling"],
    ..ModelSpec::EMPTY
};
const UPDATE: UpdateSpec = UpdateSpec {
    name: "flip",
    needs: &["inversion|permutation"],
    most_states: 256,
    lanes: "lanes",
    together: 512,
    packing: &[&[512], &[16, 32]],
    ..UpdateSpec::EMPTY
};
const OBSERVABLE: ObservableSpec = ObservableSpec {
    name: "overlap",
    chains: 2,
    columns: &[Column { name: "overlap", unit: "", invariant: false, about: "Per site." }],
    ..ObservableSpec::EMPTY
};
const SPECS: &[ItemSpec] = &[
    ItemSpec::Lattice(&LATTICE),
    ItemSpec::Model(&MODEL),
    ItemSpec::Update(&UPDATE),
    ItemSpec::Observable(&OBSERVABLE),
];
const LENGTH: usize = Manifest::<0>::of("all", "1.2.3", "MIT", SPECS).length();
static BYTES: [u8; LENGTH] = Manifest::<LENGTH>::of("all", "1.2.3", "MIT", SPECS).bytes();

fn manifest() -> LibraryManifest {
    serde_json::from_slice(&BYTES).expect("the manifest is JSON with the fields that the program knows")
}

#[test]
fn the_library_and_its_items_arrive_in_order() {
    let manifest = manifest();
    assert_eq!(manifest.interface, spinledger_abi::INTERFACE_VERSION);
    assert_eq!((&*manifest.library, &*manifest.version, &*manifest.licence), ("all", "1.2.3", "MIT"));
    let kinds: Vec<ItemKind> = manifest.items.iter().map(|item| item.kind).collect();
    assert_eq!(kinds, [ItemKind::Lattice, ItemKind::Model, ItemKind::Update, ItemKind::Observable]);
    assert_eq!(manifest.items[0].revision, 12);
    assert_eq!(manifest.items[0].about, LATTICE.about);
    assert_eq!(manifest.items[0].source, "Somebody 1970");
}

#[test]
fn parameters_keep_kind_unit_and_default() {
    let parameters = &manifest().items[0].parameters;
    assert_eq!(parameters[0].kind, Kind::COUNT);
    assert!(parameters[0].required && parameters[0].unit == "sites" && parameters[0].default.is_none());
    assert_eq!(parameters[1].kind, Kind::words(&["free", "periodic"]));
    assert_eq!(parameters[1].default, Some(Value::text("periodic")));
}

#[test]
fn traits_of_each_kind_arrive() {
    let items = manifest().items;
    let lattice = items[0].lattice.as_ref().expect("lattice");
    assert_eq!((lattice.dimension, lattice.sites_per_cell, &*lattice.size), (1, 2, "size"));
    assert_eq!(lattice.classes, ["first.leg", "first.rung"]);
    let boundaries = lattice.boundaries.as_ref().expect("boundaries");
    assert_eq!((&*boundaries.parameter, boundaries.antiperiodic_minimum), ("boundary", 3));
    let model = items[1].model.as_ref().expect("model");
    assert_eq!(model.states, Some(2));
    assert_eq!(model.offers[1].unless[1].parameter, "x.y");
    assert_eq!(model.by_class, ["coupling"]);
    let update = items[2].update.as_ref().expect("update");
    assert_eq!((update.together, &*update.packing), (Some(512), &[vec![512], vec![16, 32]][..]));
    assert_eq!((update.most_states, &*update.lanes, &*update.needs[0]), (Some(256), "lanes", "inversion|permutation"));
    let observable = items[3].observable.as_ref().expect("observable");
    assert_eq!((observable.chains, observable.columns[0].invariant), (2, false));
}

#[test]
fn the_shared_kinds_are_kinds() {
    let texts = [
        kinds::NUMBER,
        kinds::POSITIVE,
        kinds::NOT_NEGATIVE,
        kinds::COUNT,
        kinds::BOOLEAN,
        kinds::TEXT,
        kinds::NUMBER_BY_CLASS,
    ];
    for text in texts {
        serde_json::from_str::<Kind>(text).unwrap_or_else(|error| panic!("{text}: {error}"));
    }
}
