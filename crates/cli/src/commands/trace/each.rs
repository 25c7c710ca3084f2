//! Every entry by itself: as records for programs, as a tree for people who want it all.

use super::words::{Makers, details, headline, print};
use crate::screen::Screen;
use spinledger_engine::chain_text;
use spinledger_ledger::Ledger;
use spinledger_terms::Key;
use std::collections::BTreeSet;

/// All records below a key, each once, inputs first. Returns how many are missing.
pub(super) fn dump(ledger: &Ledger, key: &Key, screen: &mut Screen) -> u64 {
    let mut seen = BTreeSet::new();
    dump_below(ledger, key, screen, &mut seen)
}

fn dump_below(ledger: &Ledger, key: &Key, screen: &mut Screen, seen: &mut BTreeSet<Key>) -> u64 {
    if !seen.insert(*key) {
        return 0;
    }
    let Ok(record) = ledger.read_record(key) else { return 1 };
    let inputs = record.provenance.inputs.iter();
    let missing = inputs.map(|input| dump_below(ledger, &input.key, screen, seen)).sum();
    screen.event(&serde_json::json!(record));
    missing
}

/// Prints every entry below a key as a tree. Returns how many records are missing.
pub(super) fn tree(ledger: &Ledger, key: &Key) -> u64 {
    let mut tree = Tree { ledger, seen: BTreeSet::new(), missing: 0, makers: Makers::default() };
    tree.branch(key, "", "");
    tree.makers.print();
    tree.missing
}

struct Tree<'a> {
    ledger: &'a Ledger,
    seen: BTreeSet<Key>,
    missing: u64,
    makers: Makers,
}

impl Tree<'_> {
    fn branch(&mut self, key: &Key, lead: &str, name: &str) {
        let name = if name.is_empty() { String::new() } else { format!("{name}: ") };
        let record = match self.ledger.read_record(key) {
            Ok(record) => record,
            Err(error) => {
                self.missing += 1;
                print(lead, &format!("{name}{}: {}", key.short(), chain_text(&error)));
                return;
            }
        };
        let again = !self.seen.insert(*key);
        print(lead, &format!("{name}{}{}", headline(&record), if again { " (above)" } else { "" }));
        if again {
            return;
        }
        self.makers.add(&record);
        // What hangs below a branch is indented by it.
        let below = lead.replace("+- ", "|  ").replace("`- ", "   ");
        let inputs = &record.provenance.inputs;
        let bar = if inputs.is_empty() { " " } else { "|" };
        details(&record).iter().for_each(|line| print(&format!("{below}{bar}  "), line));
        for (at, input) in inputs.iter().enumerate() {
            let branch = if at + 1 == inputs.len() { "`- " } else { "+- " };
            self.branch(&input.key, &format!("{below}{branch}"), &input.name);
        }
    }
}
