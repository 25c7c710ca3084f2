//! Ranges of numbers, evaluated in decimal.

use num_bigint::BigInt;
use std::fmt;

/// Evenly spaced numbers from one to another, both included.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Range {
    /// First value.
    pub from: f64,
    /// Last value.
    pub to: f64,
    /// How many values; one is allowed only where both ends are equal.
    pub count: i64,
}

impl Range {
    /// Most values of one range.
    pub const MOST: i64 = 1_000_000;

    /// The values: exact in decimal, then rounded to the nearest double, so that a counted 2.26 has the bits of a written 2.26.
    /// The ends are read as their shortest decimal texts, which is what people write up to 15 digits.
    ///
    /// # Errors
    /// Where the count is out of range, or one value must stand for two ends.
    pub fn values(&self) -> Result<Vec<f64>, RangeError> {
        if self.count < 1 || self.count > Range::MOST || !self.from.is_finite() || !self.to.is_finite() {
            return Err(RangeError::Count);
        }
        if self.count == 1 {
            return if self.from == self.to { Ok(vec![self.from]) } else { Err(RangeError::OneForTwo) };
        }
        let (a, b) = (decimal(self.from), decimal(self.to));
        let exponent = a.1.min(b.1);
        let align = |(mantissa, e): (BigInt, i32)| mantissa * BigInt::from(10).pow(e.abs_diff(exponent));
        let (a, b) = (align(a), align(b));
        let steps = self.count - 1;
        Ok((0..self.count).map(|k| nearest(&a * (steps - k) + &b * k, &BigInt::from(steps), exponent)).collect())
    }
}

/// Mantissa and power of ten of a double's shortest decimal text.
fn decimal(x: f64) -> (BigInt, i32) {
    if x == 0.0 {
        return (BigInt::ZERO, 0);
    }
    let text = crate::number_text(x);
    let (digits, exponent) = match text.split_once('e') {
        Some((digits, exponent)) => (digits, exponent.parse::<i32>().unwrap_or(0)),
        None => (text.as_str(), 0),
    };
    let (whole, fraction) = digits.split_once('.').unwrap_or((digits, ""));
    let mantissa = format!("{whole}{fraction}").parse().unwrap_or(BigInt::ZERO);
    (mantissa, exponent - fraction.len() as i32)
}

/// The double nearest to `numerator / denominator * 10^exponent`: by long division to more digits than a double can tell
/// apart, with a last digit that says whether anything is left, so that halves are rounded as they should be.
fn nearest(numerator: BigInt, denominator: &BigInt, exponent: i32) -> f64 {
    const DIGITS: u32 = 60;
    let scaled = numerator * BigInt::from(10).pow(DIGITS);
    let quotient = &scaled / denominator;
    let sticky = i32::from(&quotient * denominator != scaled);
    let text = format!("{quotient}{sticky}e{}", exponent - DIGITS as i32 - 1);
    text.parse().unwrap_or(0.0)
}

/// What is wrong with a range.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum RangeError {
    /// The count is below one or above [`Range::MOST`], or an end is not finite.
    Count,
    /// One value for two different ends.
    OneForTwo,
}

impl fmt::Display for RangeError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            RangeError::Count => write!(f, "a range has 1 to {} values between finite ends", Range::MOST),
            RangeError::OneForTwo => f.write_str("a range of one value cannot have two different ends"),
        }
    }
}

impl std::error::Error for RangeError {}

#[cfg(test)]
mod tests {
    use super::*;

    /// "2.26 written and 2.26 counted are one value": each value of a range has the bits of its decimal text.
    #[test]
    fn counted_values_have_the_bits_of_written_ones() {
        let range = Range { from: 2.20, to: 2.36, count: 9 };
        let written = [2.20, 2.22, 2.24, 2.26, 2.28, 2.30, 2.32, 2.34, 2.36];
        assert_eq!(range.values().unwrap(), written);
        let fine = Range { from: 2.2, to: 2.36, count: 161 }.values().unwrap();
        for (k, x) in fine.iter().enumerate() {
            assert_eq!(*x, format!("{:.3}", 2.2 + 0.001 * k as f64).parse::<f64>().unwrap());
        }
        assert_eq!(Range { from: -1.0, to: 1.0, count: 3 }.values().unwrap(), [-1.0, 0.0, 1.0]);
        assert_eq!(Range { from: 1e-300, to: 1.0, count: 2 }.values().unwrap(), [1e-300, 1.0]);
    }

    #[test]
    fn thirds_are_rounded_to_nearest() {
        assert_eq!(Range { from: 0.0, to: 1.0, count: 4 }.values().unwrap(), [0.0, 1.0 / 3.0, 2.0 / 3.0, 1.0]);
    }

    #[test]
    fn senseless_ranges_are_refused() {
        assert_eq!(Range { from: 1.0, to: 2.0, count: 1 }.values(), Err(RangeError::OneForTwo));
        assert_eq!(Range { from: 1.0, to: 2.0, count: 0 }.values(), Err(RangeError::Count));
        assert_eq!(Range { from: 1.0, to: 1.0, count: 1 }.values(), Ok(vec![1.0]));
    }

    proptest::proptest! {
        /// Ends are kept to the bit.
        #[test]
        fn ends_are_exact(from in -1e6f64..1e6, to in -1e6f64..1e6, count in 2i64..50) {
            let values = Range { from, to, count }.values().unwrap();
            proptest::prop_assert_eq!(values[0], from);
            proptest::prop_assert_eq!(values[values.len() - 1], to);
        }
    }
}
