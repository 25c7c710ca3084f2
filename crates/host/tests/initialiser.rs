//! That finding loads nothing. Alone in its program, since it sets a variable of the environment.

mod common;

use common::{Bench, plugins};
use spinledger_terms::ItemKind;

/// The constructor of this library writes a file when it is loaded.
#[test]
fn finding_loads_nothing_and_loading_does() {
    let library = plugins::variant("INITIALISER");
    let folder = tempfile::tempdir().unwrap();
    let mark = folder.path().join("mark");
    // SAFETY: this is the only test of this program, and nothing else reads the environment now.
    unsafe { std::env::set_var("SPINLEDGER_TEST_MARK", &mark) };
    let bench = Bench::new(&[&library]);
    let identity = bench.identity(ItemKind::Lattice, "pair-of-sites");
    assert!(!mark.exists(), "finding must not run code of the library");
    bench.loader.load(ItemKind::Lattice, &identity).unwrap();
    assert!(mark.exists(), "the mark proves something");
}
