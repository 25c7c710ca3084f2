//! Words for flags and verdicts.

use super::Verdict;

/// A flag in words, to be read after "because" or a colon; None for a flag that has none here.
pub fn flag_words(flag: &str) -> Option<&'static str> {
    Some(match flag {
        "not-equilibrated" => "the chains have not forgotten where they began",
        "few-samples" => "there are too few independent measurements for an error that can be relied on",
        "poor-overlap" => "the histograms of neighbouring temperatures hardly overlap",
        "bad-fit" => "the fit does not describe the points within their errors",
        "biased" => "the fit leaves out a correction to scaling that is there",
        "size-dependent" => "leaving out the smallest size moves the result by more than its errors allow",
        "few-sizes" => "there are too few sizes for an extrapolation",
        "no-crossing" => "the curves of two sizes do not cross in the range",
        "constant" => "the series did not change",
        "flagged-input" => "what it was computed from is flagged",
        _ => return None,
    })
}

/// A flag as people read it, in short: itself with spaces.
pub(super) fn flag_name(flag: &str) -> String {
    flag.replace('-', " ")
}

/// A flag at length: its words where it has some, and its name.
pub(super) fn flag_text(flag: &str) -> String {
    match flag_words(flag) {
        Some(words) => format!("{words} ({})", flag_name(flag)),
        None => flag_name(flag),
    }
}

impl Verdict {
    /// The word, as in tables; empty for none.
    pub fn word(self) -> &'static str {
        match self {
            Verdict::Agrees => "agrees",
            Verdict::Disagrees => "disagrees",
            Verdict::Undecided => "undecided",
            Verdict::None => "",
        }
    }

    /// A sign that tells verdicts apart without colour.
    pub(super) fn sign(self) -> &'static str {
        match self {
            Verdict::Agrees => "=",
            Verdict::Disagrees => "≠",
            Verdict::Undecided => "?",
            Verdict::None => "",
        }
    }
}

/// "3 rows", "1 row".
pub(super) fn counted(n: usize, one: &str, many: &str) -> String {
    if n == 1 { format!("1 {one}") } else { format!("{n} {many}") }
}
