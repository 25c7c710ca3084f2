//! From problems, which hold paths, to places in the text.

use crate::source::{Lines, Place, Source};
use crate::yaml::{self, Document, Node};
use serde::Serialize;
use spinledger_terms::{Mark, Path, Problem, Segment, Value};

/// Most problems that are shown, and most bytes that are parsed to place them: each place costs a few runs of the parser.
const MOST: usize = 1000;
const MOST_BYTES: usize = 50 << 20;
/// So many are shown of a text of any length.
pub(crate) const FEW: usize = 20;

/// A problem with its place, as written for machines.
#[derive(Clone, Debug, PartialEq, Serialize)]
#[non_exhaustive]
pub struct Located {
    /// The file, as typed.
    pub file: String,
    /// The line, from 1.
    pub line: usize,
    /// The column in characters, from 1.
    pub column: usize,
    /// How many characters are meant.
    pub width: usize,
    /// The place as a path in the document; empty where there is none.
    pub path: String,
    /// What is wrong.
    pub message: String,
    /// What was expected.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub expected: Option<String>,
    /// The nearest valid word.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub nearest: Option<String>,
    /// Another place that has to do with it.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub other: Option<Other>,
}

/// The second place of a problem.
#[derive(Clone, Debug, PartialEq, Serialize)]
#[non_exhaustive]
pub struct Other {
    /// The line, from 1.
    pub line: usize,
    /// The column in characters, from 1.
    pub column: usize,
    /// How many characters are meant.
    pub width: usize,
    /// What it has to do with the problem.
    pub how: String,
}

/// The place of a problem. Where its path leads to nothing that stands in the text (defaults, short forms), the nearest place above.
pub fn locate(source: &Source, problem: &Problem) -> Place {
    Places::new(source).place(&problem.path, problem.mark)
}

/// Problems with their places, in the order of the text, without repetitions: the first thousand, fewer of a text beyond 50 kB.
///
/// Cost: a few runs of the parser for each problem.
pub fn located(source: &Source, problems: &[Problem]) -> Vec<Located> {
    let places = Places::new(source);
    let mut out: Vec<Located> = Vec::new();
    let most = (MOST_BYTES / source.text().len().max(1)).clamp(FEW, MOST);
    for problem in problems.iter().take(most) {
        let place = places.place(&problem.path, problem.mark);
        let other = problem.other.as_ref().map(|(path, how)| {
            let Place { line, column, width } = places.place(path, places.telling(path));
            Other { line, column, width, how: how.clone() }
        });
        let in_text = matches!(problem.path.0.first(), Some(Segment::At { .. }));
        let located = Located {
            file: source.name().to_owned(),
            line: place.line,
            column: place.column,
            width: place.width,
            path: if in_text { String::new() } else { problem.path.to_string() },
            message: problem.message.clone(),
            expected: problem.expected.clone(),
            nearest: problem.nearest.clone(),
            other,
        };
        // What an anchor holds is found wrong once for each of its aliases.
        let telling = |l: &Located| (l.line, l.column, l.message.clone());
        if !out.iter().any(|o| o.line == located.line && telling(o) == telling(&located)) {
            out.push(located);
        }
    }
    out.sort_by(|a, b| (a.line, a.column, &a.message).cmp(&(b.line, b.column, &b.message)));
    out
}

/// Finds places in one source.
pub(crate) struct Places<'a> {
    text: &'a str,
    lines: Lines<'a>,
    document: Option<Document>,
}

impl<'a> Places<'a> {
    pub(crate) fn new(source: &'a Source) -> Self {
        let text = source.text();
        Places { text, lines: Lines::new(text), document: yaml::read(text).0 }
    }

    /// The part of a place that tells most: of a mapping its key, of anything else the value.
    fn telling(&self, path: &Path) -> Mark {
        match self.document.as_ref().map(|document| document.root.find(path, Mark::Value).node) {
            Some(Node::Map(_)) => Mark::Key,
            _ => Mark::Value,
        }
    }

    pub(crate) fn place(&self, path: &Path, mark: Mark) -> Place {
        if let Some(Segment::At { line, column }) = path.0.first() {
            let (line, column) = self.lines.clamp(*line, *column);
            return Place { line, column, width: width(rest_of(self.lines.line(line), column, false).1, None).max(1) };
        }
        let Some(document) = &self.document else { return Place { line: 1, column: 1, width: 1 } };
        let found = document.root.find(path, mark);
        let at = |mark| self.lines.position(yaml::offset(self.text, &found.route, mark).unwrap_or(0));
        if found.mark == Mark::Key {
            let (line, column) = at(Mark::Key);
            return self.marked(line, column, None);
        }
        let (line, column) = at(Mark::Value);
        let first = rest_of(self.lines.line(line), column, true).1.chars().next();
        // A mapping or list without brackets is marked by its key: its own beginning is its first key or element.
        if found.keyed && !matches!(found.node, Node::Leaf(_)) && !matches!(first, Some('{' | '[')) {
            let (line, column) = at(Mark::Key);
            return self.marked(line, column, None);
        }
        self.marked(line, column, Some(found.node))
    }

    /// The place with the length of what stands there.
    fn marked(&self, line: usize, column: usize, node: Option<&Node>) -> Place {
        let (skipped, rest) = rest_of(self.lines.line(line), column, true);
        Place { line, column: column + skipped, width: width(rest, node).max(1) }
    }
}

/// What stands on a line from a column on, where asked for after anchors and tags, and how many characters those take.
fn rest_of(line: &str, column: usize, skip: bool) -> (usize, &str) {
    let start = line.char_indices().nth(column - 1).map_or(line.len(), |(byte, _)| byte);
    let whole = &line[start..];
    let mut rest = whole;
    while skip && rest.starts_with(['&', '!']) {
        let Some(end) = rest.find([' ', '\t']) else { break };
        let after = rest[end..].trim_start();
        if after.is_empty() || after.starts_with('#') {
            break;
        }
        rest = after;
    }
    (whole[..whole.len() - rest.len()].chars().count(), rest)
}

/// Number of characters of the key or value that `rest` begins with, as far as it stands on this line.
fn width(rest: &str, node: Option<&Node>) -> usize {
    let count = |bytes: usize| rest[..bytes].trim_end().chars().count();
    match rest.chars().next() {
        Some(quote @ ('"' | '\'')) => count(quoted(rest, quote)),
        Some('{' | '[') => count(bracketed(rest)),
        Some('&' | '!' | '*') => count(rest.find([' ', '\t', ',', ']', '}']).unwrap_or(rest.len())),
        Some(c) if c.is_whitespace() => 1,
        _ => {
            // The text of a plain scalar may hold what would end it elsewhere.
            if let Some(Node::Leaf(Value::Text(text))) = node
                && !text.is_empty()
                && rest.starts_with(text.as_str())
            {
                return text.chars().count();
            }
            count(plain(rest, node.is_some()))
        }
    }
}

/// Bytes up to and including the closing quote.
fn quoted(rest: &str, quote: char) -> usize {
    let mut escaped = false;
    for (i, c) in rest.char_indices().skip(1) {
        match c {
            _ if escaped => escaped = false,
            '\\' if quote == '"' => escaped = true,
            c if c == quote => return i + 1,
            _ => {}
        }
    }
    rest.len()
}

/// Bytes up to and including the closing bracket.
fn bracketed(rest: &str) -> usize {
    let (mut depth, mut at) = (0, 0);
    while let Some(c) = rest[at..].chars().next() {
        match c {
            '"' | '\'' => {
                at += quoted(&rest[at..], c);
                continue;
            }
            '{' | '[' => depth += 1,
            '}' | ']' => {
                depth -= 1;
                if depth == 0 {
                    return at + 1;
                }
            }
            _ => {}
        }
        at += c.len_utf8();
    }
    comment(rest)
}

/// Bytes of a plain key (up to its colon) or value.
fn plain(rest: &str, value: bool) -> usize {
    let end = comment(rest);
    let rest = &rest[..end];
    let mut end = rest.find([',', ']', '}']).unwrap_or(rest.len());
    if !value {
        let colon = |i: &usize| rest[i + 1..].is_empty() || rest[i + 1..].starts_with([' ', '\t']);
        end = end.min(rest.match_indices(':').map(|(i, _)| i).find(colon).unwrap_or(end));
    }
    end
}

/// Bytes before a comment.
fn comment(rest: &str) -> usize {
    if rest.starts_with('#') { 0 } else { rest.find(" #").unwrap_or(rest.len()) }
}
