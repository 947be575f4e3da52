//! The desk without a terminal: messages in, effects and buffers out.

mod acting;
mod anything;
mod replays;
mod screens;

use std::sync::Arc;

use clockspar::layout;
use clockspar::run::Run;
use ratatui::buffer::Buffer;
use ratatui::layout::Rect;

use super::message::{Effect, Message};
use super::screen::view;
use super::state::Desk;
use crate::program::files::BUILT_IN_TEXT;
use crate::program::terminal::{Glyphs, KeyCode, KeyEvent, KeyModifiers, UNICODE};

/// A desk on a layout.
pub(super) fn desk_on(text: &str, glyphs: &'static Glyphs) -> Desk {
    let none = |_: &str| Err("no file".to_owned());
    let layout = layout::read("test layout", text, &none).expect("a good layout");
    Desk::new(Run::new(Arc::new(layout)).expect("a line that can be flown"), glyphs)
}

/// A desk on the built-in layout.
pub(super) fn desk() -> Desk {
    desk_on(BUILT_IN_TEXT, &UNICODE)
}

/// Presses a key.
pub(super) fn press(desk: &mut Desk, code: KeyCode) -> Vec<Effect> {
    desk.update(Message::Key(KeyEvent::new(code, KeyModifiers::NONE)))
}

/// Types a sentence and does it.
pub(super) fn say(desk: &mut Desk, sentence: &str) -> Vec<Effect> {
    for sign in sentence.chars() {
        press(desk, KeyCode::Char(sign));
    }
    press(desk, KeyCode::Enter)
}

/// Draws the desk; one line of text a row.
pub(super) fn drawn(desk: &Desk, width: u16, height: u16) -> String {
    text_of(&buffer_of(desk, width, height))
}

/// Draws the desk into a buffer.
pub(super) fn buffer_of(desk: &Desk, width: u16, height: u16) -> Buffer {
    let area = Rect::new(0, 0, width, height);
    let mut buffer = Buffer::empty(area);
    view(desk, area, &mut buffer);
    buffer
}

fn text_of(buffer: &Buffer) -> String {
    let area = buffer.area;
    let mut text = String::new();
    for y in area.top()..area.bottom() {
        let mut line = String::new();
        let mut skipped = 0;
        for x in area.left()..area.right() {
            if skipped > 0 {
                skipped -= 1;
                continue;
            }
            let symbol = buffer[(x, y)].symbol();
            skipped = clockspar::table::width::columns_of(symbol).saturating_sub(1);
            line.push_str(symbol);
        }
        text.push_str(line.trim_end());
        text.push('\n');
    }
    text
}
