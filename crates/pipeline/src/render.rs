//! Problems as people read them.

use crate::locate::{FEW, Located, located};
use crate::source::{Lines, Source};
use spinledger_terms::Problem;
use std::fmt::Write as _;

/// Columns of the whole block.
const COLUMNS: usize = 100;
/// Columns before the text of a line: six for its number, three for the bar.
const GUTTER: usize = 9;
/// Most lines of what was expected.
const LINES: usize = 4;

/// The problems as text, in the order of the source, an empty line between two:
///
/// ```text
/// ordering.yaml:14:5: `mesure` is not a key of a sample step
///     14 |     mesure: 20000
///        :     ^^^^^^ expected one of: chains, equilibrate, every, measure ...
///        :            nearest: measure
/// ```
pub fn render(source: &Source, problems: &[Problem]) -> String {
    let lines = Lines::new(source.text());
    let blocks: Vec<String> = located(source, problems).iter().map(|located| block(located, &lines)).collect();
    let mut out = blocks.join("\n");
    if problems.len() > blocks.len() && blocks.len() >= FEW {
        let _ = writeln!(out, "\n{}: {} problems in all, of which these are the first", source.name(), problems.len());
    }
    out
}

fn block(problem: &Located, lines: &Lines<'_>) -> String {
    let mut out = String::new();
    let _ = writeln!(out, "{}:{}:{}: {}", problem.file, problem.line, problem.column, plain(&problem.message));
    let mut notes = Vec::new();
    if let Some(expected) = &problem.expected {
        notes.push(("expected ", plain(expected)));
    }
    if let Some(nearest) = &problem.nearest {
        notes.push(("nearest: ", plain(nearest)));
    }
    excerpt(&mut out, lines, (problem.line, problem.column, problem.width), '^', &notes);
    if let Some(other) = &problem.other {
        excerpt(&mut out, lines, (other.line, other.column, other.width), '~', &[("", plain(&other.how))]);
    }
    out
}

/// A line with a mark under a part of it, and notes beside the mark.
fn excerpt(
    out: &mut String,
    lines: &Lines<'_>,
    (line, column, width): (usize, usize, usize),
    mark: char,
    notes: &[(&str, String)],
) {
    let Clipped { text, before, marked } = clip(lines.line(line), column - 1, width);
    let _ = writeln!(out, "{}", format!("{line:>6} | {text}").trim_end());
    let marks = format!("{}{}", " ".repeat(before), mark.to_string().repeat(marked));
    // Far to the right there is no room beside the mark.
    let (mut head, indent) = if before + marked <= COLUMNS / 2 {
        let indent = before + marked + 1;
        (format!("{marks} "), indent)
    } else {
        let _ = writeln!(out, "       : {marks}");
        (" ".repeat(4), 4)
    };
    let few = notes.len() > 1;
    for (label, note) in notes {
        let most = if few { 1 } else { LINES };
        for (i, row) in wrap(note, COLUMNS - GUTTER - indent - label.len(), most).iter().enumerate() {
            let label = if i == 0 { (*label).to_owned() } else { " ".repeat(label.len()) };
            let _ = writeln!(out, "       : {head}{label}{row}");
            head = " ".repeat(indent);
        }
    }
    if notes.is_empty() && before + marked <= COLUMNS / 2 {
        let _ = writeln!(out, "       : {marks}");
    }
}

/// Words in rows of about `width` columns; what does not fit in `most` rows ends in dots.
fn wrap(text: &str, width: usize, most: usize) -> Vec<String> {
    let mut rows: Vec<String> = vec![String::new()];
    for word in text.split(' ') {
        let last = rows.len() - 1;
        let full = !rows[last].is_empty() && columns(&rows[last]) + 1 + columns(word) > width;
        if full && rows.len() == most {
            let row = &mut rows[last];
            row.truncate(row.trim_end_matches(',').len());
            row.push_str(" ...");
            return rows;
        }
        if full {
            rows.push(word.to_owned());
        } else {
            if !rows[last].is_empty() {
                rows[last].push(' ');
            }
            rows[last].push_str(word);
        }
    }
    rows
}

/// A line fit for the screen, and where its mark goes.
struct Clipped {
    text: String,
    /// Screen columns before the mark.
    before: usize,
    /// Screen columns of the mark.
    marked: usize,
}

/// Cuts a long line to a window around the mark; tabs become four spaces, other control characters a replacement.
fn clip(line: &str, start: usize, width: usize) -> Clipped {
    let room = COLUMNS - GUTTER;
    let cells: Vec<(String, usize)> = line.chars().map(shown).collect();
    let total = |cells: &[(String, usize)]| cells.iter().map(|c| c.1).sum::<usize>();
    let (mut from, mut to) = (0, cells.len());
    if total(&cells) > room {
        let start = start.min(cells.len());
        from = start;
        // Some of what stands before, for orientation; all of it where it fits.
        while from > 0 && total(&cells[from - 1..start]) <= room / 3 {
            from -= 1;
        }
        to = from;
        while to < cells.len() && total(&cells[from..=to]) <= room - 2 {
            to += 1;
        }
    }
    let mut text = String::new();
    if from > 0 {
        text.push('…');
    }
    text.extend(cells[from..to].iter().map(|c| c.0.as_str()));
    if to < cells.len() {
        text.push('…');
    }
    let begin = start.clamp(from, cells.len());
    let end = (start + width).clamp(begin, to.max(begin));
    let before = total(&cells[from..begin]) + usize::from(from > 0);
    Clipped { text, before, marked: total(&cells[begin..end]).max(1) }
}

/// A character as it is shown, and its columns on the screen.
fn shown(c: char) -> (String, usize) {
    match c {
        '\t' => (" ".repeat(4), 4),
        c if c.is_control() => ("\u{fffd}".to_owned(), 1),
        c => (c.to_string(), char_columns(c)),
    }
}

/// Screen columns of a character: 2 in the wide and full-width blocks of Unicode (UAX 11), 0 for what combines.
fn char_columns(c: char) -> usize {
    match u32::from(c) {
        0x300..=0x36f | 0x200b..=0x200f | 0x2028..=0x202e | 0x2060..=0x2064 | 0xfe00..=0xfe0f => 0,
        0x1100..=0x115f
        | 0x2e80..=0x303e
        | 0x3041..=0xa4cf
        | 0xac00..=0xd7a3
        | 0xf900..=0xfaff
        | 0xfe30..=0xfe6f
        | 0xff00..=0xff60
        | 0xffe0..=0xffe6
        | 0x1f300..=0x1f64f
        | 0x1f900..=0x1f9ff
        | 0x20000..=0x3fffd => 2,
        _ => 1,
    }
}

fn columns(text: &str) -> usize {
    text.chars().map(char_columns).sum()
}

/// Text of the user's on one line and without control characters, so that no file can draw on the terminal.
fn plain(text: &str) -> String {
    text.chars().map(|c| if c.is_control() { '\u{fffd}' } else { c }).collect()
}

#[cfg(test)]
mod tests {
    use super::*;
    use spinledger_terms::{Mark, Path};

    fn problem(path: Path, mark: Mark) -> Problem {
        Problem { mark, ..Problem::at_value(&path, "it is wrong") }
    }

    /// The layout of the style guide, letter by letter.
    #[test]
    fn the_block() {
        let source = Source::new("ordering.yaml", format!("{}steps:\n  chains:\n    mesure: 20000\n", "\n".repeat(11)));
        let problem = Problem::at_key(
            &Path::top().key("steps").key("chains").key("mesure"),
            "`mesure` is not a key of a sample step",
        );
        let words = "one of: chains, equilibrate, every, exchange, follow, inverse_temperature, keep, lattice, measure";
        let text = render(&source, &[problem.expected(words).nearest(Some("measure"))]);
        let expected = "\
ordering.yaml:14:5: `mesure` is not a key of a sample step
    14 |     mesure: 20000
       :     ^^^^^^ expected one of: chains, equilibrate, every, exchange, follow ...
       :            nearest: measure
";
        assert_eq!(text, expected);
    }

    #[test]
    fn long_lines_are_clipped_around_the_mark() {
        let long = format!("a: {{ b: [{}, x, {}] }}", vec!["1"; 60].join(", "), vec!["2"; 60].join(", "));
        let source = Source::new("p.yaml", long);
        let text = render(&source, &[problem(Path::top().key("a").key("b").index(60), Mark::Value)]);
        let rows: Vec<Vec<char>> = text.lines().map(|l| l.chars().collect()).collect();
        let mark = rows[2].iter().position(|c| *c == '^').unwrap();
        assert_eq!(rows[1][mark], 'x');
        assert!(rows[1].len() <= COLUMNS, "{text}");
        assert!(rows[1].contains(&'…'));
    }

    #[test]
    fn wide_characters_and_tabs_keep_the_mark_in_place() {
        let source = Source::new("p.yaml", "{ 温度:\t\"é\", b: c }");
        let at = |key: &str, mark| render(&source, &[problem(Path::top().key(key), mark)]);
        assert_eq!(at("温度", Mark::Key).lines().nth(2), Some("       :   ^^^^"));
        assert_eq!(at("温度", Mark::Value).lines().nth(2), Some("       :            ^^^"));
        assert_eq!(at("b", Mark::Value).lines().nth(2), Some("       :                    ^"));
    }

    #[test]
    fn both_places_are_shown() {
        let source = Source::new("p.yaml", "a: 1\nb: 2\n");
        let both = problem(Path::top().key("b"), Mark::Value).other(Path::top().key("a"), "set here");
        assert_eq!(
            render(&source, &[both]),
            "p.yaml:2:4: it is wrong\n     2 | b: 2\n       :    ^\n     1 | a: 1\n       :    ~ set here\n"
        );
    }
}
