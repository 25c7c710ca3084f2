//! The runner's side of the workers: processes are started when there is work, given jobs one at a time, watched, and replaced when they die.

use crate::job::{Entry, Job, Order, Report};
use std::collections::VecDeque;
use std::io::{BufRead, BufReader, Write};
use std::os::fd::OwnedFd;
use std::os::unix::net::UnixStream;
use std::os::unix::process::ExitStatusExt;
use std::path::PathBuf;
use std::process::{Child, Command, Stdio};
use std::sync::mpsc::{self, Receiver, RecvTimeoutError, Sender};
use std::sync::{Arc, Mutex};
use std::time::{Duration, Instant};

/// Lines of a worker's own output that are kept, to be shown if it dies.
const TAIL: usize = 20;
/// How long to wait before asking again for work that another run holds.
const HELD_PAUSE: Duration = Duration::from_millis(200);

/// How to run workers.
#[derive(Clone, Debug)]
pub struct PoolOptions {
    /// The program; started as `PROGRAM worker LEDGER THREADS`.
    pub program: PathBuf,
    /// The ledger.
    pub ledger: PathBuf,
    /// Number of workers.
    pub workers: usize,
    /// Threads lent to each.
    pub threads: usize,
    /// A job without progress for so long is broken.
    pub stall: Option<Duration>,
}

/// What happened to a job.
#[derive(Debug)]
pub(crate) enum Event {
    /// It goes on.
    Progress {
        /// Attempted spin updates since the last event of the job.
        updates: u64,
    },
    /// A plugin or worker has something to say.
    Log(String),
    /// A worker took it.
    Started,
    /// It is done.
    Done {
        /// Whether anything was computed by this run.
        computed: bool,
        /// Attempted spin updates since the last event of the job.
        updates: u64,
        /// What is now on record.
        entries: Vec<Entry>,
    },
    /// It cannot be done; the text says why.
    Broken(String),
}

/// The workers.
pub(crate) struct Pool {
    options: PoolOptions,
    slots: Vec<Option<Slot>>,
    send: Sender<(usize, u64, Option<Report>)>,
    receive: Receiver<(usize, u64, Option<Report>)>,
    generation: u64,
}

struct Slot {
    child: Child,
    stream: UnixStream,
    generation: u64,
    job: Option<usize>,
    last: Instant,
    tail: Arc<Mutex<VecDeque<String>>>,
    readers: Vec<std::thread::JoinHandle<()>>,
}

impl Pool {
    /// No process is started yet.
    pub(crate) fn new(options: PoolOptions) -> Self {
        let (send, receive) = mpsc::channel();
        let slots = (0..options.workers.max(1)).map(|_| None).collect();
        Pool { options, slots, send, receive, generation: 0 }
    }

    /// Does all jobs and tells what happens to each, by its number. Jobs are started in their order. Work that another run holds is asked for
    /// again until it is done or free.
    ///
    /// # Errors
    /// Where no worker can be started.
    pub(crate) fn execute(&mut self, jobs: &[Job], tell: &mut dyn FnMut(usize, Event)) -> std::io::Result<()> {
        let mut waiting: VecDeque<usize> = (0..jobs.len()).collect();
        let mut held: Vec<(usize, Instant)> = Vec::new();
        let mut open = jobs.len();
        while open > 0 {
            let now = Instant::now();
            held.retain(|(job, since)| {
                let keep = now.duration_since(*since) < HELD_PAUSE;
                if !keep {
                    waiting.push_back(*job);
                }
                keep
            });
            for slot in 0..self.slots.len() {
                if self.slots[slot].as_ref().is_some_and(|s| s.job.is_some()) {
                    continue;
                }
                let Some(job) = waiting.pop_front() else { break };
                self.start(slot, job, &jobs[job])?;
                tell(job, Event::Started);
            }
            match self.receive.recv_timeout(Duration::from_millis(100)) {
                Ok((slot, generation, report)) => {
                    if let Some((job, event)) = self.receive_report(slot, generation, report, jobs) {
                        match event {
                            Finished::Not(event) => tell(job, event),
                            Finished::Held => held.push((job, Instant::now())),
                            Finished::Yes(event) => {
                                open -= 1;
                                tell(job, event);
                            }
                        }
                    }
                }
                Err(RecvTimeoutError::Timeout | RecvTimeoutError::Disconnected) => {}
            }
            if let Some(stall) = self.options.stall {
                for slot in 0..self.slots.len() {
                    let stalled = self.slots[slot].as_ref().filter(|s| s.last.elapsed() > stall).and_then(|s| s.job);
                    if let Some(job) = stalled {
                        self.retire(slot, true);
                        open -= 1;
                        let seconds = stall.as_secs_f64();
                        tell(
                            job,
                            Event::Broken(format!("no progress for {seconds} s (--stall): its worker was ended")),
                        );
                    }
                }
            }
        }
        Ok(())
    }

    fn start(&mut self, slot: usize, number: usize, job: &Job) -> std::io::Result<()> {
        if self.slots[slot].is_none() {
            self.slots[slot] = Some(self.spawn(slot)?);
        }
        let mut text = serde_json::to_vec(&Order::Work(Box::new(job.clone())))?;
        text.push(b'\n');
        // A worker that died while it had nothing to do is replaced, and breaks nothing.
        if self.slots[slot].as_mut().is_some_and(|worker| worker.stream.write_all(&text).is_err()) {
            self.retire(slot, true);
            let mut worker = self.spawn(slot)?;
            // If this one dies too, its reader tells the job's end.
            let _ = worker.stream.write_all(&text);
            self.slots[slot] = Some(worker);
        }
        if let Some(worker) = self.slots[slot].as_mut() {
            worker.job = Some(number);
            worker.last = Instant::now();
        }
        Ok(())
    }

    fn spawn(&mut self, slot: usize) -> std::io::Result<Slot> {
        let (ours, theirs) = UnixStream::pair()?;
        let mut child = Command::new(&self.options.program)
            .arg("worker")
            .arg(&self.options.ledger)
            .arg(self.options.threads.to_string())
            .stdin(Stdio::from(OwnedFd::from(theirs)))
            .stdout(Stdio::piped())
            .stderr(Stdio::piped())
            .spawn()?;
        self.generation += 1;
        let generation = self.generation;
        let tail = Arc::new(Mutex::new(VecDeque::new()));
        let mut readers = Vec::new();
        if let Some(out) = child.stdout.take() {
            readers.push(keep_tail(out, tail.clone()));
        }
        if let Some(err) = child.stderr.take() {
            readers.push(keep_tail(err, tail.clone()));
        }
        let send = self.send.clone();
        let incoming = ours.try_clone()?;
        std::thread::spawn(move || {
            for line in BufReader::new(incoming).lines() {
                let Some(report) = line.ok().and_then(|l| serde_json::from_str::<Report>(&l).ok()) else { break };
                if send.send((slot, generation, Some(report))).is_err() {
                    return;
                }
            }
            let _ = send.send((slot, generation, None));
        });
        Ok(Slot { child, stream: ours, generation, job: None, last: Instant::now(), tail, readers })
    }

    fn receive_report(
        &mut self,
        slot: usize,
        generation: u64,
        report: Option<Report>,
        jobs: &[Job],
    ) -> Option<(usize, Finished)> {
        let worker = self.slots[slot].as_mut().filter(|w| w.generation == generation)?;
        worker.last = Instant::now();
        let job = worker.job;
        let Some(report) = report else {
            let message = self.retire(slot, false);
            return job.map(|job| (job, Finished::Yes(Event::Broken(message))));
        };
        let job = job?;
        let event = match report {
            Report::Progress { updates } => Finished::Not(Event::Progress { updates }),
            Report::Log { text } => Finished::Not(Event::Log(text)),
            Report::Held { .. } => Finished::Held,
            Report::Done { computed, updates, entries } => Finished::Yes(Event::Done { computed, updates, entries }),
            Report::Stopped { .. } => Finished::Yes(Event::Broken("its worker was told to stop".into())),
            Report::Broken { message } => Finished::Yes(Event::Broken(message)),
        };
        if !matches!(event, Finished::Not(_)) {
            worker.job = None;
            // Foreign code may have left anything behind: its process serves one parcel only.
            if matches!(&jobs[job], Job::Sample(job) if job.point.dynamics.is_foreign()) {
                self.retire(slot, true);
            }
        }
        Some((job, event))
    }

    /// Ends a worker; returns in words how it ended.
    fn retire(&mut self, slot: usize, kill: bool) -> String {
        let Some(mut worker) = self.slots[slot].take() else { return String::new() };
        if kill {
            let _ = worker.child.kill();
        }
        let status = worker.child.wait();
        // Its output ends with it, unless a child of its own holds the pipe: then it is not waited for.
        let deadline = Instant::now() + Duration::from_millis(500);
        while worker.readers.iter().any(|r| !r.is_finished()) && Instant::now() < deadline {
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
        let tail: Vec<String> = worker.tail.lock().map(|t| t.iter().cloned().collect()).unwrap_or_default();
        if tail.is_empty() { how } else { format!("{how}; its last words: {}", tail.join(" | ")) }
    }
}

impl Drop for Pool {
    fn drop(&mut self) {
        for slot in &mut self.slots {
            if let Some(mut worker) = slot.take() {
                let _ = worker.stream.shutdown(std::net::Shutdown::Both);
                let _ = worker.child.kill();
                let _ = worker.child.wait();
            }
        }
    }
}

/// Whether an event ends its job.
enum Finished {
    Not(Event),
    Held,
    Yes(Event),
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
        _ => "",
    }
}

fn keep_tail(
    from: impl std::io::Read + Send + 'static,
    tail: Arc<Mutex<VecDeque<String>>>,
) -> std::thread::JoinHandle<()> {
    std::thread::spawn(move || {
        let mut reader = BufReader::new(from);
        let mut bytes = Vec::new();
        while reader.read_until(b'\n', &mut bytes).is_ok_and(|n| n > 0) {
            let text: String = String::from_utf8_lossy(&bytes).trim_end().chars().take(300).collect();
            bytes.clear();
            if let Ok(mut tail) = tail.lock() {
                if tail.len() == TAIL {
                    tail.pop_front();
                }
                if !text.is_empty() {
                    tail.push_back(text);
                }
            }
        }
    })
}
