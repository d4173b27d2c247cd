//! The name somebody probably meant.

/// The candidate nearest to a word: equal without case and dashes, or few letters away for its length.
pub fn nearest<'a>(word: &str, candidates: impl IntoIterator<Item = &'a str>) -> Option<&'a str> {
    let plain = |t: &str| t.to_lowercase().replace(['-', ' '], "_");
    let word = plain(word);
    let allowed = (word.chars().count().max(3) / 3).min(3);
    candidates.into_iter().map(|c| (distance(&word, &plain(c)), c)).filter(|(d, _)| *d <= allowed).min_by_key(|(d, _)| *d).map(|(_, c)| c)
}

/// Number of letters to insert, delete, replace or exchange with their neighbour.
///
/// # References
/// F. J. Damerau, Commun. ACM 7, 171 (1964), in the form where no letter is touched twice.
fn distance(a: &str, b: &str) -> usize {
    let (a, b): (Vec<char>, Vec<char>) = (a.chars().collect(), b.chars().collect());
    let mut d = vec![vec![0; b.len() + 1]; a.len() + 1];
    for i in 0..=a.len() {
        for j in 0..=b.len() {
            d[i][j] = if i == 0 || j == 0 {
                i + j
            } else {
                let other = usize::from(a[i - 1] != b[j - 1]);
                let mut least = (d[i - 1][j - 1] + other).min(d[i - 1][j] + 1).min(d[i][j - 1] + 1);
                if i > 1 && j > 1 && a[i - 1] == b[j - 2] && a[i - 2] == b[j - 1] {
                    least = least.min(d[i - 2][j - 2] + 1);
                }
                least
            };
        }
    }
    d[a.len()][b.len()]
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn distances_of_known_pairs() {
        // Counted by hand.
        for (a, b, d) in
            [("", "abc", 3), ("lengths", "length", 1), ("freame", "frame", 1), ("ab", "ba", 1), ("order", "border", 1), ("q", "z", 1)]
        {
            assert_eq!((distance(a, b), distance(b, a)), (d, d), "{a} {b}");
        }
    }

    #[test]
    fn only_near_names_are_suggested() {
        let names = ["velocity", "viscosity", "min_cells", "q"];
        assert_eq!(nearest("viscosty", names), Some("viscosity"));
        assert_eq!(nearest("Min-Cells", names), Some("min_cells"));
        assert_eq!(nearest("colour", names), None);
        assert_eq!(nearest("", names), Some("q"), "one letter away");
    }
}
