//! The one object that prints. A closed pipe ends the printing, not the run.

use crate::text::{columns, fit, wide, wrap};
use std::io::{IsTerminal, Write};
use std::time::{Duration, Instant};

/// How often the line at the bottom of a terminal is drawn.
const DRAW_EVERY: Duration = Duration::from_millis(150);
/// How often a line is printed where there is no terminal.
const LINE_EVERY: Duration = Duration::from_secs(15);

/// What is shown, and how.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) enum Style {
    /// For a person.
    Person,
    /// Nothing but what went wrong.
    Quiet,
    /// JSON lines.
    Json,
}

/// The screen.
pub(crate) struct Screen {
    style: Style,
    terminal: bool,
    colour: bool,
    drawn: usize,
    last: Instant,
}

impl Screen {
    /// On standard output.
    pub(crate) fn new(style: Style) -> Self {
        let terminal = std::io::stdout().is_terminal();
        let last = Instant::now();
        Screen { style, terminal, colour: colours(), drawn: 0, last }
    }

    /// Whether JSON lines are wanted.
    pub(crate) fn is_json(&self) -> bool {
        self.style == Style::Json
    }

    /// A line for a person.
    pub(crate) fn line(&mut self, text: &str) {
        if self.style == Style::Person {
            self.clear();
            put(&format!("{text}\n"));
        }
    }

    /// A sentence for a person: in as many lines as the terminal needs for it, or of 80 columns where there is none.
    pub(crate) fn tell(&mut self, text: &str) {
        for line in wrap(text, width()) {
            self.line(&line);
        }
    }

    /// A table with a header for a person; where a terminal has no room for it, a paragraph a row.
    pub(crate) fn table(&mut self, rows: &[Vec<String>], right: &[usize]) {
        let lines = columns(rows, right);
        let Some((head, body)) = rows.split_first() else { return };
        if !self.terminal || lines.iter().all(|line| wide(line) <= width()) {
            lines.iter().for_each(|line| self.line(line));
            return;
        }
        for row in body {
            let cells = row.iter().zip(head).skip(1).filter(|(cell, _)| !cell.is_empty());
            let cells = cells.map(|(cell, name)| if name.is_empty() { cell.clone() } else { format!("{cell} {name}") });
            self.tell(&format!("{}: {}", row[0], cells.collect::<Vec<_>>().join(", ")));
        }
    }

    /// An event for a program.
    pub(crate) fn event(&mut self, event: &serde_json::Value) {
        if self.style == Style::Json {
            put(&format!("{event}\n"));
        }
    }

    /// Something that went wrong: for a person, in any style, on standard error.
    pub(crate) fn trouble(&mut self, text: &str) {
        self.clear();
        complain(text);
    }

    /// A line of a table that is good news no more: in its place for a person, on standard error where only what went wrong is told.
    pub(crate) fn wrong(&mut self, text: &str, code: &str) {
        if self.style == Style::Quiet {
            self.trouble(text);
        } else {
            let text = self.tint(text, code);
            self.line(&text);
        }
    }

    /// The line at the bottom of a terminal; without a terminal a plain line now and then. `text` is made only when it is shown, for the room
    /// that there is.
    pub(crate) fn bottom(&mut self, text: impl FnOnce(Width) -> String) {
        if self.style != Style::Person {
            return;
        }
        let every = if self.terminal { DRAW_EVERY } else { LINE_EVERY };
        if self.last.elapsed() < every {
            return;
        }
        self.last = Instant::now();
        if self.terminal {
            // The last column stays empty: some terminals go on to the next line behind it.
            let room = width().saturating_sub(1);
            let text = fit(&text(Width::Of(room)), room);
            self.clear();
            self.drawn = wide(&text);
            put(&text);
        } else {
            put(&format!("{}\n", text(Width::Any)));
        }
    }

    /// Marks text as good, bad or doubtful, where the terminal has colours; the words say it too.
    pub(crate) fn tint(&self, text: &str, code: &str) -> String {
        tinted(text, code, self.colour)
    }

    fn clear(&mut self) {
        if self.drawn > 0 {
            put(&format!("\r{}\r", " ".repeat(self.drawn)));
            self.drawn = 0;
        }
    }
}

impl Drop for Screen {
    fn drop(&mut self) {
        self.clear();
    }
}

/// Whether standard output is a terminal, and colours are not unwanted (`NO_COLOR`).
pub(crate) fn colours() -> bool {
    let plain = std::env::var_os("NO_COLOR").is_some_and(|v| !v.is_empty());
    std::io::stdout().is_terminal() && !plain
}

/// Text in a colour, where there are any.
pub(crate) fn tinted(text: &str, code: &str, colour: bool) -> String {
    if colour { format!("\x1b[{code}m{text}\x1b[0m") } else { text.to_owned() }
}

/// How much room a line has.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) enum Width {
    /// So many columns of a terminal.
    Of(usize),
    /// Any: what is written to a file or a pipe is not looked at as it is.
    Any,
}

impl Width {
    /// That of standard output.
    pub(crate) fn now() -> Self {
        if std::io::stdout().is_terminal() { Width::Of(width()) } else { Width::Any }
    }

    /// The columns, where they are limited.
    pub(crate) fn columns(self) -> Option<usize> {
        match self {
            Width::Of(columns) => Some(columns),
            Width::Any => None,
        }
    }
}

/// Columns of the terminal; 80 where there is none.
pub(crate) fn width() -> usize {
    let size = rustix::termios::tcgetwinsize(rustix::stdio::stdout());
    size.ok().map(|s| usize::from(s.ws_col)).filter(|w| *w >= 20).unwrap_or(80)
}

/// Prints on standard output.
pub(crate) fn put(text: &str) {
    let mut out = std::io::stdout().lock();
    // What cannot be written has no reader: nothing is lost but the text.
    let _ = out.write_all(text.as_bytes()).and_then(|()| out.flush());
}

/// Prints on standard error.
pub(crate) fn complain(text: &str) {
    let mut out = std::io::stderr().lock();
    let _ = writeln!(out, "{text}");
}
