//! Sums whose order is fixed.
//!
//! Floating-point addition is not associative: a sum has reproducible bits only if its order is part of its
//! definition. [`sum`] fixes the order by position in the slice, never by thread.

/// Values in a chunk of [`sum`].
pub const CHUNK: usize = 1024;

/// Accumulators a chunk is dealt to, round robin, so that the loop can be vectorised without changing bits.
const LANES: usize = 8;

/// Running sum with a correction term (Neumaier 1974 Z. angew. Math. Mech. 54 39).
///
/// The error is about one rounding of the result plus n eps^2 times the sum of magnitudes. Once an infinity or NaN
/// is added the value is that of the plain sum.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct CompensatedSum {
    sum: f64,
    correction: f64,
}

impl CompensatedSum {
    /// An empty sum, 0.
    #[must_use]
    pub const fn new() -> Self {
        Self { sum: 0.0, correction: 0.0 }
    }

    /// Adds one term.
    #[inline]
    pub fn add(&mut self, term: f64) {
        let next = self.sum + term;
        self.correction +=
            if self.sum.abs() >= term.abs() { (self.sum - next) + term } else { (term - next) + self.sum };
        self.sum = next;
    }

    /// Adds the terms of another sum. Not the same bits as adding its terms one by one.
    pub fn merge(&mut self, other: &Self) {
        self.add(other.sum);
        self.correction += other.correction;
    }

    /// The sum so far.
    #[inline]
    #[must_use]
    pub fn value(&self) -> f64 {
        let corrected = self.sum + self.correction;
        // Infinite terms leave inf - inf in the correction.
        if corrected.is_nan() { self.sum } else { corrected }
    }
}

impl Extend<f64> for CompensatedSum {
    fn extend<I: IntoIterator<Item = f64>>(&mut self, terms: I) {
        for term in terms {
            self.add(term);
        }
    }
}

/// Sum of a slice: chunks of [`CHUNK`] values over eight accumulators, the chunks joined by a [`CompensatedSum`].
///
/// One pass. The empty sum is 0.
#[must_use]
pub fn sum(values: &[f64]) -> f64 {
    sum_by(values.len(), |index| values[index])
}

/// Sum of `term(0) .. term(count - 1)` in the order of [`sum`].
#[inline]
pub fn sum_by(count: usize, mut term: impl FnMut(usize) -> f64) -> f64 {
    let mut total = CompensatedSum::new();
    let mut start = 0;
    while start < count {
        let end = count.min(start + CHUNK);
        let mut lanes = [0.0; LANES];
        let whole = start + (end - start) / LANES * LANES;
        let mut index = start;
        while index < whole {
            for (lane, slot) in lanes.iter_mut().enumerate() {
                *slot += term(index + lane);
            }
            index += LANES;
        }
        for (lane, slot) in lanes.iter_mut().enumerate().take(end - whole) {
            *slot += term(whole + lane);
        }
        let [a, b, c, d, e, f, g, h] = lanes;
        total.add(((a + b) + (c + d)) + ((e + f) + (g + h)));
        start = end;
    }
    total.value()
}

/// Arithmetic mean in the order of [`sum`]; `None` for an empty slice.
#[must_use]
pub fn mean(values: &[f64]) -> Option<f64> {
    if values.is_empty() {
        return None;
    }
    // Shifting by the first value keeps a constant series exactly constant and loses fewer digits.
    let origin = values[0];
    if !origin.is_finite() {
        return Some(sum(values) / values.len() as f64);
    }
    Some(origin + sum_by(values.len(), |index| values[index] - origin) / values.len() as f64)
}
