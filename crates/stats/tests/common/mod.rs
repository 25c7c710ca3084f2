//! Random numbers and series for the tests.

#![allow(dead_code, reason = "shared by several test programs, none of which uses all of it")]

use spinledger_numerics::random::{StreamKey, Xoshiro, open_unit_f64};
use spinledger_numerics::special::normal_quantile;

/// Standard normal numbers of a named stream.
pub(crate) struct Normal(Xoshiro);

impl Normal {
    pub(crate) fn new(name: &str, number: u64) -> Self {
        Self(Xoshiro::from_key(&StreamKey::from_text(&format!("stats test {name} {number}"))))
    }

    pub(crate) fn next(&mut self) -> f64 {
        normal_quantile(open_unit_f64(self.0.next()))
    }

    pub(crate) fn uniform(&mut self) -> f64 {
        open_unit_f64(self.0.next())
    }

    /// A stationary autoregressive series x' = a x + noise of unit variance.
    pub(crate) fn autoregressive(&mut self, a: f64, count: usize) -> Vec<f64> {
        let width = (1.0 - a * a).sqrt();
        let mut value = self.next();
        (0..count)
            .map(|_| {
                let now = value;
                value = a * value + width * self.next();
                now
            })
            .collect()
    }
}

/// Mean and standard deviation.
pub(crate) fn moments(values: &[f64]) -> (f64, f64) {
    let count = values.len() as f64;
    let mean = values.iter().sum::<f64>() / count;
    let variance = values.iter().map(|value| (value - mean) * (value - mean)).sum::<f64>() / (count - 1.0);
    (mean, variance.sqrt())
}
