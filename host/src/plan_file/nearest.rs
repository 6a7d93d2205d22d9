//! Which known word did the writer mean?

/// The known word that takes the fewest changed, missing or superfluous letters, if these are no more than about a third of it.
pub(super) fn nearest<'a>(word: &str, known: &[&'a str]) -> Option<&'a str> {
    let word = word.to_lowercase();
    known
        .iter()
        .map(|&candidate| (distance(&word, candidate), candidate))
        .filter(|(changes, candidate)| 3 * changes <= candidate.len().max(word.len()) + 1)
        .min()
        .map(|(_, candidate)| candidate)
}

/// Levenshtein's distance between two words.
fn distance(a: &str, b: &str) -> usize {
    let b: Vec<char> = b.chars().collect();
    let mut row: Vec<usize> = (0..=b.len()).collect();
    for (i, letter) in a.chars().enumerate() {
        let mut diagonal = row[0];
        row[0] = i + 1;
        for (j, other) in b.iter().enumerate() {
            let changed = diagonal + usize::from(letter != *other);
            diagonal = row[j + 1];
            row[j + 1] = changed.min(row[j] + 1).min(diagonal + 1);
        }
    }
    row[b.len()]
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_slip_finds_its_word_and_a_stranger_none() {
        let known = ["planned", "precision", "limit"];
        assert_eq!(nearest("planed", &known), Some("planned"));
        assert_eq!(nearest("Precison", &known), Some("precision"));
        assert_eq!(nearest("limits", &known), Some("limit"));
        assert_eq!(nearest("colour", &known), None);
        assert_eq!(nearest("", &known), None);
    }

    #[test]
    fn the_distance_counts_letters() {
        assert_eq!(distance("kitten", "sitting"), 3);
        assert_eq!(distance("", "abc"), 3);
        assert_eq!(distance("abc", "abc"), 0);
    }
}
