//! Recordings: a run as lines of text, each protected by itself, that can be cut
//! anywhere, opened at once however long, and recomputed.
//!
//! A recording is UTF-8 with LF line ends. Each line is one JSON object without blanks,
//! its keys in a fixed order, that ends in `,"crc32":"xxxxxxxx"}`: the CRC-32 (zlib
//! polynomial, lower-case hex) of the bytes before that comma.
//!
//! ```text
//! {"opening":"clockspar.recording/1","program":…,"model":…,"layout":…,"layout_text":…,
//!  "layout_sha256":…,"files":[…],"seed":…,"from_s":…,"every_s":…,"nodes":[…],"columns":[…]
//! {"frame":k,"at_s":…,"reference_acceleration_m_s2":…,"rapidity":…,
//!  "rate_minus_one":[…],"clock_offset_s":[…]
//! {"event":KIND,"at_s":…,…
//! {"closing":"clockspar.recording/1","frames":…,"events":…,"last_at_s":…,"sha256":…
//! ```
//!
//! The moments never fall. An event stands before the frame of the same moment. Doubles
//! are the shortest decimals that read back to the same bits; moments are exact decimals;
//! what a released node no longer has is `null`.
//!
//! The library opens no file: it writes to any [`std::io::Write`], one call a line, and
//! reads from any [`ReadAt`].

mod column;
mod decode;
mod encode;
mod fault;
mod lines;
mod long;
mod reader;
mod record;
mod scan;
mod verify;
mod window;
mod writer;

use crate::layout::Layout;
use crate::model::array_time::ArrayTime;
use crate::table::{MODEL, PROGRAM};

pub use column::Column;
pub use fault::{Condition, Cut, Damage, Missing, OpenFault, ReadFault, WriteFault};
pub use lines::{Events, Heads, LineHead, Lines};
pub use reader::{Reader, Seek};
pub use record::{Ended, RecordFault, Recorder, Schedule, ScheduleFault, record};
pub use verify::{Basis, Finding, Verdict, allowed_difference, verify};
pub use window::ReadAt;
pub use writer::Writer;

use super::Event;

/// What the first and the last line of a recording call its format.
pub const FORMAT: &str = "clockspar.recording/1";

/// The most bytes the text of a note has, unless it stands in the layout.
pub const LONGEST_NOTE: usize = 64 * 1024;

/// The columns every recording has, in order.
pub const COLUMNS: [&str; 2] = ["rate_minus_one", "clock_offset_s"];

/// The third column of a recording with noise.
pub const READING_COLUMN: &str = "reading_s";

/// The first line: what was recorded, and all that is needed to compute it again.
#[derive(Clone, Debug, PartialEq)]
pub struct Opening {
    /// The program that wrote it, e.g. `clockspar 0.1.0`.
    pub program: String,
    /// The model it computed with; bits compare only under one model.
    pub model: u32,
    /// Name of the layout.
    pub layout: String,
    /// The layout, as it was read.
    pub layout_text: String,
    /// SHA-256 of that text, 64 hex digits.
    pub layout_sha256: String,
    /// The files the layout names, as they were read.
    pub files: Vec<EmbeddedFile>,
    /// Seed of the noise; `None` without noise.
    pub seed: Option<u64>,
    /// The moment of the first frame.
    pub from: ArrayTime,
    /// The step between frames; `None` when it is not the same throughout.
    pub every: Option<ArrayTime>,
    /// Names of the nodes, fore to aft: the order of every column.
    pub nodes: Vec<String>,
    /// Whether frames carry readings of the noisy clocks.
    pub has_readings: bool,
}

/// A file a layout names, carried along.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct EmbeddedFile {
    /// The name the layout calls it by.
    pub name: String,
    /// Its text.
    pub text: String,
    /// SHA-256 of the text, 64 hex digits.
    pub sha256: String,
}

/// The line at one moment, as recorded.
#[derive(Clone, Debug, PartialEq)]
pub struct Frame {
    /// Number of the frame, from 0.
    pub index: u64,
    /// Its moment.
    pub at: ArrayTime,
    /// Acceleration of the reference node, or the gravity it stands in, m/s².
    pub reference_acceleration_m_s2: f64,
    /// Rapidity; `None` for a standing line.
    pub rapidity: Option<f64>,
    /// `N − 1` of every node; `None` for a released one.
    pub rate_minus_one: Column,
    /// Clock offset of every node, s; `None` for a released one.
    pub clock_offset_s: Column,
    /// Reading of every node's clock less array time, s, in a recording with noise.
    pub reading_s: Option<Column>,
}

/// The last line of a whole recording.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Closing {
    /// Number of frames.
    pub frames: u64,
    /// Number of events.
    pub events: u64,
    /// Moment of the last frame or event; `None` when there is none.
    pub last_at: Option<ArrayTime>,
    /// SHA-256 of every byte before this line, 64 hex digits.
    pub sha256: String,
}

/// A line between the opening and the closing.
#[derive(Clone, Debug, PartialEq)]
pub enum Line {
    /// A frame.
    Frame(Frame),
    /// An event.
    Event(Event),
}

impl Line {
    /// Its moment.
    #[must_use]
    pub fn at(&self) -> ArrayTime {
        match self {
            Line::Frame(frame) => frame.at,
            Line::Event(event) => event.at,
        }
    }
}

impl Opening {
    /// The opening of a recording of a layout by this program.
    #[must_use]
    pub fn of(
        layout: &Layout,
        from: ArrayTime,
        every: Option<ArrayTime>,
        seed: Option<u64>,
    ) -> Opening {
        let files = layout.source.files.iter();
        Opening {
            program: PROGRAM.to_owned(),
            model: MODEL,
            layout: layout.name.clone(),
            layout_sha256: layout.source.sha256.clone(),
            layout_text: layout.source.text.clone(),
            files: files
                .map(|file| EmbeddedFile {
                    name: file.name.clone(),
                    text: file.text.clone(),
                    sha256: file.sha256.clone(),
                })
                .collect(),
            seed,
            from,
            every,
            nodes: layout.nodes.iter().map(|node| node.name.to_string()).collect(),
            has_readings: seed.is_some(),
        }
    }
}

fn hex(bytes: &[u8]) -> String {
    const DIGITS: &[u8; 16] = b"0123456789abcdef";
    let mut text = String::with_capacity(2 * bytes.len());
    for byte in bytes {
        text.push(char::from(DIGITS[usize::from(byte >> 4)]));
        text.push(char::from(DIGITS[usize::from(byte & 15)]));
    }
    text
}
