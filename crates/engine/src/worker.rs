//! The worker's side: a process of the same program that takes orders over a descriptor of its own and reports back.
//!
//! Orders come on standard input, which is moved out of the way at once: plugins may print and read what they like. When the runner is gone
//! (end of input), or says that there will be no more orders, work stops at the next whole measurement, and what was measured is put on record; a plugin that does not come back is left behind after a grace period.

use crate::analyse;
use crate::close;
use crate::failure::Failure;
use crate::job::{Job, Report};
use crate::line::Line;
use crate::loaded::Loaded;
use crate::sampling;
use rustix::fd::OwnedFd;
use spinledger_ledger::Ledger;
use std::io::{BufRead, BufReader};
use std::os::unix::net::UnixStream;
use std::path::Path;
use std::sync::atomic::{AtomicBool, Ordering};
use std::sync::{Arc, mpsc};
use std::time::Duration;

/// How long a plugin may take to come back after the runner has gone.
const GRACE: Duration = Duration::from_secs(10);
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
    let line = Line::new(stream.try_clone()?, stop.clone());
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
            Job::States(job) => close::close_states(&job, &ledger, &line),
            Job::Analyse(job) => analyse::analyse(&job, &ledger, &mut loaded, &line),
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
