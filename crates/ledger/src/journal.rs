//! Journals: the ledger's index as files, one for each process that publishes, one line for each entry.
//!
//! A line is a JSON object: `k` key, `t` kind, `c` content, `s` seconds, `u` updates (absent when 0), `g` place in a chain as
//! `[chain, block, number, rows]` (absent for others), `n` note
//! (absent when empty), and last `x`, the first eight digits of the BLAKE3 of the line's bytes
//! before `,"x"`: a flipped digit in a content would otherwise pass into keys.

use crate::error::{LedgerError, WriteError};
use crate::host::unique;
use crate::index::{ChainPlace, Index, Line};
use crate::writes::{LineFile, Writes};
use serde::Deserialize;
use spinledger_terms::Key;
use std::fmt::Write as _;
use std::fs;
use std::io::ErrorKind;
use std::path::{Path, PathBuf};

/// The text of a line, without line feed.
pub(crate) fn text_of(line: &Line) -> String {
    let quoted = |text: &str| serde_json::Value::from(text).to_string();
    let seconds = if line.seconds.is_finite() { line.seconds } else { 0.0 };
    let mut text = format!("{{\"k\":\"{}\",\"t\":{},\"c\":\"{}\"", line.key, quoted(&line.kind), line.content);
    let _ = write!(text, ",\"s\":{}", serde_json::Value::from(seconds));
    if line.updates != 0 {
        let _ = write!(text, ",\"u\":{}", line.updates);
    }
    if let Some(ChainPlace { chain, block, number, rows }) = line.chain {
        let _ = write!(text, ",\"g\":[\"{chain}\",{block},{number},{rows}]");
    }
    if !line.note.is_empty() {
        let _ = write!(text, ",\"n\":{}", quoted(&line.note));
    }
    let check = check(text.as_bytes());
    let _ = write!(text, ",\"x\":\"{check}\"}}");
    text
}

#[derive(Deserialize)]
struct Raw<'a> {
    #[serde(borrow)]
    k: &'a str,
    t: String,
    #[serde(borrow)]
    c: &'a str,
    s: f64,
    #[serde(default)]
    u: u64,
    #[serde(borrow, default)]
    g: Option<(&'a str, u32, u32, u64)>,
    #[serde(default)]
    n: String,
}

/// The line of a text; None where it is torn or damaged.
pub(crate) fn line_of(text: &[u8]) -> Option<Line> {
    const TAIL: usize = ",\"x\":\"01234567\"}".len();
    let (body, tail) = text.split_at_checked(text.len().checked_sub(TAIL)?)?;
    let digits = tail.strip_prefix(b",\"x\":\"")?.strip_suffix(b"\"}")?;
    if check(body).as_bytes() != digits {
        return None;
    }
    let raw: Raw<'_> = serde_json::from_slice(text).ok()?;
    let chain = match raw.g {
        None => None,
        Some((chain, block, number, rows)) => Some(ChainPlace { chain: chain.parse().ok()?, block, number, rows }),
    };
    Some(Line {
        key: raw.k.parse().ok()?,
        kind: raw.t,
        chain,
        content: raw.c.parse().ok()?,
        seconds: raw.s,
        updates: raw.u,
        note: raw.n,
    })
}

fn check(bytes: &[u8]) -> String {
    blake3::hash(bytes).to_hex()[..8].to_owned()
}

/// Reads all journals of a folder.
pub(crate) fn read_all(folder: &Path) -> Result<Index, LedgerError> {
    let mut index = Index::default();
    for path in files(folder)? {
        match fs::read(&path) {
            Ok(bytes) => read_into(&mut index, &path, &bytes),
            // Removed, by a trim, since the folder was listed.
            Err(error) if error.kind() == ErrorKind::NotFound => {}
            Err(error) => return Err(LedgerError::read("read the journal", &path)(error)),
        }
    }
    Ok(index)
}

fn read_into(index: &mut Index, path: &Path, bytes: &[u8]) {
    let mut rest = bytes;
    let mut number = 0;
    while !rest.is_empty() {
        number += 1;
        let end = rest.iter().position(|byte| *byte == b'\n');
        let (text, next) = match end {
            Some(end) => (&rest[..end], &rest[end + 1..]),
            None => (rest, &rest[rest.len()..]),
        };
        rest = next;
        match line_of(text) {
            Some(line) => index.add(line),
            // The last line of a process that was killed while it wrote; the entry is found by looking it up.
            None if end.is_none() => {}
            None if text.is_empty() => {}
            None => index.warn(format!(
                "{}:{number}: a damaged line of the journal; its entry is found again when it is asked for",
                path.display()
            )),
        }
    }
}

/// Rewrites journals without the lines of some keys.
pub(crate) fn forget(
    writes: &Writes,
    folder: &Path,
    temporary: &Path,
    gone: &dyn Fn(&Key) -> bool,
) -> Result<(), LedgerError> {
    for path in files(folder)? {
        let bytes = fs::read(&path).map_err(LedgerError::read("read the journal", &path))?;
        let stays = |text: &&[u8]| !line_of(text).is_some_and(|line| gone(&line.key));
        let lines: Vec<&[u8]> = bytes.split_inclusive(|byte| *byte == b'\n').collect();
        let kept: Vec<&[u8]> =
            lines.iter().copied().filter(|text| stays(&text.strip_suffix(b"\n").unwrap_or(text))).collect();
        if kept.is_empty() {
            writes.remove_file(&path)?;
        } else if kept.len() < lines.len() {
            writes.write_file_via(&path, temporary, &kept.concat())?;
        }
    }
    Ok(())
}

fn files(folder: &Path) -> Result<Vec<PathBuf>, LedgerError> {
    let entries = fs::read_dir(folder).map_err(LedgerError::read("list", folder))?;
    let mut paths = Vec::new();
    for entry in entries {
        let path = entry.map_err(LedgerError::read("list", folder))?.path();
        if path.extension().is_some_and(|e| e == "jsonl") {
            paths.push(path);
        }
    }
    paths.sort();
    Ok(paths)
}

/// The journal of this process, made when it publishes first.
#[derive(Debug)]
pub(crate) struct Journal {
    folder: PathBuf,
    file: Option<LineFile>,
}

impl Journal {
    pub(crate) fn new(folder: PathBuf) -> Self {
        Journal { folder, file: None }
    }

    pub(crate) fn append(&mut self, writes: &Writes, line: &Line) -> Result<(), WriteError> {
        let file = match &mut self.file {
            Some(file) => file,
            None => {
                let start = jiff::Timestamp::now().strftime("%Y%m%dT%H%M%SZ").to_string();
                let name = format!("{start}-{}-{}.jsonl", std::process::id(), unique());
                self.file.insert(writes.line_file(&self.folder.join(name))?)
            }
        };
        file.append(&text_of(line))
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;
    use spinledger_terms::ContentHash;

    fn any_line() -> impl Strategy<Value = Line> {
        let place = proptest::option::of((0u8..3, 0u32..4, 0u32..3, any::<u64>()));
        (any::<u8>(), "[a-z\"\\\\é]{0,8}", any::<u8>(), 0.0..1e9, any::<u64>(), place, "[a-z\"{}]{0,8}").prop_map(
            |(key, kind, content, seconds, updates, place, note)| Line {
                key: Key([key; 32]),
                kind,
                chain: place.map(|(chain, block, number, rows)| ChainPlace {
                    chain: Key([chain; 32]),
                    block,
                    number,
                    rows,
                }),
                content: ContentHash([content; 32]),
                seconds,
                updates,
                note,
            },
        )
    }

    proptest! {
        #[test]
        fn lines_read_back(line in any_line()) {
            prop_assert_eq!(line_of(text_of(&line).as_bytes()), Some(line));
        }

        /// Journals of many writers are read in any order, in any split.
        #[test]
        fn the_order_of_journals_does_not_matter(lines in proptest::collection::vec(any_line(), 0..40), split in 0usize..40) {
            let text = |lines: &[Line]| lines.iter().map(|l| text_of(l) + "\n").collect::<String>().into_bytes();
            let (head, tail) = lines.split_at(split.min(lines.len()));
            let path = Path::new("journal");
            let (mut one, mut two) = (Index::default(), Index::default());
            read_into(&mut one, path, &text(head));
            read_into(&mut one, path, &text(tail));
            let mut reversed = tail.to_vec();
            reversed.reverse();
            read_into(&mut two, path, &text(&reversed));
            read_into(&mut two, path, &text(head));
            prop_assert_eq!(one, two);
        }

        /// A journal cut anywhere gives the whole lines before the cut and no warning.
        #[test]
        fn torn_lines_are_ignored(count in 1usize..5, cut in 0usize..1000) {
            let lines: Vec<Line> = (0..count).map(|i| Line {
                key: Key([i as u8; 32]), kind: "averages".into(), chain: None, content: ContentHash([0; 32]), seconds: 0.5, updates: 0, note: String::new(),
            }).collect();
            let text: String = lines.iter().map(|l| text_of(l) + "\n").collect();
            let cut = cut.min(text.len());
            let mut index = Index::default();
            read_into(&mut index, Path::new("journal"), &text.as_bytes()[..cut]);
            // A line without its line feed is whole.
            let whole = lines.iter().scan(0, |end, l| { *end += text_of(l).len() + 1; Some(*end) }).filter(|end| end - 1 <= cut).count();
            prop_assert_eq!(index.len(), whole);
            prop_assert_eq!(index.warnings().count(), 0);
        }

        /// No flipped byte passes.
        #[test]
        fn a_damaged_line_is_a_warning(place in any::<prop::sample::Index>(), with in any::<u8>()) {
            let line = Line { key: Key([1; 32]), kind: "averages".into(), chain: None, content: ContentHash([2; 32]), seconds: 0.5, updates: 7, note: "{\"a\":1}".into() };
            let good = text_of(&line);
            let mut bytes = good.clone().into_bytes();
            let place = place.index(bytes.len());
            prop_assume!(bytes[place] != with && with != b'\n');
            bytes[place] = with;
            bytes.push(b'\n');
            bytes.extend_from_slice(text_of(&Line { key: Key([3; 32]), ..line }).as_bytes());
            let mut index = Index::default();
            read_into(&mut index, Path::new("journal"), &bytes);
            prop_assert_eq!(index.len(), 1);
            prop_assert_eq!(index.warnings().count(), 1);
        }
    }
}
