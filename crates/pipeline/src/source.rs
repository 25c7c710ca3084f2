//! The text of a pipeline, and places in it.

use spinledger_terms::Path;

/// A pipeline file: its name as the user typed it, and what is in it.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Source {
    name: String,
    text: String,
    /// Bytes before the first that is not UTF-8.
    broken: Option<usize>,
}

impl Source {
    /// A source from text. A byte order mark is dropped.
    pub fn new(name: impl Into<String>, text: impl Into<String>) -> Self {
        let mut text = text.into();
        if text.starts_with('\u{feff}') {
            text.remove(0);
        }
        Source { name: name.into(), text, broken: None }
    }

    /// A source from the bytes of a file. Where they are not UTF-8, [`read`](crate::read) says so, with the place.
    pub fn from_bytes(name: impl Into<String>, bytes: &[u8]) -> Self {
        let mark = [0xef, 0xbb, 0xbf];
        let bytes = bytes.strip_prefix(&mark).unwrap_or(bytes);
        match std::str::from_utf8(bytes) {
            Ok(text) => Source { name: name.into(), text: text.to_owned(), broken: None },
            Err(error) => Source {
                name: name.into(),
                text: String::from_utf8_lossy(bytes).into_owned(),
                broken: Some(error.valid_up_to()),
            },
        }
    }

    /// The name of the file, as typed.
    pub fn name(&self) -> &str {
        &self.name
    }

    /// The text; bytes that are not UTF-8 are replaced.
    pub fn text(&self) -> &str {
        &self.text
    }

    pub(crate) fn broken(&self) -> Option<usize> {
        self.broken
    }
}

/// A place in a source; lines and columns count from 1, columns and width in characters.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub struct Place {
    /// The line.
    pub line: usize,
    /// The column.
    pub column: usize,
    /// Length of the marked text on that line, at least 1.
    pub width: usize,
}

/// A text by lines, as editors count them: broken at line feeds only.
pub(crate) struct Lines<'t> {
    text: &'t str,
    /// Byte offsets at which lines begin.
    starts: Vec<usize>,
}

impl<'t> Lines<'t> {
    pub(crate) fn new(text: &'t str) -> Self {
        let starts = std::iter::once(0).chain(text.match_indices('\n').map(|(i, _)| i + 1)).collect();
        Lines { text, starts }
    }

    /// A line, counted from 1, without its end; empty beyond the text.
    pub(crate) fn line(&self, line: usize) -> &'t str {
        let Some(&start) = line.checked_sub(1).and_then(|i| self.starts.get(i)) else { return "" };
        let rest = &self.text[start..];
        rest.split('\n').next().unwrap_or_default().trim_end_matches('\r')
    }

    /// Line and column, both counted from 1, of the character at a byte offset; the end of the text for what lies beyond it.
    pub(crate) fn position(&self, offset: usize) -> (usize, usize) {
        let mut byte = offset.min(self.text.len());
        while !self.text.is_char_boundary(byte) {
            byte -= 1;
        }
        let line = self.starts.partition_point(|start| *start <= byte);
        let start = self.starts[line - 1];
        (line, self.text[start..byte].chars().count() + 1)
    }

    /// The place as a path.
    pub(crate) fn path(&self, offset: usize) -> Path {
        let (line, column) = self.position(offset);
        Path::at(line, column)
    }

    /// The nearest place within the text.
    pub(crate) fn clamp(&self, line: usize, column: usize) -> (usize, usize) {
        let line = line.clamp(1, self.starts.len());
        (line, column.clamp(1, self.line(line).chars().count() + 1))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn lines_and_positions() {
        let lines = Lines::new("a\r\nße\n");
        assert_eq!((lines.line(1), lines.line(2), lines.line(3), lines.line(4)), ("a", "ße", "", ""));
        assert_eq!(lines.position(0), (1, 1));
        assert_eq!(lines.position(5), (2, 2));
        assert_eq!(lines.position(4), (2, 1));
        assert_eq!(lines.position(7), (3, 1));
        assert_eq!(lines.position(60), (3, 1));
        assert_eq!(lines.clamp(9, 9), (3, 1));
        assert_eq!(lines.clamp(2, 9), (2, 3));
    }

    #[test]
    fn bytes_that_are_not_text_are_remembered() {
        let source = Source::from_bytes("p.yaml", b"\xef\xbb\xbfa: \xc3\xbc\xff");
        assert_eq!((source.text(), source.broken()), ("a: ü\u{fffd}", Some(5)));
        assert_eq!(Source::from_bytes("p.yaml", b"\xef\xbb\xbfa").text(), "a");
        assert_eq!(Source::new("p.yaml", "\u{feff}a").text(), "a");
    }
}
