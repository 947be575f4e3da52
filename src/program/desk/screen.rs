//! The whole screen: a function of the desk and an area into a buffer.

use clockspar::table::width::wrapped;
use ratatui::buffer::Buffer;
use ratatui::layout::{Position, Rect};
use ratatui::style::Style;
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
    let cut = table_pane::draw(desk, &geometry, &mut painter);
    if let Some(draw) = desk.view().beside {
        draw(desk, geometry.beside, &mut painter);
    }
    if let Some(note) = desk.note() {
        draw_note(&note, geometry.note, &mut painter);
    }
    chart::draw(desk, &geometry, &mut painter);
    let message = message(desk).or_else(|| Some((cut?, QUIET)));
    draw_message(desk, message.as_ref(), geometry.entry, area, &mut painter);
    draw_entry(desk, message.as_ref(), geometry.entry, &mut painter)
}

/// What has to stand under a table.
fn draw_note(text: &str, area: Rect, painter: &mut Painter<'_>) {
    let lines = wrapped(&painter.signs(text), Some(usize::from(area.width)));
    for (place, line) in lines.iter().take(usize::from(area.height)).enumerate() {
        painter.put(area, area.x, area.y + place as u16, line, QUIET);
    }
}

/// One line of text: what is being typed, else what was said, else how things stand.
fn draw_one_line(desk: &Desk, line: Rect, painter: &mut Painter<'_>) -> Option<Position> {
    let is_typing = desk.focus == Focus::Entry && !desk.entry.text().is_empty();
    match message(desk).filter(|_| !is_typing) {
        Some((text, style)) => {
            painter.put(line, line.x, line.y, &text, style);
        }
        None if desk.focus == Focus::Entry => return draw_entry(desk, None, line, painter),
        None => head::draw_one_line(desk, line, painter),
    }
    None
}

/// What there is to say, and how.
fn message(desk: &Desk) -> Option<(String, Style)> {
    match (&desk.question, &desk.notice) {
        (_, Some(notice)) if notice.refusal.is_some() => Some((notice.text(), REFUSED)),
        (_, Some(notice)) => Some((notice.text(), PLAIN)),
        (Some(question), None) => Some((question.text.clone(), ASKED)),
        (None, None) => None,
    }
}

/// Whether a message has room in the entry line itself.
fn fits_entry(desk: &Desk, text: &str, line: Rect) -> bool {
    desk.entry.text().is_empty() && width_of(PROMPT) + 1 + width_of(text) <= line.width
}

/// A message that has no room in the entry line lies over the rows above it.
fn draw_message(
    desk: &Desk,
    message: Option<&(String, Style)>,
    entry: Rect,
    area: Rect,
    painter: &mut Painter<'_>,
) {
    let Some((text, style)) = message else { return };
    let text = painter.signs(text);
    if fits_entry(desk, &text, entry) {
        return;
    }
    let lines = wrapped(&text, Some(usize::from(entry.width)));
    let rows = u16::try_from(lines.len()).unwrap_or(u16::MAX).min(MOST_MESSAGE_ROWS);
    let top = entry.y.saturating_sub(rows).max(area.y);
    for (place, text) in lines.iter().take(usize::from(rows)).enumerate() {
        let row = Rect { y: top + place as u16, height: 1, ..entry };
        let is_cut = place + 1 == usize::from(rows) && lines.len() > usize::from(rows);
        let mark = if is_cut { painter.glyphs.ellipsis } else { "" };
        painter.put(row, row.x, row.y, &" ".repeat(usize::from(row.width)), PLAIN);
        painter.put(row, row.x, row.y, &format!("{text}{mark}"), *style);
    }
}

fn hint(desk: &Desk) -> &'static str {
    match desk.focus {
        Focus::Table => "Left, Right step; 0 lists keys and sentences",
        Focus::Plan => "Enter starts and stops; Left, Right to phase ends",
        Focus::Entry => "Enter does the sentence; Esc leaves the entry",
    }
}

/// The entry: the text, what would complete it, and what else could stand there.
fn draw_entry(
    desk: &Desk,
    message: Option<&(String, Style)>,
    line: Rect,
    painter: &mut Painter<'_>,
) -> Option<Position> {
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
    if desk.entry.text().is_empty() {
        let (text, style) = match message {
            Some((text, style)) => (text.as_str(), *style),
            None => (hint(desk), QUIET),
        };
        if fits_entry(desk, &painter.signs(text), line) {
            painter.put(line, start + 1, line.y, text, style);
        }
    } else if is_entered {
        if let Some(rest) = &desk.entry.completion.rest {
            x = painter.put(room, x, line.y, rest, QUIET);
        }
        let choices = &desk.entry.completion.choices;
        if choices.len() > 1 {
            let more = if desk.entry.completion.has_more { "  …" } else { "" };
            let list = format!("{}{more}", choices.join("  "));
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
