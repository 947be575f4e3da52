//! Everything that can happen to the desk, and everything it can ask for.

use std::time::Duration;

use clockspar::layout::quantity::QuantityFault;
use clockspar::model::array_time::ArrayTime;
use clockspar::run::recording::Frame;
use clockspar::run::{Event, Run, RunFault};

use crate::program::terminal::KeyEvent;

/// What happens to the desk. Its state changes by these alone.
#[derive(Clone, Debug)]
pub enum Message {
    /// A key was pressed.
    Key(KeyEvent),
    /// Text was pasted.
    Paste(String),
    /// The area to draw on has this size.
    Sized {
        /// Columns.
        width: u16,
        /// Rows.
        height: u16,
    },
    /// The terminal has been given another size. A recording that is still being written
    /// may have grown since it was last looked at.
    Resized,
    /// So much wall time has passed since the last such message, while running.
    Elapsed(Duration),
    /// A recording was opened under this name.
    RecordingOpened {
        /// The name of the file.
        path: String,
    },
    /// A recording was closed.
    RecordingClosed {
        /// What became of it.
        made: Made,
    },
    /// A recording could not be opened or written on, and has ended.
    RecordingFailed(Notice),
    /// What was asked for outside the desk has been done, or refused.
    Told(Notice),
    /// A frame of the recording that is replayed was read.
    Read(Box<Reading>),
    /// The desk is about to close.
    Leaving,
}

/// What the desk asks the world for; carried out in order.
#[derive(Clone, Debug)]
pub enum Effect {
    /// Close the desk.
    Leave,
    /// Begin a recording in a new file of this name.
    OpenRecording {
        /// The name of the file.
        path: String,
    },
    /// Begin a recording in the next free file after this one: `run-2.jsonl` after
    /// `run.jsonl`.
    NextRecording {
        /// The name of the file before.
        after: String,
    },
    /// Write what the run has come to at a moment that is being left.
    Frame {
        /// The moment.
        at: ArrayTime,
    },
    /// Write the last frame, of the run as it was, and the closing line.
    CloseRecording {
        /// The run the recording is of.
        run: Box<Run>,
        /// The moment of the last frame; `None` when it is written already.
        last: Option<ArrayTime>,
    },
    /// Write a layout to a new file.
    Save {
        /// The name of the file.
        path: String,
        /// The text.
        text: String,
        /// How many changes it does not hold.
        left_out: usize,
    },
    /// Read a frame of the recording that is replayed.
    Read {
        /// Which one.
        wanted: Wanted,
        /// The moment up to which its events are known already.
        known: Option<ArrayTime>,
    },
}

/// Which frame of a recording is wanted.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Wanted {
    /// The first one.
    First,
    /// The first one after a moment.
    After(ArrayTime),
    /// The last one before a moment.
    Before(ArrayTime),
    /// The one at a moment, else the last one before it.
    At(ArrayTime),
    /// The last one.
    Newest,
}

/// What was read of a recording.
#[derive(Clone, Debug)]
pub struct Reading {
    /// The frame; `None` when there is none where it was looked for.
    pub frame: Option<Frame>,
    /// Events up to the frame that were not known yet.
    pub events: Vec<Event>,
    /// How the recording stands: `closed`, `cut`, `growing` or `damaged`, and the particulars.
    pub condition: (&'static str, String),
    /// A line that could not be read.
    pub damage: Option<String>,
    /// The moment of the last frame or event.
    pub last: Option<ArrayTime>,
}

/// What became of a recording.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Made {
    /// The name of its file.
    pub path: String,
    /// Number of frames.
    pub frames: u64,
    /// Number of events.
    pub events: u64,
    /// Whether it has its closing line.
    pub is_whole: bool,
}

/// What the message line says.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Notice {
    /// What happened.
    pub what: String,
    /// Of something refused: what holds, and what would be right.
    pub refusal: Option<(String, String)>,
}

impl Notice {
    /// Something to say.
    pub fn said(what: impl Into<String>) -> Notice {
        Notice { what: what.into(), refusal: None }
    }

    /// Something refused: what, the rule, the remedy.
    pub fn refused(
        what: impl Into<String>,
        rule: impl Into<String>,
        remedy: impl Into<String>,
    ) -> Notice {
        Notice { what: what.into(), refusal: Some((rule.into(), remedy.into())) }
    }

    /// A quantity that cannot be read.
    pub fn unreadable(text: &str, fault: &QuantityFault) -> Notice {
        Notice::refused(format!("`{text}` cannot be read"), &fault.rule, &fault.remedy)
    }

    /// The whole text, for a line.
    pub fn text(&self) -> String {
        match &self.refusal {
            None => self.what.clone(),
            Some((rule, remedy)) => {
                format!("refused: {}; rule: {rule}; remedy: {remedy}", self.what)
            }
        }
    }
}

impl From<RunFault> for Notice {
    fn from(fault: RunFault) -> Notice {
        Notice::refused(fault.what(), fault.rule(), fault.remedy())
    }
}
