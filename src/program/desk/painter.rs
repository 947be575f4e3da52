//! Putting text into a buffer, never outside it.

use clockspar::table::width::{columns_of, in_ascii, shortened};
use ratatui::buffer::Buffer;
use ratatui::layout::Rect;
use ratatui::style::{Color, Modifier, Style};

use crate::program::terminal::Glyphs;

/// Puts text into a buffer.
pub struct Painter<'b> {
    buffer: &'b mut Buffer,
    /// The marks to draw with.
    pub glyphs: &'static Glyphs,
}

impl<'b> Painter<'b> {
    /// A painter for a buffer.
    pub fn new(buffer: &'b mut Buffer, glyphs: &'static Glyphs) -> Painter<'b> {
        Painter { buffer, glyphs }
    }

    /// A text of ours in the signs that may be used.
    pub fn signs(&self, text: &str) -> String {
        if self.glyphs.ascii_only { in_ascii(text).replace('φ', "phi") } else { text.to_owned() }
    }

    /// Puts a text at a place of an area, cut at the area's right edge, where a mark says
    /// so; returns the column after it.
    pub fn put(&mut self, area: Rect, x: u16, y: u16, text: &str, style: Style) -> u16 {
        let area = area.intersection(self.buffer.area);
        if y < area.top() || y >= area.bottom() || x < area.left() || x >= area.right() {
            return x;
        }
        let room = usize::from(area.right() - x);
        let text = shortened(&self.signs(text), room, self.glyphs.ellipsis);
        let (after, _) = self.buffer.set_stringn(x, y, text, room, style);
        after
    }

    /// Puts a text so that it ends at the right edge of an area.
    pub fn put_right(&mut self, area: Rect, y: u16, text: &str, style: Style) -> u16 {
        let columns = u16::try_from(columns_of(&self.signs(text))).unwrap_or(u16::MAX);
        let x = area.right().saturating_sub(columns).max(area.x);
        self.put(area, x, y, text, style);
        x
    }

    /// Changes the style of some cells.
    pub fn restyle(&mut self, area: Rect, style: Style) {
        let area = area.intersection(self.buffer.area);
        self.buffer.set_style(area, style);
    }
}

/// Columns a text takes.
pub fn width_of(text: &str) -> u16 {
    u16::try_from(columns_of(text)).unwrap_or(u16::MAX)
}

/// Plain text.
pub const PLAIN: Style = Style::new();
/// What stands beside the numbers.
pub const QUIET: Style = Style::new().add_modifier(Modifier::DIM);
/// What stands out.
pub const STRONG: Style = Style::new().add_modifier(Modifier::BOLD);
/// The chosen row, the present view.
pub const CHOSEN: Style = Style::new().add_modifier(Modifier::REVERSED);
/// Something refused.
pub const REFUSED: Style = Style::new().fg(Color::Red).add_modifier(Modifier::BOLD);
/// A question.
pub const ASKED: Style = Style::new().fg(Color::Yellow).add_modifier(Modifier::BOLD);

/// The colour of a state; the word itself says everything.
pub fn state_style(word: &str) -> Style {
    let colour = match word {
        "closed" | "holding" | "kept" => Color::Green,
        "ramping" | "slack" | "stale" | "growing" => Color::Yellow,
        "coasting" | "standing" => Color::Cyan,
        "what-if" => Color::Magenta,
        "recording" | "failed" | "damaged" | "cut" | "broken" | "over" => Color::Red,
        _ if word.starts_with("running") => Color::Blue,
        _ => return PLAIN,
    };
    Style::new().fg(colour)
}
