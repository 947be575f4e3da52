//! Finding a frame where a line takes megabytes: by the beginnings of a few lines near
//! guessed places, so that hardly more is read than the frame itself.
//!
//! This is a short cut. Beginnings are believed on the way without a CRC, and that is made
//! good at the end: a good frame of the very moment asked for is the one wanted, and so is
//! one of two good neighbours, by their numbers, on either side of the moment, whatever
//! led to them. In every other case nothing is said, and the careful way of
//! [`super::reader`] finds what is wrong and where.

use std::fmt;
use std::io;
use std::ops::RangeInclusive;
use std::sync::{Arc, Mutex, PoisonError};

use memchr::memchr;

use crate::model::array_time::ArrayTime;

use super::decode;
use super::lines::Lines;
use super::window::{CHUNK, ReadAt, Window, feed_after, for_each_chunk, read_full};
use super::{Condition, Frame, Line, Reader, Seek};

/// The most bytes from the start of a line to the end of its moment.
const LONGEST_HEAD: usize = 256;

/// The most events passed over one by one.
const MOST_EVENTS: usize = 1000;

/// Places guessed from the step between frames, before the range is halved instead.
const MOST_GUESSES: usize = 4;

/// Bytes read at a time into a line that is kept.
const PIECE: usize = 256 * 1024;

/// A bound in time.
#[derive(Clone, Copy, Debug)]
pub(super) struct Bound {
    at: ArrayTime,
    /// Whether the moment itself is past it.
    is_past_itself: bool,
}

impl Bound {
    /// What stands at the moment is past it.
    pub(super) fn before(at: ArrayTime) -> Bound {
        Bound { at, is_past_itself: true }
    }

    /// What stands at the moment is not past it.
    pub(super) fn after(at: ArrayTime) -> Bound {
        Bound { at, is_past_itself: false }
    }

    pub(super) fn is_past(self, moment: ArrayTime) -> bool {
        moment > self.at || (self.is_past_itself && moment == self.at)
    }
}

/// The beginning of the line of a frame.
#[derive(Clone, Copy, Debug)]
struct FrameHead {
    byte: u64,
    index: u64,
    at: ArrayTime,
}

/// The last frame before a bound and the first one after it.
type Beside = [Option<FrameHead>; 2];

/// A range of frames a bound lies in.
#[derive(Debug)]
struct Gap {
    /// A frame that is not past the bound.
    low: FrameHead,
    /// A frame that is; `None` for the end of the lines.
    high: Option<FrameHead>,
    /// Where that frame begins.
    high_byte: u64,
    /// Its number, or the one the next frame would have.
    high_index: u64,
}

impl Gap {
    /// The numbers of the frames between; `None` when there is none.
    fn between(&self) -> Option<RangeInclusive<u64>> {
        let first = self.low.index.checked_add(1)?;
        (first < self.high_index).then(|| first..=self.high_index - 1)
    }

    /// Where a frame between begins if all take the same room.
    fn byte_of(&self, index: u64) -> u64 {
        let share = u128::from(index - self.low.index) * u128::from(self.high_byte - self.low.byte)
            / u128::from(self.high_index - self.low.index);
        // No more than the difference it is a share of.
        self.low.byte + u64::try_from(share).unwrap_or(0)
    }

    /// The frames on both sides, when they follow each other.
    fn closed(self) -> Option<Beside> {
        let is_next = self.low.index.checked_add(1) == Some(self.high_index);
        is_next.then_some([Some(self.low), self.high])
    }
}

impl<R: ReadAt> Reader<R> {
    /// The frame a moment means, or that there is none; `None` when the short cut does not
    /// tell.
    pub(super) fn frame_by_heads(
        &self,
        seek: Seek,
        at: ArrayTime,
    ) -> io::Result<Option<Option<Frame>>> {
        let bound = match seek {
            Seek::Before | Seek::AtOrAfter => Bound::before(at),
            Seek::AtOrBefore | Seek::After => Bound::after(at),
        };
        let Some(beside) = self.frames_beside(bound)? else { return Ok(None) };
        let wanted = match seek {
            Seek::Before | Seek::AtOrBefore => 0,
            Seek::AtOrAfter | Seek::After => 1,
        };
        let (mut ends, mut frame) = ([None, None], None);
        if let Some(head) = beside[wanted] {
            let Some((found, end)) = self.frame_at(head.byte)? else { return Ok(None) };
            if found.at == at {
                return Ok(Some(Some(found)));
            }
            (ends[wanted], frame) = (Some(end), Some(found));
        }
        let other = 1 - wanted;
        if let Some(head) = beside[other] {
            let Some(end) = self.end_of_good_line(head.byte)? else { return Ok(None) };
            ends[other] = Some(end);
        }
        let from = ends[0].unwrap_or(self.data_start());
        let to = beside[1].map_or(self.data_end(), |head| head.byte);
        Ok(self.first_event(from, to, |_| false)?.map(|_| frame))
    }

    /// The first byte of the first line past a bound; `None` when the short cut does not
    /// tell.
    pub(super) fn line_by_heads(&self, bound: Bound) -> io::Result<Option<u64>> {
        let Some([before, after]) = self.frames_beside(bound)? else { return Ok(None) };
        let from = match before {
            Some(head) => self.end_of_good_line(head.byte)?,
            None => Some(self.data_start()),
        };
        let Some(from) = from else { return Ok(None) };
        let to = match after {
            Some(head) if self.end_of_good_line(head.byte)?.is_none() => return Ok(None),
            Some(head) => head.byte,
            None => self.data_end(),
        };
        self.first_event(from, to, |at| bound.is_past(at))
    }

    /// The frames next to a bound by what their beginnings say.
    fn frames_beside(&self, bound: Bound) -> io::Result<Option<Beside>> {
        let first = self.frame_head(self.data_start(), self.data_end())?;
        let Some(first) = first.filter(|first| first.index == 0) else { return Ok(None) };
        if bound.is_past(first.at) {
            return Ok(Some([None, Some(first)]));
        }
        let (high_byte, high_index, high) = match self.condition() {
            Condition::Whole(closing) => (self.data_end(), closing.frames, None),
            _ => {
                let Some(last) = self.last_frame_head()? else { return Ok(None) };
                if !bound.is_past(last.at) {
                    return Ok(Some([Some(last), None]));
                }
                (last.byte, last.index, Some(last))
            }
        };
        let by_step = self.index_by_step(first, bound);
        let mut gap = Gap { low: first, high, high_byte, high_index };
        let mut guesses = 0;
        while let Some(between) = gap.between() {
            let (start, end) = (*between.start(), *between.end());
            let wanted = match by_step.filter(|_| guesses < MOST_GUESSES) {
                Some(index) => index.clamp(start, end),
                None => start + (end - start) / 2,
            };
            guesses += 1;
            let line = self.line_near(gap.byte_of(wanted), gap.low.byte, gap.high_byte)?;
            let Some(line) = line else { return Ok(None) };
            let found = self.frame_head(line, gap.high_byte)?;
            let Some(found) = found.filter(|found| between.contains(&found.index)) else {
                return Ok(None);
            };
            if bound.is_past(found.at) {
                gap = Gap {
                    high: Some(found),
                    high_byte: found.byte,
                    high_index: found.index,
                    ..gap
                };
            } else {
                gap.low = found;
            }
        }
        Ok(gap.closed())
    }

    /// The number of the last frame that is not past a bound, if frames keep their step.
    fn index_by_step(&self, first: FrameHead, bound: Bound) -> Option<u64> {
        let every = self.opening().every?.attoseconds();
        let since = bound.at.attoseconds() - first.at.attoseconds();
        let steps = (since - i128::from(bound.is_past_itself)).checked_div(every)?;
        first.index.checked_add(u64::try_from(steps).ok()?)
    }

    /// The beginning of the first frame from a byte on at which a line begins; `None` when
    /// another line than an event comes before it.
    fn frame_head(&self, start: u64, end: u64) -> io::Result<Option<FrameHead>> {
        let mut window = Window::new(self.source());
        let mut byte = start;
        for _ in 0..MOST_EVENTS {
            if byte >= end {
                break;
            }
            match decode::head(window.head(byte, end, LONGEST_HEAD)?) {
                Ok((Some(index), at)) => return Ok(Some(FrameHead { byte, index, at })),
                Ok((None, _)) => byte = window.line(byte, end, 0)?.end,
                Err(_) => break,
            }
        }
        Ok(None)
    }

    /// The beginning of the last frame; `None` when another line than an event comes after
    /// it.
    fn last_frame_head(&self) -> io::Result<Option<FrameHead>> {
        let mut window = Window::new(self.source());
        let mut end = self.data_end();
        for _ in 0..MOST_EVENTS {
            if end <= self.data_start() {
                break;
            }
            let byte = self.line_start_before(end)?;
            match decode::head(window.head(byte, end, LONGEST_HEAD)?) {
                Ok((Some(index), at)) => return Ok(Some(FrameHead { byte, index, at })),
                Ok((None, _)) => end = byte,
                Err(_) => break,
            }
        }
        Ok(None)
    }

    /// The start of a line between two others, found near a byte.
    fn line_near(&self, byte: u64, low: u64, high: u64) -> io::Result<Option<u64>> {
        // The line feed right before `high` ends the line before it.
        let end = high.saturating_sub(1).max(low);
        let (mut from, mut to) = (byte.clamp(low, end), byte.clamp(low, end));
        let mut length = CHUNK as u64;
        while from > low || to < end {
            let (earlier, later) = (from.saturating_sub(length).max(low), (to + length).min(end));
            for (from, to) in [(earlier, from), (to, later)] {
                if let Some(feed) = feed_after(self.source(), from, to)? {
                    return Ok(Some(feed + 1));
                }
            }
            (from, to) = (earlier, later);
            length *= 2;
        }
        Ok(None)
    }

    /// The frame whose line begins at a byte, and the byte after it; `None` when the line
    /// is not good.
    pub(super) fn frame_at(&self, start: u64) -> io::Result<Option<(Frame, u64)>> {
        let lines = self.data_end().saturating_sub(self.data_start());
        let longest = usize::try_from(lines).unwrap_or(usize::MAX).min(self.longest_line() + 1);
        let mut bytes = self.shelf().take(longest);
        let length = self.read_line(start, &mut bytes)?;
        let kept = Arc::new(bytes);
        self.shelf().keep(&kept);
        let body = length.and_then(|length| decode::body(&kept[..length]).ok());
        let frame = body.and_then(|body| decode::frame(&kept, body.len(), self.opening()).ok());
        Ok(frame.zip(length.map(|length| start + length as u64 + 1)))
    }

    /// Reads a line into a buffer, and some bytes beyond it; returns the length of the line,
    /// or `None` when it does not end within the buffer.
    fn read_line(&self, start: u64, buffer: &mut [u8]) -> io::Result<Option<usize>> {
        let mut at = start;
        for piece in buffer.chunks_mut(PIECE) {
            let left = usize::try_from(self.data_end().saturating_sub(at)).unwrap_or(usize::MAX);
            let wanted = piece.len().min(left);
            let count = read_full(self.source(), at, &mut piece[..wanted])?;
            if let Some(feed) = memchr(b'\n', &piece[..count]) {
                return Ok(usize::try_from(at - start + feed as u64).ok());
            }
            if count == 0 {
                break;
            }
            at += count as u64;
        }
        Ok(None)
    }

    /// The byte after a line, when the line agrees with its CRC; it is not held.
    fn end_of_good_line(&self, start: u64) -> io::Result<Option<u64>> {
        let mut hasher = crc32fast::Hasher::new();
        let mut feed = None;
        for_each_chunk(self.source(), start, self.data_end(), |at, bytes| {
            let found = memchr(b'\n', bytes);
            hasher.update(&bytes[..found.unwrap_or(bytes.len())]);
            feed = found.map(|index| at + index as u64);
            found.is_none()
        })?;
        let Some(feed) = feed else { return Ok(None) };
        let Some(body_end) = feed.checked_sub(decode::TAIL as u64).filter(|end| *end >= start)
        else {
            return Ok(None);
        };
        let mut tail = [0; decode::TAIL];
        read_full(self.source(), body_end, &mut tail)?;
        Ok(decode::agrees(hasher.finalize(), &tail).then_some(feed + 1))
    }

    /// Where the first event begins whose moment is meant, of lines that have to be good
    /// events throughout; the end of the lines when there is none.
    fn first_event(
        &self,
        from: u64,
        to: u64,
        is_meant: impl Fn(ArrayTime) -> bool,
    ) -> io::Result<Option<u64>> {
        let mut lines = Lines::new(self, from);
        let mut found = None;
        while lines.next_byte() < to {
            let byte = lines.next_byte();
            match lines.next() {
                Some(Ok(Line::Event(event))) if found.is_none() && is_meant(event.at) => {
                    found = Some(byte);
                }
                Some(Ok(Line::Event(_))) => {}
                _ => return Ok(None),
            }
        }
        Ok((lines.next_byte() == to).then(|| found.unwrap_or(to)))
    }
}

/// Buffers of lines that were read last. What nobody looks at any more is read into again:
/// fresh memory costs more than reading the line.
#[derive(Default)]
pub(super) struct Shelf(Mutex<Vec<Arc<Vec<u8>>>>);

/// One for the frame that is shown and one for the next.
const SHELVED: usize = 2;

impl fmt::Debug for Shelf {
    fn fmt(&self, formatter: &mut fmt::Formatter<'_>) -> fmt::Result {
        formatter.debug_struct("Shelf").finish_non_exhaustive()
    }
}

impl Shelf {
    /// A buffer of some length at least that nobody else has.
    fn take(&self, length: usize) -> Vec<u8> {
        let mut shelved = self.0.lock().unwrap_or_else(PoisonError::into_inner);
        let free = shelved.iter().position(|bytes| Arc::strong_count(bytes) == 1);
        let bytes = free.and_then(|index| Arc::into_inner(shelved.swap_remove(index)));
        bytes.filter(|bytes| bytes.len() >= length).unwrap_or_else(|| vec![0; length])
    }

    fn keep(&self, bytes: &Arc<Vec<u8>>) {
        let mut shelved = self.0.lock().unwrap_or_else(PoisonError::into_inner);
        if shelved.len() == SHELVED {
            shelved.remove(0);
        }
        shelved.push(Arc::clone(bytes));
    }
}
