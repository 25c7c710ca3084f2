//! Loading libraries: each thing that can be wrong with one is its own refusal, and what a lattice says is checked.

mod common;

use common::{Bench, json, plugins};
use spinledger_host::{HostError, LoadError, Loader, Services};
use spinledger_terms::{ItemKind, Value};
use std::fs;

/// What loading a variant says.
fn refusal(switch: &str) -> LoadError {
    let file = plugins::variant(switch);
    let bench = Bench::new(&[&file]);
    let identity = bench.identity(ItemKind::Lattice, "pair-of-sites");
    match bench.loader.load(ItemKind::Lattice, &identity) {
        Err(HostError::Load(error)) => {
            let text = error.to_string();
            assert!(text.contains(file.file_name().unwrap().to_str().unwrap()), "names the file: {text}");
            error
        }
        other => panic!("{switch}: {other:?}"),
    }
}

#[test]
fn a_proper_library_is_loaded_and_builds() {
    for switch in ["", "OLDER_GRAPH"] {
        let bench = Bench::new(&[&plugins::variant(switch)]);
        let graph = bench.graph("pair-of-sites", "{}");
        assert_eq!((graph.sites, graph.bonds.len(), graph.colours.as_slice()), (2, 1, &[0, 1][..]));
    }
}

#[test]
fn the_example_of_a_plugin_is_found_loaded_and_builds() {
    let bench = Bench::new(&[plugins::minimal_lattice()]);
    let graph = bench.graph("ladder", r#"{"size": 5}"#);
    assert_eq!((graph.sites, graph.bonds.len()), (10, 15));
    assert_eq!(graph.class_names, ["first.leg", "first.rung"]);
}

#[test]
fn everything_wrong_with_the_code_is_its_own_refusal() {
    assert!(matches!(refusal("NO_SYMBOL"), LoadError::NoSymbol { .. }));
    assert!(matches!(refusal("RETURNS_NULL"), LoadError::NotALibrary { .. }));
    assert!(matches!(refusal("WRONG_MAGIC"), LoadError::NotALibrary { .. }));
    let clash = refusal("CODE_VERSION");
    assert!(matches!(clash, LoadError::Interface { found: 99, here: 1, .. }));
    assert!(clash.to_string().contains("version 99") && clash.to_string().contains("version 1"), "{clash}");
    assert!(matches!(refusal("WRONG_POINTER"), LoadError::PointerSize { found: 4, .. }));
    assert!(matches!(refusal("WRONG_LAYOUT"), LoadError::Layout { name: "SlView", .. }));
    assert!(matches!(refusal("NEWER_GRAPH"), LoadError::Layout { name: "SlGraph", .. }));
    let differ = refusal("OTHER_ITEM");
    assert!(matches!(&differ, LoadError::ItemsDiffer { what, .. } if what.contains("another")), "{differ}");
    let differ = refusal("OTHER_REVISION");
    assert!(matches!(&differ, LoadError::ItemsDiffer { what, .. } if what.contains("revision 2")), "{differ}");
    assert!(matches!(refusal("NO_BUILD"), LoadError::MissingFunction { function: "build", .. }));
}

#[test]
fn a_file_that_changed_since_it_was_found_is_not_loaded() {
    let folder = tempfile::tempdir().unwrap();
    let file = folder.path().join(format!("changing{}", std::env::consts::DLL_SUFFIX));
    fs::copy(plugins::variant(""), &file).unwrap();
    let bench = Bench::new(&[&file]);
    let identity = bench.identity(ItemKind::Lattice, "pair-of-sites");
    fs::copy(plugins::variant("NAMED_LATTICES"), &file).unwrap();
    let error = bench.loader.load(ItemKind::Lattice, &identity).unwrap_err();
    assert!(matches!(error, HostError::Load(LoadError::Changed { .. })), "{error}");
}

#[test]
fn an_item_that_a_library_lacks_is_named() {
    let bench = Bench::new(&[&plugins::variant("")]);
    let mut identity = bench.identity(ItemKind::Lattice, "pair-of-sites");
    let error = bench.loader.model(&identity, &Value::Null).unwrap_err();
    assert!(matches!(error, HostError::NoItem { kind: ItemKind::Model, .. }), "{error}");
    identity.item = "elsewhere".into();
    let error = bench.loader.lattice(&identity, &Value::Null).unwrap_err();
    assert!(error.to_string().contains("elsewhere"), "{error}");
}

#[test]
fn parameters_that_an_item_refuses_are_its_message() {
    let bench = Bench::forms();
    let grid = bench.identity(ItemKind::Lattice, "test-grid");
    let error = bench.loader.lattice(&grid, &json(r#"{"boundary": "periodic"}"#)).unwrap_err();
    assert!(matches!(error, HostError::Failed { .. }));
    assert!(error.to_string().contains("test-grid") && error.to_string().contains("`size` is missing"), "{error}");
}

/// The key `plugin`, under which an item's name stands in a pipeline, is not one of its parameters.
#[test]
fn the_items_own_name_is_no_parameter() {
    let bench = Bench::forms();
    let graph = bench.graph("test-grid", r#"{"plugin": "test-grid", "size": [2, 3], "boundary": ["free", "plus"]}"#);
    assert_eq!(
        (graph.sites, graph.total, graph.cells.as_slice(), graph.periods.as_slice()),
        (6, 10, &[2, 3][..], &[0, 0][..])
    );
}

/// What the host refuses stays refused, also where the plugin does not heed the status.
#[test]
fn lattices_that_cannot_be_are_refused_with_the_reason() {
    let cases = [
        ("BAD_BOND", "bond 0 joins sites 0 and 7 of 2"),
        ("SELF_BOND", "joins site 0 with itself without wrapping"),
        ("PINNED_BOND", "does not begin at a free site"),
        ("BAD_POSITION", "the position of site 1 is not finite"),
        ("BAD_COLOUR", "joined by a bond and have one colour"),
        ("NULL_POINTER", "a null pointer for positions"),
    ];
    for (switch, what) in cases {
        let bench = Bench::new(&[&plugins::variant(switch)]);
        let identity = bench.identity(ItemKind::Lattice, "pair-of-sites");
        let error = bench.loader.lattice(&identity, &Value::Null).unwrap().build().unwrap_err();
        let text = error.to_string();
        assert!(matches!(error, HostError::Wrong { .. }), "{text}");
        assert!(text.contains(what) && text.contains("pair-of-sites") && text.contains("variant"), "{text}");
    }
}

#[test]
fn the_faces_are_shared_between_threads() {
    fn is_send<T: Send>() {}
    fn is_sync<T: Sync>() {}
    is_send::<spinledger_host::Sampler>();
    is_send::<spinledger_host::Observer>();
    is_send::<spinledger_host::LatticeItem>();
    is_send::<spinledger_host::ModelItem>();
    is_send::<spinledger_host::UpdateItem>();
    is_send::<spinledger_host::ObservableItem>();
    is_sync::<spinledger_host::Energy>();
    is_sync::<spinledger_host::Graph>();
    is_sync::<Loader>();
    assert!(Loader::new(Services { threads: 2, ..Services::default() }).is_ok());
}
