//! What the host offers to plugins.

use crate::HostError;
use rayon::prelude::*;
use spinledger_abi::{SlHost, SlKey, SlStream, SlText};
use spinledger_numerics::elementary;
use spinledger_numerics::random::{StreamKey, Xoshiro};
use std::ffi::c_void;
use std::fmt;
use std::panic::{AssertUnwindSafe, catch_unwind};
use std::sync::atomic::{AtomicBool, Ordering};

/// How much a line of a plugin matters.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Level {
    /// For who wants to know.
    Note,
    /// For people to look at.
    Warning,
}

/// Takes lines that plugins log, from any thread.
type Log = Box<dyn Fn(Level, &str) + Send + Sync>;

/// What a [`crate::Loader`] offers to its plugins.
pub struct Services {
    /// Threads of parallel loops, at least 1. Results do not depend on it.
    pub threads: usize,
    /// Takes the lines that plugins log.
    pub log: Log,
}

impl Default for Services {
    /// One thread, and nobody listens.
    fn default() -> Self {
        Services { threads: 1, log: Box::new(|_, _| ()) }
    }
}

impl fmt::Debug for Services {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.debug_struct("Services").field("threads", &self.threads).finish_non_exhaustive()
    }
}

/// The table of the host and what stands behind it. Never freed, since plugins may keep the table for the life of the process.
pub(crate) struct HostTable {
    raw: SlHost,
    pool: Option<rayon::ThreadPool>,
    log: Log,
    cancelled: AtomicBool,
}

// SAFETY: `raw` is not written after `start`, and its context points at the rest, which may be shared: pool, flag and log are `Sync`.
unsafe impl Sync for HostTable {}
// SAFETY: nothing in it belongs to a thread.
unsafe impl Send for HostTable {}

impl HostTable {
    pub(crate) fn start(services: Services) -> Result<&'static HostTable, HostError> {
        let Services { threads, log } = services;
        let pool = match threads {
            0 | 1 => None,
            n => Some(
                rayon::ThreadPoolBuilder::new()
                    .num_threads(n)
                    .thread_name(|k| format!("plugin loop {k}"))
                    .build()
                    .map_err(|source| HostError::Threads { threads, source })?,
            ),
        };
        let raw = SlHost {
            size: size_of::<SlHost>(),
            context: std::ptr::null_mut(),
            log: Some(log_line),
            cancelled: Some(cancelled),
            open_stream: Some(open_stream),
            fill: Some(fill),
            parallel_for: Some(parallel_for),
            exp: Some(exp),
            ln: Some(ln),
            sin: Some(sin),
            cos: Some(cos),
            pow: Some(pow),
            derive_key: Some(derive_key),
        };
        let table = Box::leak(Box::new(HostTable { raw, pool, log, cancelled: AtomicBool::new(false) }));
        table.raw.context = (&raw mut *table).cast();
        Ok(table)
    }

    pub(crate) fn raw(&self) -> *const SlHost {
        &self.raw
    }

    pub(crate) fn set_cancelled(&self, on: bool) {
        self.cancelled.store(on, Ordering::Relaxed);
    }
}

/// Bytes of a line that are taken: longer ones are cut.
const LONGEST_LINE: usize = 1 << 16;

/// The table behind a context that a plugin hands back.
///
/// # Safety
/// `context` is that of a [`HostTable`].
unsafe fn table<'a>(context: *mut c_void) -> Option<&'a HostTable> {
    // SAFETY: null or a table, none of which is ever freed.
    unsafe { context.cast::<HostTable>().as_ref() }
}

unsafe extern "C" fn log_line(context: *mut c_void, level: u32, text: SlText) {
    // SAFETY: the plugin hands back what it was given.
    let Some(table) = (unsafe { table(context) }) else { return };
    if text.data.is_null() && text.length > 0 {
        return;
    }
    let bytes = match text.length.min(LONGEST_LINE) {
        0 => &[],
        // SAFETY: not null, not longer than can be, and the plugin says that it is so long.
        length => unsafe { std::slice::from_raw_parts(text.data, length) },
    };
    let level = if level == 0 { Level::Note } else { Level::Warning };
    // A panic must not run into the plugin; a line is not worth more than being lost.
    let _ = catch_unwind(AssertUnwindSafe(|| (table.log)(level, &String::from_utf8_lossy(bytes))));
}

unsafe extern "C" fn cancelled(context: *mut c_void) -> i32 {
    // SAFETY: as above.
    unsafe { table(context) }.map_or(0, |table| i32::from(table.cancelled.load(Ordering::Relaxed)))
}

unsafe extern "C" fn open_stream(_context: *mut c_void, key: *const SlKey, stream: *mut SlStream) {
    // SAFETY: null or as the interface describes them.
    if let (Some(key), Some(stream)) = unsafe { (key.as_ref(), stream.as_mut()) } {
        stream.state = Xoshiro::from_key(&StreamKey(key.bytes)).state();
    }
}

unsafe extern "C" fn derive_key(_context: *mut c_void, key: *const SlKey, number: u32, derived: *mut SlKey) {
    // SAFETY: null or as the interface describes them. Read before it is written: they may be one and the same.
    let key = unsafe { key.as_ref() }.map(|key| StreamKey(key.bytes));
    // SAFETY: as above.
    if let (Some(key), Some(derived)) = (key, unsafe { derived.as_mut() }) {
        derived.bytes = key.lane(number).0;
    }
}

unsafe extern "C" fn fill(_context: *mut c_void, stream: *mut SlStream, words: *mut u64, count: usize) {
    // SAFETY: null or as the interface describes it.
    let Some(stream) = (unsafe { stream.as_mut() }) else { return };
    if words.is_null() || count == 0 {
        return;
    }
    let mut generator = Xoshiro::from_state(stream.state);
    // SAFETY: not null, and the plugin says that there is room for `count`. Written word by word, since they need not be initialised.
    (0..count).for_each(|k| unsafe { words.add(k).write(generator.next()) });
    stream.state = generator.state();
}

/// A pointer of the plugin's that goes to all threads of a loop.
#[derive(Clone, Copy)]
struct Argument(*mut c_void);
// SAFETY: by the rules of the interface, tiles of a loop may run on several threads at once.
unsafe impl Sync for Argument {}
// SAFETY: as above.
unsafe impl Send for Argument {}

impl Argument {
    /// The pointer. A method, so that closures capture the whole and not the field alone.
    fn get(self) -> *mut c_void {
        self.0
    }
}

unsafe extern "C" fn parallel_for(
    context: *mut c_void,
    tiles: usize,
    body: Option<unsafe extern "C" fn(argument: *mut c_void, tile: usize)>,
    argument: *mut c_void,
) {
    let Some(body) = body else { return };
    let argument = Argument(argument);
    // SAFETY: the plugin's own function, argument and tiles.
    let run = |tile: usize| unsafe { body(argument.get(), tile) };
    // SAFETY: the plugin hands back what it was given.
    match unsafe { table(context) }.and_then(|table| table.pool.as_ref()) {
        Some(pool) if tiles > 1 => pool.install(|| (0..tiles).into_par_iter().for_each(run)),
        _ => (0..tiles).for_each(run),
    }
}

unsafe extern "C" fn exp(x: f64) -> f64 {
    elementary::exp(x)
}

unsafe extern "C" fn ln(x: f64) -> f64 {
    elementary::ln(x)
}

unsafe extern "C" fn sin(x: f64) -> f64 {
    elementary::sin(x)
}

unsafe extern "C" fn cos(x: f64) -> f64 {
    elementary::cos(x)
}

unsafe extern "C" fn pow(x: f64, y: f64) -> f64 {
    elementary::pow(x, y)
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::sync::Mutex;
    use std::sync::atomic::AtomicU64;

    /// Squares of all tiles, each tile to its own place.
    unsafe extern "C" fn square(argument: *mut c_void, tile: usize) {
        // SAFETY: the test hands over places that live longer than the loop.
        let places = unsafe { &*argument.cast::<Vec<AtomicU64>>() };
        places[tile].fetch_add((tile * tile) as u64, Ordering::Relaxed);
    }

    #[test]
    fn every_tile_runs_once_with_any_number_of_threads() {
        for threads in [0, 1, 2, 5] {
            let host = HostTable::start(Services { threads, ..Services::default() }).unwrap();
            let mut places: Vec<AtomicU64> = (0..97).map(|_| AtomicU64::new(1)).collect();
            let loop_ = host.raw.parallel_for.unwrap();
            // SAFETY: context, body and argument belong together.
            unsafe { loop_(host.raw.context, places.len(), Some(square), (&raw mut places).cast()) };
            for (tile, place) in places.into_iter().enumerate() {
                assert_eq!(place.into_inner(), (tile * tile) as u64 + 1, "{threads} threads");
            }
        }
    }

    #[test]
    fn streams_of_the_table_are_those_of_the_numerics() {
        let host = HostTable::start(Services::default()).unwrap();
        let key = StreamKey::from_text("a stream");
        let (mut stream, mut words) = (SlStream { state: [0; 4] }, [0; 5]);
        // SAFETY: all pointers lead to what they should.
        unsafe {
            host.raw.open_stream.unwrap()(host.raw.context, &SlKey { bytes: key.0 }, &mut stream);
            host.raw.fill.unwrap()(host.raw.context, &mut stream, words.as_mut_ptr(), 2);
            host.raw.fill.unwrap()(host.raw.context, &mut stream, words[2..].as_mut_ptr(), 3);
        }
        let mut generator = Xoshiro::from_key(&key);
        assert_eq!(words, std::array::from_fn(|_| generator.next()));
        let mut raw = SlKey { bytes: key.0 };
        let place = &raw mut raw;
        // SAFETY: as above; a key may be replaced by one that is derived from it.
        unsafe { host.raw.derive_key.unwrap()(host.raw.context, place, 7, place) };
        assert_eq!(raw.bytes, key.lane(7).0);
    }

    #[test]
    fn lines_arrive_and_a_failing_listener_harms_nobody() {
        static LINES: Mutex<Vec<(Level, String)>> = Mutex::new(Vec::new());
        let log: Log = Box::new(|level, line| {
            LINES.lock().unwrap().push((level, line.to_owned()));
            assert!(!line.contains("panic"), "as asked");
        });
        let host = HostTable::start(Services { threads: 1, log }).unwrap();
        let say = |level, text: &str| {
            let raw = SlText { data: text.as_ptr(), length: text.len() };
            // SAFETY: the text lives for the call.
            unsafe { host.raw.log.unwrap()(host.raw.context, level, raw) };
        };
        say(0, "a note");
        say(1, "panic");
        assert_eq!(LINES.lock().unwrap_or_else(|e| e.into_inner()).len(), 2);
    }

    #[test]
    fn cancelling_is_seen_and_taken_back() {
        let host = HostTable::start(Services::default()).unwrap();
        // SAFETY: the table's own context.
        let seen = || unsafe { host.raw.cancelled.unwrap()(host.raw.context) };
        assert_eq!(seen(), 0);
        host.set_cancelled(true);
        assert_eq!(seen(), 1);
        host.set_cancelled(false);
        assert_eq!(seen(), 0);
    }
}
