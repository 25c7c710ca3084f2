//! The program at a terminal of a given width.

use crate::program::Desk;
use rustix::fs::{Mode, OFlags};
use rustix::pty::OpenptFlags;
use rustix::termios::Winsize;
use std::io::Read;
use std::process::{Child, Stdio};

/// What was written to a terminal.
pub struct Shown {
    /// Exit status; None where it was ended by a signal.
    pub status: Option<i32>,
    /// Everything that was written, escape codes and all.
    pub raw: String,
}

/// A program that runs at a terminal.
pub struct AtTerminal {
    /// The program.
    pub child: Child,
    reader: std::thread::JoinHandle<Vec<u8>>,
}

impl Desk {
    /// Starts the program at a terminal of so many columns, in a process group of its own.
    ///
    /// # Panics
    /// Where there are no terminals.
    pub fn start_at_terminal(&self, args: &[&str], columns: u16) -> AtTerminal {
        use std::os::unix::process::CommandExt;
        let master = rustix::pty::openpt(OpenptFlags::RDWR | OpenptFlags::NOCTTY).expect("a terminal");
        rustix::pty::grantpt(&master).expect("a terminal");
        rustix::pty::unlockpt(&master).expect("a terminal");
        let size = Winsize { ws_row: 50, ws_col: columns, ws_xpixel: 0, ws_ypixel: 0 };
        let name = rustix::pty::ptsname(&master, Vec::new()).expect("its name");
        let end = || rustix::fs::open(&name, OFlags::RDWR | OFlags::NOCTTY, Mode::empty()).expect("its other end");
        let (out, err) = (end(), end());
        rustix::termios::tcsetwinsize(&out, size).expect("a terminal has a size");
        let mut command = self.command(args);
        command.stdin(Stdio::null()).stdout(Stdio::from(out)).stderr(Stdio::from(err)).process_group(0);
        let child = command.spawn().expect("the program starts");
        // The command holds the terminal's other end, too: only without it the reader sees an end.
        drop(command);
        let reader = std::thread::spawn(move || {
            let (mut bytes, mut chunk) = (Vec::new(), [0; 4096]);
            let mut master = std::fs::File::from(master);
            // A terminal whose other end is closed gives an error instead of an end.
            while let Ok(read @ 1..) = master.read(&mut chunk) {
                bytes.extend_from_slice(&chunk[..read]);
            }
            bytes
        });
        AtTerminal { child, reader }
    }

    /// Runs the program at a terminal of so many columns, to its end.
    ///
    /// # Panics
    /// Where there are no terminals, or the program prints no UTF-8.
    pub fn at_terminal(&self, args: &[&str], columns: u16) -> Shown {
        self.start_at_terminal(args, columns).end()
    }
}

impl AtTerminal {
    /// Waits for its end.
    ///
    /// # Panics
    /// Where the program prints no UTF-8.
    pub fn end(mut self) -> Shown {
        let status = self.child.wait().expect("it can be waited for").code();
        let bytes = self.reader.join().expect("the terminal was read");
        Shown { status, raw: String::from_utf8(bytes).expect("the program prints UTF-8") }
    }
}

impl Shown {
    /// What is drawn, piece by piece: lines, and what was drawn in one line after the other. Without colours.
    pub fn pieces(&self) -> Vec<String> {
        let pieces = self.raw.split(['\r', '\n']).map(without_colours);
        pieces.filter(|piece| !piece.is_empty()).collect()
    }

    /// The lines that stand there in the end, without colours: what was drawn over is gone.
    pub fn lines(&self) -> Vec<String> {
        let last = |line: &str| {
            let line = line.trim_end_matches('\r');
            without_colours(line.rsplit('\r').next().unwrap_or_default())
        };
        self.raw.split('\n').map(last).collect()
    }
}

fn without_colours(text: &str) -> String {
    let mut out = String::new();
    let mut rest = text;
    while let Some(at) = rest.find('\x1b') {
        out.push_str(&rest[..at]);
        let code = &rest[at..];
        let end = code.find(|c: char| c.is_ascii_alphabetic()).map_or(code.len(), |end| end + 1);
        rest = &code[end..];
    }
    out + rest
}
