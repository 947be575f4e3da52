//! What can be wrong with a recording, and with reading or writing one.

use std::fmt;
use std::io;

use crate::model::array_time::ArrayTime;

use super::Closing;

/// Whether a recording has its end.
#[derive(Clone, Debug, PartialEq)]
pub enum Condition {
    /// It ends in a closing line.
    Whole(Closing),
    /// It does not: it was cut, or is still being written. Everything up to its last
    /// whole line can be read.
    Cut(Cut),
    /// A line before the end is not what was written. Found by reading, not by opening.
    Damaged(Damage),
}

/// Where a recording was cut.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Cut {
    /// The byte after the last whole line.
    pub at_byte: u64,
    /// What follows there.
    pub missing: Missing,
}

/// What stands where a recording was cut.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Missing {
    /// Nothing: the last line is whole and no closing follows.
    Closing,
    /// The beginning of a line, so many bytes of it.
    LineEnd(u64),
    /// A line whose CRC does not agree, so many bytes of it.
    GoodCrc(u64),
}

/// A line that is not what was written.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Damage {
    /// Number of the line, from 1.
    pub line: u64,
    /// Its first byte in the file, from 0.
    pub byte: u64,
    /// What is wrong with it.
    pub what: String,
}

/// Why a recording cannot be opened.
#[derive(Debug)]
pub enum OpenFault {
    /// The first line is not a readable opening.
    NoOpening {
        /// What is wrong with it.
        what: String,
        /// Whether it may be one that is still being written: what is there is how an
        /// opening begins, and has no end yet.
        is_unfinished: bool,
    },
    /// A later format than this program knows.
    Newer {
        /// The format found.
        format: String,
    },
    /// The bytes could not be read.
    Io(io::Error),
}

/// Why a line cannot be read.
#[derive(Debug)]
pub enum ReadFault {
    /// The line is damaged. What comes after it can be read on.
    Damaged(Damage),
    /// The bytes could not be read.
    Io(io::Error),
}

/// Why a line cannot be written.
#[derive(Debug)]
pub enum WriteFault {
    /// A moment before one already written, or an event after the frame of its moment.
    OutOfOrder {
        /// The moment of the line.
        at: ArrayTime,
        /// The moment of the last line written.
        last: ArrayTime,
    },
    /// A frame whose columns are not those of the opening.
    Columns,
    /// The sink refused, now or before. Lines written before are whole.
    Io(io::Error),
}

impl fmt::Display for Condition {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Condition::Whole(closing) => write!(
                f,
                "the recording is whole: {} frames, {} events",
                closing.frames, closing.events
            ),
            Condition::Cut(cut) => cut.fmt(f),
            Condition::Damaged(damage) => damage.fmt(f),
        }
    }
}

impl fmt::Display for Cut {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "the recording is cut at byte {}: ", self.at_byte)?;
        match self.missing {
            Missing::Closing => write!(f, "no closing line follows the last whole line"),
            Missing::LineEnd(bytes) => {
                write!(f, "{bytes} bytes of an unfinished line follow the last whole line")
            }
            Missing::GoodCrc(bytes) => {
                write!(f, "the line of {bytes} bytes there does not agree with its CRC")
            }
        }
    }
}

impl fmt::Display for Damage {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "line {} (byte {}) is damaged: {}", self.line, self.byte, self.what)
    }
}

impl fmt::Display for OpenFault {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            OpenFault::NoOpening { what, .. } => {
                write!(f, "no readable opening line of a recording: {what}")
            }
            OpenFault::Newer { format } => write!(
                f,
                "the recording has the format {format}, which is newer than {}",
                super::FORMAT
            ),
            OpenFault::Io(error) => error.fmt(f),
        }
    }
}

impl fmt::Display for ReadFault {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            ReadFault::Damaged(damage) => damage.fmt(f),
            ReadFault::Io(error) => error.fmt(f),
        }
    }
}

impl fmt::Display for WriteFault {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            WriteFault::OutOfOrder { at, last } => {
                write!(f, "a line at {at} s cannot follow what is recorded up to {last} s")
            }
            WriteFault::Columns => {
                write!(f, "the columns of the frame are not those of the recording")
            }
            WriteFault::Io(error) => error.fmt(f),
        }
    }
}

impl std::error::Error for OpenFault {}
impl std::error::Error for ReadFault {}
impl std::error::Error for WriteFault {}

impl From<io::Error> for OpenFault {
    fn from(error: io::Error) -> OpenFault {
        OpenFault::Io(error)
    }
}

impl From<io::Error> for ReadFault {
    fn from(error: io::Error) -> ReadFault {
        ReadFault::Io(error)
    }
}

impl From<io::Error> for WriteFault {
    fn from(error: io::Error) -> WriteFault {
        WriteFault::Io(error)
    }
}
