//! Numbers and tables as text.

use unicode_width::{UnicodeWidthChar, UnicodeWidthStr};

/// How many columns of a terminal a text takes: wide characters take two, accents that join none.
pub(crate) fn wide(text: &str) -> usize {
    text.width()
}

/// The beginning of a text, so much as fits into a number of columns; what is cut off is told by a last `…`.
pub(crate) fn fit(text: &str, width: usize) -> String {
    if wide(text) <= width {
        return text.to_owned();
    }
    let mut out = String::new();
    let mut taken = 0;
    for letter in text.chars() {
        taken += letter.width().unwrap_or(0);
        if taken >= width {
            break;
        }
        out.push(letter);
    }
    if width > 0 {
        out.push('…');
    }
    out
}

/// A text in lines of at most so many columns, broken at spaces; a longer word stands alone and is cut. Further lines are indented by two.
pub(crate) fn wrap(text: &str, width: usize) -> Vec<String> {
    let lead = text.len() - text.trim_start_matches(' ').len();
    let mut lines: Vec<String> = Vec::new();
    let mut line = " ".repeat(lead);
    let mut words = 0;
    for word in text.split_ascii_whitespace() {
        if words > 0 && wide(&line) + 1 + wide(word) > width {
            lines.push(std::mem::replace(&mut line, " ".repeat(lead + 2)));
            words = 0;
        }
        if words > 0 {
            line.push(' ');
        }
        line.push_str(&fit(word, width.saturating_sub(wide(&line)).max(1)));
        words += 1;
    }
    lines.push(line);
    lines
}

/// A table of text: columns as wide as they need, numbers to the right, a gap of two.
pub(crate) fn columns(rows: &[Vec<String>], right: &[usize]) -> Vec<String> {
    let count = rows.iter().map(Vec::len).max().unwrap_or(0);
    let width = |c: usize| rows.iter().filter_map(|r| r.get(c)).map(|t| wide(t)).max().unwrap_or(0);
    let widths: Vec<usize> = (0..count).map(width).collect();
    rows.iter()
        .map(|row| {
            let mut line = String::new();
            for (c, text) in row.iter().enumerate() {
                let pad = " ".repeat(widths[c] - wide(text));
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

/// A value with its error in the last digits: `2.26915(12)`; an error of ten or more with its own digits: `1500 +- 120`.
pub(crate) fn with_error(value: f64, error: Option<f64>) -> String {
    match error {
        Some(error) if error > 0.0 && error.is_finite() && value.is_finite() => {
            // Two digits of the error, after rounding: 0.0996 is 0.100.
            let text = format!("{error:.1e}");
            let exponent: i32 = text.split_once('e').and_then(|(_, e)| e.parse().ok()).unwrap_or(0);
            match 1 - exponent {
                digits @ 1..=17 => {
                    let units = text.split_once('e').map_or(String::new(), |(mantissa, _)| mantissa.replace('.', ""));
                    format!("{value:.*}({units})", digits as usize)
                }
                ..=0 => {
                    let scale = 10f64.powi(exponent - 1);
                    format!("{:.0} +- {:.0}", (value / scale).round() * scale, (error / scale).round() * scale)
                }
                _ => format!("{value} +- {error:.1e}"),
            }
        }
        Some(0.0) => format!("{value} (exact)"),
        _ => format!("{value}"),
    }
}

/// Seconds in words.
pub(crate) fn duration(seconds: f64) -> String {
    if seconds < 0.000_95 {
        return "less than 1 ms".into();
    }
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

/// A large number: `7812`, `3.2e9`.
pub(crate) fn amount(x: f64) -> String {
    if x.abs() < 9999.5 { format!("{x:.0}") } else { format!("{x:.1e}") }
}

/// Bytes: `512 bytes`, `3.4 MB`.
pub(crate) fn bytes(x: f64) -> String {
    for (unit, word) in [(1e12, "TB"), (1e9, "GB"), (1e6, "MB"), (1e3, "kB")] {
        // What rounds to a thousand of one unit is one of the next.
        if x >= 0.999_5 * unit {
            let x = x / unit;
            return if x < 9.95 { format!("{x:.1} {word}") } else { format!("{x:.0} {word}") };
        }
    }
    format!("{x:.0} bytes")
}

/// So many values are listed; of more, the first and the last are told.
const LISTED: usize = 3;

/// What several points have in common and over what they range, from names and values of each: `size 12 to 32 (4), temperature 2.31`. Few values
/// are listed.
pub(crate) fn ranges(points: &[Vec<(String, String)>]) -> String {
    let mut names: Vec<&str> = Vec::new();
    for (name, _) in points.iter().flatten() {
        if !names.contains(&name.as_str()) {
            names.push(name);
        }
    }
    let of = |name: &str| {
        let values = points.iter().flatten().filter(|(known, _)| known == name).map(|(_, value)| value.as_str());
        format!("{name} {}", range(values))
    };
    names.into_iter().map(of).collect::<Vec<_>>().join(", ")
}

/// Values of one name: `2.31`, `8, 12`, `12 to 32 (4)`.
pub(crate) fn range<'a>(values: impl IntoIterator<Item = &'a str>) -> String {
    let mut seen = std::collections::HashSet::new();
    let mut values: Vec<&str> = values.into_iter().filter(|value| seen.insert(*value)).collect();
    let number = |text: &str| text.parse::<f64>().ok();
    let numbers = values.iter().all(|value| number(value).is_some());
    if numbers {
        values.sort_by(|a, b| number(a).partial_cmp(&number(b)).unwrap_or(std::cmp::Ordering::Equal));
    }
    match values.as_slice() {
        few if few.len() <= LISTED => few.join(", "),
        [first, .., last] if numbers => format!("{first} to {last} ({})", values.len()),
        many => format!("{} ... ({})", many[..LISTED].join(", "), many.len()),
    }
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
        assert_eq!(with_error(2.2691, Some(0.0996)), "2.27(10)");
        assert_eq!(with_error(2.2691, Some(3.08)), "2.3(31)");
        assert_eq!(with_error(-1.5, Some(12.0)), "-2 +- 12");
        assert_eq!(with_error(-1543.0, Some(118.0)), "-1540 +- 120");
        assert_eq!(with_error(2.5, None), "2.5");
        assert_eq!(with_error(1e6, Some(1e4)), "1000000 +- 10000");
        assert_eq!(with_error(2.5, Some(1e-20)), "2.5 +- 1.0e-20");
        assert_eq!(with_error(f64::INFINITY, Some(0.1)), "inf");
        assert_eq!(with_error(2.0, Some(0.0)), "2 (exact)");
    }

    #[test]
    fn amounts_are_short() {
        let texts: Vec<String> = [0.0, 999.4, 9999.4, 9999.6, 999_960.0, 4.2e12].map(amount).to_vec();
        assert_eq!(texts, ["0", "999", "9999", "1.0e4", "1.0e6", "4.2e12"]);
        let texts: Vec<String> = [0.0, 999.4, 999.6, 12_345.0, 9.96e6, 999.96e6].map(bytes).to_vec();
        assert_eq!(texts, ["0 bytes", "999 bytes", "1.0 kB", "12 kB", "10 MB", "1.0 GB"]);
    }

    #[test]
    fn points_are_gathered() {
        let point = |size: &str, t: &str| vec![("size".to_owned(), size.to_owned()), ("t".to_owned(), t.to_owned())];
        let points = [point("12", "2.5"), point("8", "2.25"), point("12", "10"), point("8", "2.5"), point("8", "3")];
        assert_eq!(ranges(&points), "size 8, 12, t 2.25 to 10 (4)");
        assert_eq!(ranges(&points[..1]), "size 12, t 2.5");
        let points = ["8x8", "8x9", "9x9", "9x8"].map(|size| vec![("size".to_owned(), size.to_owned())]);
        assert_eq!(ranges(&points), "size 8x8, 8x9, 9x9 ... (4)");
        assert_eq!(ranges(&[]), "");
    }

    #[test]
    fn columns_are_aligned_by_characters() {
        let row = |cells: [&str; 3]| cells.map(String::from).to_vec();
        let lines = columns(&[row(["step", "n", ""]), row(["größe", "12", "left"])], &[1]);
        assert_eq!(lines, ["step    n", "größe  12  left"]);
    }

    #[test]
    fn texts_fit_by_columns_of_a_terminal() {
        assert_eq!(
            (fit("größe", 5), fit("größe", 4), fit("größe", 1), fit("größe", 0)),
            ("größe".into(), "grö…".into(), "…".into(), String::new())
        );
        assert_eq!((wide("自旋"), fit("自旋模型", 6), fit("自旋模型", 5)), (4, "自旋…".into(), "自旋…".into()));
        assert_eq!(wrap("and 120 more rows", 9), ["and 120", "  more", "  rows"]);
        assert_eq!(wrap("  a susceptibility", 8), ["  a", "    sus…"]);
        assert_eq!(wrap("", 8), [""]);
    }

    #[test]
    fn durations_are_rounded_to_what_matters() {
        let texts: Vec<String> = [0.0123, 5.2, 100.0, 7300.0, 1e6].map(duration).to_vec();
        assert_eq!(texts, ["12 ms", "5 s", "2 min", "2 h 2 min", "11 days"]);
    }
}
