//! One worker as a process: starting it, what it says, how it ends.

use super::PoolOptions;
use crate::job::{Job, Report};
use std::collections::VecDeque;
use std::io::{BufRead, BufReader, ErrorKind, Read, Write};
use std::os::fd::OwnedFd;
use std::os::unix::net::UnixStream;
use std::os::unix::process::ExitStatusExt;
use std::process::{Child, Command, ExitStatus, Stdio};
use std::sync::mpsc::Sender;
use std::sync::{Arc, Mutex};
use std::thread::JoinHandle;
use std::time::{Duration, Instant};

/// Lines of a worker's own output that are kept, to be shown if it dies.
const TAIL: usize = 20;
/// Bytes of such a line that are kept: a plugin may print without end.
const LONGEST: usize = 300;
/// How long a worker that has said its last word may take to end.
const ENDING: Duration = Duration::from_secs(5);

/// A report with the number of the place and the generation of the worker that it comes from; None: there will be no more.
pub(super) type Said = (usize, u64, Option<Report>);

/// A worker's process.
pub(super) struct Process {
    child: Child,
    stream: UnixStream,
    tail: Arc<Mutex<VecDeque<String>>>,
    readers: Vec<JoinHandle<()>>,
    /// Tells it from the workers that had its place before.
    pub(super) generation: u64,
    /// The job that it was given.
    pub(super) job: Option<usize>,
    /// Whether it has taken that up.
    pub(super) taken: bool,
    /// When it was heard of last.
    pub(super) last: Instant,
}

impl Process {
    pub(super) fn start(
        options: &PoolOptions,
        place: usize,
        generation: u64,
        say: Sender<Said>,
    ) -> std::io::Result<Self> {
        let (ours, theirs) = UnixStream::pair()?;
        let mut child = Command::new(&options.program)
            .arg("worker")
            .arg(&options.ledger)
            .arg(options.threads.to_string())
            .stdin(Stdio::from(OwnedFd::from(theirs)))
            .stdout(Stdio::piped())
            .stderr(Stdio::piped())
            .spawn()?;
        let tail = Arc::new(Mutex::new(VecDeque::new()));
        let mut readers = Vec::new();
        if let Some(out) = child.stdout.take() {
            readers.push(keep_tail(out, tail.clone()));
        }
        if let Some(err) = child.stderr.take() {
            readers.push(keep_tail(err, tail.clone()));
        }
        let process =
            Process { child, stream: ours, tail, readers, generation, job: None, taken: false, last: Instant::now() };
        let incoming = process.stream.try_clone()?;
        std::thread::spawn(move || {
            for line in BufReader::new(incoming).lines() {
                let Some(report) = line.ok().and_then(|l| serde_json::from_str::<Report>(&l).ok()) else { break };
                if say.send((place, generation, Some(report))).is_err() {
                    return;
                }
            }
            let _ = say.send((place, generation, None));
        });
        Ok(process)
    }

    /// Gives it a job; false where it is gone.
    pub(super) fn give(&mut self, number: usize, job: &Job) -> std::io::Result<bool> {
        let mut text = serde_json::to_vec(job)?;
        text.push(b'\n');
        (self.job, self.taken, self.last) = (Some(number), false, Instant::now());
        Ok(self.stream.write_all(&text).is_ok())
    }

    /// Tells it that there will be no more orders: it comes to an end, and what it has is put on record first.
    pub(super) fn wind_down(&self) {
        let _ = self.stream.shutdown(std::net::Shutdown::Write);
    }

    /// Whether the process has ended, whatever of its descriptors may still be open in processes that it left behind.
    pub(super) fn has_ended(&mut self) -> bool {
        matches!(self.child.try_wait(), Ok(Some(_)))
    }

    /// Ends it, or waits for its end; returns in words how it ended.
    pub(super) fn end(mut self, kill: bool) -> String {
        if kill {
            let _ = self.child.kill();
        }
        let status = self.wait();
        // Its output ends with it, unless a child of its own holds the pipe: then it is not waited for.
        let deadline = Instant::now() + Duration::from_millis(500);
        while self.readers.iter().any(|r| !r.is_finished()) && Instant::now() < deadline {
            std::thread::sleep(Duration::from_millis(2));
        }
        let how = match status {
            Ok(status) => match (status.signal(), status.code()) {
                (Some(signal), _) => format!("its worker was ended by signal {signal}{}", signal_words(signal)),
                (None, Some(code)) => format!("its worker ended by itself with status {code}"),
                (None, None) => "its worker ended".into(),
            },
            Err(error) => format!("its worker was lost: {error}"),
        };
        let tail: Vec<String> = self.tail.lock().map(|t| t.iter().cloned().collect()).unwrap_or_default();
        if tail.is_empty() { how } else { format!("{how}; its last words: {}", tail.join(" | ")) }
    }

    fn wait(&mut self) -> std::io::Result<ExitStatus> {
        let deadline = Instant::now() + ENDING;
        while Instant::now() < deadline {
            if let Some(status) = self.child.try_wait()? {
                return Ok(status);
            }
            std::thread::sleep(Duration::from_millis(1));
        }
        self.child.kill()?;
        self.child.wait()
    }
}

impl Drop for Process {
    /// No process outlives its pool, and none is left as a zombie.
    fn drop(&mut self) {
        let _ = self.stream.shutdown(std::net::Shutdown::Both);
        let _ = self.child.kill();
        let _ = self.child.wait();
    }
}

fn signal_words(signal: i32) -> &'static str {
    match signal {
        4 => " (illegal instruction)",
        6 => " (abort)",
        7 => " (bus error)",
        8 => " (arithmetic error)",
        9 => " (killed)",
        11 => " (invalid memory access)",
        15 => " (terminated)",
        24 => " (limit of processor time)",
        25 => " (limit of file size)",
        _ => "",
    }
}

fn keep_tail(from: impl Read + Send + 'static, tail: Arc<Mutex<VecDeque<String>>>) -> JoinHandle<()> {
    let keep = move |line: &mut Vec<u8>| {
        let text = String::from_utf8_lossy(line).trim_end().to_owned();
        line.clear();
        if let Ok(mut tail) = tail.lock()
            && !text.is_empty()
        {
            if tail.len() == TAIL {
                tail.pop_front();
            }
            tail.push_back(text);
        }
    };
    std::thread::spawn(move || {
        let mut reader = BufReader::new(from);
        let mut line = Vec::new();
        loop {
            let chunk = match reader.fill_buf() {
                Ok([]) => break,
                Ok(chunk) => chunk,
                Err(error) if error.kind() == ErrorKind::Interrupted => continue,
                Err(_) => break,
            };
            let end = chunk.iter().position(|byte| *byte == b'\n');
            let used = end.map_or(chunk.len(), |end| end + 1);
            line.extend_from_slice(&chunk[..used.min(LONGEST.saturating_sub(line.len()))]);
            reader.consume(used);
            if end.is_some() {
                keep(&mut line);
            }
        }
        keep(&mut line);
    })
}
