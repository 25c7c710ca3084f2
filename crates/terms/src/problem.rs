//! What is wrong with a pipeline, and where.

use std::fmt;

/// One turn of a path.
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub enum Segment {
    /// Into a mapping.
    Key(String),
    /// Into a list.
    Index(usize),
    /// A place in the text itself, both counted from 1, where no path leads to it: broken YAML, repeated keys. Stands alone.
    At {
        /// The line.
        line: usize,
        /// The column, in characters.
        column: usize,
    },
}

/// The way from the top of a document to a place in it.
#[derive(Clone, Debug, Default, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct Path(pub Vec<Segment>);

impl Path {
    /// The top of the document.
    pub fn top() -> Self {
        Path::default()
    }

    /// A place in the text itself.
    pub fn at(line: usize, column: usize) -> Self {
        Path(vec![Segment::At { line, column }])
    }

    /// One step further into a mapping.
    pub fn key(&self, key: impl Into<String>) -> Self {
        let mut path = self.clone();
        path.0.push(Segment::Key(key.into()));
        path
    }

    /// One step further into a list.
    pub fn index(&self, index: usize) -> Self {
        let mut path = self.clone();
        path.0.push(Segment::Index(index));
        path
    }

    /// Further along a dotted path (`lattice.size`, `update.0.clusters`); words of digits are taken as indices.
    pub fn dotted(&self, dotted: &str) -> Self {
        dotted.split('.').fold(self.clone(), |path, word| match word.parse() {
            Ok(index) => path.index(index),
            Err(_) => path.key(word),
        })
    }
}

impl fmt::Display for Path {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        for (i, segment) in self.0.iter().enumerate() {
            if i > 0 {
                f.write_str(".")?;
            }
            match segment {
                Segment::Key(key) => f.write_str(key)?,
                Segment::Index(index) => write!(f, "{index}")?,
                Segment::At { line, column } => write!(f, "{line}:{column}")?,
            }
        }
        Ok(())
    }
}

/// Which part of a path's end is meant.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub enum Mark {
    /// The key itself.
    Key,
    /// The value.
    Value,
}

/// One mistake: where it is, what is wrong in words, what was expected, the nearest valid word.
#[derive(Clone, Debug, PartialEq)]
pub struct Problem {
    /// Where.
    pub path: Path,
    /// The key or the value at the path.
    pub mark: Mark,
    /// What is wrong, in words, without the place.
    pub message: String,
    /// What was expected.
    pub expected: Option<String>,
    /// The nearest valid word.
    pub nearest: Option<String>,
    /// Another place that has to do with it, and how.
    pub other: Option<(Path, String)>,
}

impl Problem {
    /// A problem with the value at `path`.
    pub fn at_value(path: &Path, message: impl Into<String>) -> Self {
        Problem {
            path: path.clone(),
            mark: Mark::Value,
            message: message.into(),
            expected: None,
            nearest: None,
            other: None,
        }
    }

    /// A problem with the last key of `path`.
    pub fn at_key(path: &Path, message: impl Into<String>) -> Self {
        Problem { mark: Mark::Key, ..Problem::at_value(path, message) }
    }

    /// Says what was expected.
    pub fn expected(mut self, expected: impl Into<String>) -> Self {
        self.expected = Some(expected.into());
        self
    }

    /// Names the nearest valid word, if any.
    pub fn nearest(mut self, nearest: Option<&str>) -> Self {
        self.nearest = nearest.map(str::to_owned);
        self
    }

    /// Points at a second place.
    pub fn other(mut self, path: Path, how: impl Into<String>) -> Self {
        self.other = Some((path, how.into()));
        self
    }
}
