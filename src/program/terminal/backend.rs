//! Draws frames: one write for a frame that changed, none for a frame that did not.
//!
//! The drawing library compares each frame with the one before and hands over the
//! cells that differ. This file turns them into bytes, gathers the bytes of a frame
//! and sends them in one piece, so that a slow line never shows half of it.

use std::io::{self, Write};

use ratatui::backend::{Backend, ClearType, WindowSize};
use ratatui::buffer::Cell;
use ratatui::layout::{Position, Size};
use ratatui::style::Modifier;
use unicode_width::UnicodeWidthStr;

use super::colour::{Depth, Paint};

/// Asks the terminal to hold back what follows until the frame is whole; a
/// terminal that does not know the mode ignores it.
const BEGIN: &[u8] = b"\x1b[?2026h";
/// Ends what [`BEGIN`] began.
const END: &[u8] = b"\x1b[?2026l";
const HIDE_CURSOR: &[u8] = b"\x1b[?25l";
const SHOW_CURSOR: &[u8] = b"\x1b[?25h";
const PLAIN: &[u8] = b"\x1b[0m";
const CLEAR: &[u8; 4] = b"\x1b[2J";

/// The text attributes that are drawn, with the code of each.
///
/// Italic, blinking, hidden and struck text is drawn plain: some terminals show
/// italic as reversed, which is the mark of the selected row here.
const ATTRIBUTES: [(Modifier, u8); 4] =
    [(Modifier::BOLD, 1), (Modifier::DIM, 2), (Modifier::UNDERLINED, 4), (Modifier::REVERSED, 7)];

/// What the terminal writes text with at the moment.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
struct Pen {
    text: Paint,
    background: Paint,
    attributes: Modifier,
}

/// Gathers the bytes of a frame and writes them to a sink.
#[derive(Debug)]
pub struct ScreenBackend<W: Write> {
    sink: W,
    measure: fn() -> Size,
    depth: Depth,
    ascii_only: bool,
    /// [`BEGIN`] and what has been drawn since, or nothing.
    frame: Vec<u8>,
    cursor_shown: Option<Position>,
    cursor_wanted: Option<Position>,
    cursor_place: Position,
    bytes: u64,
    frames: u64,
}

impl<W: Write> ScreenBackend<W> {
    /// A backend that writes to `sink` and asks `measure` for the size.
    ///
    /// With `ascii_only`, text outside ASCII is shown as `?`: a terminal of another
    /// encoding would show other letters, or take some bytes for commands.
    pub fn new(sink: W, measure: fn() -> Size, depth: Depth, ascii_only: bool) -> Self {
        ScreenBackend {
            sink,
            measure,
            depth,
            ascii_only,
            frame: Vec::new(),
            cursor_shown: None,
            cursor_wanted: None,
            cursor_place: Position::ORIGIN,
            bytes: 0,
            frames: 0,
        }
    }

    /// How many bytes have been sent.
    #[cfg(test)]
    pub fn bytes(&self) -> u64 {
        self.bytes
    }

    /// How many frames have been sent, each in one write.
    #[cfg(test)]
    pub fn frames(&self) -> u64 {
        self.frames
    }

    /// Forgets where the cursor was, after something else has used the screen.
    pub fn forget_cursor(&mut self) {
        self.cursor_shown = None;
    }

    /// Makes the frame begin, if it has not begun yet.
    fn begin(&mut self) {
        if self.frame.is_empty() {
            self.frame.extend_from_slice(BEGIN);
            if self.cursor_shown.take().is_some() {
                self.frame.extend_from_slice(HIDE_CURSOR);
            }
        }
    }

    fn push_number(&mut self, number: u16) {
        // Writing to a vector cannot fail.
        let _ = write!(self.frame, "{number}");
    }

    fn push_move(&mut self, place: Position) {
        self.frame.extend_from_slice(b"\x1b[");
        self.push_number(place.y.saturating_add(1));
        if place.x > 0 {
            self.frame.push(b';');
            self.push_number(place.x.saturating_add(1));
        }
        self.frame.push(b'H');
    }

    /// Changes the pen with one sequence that names only what differs.
    fn push_pen(&mut self, from: Pen, to: Pen) {
        let mut parameters = Vec::with_capacity(12);
        let mut from = from;
        // Only code 0 is understood everywhere as "no longer bold".
        if !to.attributes.contains(from.attributes) || to == Pen::default() {
            parameters.push(0);
            from = Pen::default();
        }
        for (attribute, code) in ATTRIBUTES {
            if to.attributes.contains(attribute) && !from.attributes.contains(attribute) {
                parameters.push(code);
            }
        }
        if to.text != from.text {
            to.text.push_parameters(false, &mut parameters);
        }
        if to.background != from.background {
            to.background.push_parameters(true, &mut parameters);
        }
        self.frame.extend_from_slice(b"\x1b[");
        for (index, parameter) in parameters.into_iter().enumerate() {
            if index > 0 {
                self.frame.push(b';');
            }
            self.push_number(u16::from(parameter));
        }
        self.frame.push(b'm');
    }

    /// Writes one cell's text, which can never be a command to the terminal.
    fn push_symbol(&mut self, symbol: &str) {
        if symbol.is_empty() {
            self.frame.push(b' ');
        } else if symbol.chars().any(char::is_control) {
            self.frame.push(b'?');
        } else if self.ascii_only && !symbol.is_ascii() {
            let columns = symbol.width().max(1);
            self.frame.extend(std::iter::repeat_n(b'?', columns));
        } else {
            self.frame.extend_from_slice(symbol.as_bytes());
        }
    }

    fn pen_of(&self, cell: &Cell) -> Pen {
        let drawn =
            ATTRIBUTES.iter().fold(Modifier::empty(), |all, (attribute, _)| all | *attribute);
        Pen {
            text: Paint::of(cell.fg, self.depth),
            background: Paint::of(cell.bg, self.depth),
            attributes: cell.modifier & drawn,
        }
    }
}

impl<W: Write> Backend for ScreenBackend<W> {
    type Error = io::Error;

    fn draw<'a, I>(&mut self, content: I) -> io::Result<()>
    where
        I: Iterator<Item = (u16, u16, &'a Cell)>,
    {
        // A frame starts and ends with a plain pen, so that a message another
        // program writes on the screen between two frames does no lasting harm.
        let mut pen = Pen::default();
        let mut next: Option<Position> = None;
        for (x, y, cell) in content {
            let place = Position { x, y };
            self.begin();
            if next != Some(place) {
                self.push_move(place);
            }
            let wanted = self.pen_of(cell);
            if wanted != pen {
                self.push_pen(pen, wanted);
                pen = wanted;
            }
            self.push_symbol(cell.symbol());
            // After a wide cell the next one is not at x + 1, so it gets a move of
            // its own: terminals do not agree on which characters are wide.
            next = Some(Position { x: x.saturating_add(1), y });
        }
        if pen != Pen::default() {
            self.frame.extend_from_slice(PLAIN);
        }
        Ok(())
    }

    fn hide_cursor(&mut self) -> io::Result<()> {
        self.cursor_wanted = None;
        Ok(())
    }

    fn show_cursor(&mut self) -> io::Result<()> {
        self.cursor_wanted = Some(self.cursor_place);
        Ok(())
    }

    /// Gives the place the cursor was last sent to; the terminal is never asked,
    /// because its answer would arrive among the keys.
    fn get_cursor_position(&mut self) -> io::Result<Position> {
        Ok(self.cursor_place)
    }

    fn set_cursor_position<P: Into<Position>>(&mut self, position: P) -> io::Result<()> {
        self.cursor_place = position.into();
        if self.cursor_wanted.is_some() {
            self.cursor_wanted = Some(self.cursor_place);
        }
        Ok(())
    }

    fn clear(&mut self) -> io::Result<()> {
        self.clear_region(ClearType::All)
    }

    fn clear_region(&mut self, region: ClearType) -> io::Result<()> {
        self.begin();
        if !matches!(region, ClearType::All) {
            self.push_move(self.cursor_place);
        }
        let code = match region {
            ClearType::All => CLEAR,
            ClearType::AfterCursor => b"\x1b[0J",
            ClearType::BeforeCursor => b"\x1b[1J",
            ClearType::CurrentLine => b"\x1b[2K",
            ClearType::UntilNewLine => b"\x1b[0K",
        };
        // A narrowed screen is cleared twice in a row by the drawing library.
        if !self.frame.ends_with(code) {
            self.frame.extend_from_slice(code);
        }
        Ok(())
    }

    fn size(&self) -> io::Result<Size> {
        Ok((self.measure)())
    }

    fn window_size(&mut self) -> io::Result<WindowSize> {
        Ok(WindowSize { columns_rows: (self.measure)(), pixels: Size::ZERO })
    }

    /// Sends the frame, if it differs from the one before.
    fn flush(&mut self) -> io::Result<()> {
        if self.frame.is_empty() && self.cursor_wanted == self.cursor_shown {
            return Ok(());
        }
        self.begin();
        if let Some(place) = self.cursor_wanted {
            self.push_move(place);
            self.frame.extend_from_slice(SHOW_CURSOR);
        }
        self.frame.extend_from_slice(END);
        self.cursor_shown = self.cursor_wanted;
        let outcome = self.sink.write_all(&self.frame);
        self.bytes += self.frame.len() as u64;
        self.frames += 1;
        self.frame.clear();
        outcome
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use ratatui::Terminal;
    use ratatui::layout::Rect;
    use ratatui::style::{Color, Style};
    use ratatui::text::Span;

    fn five_by_two() -> Size {
        Size { width: 5, height: 2 }
    }

    fn screen(depth: Depth, ascii_only: bool) -> Terminal<ScreenBackend<Vec<u8>>> {
        Terminal::new(ScreenBackend::new(Vec::new(), five_by_two, depth, ascii_only))
            .expect("a screen in memory")
    }

    /// Draws one styled text at the origin and gives the bytes this took.
    fn sent(
        terminal: &mut Terminal<ScreenBackend<Vec<u8>>>,
        text: &str,
        style: Style,
        cursor: Option<(u16, u16)>,
    ) -> String {
        terminal.backend_mut().sink.clear();
        terminal
            .draw(|frame| {
                frame.render_widget(Span::styled(text, style), frame.area());
                if let Some(place) = cursor {
                    frame.set_cursor_position(place);
                }
            })
            .expect("memory takes every byte");
        let bytes = terminal.backend().sink.clone();
        String::from_utf8(bytes).expect("UTF-8").replace('\x1b', "^")
    }

    #[test]
    fn a_frame_is_bracketed_and_an_unchanged_one_sends_nothing() {
        let mut terminal = screen(Depth::Mono, false);
        let style = Style::new();
        assert_eq!(sent(&mut terminal, "ab", style, None), "^[?2026h^[1Hab^[?2026l");
        assert_eq!(sent(&mut terminal, "ab", style, None), "");
        assert_eq!(sent(&mut terminal, "ax", style, None), "^[?2026h^[1;2Hx^[?2026l");
        assert_eq!(terminal.backend().frames(), 2);
        assert_eq!(terminal.backend().bytes(), (22 + 23) as u64);
    }

    #[test]
    fn the_cursor_is_sent_only_when_it_moves_or_the_frame_changes() {
        let mut terminal = screen(Depth::Mono, false);
        let style = Style::new();
        assert_eq!(
            sent(&mut terminal, "ab", style, Some((2, 0))),
            "^[?2026h^[1Hab^[1;3H^[?25h^[?2026l"
        );
        assert_eq!(sent(&mut terminal, "ab", style, Some((2, 0))), "");
        assert_eq!(
            sent(&mut terminal, "ab", style, Some((3, 1))),
            "^[?2026h^[?25l^[2;4H^[?25h^[?2026l"
        );
        assert_eq!(sent(&mut terminal, "ab", style, None), "^[?2026h^[?25l^[?2026l");
        assert_eq!(sent(&mut terminal, "ab", style, None), "");
    }

    #[test]
    fn sixteen_colours_use_short_codes_and_no_underline_colour() {
        let mut terminal = screen(Depth::Sixteen, false);
        let style = Style::new().fg(Color::LightRed).bg(Color::Blue).bold();
        assert_eq!(sent(&mut terminal, "a", style, None), "^[?2026h^[1H^[1;91;44ma^[0m^[?2026l");
        let mut palette = screen(Depth::Palette, false);
        assert_eq!(
            sent(&mut palette, "a", Style::new().fg(Color::Indexed(200)), None),
            "^[?2026h^[1H^[38;5;200ma^[0m^[?2026l"
        );
    }

    #[test]
    fn without_colour_the_attributes_remain() {
        let mut terminal = screen(Depth::Mono, false);
        let style = Style::new()
            .fg(Color::Red)
            .bg(Color::Rgb(1, 2, 3))
            .bold()
            .dim()
            .underlined()
            .italic()
            .slow_blink()
            .reversed();
        assert_eq!(sent(&mut terminal, "a", style, None), "^[?2026h^[1H^[1;2;4;7ma^[0m^[?2026l");
    }

    #[test]
    fn losing_an_attribute_resets_the_pen_once() {
        let mut terminal = screen(Depth::Sixteen, false);
        terminal
            .draw(|frame| {
                let buffer = frame.buffer_mut();
                buffer.set_string(0, 0, "a", Style::new().bold().fg(Color::Red));
                buffer.set_string(1, 0, "b", Style::new().fg(Color::Red));
                buffer.set_string(2, 0, "c", Style::new().fg(Color::Green).reversed());
                buffer.set_string(3, 0, "d", Style::new());
            })
            .expect("memory takes every byte");
        let bytes = String::from_utf8(terminal.backend().sink.clone()).expect("UTF-8");
        assert_eq!(bytes.replace('\x1b', "^"), "^[?2026h^[1H^[1;31ma^[0;31mb^[7;32mc^[0md^[?2026l");
    }

    #[test]
    fn a_cell_can_never_hold_a_command() {
        let mut terminal = screen(Depth::Mono, false);
        terminal
            .draw(|frame| {
                frame.buffer_mut()[(0, 0)].set_symbol("\x1b]0;x\x07");
                frame.buffer_mut()[(4, 1)].set_symbol("\u{9b}");
            })
            .expect("memory takes every byte");
        let bytes = String::from_utf8(terminal.backend().sink.clone()).expect("UTF-8");
        assert_eq!(bytes.replace('\x1b', "^"), "^[?2026h^[1H?^[2;5H?^[?2026l");
    }

    #[test]
    fn a_terminal_without_unicode_gets_only_ascii() {
        let mut terminal = screen(Depth::Mono, true);
        assert_eq!(sent(&mut terminal, "αb犬", Style::new(), None), "^[?2026h^[1H?b??^[?2026l");
    }

    #[test]
    fn a_repaint_clears_once_and_draws_every_cell_again() {
        let mut terminal = screen(Depth::Mono, false);
        sent(&mut terminal, "ab", Style::new(), None);
        terminal.resize(Rect::new(0, 0, 5, 2)).expect("memory");
        assert_eq!(sent(&mut terminal, "ab", Style::new(), None), "^[?2026h^[2J^[1Hab^[?2026l");
        // A narrower area makes the drawing library clear twice.
        terminal.resize(Rect::new(0, 0, 3, 2)).expect("memory");
        terminal.backend_mut().flush().expect("memory");
        let bytes = String::from_utf8_lossy(&terminal.backend().sink).into_owned();
        assert_eq!(bytes.matches("\x1b[2J").count(), 2, "{bytes:?}");
    }

    #[test]
    fn clearing_through_the_library_asks_the_terminal_nothing() {
        let mut terminal = screen(Depth::Mono, false);
        terminal.clear().expect("memory takes every byte");
        terminal.backend_mut().flush().expect("memory");
        let bytes = String::from_utf8_lossy(&terminal.backend().sink).into_owned();
        assert!(!bytes.contains("[6n"), "{bytes:?}");
    }

    /// A sink that counts writes, and fails after the first one.
    struct LostLine(usize);

    impl Write for LostLine {
        fn write(&mut self, bytes: &[u8]) -> io::Result<usize> {
            self.0 += 1;
            match self.0 {
                1 => Ok(bytes.len()),
                _ => Err(io::Error::from_raw_os_error(5)),
            }
        }

        fn flush(&mut self) -> io::Result<()> {
            Ok(())
        }
    }

    #[test]
    fn each_frame_is_one_write_and_a_lost_line_is_an_error() {
        let backend = ScreenBackend::new(LostLine(0), five_by_two, Depth::Mono, false);
        let mut terminal = Terminal::new(backend).expect("a screen in memory");
        let draw = |terminal: &mut Terminal<ScreenBackend<LostLine>>, text: &'static str| {
            terminal.draw(|frame| frame.render_widget(text, frame.area())).map(|_| ())
        };
        draw(&mut terminal, "one").expect("the line still holds");
        assert_eq!(terminal.backend().sink.0, 1);
        let error = draw(&mut terminal, "two").expect_err("the line is lost");
        assert_eq!(error.raw_os_error(), Some(5));
    }
}
