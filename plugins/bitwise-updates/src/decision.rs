//! Probabilities of flips, and their binary digits.

use spinledger_numerics::elementary::exp;

/// Most neighbours that this library serves.
pub(crate) const MOST_NEIGHBOURS: usize = 12;
/// Part of ties that flips; `README.md` says why not all.
#[cfg(test)]
pub(crate) const TIE_SHARE: f64 = 0.875;
/// Fewest digits: ties look at the first three.
const FEWEST_DIGITS: usize = 3;
/// Most digits. Beyond, events are so rare that they cost nothing.
const MOST_DIGITS: usize = 16;
/// What a rare event costs, in digits: a digit is drawn and compared for 512 lanes at once, events are looked after one by one.
const EVENT: f64 = 3.0;

/// How spins with z coupled neighbours are decided.
///
/// With n bonds broken, m = min(n, z - n) says all about the decision: the spin is in the *class* m. In the classes m < z/2 the spins with
/// n > z/2 go downhill. In the class z/2 flips cost nothing. [`Decision::probabilities`] belong to uphill flips.
#[derive(Clone, Debug, PartialEq)]
pub(crate) struct Decision {
    /// z.
    pub(crate) degree: usize,
    /// No flip costs ln 2 or more (in units of T): then 1/(1 + exp(x)), which is p uphill and 1 - p downhill, and 1/2 for ties.
    pub(crate) soft: bool,
    /// p of an uphill flip in each class m < z/2.
    pub(crate) probabilities: Vec<f64>,
    /// Digits, the least significant first: bit m says whether the digit of class m is 1.
    pub(crate) digits: Vec<u8>,
    /// What the digits leave out, as the probability to flip all the same where they say no.
    pub(crate) left: Vec<f64>,
}

impl Decision {
    /// For z coupled neighbours, x = `step`/T between one more and one less broken bond.
    ///
    /// # Panics
    /// Where z is above [`MOST_NEIGHBOURS`].
    pub(crate) fn new(degree: usize, x: f64) -> Self {
        assert!(degree <= MOST_NEIGHBOURS, "checked when the lattice was read");
        let classes = degree.div_ceil(2);
        let costs = (0..classes).map(|m| x * (degree - 2 * m) as f64);
        // The number of neighbours times the step is the largest cost. Infinite temperature has no costs at all, even where a product is not a number.
        let soft = degree == 0 || x == 0.0 || x * (degree as f64) < std::f64::consts::LN_2;
        let probabilities: Vec<f64> = costs
            .map(|cost| match (soft, cost) {
                (true, cost) => 1.0 / (1.0 + exp(cost)),
                (false, cost) => exp(-cost),
            })
            .collect();
        let cost = |count: &usize| {
            let most = left(&probabilities, *count).into_iter().fold(0.0, f64::max);
            *count as f64 + EVENT * most * super::word::LANES as f64
        };
        // The first of the cheapest, so that the choice is the same everywhere.
        let count = (FEWEST_DIGITS..=MOST_DIGITS)
            .reduce(|best, count| if cost(&count) < cost(&best) { count } else { best })
            .unwrap_or(MOST_DIGITS);
        let digit = |place: usize| {
            let bit = |(m, p): (usize, &f64)| u8::from(whole(*p, count) >> place & 1 == 1) << m;
            probabilities.iter().enumerate().map(bit).sum()
        };
        let left = left(&probabilities, count);
        Decision { degree, soft, digits: (0..count).map(digit).collect(), left, probabilities }
    }

    /// The same by definition: probability that a spin with `broken` broken bonds flips.
    #[cfg(test)]
    pub(crate) fn probability(&self, broken: usize) -> f64 {
        let m = broken.min(self.degree - broken);
        match (self.probabilities.get(m), self.soft, 2 * broken > self.degree) {
            (None, true, _) => 0.5,
            (None, false, _) => TIE_SHARE,
            (Some(p), _, false) => *p,
            (Some(p), true, true) => 1.0 - p,
            (Some(_), false, true) => 1.0,
        }
    }
}

/// The first digits of a probability below 1, as a whole number.
fn whole(p: f64, digits: usize) -> u32 {
    (p * f64::from(1_u32 << digits)) as u32
}

/// What these digits leave out of each probability, as a part of what they refuse.
fn left(probabilities: &[f64], digits: usize) -> Vec<f64> {
    let part = |p: &f64| {
        let kept = f64::from(whole(*p, digits)) / f64::from(1_u32 << digits);
        (p - kept) / (1.0 - kept)
    };
    probabilities.iter().map(part).collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn digits_and_what_they_leave_out_make_the_probability() {
        for degree in 0..=MOST_NEIGHBOURS {
            for x in [0.0, 1e-6, 0.05, 0.0866, 0.0867, 0.3, 0.88137, 2.0, 40.0, 1e300] {
                let decision = Decision::new(degree, x);
                assert_eq!(decision.probabilities.len(), degree.div_ceil(2));
                assert!(decision.digits.len() >= FEWEST_DIGITS);
                for (m, p) in decision.probabilities.iter().enumerate() {
                    let kept: f64 = (decision.digits.iter().rev())
                        .zip(1..)
                        .map(|(digit, place)| f64::from(digit >> m & 1) * 0.5_f64.powi(place))
                        .sum();
                    let made = kept + (1.0 - kept) * decision.left[m];
                    assert!((made - p).abs() < 1e-15, "{degree} {x} {m}: {made} {p}");
                    assert!((0.0..=0.5).contains(p) || !decision.soft && *p < 1.0);
                }
            }
        }
    }

    #[test]
    fn detailed_balance() {
        for degree in 1..=MOST_NEIGHBOURS {
            for x in [0.0, 1e-6, 0.05, 0.0866, 0.3, 0.88137, 2.0] {
                let decision = Decision::new(degree, x);
                for broken in 0..=degree {
                    let (there, back) = (decision.probability(broken), decision.probability(degree - broken));
                    let weight = exp(-x * (degree as f64 - 2.0 * broken as f64));
                    assert!((there - weight * back).abs() <= 1e-15 * there.max(weight), "{degree} {x} {broken}");
                }
            }
        }
    }

    #[test]
    fn nothing_is_certain_at_ties() {
        assert_eq!(Decision::new(4, 1.0).probability(2), 0.875);
        assert_eq!(Decision::new(4, 0.1).probability(2), 0.5);
        assert_eq!(Decision::new(0, 1.0).probability(0), 0.5);
    }

    /// Frozen: the number of digits is part of the order of draws.
    #[test]
    fn value_stability() {
        let critical = 2.0 / 2.269_185_314_213_022;
        let digits = |degree, x| Decision::new(degree, x).digits;
        assert_eq!(digits(4, critical).len(), 10);
        assert_eq!(digits(6, 2.0 * 0.221_654_626).len(), 11);
        assert_eq!(digits(4, 0.0), [0, 0, 3]);
    }
}
