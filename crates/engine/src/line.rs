//! The line from a worker back to its runner: what is said over it, and whether to come to an end.

use crate::job::Report;
use std::io::Write;
use std::os::unix::net::UnixStream;
use std::sync::atomic::{AtomicBool, Ordering};
use std::sync::{Arc, Mutex};
use std::time::{Duration, Instant};

/// How often progress is reported.
const REPORT_EVERY: Duration = Duration::from_millis(200);

/// The way back to the runner.
#[derive(Clone)]
pub(crate) struct Line {
    stream: Arc<Mutex<UnixStream>>,
    last: Arc<Mutex<(Instant, u64)>>,
    stop: Arc<AtomicBool>,
}

impl Line {
    /// A line over a stream; `stop` is set where the runner is found gone, and asked by [`Line::stopping`].
    pub(crate) fn new(stream: UnixStream, stop: Arc<AtomicBool>) -> Self {
        Line { stream: Arc::new(Mutex::new(stream)), last: Arc::new(Mutex::new((Instant::now(), 0))), stop }
    }

    /// Sends a report. Where the runner is gone nothing is left to tell it to.
    pub(crate) fn send(&self, report: &Report) {
        let Ok(mut text) = serde_json::to_vec(report) else { return };
        text.push(b'\n');
        if let Ok(mut stream) = self.stream.lock()
            && stream.write_all(&text).is_err()
        {
            self.stop.store(true, Ordering::Relaxed);
        }
    }

    /// Tells that the work goes on; sent at most a few times a second.
    pub(crate) fn progress(&self, updates: u64) {
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
    pub(crate) fn untold(&self) -> u64 {
        self.last.lock().map_or(0, |mut last| std::mem::take(&mut last.1))
    }

    /// Whether to come to an end.
    pub(crate) fn stopping(&self) -> bool {
        self.stop.load(Ordering::Relaxed)
    }
}
