//! The whole screen: a function of the desk and an area into a buffer.

use clockspar::table::width::wrapped;
use ratatui::buffer::Buffer;
use ratatui::layout::{Position, Rect};
use unicode_segmentation::UnicodeSegmentation;

use super::geometry::{Extent, Geometry};
use super::keys::Focus;
use super::painter::{ASKED, CHOSEN, PLAIN, Painter, QUIET, REFUSED, width_of};
use super::state::Desk;
use super::{chart, head, table_pane};

/// What stands before the entry.
const PROMPT: &str = "do: ";
/// The most rows a message takes.
const MOST_MESSAGE_ROWS: u16 = 4;

/// Draws the desk; returns where the cursor stands, when it is in the entry.
pub fn view(desk: &Desk, area: Rect, buffer: &mut Buffer) -> Option<Position> {
    let area = area.intersection(buffer.area);
    if area.is_empty() {
        return None;
    }
    let geometry = Geometry::within(area, desk);
    let mut painter = Painter::new(buffer, desk.glyphs);
    if geometry.extent == Extent::OneLine {
        return draw_one_line(desk, geometry.head, &mut painter);
    }
    head::draw(desk, &geometry, &mut painter);
    table_pane::draw(desk, &geometry, &mut painter);
    chart::draw(desk, &geometry, &mut painter);
    draw_message(desk, geometry.message, area, &mut painter);
    draw_entry(desk, geometry.entry, &mut painter)
}

/// One line of text: what is being typed, else what was said, else how things stand.
fn draw_one_line(desk: &Desk, line: Rect, painter: &mut Painter<'_>) -> Option<Position> {
    if desk.focus == Focus::Entry {
        return draw_entry(desk, line, painter);
    }
    match &desk.notice {
        Some(notice) => {
            painter.put(line, line.x, line.y, &notice.text(), PLAIN);
        }
        None => head::draw_one_line(desk, line, painter),
    }
    None
}

/// The message, in as many rows as it needs; further ones lie over the plan.
fn draw_message(desk: &Desk, line: Rect, area: Rect, painter: &mut Painter<'_>) {
    let (text, style) = match (&desk.question, &desk.notice) {
        (Some(question), None) => (question.text.clone(), ASKED),
        (_, Some(notice)) if notice.refusal.is_some() => (notice.text(), REFUSED),
        (_, Some(notice)) => (notice.text(), PLAIN),
        (None, None) => {
            painter.put(line, line.x, line.y, hint(desk), QUIET);
            return;
        }
    };
    let text = painter.signs(&text);
    let lines = wrapped(&text, Some(usize::from(line.width)));
    let rows = u16::try_from(lines.len()).unwrap_or(u16::MAX).min(MOST_MESSAGE_ROWS);
    let top = (line.y + 1).saturating_sub(rows).max(area.y);
    for (place, text) in lines.iter().take(usize::from(rows)).enumerate() {
        let y = top + place as u16;
        let row = Rect { y, height: 1, ..line };
        let is_last = place + 1 == usize::from(rows) && lines.len() > usize::from(rows);
        let mark = if is_last { painter.glyphs.ellipsis } else { "" };
        painter.put(row, line.x, y, &blank(line.width), PLAIN);
        painter.put(row, line.x, y, &format!("{text}{mark}"), style);
    }
}

fn blank(width: u16) -> String {
    " ".repeat(usize::from(width))
}

fn hint(desk: &Desk) -> &'static str {
    match desk.focus {
        Focus::Table => "Left and Right step; 0 lists keys and sentences; Ctrl-C leaves",
        Focus::Plan => "Enter starts and stops running; Left and Right go to phase ends",
        Focus::Entry => "Enter does the sentence; Esc leaves the entry; Tab completes",
    }
}

/// The entry: the text, what would complete it, and what else could stand there.
fn draw_entry(desk: &Desk, line: Rect, painter: &mut Painter<'_>) -> Option<Position> {
    if line.is_empty() {
        return None;
    }
    let is_entered = desk.focus == Focus::Entry;
    let prompt = if is_entered { CHOSEN } else { QUIET };
    painter.put(line, line.x, line.y, PROMPT.trim_end(), prompt);
    let start = line.x + width_of(PROMPT).min(line.width);
    let room = Rect { x: start, width: line.right() - start, ..line };
    // The cursor stays in sight: what does not fit is cut at the left.
    let before = tail(desk.entry.before_cursor(), room.width.saturating_sub(1));
    let after = &desk.entry.text()[desk.entry.before_cursor().len()..];
    let cursor = painter.put(room, start, line.y, before, PLAIN);
    let mut x = painter.put(room, cursor, line.y, after, PLAIN);
    if is_entered {
        if let Some(rest) = &desk.entry.completion.rest {
            x = painter.put(room, x, line.y, rest, QUIET);
        }
        let choices = &desk.entry.completion.choices;
        if choices.len() > 1 {
            let list = choices.join("  ");
            let columns = width_of(&list);
            if x.saturating_add(3 + columns) <= line.right() {
                painter.put_right(line, line.y, &list, QUIET);
            }
        }
    }
    let is_inside = cursor < line.right();
    (is_entered && is_inside).then_some(Position { x: cursor, y: line.y })
}

/// The end of a text that takes at most so many columns.
fn tail(text: &str, width: u16) -> &str {
    let (mut start, mut taken) = (text.len(), 0_u16);
    for (at, cluster) in text.grapheme_indices(true).rev() {
        taken = taken.saturating_add(width_of(cluster));
        if taken > width {
            break;
        }
        start = at;
    }
    &text[start..]
}
