//! `spinledger trace`: what made a result, from record to record back to the inputs.

mod each;
mod levels;
mod words;

use crate::args::TraceArgs;
use crate::commands::{BROKEN, WELL, WRONG};
use crate::screen::{Screen, Style, complain};
use crate::text::counted;
use anyhow::{Context, bail};
use spinledger_ledger::{Ledger, file_key};
use spinledger_terms::Key;
use std::path::Path;

/// Traces a file or a key.
pub(crate) fn trace(args: &TraceArgs) -> anyhow::Result<u8> {
    let mut screen = Screen::new(if args.json { Style::Json } else { Style::Person });
    if !Ledger::is_at(&args.ledger.ledger) {
        bail!("there is no ledger at {}; name it with --ledger", args.ledger.ledger.display());
    }
    let ledger = Ledger::open(&args.ledger.ledger)?;
    let key = match find(&args.what, &ledger)? {
        Found::Key(key) => key,
        Found::Several(keys) => {
            complain(&format!("spinledger: {} entries begin with {}:", keys.len(), args.what));
            keys.iter().take(10).for_each(|key| complain(&format!("  {key}")));
            return Ok(WRONG);
        }
    };
    let missing = if args.json {
        each::dump(&ledger, &key, &mut screen)
    } else if args.all {
        each::tree(&ledger, &key)
    } else {
        levels::tree(&ledger, &key)?
    };
    if missing > 0 {
        let missing = counted(missing, "record");
        complain(&format!("spinledger: {missing} not in the ledger {}", args.ledger.ledger.display()));
        return Ok(BROKEN);
    }
    Ok(WELL)
}

enum Found {
    Key(Key),
    Several(Vec<Key>),
}

fn find(what: &str, ledger: &Ledger) -> anyhow::Result<Found> {
    let path = Path::new(what);
    if path.is_file() {
        let key = file_key(path).with_context(|| format!("cannot tell what made {what}"))?;
        return Ok(Found::Key(
            key.with_context(|| format!("{what} carries no key: it was not written by spinledger"))?,
        ));
    }
    let hexadecimal = what.len() >= 4 && what.len() <= 64 && what.bytes().all(|b| b.is_ascii_hexdigit());
    if !hexadecimal {
        bail!("`{what}` is neither a file nor the first digits (four at least) of a key");
    }
    let mut keys = ledger.find(&what.to_ascii_lowercase())?;
    match keys.len() {
        0 => bail!("no entry of the ledger begins with {what}"),
        1 => Ok(Found::Key(keys.remove(0))),
        _ => Ok(Found::Several(keys)),
    }
}
