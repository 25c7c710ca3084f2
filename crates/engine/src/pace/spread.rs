//! The middle of rounds and how far they lie apart.

use serde::Serialize;

/// Median and quartiles.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
pub struct Spread {
    /// A quarter of the rounds is below.
    pub low: f64,
    /// The middle.
    pub median: f64,
    /// A quarter of the rounds is above.
    pub high: f64,
}

impl Spread {
    /// Of these numbers, between neighbours by straight lines; None where there is none, or one is not finite.
    pub fn of(numbers: impl IntoIterator<Item = f64>) -> Option<Spread> {
        let mut sorted: Vec<f64> = numbers.into_iter().collect();
        if sorted.is_empty() || sorted.iter().any(|x| !x.is_finite()) {
            return None;
        }
        sorted.sort_by(f64::total_cmp);
        let at = |share: f64| {
            let place = share * (sorted.len() - 1) as f64;
            let below = place as usize;
            let above = (below + 1).min(sorted.len() - 1);
            sorted[below] + (place - below as f64) * (sorted[above] - sorted[below])
        };
        Some(Spread { low: at(0.25), median: at(0.5), high: at(0.75) })
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn quartiles() {
        let spread = |x: &[f64]| Spread::of(x.iter().copied());
        assert_eq!(spread(&[5.0, 1.0, 2.0, 4.0, 3.0]), Some(Spread { low: 2.0, median: 3.0, high: 4.0 }));
        assert_eq!(spread(&[1.0, 2.0]), Some(Spread { low: 1.25, median: 1.5, high: 1.75 }));
        assert_eq!(spread(&[7.0]), Some(Spread { low: 7.0, median: 7.0, high: 7.0 }));
        assert_eq!((spread(&[]), spread(&[1.0, f64::NAN])), (None, None));
    }
}
