//! From values to places along an axis.

use super::{Axis, Scale};
use crate::number::superscript;
use crate::ticks::{Ticks, linear, logarithmic};

/// An axis with its ends settled.
#[derive(Clone, Debug, PartialEq)]
pub(crate) struct Scaled {
    pub(crate) lo: f64,
    pub(crate) hi: f64,
    pub(crate) log: bool,
}

/// Beyond this a value counts as infinite: differences of two must not overflow.
const HUGE: f64 = 1e300;
/// Ends closer than this share of their size are the same value as far as a double's digits go.
const SAME: f64 = 1e-11;

impl Scaled {
    /// Ends from the axis, or from the values that it must hold (`pad`: free room at either end as a share of the whole).
    pub(crate) fn settle(axis: &Axis, values: impl Iterator<Item = f64>, pad: f64) -> Scaled {
        let log = axis.scale == Scale::Log;
        let usable = |x: &f64| usable(*x, log);
        if let Some((lo, hi)) = axis.range
            && usable(&lo)
            && usable(&hi)
            && hi - lo > SAME * lo.abs().max(hi.abs())
        {
            return Scaled { lo, hi, log };
        }
        let (lo, hi) =
            values.filter(usable).fold((f64::INFINITY, f64::NEG_INFINITY), |(lo, hi), x| (lo.min(x), hi.max(x)));
        let (lo, hi) = if lo > hi { if log { (1.0, 10.0) } else { (0.0, 1.0) } } else { (lo, hi) };
        if log {
            let (a, b) = (libm::log10(lo), libm::log10(hi));
            let room = if b - a > 1e-9 { (b - a) * pad } else { 0.5 };
            return Scaled { lo: libm::pow(10.0, a - room), hi: libm::pow(10.0, b + room), log };
        }
        let size = lo.abs().max(hi.abs());
        let span = hi - lo;
        let room = if span > SAME * size && span > 1e-290 {
            span * pad
        } else if size > 1e-280 {
            size * 0.1
        } else {
            1.0
        };
        Scaled { lo: lo - room, hi: hi + room, log }
    }

    /// Whether a value has a place on the axis at all, inside its ends or not.
    pub(crate) fn usable(&self, x: f64) -> bool {
        usable(x, self.log)
    }

    pub(crate) fn contains(&self, x: f64) -> bool {
        x >= self.lo && x <= self.hi
    }

    /// The place of a value: 0 at the lower end, 1 at the upper.
    pub(crate) fn share(&self, x: f64) -> f64 {
        if self.log {
            let (a, b) = (libm::log10(self.lo), libm::log10(self.hi));
            (libm::log10(x) - a) / (b - a)
        } else {
            (x - self.lo) / (self.hi - self.lo)
        }
    }

    pub(crate) fn ticks(&self, most: usize) -> Ticks {
        if self.log { logarithmic(self.lo, self.hi, most) } else { linear(self.lo, self.hi, most) }
    }
}

fn usable(x: f64, log: bool) -> bool {
    x.abs() < HUGE && (!log || x > 1.0 / HUGE)
}

/// What stands beside an axis: label, then power of ten and unit in parentheses.
pub(crate) fn caption(axis: &Axis, power: i32) -> String {
    match (power, axis.unit.as_str()) {
        (0, "") => axis.label.clone(),
        (0, unit) => format!("{} ({unit})", axis.label),
        (n, "") => format!("{} (× 10{})", axis.label, superscript(n)),
        (n, unit) => format!("{} (10{} {unit})", axis.label, superscript(n)),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn settle(values: &[f64], log: bool) -> Scaled {
        let axis = Axis::new("x", "");
        let axis = if log { axis.logarithmic() } else { axis };
        Scaled::settle(&axis, values.iter().copied(), 0.05)
    }

    #[test]
    fn every_set_of_values_gives_an_axis() {
        let strange: [&[f64]; 10] = [
            &[],
            &[0.0],
            &[1.0],
            &[-3.0, -3.0],
            &[f64::NAN, f64::INFINITY],
            &[-1e299, 1e299],
            &[1e-308, 2e-308],
            &[1e9, 1e9 + 1e-6],
            &[f64::MAX, f64::MIN],
            &[5e-324],
        ];
        for values in strange {
            for log in [false, true] {
                let axis = settle(values, log);
                assert!(axis.lo.is_finite() && axis.hi.is_finite() && axis.lo < axis.hi, "{values:?} {log}: {axis:?}");
                assert!(!axis.ticks(6).labelled.is_empty(), "{values:?} {log}: {axis:?}");
                for &x in values.iter().filter(|&&x| axis.usable(x)) {
                    assert!((0.0..=1.0).contains(&axis.share(x)), "{x} of {values:?} lies inside");
                }
            }
        }
    }

    #[test]
    fn senseless_ranges_count_as_none() {
        for range in [(1.0, 1.0), (2.0, 1.0), (f64::NAN, 1.0), (0.0, f64::INFINITY)] {
            let axis = Axis { range: Some(range), ..Axis::new("x", "") };
            let scaled = Scaled::settle(&axis, [5.0, 6.0].into_iter(), 0.0);
            assert_eq!((scaled.lo, scaled.hi), (5.0, 6.0));
        }
    }
}
