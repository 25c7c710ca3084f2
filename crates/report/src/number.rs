//! Numbers as people read them: one way for charts, tables and sentences.

/// The true minus sign: as wide as a plus, never broken off at the end of a line.
const MINUS: char = '\u{2212}';

/// The power of ten of a finite number's first digit (2 for 345.0); 0 for zero.
pub(crate) fn exponent(x: f64) -> i32 {
    if x == 0.0 || !x.is_finite() {
        return 0;
    }
    // Formatting is exact, where a logarithm would be off by one beside powers of ten.
    format!("{:e}", x.abs()).rsplit_once('e').and_then(|(_, e)| e.parse().ok()).unwrap_or(0)
}

/// 10ⁿ, rounded to the nearest double.
pub(crate) fn power(n: i32) -> f64 {
    format!("1e{n}").parse().unwrap_or(f64::INFINITY)
}

/// A number with fixed decimals and a true minus sign; never "−0".
pub(crate) fn fixed(x: f64, decimals: usize) -> String {
    if x.is_infinite() {
        return if x > 0.0 { "∞".to_owned() } else { format!("{MINUS}∞") };
    }
    let digits = format!("{:.decimals$}", x.abs());
    if x < 0.0 && digits.bytes().any(|d| (b'1'..=b'9').contains(&d)) { format!("{MINUS}{digits}") } else { digits }
}

/// `10⁻³` without the ten: superscript digits.
pub(crate) fn superscript(n: i32) -> String {
    n.to_string()
        .chars()
        .map(|c| match c {
            '-' => '⁻',
            '1' => '¹',
            '2' => '²',
            '3' => '³',
            c => char::from_u32('⁰' as u32 + (c as u32 - '0' as u32)).unwrap_or(c),
        })
        .collect()
}

/// A number and its error, with the digits that the error allows.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Shown {
    /// The value's digits.
    pub value: String,
    /// The error's digits, to the same decimal place; none where it is not known or zero.
    pub error: Option<String>,
    /// A power of ten that both are to be multiplied by; zero for none.
    pub power: i32,
}

impl Shown {
    fn times(&self) -> String {
        format!(" × 10{}", superscript(self.power))
    }

    /// The value alone, power included.
    pub fn value_text(&self) -> String {
        if self.power == 0 { self.value.clone() } else { self.value.clone() + &self.times() }
    }

    /// The error alone, power included; empty where there is none.
    pub fn error_text(&self) -> String {
        match &self.error {
            Some(error) if self.power == 0 => error.clone(),
            Some(error) => error.clone() + &self.times(),
            None => String::new(),
        }
    }

    /// `2.2693 ± 0.0004`, or `(1.23 ± 0.05) × 10⁻⁷`.
    pub fn text(&self) -> String {
        match (&self.error, self.power) {
            (Some(error), 0) => format!("{} ± {error}", self.value),
            (Some(error), _) => format!("({} ± {error}){}", self.value, self.times()),
            (None, _) => self.value_text(),
        }
    }
}

/// Largest and smallest powers of ten that are written out.
const PLAIN: std::ops::RangeInclusive<i32> = -4..=6;

/// Shows a number with its error: two significant digits of the error, and the value to the same place. Without an error, or
/// with one of zero, the value has up to `digits` significant digits, without trailing zeros.
pub fn shown(value: f64, error: Option<f64>, digits: usize) -> Shown {
    if value.is_nan() {
        return Shown { value: "–".to_owned(), error: None, power: 0 };
    }
    let error = error.filter(|e| e.is_finite() && *e > 0.0);
    if value.is_infinite() {
        return Shown { value: fixed(value, 0), error: None, power: 0 };
    }
    let Some(error) = error else {
        // Rounding may carry into a further digit (9.9999 to 10.0), so look at the rounded number.
        let rounded: f64 = format!("{:.*e}", digits.saturating_sub(1), value).parse().unwrap_or(value);
        let first = exponent(rounded);
        let (scaled, power) = if PLAIN.contains(&first) { (rounded, 0) } else { (rounded / power(first), first) };
        let decimals = (digits as i32 - 1 - exponent(scaled)).max(0) as usize;
        return Shown { value: without_zeros(fixed(scaled, decimals)), error: None, power };
    };
    let error: f64 = format!("{error:.1e}").parse().unwrap_or(error);
    let place = exponent(error) - 1;
    let first = exponent(value).max(exponent(error));
    // Written out where no digit would be missing before the point and not too many zeros stand after it.
    let shift = if (PLAIN.contains(&first) && place <= 0) || (first == 0) { 0 } else { first };
    let decimals = (shift - place).clamp(0, 17) as usize;
    let scale = power(shift.abs());
    let scaled = |x: f64| if shift >= 0 { x / scale } else { x * scale };
    Shown { value: fixed(scaled(value), decimals), error: Some(fixed(scaled(error), decimals)), power: shift }
}

fn without_zeros(text: String) -> String {
    if text.contains('.') { text.trim_end_matches('0').trim_end_matches('.').to_owned() } else { text }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn errors_say_how_many_digits() {
        let text = |v, e| shown(v, Some(e), 8).text();
        assert_eq!(text(2.269_185_31, 0.000_413), "2.26919 ± 0.00041");
        assert_eq!(text(2.269_185_31, 0.000_996), "2.2692 ± 0.0010");
        assert_eq!(text(-0.001, 0.2), "0.00 ± 0.20");
        assert_eq!(text(1234.5, 12.0), "1234 ± 12");
        assert_eq!(text(123_456.0, 120.0), "(1.2346 ± 0.0012) × 10⁵");
        assert_eq!(text(1.234e-7, 5e-9), "(1.234 ± 0.050) × 10⁻⁷");
        assert_eq!(text(-1.234e-7, 5e-6), "(\u{2212}0.1 ± 5.0) × 10⁻⁶");
        assert_eq!(text(1.5, f64::NAN), "1.5");
    }

    #[test]
    fn numbers_without_errors_are_short() {
        let text = |v| shown(v, None, 7).text();
        assert_eq!(text(2.26), "2.26");
        assert_eq!(text(0.1 + 0.2), "0.3");
        assert_eq!(text(9.999_999_99), "10");
        assert_eq!(text(1_048_576.0), "1048576");
        assert_eq!(text(-2.5e-9), "\u{2212}2.5 × 10⁻⁹");
        assert_eq!(text(f64::NEG_INFINITY), "\u{2212}∞");
        assert_eq!(text(f64::NAN), "–");
        assert_eq!(text(-0.0), "0");
    }

    #[test]
    fn powers_are_exact_at_powers() {
        for n in -300..300 {
            assert_eq!(exponent(power(n)), n);
        }
    }
}
