//! Decisions with a given probability.

/// Accepts with a probability that is a multiple of 2^-64.
///
/// A probability p in (0, 1) becomes round(p 2^64) 2^-64, an error of at most 2^-65 (none for p >= 2^-11, where the
/// product is an integer). p <= 0 and NaN never accept; p >= 1 always does. One word is looked at per decision,
/// whatever p is, so that the position in the stream does not depend on it.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub struct Threshold64 {
    limit: u64,
    always: bool,
}

impl Threshold64 {
    /// The threshold of a probability.
    #[must_use]
    pub fn new(probability: f64) -> Self {
        if probability >= 1.0 {
            return Self { limit: u64::MAX, always: true };
        }
        // The largest double below 1 gives 2^64 - 2^11: the cast cannot saturate. Negative numbers and NaN give 0.
        Self { limit: (probability * 18_446_744_073_709_551_616.0).round() as u64, always: false }
    }

    /// Whether this word accepts.
    #[inline]
    #[must_use]
    pub const fn accepts(self, word: u64) -> bool {
        (word < self.limit) | self.always
    }

    /// The words below this number accept; beside it, whether all do.
    #[must_use]
    pub const fn limit(self) -> (u64, bool) {
        (self.limit, self.always)
    }
}

/// Accepts with a probability that is a multiple of 2^-32.
///
/// A probability p in (0, 1) becomes round(p 2^32) 2^-32: an error of at most 2^-33, which a test of distribution
/// sees only after about 2^64 decisions. p <= 0 and NaN never accept; p >= 1 always does.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub struct Threshold32 {
    /// 0 to 2^32.
    limit: u64,
}

impl Threshold32 {
    /// The threshold of a probability.
    #[must_use]
    pub fn new(probability: f64) -> Self {
        // Casts saturate, and NaN becomes 0.
        Self { limit: ((probability * 4_294_967_296.0).round() as u64).min(1 << 32) }
    }

    /// Whether this half word accepts.
    #[inline]
    #[must_use]
    pub const fn accepts(self, word: u32) -> bool {
        (word as u64) < self.limit
    }

    /// The half words below this number accept; 2^32 when all do.
    #[must_use]
    pub const fn limit(self) -> u64 {
        self.limit
    }
}
