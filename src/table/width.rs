//! How many columns a text takes, and how to pad and wrap it by them.

use unicode_segmentation::UnicodeSegmentation;
use unicode_width::UnicodeWidthStr;

/// Columns a text takes on a terminal, summed over its grapheme clusters.
#[must_use]
pub fn columns_of(text: &str) -> usize {
    if text.is_ascii() {
        return text.len();
    }
    text.graphemes(true).map(UnicodeWidthStr::width).sum()
}

/// Appends a text and blanks up to a width; a longer text stands whole.
pub fn push_left(out: &mut String, text: &str, width: usize) {
    out.push_str(text);
    push_blanks(out, width.saturating_sub(columns_of(text)));
}

/// Appends blanks and a text that ends at a width; a longer text stands whole.
pub fn push_right(out: &mut String, text: &str, width: usize) {
    push_blanks(out, width.saturating_sub(columns_of(text)));
    out.push_str(text);
}

/// Appends blanks.
pub fn push_blanks(out: &mut String, count: usize) {
    out.extend(std::iter::repeat_n(' ', count));
}

/// A text that takes at most `width` columns: what is too long loses its end to `mark`.
/// For a view of fixed width only; nothing that is written out is ever cut.
#[must_use]
pub fn shortened(text: &str, width: usize, mark: &str) -> String {
    if columns_of(text) <= width {
        return text.to_owned();
    }
    let room = width.saturating_sub(columns_of(mark));
    let mut shown = String::new();
    let mut taken = 0;
    for cluster in text.graphemes(true) {
        taken += columns_of(cluster);
        if taken > room {
            break;
        }
        shown.push_str(cluster);
    }
    if columns_of(mark) <= width {
        shown.push_str(mark);
    }
    shown
}

/// Breaks a text into lines of at most `width` columns: between words where it can,
/// between grapheme clusters where a word alone is too long. `None` does not break.
#[must_use]
pub fn wrapped(text: &str, width: Option<usize>) -> Vec<String> {
    let Some(width) = width else {
        return vec![text.to_owned()];
    };
    let width = width.max(1);
    if columns_of(text) <= width {
        return vec![text.to_owned()];
    }
    let mut lines = Vec::new();
    let mut line = String::new();
    let mut taken = 0;
    for word in text.split(' ').filter(|word| !word.is_empty()) {
        let columns = columns_of(word);
        if taken > 0 && taken + 1 + columns <= width {
            line.push(' ');
            line.push_str(word);
            taken += 1 + columns;
            continue;
        }
        if taken > 0 {
            lines.push(std::mem::take(&mut line));
            taken = 0;
        }
        for cluster in word.graphemes(true) {
            let columns = columns_of(cluster);
            if taken > 0 && taken + columns > width {
                lines.push(std::mem::take(&mut line));
                taken = 0;
            }
            line.push_str(cluster);
            taken += columns;
        }
    }
    if !line.is_empty() || lines.is_empty() {
        lines.push(line);
    }
    lines
}

/// Text of our own with every sign outside ASCII spelt in ASCII.
#[must_use]
pub fn in_ascii(text: &str) -> String {
    let mut plain = String::with_capacity(text.len());
    for sign in text.chars() {
        match sign {
            'µ' | 'μ' => plain.push('u'),
            '²' => plain.push_str("^2"),
            '³' => plain.push_str("^3"),
            '−' | '–' | '—' => plain.push('-'),
            '×' => plain.push('x'),
            '·' => plain.push('*'),
            '≤' => plain.push_str("<="),
            '≥' => plain.push_str(">="),
            '±' => plain.push_str("+/-"),
            '→' => plain.push_str("->"),
            '…' => plain.push_str("..."),
            'α' => plain.push_str("alpha"),
            'τ' => plain.push_str("tau"),
            'Δ' => plain.push_str("delta"),
            'σ' => plain.push_str("sigma"),
            // A name stands as the layout spells it.
            other => plain.push(other),
        }
    }
    plain
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn clusters_are_measured_whole() {
        assert_eq!(columns_of("hub"), 3);
        assert_eq!(columns_of("e\u{301}tat"), 4);
        assert_eq!(columns_of("標準時計"), 8);
    }

    #[test]
    fn texts_break_at_words_then_at_clusters() {
        assert_eq!(wrapped("one two three", Some(7)), ["one two", "three"]);
        assert_eq!(wrapped("abcdefghij", Some(4)), ["abcd", "efgh", "ij"]);
        assert_eq!(wrapped("標準時計", Some(5)), ["標準", "時計"]);
        assert_eq!(wrapped("e\u{301}e\u{301}", Some(1)), ["e\u{301}", "e\u{301}"]);
        assert_eq!(wrapped("", Some(5)), [""]);
        assert_eq!(wrapped("as  it is", None), ["as  it is"]);
    }

    #[test]
    fn shortening_never_exceeds_the_width() {
        assert_eq!(shortened("lattice clock", 8, "…"), "lattice…");
        assert_eq!(shortened("標準時計", 6, "…"), "標準…");
        assert_eq!(shortened("hub", 3, "…"), "hub");
        assert_eq!(shortened("hub", 0, "…"), "");
    }
}
