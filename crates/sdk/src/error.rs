//! What a plugin says when it cannot do something.

use std::fmt;

/// A message for the person who runs the pipeline: what is wrong and, where possible, what to do.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Error(pub String);

impl Error {
    /// From a text.
    pub fn new(text: impl Into<String>) -> Self {
        Error(text.into())
    }

    /// What a function returns that stopped because [`crate::Host::cancelled`] asked for it.
    pub fn cancelled() -> Self {
        Error("stopped because the run is being stopped".to_owned())
    }
}

impl fmt::Display for Error {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(&self.0)
    }
}

impl std::error::Error for Error {}

/// Result of a plugin's functions.
pub type Result<T> = std::result::Result<T, Error>;
