//! Which known word a mistyped one was probably meant to be.

/// The up to `n` known words nearest to a mistyped one, nearest first, at most half of its letters
/// away. Case does not count.
pub(super) fn nearest<'a>(
    word: &str,
    known: impl IntoIterator<Item = &'a str>,
    n: usize,
) -> Vec<&'a str> {
    // A pasted paragraph is no typing mistake, and the distance costs length times length.
    if word.len() > 64 {
        return Vec::new();
    }
    let word = word.to_lowercase();
    let reach = word.chars().count().div_ceil(2);
    let mut ranked: Vec<(usize, &str)> = known
        .into_iter()
        .map(|k| (distance(&word, &k.to_lowercase()), k))
        .filter(|(d, _)| *d <= reach)
        .collect();
    ranked.sort_unstable();
    ranked.into_iter().take(n).map(|(_, k)| k).collect()
}

/// Edit distance: insertions, deletions and replacements of one character (Levenshtein 1966).
fn distance(a: &str, b: &str) -> usize {
    let b: Vec<char> = b.chars().collect();
    let mut row: Vec<usize> = (0..=b.len()).collect();
    for (i, ca) in a.chars().enumerate() {
        let mut diagonal = row[0];
        row[0] = i + 1;
        for (j, cb) in b.iter().enumerate() {
            let replaced = diagonal + usize::from(ca != *cb);
            diagonal = row[j + 1];
            row[j + 1] = replaced.min(diagonal + 1).min(row[j] + 1);
        }
    }
    row[b.len()]
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn finds_the_word_that_was_meant() {
        let known = ["value", "period", "area", "measure"];
        assert_eq!(nearest("vlaue", known, 1), ["value"]);
        assert_eq!(nearest("Meassure", known, 1), ["measure"]);
        assert!(nearest("zzzzzzzz", known, 3).is_empty());
        assert_eq!(distance("kitten", "sitting"), 3);
    }
}
