//! Plugins that are wrong on purpose: what they break is their own parcel, with a clear message; everything else goes on. Looking at a
//! pipeline never runs foreign code.

use spinledger_tests::plugins;
use spinledger_tests::program::Desk;

/// One sound step and one with a faulty rule.
fn pipeline(library: &str, rule: &str) -> String {
    format!(
        r#"spinledger: 1
pipeline: faulty
seed: 3
plugins: ["{library}"]
steps:
  sound:
    does: sample
    lattice: {{ plugin: square, size: 4 }}
    model: ising
    update: metropolis
    observe: [energy]
    scan: {{ temperature: [2.0, 2.5] }}
    equilibrate: 10
    measure: 100
    chains: 2
  broken:
    does: sample
    lattice: {{ plugin: square, size: 4 }}
    model: ising
    update: {rule}
    observe: [energy]
    temperature: 2.0
    equilibrate: 10
    measure: 100
    chains: 1
  means: {{ does: averages, of: sound }}
  behind: {{ does: averages, of: broken }}
"#
    )
}

fn run_faulty(rule: &str, options: &[&str], wanted: &[&str]) {
    let desk = Desk::new();
    let library = plugins::faulty();
    desk.write("faulty.yaml", &pipeline(&library.display().to_string(), rule));
    let events = desk.run_pipeline("faulty.yaml", options, 1);
    assert_eq!(events.counts_of("sound"), (4, 0, 0), "{rule}");
    assert_eq!(events.counts_of("means"), (2, 0, 0), "{rule}");
    assert_eq!(events.counts_of("broken"), (0, 0, 1), "{rule}");
    assert_eq!(events.counts_of("behind"), (0, 0, 0), "{rule}: what is behind a broken parcel stays due");
    let messages = events.broken().join("\n");
    for word in wanted {
        assert!(messages.contains(word), "{rule}: {word} in\n{messages}");
    }
    assert!(desk.path("results/faulty/means.parquet").exists());
    assert!(!desk.path("results/faulty/behind.parquet").exists());
}

#[test]
fn a_panic_breaks_its_parcel() {
    run_faulty("faulty-panic", &[], &["panic"]);
}

#[test]
fn an_abort_breaks_its_parcel() {
    run_faulty("faulty-abort", &[], &["signal 6"]);
}

#[test]
fn a_null_pointer_breaks_its_parcel() {
    run_faulty("faulty-null", &[], &["signal 11"]);
}

#[test]
fn an_endless_loop_is_ended() {
    run_faulty("faulty-loop", &["--stall", "2"], &["no progress for 2 s"]);
}

/// A rule that tracks a wrong energy is caught by the recomputation at the block's end.
#[test]
fn a_wrong_energy_is_noticed() {
    run_faulty("faulty-energy", &[], &["tracks a total energy of 1234.5", "recomputed it is"]);
}

#[test]
fn states_that_do_not_exist_break_their_parcel() {
    run_faulty("faulty-garbage", &[], &["faulty-garbage"]);
}

/// A library for another version of the interface: of the manifest, which `check` sees; of the code alone, which is seen when it is loaded.
#[test]
fn another_interface_is_refused() {
    let desk = Desk::new();
    let library = plugins::variant("MANIFEST_VERSION");
    desk.write("faulty.yaml", &pipeline(&library.display().to_string(), "metropolis"));
    for command in ["check", "run"] {
        let ran = desk.run(&[command, "faulty.yaml"]);
        assert_eq!(ran.status, Some(2), "{command}: {}", ran.err);
        let placed = ran.err.starts_with("faulty.yaml:4:11:");
        assert!(placed && ran.err.contains("version 99 of the plugin interface"), "{command}: {}", ran.err);
    }
    let library = plugins::variant("CODE_VERSION");
    desk.write("pair.yaml", &pair(&library.display().to_string()));
    let events = desk.run_pipeline("pair.yaml", &[], 1);
    assert!(events.broken()[0].contains("version"), "{:?}", events.broken());
}

/// A pipeline on the lattice of the library in C.
fn pair(library: &str) -> String {
    pipeline(library, "metropolis").replacen("plugin: square, size: 4", "plugin: pair-of-sites", 1)
}

/// A library whose constructor leaves a mark shows that `check`, `forecast` and `plugins` load nothing; `run` does.
#[test]
fn looking_loads_nothing() {
    const VARIABLE: &str = "SPINLEDGER_TEST_MARK";
    let scratch = Desk::new();
    let mark = scratch.path("mark");
    let library = plugins::variant("INITIALISER");
    let shown = library.display().to_string();
    let desk = Desk::new().with(VARIABLE, &mark.display().to_string()).with("SPINLEDGER_PLUGINS", &shown);
    desk.write("pair.yaml", &pair(&shown));
    for command in
        [&["check", "pair.yaml"][..], &["forecast", "pair.yaml"], &["plugins"], &["plugins", "pair-of-sites"]]
    {
        let ran = desk.run(command);
        assert_eq!(ran.status, Some(0), "{command:?}: {}", ran.err);
    }
    assert!(!mark.exists(), "something was loaded");
    let ran = desk.run(&["run", "pair.yaml"]);
    assert!(ran.out.contains("did not come with spinledger") && ran.out.contains(&shown), "{}{}", ran.out, ran.err);
    assert!(mark.exists(), "running loads the library, else the test proves nothing: {}", ran.err);
}
