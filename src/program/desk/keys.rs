//! The keys, in one table: the desk acts by it, and the list of keys is made from it.

use crate::program::terminal::{KeyCode, KeyEvent, KeyModifiers};

/// Where keys go.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Focus {
    /// The table of the view.
    Table,
    /// The plan line.
    Plan,
    /// The entry line.
    Entry,
}

/// What a key does.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Action {
    /// Close the desk.
    Leave,
    /// Step back in time.
    StepBack,
    /// Step forward in time.
    StepForward,
    /// Go to the end of a phase before the present moment.
    PhaseBack,
    /// Go to the end of a phase after the present moment.
    PhaseForward,
    /// Start or stop running.
    StartStop,
    /// Choose the row above.
    RowUp,
    /// Choose the row below.
    RowDown,
    /// Move a screen up.
    ScreenUp,
    /// Move a screen down.
    ScreenDown,
    /// Choose the first row, the fore end.
    First,
    /// Choose the last row, the aft end.
    Last,
    /// Move the focus on.
    FocusOn,
    /// Move the focus back.
    FocusBack,
    /// Take the message away.
    Quiet,
    /// Say what Enter is for.
    Hint,
    /// Do the sentence.
    Do,
    /// Leave the entry.
    LeaveEntry,
    /// Take the completion over, or move on when nothing is typed.
    Complete,
    /// Move the cursor of the entry left.
    CursorLeft,
    /// Move it right.
    CursorRight,
    /// Move it to the beginning.
    CursorStart,
    /// Move it to the end.
    CursorEnd,
    /// Take the sign before the cursor away.
    EraseBack,
    /// Take the sign after the cursor away.
    EraseForward,
    /// An earlier sentence.
    Older,
    /// A later sentence.
    Newer,
}

/// One key: its name, and what it does on the table, on the plan line and in the entry.
pub struct Binding {
    code: KeyCode,
    modifiers: KeyModifiers,
    /// Its name.
    pub name: &'static str,
    /// What it does, by focus.
    actions: [Option<Action>; 3],
    /// The same in words.
    pub does: &'static str,
}

const fn key(
    code: KeyCode,
    name: &'static str,
    actions: [Option<Action>; 3],
    does: &'static str,
) -> Binding {
    Binding { code, modifiers: KeyModifiers::NONE, name, actions, does }
}

const fn everywhere(action: Action) -> [Option<Action>; 3] {
    [Some(action); 3]
}

const fn or_in_entry(action: Action, in_entry: Action) -> [Option<Action>; 3] {
    [Some(action), Some(action), Some(in_entry)]
}

const fn in_entry(action: Action) -> [Option<Action>; 3] {
    [None, None, Some(action)]
}

/// All keys that are bound; digits choose a view and come from the table of views.
pub static BINDINGS: [Binding; 16] = [
    key(
        KeyCode::Left,
        "Left",
        [Some(Action::StepBack), Some(Action::PhaseBack), Some(Action::CursorLeft)],
        "step back; on the plan line: to the phase end before",
    ),
    key(
        KeyCode::Right,
        "Right",
        [Some(Action::StepForward), Some(Action::PhaseForward), Some(Action::CursorRight)],
        "step forward; on the plan line: to the next phase end",
    ),
    key(
        KeyCode::Up,
        "Up",
        or_in_entry(Action::RowUp, Action::Older),
        "choose the next node fore; in the entry: an earlier sentence",
    ),
    key(
        KeyCode::Down,
        "Down",
        or_in_entry(Action::RowDown, Action::Newer),
        "choose the next node aft; in the entry: a later sentence",
    ),
    key(KeyCode::PageUp, "Page Up", everywhere(Action::ScreenUp), "a screen fore"),
    key(KeyCode::PageDown, "Page Down", everywhere(Action::ScreenDown), "a screen aft"),
    key(
        KeyCode::Home,
        "Home",
        or_in_entry(Action::First, Action::CursorStart),
        "the fore end; in the entry: the beginning",
    ),
    key(
        KeyCode::End,
        "End",
        or_in_entry(Action::Last, Action::CursorEnd),
        "the aft end; in the entry: the end",
    ),
    key(
        KeyCode::Tab,
        "Tab",
        or_in_entry(Action::FocusOn, Action::Complete),
        "table, plan line, entry in turn; while typing: take the completion",
    ),
    key(
        KeyCode::BackTab,
        "Shift-Tab",
        everywhere(Action::FocusBack),
        "the same the other way round",
    ),
    key(
        KeyCode::Enter,
        "Enter",
        [Some(Action::Hint), Some(Action::StartStop), Some(Action::Do)],
        "on the plan line: start and stop running; in the entry: do the sentence",
    ),
    key(
        KeyCode::Esc,
        "Esc",
        or_in_entry(Action::Quiet, Action::LeaveEntry),
        "leave the entry; take the message away",
    ),
    key(
        KeyCode::Backspace,
        "Backspace",
        in_entry(Action::EraseBack),
        "in the entry: take the sign before the cursor away",
    ),
    key(
        KeyCode::Delete,
        "Delete",
        in_entry(Action::EraseForward),
        "in the entry: take the sign at the cursor away",
    ),
    Binding {
        code: KeyCode::Char('c'),
        modifiers: KeyModifiers::CONTROL,
        name: "Ctrl-C",
        actions: everywhere(Action::Leave),
        does: "leave the desk; a recording is closed",
    },
    Binding {
        code: KeyCode::Char('z'),
        modifiers: KeyModifiers::CONTROL,
        name: "Ctrl-Z",
        // The terminal acts on it before the desk could.
        actions: [None; 3],
        does: "stop the program as any other; the shell continues it",
    },
];

/// What a key does where the focus is.
pub fn action(key: KeyEvent, focus: Focus) -> Option<Action> {
    let held = key.modifiers & (KeyModifiers::CONTROL | KeyModifiers::ALT);
    let binding =
        BINDINGS.iter().find(|binding| binding.code == key.code && binding.modifiers == held)?;
    binding.actions[focus as usize]
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn no_letter_is_a_command() {
        for letter in ('!'..='~').chain("äß漢".chars()) {
            for modifiers in [KeyModifiers::NONE, KeyModifiers::SHIFT] {
                let key = KeyEvent::new(KeyCode::Char(letter), modifiers);
                for focus in [Focus::Table, Focus::Plan, Focus::Entry] {
                    assert_eq!(action(key, focus), None, "{letter}");
                }
            }
        }
    }

    #[test]
    fn every_key_stands_once_in_the_table() {
        for (index, binding) in BINDINGS.iter().enumerate() {
            let same = |other: &Binding| {
                other.code == binding.code && other.modifiers == binding.modifiers
            };
            assert!(!BINDINGS[..index].iter().any(same), "{}", binding.name);
        }
    }
}
