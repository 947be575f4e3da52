//! The lines of a recording one after the other, in flat memory.

use std::io;

use crate::model::array_time::ArrayTime;
use crate::run::Event;

use super::decode::{self, Kind};
use super::window::{ReadAt, Window, line_number};
use super::{Damage, Line, ReadFault, Reader};

/// Frames and events in the order of the file.
///
/// A damaged line comes as a fault that names it; the lines after it can be read on.
#[derive(Debug)]
pub struct Lines<'r, R> {
    reader: &'r Reader<R>,
    window: Window<'r, R>,
    /// Where the next line begins.
    offset: u64,
    /// Number of the next line, once it is known.
    number: Option<u64>,
    /// The moment of the last line, and whether it was a frame.
    last: Option<(ArrayTime, bool)>,
    /// Number of the next frame, once it is known.
    next_frame: Option<u64>,
}

impl<'r, R: ReadAt> Lines<'r, R> {
    pub(super) fn new(reader: &'r Reader<R>, offset: u64) -> Lines<'r, R> {
        let is_start = offset == reader.data_start();
        Lines {
            reader,
            window: Window::new(reader.source()),
            offset,
            number: is_start.then_some(2),
            last: None,
            next_frame: is_start.then_some(0),
        }
    }

    /// Number of the line that comes next, from 1; `None` after a seek.
    #[must_use]
    pub fn next_number(&self) -> Option<u64> {
        self.number
    }

    /// Where the line that comes next begins.
    #[must_use]
    pub fn next_byte(&self) -> u64 {
        self.offset
    }

    fn read(&mut self) -> Result<Line, ReadFault> {
        let (byte, number) = (self.offset, self.number);
        let end = self.reader.data_end();
        let found = self.window.line(byte, end, self.reader.longest_line())?;
        self.offset = found.end;
        self.number = number.map(|number| number + 1);
        let parsed = match found.held {
            Some(range) => parse(self.window.held(range), self.reader),
            None => Err("it is longer than a line can be".to_owned()),
        };
        let checked = parsed.and_then(|line| match self.follow(&line) {
            Some(what) => Err(what),
            None => Ok(line),
        });
        checked.map_err(|what| {
            // Which frame comes next is not known after a line that cannot be read.
            self.next_frame = None;
            damaged(self.reader.source(), number, byte, what)
        })
    }

    /// Takes a line as the one before the next; says what is wrong with its place.
    fn follow(&mut self, line: &Line) -> Option<String> {
        let at = line.at();
        let last = self.last.replace((at, matches!(line, Line::Frame(_))));
        if let Some((last, _)) = last
            && at < last
        {
            return Some(format!("its moment, {at} s, is before the one above, {last} s"));
        }
        match line {
            Line::Event(_) => (last == Some((at, true)))
                .then(|| format!("an event at {at} s after the frame of that moment")),
            Line::Frame(frame) => {
                let due = self.next_frame.replace(frame.index.saturating_add(1));
                let due = due.filter(|due| *due != frame.index)?;
                Some(format!("it is frame {}, where frame {due} is due", frame.index))
            }
        }
    }
}

/// What a line without its line feed says.
pub(super) fn parse<R: ReadAt>(line: &[u8], reader: &Reader<R>) -> Result<Line, String> {
    let body = decode::body(line)?;
    decode::line(body, reader.opening()).map_err(|malformed| malformed.text())
}

/// The fault of a damaged line. Its number is counted when it is not known.
pub(super) fn damaged<R: ReadAt>(
    source: &R,
    number: Option<u64>,
    byte: u64,
    what: String,
) -> ReadFault {
    let line = number.map_or_else(|| line_number(source, byte), io::Result::Ok);
    match line {
        Ok(line) => ReadFault::Damaged(Damage { line, byte, what }),
        Err(error) => ReadFault::Io(error),
    }
}

impl<R: ReadAt> Iterator for Lines<'_, R> {
    type Item = Result<Line, ReadFault>;

    fn next(&mut self) -> Option<Self::Item> {
        if self.offset >= self.reader.data_end() {
            return None;
        }
        let line = self.read();
        if let Err(ReadFault::Io(_)) = line {
            self.offset = self.reader.data_end();
        }
        Some(line)
    }
}

/// Events alone, in the order of the file; frames are passed over without being read.
#[derive(Debug)]
pub struct Events<'r, R> {
    reader: &'r Reader<R>,
    window: Window<'r, R>,
    offset: u64,
    end: u64,
}

impl<'r, R: ReadAt> Events<'r, R> {
    pub(super) fn new(reader: &'r Reader<R>, offset: u64, end: u64) -> Events<'r, R> {
        Events { reader, window: Window::new(reader.source()), offset, end }
    }

    fn read(&mut self) -> Result<Option<Event>, ReadFault> {
        while self.offset < self.end {
            let byte = self.offset;
            let head = self.window.head(byte, self.end, Kind::PREFIX)?;
            let is_event = Kind::of(head) == Some(Kind::Event);
            let longest = if is_event { self.reader.longest_line() } else { 0 };
            let found = self.window.line(byte, self.end, longest)?;
            self.offset = found.end;
            if !is_event {
                continue;
            }
            let parsed = match found.held {
                Some(range) => parse(self.window.held(range), self.reader),
                None => Err("it is longer than a line can be".to_owned()),
            };
            match parsed {
                Ok(Line::Event(event)) => return Ok(Some(event)),
                Ok(Line::Frame(_)) => {}
                Err(what) => return Err(damaged(self.reader.source(), None, byte, what)),
            }
        }
        Ok(None)
    }
}

impl<R: ReadAt> Iterator for Events<'_, R> {
    type Item = Result<Event, ReadFault>;

    fn next(&mut self) -> Option<Self::Item> {
        let event = self.read();
        if let Err(ReadFault::Io(_)) = event {
            self.offset = self.end;
        }
        event.transpose()
    }
}
