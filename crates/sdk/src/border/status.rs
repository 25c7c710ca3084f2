//! From results and panics to status codes and messages.

use crate::Error;
use spinledger_abi as abi;
use std::any::Any;
use std::panic::{AssertUnwindSafe, catch_unwind};

/// Why a function of the border ends early.
pub(crate) enum Stop {
    /// The plugin says so.
    Error(Error),
    /// A sink of the host says so, and knows why.
    Status(i32),
}

impl From<Error> for Stop {
    fn from(error: Error) -> Self {
        Stop::Error(error)
    }
}

pub(crate) type Outcome<T = ()> = Result<T, Stop>;

/// Turns the status of a sink's function into an outcome.
pub(crate) fn heed(status: i32) -> Outcome {
    if status == abi::SL_OK { Ok(()) } else { Err(Stop::Status(status)) }
}

/// Runs what a plugin does, lets no panic out, and returns the status.
///
/// # Safety
/// `message` is null or a valid message of the host.
pub(crate) unsafe fn guard(message: *mut abi::SlMessage, body: impl FnOnce() -> Outcome) -> i32 {
    // What the body touches after a panic: instances are broken and the host releases them without further calls.
    let (status, text) = match catch_unwind(AssertUnwindSafe(body)) {
        Ok(Ok(())) => return abi::SL_OK,
        Ok(Err(Stop::Status(status))) => return status,
        Ok(Err(Stop::Error(error))) if error == Error::cancelled() => (abi::SL_CANCELLED, error.0),
        Ok(Err(Stop::Error(error))) => (abi::SL_FAILED, error.0),
        Err(payload) => (abi::SL_PANICKED, panic_text(payload)),
    };
    // SAFETY: passed on from the caller.
    unsafe { write(message, &text) };
    status
}

/// The text of a panic.
fn panic_text(payload: Box<dyn Any + Send>) -> String {
    let text = match (payload.downcast_ref::<&str>(), payload.downcast_ref::<String>()) {
        (Some(text), _) => (*text).to_owned(),
        (None, Some(text)) => text.clone(),
        (None, None) => "(a panic without text)".to_owned(),
    };
    // Dropping an unknown payload could panic again, here where nothing would catch it.
    std::mem::forget(payload);
    text
}

/// Writes as much of a text as fits, cut between characters.
///
/// # Safety
/// As for [`guard`].
unsafe fn write(message: *mut abi::SlMessage, text: &str) {
    // SAFETY: null or valid, as the caller promises.
    let Some(message) = (unsafe { message.as_mut() }) else { return };
    if message.data.is_null() {
        return;
    }
    let mut end = message.capacity.min(text.len());
    while !text.is_char_boundary(end) {
        end -= 1;
    }
    // SAFETY: the host's buffer holds `capacity` bytes, `end` is at most that, and it cannot overlap with our text.
    unsafe { std::ptr::copy_nonoverlapping(text.as_ptr(), message.data, end) };
    message.length = end;
}
