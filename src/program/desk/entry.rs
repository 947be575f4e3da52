//! The entry line: its text, its cursor, its history.

use clockspar::layout::names::is_unsafe;
use unicode_segmentation::UnicodeSegmentation;

use super::completion::Completion;

/// The most bytes of a sentence.
const LONGEST: usize = 64 * 1024;
/// How many sentences are kept.
const MOST_KEPT: usize = 200;

/// The entry line.
#[derive(Clone, Debug, Default)]
pub struct Entry {
    text: String,
    /// Byte before which the next sign goes; always between two grapheme clusters.
    cursor: usize,
    history: Vec<String>,
    /// Place in the history while it is gone through, and what was being typed before.
    recalled: Option<(usize, String)>,
    /// What would complete the text.
    pub completion: Completion,
}

impl Entry {
    /// The text.
    pub fn text(&self) -> &str {
        &self.text
    }

    /// The text before the cursor.
    pub fn before_cursor(&self) -> &str {
        &self.text[..self.cursor]
    }

    /// Whether the cursor stands behind the text.
    pub fn is_at_end(&self) -> bool {
        self.cursor == self.text.len()
    }

    /// Puts text in at the cursor: its first line, without what a terminal would act on.
    pub fn insert(&mut self, text: &str) {
        let line = text.trim_start_matches(['\r', '\n']).split(['\r', '\n']).next().unwrap_or("");
        for sign in line.chars().filter(|sign| !is_unsafe(*sign)) {
            if self.text.len() + sign.len_utf8() > LONGEST {
                break;
            }
            self.text.insert(self.cursor, sign);
            self.cursor += sign.len_utf8();
        }
        // A combining sign may have joined what stands behind the cursor.
        let cursor = self.boundaries().find(|boundary| *boundary >= self.cursor);
        self.cursor = cursor.unwrap_or(self.text.len());
        self.recalled = None;
    }

    /// Empties the line.
    pub fn clear(&mut self) {
        self.text.clear();
        self.cursor = 0;
        self.recalled = None;
        self.completion = Completion::default();
    }

    /// Takes the sentence out and keeps it in the history.
    pub fn take(&mut self) -> String {
        let text = std::mem::take(&mut self.text);
        self.clear();
        if !text.trim().is_empty() && self.history.last() != Some(&text) {
            if self.history.len() == MOST_KEPT {
                self.history.remove(0);
            }
            self.history.push(text.clone());
        }
        text
    }

    /// Moves the cursor one sign left.
    pub fn left(&mut self) {
        self.cursor = self.boundaries().take_while(|at| *at < self.cursor).last().unwrap_or(0);
    }

    /// Moves the cursor one sign right.
    pub fn right(&mut self) {
        let cursor = self.boundaries().find(|at| *at > self.cursor);
        self.cursor = cursor.unwrap_or(self.text.len());
    }

    /// Moves the cursor to the beginning.
    pub fn start(&mut self) {
        self.cursor = 0;
    }

    /// Moves the cursor to the end.
    pub fn end(&mut self) {
        self.cursor = self.text.len();
    }

    /// Takes the sign before the cursor away.
    pub fn erase_back(&mut self) {
        let end = self.cursor;
        self.left();
        self.text.replace_range(self.cursor..end, "");
        self.recalled = None;
    }

    /// Takes the sign after the cursor away.
    pub fn erase_forward(&mut self) {
        let start = self.cursor;
        self.right();
        self.text.replace_range(start..self.cursor, "");
        self.cursor = start;
        self.recalled = None;
    }

    /// Brings back an earlier sentence.
    pub fn older(&mut self) {
        let place = match &self.recalled {
            Some((place, _)) => place.checked_sub(1),
            None => self.history.len().checked_sub(1),
        };
        let Some(place) = place else { return };
        let draft = match self.recalled.take() {
            Some((_, draft)) => draft,
            None => std::mem::take(&mut self.text),
        };
        self.show(self.history[place].clone());
        self.recalled = Some((place, draft));
    }

    /// Brings back a later sentence, and in the end what was being typed.
    pub fn newer(&mut self) {
        let Some((place, draft)) = self.recalled.take() else { return };
        match self.history.get(place + 1) {
            Some(text) => {
                self.show(text.clone());
                self.recalled = Some((place + 1, draft));
            }
            None => self.show(draft),
        }
    }

    /// Takes the completion over; false when there is none.
    pub fn complete(&mut self) -> bool {
        let Some(rest) = self.completion.rest.take() else { return false };
        self.end();
        self.insert(&rest);
        true
    }

    fn show(&mut self, text: String) {
        self.text = text;
        self.end();
    }

    /// The places between grapheme clusters, the end included.
    fn boundaries(&self) -> impl Iterator<Item = usize> + '_ {
        self.text.grapheme_indices(true).map(|(at, _)| at).chain(std::iter::once(self.text.len()))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn typed(text: &str) -> Entry {
        let mut entry = Entry::default();
        entry.insert(text);
        entry
    }

    #[test]
    fn signs_are_edited_whole() {
        let mut entry = typed("ae\u{301}漢");
        entry.erase_back();
        entry.erase_back();
        assert_eq!(entry.text(), "a");
        entry.start();
        entry.erase_forward();
        entry.erase_forward();
        entry.erase_back();
        assert_eq!(entry.text(), "");
    }

    #[test]
    fn what_a_terminal_would_act_on_is_left_out() {
        let entry = typed("\r\nnote a\u{1b}[31mb\u{202e}c\u{9b}\nundo");
        assert_eq!(entry.text(), "note a[31mbc");
    }

    #[test]
    fn history_goes_back_and_comes_forward_again() {
        let mut entry = Entry::default();
        for text in ["to 1 h", "to 2 h", "to 2 h"] {
            entry.insert(text);
            assert_eq!(entry.take(), text);
        }
        entry.insert("st");
        entry.older();
        assert_eq!(entry.text(), "to 2 h");
        entry.older();
        entry.older();
        assert_eq!(entry.text(), "to 1 h");
        entry.newer();
        entry.newer();
        assert_eq!(entry.text(), "st");
        entry.newer();
        assert_eq!(entry.text(), "st");
    }
}
