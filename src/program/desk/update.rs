//! How the desk changes: by messages alone, without touching the world.

use std::time::Duration;

use clockspar::model::array_time::ArrayTime;

use crate::program::terminal::{KeyCode, KeyEvent, KeyModifiers};

use super::completion::{Completion, complete};
use super::keys::{Action, Focus, action};
use super::message::{Effect, Message, Notice, Wanted};
use super::sentences;
use super::state::Desk;
use super::views::VIEWS;

/// The answers to a question.
pub const ANSWERS: [&str; 2] = ["yes", "no"];

impl Desk {
    /// Takes in what has happened; returns what the desk asks for.
    pub fn update(&mut self, message: Message) -> Vec<Effect> {
        let mut effects = Vec::new();
        match message {
            Message::Key(key) => self.press(key, &mut effects),
            Message::Paste(text) => self.paste(&text),
            Message::Sized { width, height } => self.size = (width, height),
            Message::Resized => self.look_again(&mut effects),
            Message::Elapsed(elapsed) => self.run_on(elapsed, &mut effects),
            Message::RecordingOpened { path } => {
                if let Some(recording) = &mut self.recording {
                    let said = match self.notice.take() {
                        Some(Notice { what, refusal: None }) => format!("{what}; "),
                        _ => String::new(),
                    };
                    self.notice = Some(Notice::said(format!("{said}recording to {path}")));
                    recording.path = path;
                }
            }
            Message::RecordingClosed { made } => {
                if !made.is_whole {
                    self.failed = Some(made.path.clone());
                }
                self.made.push(made);
            }
            Message::RecordingFailed(notice) => {
                self.recording = None;
                self.notice = Some(notice);
            }
            Message::Told(notice) => self.notice = Some(notice),
            Message::Read(reading) => self.take_reading(*reading),
            Message::Leaving => {
                self.stop_running(&mut effects);
                self.close_recording(&mut effects);
            }
        }
        self.keep_row_in_table();
        effects
    }

    /// What a released node passes changes with the moment, and `undo` takes an event away.
    fn keep_row_in_table(&mut self) {
        let may_shrink = self.reach_of.is_some() || !self.view().nodes;
        if may_shrink && self.cursor().row > 0 {
            let last = self.rows().saturating_sub(1);
            let cursor = self.cursor_mut();
            cursor.row = cursor.row.min(last);
        }
    }

    fn press(&mut self, key: KeyEvent, effects: &mut Vec<Effect>) {
        if self.question.is_some() {
            self.focus = Focus::Entry;
        }
        if let Some(action) = action(key, self.focus) {
            return self.act(action, effects);
        }
        let KeyCode::Char(sign) = key.code else { return };
        if key.modifiers.intersects(KeyModifiers::CONTROL | KeyModifiers::ALT) {
            return;
        }
        let view = VIEWS.iter().position(|view| view.digit == sign);
        // No sentence begins with a digit.
        if let Some(place) = view.filter(|_| self.focus != Focus::Entry || self.is_at_rest()) {
            self.choose_view(place);
        } else if self.focus == Focus::Entry {
            self.type_text(sign.encode_utf8(&mut [0; 4]));
        } else if !sign.is_whitespace() {
            self.focus_on(Focus::Entry);
            self.type_text(sign.encode_utf8(&mut [0; 4]));
        }
    }

    /// Whether the entry has nothing in it and waits for no answer.
    fn is_at_rest(&self) -> bool {
        self.entry.text().is_empty() && self.question.is_none()
    }

    fn paste(&mut self, text: &str) {
        self.focus_on(Focus::Entry);
        self.focus = Focus::Entry;
        self.type_text(text);
    }

    fn type_text(&mut self, text: &str) {
        if self.question.is_none() {
            self.notice = None;
        }
        self.entry.insert(text);
        self.find_completion();
    }

    fn find_completion(&mut self) {
        let words = self.question.as_ref().map(|_| &ANSWERS[..]);
        self.entry.completion = if self.entry.is_at_end() {
            complete(self.entry.text(), words, self.run.layout())
        } else {
            Completion::default()
        };
    }

    fn choose_view(&mut self, place: usize) {
        let view = VIEWS[place];
        if view.table.is_none() {
            self.notice = Some(Notice::said(format!("the view `{}` is not there yet", view.name)));
            return;
        }
        self.notice = None;
        self.view = place;
    }

    /// Moves the focus, unless a question waits for its answer in the entry.
    fn focus_on(&mut self, focus: Focus) {
        if self.question.is_some() {
            return;
        }
        self.notice = None;
        if self.focus != Focus::Entry {
            self.focus_before = self.focus;
        }
        self.focus = focus;
    }

    fn act(&mut self, action: Action, effects: &mut Vec<Effect>) {
        match action {
            Action::Leave => effects.push(Effect::Leave),
            Action::StepBack => self.step_by_key(false, effects),
            Action::StepForward => self.step_by_key(true, effects),
            Action::PhaseBack => self.jump_to_phase_end(false, effects),
            Action::PhaseForward => self.jump_to_phase_end(true, effects),
            Action::StartStop => self.start_or_stop(effects),
            Action::RowUp => self.choose_row(|row, _| row.saturating_sub(1)),
            Action::RowDown => self.choose_row(|row, _| row.saturating_add(1)),
            Action::ScreenUp => self.choose_row(|row, screen| row.saturating_sub(screen)),
            Action::ScreenDown => self.choose_row(|row, screen| row.saturating_add(screen)),
            Action::First => self.choose_row(|_, _| 0),
            Action::Last => self.choose_row(|_, _| usize::MAX),
            Action::FocusOn => self.focus_on(match self.focus {
                Focus::Table => Focus::Plan,
                Focus::Plan => Focus::Entry,
                Focus::Entry => Focus::Table,
            }),
            Action::FocusBack => self.focus_on(match self.focus {
                Focus::Table => Focus::Entry,
                Focus::Plan => Focus::Table,
                Focus::Entry => Focus::Plan,
            }),
            Action::Quiet => self.notice = None,
            Action::Hint => {
                self.notice = Some(Notice::said(
                    "Enter starts and stops running on the plan line, and does the sentence \
                     in the entry; Tab moves between them",
                ));
            }
            Action::Do => self.do_entry(effects),
            Action::LeaveEntry => self.leave_entry(),
            Action::Complete => {
                if self.entry.text().is_empty() {
                    self.act(Action::FocusOn, effects);
                } else if self.entry.complete() {
                    self.find_completion();
                }
            }
            Action::CursorLeft if self.is_at_rest() => self.step_by_key(false, effects),
            Action::CursorRight if self.is_at_rest() => self.step_by_key(true, effects),
            Action::CursorLeft => self.edit(|entry| entry.left()),
            Action::CursorRight => self.edit(|entry| entry.right()),
            Action::CursorStart => self.edit(|entry| entry.start()),
            Action::CursorEnd => self.edit(|entry| entry.end()),
            Action::EraseBack => self.edit(|entry| entry.erase_back()),
            Action::EraseForward => self.edit(|entry| entry.erase_forward()),
            Action::Older => self.edit(|entry| entry.older()),
            Action::Newer => self.edit(|entry| entry.newer()),
        }
    }

    fn edit(&mut self, change: impl FnOnce(&mut super::entry::Entry)) {
        change(&mut self.entry);
        self.find_completion();
    }

    fn leave_entry(&mut self) {
        self.entry.clear();
        self.focus = self.focus_before;
        self.notice = None;
        if self.question.take().is_some() {
            self.notice = Some(Notice::said("nothing has been changed"));
        }
    }

    fn choose_row(&mut self, choose: impl FnOnce(usize, usize) -> usize) {
        let (rows, visible) = (self.rows(), self.visible_rows());
        let cursor = self.cursor_mut();
        cursor.top = cursor.window(rows, visible);
        cursor.row = choose(cursor.row, visible.max(1)).min(rows.saturating_sub(1));
        cursor.top = cursor.window(rows, visible);
    }

    fn do_entry(&mut self, effects: &mut Vec<Effect>) {
        let text = self.entry.take();
        let text = text.trim();
        if self.question.is_some() {
            return self.answer(text, effects);
        }
        if text.is_empty() {
            self.focus = self.focus_before;
            return;
        }
        self.notice = None;
        match sentences::read(text, self.run.layout()) {
            Ok(sentence) => self.perform(sentence, effects),
            Err(notice) => self.notice = Some(notice),
        }
        // What was refused can be brought back by Up and mended; after anything else the
        // keys step again.
        let is_refused = self.notice.as_ref().is_some_and(|notice| notice.refusal.is_some());
        if !is_refused && self.question.is_none() {
            self.focus = self.focus_before;
        }
    }

    fn answer(&mut self, text: &str, effects: &mut Vec<Effect>) {
        match text {
            "yes" => {
                let question = self.question.take();
                self.notice = None;
                if let Some(question) = question {
                    self.perform_for_certain(question.then, effects);
                }
                self.focus = self.focus_before;
            }
            "no" => {
                self.question = None;
                self.focus = self.focus_before;
                self.notice = Some(Notice::said("nothing has been changed"));
            }
            _ => {
                self.notice = Some(Notice::refused(
                    format!("`{text}` is no answer"),
                    "the question is answered by `yes` or `no`",
                    "type one of them, or leave by Esc",
                ));
            }
        }
    }

    fn step_by_key(&mut self, forward: bool, effects: &mut Vec<Effect>) {
        self.notice = None;
        self.stop_running(effects);
        if self.replay.is_some() {
            let wanted = if forward { Wanted::After(self.at) } else { Wanted::Before(self.at) };
            return self.read(wanted, effects);
        }
        match self.step.from(&self.run, self.at, forward) {
            Ok(at) => self.go_to(at, effects),
            Err(notice) => self.notice = Some(notice),
        }
    }

    fn jump_to_phase_end(&mut self, forward: bool, effects: &mut Vec<Effect>) {
        self.notice = None;
        self.stop_running(effects);
        let found =
            if forward { self.phase_end_after(self.at) } else { self.phase_end_before(self.at) };
        match found {
            Some(at) if self.replay.is_some() => {
                // The frames of a recording need not stand at the ends of phases.
                self.read(Wanted::At(at), effects);
            }
            Some(at) => self.go_to(at, effects),
            None => {
                let side = if forward { "after" } else { "before" };
                self.notice =
                    Some(Notice::said(format!("no phase ends {side} the present moment")));
            }
        }
    }

    /// Goes to a moment the run can be asked for; says why not otherwise.
    pub(super) fn go_to(&mut self, at: ArrayTime, effects: &mut Vec<Effect>) {
        if self.replay.is_some() {
            return self.read(Wanted::At(at), effects);
        }
        match self.run.check_moment(at) {
            Ok(()) => {
                self.reach(at, effects);
                self.at = at;
            }
            Err(fault) => self.notice = Some(fault.into()),
        }
    }

    fn start_or_stop(&mut self, effects: &mut Vec<Effect>) {
        self.notice = None;
        if self.running.is_some() {
            self.stop_running(effects);
        } else {
            self.start_running();
        }
    }

    /// Wall time has gone by.
    fn run_on(&mut self, elapsed: Duration, effects: &mut Vec<Effect>) {
        if self.running.is_some() {
            self.run_for(elapsed, effects);
        }
    }
}
