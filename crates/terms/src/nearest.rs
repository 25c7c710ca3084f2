//! The word that someone probably meant.

/// The candidate nearest to `word` by edit distance with transpositions (Damerau 1964, optimal string alignment), if it is near
/// enough to be a likely slip: at most a third of the longer word's letters, at least one. Ties go to the earlier candidate.
pub fn nearest<'a>(word: &str, candidates: impl IntoIterator<Item = &'a str>) -> Option<&'a str> {
    let mut best: Option<(usize, &str)> = None;
    for candidate in candidates {
        let distance = distance(word, candidate);
        let limit = (word.chars().count().max(candidate.chars().count()) / 3).max(1);
        if distance <= limit && best.is_none_or(|(d, _)| distance < d) {
            best = Some((distance, candidate));
        }
    }
    best.map(|(_, candidate)| candidate)
}

fn distance(a: &str, b: &str) -> usize {
    let a: Vec<char> = a.to_lowercase().chars().collect();
    let b: Vec<char> = b.to_lowercase().chars().collect();
    let mut rows = vec![vec![0; b.len() + 1]; a.len() + 1];
    for (i, row) in rows.iter_mut().enumerate() {
        row[0] = i;
    }
    rows[0] = (0..=b.len()).collect();
    for i in 1..=a.len() {
        for j in 1..=b.len() {
            let change = usize::from(a[i - 1] != b[j - 1]);
            let mut d = (rows[i - 1][j] + 1).min(rows[i][j - 1] + 1).min(rows[i - 1][j - 1] + change);
            if i > 1 && j > 1 && a[i - 1] == b[j - 2] && a[i - 2] == b[j - 1] {
                d = d.min(rows[i - 2][j - 2] + 1);
            }
            rows[i][j] = d;
        }
    }
    rows[a.len()][b.len()]
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn finds_slips_and_leaves_strangers() {
        let words = ["measure", "chains", "equilibrate", "every"];
        assert_eq!(nearest("mesure", words), Some("measure"));
        assert_eq!(nearest("chians", words), Some("chains"));
        assert_eq!(nearest("Every", words), Some("every"));
        assert_eq!(nearest("temperature", words), None);
        assert_eq!(nearest("", words), None);
    }
}
