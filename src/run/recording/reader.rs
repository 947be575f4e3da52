//! Opening a recording and finding moments in it.
//!
//! Opening reads the first line and the last one. A moment is found by bisecting the
//! bytes: from any byte the line around it is found, and its moment says on which side to
//! go on. Neither memory nor the number of lines read grows with the recording.

use std::io;

use crate::layout::{self, Faults, Layout};
use crate::model::array_time::ArrayTime;

use super::decode::{self, Kind};
use super::lines::{Events, Heads, Lines, TOO_LONG, damaged, parse};
use super::long::{Bound, Shelf};
use super::window::{ReadAt, Window, feed_after, for_each_chunk, line_start, read_full};
use super::{
    Condition, Cut, FORMAT, Frame, LONGEST_NOTE, Line, Missing, OpenFault, Opening, ReadFault,
};

/// The longest opening line that is read, in bytes: it is held in memory.
const LONGEST_OPENING: u64 = 1 << 30;

/// The longest opening line that is held in memory before its CRC has been found good.
const HELD_UNCHECKED: u64 = 1 << 20;

/// Lines that may be longer than this are not read whole on the way to a moment.
const WHOLE_WHILE_SEEKING: usize = 1 << 20;

/// A recording opened for reading. It may still be growing: see [`Reader::refresh`].
#[derive(Debug)]
pub struct Reader<R> {
    source: R,
    opening: Opening,
    data_start: u64,
    data_end: u64,
    size: u64,
    condition: Condition,
    shelf: Shelf,
}

/// Which frame is meant by a moment.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Seek {
    /// The last one before the moment.
    Before,
    /// The one at the moment, else the last one before it.
    AtOrBefore,
    /// The one at the moment, else the first one after it.
    AtOrAfter,
    /// The first one after the moment.
    After,
}

impl<R: ReadAt> Reader<R> {
    /// Opens a recording.
    ///
    /// # Errors
    ///
    /// A first line that cannot be read, or is of a newer format.
    pub fn open(source: R) -> Result<Reader<R>, OpenFault> {
        let size = source.size()?;
        let (opening, data_start) = read_opening(&source, size)?;
        let condition = Condition::Cut(Cut { at_byte: data_start, missing: Missing::Closing });
        let mut reader = Reader {
            source,
            opening,
            data_start,
            data_end: data_start,
            size: 0,
            condition,
            shelf: Shelf::default(),
        };
        reader.refresh()?;
        Ok(reader)
    }

    /// Looks again where a recording that is still being written ends; says whether that
    /// has changed.
    ///
    /// # Errors
    ///
    /// When the bytes cannot be read.
    pub fn refresh(&mut self) -> io::Result<bool> {
        let size = self.source.size()?;
        if size == self.size {
            return Ok(false);
        }
        let before = self.data_end;
        let (data_end, condition) = self.find_end(size)?;
        let is_changed = before != data_end || condition != self.condition;
        self.size = size;
        self.data_end = data_end;
        self.condition = condition;
        Ok(is_changed)
    }

    /// The first line.
    #[must_use]
    pub fn opening(&self) -> &Opening {
        &self.opening
    }

    /// Whether the recording has its end, as far as opening it tells: [`Condition::Whole`]
    /// or [`Condition::Cut`]. Damage before the end is found by reading.
    #[must_use]
    pub fn condition(&self) -> &Condition {
        &self.condition
    }

    /// What the recording is read from.
    #[must_use]
    pub fn source(&self) -> &R {
        &self.source
    }

    /// Reads the layout in the recording.
    ///
    /// # Errors
    ///
    /// The faults of its text.
    pub fn layout(&self) -> Result<Layout, Faults> {
        self.opening.read_layout()
    }

    /// All frames and events, from the first one on.
    #[must_use]
    pub fn lines(&self) -> Lines<'_, R> {
        Lines::new(self, self.data_start)
    }

    /// Frames and events from a byte on at which a line begins, as told by
    /// [`Lines::next_byte`] or [`Heads::next_byte`].
    #[must_use]
    pub fn lines_at(&self, byte: u64) -> Lines<'_, R> {
        Lines::new(self, byte.max(self.data_start))
    }

    /// The moments of all frames and events, from the first one on.
    #[must_use]
    pub fn heads(&self) -> Heads<'_, R> {
        Heads::new(self)
    }

    /// Frames and events from the first one at or after a moment on.
    ///
    /// # Errors
    ///
    /// When the bytes cannot be read.
    pub fn lines_from(&self, at: ArrayTime) -> io::Result<Lines<'_, R>> {
        Ok(Lines::new(self, self.first_line_where(Bound::before(at))?))
    }

    /// All events up to a moment, from the first line on. Frames are passed over, but
    /// their bytes are looked at for the line ends.
    ///
    /// # Errors
    ///
    /// When the bytes cannot be read.
    pub fn events_until(&self, until: ArrayTime) -> io::Result<Events<'_, R>> {
        if self.has_no_event() {
            return Ok(Events::new(self, self.data_end, self.data_end));
        }
        let end = self.first_line_where(Bound::after(until))?;
        Ok(Events::new(self, self.data_start, end))
    }

    /// The events of `[from, until]`.
    ///
    /// # Errors
    ///
    /// When the bytes cannot be read.
    pub fn events_between(&self, from: ArrayTime, until: ArrayTime) -> io::Result<Events<'_, R>> {
        if self.has_no_event() {
            return Ok(Events::new(self, self.data_end, self.data_end));
        }
        let start = self.first_line_where(Bound::before(from))?;
        let end = self.first_line_where(Bound::after(until))?;
        Ok(Events::new(self, start, end.max(start)))
    }

    /// Whether the closing line says that there is no event to look for.
    #[must_use]
    pub fn has_no_event(&self) -> bool {
        matches!(&self.condition, Condition::Whole(closing) if closing.events == 0)
    }

    /// The frame a moment means; `None` when there is none on that side.
    ///
    /// # Errors
    ///
    /// A damaged line in its place, or bytes that cannot be read.
    pub fn frame(&self, seek: Seek, at: ArrayTime) -> Result<Option<Frame>, ReadFault> {
        if self.has_long_lines()
            && let Some(found) = self.frame_by_heads(seek, at)?
        {
            return Ok(found);
        }
        match seek {
            Seek::Before => self.frame_up_to(self.first_line_where(Bound::before(at))?, None),
            Seek::AtOrBefore => {
                self.frame_up_to(self.first_line_where(Bound::after(at))?, Some(at))
            }
            Seek::AtOrAfter => self.frame_from(self.first_line_where(Bound::before(at))?, Some(at)),
            Seek::After => self.frame_from(self.first_line_where(Bound::after(at))?, None),
        }
    }

    /// The first frame.
    ///
    /// # Errors
    ///
    /// A damaged line in its place, or bytes that cannot be read.
    pub fn first_frame(&self) -> Result<Option<Frame>, ReadFault> {
        if self.has_long_lines() {
            let earliest = ArrayTime::from_attoseconds(-ArrayTime::LIMIT.attoseconds());
            return self.frame(Seek::AtOrAfter, earliest);
        }
        self.frame_from(self.data_start, None)
    }

    /// The last frame.
    ///
    /// # Errors
    ///
    /// A damaged line in its place, or bytes that cannot be read.
    pub fn last_frame(&self) -> Result<Option<Frame>, ReadFault> {
        if self.has_long_lines() {
            return self.frame(Seek::AtOrBefore, ArrayTime::LIMIT);
        }
        self.frame_before(self.data_end)
    }

    /// The moment of the last frame or event; `None` when there is none, or its line is
    /// damaged.
    ///
    /// # Errors
    ///
    /// When the bytes cannot be read.
    pub fn last_moment(&self) -> io::Result<Option<ArrayTime>> {
        if self.data_end <= self.data_start {
            return Ok(None);
        }
        let start = self.line_start_before(self.data_end)?;
        let mut window = Window::new(&self.source);
        let found = window.line(start, self.data_end, self.longest_line())?;
        let body = found.held.and_then(|range| decode::body(window.held(range)).ok());
        Ok(body.and_then(|body| decode::moment(body).ok()))
    }

    /// Where the lines after the opening begin.
    pub(super) fn data_start(&self) -> u64 {
        self.data_start
    }

    /// The byte after the last whole line that is not the closing.
    pub(super) fn data_end(&self) -> u64 {
        self.data_end
    }

    /// The longest line after the opening that can be one: a frame of doubles of 24
    /// characters, or a note.
    pub(super) fn longest_line(&self) -> usize {
        // The six bytes of an escape for every byte of text; a note of the layout is in
        // the opening, escaped at least as long.
        let note = 1024 + 6 * LONGEST_NOTE.max(self.opening.layout_text.len());
        self.longest_frame().max(note)
    }

    fn longest_frame(&self) -> usize {
        let columns = if self.opening.has_readings { 3 } else { 2 };
        1024 + 32 * columns * self.opening.nodes.len()
    }

    /// Where whole lines end, and whether a closing line follows there.
    fn find_end(&self, size: u64) -> io::Result<(u64, Condition)> {
        let cut = |at_byte, missing| (at_byte, Condition::Cut(Cut { at_byte, missing }));
        if size <= self.data_start {
            return Ok(cut(self.data_start, Missing::Closing));
        }
        let mut last = [0];
        read_full(&self.source, size - 1, &mut last)?;
        if last != *b"\n" {
            let start = line_start(&self.source, self.data_start, size)?;
            return Ok(cut(start, Missing::LineEnd(size - start)));
        }
        let start = line_start(&self.source, self.data_start, size - 1)?;
        let mut window = Window::new(&self.source);
        let found = window.line(start, size, self.longest_line())?;
        let body = found.held.map(|range| decode::body(window.held(range)));
        let Some(Ok(body)) = body else {
            return Ok(cut(start, Missing::GoodCrc(size - start)));
        };
        if Kind::of(body) == Some(Kind::Closing)
            && let Ok(closing) = decode::closing(body)
        {
            return Ok((start, Condition::Whole(closing)));
        }
        Ok(cut(size, Missing::Closing))
    }

    /// The first frame from a byte on. A damaged line before it may have been that frame,
    /// unless the frame is just the one that was wanted.
    fn frame_from(
        &self,
        offset: u64,
        wanted: Option<ArrayTime>,
    ) -> Result<Option<Frame>, ReadFault> {
        let mut damaged = None;
        for line in Lines::new(self, offset) {
            match line {
                Ok(Line::Event(_)) => {}
                Ok(Line::Frame(frame)) if damaged.is_none() || wanted == Some(frame.at) => {
                    return Ok(Some(frame));
                }
                Ok(Line::Frame(_)) => break,
                Err(ReadFault::Io(error)) => return Err(error.into()),
                Err(ReadFault::Damaged(damage)) => {
                    damaged.get_or_insert(damage);
                }
            }
        }
        damaged.map_or(Ok(None), |damage| Err(ReadFault::Damaged(damage)))
    }

    /// The last frame before a byte. A damaged line at that byte may have been that frame,
    /// unless the frame is just the one that was wanted.
    fn frame_up_to(
        &self,
        offset: u64,
        wanted: Option<ArrayTime>,
    ) -> Result<Option<Frame>, ReadFault> {
        let frame = self.frame_before(offset)?;
        if wanted.is_none() || frame.as_ref().map(|frame| frame.at) != wanted {
            Lines::new(self, offset).next().transpose()?;
        }
        Ok(frame)
    }

    fn frame_before(&self, offset: u64) -> Result<Option<Frame>, ReadFault> {
        let mut window = Window::new(&self.source);
        let mut end = offset;
        while end > self.data_start {
            let start = line_start(&self.source, self.data_start, end - 1)?;
            let head = window.head(start, end, Kind::PREFIX)?;
            if Kind::of(head) != Some(Kind::Event) {
                let found = window.line(start, end, self.longest_line())?;
                let parsed = match found.held {
                    Some(range) => parse(window.held(range), self),
                    None => Err(TOO_LONG.to_owned()),
                };
                match parsed {
                    Ok(Line::Frame(frame)) => return Ok(Some(frame)),
                    Ok(Line::Event(_)) => {}
                    Err(what) => return Err(damaged(&self.source, None, start, what)),
                }
            }
            end = start;
        }
        Ok(None)
    }

    /// The start of the line that ends right before a byte.
    pub(super) fn line_start_before(&self, end: u64) -> io::Result<u64> {
        line_start(&self.source, self.data_start, end.saturating_sub(1))
    }

    /// Buffers for long lines.
    pub(super) fn shelf(&self) -> &Shelf {
        &self.shelf
    }

    /// Whether reading lines whole may be what takes the time.
    fn has_long_lines(&self) -> bool {
        self.longest_line() > WHOLE_WHILE_SEEKING
    }

    /// Whether it is frames that are so long.
    pub(super) fn has_long_frames(&self) -> bool {
        self.longest_frame() > WHOLE_WHILE_SEEKING
    }

    /// The first byte of the first line whose moment is past some bound, by bisection; the
    /// end of the lines when there is none.
    ///
    /// A damaged line has no moment that could be trusted: it goes with the next good line,
    /// so that whoever reads on from there meets it.
    fn first_line_where(&self, bound: Bound) -> io::Result<u64> {
        if self.has_long_lines()
            && let Some(found) = self.line_by_heads(bound)?
        {
            return Ok(found);
        }
        let mut window = Window::new(&self.source);
        let (mut low, mut high) = (self.data_start, self.data_end);
        while low < high {
            let start = line_start(&self.source, low, low + (high - low) / 2)?;
            let mut next = start;
            let mut moment = None;
            while moment.is_none() && next < high {
                let found = window.line(next, high, self.longest_line())?;
                next = found.end;
                let body = found.held.and_then(|range| decode::body(window.held(range)).ok());
                moment = body.and_then(|body| decode::moment(body).ok());
            }
            match moment {
                Some(moment) if !bound.is_past(moment) => low = next,
                _ => high = start,
            }
        }
        Ok(high)
    }
}

impl Opening {
    /// Reads the layout in the recording.
    ///
    /// # Errors
    ///
    /// The faults of its text.
    pub fn read_layout(&self) -> Result<Layout, Faults> {
        let file = |name: &str| {
            let found = self.files.iter().find(|file| file.name == name);
            let text = found.map(|file| file.text.clone());
            text.ok_or_else(|| "it is not in the recording".to_owned())
        };
        layout::read("layout in the recording", &self.layout_text, &file)
    }
}

/// The opening and the byte after it.
fn read_opening<R: ReadAt>(source: &R, size: u64) -> Result<(Opening, u64), OpenFault> {
    let fault = |what: &str, is_unfinished| {
        Err(OpenFault::NoOpening { what: what.to_owned(), is_unfinished })
    };
    if size == 0 {
        return fault("it is empty", true);
    }
    let mut window = Window::new(source);
    // Looked at first, so that a large file of another kind is not read as one line.
    let head = window.head(0, size, 64)?;
    match decode::claimed_format(head) {
        Some(format) if format == FORMAT => {}
        Some(format) if is_newer(&format) => return Err(OpenFault::Newer { format }),
        _ => {
            let beginning = format!("{{\"opening\":\"{FORMAT}\"");
            return fault("the first line is not one", beginning.as_bytes().starts_with(head));
        }
    }
    // Its end is looked for without holding it: a line that has none costs no memory.
    let Some(feed) = feed_after(source, 0, size.min(LONGEST_OPENING))? else {
        let is_unfinished = size < LONGEST_OPENING;
        return fault("the first line has no end", is_unfinished);
    };
    if feed > HELD_UNCHECKED && !has_good_crc(source, feed)? {
        return fault("it does not agree with its CRC", false);
    }
    let found = window.line(0, feed + 1, usize::try_from(feed).unwrap_or(usize::MAX))?;
    let line = found.held.map(|range| window.held(range)).unwrap_or_default();
    let body =
        decode::body(line).map_err(|what| OpenFault::NoOpening { what, is_unfinished: false })?;
    let opening = decode::opening(body).map_err(|malformed| OpenFault::NoOpening {
        what: malformed.text(),
        is_unfinished: false,
    })?;
    Ok((opening, found.end))
}

/// Whether the line of the first `length` bytes agrees with its CRC, found without holding
/// it in memory.
fn has_good_crc<R: ReadAt>(source: &R, length: u64) -> io::Result<bool> {
    let Some(body_end) = length.checked_sub(decode::TAIL as u64) else { return Ok(false) };
    let mut hasher = crc32fast::Hasher::new();
    for_each_chunk(source, 0, body_end, |_, bytes| {
        hasher.update(bytes);
        true
    })?;
    let mut tail = [0; decode::TAIL];
    let count = read_full(source, body_end, &mut tail)?;
    Ok(tail[..count] == decode::tail(hasher.finalize()))
}

/// Whether a format is a later one of this kind.
fn is_newer(format: &str) -> bool {
    let Some((kind, version)) = FORMAT.rsplit_once('/') else {
        return false;
    };
    let Some((found_kind, found_version)) = format.rsplit_once('/') else {
        return false;
    };
    let is_number = !found_version.is_empty()
        && found_version.len() < 10
        && found_version.bytes().all(|byte| byte.is_ascii_digit());
    kind == found_kind
        && is_number
        && found_version.parse::<u32>().ok() > version.parse::<u32>().ok()
}
