//! Answers: value and error in large letters, then what they are held against.

use super::record::{breakable, fold};
use super::words::flag_text;
use super::{Answer, Reference, Verdict};
use crate::number::{fixed, shown};
use crate::text::escape;
use std::fmt::Write as _;

pub(super) fn write(out: &mut String, answer: &Answer) {
    let verdict = answer.verdict.word();
    let class = if verdict.is_empty() { "open" } else { verdict };
    let _ = write!(
        out,
        "<article class=\"answer {class}\">\n<h3 dir=\"auto\">{}</h3>\n<p class=\"value\">",
        breakable(&answer.name)
    );
    match answer.value {
        Some(value) => {
            let number = shown(value, answer.error, 10);
            match (&number.error, number.power) {
                (Some(error), 0) => {
                    let _ = write!(out, "<strong>{}</strong> <span class=\"error\">± {error}</span>", number.value);
                }
                _ => {
                    let _ = write!(out, "<strong>{}</strong>", number.text());
                }
            }
            if !answer.unit.is_empty() {
                let _ = write!(out, " <span class=\"unit\"><bdi>{}</bdi></span>", escape(&answer.unit));
            }
            if number.error.is_none() {
                out.push_str(if answer.error == Some(0.0) {
                    " <span class=\"error\">exact</span>"
                } else {
                    " <span class=\"error\">error not known</span>"
                });
            }
        }
        None => out.push_str("<strong>no value</strong>"),
    }
    out.push_str("</p>\n");
    if !verdict.is_empty() {
        let sign = answer.verdict.sign();
        let _ =
            writeln!(out, "<p class=\"verdict\"><span class=\"sign\" aria-hidden=\"true\">{sign}</span>{verdict}</p>");
    }
    let sentence = against(answer);
    if !sentence.is_empty() {
        let _ = writeln!(out, "<p class=\"against\" dir=\"auto\">{sentence}</p>");
    }
    if let (Some(deviation), Reference::Value { .. }) = (answer.deviation, answer.reference) {
        rail(out, deviation, answer.within);
    }
    if !answer.flags.is_empty() {
        let because = if answer.verdict == Verdict::Undecided { "Undecided because" } else { "Flagged because" };
        let _ = write!(out, "<div class=\"because\"><p>{because}</p><ul>");
        for flag in &answer.flags {
            let _ = write!(out, "<li>{}</li>", escape(&flag_text(flag)));
        }
        out.push_str("</ul></div>\n");
    }
    fold(out, "Record of this number", &answer.record);
    out.push_str("</article>\n");
}

/// What it is held against, and how far away that is.
fn against(answer: &Answer) -> String {
    let source =
        if answer.source.is_empty() { String::new() } else { format!(" (<bdi>{}</bdi>)", escape(&answer.source)) };
    let mut words = match answer.reference {
        Reference::None => return String::new(),
        Reference::Value { value, error } => {
            let exact = if error == 0.0 { ", exact" } else { "" };
            format!("Held against {}{exact}{source}.", shown(value, Some(error), 12).text())
        }
        Reference::Bracket { lower, upper } => {
            let end = |x: f64| shown(x, None, 10).text();
            let bracket = match (lower, upper) {
                (Some(lower), Some(upper)) => format!("the bracket from {} to {}", end(lower), end(upper)),
                (Some(lower), None) => format!("the lower bound {}", end(lower)),
                (None, Some(upper)) => format!("the upper bound {}", end(upper)),
                (None, None) => "a bracket without ends".to_owned(),
            };
            format!("Held against {bracket}{source}.")
        }
    };
    match (answer.deviation, answer.reference) {
        (Some(0.0), Reference::Bracket { .. }) => words += " It lies inside.",
        (Some(deviation), _) if deviation.is_finite() => {
            let side = if deviation > 0.0 { "above" } else { "below" };
            let _ = write!(words, " It lies {} standard errors {side}", fixed(deviation.abs(), 2));
            let _ = write!(words, "; up to {} agree.", shown(answer.within, None, 3).text());
        }
        _ => {}
    }
    words
}

/// A scale in standard errors with a dot at the deviation: the part that agrees is drawn thick.
fn rail(out: &mut String, deviation: f64, within: f64) {
    if !deviation.is_finite() || !within.is_finite() || within <= 0.0 {
        return;
    }
    // Twice as far as what agrees is shown; beyond that the dot stops at the end as an arrow.
    let place = |x: f64| 120.0 + 108.0 * (x / (2.0 * within)).clamp(-1.0, 1.0);
    let at = place(deviation);
    let _ = write!(
        out,
        "<svg class=\"rail\" viewBox=\"0 0 240 34\" width=\"240\" height=\"34\" role=\"img\" aria-label=\"deviation {} standard errors; up to {} agree\">",
        fixed(deviation, 2),
        shown(within, None, 3).text()
    );
    let (a, b) = (place(-within), place(within));
    let _ = write!(
        out,
        "<path class=\"rule\" d=\"M12 14H228\"/><path class=\"agree\" d=\"M{a} 14H{b}\"/><path class=\"rule\" d=\"M120 7V21\"/>"
    );
    let edge = deviation.abs() > 2.0 * within;
    if edge {
        let d = if deviation > 0.0 { 7.0 } else { -7.0 };
        let _ = write!(out, "<path class=\"dot\" d=\"M{at:.1} 14L{:.1} 8V20z\"/>", at - d);
    } else {
        let _ = write!(out, "<circle class=\"dot\" cx=\"{at:.1}\" cy=\"14\" r=\"5\"/>");
    }
    for (x, label) in [(a, -within), (120.0, 0.0), (b, within)] {
        let _ = write!(out, "<text x=\"{x}\" y=\"31\" text-anchor=\"middle\">{}</text>", shown(label, None, 3).text());
    }
    out.push_str("</svg>\n");
}
