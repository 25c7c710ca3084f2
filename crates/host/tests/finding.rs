//! Finding libraries: order, refusals, and that nothing is loaded on the way.

mod common;

use common::{catalogue, plugins};
use spinledger_host::{Catalogue, FindError, Note, Search};
use spinledger_terms::{ItemKind, Vocabulary};
use std::fs;
use std::path::{Path, PathBuf};

/// The one refusal of a file that was named.
fn refusal(file: &Path) -> FindError {
    let mut catalogue = catalogue(&[file]);
    assert!(catalogue.items().is_empty());
    assert_eq!(catalogue.refusals().len(), 1);
    assert!(catalogue.refusals()[0].named);
    let error = std::mem::take(&mut catalogue).into_refusals().remove(0).error;
    assert_eq!(error.file(), file);
    let text = error.to_string();
    assert!(text.contains(file.file_name().unwrap().to_str().unwrap()), "names the file: {text}");
    error
}

#[test]
fn every_kind_of_file_that_is_no_library_is_its_own_refusal() {
    let folder = tempfile::tempdir().unwrap();
    let write = |name: &str, bytes: &[u8]| {
        let file = folder.path().join(name);
        fs::write(&file, bytes).unwrap();
        file
    };
    assert!(matches!(refusal(&folder.path().join("absent.so")), FindError::Missing { .. }));
    assert!(matches!(refusal(&write("text.so", b"not an object file at all")), FindError::NotAnObject { .. }));
    assert!(matches!(refusal(&write("empty.so", b"")), FindError::NotAnObject { .. }));
    let truncated = plugins::truncated(plugins::forms(), folder.path());
    assert!(matches!(refusal(&truncated), FindError::Truncated { .. }));
    assert!(matches!(refusal(&plugins::variant("NO_MANIFEST")), FindError::NoManifest { .. }));
    assert!(matches!(refusal(&plugins::variant("BAD_JSON")), FindError::BadManifest { .. }));
    assert!(matches!(refusal(&plugins::variant("WRONG_FIELDS")), FindError::BadManifest { .. }));
    assert!(matches!(refusal(&plugins::variant("TWICE")), FindError::Contradiction { .. }));
    let error = refusal(&plugins::variant("MANIFEST_VERSION"));
    assert!(matches!(error, FindError::Interface { found: 99, here: 1, .. }));
    assert!(error.to_string().contains("version 99") && error.to_string().contains("version 1"), "{error}");
}

/// The field of an ELF header that names the processor, turned to another one.
#[test]
#[cfg(target_os = "linux")]
fn a_library_for_another_processor_is_refused_with_both_named() {
    let mut bytes = fs::read(plugins::forms()).unwrap();
    bytes[18] = if bytes[18] == 62 { 183 } else { 62 };
    let folder = tempfile::tempdir().unwrap();
    let file = folder.path().join("other.so");
    fs::write(&file, bytes).unwrap();
    let error = refusal(&file);
    let FindError::OtherPlatform { found, here, .. } = &error else { panic!("{error}") };
    assert!(found != here && error.to_string().contains(found) && error.to_string().contains(here), "{error}");
}

#[test]
fn a_program_is_no_shared_library() {
    let object = tempfile::tempdir().unwrap();
    let file = object.path().join("unlinked.o");
    let source = "int nothing = 1;\n";
    let input = object.path().join("unlinked.c");
    fs::write(&input, source).unwrap();
    let status = std::process::Command::new("cc").arg("-c").arg(&input).arg("-o").arg(&file).status().unwrap();
    assert!(status.success());
    assert!(matches!(refusal(&file), FindError::NotShared { .. }));
}

#[test]
fn in_folders_other_libraries_are_passed_over_and_damaged_ones_are_not() {
    let folder = tempfile::tempdir().unwrap();
    let suffix = std::env::consts::DLL_SUFFIX;
    let put = |from: &Path, name: &str| {
        fs::copy(from, folder.path().join(format!("{name}{suffix}"))).unwrap();
    };
    put(&plugins::variant("NO_MANIFEST"), "a-other");
    put(plugins::forms(), "b-forms");
    fs::write(folder.path().join("notes.txt"), "no library").unwrap();
    plugins::truncated(plugins::forms(), folder.path());
    let found = catalogue(&[folder.path()]);
    assert_eq!(found.libraries().len(), 1);
    assert!(found.item(ItemKind::Lattice, "test-grid").is_some());
    assert_eq!(found.refusals().len(), 1);
    assert!(matches!(found.refusals()[0].error, FindError::Truncated { .. }) && !found.refusals()[0].named);
}

#[test]
fn the_first_place_wins_and_the_hidden_item_is_noted() {
    let (first, second) = (plugins::variant(""), plugins::variant("OTHER_REVISION"));
    let search = Search { pipeline: vec![first.clone()], environment: vec![second.clone()], program: vec![] };
    let found = Catalogue::find(&search);
    let (identity, item) = found.item(ItemKind::Lattice, "pair-of-sites").unwrap();
    assert_eq!((PathBuf::from(&identity.file), item.revision), (first.clone(), 1));
    assert_eq!(found.library_of(identity), first);
    let hidden = Note::Hidden { kind: ItemKind::Lattice, name: "pair-of-sites".into(), file: second, by: first };
    assert_eq!(found.notes(), [hidden]);
    assert_eq!(found.items().len(), 1);
    assert_eq!(found.libraries().len(), 2);
}

/// A library is standard by its name and by where it is, not by either alone.
#[test]
fn only_the_programs_own_libraries_of_known_names_are_standard() {
    let file = plugins::forms().to_owned();
    let folder = file.parent().unwrap().to_owned();
    let named = Catalogue::find(&Search { pipeline: vec![file], ..Search::default() });
    let own = Catalogue::find(&Search { program: vec![folder], ..Search::default() });
    for found in [&named, &own] {
        let (identity, _) = found.item(ItemKind::Lattice, "test-grid").unwrap();
        assert!(!identity.standard);
        assert!(identity.canonical().ends_with(&format!("#{}", identity.file_hash)), "{}", identity.canonical());
    }
    // Its library has the name of a standard one.
    let library = plugins::variant("NAMED_LATTICES");
    let named = Catalogue::find(&Search { pipeline: vec![library.clone()], ..Search::default() });
    let own = Catalogue::find(&Search { program: vec![library], ..Search::default() });
    let canonical = |found: &Catalogue| {
        let (identity, _) = found.item(ItemKind::Lattice, "pair-of-sites").unwrap();
        (identity.standard, identity.canonical())
    };
    assert_eq!(canonical(&own), (true, "lattices/pair-of-sites@1".to_owned()));
    assert!(!canonical(&named).0 && canonical(&named).1.starts_with("lattices/pair-of-sites@1#"));
    assert!(Search::program_places(Path::new("/opt/x/bin"))[1].ends_with("lib/spinledger"));
}

#[test]
fn places_of_the_program_may_be_missing_and_named_ones_may_not() {
    let absent = PathBuf::from("/nonexistent/spinledger");
    let own = Catalogue::find(&Search { program: vec![absent.clone()], ..Search::default() });
    assert!(own.refusals().is_empty());
    let environment = Catalogue::find(&Search { environment: vec![absent], ..Search::default() });
    assert!(environment.refusals()[0].named);
}

#[test]
fn the_vocabulary_of_a_pipeline_is_what_is_found() {
    let vocabulary = Vocabulary { steps: vec![], items: catalogue(&[plugins::forms(), plugins::c_forms()]).items() };
    let models: Vec<&str> = vocabulary.names(ItemKind::Model).collect();
    assert_eq!(models, ["test-ising", "test-four-spin", "test-rotor", "test-chain-term", "c-triple", "c-factor"]);
}

/// The section is part of what is loaded, so that no tool takes it for debugging information.
#[test]
#[cfg(target_os = "linux")]
fn the_manifest_survives_strip() {
    let folder = tempfile::tempdir().unwrap();
    for (name, library) in [("rust.so", plugins::forms()), ("c.so", plugins::c_forms())] {
        let file = folder.path().join(name);
        fs::copy(library, &file).unwrap();
        assert!(std::process::Command::new("strip").arg(&file).status().unwrap().success());
        assert!(fs::metadata(&file).unwrap().len() < fs::metadata(library).unwrap().len(), "it was stripped");
        let (before, after) = (catalogue(&[library]), catalogue(&[&file]));
        assert_eq!(before.libraries()[0].1, after.libraries()[0].1);
    }
}
