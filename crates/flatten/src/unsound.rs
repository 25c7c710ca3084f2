//! What is wrong with a lattice or a Hamiltonian.

use std::fmt;

/// A sentence, without full stop, about what a plugin said that cannot be: it names sites, bonds and classes by number and
/// leaves the plugin's name to the caller.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Unsound(String);

impl Unsound {
    /// From a sentence.
    pub fn new(what: impl Into<String>) -> Self {
        Unsound(what.into())
    }
}

impl fmt::Display for Unsound {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(&self.0)
    }
}

impl std::error::Error for Unsound {}

/// Result of checking.
pub type Result<T> = std::result::Result<T, Unsound>;

/// Ends the function with an [`Unsound`] unless a condition holds.
macro_rules! ensure {
    ($condition:expr, $($text:tt)*) => {
        // A name first: NaN then reads as not fulfilled, and no comparison stands negated.
        let fulfilled: bool = $condition;
        if !fulfilled {
            return Err($crate::unsound::Unsound::new(format!($($text)*)));
        }
    };
}
pub(crate) use ensure;
