//! Figures and pages name the entry that they come from, as Parquet files do in their metadata: a key inside the file, found again wherever
//! the file has gone. The content of such a file is hashed without the key.

use crate::error::LedgerError;
use crate::tables::table::parquet_key;
use spinledger_terms::Key;
use std::fs::File;
use std::io::{ErrorKind, Read};
use std::path::Path;

/// Keyword of the key, in each kind of file.
const KEY: &str = "spinledger.key";
/// A key stands within so many bytes from the beginning.
const WITHIN: u64 = 1 << 16;

const PNG: &[u8] = b"\x89PNG\r\n\x1a\n";
/// Signature and header chunk of a PNG file.
const PNG_HEAD: usize = 8 + 25;

/// The bytes of a figure or page with its key in them: in SVG an element `metadata`, in PNG a chunk `tEXt`, in HTML an element `meta`. Bytes of
/// other kinds are left as they are.
pub(crate) fn stamped(name: &str, mut bytes: Vec<u8>, key: &Key) -> Result<Vec<u8>, LedgerError> {
    let unfit = || LedgerError::Unfit { name: name.to_owned() };
    let (at, mark) = match name.rsplit_once('.').map(|(_, extension)| extension) {
        Some("svg") => (after_tag(&bytes, b"<svg").ok_or_else(unfit)?, svg_mark(key).into_bytes()),
        Some("html") => (after_tag(&bytes, b"<head").ok_or_else(unfit)?, html_mark(key).into_bytes()),
        Some("png") if bytes.starts_with(PNG) && bytes.len() > PNG_HEAD => (PNG_HEAD, png_mark(key)),
        Some("png") => return Err(unfit()),
        _ => return Ok(bytes),
    };
    bytes.splice(at..at, mark);
    Ok(bytes)
}

fn svg_mark(key: &Key) -> String {
    format!("\n<metadata>{KEY} {key}</metadata>")
}

fn html_mark(key: &Key) -> String {
    format!("\n<meta name=\"{KEY}\" content=\"{key}\"/>")
}

/// A chunk of the PNG standard (second edition, sections 5.3 and 11.3.4.3): length, type, keyword, zero, text, cyclic redundancy check.
fn png_mark(key: &Key) -> Vec<u8> {
    let mut data = b"tEXt".to_vec();
    data.extend_from_slice(KEY.as_bytes());
    data.push(0);
    data.extend_from_slice(key.to_string().as_bytes());
    let length = u32::try_from(data.len() - 4).unwrap_or(0);
    let check = crc32fast::hash(&data);
    [&length.to_be_bytes()[..], &data, &check.to_be_bytes()].concat()
}

/// Behind the first tag that begins so. Our files have no `>` within its attributes.
fn after_tag(bytes: &[u8], tag: &[u8]) -> Option<usize> {
    let from = find(bytes, tag)?;
    Some(from + bytes[from..].iter().position(|b| *b == b'>')? + 1)
}

fn find(bytes: &[u8], what: &[u8]) -> Option<usize> {
    bytes.windows(what.len()).position(|window| window == what)
}

/// The key of the ledger entry that a file of results names: a Parquet file in its metadata, an SVG, PNG or HTML file near its beginning. None where
/// it names none.
///
/// # Errors
/// Where the file is absent, cannot be read, or is none of these.
pub fn file_key(path: &Path) -> Result<Option<Key>, LedgerError> {
    let mut head = Vec::new();
    let read = File::open(path).and_then(|file| file.take(WITHIN).read_to_end(&mut head));
    match read {
        Ok(_) => {}
        Err(error) if error.kind() == ErrorKind::NotFound => {
            return Err(LedgerError::Absent { path: path.to_owned() });
        }
        Err(error) => return Err(LedgerError::read("read", path)(error)),
    }
    if head.starts_with(b"PAR1") {
        return parquet_key(path);
    }
    let before: [&[u8]; 3] =
        [b"<metadata>spinledger.key ", b"<meta name=\"spinledger.key\" content=\"", b"tEXtspinledger.key\0"];
    let marked = head.starts_with(PNG) || head.starts_with(b"<svg") || head.starts_with(b"<!DOCTYPE html>");
    if !marked {
        return Err(LedgerError::Foreign { path: path.to_owned() });
    }
    let digits = before.iter().find_map(|mark| {
        let from = find(&head, mark)? + mark.len();
        head.get(from..from + 64)
    });
    Ok(digits.and_then(|digits| std::str::from_utf8(digits).ok()?.parse().ok()))
}

#[cfg(test)]
mod tests {
    use super::*;

    fn round_trip(name: &str, bytes: &[u8]) -> Vec<u8> {
        let key = Key::of(name);
        let folder = tempfile::tempdir().unwrap();
        let path = folder.path().join(name);
        std::fs::write(&path, bytes).unwrap();
        assert_eq!(file_key(&path).unwrap(), None, "{name} before");
        let stamped = stamped(name, bytes.to_vec(), &key).unwrap();
        std::fs::write(&path, &stamped).unwrap();
        assert_eq!(file_key(&path).unwrap(), Some(key), "{name} after");
        stamped
    }

    /// A picture of one pixel, as in the PNG standard: signature, header, data, end.
    fn pixel() -> Vec<u8> {
        let chunk = |kind: &[u8], data: &[u8]| {
            let whole = [kind, data].concat();
            let check = crc32fast::hash(&whole);
            [&(data.len() as u32).to_be_bytes()[..], &whole, &check.to_be_bytes()].concat()
        };
        let head = chunk(b"IHDR", &[0, 0, 0, 1, 0, 0, 0, 1, 8, 0, 0, 0, 0]);
        let data = chunk(b"IDAT", &[0x78, 0x9c, 0x63, 0x60, 0, 0, 0, 2, 0, 1]);
        [PNG, &head, &data, &chunk(b"IEND", b"")].concat()
    }

    #[test]
    fn keys_are_found_again() {
        let svg = round_trip("a.svg", b"<svg width=\"1\" height=\"1\">\n<title>x</title></svg>\n");
        assert!(svg.starts_with(b"<svg width=\"1\" height=\"1\">\n<metadata>spinledger.key "));
        round_trip("a.html", b"<!DOCTYPE html>\n<html>\n<head>\n<title>x</title></head></html>");
        let png = round_trip("a.png", &pixel());
        // The end of the header, then the length of the chunk: keyword, zero, 64 digits.
        assert_eq!(png[PNG_HEAD..PNG_HEAD + 8], [&79u32.to_be_bytes()[..], b"tEXt"].concat());
        assert_eq!(&png[PNG_HEAD + 12 + 79..], &pixel()[PNG_HEAD..]);
    }

    #[test]
    fn what_cannot_carry_a_key_is_refused_or_left() {
        let key = Key::of("x");
        for (name, bytes) in [("a.svg", &b"no drawing"[..]), ("a.png", b"no picture"), ("a.html", b"no page")] {
            assert!(matches!(stamped(name, bytes.to_vec(), &key), Err(LedgerError::Unfit { .. })), "{name}");
        }
        assert_eq!(stamped("a.txt", b"text".to_vec(), &key).unwrap(), b"text");
        let folder = tempfile::tempdir().unwrap();
        let path = folder.path().join("a");
        for bytes in [&b""[..], b"text", b"PAR"] {
            std::fs::write(&path, bytes).unwrap();
            assert!(matches!(file_key(&path), Err(LedgerError::Foreign { .. })), "{bytes:?}");
        }
        std::fs::write(&path, b"PAR1 and nothing").unwrap();
        assert!(matches!(file_key(&path), Err(LedgerError::Parquet { .. })));
        assert!(matches!(file_key(&folder.path().join("b")), Err(LedgerError::Absent { .. })));
    }
}
