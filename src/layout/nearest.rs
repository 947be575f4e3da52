//! The nearest known word to a misspelt one.

/// The candidate with the smallest edit distance, when it is near enough to be meant:
/// at most a third of the letters wrong (one for short words), or the same but for case.
pub(crate) fn nearest<'c>(
    word: &str,
    candidates: impl IntoIterator<Item = &'c str>,
) -> Option<&'c str> {
    let word: Vec<char> = word.chars().take(65).flat_map(char::to_lowercase).collect();
    if word.len() > 64 {
        return None;
    }
    let allowed = (word.len() / 3).clamp(1, 4);
    let mut best: Option<(usize, &str)> = None;
    for candidate in candidates {
        let letters: Vec<char> = candidate.chars().flat_map(char::to_lowercase).collect();
        if letters.len().abs_diff(word.len()) > allowed {
            continue;
        }
        let distance = distance(&word, &letters);
        // A word of one or two letters has nothing left when all of them are wrong.
        let shares = distance < letters.len().max(word.len());
        if distance <= allowed && shares && best.is_none_or(|(smallest, _)| distance < smallest) {
            best = Some((distance, candidate));
        }
    }
    best.map(|(_, candidate)| candidate)
}

/// Fewest insertions, deletions, replacements and swaps of neighbours that turn one word
/// into the other (the restricted Damerau–Levenshtein distance).
fn distance(a: &[char], b: &[char]) -> usize {
    let mut before_last: Vec<usize> = Vec::new();
    let mut last: Vec<usize> = (0..=b.len()).collect();
    for (i, letter) in a.iter().enumerate() {
        let mut row = vec![i + 1];
        for (j, other) in b.iter().enumerate() {
            let replaced = last[j] + usize::from(letter != other);
            let mut least = replaced.min(last[j + 1] + 1).min(row[j] + 1);
            if i > 0 && j > 0 && *letter == b[j - 1] && a[i - 1] == *other {
                least = least.min(before_last[j - 1] + 1);
            }
            row.push(least);
        }
        before_last = std::mem::replace(&mut last, row);
    }
    last[b.len()]
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn finds_what_was_meant() {
        let keys = ["position", "mass", "clock", "rating", "reading_at_start"];
        assert_eq!(nearest("positon", keys), Some("position"));
        assert_eq!(nearest("Mass", keys), Some("mass"));
        assert_eq!(nearest("reading_at_strat", keys), Some("reading_at_start"));
        assert_eq!(nearest("colour", keys), None);
        assert_eq!(nearest("x", ["s", "m"]), None);
        assert_eq!(nearest("S", ["s", "m"]), Some("s"));
        assert_eq!(nearest(&"x".repeat(10_000), keys), None);
    }
}
