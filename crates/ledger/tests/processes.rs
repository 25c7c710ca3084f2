//! Processes that publish at the same time, and one that is killed. Each test starts its own program again as a writer.

use spinledger_ledger::{Claim, Draft, Ledger, Payload, Provenance};
use spinledger_terms::{Column, Key, Table};
use std::fs;
use std::path::Path;
use std::process::{Child, Command, Stdio};
use std::time::Duration;

const FOLDER: &str = "SPINLEDGER_TEST_LEDGER";

/// Starts this test program again, running one test only, which then finds the folder in its environment.
fn writer(test: &str, folder: &Path) -> Child {
    Command::new(std::env::current_exe().unwrap())
        .args(["--exact", test, "--nocapture"])
        .env(FOLDER, folder)
        .stdout(Stdio::piped())
        .spawn()
        .unwrap()
}

fn preimage(number: usize) -> String {
    format!("{{\"number\":{number}}}")
}

/// Publishes an entry; returns whether it was fresh.
fn publish(ledger: &Ledger, number: usize) -> bool {
    let values = (0..1000).map(|i| Some((number * i) as f64)).collect();
    let table = Table { columns: vec![Column::numbers("value", "J", values)] };
    let draft = Draft::new(&preimage(number), "averages", Provenance::default());
    ledger.publish(draft.table("main", Payload::Table(table))).unwrap().fresh
}

#[test]
fn two_processes_publish_each_entry_once() {
    const ENTRIES: usize = 200;
    if let Ok(folder) = std::env::var(FOLDER) {
        let ledger = Ledger::open(Path::new(&folder)).unwrap();
        let fresh = (0..ENTRIES).filter(|number| publish(&ledger, *number)).count();
        println!("fresh={fresh};");
        return;
    }
    let folder = tempfile::tempdir().unwrap();
    let test = "two_processes_publish_each_entry_once";
    let writers = [writer(test, folder.path()), writer(test, folder.path())];
    let fresh = writers.map(|writer| {
        let output = writer.wait_with_output().unwrap();
        assert!(output.status.success());
        let text = String::from_utf8(output.stdout).unwrap();
        let count = text.split("fresh=").nth(1).unwrap().split(';').next().unwrap();
        count.parse::<usize>().unwrap()
    });
    assert_eq!(fresh.iter().sum::<usize>(), ENTRIES, "{fresh:?}");
    let ledger = Ledger::open(folder.path()).unwrap();
    let index = ledger.index().unwrap();
    assert_eq!((index.len(), index.warnings().count()), (ENTRIES, 0));
    assert_eq!(fs::read_dir(folder.path().join("temporary")).unwrap().count(), 0);
}

#[test]
fn a_killed_process_loses_nothing_that_it_published() {
    if let Ok(folder) = std::env::var(FOLDER) {
        let ledger = Ledger::open(Path::new(&folder)).unwrap();
        let _claim = ledger.claim(&Key([1; 32]), "until killed").unwrap();
        for number in 0.. {
            publish(&ledger, number);
            ledger.save_state(&Key([1; 32]), number as u64, &[number as u8; 10_000]).unwrap();
        }
    }
    let folder = tempfile::tempdir().unwrap();
    for round in 0..5 {
        let mut writer = writer("a_killed_process_loses_nothing_that_it_published", folder.path());
        let states = folder.path().join("states");
        while !states.is_dir() || fs::read_dir(&states).unwrap().count() == 0 {
            assert!(writer.try_wait().unwrap().is_none(), "the writer ended by itself");
            std::thread::sleep(Duration::from_millis(1));
        }
        // Odd times, so that different steps are hit.
        std::thread::sleep(Duration::from_micros(20_011 + 7_919 * round));
        writer.kill().unwrap();
        writer.wait().unwrap();
        let ledger = Ledger::open(folder.path()).unwrap();
        assert_eq!(
            fs::read_dir(folder.path().join("temporary")).unwrap().count(),
            0,
            "leftovers of the dead are removed"
        );
        assert!(
            matches!(ledger.claim(&Key([1; 32]), "after it").unwrap(), Claim::Mine(_)),
            "claims of the dead are void"
        );
        let (position, state) = ledger.load_state(&Key([1; 32])).found().unwrap();
        assert_eq!(state, [position as u8; 10_000]);
        let published = (0..).take_while(|n| ledger.lookup(&Key::of(&preimage(*n))).unwrap().is_some()).count();
        assert!(published as u64 > position, "what was published before the state was saved is there");
        let index = ledger.index().unwrap();
        assert_eq!((index.len(), index.warnings().count()), (published, 0));
        for number in 0..published {
            ledger.verify(&Key::of(&preimage(number))).unwrap();
        }
        assert!(publish(&ledger, published), "and work goes on");
    }
}
