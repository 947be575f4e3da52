//! Random access to the bytes of a recording, a line at a time, in bounded memory.

use std::io;
use std::ops::Range;

use memchr::{memchr, memchr_iter, memrchr};

/// Bytes that can be read at any offset: a file, or a slice of memory. Their number may
/// grow between two calls.
pub trait ReadAt {
    /// Number of bytes there are now.
    ///
    /// # Errors
    ///
    /// Whatever stands against finding out.
    fn size(&self) -> io::Result<u64>;

    /// Reads some bytes from an offset on; 0 at the end, fewer than asked for at any time.
    ///
    /// # Errors
    ///
    /// Whatever stands against reading.
    fn read_at(&self, offset: u64, buffer: &mut [u8]) -> io::Result<usize>;
}

impl ReadAt for [u8] {
    fn size(&self) -> io::Result<u64> {
        Ok(self.len() as u64)
    }

    fn read_at(&self, offset: u64, buffer: &mut [u8]) -> io::Result<usize> {
        let rest = usize::try_from(offset).ok().and_then(|offset| self.get(offset..));
        let rest = rest.unwrap_or_default();
        let count = rest.len().min(buffer.len());
        buffer[..count].copy_from_slice(&rest[..count]);
        Ok(count)
    }
}

impl<T: ReadAt + ?Sized> ReadAt for &T {
    fn size(&self) -> io::Result<u64> {
        (**self).size()
    }

    fn read_at(&self, offset: u64, buffer: &mut [u8]) -> io::Result<usize> {
        (**self).read_at(offset, buffer)
    }
}

/// Bytes read at a time; more once a line has shown to be longer.
pub(super) const CHUNK: usize = 64 * 1024;

/// The most bytes read at a time.
const LARGEST_CHUNK: usize = 4 * 1024 * 1024;

/// A stretch of the bytes held in memory: never more than one line and a chunk.
#[derive(Debug)]
pub(super) struct Window<'a, R: ?Sized> {
    source: &'a R,
    start: u64,
    bytes: Vec<u8>,
}

/// A line found.
#[derive(Clone, Debug, PartialEq, Eq)]
pub(super) struct Found {
    /// The byte after it, its line feed included.
    pub(super) end: u64,
    /// Where it stands in the window, without its line feed; `None` when it is longer than
    /// allowed or has no line feed.
    pub(super) held: Option<Range<usize>>,
}

impl<'a, R: ReadAt + ?Sized> Window<'a, R> {
    pub(super) fn new(source: &'a R) -> Window<'a, R> {
        Window { source, start: 0, bytes: Vec::new() }
    }

    /// The bytes of a line found last.
    pub(super) fn held(&self, range: Range<usize>) -> &[u8] {
        &self.bytes[range]
    }

    /// The first bytes from an offset on, up to `count` of them.
    pub(super) fn head(&mut self, offset: u64, end: u64, count: usize) -> io::Result<&[u8]> {
        let mut from = self.begin_at(offset);
        let wanted = count.min(usize::try_from(end - offset).unwrap_or(count));
        while self.bytes.len() - from < wanted {
            if self.read_more(offset, end)? == 0 {
                break;
            }
            from = 0;
        }
        Ok(&self.bytes[from..self.bytes.len().min(from + wanted)])
    }

    /// The line that begins at `offset`, which lies before `end`. A line of more than
    /// `longest` bytes is passed over without being held.
    pub(super) fn line(&mut self, offset: u64, end: u64, longest: usize) -> io::Result<Found> {
        let mut from = self.begin_at(offset);
        let mut searched = from;
        loop {
            if let Some(length) = memchr(b'\n', &self.bytes[searched..]) {
                let feed = searched + length;
                let held = (feed - from <= longest).then_some(from..feed);
                return Ok(Found { end: self.start + feed as u64 + 1, held });
            }
            let length = self.bytes.len() - from;
            if length > longest {
                let feed = feed_after(self.source, offset + length as u64, end)?;
                return Ok(Found { end: feed.map_or(end, |feed| feed + 1), held: None });
            }
            if self.read_more(offset, end)? == 0 {
                return Ok(Found { end, held: None });
            }
            from = 0;
            searched = length;
        }
    }

    /// Makes the window reach `offset`; returns where in it that is.
    fn begin_at(&mut self, offset: u64) -> usize {
        let within = offset.checked_sub(self.start).and_then(|gone| usize::try_from(gone).ok());
        match within {
            Some(from) if from <= self.bytes.len() => from,
            _ => {
                self.bytes.clear();
                self.start = offset;
                0
            }
        }
    }

    /// Drops what stands before `offset` and reads on; returns how many bytes came.
    fn read_more(&mut self, offset: u64, end: u64) -> io::Result<usize> {
        let gone = self.begin_at(offset);
        self.bytes.drain(..gone);
        self.start = offset;
        let had = self.bytes.len();
        let reached = offset + had as u64;
        let left = usize::try_from(end.saturating_sub(reached)).unwrap_or(usize::MAX);
        let wanted = had.clamp(CHUNK, LARGEST_CHUNK).min(left);
        self.bytes.resize(had + wanted, 0);
        let result = read_full(self.source, reached, &mut self.bytes[had..]);
        let count = *result.as_ref().unwrap_or(&0);
        self.bytes.truncate(had + count);
        result
    }
}

/// Fills a buffer from an offset on as far as there are bytes.
pub(super) fn read_full<R: ReadAt + ?Sized>(
    source: &R,
    offset: u64,
    buffer: &mut [u8],
) -> io::Result<usize> {
    let mut count = 0;
    while count < buffer.len() {
        match source.read_at(offset + count as u64, &mut buffer[count..]) {
            Ok(0) => break,
            Ok(more) => count += more,
            Err(error) if error.kind() == io::ErrorKind::Interrupted => {}
            Err(error) => return Err(error),
        }
    }
    Ok(count)
}

/// Hands the bytes of `[from, end)` to `take`, a chunk at a time, until it says to stop.
pub(super) fn for_each_chunk<R: ReadAt + ?Sized>(
    source: &R,
    from: u64,
    end: u64,
    mut take: impl FnMut(u64, &[u8]) -> bool,
) -> io::Result<()> {
    let mut chunk = vec![0; 4 * CHUNK];
    let mut at = from;
    while at < end {
        let left = usize::try_from(end - at).unwrap_or(usize::MAX);
        let wanted = chunk.len().min(left);
        let count = read_full(source, at, &mut chunk[..wanted])?;
        if count == 0 || !take(at, &chunk[..count]) {
            break;
        }
        at += count as u64;
    }
    Ok(())
}

/// The first line feed in `[from, end)`.
pub(super) fn feed_after<R: ReadAt + ?Sized>(
    source: &R,
    from: u64,
    end: u64,
) -> io::Result<Option<u64>> {
    let mut found = None;
    for_each_chunk(source, from, end, |at, bytes| {
        found = memchr(b'\n', bytes).map(|index| at + index as u64);
        found.is_none()
    })?;
    Ok(found)
}

/// The start of the line that the byte at `at` belongs to, not before `low`.
pub(super) fn line_start<R: ReadAt + ?Sized>(source: &R, low: u64, at: u64) -> io::Result<u64> {
    let mut chunk = vec![0; CHUNK];
    let mut end = at;
    while end > low {
        let length = usize::try_from(end - low).unwrap_or(usize::MAX).min(chunk.len());
        let start = end - length as u64;
        let count = read_full(source, start, &mut chunk[..length])?;
        if let Some(index) = memrchr(b'\n', &chunk[..count]) {
            return Ok(start + index as u64 + 1);
        }
        end = start;
        // A line that goes on for long is better read in larger pieces.
        if chunk.len() < LARGEST_CHUNK {
            chunk.resize(2 * chunk.len(), 0);
        }
    }
    Ok(low)
}

/// The number of the line that begins at a byte, from 1.
pub(super) fn line_number<R: ReadAt + ?Sized>(source: &R, byte: u64) -> io::Result<u64> {
    let mut feeds = 0;
    for_each_chunk(source, 0, byte, |_, bytes| {
        feeds += memchr_iter(b'\n', bytes).count() as u64;
        true
    })?;
    Ok(feeds + 1)
}
