//! What stands behind the sinks that plugins write to.

use spinledger_abi::{SL_FAILED, SL_OK};
use spinledger_flatten::Unsound;
use std::ffi::c_void;

/// What a sink collects, and the first thing that was wrong.
#[derive(Default)]
pub(crate) struct Collected<P> {
    pub(crate) parts: P,
    wrong: Option<Unsound>,
}

impl<P> Collected<P> {
    pub(crate) fn new(parts: P) -> Self {
        Collected { parts, wrong: None }
    }

    /// The finished whole. What the sink refused comes before what the plugin made of the refusal.
    pub(crate) fn finish<T, E>(
        self,
        asked: Result<(), E>,
        finish: impl FnOnce(P) -> Result<T, Unsound>,
        wrong: impl Fn(Unsound) -> E,
    ) -> Result<T, E> {
        match self.wrong {
            Some(what) => Err(wrong(what)),
            None => {
                asked?;
                finish(self.parts).map_err(wrong)
            }
        }
    }

    /// Takes one call of a plugin. No panic leaves: there is nothing in the checks that should panic, and if there is, it must not run into C.
    ///
    /// # Safety
    /// `context` is null or that of a sink made from a `Collected<P>`, which nobody else uses meanwhile.
    pub(crate) unsafe fn take(context: *mut c_void, call: impl FnOnce(&mut P) -> Result<(), Fault>) -> i32 {
        // SAFETY: as the caller promises.
        let Some(collected) = (unsafe { context.cast::<Collected<P>>().as_mut() }) else { return SL_FAILED };
        if collected.wrong.is_some() {
            return SL_FAILED;
        }
        let outcome = std::panic::catch_unwind(std::panic::AssertUnwindSafe(|| call(&mut collected.parts)));
        match outcome {
            Ok(Ok(())) => SL_OK,
            Ok(Err(Fault(what))) => {
                collected.wrong = Some(what);
                SL_FAILED
            }
            Err(_) => {
                collected.wrong = Some(Unsound::new("the check of what it says failed"));
                SL_FAILED
            }
        }
    }
}

/// Why a call is refused.
pub(crate) struct Fault(Unsound);

impl From<Unsound> for Fault {
    fn from(what: Unsound) -> Self {
        Fault(what)
    }
}

/// A slice that a plugin hands over.
///
/// # Safety
/// `data` is null or leads to `count` elements that live for `'a`.
pub(crate) unsafe fn slice<'a, T>(data: *const T, count: usize, what: &str) -> Result<&'a [T], Fault> {
    if count == 0 {
        return Ok(&[]);
    }
    if data.is_null() {
        return Err(Unsound::new(format!("it gives a null pointer for {what}")).into());
    }
    if !data.is_aligned() {
        return Err(Unsound::new(format!("it gives a misaligned pointer for {what}")).into());
    }
    // So many sites or bonds cannot be numbered, and so many bytes cannot be.
    let bytes = count.checked_mul(size_of::<T>()).filter(|bytes| *bytes <= isize::MAX as usize);
    if count > u32::MAX as usize || bytes.is_none() {
        return Err(Unsound::new(format!("it gives {count} {what}, which is too many")).into());
    }
    // SAFETY: neither null nor misaligned nor too long; the rest is the plugin's word.
    Ok(unsafe { std::slice::from_raw_parts(data, count) })
}
