//! Words for flags and verdicts.

use super::Verdict;

/// Flags, what each says (to be read after "because" or a colon), and what helps; nothing where that depends.
const FLAGS: &[(&str, &str, &str)] = &[
    ("not-equilibrated", "the chains have not forgotten where they began", "equilibrate longer, or with another rule"),
    (
        "few-samples",
        "there are too few independent measurements for an error that can be relied on",
        "measure longer, or with another rule",
    ),
    (
        "poor-overlap",
        "the histograms of neighbouring temperatures hardly overlap",
        "sample temperatures there, or closer together",
    ),
    (
        "bad-fit",
        "the fit does not describe the points within their errors",
        "larger sizes, or temperatures closer to the crossings",
    ),
    ("biased", "the fit leaves out a correction to scaling that is there", "take the corrected result"),
    (
        "size-dependent",
        "leaving out the smallest size moves the result by more than its errors allow",
        "leave it out, and add larger sizes",
    ),
    ("few-sizes", "there are too few sizes for an extrapolation", "add sizes"),
    ("no-crossing", "the curves of two sizes do not cross in the range", "other temperatures"),
    ("constant", "the series did not change", ""),
    ("flagged-input", "what it was computed from is flagged", "settle that first"),
    ("no-error", "no error is known", "compare a quantity that has one"),
    ("imprecise", "the error is larger than the precision that was asked for", "measure longer"),
    ("not-finite", "the quantity is not a finite number there", ""),
];

/// A flag in words, to be read after "because" or a colon; None for a flag that has none here.
pub fn flag_words(flag: &str) -> Option<&'static str> {
    FLAGS.iter().find(|(known, _, _)| *known == flag).map(|(_, words, _)| *words)
}

/// What helps against a flag, in words; None where that depends, or for a flag that has no words here.
pub fn flag_remedy(flag: &str) -> Option<&'static str> {
    let found = FLAGS.iter().find(|(known, _, _)| *known == flag);
    found.map(|(_, _, remedy)| *remedy).filter(|remedy| !remedy.is_empty())
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

#[cfg(test)]
mod tests {
    use super::*;

    /// Whatever the documentation names has words here: no flag is told as a bare word.
    #[test]
    fn every_documented_flag_has_words() {
        let docs = include_str!("../../../../docs/pipelines.md");
        let (_, section) = docs.split_once("\n## Flags\n").expect("a section on flags");
        let table = section.split("\n## ").next().unwrap_or_default();
        let cells = table.lines().filter_map(|line| line.strip_prefix("| `")?.split(" |").next());
        let flags: Vec<&str> =
            cells.flat_map(|cell| cell.split("`, `")).map(|flag| flag.trim_end_matches('`')).collect();
        assert!(flags.len() > 8, "{flags:?}");
        for flag in flags {
            assert!(flag_words(flag).is_some_and(|words| !words.is_empty()), "`{flag}`");
        }
        assert_eq!((flag_words("sound"), flag_remedy("sound"), flag_remedy("constant")), (None, None, None));
    }
}
