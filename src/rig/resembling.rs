//! "Did you mean": the known word that a mistyped one resembles most.

/// The candidate nearest to `word`, if near enough to be a slip of the hand: at most a third of its letters differ, or
/// it begins with the word.
pub(super) fn resembling<'a>(word: &str, candidates: impl Iterator<Item = &'a str>) -> Option<&'a str> {
    let begins = |candidate: &str| word.chars().count() >= 4 && candidate.starts_with(word);
    candidates
        .map(|candidate| (distance(word, candidate), candidate))
        .filter(|(distance, candidate)| 3 * distance <= candidate.chars().count().max(3) || begins(candidate))
        .min_by_key(|(distance, _)| *distance)
        .map(|(_, candidate)| candidate)
}

/// `, did you mean "…"?`, or nothing.
pub(super) fn advice<'a>(word: &str, candidates: impl Iterator<Item = &'a str>) -> String {
    resembling(word, candidates).map_or_else(String::new, |candidate| format!(", did you mean {candidate:?}?"))
}

/// Letters to insert, remove, replace or swap with a neighbour (optimal string alignment; R. A. Wagner and
/// M. J. Fischer, "The String-to-String Correction Problem", J. ACM 21 (1974), with swaps).
fn distance(from: &str, to: &str) -> usize {
    let (from, to): (Vec<char>, Vec<char>) = (from.chars().collect(), to.chars().collect());
    let mut rows = vec![vec![0; to.len() + 1]; from.len() + 1];
    rows[0] = (0..=to.len()).collect();
    for i in 1..=from.len() {
        rows[i][0] = i;
        for j in 1..=to.len() {
            let replaced = rows[i - 1][j - 1] + usize::from(from[i - 1] != to[j - 1]);
            rows[i][j] = replaced.min(rows[i - 1][j] + 1).min(rows[i][j - 1] + 1);
            if i > 1 && j > 1 && from[i - 1] == to[j - 2] && from[i - 2] == to[j - 1] {
                rows[i][j] = rows[i][j].min(rows[i - 2][j - 2] + 1);
            }
        }
    }
    rows[from.len()][to.len()]
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_slip_of_the_hand_is_recognised_and_another_word_is_not() {
        let keys = ["length", "incline", "zero_mark", "brake_from"];
        assert_eq!(resembling("lenght", keys.into_iter()), Some("length"));
        assert_eq!(resembling("inclin", keys.into_iter()), Some("incline"));
        assert_eq!(resembling("zeromark", keys.into_iter()), Some("zero_mark"));
        assert_eq!(resembling("brake", keys.into_iter()), Some("brake_from"));
        assert_eq!(resembling("colour", keys.into_iter()), None);
        assert_eq!(resembling("", keys.into_iter()), None);
    }

    // "kitten" to "sitting" takes 3: the textbook example, from memory.
    #[test]
    fn letters_are_counted() {
        assert_eq!(distance("kitten", "sitting"), 3);
        assert_eq!(distance("ab", "ba"), 1);
        assert_eq!(distance("", "abc"), 3);
    }
}
