//! Writing a recording: every line in one call, in the order the format asks for.

use std::io::{self, Write};

use sha2::{Digest, Sha256};

use crate::model::array_time::ArrayTime;
use crate::run::{Event, State};

use super::encode::LineBuffer;
use super::{Closing, Opening, WriteFault};

/// A recording being written. Dropping it without [`Writer::close`] leaves it cut.
#[derive(Debug)]
pub struct Writer<W> {
    sink: W,
    line: LineBuffer,
    hash: Sha256,
    rows: usize,
    has_readings: bool,
    frames: u64,
    events: u64,
    /// The moment of the last line, and whether it was a frame.
    last: Option<(ArrayTime, bool)>,
    failed: bool,
}

impl<W: Write> Writer<W> {
    /// Begins a recording with its opening line.
    ///
    /// # Errors
    ///
    /// When the sink refuses.
    pub fn open(sink: W, opening: &Opening) -> Result<Writer<W>, WriteFault> {
        let mut line = LineBuffer::default();
        let mut writer = Writer {
            sink,
            line: LineBuffer::default(),
            hash: Sha256::new(),
            rows: opening.nodes.len(),
            has_readings: opening.has_readings,
            frames: 0,
            events: 0,
            last: None,
            failed: false,
        };
        writer.put(line.opening(opening))?;
        Ok(writer)
    }

    /// Writes an event.
    ///
    /// # Errors
    ///
    /// A moment before the last line, or that of the last frame: an event stands before
    /// the frame of its moment. A sink that refuses.
    pub fn event(&mut self, event: &Event) -> Result<(), WriteFault> {
        match self.last {
            Some((last, is_frame)) if event.at < last || (is_frame && event.at == last) => {
                return Err(WriteFault::OutOfOrder { at: event.at, last });
            }
            _ => {}
        }
        let mut line = std::mem::take(&mut self.line);
        let result = self.put(line.event(event));
        self.line = line;
        result?;
        self.events += 1;
        self.last = Some((event.at, false));
        Ok(())
    }

    /// Writes a frame. A recording with readings takes one entry per node; `None` where a
    /// node has none.
    ///
    /// # Errors
    ///
    /// A moment not after the last frame, or before the last event. Columns that are not
    /// those of the opening. A sink that refuses.
    pub fn frame(
        &mut self,
        state: &State<'_>,
        readings: Option<&[Option<f64>]>,
    ) -> Result<(), WriteFault> {
        let at = state.at();
        match self.last {
            Some((last, is_frame)) if at < last || (is_frame && at == last) => {
                return Err(WriteFault::OutOfOrder { at, last });
            }
            _ => {}
        }
        let is_fitting = readings.is_some() == self.has_readings
            && readings.is_none_or(|readings| readings.len() == self.rows)
            && state.rows() == self.rows;
        if !is_fitting {
            return Err(WriteFault::Columns);
        }
        let mut line = std::mem::take(&mut self.line);
        let result = self.put(line.frame(self.frames, state, readings));
        self.line = line;
        result?;
        self.frames += 1;
        self.last = Some((at, true));
        Ok(())
    }

    /// Ends the recording with its closing line and gives the sink back.
    ///
    /// # Errors
    ///
    /// When the sink refuses.
    pub fn close(mut self) -> Result<W, WriteFault> {
        let closing = Closing {
            frames: self.frames,
            events: self.events,
            last_at: self.last_at(),
            sha256: super::hex(&self.hash.clone().finalize()),
        };
        let mut line = std::mem::take(&mut self.line);
        self.put(line.closing(&closing))?;
        self.sink.flush()?;
        Ok(self.sink)
    }

    /// Number of frames written.
    #[must_use]
    pub fn frames(&self) -> u64 {
        self.frames
    }

    /// Number of events written.
    #[must_use]
    pub fn events(&self) -> u64 {
        self.events
    }

    /// The moment of the last frame or event.
    #[must_use]
    pub fn last_at(&self) -> Option<ArrayTime> {
        self.last.map(|(at, _)| at)
    }

    /// The sink, for what its owner does between lines.
    pub fn sink_mut(&mut self) -> &mut W {
        &mut self.sink
    }

    /// Hands one line to the sink in one call. After a refusal nothing more is written:
    /// what came then would follow a line that may be cut.
    fn put(&mut self, line: &[u8]) -> Result<(), WriteFault> {
        if self.failed {
            return Err(io::Error::other("the recording could not be written before").into());
        }
        if let Err(error) = self.sink.write_all(line) {
            self.failed = true;
            return Err(error.into());
        }
        self.hash.update(line);
        Ok(())
    }
}
