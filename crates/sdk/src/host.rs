//! What the host offers to a running plugin.

use spinledger_abi as abi;
use std::any::Any;
use std::ffi::c_void;
use std::panic::{AssertUnwindSafe, catch_unwind, resume_unwind};
use std::sync::{Mutex, PoisonError};

/// The host's services. Random numbers and elementary functions are not among them: [`crate::numerics`] has the same, without a call.
#[derive(Clone, Copy, Debug)]
pub struct Host<'a> {
    pub(crate) raw: Option<&'a abi::SlHost>,
}

// SAFETY: the host's functions may be called from any thread (its side of the contract), and the struct is only read.
unsafe impl Send for Host<'_> {}
// SAFETY: as above.
unsafe impl Sync for Host<'_> {}

impl Host<'_> {
    /// A host that offers nothing: logs nowhere, never cancels, loops on the calling thread. For unit tests of plugins.
    pub const NONE: Host<'static> = Host { raw: None };

    /// Logs a line.
    pub fn log(&self, text: &str) {
        self.say(0, text);
    }

    /// Logs a line that people should look at.
    pub fn warn(&self, text: &str) {
        self.say(1, text);
    }

    fn say(&self, level: u32, text: &str) {
        if let Some((host, log)) = self.raw.and_then(|host| Some((host, host.log?))) {
            // SAFETY: the host's own context; the text lives for the call.
            unsafe { log(host.context, level, abi::SlText { data: text.as_ptr(), length: text.len() }) };
        }
    }

    /// Whether long calls should come to an end. To be asked now and then within calls that take seconds; who stops returns
    /// [`crate::Error::cancelled`].
    pub fn cancelled(&self) -> bool {
        self.raw.is_some_and(|host| match host.cancelled {
            // SAFETY: the host's own context.
            Some(cancelled) => unsafe { cancelled(host.context) != 0 },
            None => false,
        })
    }

    /// Runs `body(tile)` for every tile from 0 to `tiles` - 1, in any order, on the threads that the run lends, and returns when all are done.
    ///
    /// Results must not depend on who runs what: the number of tiles is fixed by the problem and not by threads, tiles write to different
    /// places, and sums over tiles are taken afterwards, in their order.
    ///
    /// # Panics
    /// Where a tile does: with the panic of the first such tile, after all are done.
    pub fn parallel_for(&self, tiles: usize, body: impl Fn(usize) + Sync) {
        let Some((host, parallel_for)) = self.raw.and_then(|host| Some((host, host.parallel_for?))) else {
            (0..tiles).for_each(body);
            return;
        };
        let loop_ = Loop { body: &body, panic: Mutex::new(None) };
        // SAFETY: `run::<F>` takes the argument for a `Loop<F>`, which it is, and which lives until the host returns, when no tile runs any more.
        unsafe { parallel_for(host.context, tiles, Some(runner(&loop_)), (&raw const loop_).cast_mut().cast()) };
        if let Some((_, payload)) = loop_.panic.into_inner().unwrap_or_else(PoisonError::into_inner) {
            resume_unwind(payload);
        }
    }
}

impl Host<'_> {
    /// Runs `body(tile, part)` for every part of `size` elements of a slice (the last one may be shorter), as [`Host::parallel_for`] does: tiles
    /// that write to their own part need no `unsafe`.
    ///
    /// # Panics
    /// Where `size` is 0, or a tile panics.
    pub fn parallel_parts<T: Send>(&self, data: &mut [T], size: usize, body: impl Fn(usize, &mut [T]) + Sync) {
        // Each lock is taken once and never waited for: it only tells the compiler that parts go to one thread each.
        let parts: Vec<Mutex<&mut [T]>> = data.chunks_mut(size).map(Mutex::new).collect();
        self.parallel_for(parts.len(), |tile| {
            body(tile, &mut parts[tile].lock().unwrap_or_else(PoisonError::into_inner));
        });
    }
}

/// A loop under way, and the panic of the lowest tile that had one.
struct Loop<'a, F> {
    body: &'a F,
    panic: Mutex<Option<(usize, Box<dyn Any + Send>)>>,
}

/// The function that runs tiles of this loop.
fn runner<F: Fn(usize) + Sync>(_: &Loop<'_, F>) -> unsafe extern "C" fn(*mut c_void, usize) {
    run::<F>
}

/// # Safety
/// `argument` is a `Loop<F>` that lives for the call.
unsafe extern "C" fn run<F: Fn(usize) + Sync>(argument: *mut c_void, tile: usize) {
    // SAFETY: as the caller promises; shared between threads, which `F: Sync` and the mutex allow.
    let loop_ = unsafe { &*argument.cast::<Loop<'_, F>>() };
    // A panic must not run into the host's threads. Whoever sees what the body left behind sees the panic too.
    if let Err(payload) = catch_unwind(AssertUnwindSafe(|| (loop_.body)(tile))) {
        let mut panic = loop_.panic.lock().unwrap_or_else(PoisonError::into_inner);
        let later = match panic.take() {
            Some((earlier, kept)) if earlier < tile => {
                *panic = Some((earlier, kept));
                Some(payload)
            }
            other => {
                *panic = Some((tile, payload));
                other.map(|(_, payload)| payload)
            }
        };
        // Dropping a payload could panic again, here where nothing would catch it.
        std::mem::forget(later);
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::sync::atomic::{AtomicUsize, Ordering};

    #[test]
    fn without_a_host_loops_run_here_and_nothing_is_cancelled() {
        let sum = AtomicUsize::new(0);
        Host::NONE.parallel_for(5, |tile| {
            sum.fetch_add(tile, Ordering::Relaxed);
        });
        assert_eq!(sum.into_inner(), 10);
        let mut squares = [0; 7];
        Host::NONE.parallel_parts(&mut squares, 3, |tile, part| {
            part.iter_mut().zip(3 * tile..).for_each(|(place, k)| *place = k * k);
        });
        assert_eq!(squares, [0, 1, 4, 9, 16, 25, 36]);
        assert!(!Host::NONE.cancelled());
        Host::NONE.warn("nobody listens");
    }
}
