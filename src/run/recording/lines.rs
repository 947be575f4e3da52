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
    order: Order,
}

impl<'r, R: ReadAt> Lines<'r, R> {
    pub(super) fn new(reader: &'r Reader<R>, offset: u64) -> Lines<'r, R> {
        let is_start = offset == reader.data_start();
        Lines {
            reader,
            window: Window::new(reader.source()),
            offset,
            number: is_start.then_some(2),
            order: Order::new(is_start),
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

    /// What the next line says, or what is wrong with it.
    fn parse_next(&mut self) -> io::Result<Result<Line, String>> {
        // A good frame is kept where it is read, which matters where it is long.
        if self.reader.has_long_frames()
            && let Some((frame, end)) = self.reader.frame_at(self.offset)?
        {
            self.offset = end;
            return Ok(Ok(Line::Frame(frame)));
        }
        let end = self.reader.data_end();
        let found = self.window.line(self.offset, end, self.reader.longest_line())?;
        self.offset = found.end;
        Ok(match found.held {
            Some(range) => parse(self.window.held(range), self.reader),
            None => Err(TOO_LONG.to_owned()),
        })
    }

    fn read(&mut self) -> Result<Line, ReadFault> {
        let (byte, number) = (self.offset, self.number);
        let parsed = self.parse_next()?;
        self.number = number.map(|number| number + 1);
        let checked = parsed.and_then(|line| {
            let index = match &line {
                Line::Frame(frame) => Some(frame.index),
                Line::Event(_) => None,
            };
            self.order.follow(line.at(), index).map_or(Ok(line), Err)
        });
        checked.map_err(|what| {
            self.order.lose_count();
            damaged(self.reader.source(), number, byte, what)
        })
    }
}

/// Whether lines stand in the order of the format.
#[derive(Debug)]
struct Order {
    /// The moment of the last line, and whether it was a frame.
    last: Option<(ArrayTime, bool)>,
    /// Number of the next frame, once it is known.
    next_frame: Option<u64>,
}

impl Order {
    fn new(is_start: bool) -> Order {
        Order { last: None, next_frame: is_start.then_some(0) }
    }

    /// After a line that cannot be read it is not known which frame comes next.
    fn lose_count(&mut self) {
        self.next_frame = None;
    }

    /// Takes a line as the one before the next, a frame with its number; says what is
    /// wrong with its place.
    fn follow(&mut self, at: ArrayTime, frame: Option<u64>) -> Option<String> {
        let last = self.last.replace((at, frame.is_some()));
        if let Some((last, _)) = last
            && at < last
        {
            return Some(format!("its moment, {at} s, is before the one above, {last} s"));
        }
        match frame {
            None => (last == Some((at, true)))
                .then(|| format!("an event at {at} s after the frame of that moment")),
            Some(index) => {
                let due = self.next_frame.replace(index.saturating_add(1));
                let due = due.filter(|due| *due != index)?;
                Some(format!("it is frame {index}, where frame {due} is due"))
            }
        }
    }
}

/// What the beginning of a line tells.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct LineHead {
    /// Where the line begins.
    pub byte: u64,
    /// Its moment.
    pub at: ArrayTime,
    /// The number of the frame; `None` for an event.
    pub frame: Option<u64>,
}

/// The beginnings of all lines in the order of the file. The CRC of every line and its
/// place are checked, but no number beyond its moment is read: a long recording is listed
/// at the speed of its bytes.
#[derive(Debug)]
pub struct Heads<'r, R> {
    reader: &'r Reader<R>,
    window: Window<'r, R>,
    offset: u64,
    number: u64,
    order: Order,
}

impl<'r, R: ReadAt> Heads<'r, R> {
    pub(super) fn new(reader: &'r Reader<R>) -> Heads<'r, R> {
        Heads {
            reader,
            window: Window::new(reader.source()),
            offset: reader.data_start(),
            number: 2,
            order: Order::new(true),
        }
    }

    /// Where the line that comes next begins.
    #[must_use]
    pub fn next_byte(&self) -> u64 {
        self.offset
    }

    fn read(&mut self) -> Result<LineHead, ReadFault> {
        let (byte, number) = (self.offset, self.number);
        let end = self.reader.data_end();
        let found = self.window.line(byte, end, self.reader.longest_line())?;
        self.offset = found.end;
        self.number += 1;
        let head = match found.held {
            Some(range) => decode::body(self.window.held(range))
                .and_then(|body| decode::head(body).map_err(|malformed| malformed.text())),
            None => Err(TOO_LONG.to_owned()),
        };
        let checked = head.and_then(|(frame, at)| {
            self.order.follow(at, frame).map_or(Ok(LineHead { byte, at, frame }), Err)
        });
        checked.map_err(|what| {
            self.order.lose_count();
            damaged(self.reader.source(), Some(number), byte, what)
        })
    }
}

impl<R: ReadAt> Iterator for Heads<'_, R> {
    type Item = Result<LineHead, ReadFault>;

    fn next(&mut self) -> Option<Self::Item> {
        if self.offset >= self.reader.data_end() {
            return None;
        }
        let head = self.read();
        if let Err(ReadFault::Io(_)) = head {
            self.offset = self.reader.data_end();
        }
        Some(head)
    }
}

/// What is wrong with a line of more bytes than any line of the recording has.
pub(super) const TOO_LONG: &str = "it is longer than a line can be";

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
                None => Err(TOO_LONG.to_owned()),
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
