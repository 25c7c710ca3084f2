//! Where an axis has its ticks, and what stands beside them.

use crate::number::{exponent, fixed, power, superscript};

/// A tick with its label.
#[derive(Clone, Debug, PartialEq)]
pub(crate) struct Tick {
    pub(crate) value: f64,
    pub(crate) label: String,
}

/// The ticks of an axis.
#[derive(Clone, Debug, Default, PartialEq)]
pub(crate) struct Ticks {
    pub(crate) labelled: Vec<Tick>,
    /// Ticks without a label.
    pub(crate) minor: Vec<f64>,
    /// A power of ten that the labels are to be multiplied by; it goes to the axis label.
    pub(crate) power: i32,
}

/// The smallest of 1, 2, 5 times a power of ten with at most `most` steps between two numbers: mantissa and power.
fn step(lo: f64, hi: f64, most: usize) -> (i64, i32) {
    let raw = (hi - lo) / most.max(1) as f64;
    let first = exponent(raw);
    [(1, first), (2, first), (5, first), (1, first + 1)]
        .into_iter()
        // A hair of tolerance, so that 0.1 counts as ten steps in 1.
        .find(|&(m, e)| m as f64 * power(e) >= raw * (1.0 - 1e-9))
        .unwrap_or((1, first + 1))
}

/// `n 10^e` to the nearest double.
fn decimal(n: i64, e: i32) -> f64 {
    if e < 0 && e > -300 { n as f64 / power(-e) } else { n as f64 * power(e) }
}

/// Ticks at whole multiples of a step of 1, 2 or 5 times a power of ten; at most `most + 1` of them.
pub(crate) fn linear(lo: f64, hi: f64, most: usize) -> Ticks {
    let (mantissa, e) = step(lo, hi, most);
    let size = mantissa as f64 * power(e);
    let (from, to) = ((lo / size - 1e-9).ceil() as i64, (hi / size + 1e-9).floor() as i64);
    let largest = exponent(lo.abs().max(hi.abs()));
    let shown = if (-3..5).contains(&largest) { 0 } else { largest };
    let decimals = (shown - e).max(0);
    let labelled = (from..=to)
        .map(|n| {
            let units = n * mantissa;
            let label = fixed(decimal(units, e - shown), decimals as usize);
            Tick { value: decimal(units, e), label }
        })
        .collect();
    Ticks { labelled, minor: Vec::new(), power: shown }
}

fn decade_label(n: i32) -> String {
    match n {
        -3..0 => fixed(power(n), n.unsigned_abs() as usize),
        0..4 => fixed(power(n), 0),
        _ => format!("10{}", superscript(n)),
    }
}

/// Ticks on a logarithmic axis between two positive numbers: 1, 2, 5 of each decade where there is room, otherwise decades with 2 to 9
/// between them; on less than half a decade like a linear axis.
pub(crate) fn logarithmic(lo: f64, hi: f64, most: usize) -> Ticks {
    let decades = libm::log10(hi) - libm::log10(lo);
    if decades < 0.5 {
        return linear(lo, hi, most);
    }
    let (first, last) = (exponent(lo), exponent(hi) + 1);
    let inside = |x: f64| x >= lo * (1.0 - 1e-9) && x <= hi * (1.0 + 1e-9);
    let mut ticks = Ticks::default();
    if decades < 1.0 || decades * 3.0 <= most as f64 + 1.0 {
        for e in first..=last {
            for m in 1..10 {
                let value = decimal(m, e);
                if !inside(value) {
                } else if matches!(m, 1 | 2 | 5) {
                    let label = match e {
                        -4..5 => fixed(value, (-e).max(0) as usize),
                        _ => format!("{m} × 10{}", superscript(e)),
                    };
                    ticks.labelled.push(Tick { value, label });
                } else {
                    ticks.minor.push(value);
                }
            }
        }
        return ticks;
    }
    // Every so many decades a label, at multiples, so that zero decades have one.
    let every = (decades / most.max(1) as f64).ceil().max(1.0) as i32;
    for e in (first..=last).filter(|e| inside(power(*e))) {
        if e.rem_euclid(every) == 0 {
            ticks.labelled.push(Tick { value: power(e), label: decade_label(e) });
        } else {
            ticks.minor.push(power(e));
        }
    }
    if decades <= 6.0 {
        ticks.minor.extend((first..=last).flat_map(|e| (2..10).map(move |m| decimal(m, e))).filter(|&x| inside(x)));
    }
    ticks
}

#[cfg(test)]
mod tests {
    use super::*;

    fn labels(ticks: &Ticks) -> Vec<&str> {
        ticks.labelled.iter().map(|t| t.label.as_str()).collect()
    }

    #[test]
    fn linear_ticks_have_digits_enough() {
        assert_eq!(
            labels(&linear(2.2, 2.36, 8)),
            ["2.20", "2.22", "2.24", "2.26", "2.28", "2.30", "2.32", "2.34", "2.36"]
        );
        assert_eq!(labels(&linear(0.0, 1.0, 10)).len(), 11);
        assert_eq!(labels(&linear(-3.1, 3.1, 4)), ["\u{2212}2", "0", "2"]);
        let large = linear(1_200_000.0, 1_230_000.0, 4);
        assert_eq!((labels(&large), large.power), (vec!["1.20", "1.21", "1.22", "1.23"], 6));
        let close = linear(2.269_185_0, 2.269_186_0, 5);
        assert_eq!(close.labelled[1].label, "2.2691852");
    }

    /// A tick has the bits of its decimal text.
    #[test]
    fn ticks_are_decimal() {
        for tick in linear(0.0, 0.7, 7).labelled {
            assert_eq!(tick.label.parse::<f64>().unwrap(), tick.value);
        }
    }

    #[test]
    fn logarithmic_ticks_count_decades() {
        let ticks = logarithmic(0.8e-3, 1.2e3, 8);
        assert_eq!(labels(&ticks), ["0.001", "0.01", "0.1", "1", "10", "100", "1000"]);
        assert_eq!(labels(&logarithmic(3.0, 40.0, 8)), ["5", "10", "20"]);
        assert_eq!(labels(&logarithmic(1e-12, 1e12, 6)), ["10⁻¹²", "10⁻⁸", "10⁻⁴", "1", "10⁴", "10⁸", "10¹²"]);
        assert_eq!(labels(&logarithmic(2.0, 3.0, 5)), ["2.0", "2.2", "2.4", "2.6", "2.8", "3.0"]);
    }

    proptest::proptest! {
        #[test]
        fn there_are_never_too_many(lo in -1e9f64..1e9, span in 1e-3f64..1e9, most in 2usize..12) {
            let ticks = linear(lo, lo + span, most);
            proptest::prop_assert!(ticks.labelled.len() <= most + 1);
            let mut seen = std::collections::BTreeSet::new();
            for tick in &ticks.labelled {
                proptest::prop_assert!(seen.insert(tick.label.clone()), "{} twice", tick.label);
            }
        }
    }
}
