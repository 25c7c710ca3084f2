//! Words for flags and verdicts.

use super::Verdict;

/// A flag in words, to be read after "because": None for a flag that has none here.
pub fn flag_words(flag: &str) -> Option<&'static str> {
    Some(match flag {
        "not-equilibrated" => "the chains have not forgotten where they began",
        "few-samples" => "there are too few independent measurements for an error that can be relied on",
        "poor-overlap" => "the histograms of neighbouring temperatures hardly overlap",
        "bad-fit" => "the fit does not describe the points within their errors",
        "few-sizes" => "there are too few sizes for an extrapolation",
        "no-crossing" => "the curves of two sizes do not cross in the range",
        "constant" => "the series did not change",
        "flagged-input" => "what it was computed from is flagged",
        _ => return None,
    })
}

/// A flag as people read it: its words, or itself with spaces.
pub(super) fn flag_text(flag: &str) -> String {
    flag_words(flag).map_or_else(|| flag.replace('-', " "), str::to_owned)
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
