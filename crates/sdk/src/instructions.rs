//! Which instructions kernels use, where there are several kinds that give the same bits.

use crate::{Error, Result};

/// The environment variable that asks for less than the processor has.
pub const INSTRUCTIONS_VARIABLE: &str = "SPINLEDGER_SIMD";

/// Chooses between kinds of instructions, each with its name and whether this processor has it, the least first: the last that is there, or what
/// the environment variable `SPINLEDGER_SIMD` names.
///
/// # Errors
/// Where it names none of them, or one that is not there; and where none is.
pub fn instructions<K: Copy>(kinds: &[(&str, K, bool)]) -> Result<K> {
    let Some(word) = std::env::var_os(INSTRUCTIONS_VARIABLE) else {
        let best = kinds.iter().rev().find(|kind| kind.2);
        return best.map(|kind| kind.1).ok_or_else(|| Error::new("this processor has none of the instructions"));
    };
    instructions_named(kinds, &word.to_string_lossy())
}

/// The kind of a name.
///
/// # Errors
/// Where there is none of that name, or this processor does not have it.
pub fn instructions_named<K: Copy>(kinds: &[(&str, K, bool)], word: &str) -> Result<K> {
    let Some((_, kind, there)) = kinds.iter().find(|kind| kind.0 == word) else {
        let names: Vec<&str> = kinds.iter().map(|kind| kind.0).collect();
        let names = match names.split_last() {
            Some((last, [])) => (*last).to_owned(),
            Some((last, rest)) => format!("{} or {last}", rest.join(", ")),
            None => "nothing".to_owned(),
        };
        return Err(Error::new(format!("{INSTRUCTIONS_VARIABLE} is `{word}`; it may be {names}")));
    };
    if *there {
        Ok(*kind)
    } else {
        Err(Error::new(format!("{INSTRUCTIONS_VARIABLE} asks for `{word}`, which this processor does not have")))
    }
}
