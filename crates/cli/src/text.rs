//! Numbers and tables as text.

/// A table of text: columns as wide as they need, numbers to the right, a gap of two.
pub(crate) fn columns(rows: &[Vec<String>], right: &[usize]) -> Vec<String> {
    let count = rows.iter().map(Vec::len).max().unwrap_or(0);
    let width = |c: usize| rows.iter().filter_map(|r| r.get(c)).map(|t| t.chars().count()).max().unwrap_or(0);
    let widths: Vec<usize> = (0..count).map(width).collect();
    rows.iter()
        .map(|row| {
            let mut line = String::new();
            for (c, text) in row.iter().enumerate() {
                let pad = " ".repeat(widths[c] - text.chars().count());
                if right.contains(&c) {
                    line.push_str(&pad);
                    line.push_str(text);
                } else {
                    line.push_str(text);
                    line.push_str(&pad);
                }
                line.push_str("  ");
            }
            line.trim_end().to_owned()
        })
        .collect()
}

/// A value with its error in the last digits: `2.26915(12)`.
pub(crate) fn with_error(value: f64, error: Option<f64>) -> String {
    match error {
        Some(error) if error > 0.0 && error.is_finite() && value.is_finite() => {
            let digits = 1 - error.log10().floor() as i32;
            if !(0..=17).contains(&digits) {
                return format!("{value} +- {error:.2}");
            }
            let units = (error * 10f64.powi(digits)).round();
            format!("{value:.*}({units:.0})", digits as usize)
        }
        Some(0.0) => format!("{value} (exact)"),
        _ => format!("{value}"),
    }
}

/// Seconds in words.
pub(crate) fn duration(seconds: f64) -> String {
    if seconds < 0.95 {
        return format!("{:.0} ms", seconds * 1000.0);
    }
    if seconds < 90.0 {
        return format!("{seconds:.0} s");
    }
    let minutes = (seconds / 60.0).round() as u64;
    if minutes < 90 {
        return format!("{minutes} min");
    }
    let hours = minutes / 60;
    if hours < 48 { format!("{hours} h {} min", minutes % 60) } else { format!("{} days", hours / 24) }
}

/// A large number with its power of a thousand.
pub(crate) fn amount(x: f64) -> String {
    for (power, word) in [(1e12, "T"), (1e9, "G"), (1e6, "M"), (1e3, "k")] {
        if x >= power {
            return format!("{:.1} {word}", x / power);
        }
    }
    format!("{x:.0} ")
}

/// `1 parcel`, `2 parcels`.
pub(crate) fn counted(count: u64, word: &str) -> String {
    if count == 1 { format!("1 {word}") } else { format!("{count} {word}s") }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn errors_stand_in_the_last_digits() {
        assert_eq!(with_error(2.269153, Some(0.00012)), "2.26915(12)");
        assert_eq!(with_error(2.2691, Some(0.0099)), "2.2691(99)");
        assert_eq!(with_error(-1.5, Some(12.0)), "-2(12)");
        assert_eq!(with_error(2.5, None), "2.5");
        assert_eq!(with_error(1e6, Some(1e4)), "1000000 +- 10000.00");
        assert_eq!(with_error(2.0, Some(0.0)), "2 (exact)");
    }

    #[test]
    fn durations_are_rounded_to_what_matters() {
        let texts: Vec<String> = [0.0123, 5.2, 100.0, 7300.0, 1e6].map(duration).to_vec();
        assert_eq!(texts, ["12 ms", "5 s", "2 min", "2 h 2 min", "11 days"]);
    }
}
