//! Which known word a mistyped one was probably meant to be.

/// The up to `n` known words nearest to a mistyped one, nearest first, at most half of its letters
/// away. Case does not count; among equals a word of the same letters comes first.
pub(super) fn nearest<'a>(
    word: &str,
    known: impl IntoIterator<Item = &'a str>,
    n: usize,
) -> Vec<&'a str> {
    // A pasted paragraph is no typing mistake, and the distance costs length times length.
    if word.len() > 64 {
        return Vec::new();
    }
    let letters = |text: &str| -> Vec<char> { text.to_lowercase().chars().collect() };
    let sorted = |mut letters: Vec<char>| {
        letters.sort_unstable();
        letters
    };
    let word = letters(word);
    let reach = word.len().div_ceil(2);
    let mut ranked: Vec<(usize, bool, &str)> = known
        .into_iter()
        .map(|k| {
            let other = letters(k);
            let distance = distance(&word, &other);
            (distance, sorted(other) != sorted(word.clone()), k)
        })
        .filter(|(d, _, _)| *d <= reach)
        .collect();
    ranked.sort_unstable();
    ranked.into_iter().take(n).map(|(_, _, k)| k).collect()
}

/// Edit distance: insertions, deletions and replacements of one character and swaps of two
/// neighbours (Damerau 1964, in the form that edits no place twice).
fn distance(a: &[char], b: &[char]) -> usize {
    let mut before: Vec<usize> = Vec::new();
    let mut row: Vec<usize> = (0..=b.len()).collect();
    for i in 1..=a.len() {
        let mut next = vec![i; b.len() + 1];
        for j in 1..=b.len() {
            let replaced = row[j - 1] + usize::from(a[i - 1] != b[j - 1]);
            next[j] = replaced.min(row[j] + 1).min(next[j - 1] + 1);
            if i > 1 && j > 1 && a[i - 1] == b[j - 2] && a[i - 2] == b[j - 1] {
                next[j] = next[j].min(before[j - 2] + 1);
            }
        }
        before = std::mem::replace(&mut row, next);
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
        assert_eq!(nearest("uds", ["UAS", "USD", "XDS"], 1), ["USD"]);
        let letters = |text: &str| text.chars().collect::<Vec<char>>();
        assert_eq!(distance(&letters("kitten"), &letters("sitting")), 3);
        assert_eq!(distance(&letters(""), &letters("abc")), 3);
    }
}
