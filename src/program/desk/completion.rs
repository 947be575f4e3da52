//! What could follow what has been typed.

use clockspar::layout::Layout;

use super::sentences::{FORMS, Form, Part, Slot, place_of_word};

/// The most choices that are listed.
const MOST_CHOICES: usize = 8;

/// What would complete the text of the entry.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct Completion {
    /// What Tab adds; `None` when there is nothing to add.
    pub rest: Option<String>,
    /// The words that could stand where one is being typed.
    pub choices: Vec<String>,
    /// Whether there are more than are listed.
    pub has_more: bool,
}

/// What could follow a text.
pub fn complete(text: &str, words: Option<&[&'static str]>, layout: &Layout) -> Completion {
    let text = text.trim_start_matches(' ');
    let mut found = Found { completion: Completion::default() };
    if text.is_empty() {
        return found.completion;
    }
    if let Some(words) = words {
        for word in words {
            found.offer(text, word, false);
        }
        return found.completion;
    }
    for form in FORMS {
        found.follow(form, text, layout);
    }
    found.completion
}

struct Found {
    completion: Completion,
}

impl Found {
    /// Offers a word where its beginning has been typed.
    fn offer(&mut self, typed: &str, word: &str, more_follows: bool) {
        let Some(rest) = word.strip_prefix(typed) else { return };
        let choices = &mut self.completion.choices;
        if choices.iter().any(|choice| choice == word) {
            return;
        }
        if choices.len() < MOST_CHOICES {
            choices.push(word.to_owned());
        } else {
            self.completion.has_more = true;
        }
        let blank = if more_follows { " " } else { "" };
        // A word that stands there whole may still be the beginning of a longer one.
        if self.completion.rest.is_none() && rest.len() + blank.len() > 0 {
            self.completion.rest = Some(format!("{rest}{blank}"));
        }
    }

    /// Goes along a form as far as the text does.
    fn follow(&mut self, form: &Form, text: &str, layout: &Layout) {
        let mut rest = text;
        for (index, part) in form.parts.iter().enumerate() {
            let more_follows = index + 1 < form.parts.len();
            match part {
                Part::Word(word) => match rest.strip_prefix(word) {
                    Some(after) if after.starts_with(' ') => rest = after.trim_start(),
                    _ => return self.offer(rest, word, more_follows),
                },
                Part::Slot(slot) => {
                    let Some(Part::Word(next)) = form.parts.get(index + 1) else {
                        return self.fill(*slot, rest, layout);
                    };
                    match place_of_word(rest, next, *slot) {
                        Some(place) if rest[place + next.len()..].starts_with(' ') => {
                            rest = &rest[place..];
                        }
                        _ => {
                            self.fill(*slot, rest, layout);
                            return self.next_word(*slot, rest, next, layout);
                        }
                    }
                }
            }
        }
    }

    /// Offers the word that comes after a slot, once the slot is filled.
    fn next_word(&mut self, slot: Slot, text: &str, word: &str, layout: &Layout) {
        let Some((inside, begun)) = text.rsplit_once(' ') else { return };
        let inside = inside.trim_end();
        let is_filled = match slot {
            Slot::Node => layout.nodes.iter().any(|node| node.name == inside),
            // A number alone may be waiting for its unit.
            _ => inside.contains(' ') || inside.ends_with(|sign: char| sign.is_alphabetic()),
        };
        if is_filled && !inside.is_empty() {
            self.offer(begun, word, true);
        }
    }

    /// Offers what may stand in a slot.
    fn fill(&mut self, slot: Slot, typed: &str, layout: &Layout) {
        match slot {
            Slot::Node => {
                let fitting = layout.nodes.iter().filter(|node| node.name.starts_with(typed));
                for node in fitting.take(MOST_CHOICES + 1) {
                    self.offer(typed, &node.name, false);
                }
            }
            Slot::Moment if !typed.is_empty() && "end".starts_with(typed) => {
                self.offer(typed, "end", false);
            }
            _ => {}
        }
        let number_end = typed.rfind(|sign: char| sign.is_ascii_digit() || sign == '.');
        let Some(end) = number_end else { return };
        // A unit is offered once a blank says that the number is complete.
        if let Some(unit) = typed[end + 1..].strip_prefix(' ')
            && !unit.contains(' ')
        {
            for known in slot.units() {
                self.offer(unit, known, false);
            }
        }
    }
}
