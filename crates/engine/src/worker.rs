//! The worker's side: a process of the same program that takes orders over a descriptor of its own and reports back.
//!
//! Orders come on standard input, which is moved out of the way at once: plugins may print and read what they like. When the runner is gone
//! (end of input), work stops at the next whole measurement; a plugin that does not come back is left behind after a grace period.

use crate::analyse;
use crate::close;
use crate::failure::Failure;
use crate::job::{Job, Report};
use crate::loaded::Loaded;
use crate::sampling;
use rustix::fd::OwnedFd;
use spinledger_ledger::Ledger;
use std::io::{BufRead, BufReader, Write};
use std::os::unix::net::UnixStream;
use std::path::Path;
use std::sync::atomic::{AtomicBool, Ordering};
use std::sync::{Arc, Mutex, mpsc};
use std::time::{Duration, Instant};

/// How long a plugin may take to come back after the runner has gone.
const GRACE: Duration = Duration::from_secs(10);
/// How often progress is reported.
const REPORT_EVERY: Duration = Duration::from_millis(200);

/// The way back to the runner.
#[derive(Clone)]
pub struct Line {
    stream: Arc<Mutex<UnixStream>>,
    last: Arc<Mutex<(Instant, u64)>>,
    stop: Arc<AtomicBool>,
}

impl Line {
    /// Sends a report. Where the runner is gone nothing is left to tell it to.
    pub fn send(&self, report: &Report) {
        let Ok(mut text) = serde_json::to_vec(report) else { return };
        text.push(b'\n');
        if let Ok(mut stream) = self.stream.lock()
            && stream.write_all(&text).is_err()
        {
            self.stop.store(true, Ordering::Relaxed);
        }
    }

    /// Tells that the work goes on; sent at most a few times a second.
    pub fn progress(&self, updates: u64) {
        let Ok(mut last) = self.last.lock() else { return };
        last.1 += updates;
        if last.0.elapsed() >= REPORT_EVERY {
            let updates = std::mem::take(&mut last.1);
            last.0 = Instant::now();
            drop(last);
            self.send(&Report::Progress { updates });
        }
    }

    /// Updates that no report has told yet.
    pub fn untold(&self) -> u64 {
        self.last.lock().map_or(0, |mut last| std::mem::take(&mut last.1))
    }

    /// Whether to come to an end.
    pub fn stopping(&self) -> bool {
        self.stop.load(Ordering::Relaxed)
    }
}

/// Takes orders until there are no more.
///
/// # Errors
/// Where the ledger cannot be opened or the descriptor not be moved.
pub fn serve(ledger: &Path, threads: usize) -> Result<(), Box<dyn std::error::Error>> {
    let orders: OwnedFd = rustix::io::fcntl_dupfd_cloexec(rustix::stdio::stdin(), 3)?;
    let nothing = std::fs::File::open("/dev/null")?;
    rustix::stdio::dup2_stdin(&nothing)?;
    let stream = UnixStream::from(orders);
    let stop = Arc::new(AtomicBool::new(false));
    let line = Line {
        stream: Arc::new(Mutex::new(stream.try_clone()?)),
        last: Arc::new(Mutex::new((Instant::now(), 0))),
        stop: stop.clone(),
    };
    let (send, receive) = mpsc::channel();
    let back = line.clone();
    std::thread::spawn(move || listen(stream, &stop, send, &back));
    let ledger = Ledger::open(ledger)?;
    let mut loaded = Loaded::new(threads, line.clone())?;
    while let Ok(job) = receive.recv() {
        line.send(&Report::Taken);
        let work = std::panic::AssertUnwindSafe(|| match job {
            Job::Sample(job) => sampling::sample(&job, &ledger, &mut loaded, &line),
            Job::Close(job) => close::close(&job, &ledger, &line),
            Job::Analyse(job) => analyse::analyse(&job, &ledger, &line),
        });
        let report = match std::panic::catch_unwind(work) {
            Ok(Ok(report)) => report,
            Ok(Err(Failure::Broken(message))) => Report::Broken { message },
            Ok(Err(Failure::Disk(message))) => Report::Disk { message },
            Err(panic) => Report::Broken { message: format!("a defect of spinledger: {}", panic_text(&*panic)) },
        };
        line.send(&report);
    }
    Ok(())
}

fn listen(stream: UnixStream, stop: &AtomicBool, send: mpsc::Sender<Job>, back: &Line) {
    for text in BufReader::new(stream).lines() {
        let Ok(text) = text else { break };
        match serde_json::from_str::<Job>(&text) {
            Ok(job) => {
                if send.send(job).is_err() {
                    return;
                }
            }
            Err(error) => {
                let message = format!("a defect of spinledger: an order cannot be read: {error}");
                back.send(&Report::Broken { message });
            }
        }
    }
    stop.store(true, Ordering::Relaxed);
    // A worker that has nothing to do ends now.
    drop(send);
    std::thread::sleep(GRACE);
    std::process::exit(3);
}

/// The text of a panic.
pub(crate) fn panic_text(panic: &(dyn std::any::Any + Send)) -> String {
    let text = panic.downcast_ref::<&str>().map(|t| (*t).to_owned());
    text.or_else(|| panic.downcast_ref::<String>().cloned()).unwrap_or_else(|| "a panic without a message".into())
}
