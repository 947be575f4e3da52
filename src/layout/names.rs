//! Rules for names and free text, applied once, where files are read.

use unicode_segmentation::UnicodeSegmentation;
use unicode_width::UnicodeWidthStr;

/// Most characters a name may have, and most columns it may take.
pub const LONGEST_NAME: usize = 32;

/// Columns a text takes on a terminal: the widths of its grapheme clusters.
#[must_use]
pub fn columns(text: &str) -> usize {
    if text.is_ascii() {
        return text.len();
    }
    text.graphemes(true).map(UnicodeWidthStr::width).sum()
}

/// Whether a character could act on a terminal, or turn the direction of the text around
/// it: control characters, line and paragraph separators, bidirectional marks, and marks
/// that are never seen.
#[must_use]
pub fn is_unsafe(letter: char) -> bool {
    letter.is_control()
        || matches!(
            letter,
            '\u{61c}'
                | '\u{200b}'
                | '\u{200e}'
                | '\u{200f}'
                | '\u{2028}'..='\u{202e}'
                | '\u{2060}'..='\u{206f}'
                | '\u{feff}'
                | '\u{fff9}'..='\u{fffb}'
                | '\u{e0000}'..='\u{e007f}'
        )
}

/// A text in which every unsafe character is replaced by one of the same number of
/// columns, so that marks below it keep their places.
#[must_use]
pub fn made_safe(text: &str) -> String {
    text.chars().map(safe_char).collect()
}

/// The stand-in of one character; the tab becomes a space.
pub(crate) fn safe_char(letter: char) -> char {
    match letter {
        '\t' => ' ',
        letter if is_unsafe(letter) => '\u{fffd}',
        letter => letter,
    }
}

/// What is wrong with a name: the rule and the remedy.
pub(crate) type Wrong = (&'static str, &'static str);

/// Checks the name of a node, clock or station.
pub(crate) fn check_name(name: &str) -> Result<(), Wrong> {
    // Most names are short and plain, and there may be a million of them.
    let is_plain = |byte: u8| byte.is_ascii_graphic() && byte != b',' && byte != b'=';
    if (1..=LONGEST_NAME).contains(&name.len()) && name.bytes().all(is_plain) {
        return Ok(());
    }
    if name.is_empty() {
        return Err(("a name has 1 to 32 characters", "give it a name"));
    }
    if name.chars().any(is_unsafe) {
        return Err((
            "a name holds no control, invisible or bidirectional marks",
            "type the name again with visible characters only",
        ));
    }
    if name.starts_with(char::is_whitespace) || name.ends_with(char::is_whitespace) {
        return Err(("a name has no blank at its ends", "take the blank away"));
    }
    if name.contains([',', '=']) {
        return Err(("a name holds no `,` and no `=`", "write `-` or `_` instead"));
    }
    if name.len() > LONGEST_NAME
        && (name.chars().nth(LONGEST_NAME).is_some() || columns(name) > LONGEST_NAME)
    {
        return Err(("a name has at most 32 characters and 32 columns", "shorten the name"));
    }
    if columns(name) == 0 {
        return Err(("a name can be seen: it takes at least one column", "give it a visible name"));
    }
    Ok(())
}

/// Checks a free text: the name of the line, a revision, a note.
pub(crate) fn check_text(text: &str) -> Result<(), Wrong> {
    if text.trim().is_empty() {
        return Err((
            "a text holds at least one visible character",
            "write the text, or leave the key out",
        ));
    }
    if text.chars().any(is_unsafe) {
        return Err((
            "a text is one line without control, invisible or bidirectional marks",
            "type the text again with visible characters only, on one line",
        ));
    }
    Ok(())
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn names_are_visible_and_short() {
        for name in
            ["hub", "s1", "Bucht 3", "灯台", "é", "x.y:z", &"n".repeat(32), &"灯".repeat(16)]
        {
            assert_eq!(check_name(name), Ok(()), "{name}");
        }
        let long = "灯".repeat(17);
        for name in [
            "",
            " a",
            "a\u{a0}",
            "a,b",
            "a=b",
            "a\u{1b}[2J",
            "a\u{202e}b",
            "\u{301}",
            &"n".repeat(33),
            &long,
        ] {
            assert!(check_name(name).is_err(), "{name:?}");
        }
    }

    #[test]
    fn safe_text_keeps_its_length() {
        assert_eq!(made_safe("a\u{1b}[2J\u{85}\u{202e}\tb"), "a\u{fffd}[2J\u{fffd}\u{fffd} b");
        assert_eq!(columns(&made_safe("\u{200f}\u{7}")), 2);
    }
}
