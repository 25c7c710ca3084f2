//! Coming to an end when asked to: workers put what they have on record, and what does not come back in time is ended.

use super::{Event, LAST_WORDS, Meaning, Pool, PoolError};
use crate::job::Job;
use std::sync::atomic::Ordering;
use std::time::{Duration, Instant};

/// How long workers may take. They stop at the next whole measurement; an analysis is done to its end.
const GRACE: Duration = Duration::from_secs(10);
/// How often workers are looked at meanwhile.
const LISTEN: Duration = Duration::from_millis(20);

impl Pool {
    /// Whether an end was asked for.
    pub(crate) fn is_stopping(&self) -> bool {
        self.options.stop.load(Ordering::Relaxed)
    }

    /// Lets all workers come to an end.
    pub(super) fn wind_down(&mut self, jobs: &[Job], tell: &mut dyn FnMut(usize, Event)) -> PoolError {
        tell(0, Event::Stopping);
        self.places.iter().flatten().for_each(|worker| worker.wind_down());
        let deadline = Instant::now() + GRACE;
        while Instant::now() < deadline && self.places.iter().flatten().any(|worker| worker.job.is_some()) {
            let heard = match self.receive.recv_timeout(LISTEN) {
                Ok((place, generation, report)) => self.understand(place, generation, report, jobs),
                Err(_) => (0..self.places.len()).find_map(|place| self.find_dead(place)),
            };
            match heard {
                Some((job, Meaning::GoesOn(event))) => tell(job, event),
                // A worker that is ended by the signal that was meant for the run breaks nothing.
                Some((_, Meaning::Ends(Event::Broken(message)))) if message.contains("by signal") => {}
                Some((job, Meaning::Ends(event))) => tell(job, event),
                Some((_, Meaning::Disk(message))) => return PoolError::Disk(message),
                Some((_, Meaning::Held(_) | Meaning::Lost(_))) | None => {}
            }
        }
        self.places.iter_mut().for_each(|place| *place = None);
        PoolError::Asked
    }

    fn find_dead(&mut self, place: usize) -> Option<(usize, Meaning)> {
        let worker = self.places[place].as_mut()?;
        // What it said last may still be on its way.
        let silent = worker.last.elapsed() > LAST_WORDS;
        if worker.job.is_some() && silent && worker.has_ended() { self.bury(place) } else { None }
    }
}
