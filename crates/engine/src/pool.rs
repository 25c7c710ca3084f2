//! The runner's side of the workers: processes are started when there is work, given jobs one at a time, watched, and replaced when they die.

mod process;
mod stopping;
#[cfg(test)]
mod tests;

use crate::job::{Entry, Job, Report};
use process::{Process, Said};
use std::collections::{BTreeMap, BTreeSet, VecDeque};
use std::path::PathBuf;
use std::sync::Arc;
use std::sync::atomic::AtomicBool;
use std::sync::mpsc::{self, Receiver, Sender};
use std::time::{Duration, Instant};

/// How long to wait before asking again for work that another run holds.
const HELD_PAUSE: Duration = Duration::from_millis(200);
/// How long work may be held elsewhere before that is told.
const HELD_TOLD: Duration = Duration::from_secs(3);
/// How often workers are looked at, beside listening to them.
const WATCH_EVERY: Duration = Duration::from_millis(100);
/// How long a worker that has ended may still be heard of: its last reports are on their way.
const LAST_WORDS: Duration = Duration::from_secs(1);
/// So many workers one after another may end before taking up a job; then something is wrong with the program or the machine.
const MOST_LOST: u32 = 3;

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
    /// To be set when everything is to come to an end.
    pub stop: Arc<AtomicBool>,
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
    /// A worker was given it. Told once, however often it must be given.
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
    /// All jobs are coming to an end, as asked for.
    Stopping,
    /// It came to an end before it was done.
    Stopped {
        /// Attempted spin updates since the last event of the job.
        updates: u64,
        /// What is now on record.
        entries: Vec<Entry>,
    },
}

/// Why no job can be done.
#[derive(Debug, thiserror::Error)]
pub(crate) enum PoolError {
    /// A process cannot be started.
    #[error("no worker can be started")]
    Start(#[from] std::io::Error),
    /// Workers end before they take up anything.
    #[error("workers end before they take up any work: {0}")]
    Lost(String),
    /// What is computed cannot be kept.
    #[error("{0}")]
    Disk(String),
    /// It was asked for.
    #[error("stopped when asked to")]
    Asked,
}

/// The workers.
pub(crate) struct Pool {
    options: PoolOptions,
    places: Vec<Option<Process>>,
    send: Sender<Said>,
    receive: Receiver<Said>,
    generation: u64,
    /// Workers that ended before taking up a job, since one did.
    lost: u32,
    /// Who holds work elsewhere, as far as told.
    told: BTreeSet<String>,
    last_watch: Instant,
}

/// The jobs of one call.
struct Round {
    waiting: VecDeque<usize>,
    /// Held elsewhere: to be asked for again.
    held: Vec<(usize, Instant)>,
    held_since: BTreeMap<usize, Instant>,
    started: Vec<bool>,
    open: usize,
}

/// What a report means for its job.
enum Meaning {
    GoesOn(Event),
    Ends(Event),
    Held(String),
    /// The worker ended before taking it up.
    Lost(String),
    Disk(String),
}

impl Pool {
    /// No process is started yet.
    pub(crate) fn new(options: PoolOptions) -> Self {
        let (send, receive) = mpsc::channel();
        let places = (0..options.workers.max(1)).map(|_| None).collect();
        let last_watch = Instant::now();
        Pool { options, places, send, receive, generation: 0, lost: 0, told: BTreeSet::new(), last_watch }
    }

    /// Does all jobs and tells what happens to each, by its number. Jobs are started in their order. Work that another run holds is asked for
    /// again until it is done or free; a job whose worker ended before taking it up is given to another.
    ///
    /// # Errors
    /// Where no worker can be started or lives long enough to take up a job, where the disk fails, and where an end was asked for. Workers go on with what they have then
    /// until the pool is dropped.
    pub(crate) fn execute(&mut self, jobs: &[Job], tell: &mut dyn FnMut(usize, Event)) -> Result<(), PoolError> {
        let mut round = Round {
            waiting: (0..jobs.len()).collect(),
            held: Vec::new(),
            held_since: BTreeMap::new(),
            started: vec![false; jobs.len()],
            open: jobs.len(),
        };
        while round.open > 0 {
            if self.is_stopping() {
                return Err(self.wind_down(jobs, tell));
            }
            round.ask_again();
            for place in 0..self.places.len() {
                if self.places[place].as_ref().is_some_and(|worker| worker.job.is_some()) {
                    continue;
                }
                let Some(job) = round.waiting.pop_front() else { break };
                self.give(place, job, &jobs[job])?;
                if !std::mem::replace(&mut round.started[job], true) {
                    tell(job, Event::Started);
                }
            }
            if let Ok((place, generation, report)) = self.receive.recv_timeout(WATCH_EVERY)
                && let Some((job, meaning)) = self.understand(place, generation, report, jobs)
            {
                self.settle(&mut round, job, meaning, tell)?;
            }
            if self.last_watch.elapsed() >= WATCH_EVERY {
                self.last_watch = Instant::now();
                for place in 0..self.places.len() {
                    if let Some((job, meaning)) = self.watch(place) {
                        self.settle(&mut round, job, meaning, tell)?;
                    }
                }
            }
        }
        Ok(())
    }

    fn give(&mut self, place: usize, number: usize, job: &Job) -> Result<(), PoolError> {
        // A worker that died while it had nothing to do is replaced, and breaks nothing.
        if let Some(mut worker) = self.places[place].take()
            && worker.give(number, job)?
        {
            self.places[place] = Some(worker);
            return Ok(());
        }
        self.generation += 1;
        let mut worker = Process::start(&self.options, place, self.generation, self.send.clone())?;
        // If this one is gone too, its reader tells.
        worker.give(number, job)?;
        self.places[place] = Some(worker);
        Ok(())
    }

    /// What a report means, and for which job; None where it is of no interest.
    fn understand(
        &mut self,
        place: usize,
        generation: u64,
        report: Option<Report>,
        jobs: &[Job],
    ) -> Option<(usize, Meaning)> {
        let worker = self.places[place].as_mut().filter(|w| w.generation == generation)?;
        worker.last = Instant::now();
        let Some(report) = report else { return self.bury(place) };
        let job = worker.job?;
        let meaning = match report {
            Report::Taken => {
                worker.taken = true;
                self.lost = 0;
                return None;
            }
            Report::Progress { updates } => Meaning::GoesOn(Event::Progress { updates }),
            Report::Log { text } => Meaning::GoesOn(Event::Log(text)),
            Report::Held { by } => Meaning::Held(by),
            Report::Done { computed, updates, entries } => Meaning::Ends(Event::Done { computed, updates, entries }),
            Report::Stopped { updates, entries } => Meaning::Ends(Event::Stopped { updates, entries }),
            Report::Broken { message } => Meaning::Ends(Event::Broken(message)),
            Report::Disk { message } => Meaning::Disk(message),
        };
        if !matches!(meaning, Meaning::GoesOn(_)) {
            worker.job = None;
        }
        // Foreign code may have left anything behind: its process serves one parcel only.
        let foreign = match &jobs[job] {
            Job::Sample(job) => job.is_foreign(),
            Job::Analyse(job) => job.is_foreign(),
            Job::Close(_) | Job::States(_) => false,
        };
        if foreign && matches!(meaning, Meaning::Ends(_)) {
            self.places[place] = None;
        }
        Some((job, meaning))
    }

    /// A worker that has ended, and what that means for the job that it had.
    fn bury(&mut self, place: usize) -> Option<(usize, Meaning)> {
        let worker = self.places[place].take()?;
        let (job, taken) = (worker.job, worker.taken);
        let message = worker.end(false);
        Some((job?, if taken { Meaning::Ends(Event::Broken(message)) } else { Meaning::Lost(message) }))
    }

    /// Looks after a worker: one that makes no progress is ended, and one that ended while processes that it left behind keep its descriptor open
    /// is noticed.
    fn watch(&mut self, place: usize) -> Option<(usize, Meaning)> {
        let worker = self.places[place].as_mut()?;
        let job = worker.job?;
        let silent = worker.last.elapsed();
        if let Some(stall) = self.options.stall.filter(|stall| silent > *stall) {
            self.places[place].take()?.end(true);
            let message = format!("no progress for {} s (--stall): its worker was ended", stall.as_secs_f64());
            return Some((job, Meaning::Ends(Event::Broken(message))));
        }
        if silent > LAST_WORDS && worker.has_ended() { self.bury(place) } else { None }
    }

    fn settle(
        &mut self,
        round: &mut Round,
        job: usize,
        meaning: Meaning,
        tell: &mut dyn FnMut(usize, Event),
    ) -> Result<(), PoolError> {
        match meaning {
            Meaning::GoesOn(event) => tell(job, event),
            // Its worker was told to end, by something else than this pool: another does the job.
            Meaning::Ends(Event::Stopped { updates, entries }) => {
                tell(job, Event::Stopped { updates, entries });
                round.waiting.push_front(job);
            }
            Meaning::Ends(event) => {
                round.open -= 1;
                tell(job, event);
            }
            Meaning::Held(by) => {
                let since = *round.held_since.entry(job).or_insert_with(Instant::now);
                if since.elapsed() >= HELD_TOLD && self.told.insert(by.clone()) {
                    tell(job, Event::Log(format!("waiting for work that another run does ({by})")));
                }
                round.held.push((job, Instant::now()));
            }
            Meaning::Lost(message) => {
                self.lost += 1;
                if self.lost >= MOST_LOST {
                    return Err(PoolError::Lost(message));
                }
                round.waiting.push_front(job);
            }
            Meaning::Disk(message) => return Err(PoolError::Disk(message)),
        }
        Ok(())
    }
}

impl Round {
    /// Work that was held elsewhere comes up again after a pause, behind what waits.
    fn ask_again(&mut self) {
        let waiting = &mut self.waiting;
        self.held.retain(|(job, since)| {
            let keep = since.elapsed() < HELD_PAUSE;
            if !keep {
                waiting.push_back(*job);
            }
            keep
        });
    }
}
