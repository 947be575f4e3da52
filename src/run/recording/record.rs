//! A run to a recording: frames at exact moments, events and notes between them.

use std::fmt;
use std::io::Write;

use crate::model::array_time::ArrayTime;
use crate::run::{Run, RunFault, State};

use super::{Opening, WriteFault, Writer};

/// What gives the readings of the clocks at a frame: the state, the number of the frame,
/// and a vector, coming in empty, that takes one entry per node.
pub type Readings<'a> = dyn FnMut(&State<'_>, u64, &mut Vec<Option<f64>>) + 'a;

/// A recording that follows a run: it writes the frames it is told to and, before each,
/// the events and notes that have come since.
#[derive(Debug)]
pub struct Recorder<W> {
    writer: Writer<W>,
    /// The moment up to which events are written.
    written_until: Option<ArrayTime>,
    /// How many events of the run lay up to that moment.
    known_events: usize,
    readings: Vec<Option<f64>>,
}

impl<W: Write> Recorder<W> {
    /// Begins a recording.
    ///
    /// # Errors
    ///
    /// When the sink refuses.
    pub fn open(sink: W, opening: &Opening) -> Result<Recorder<W>, WriteFault> {
        let writer = Writer::open(sink, opening)?;
        Ok(Recorder { writer, written_until: None, known_events: 0, readings: Vec::new() })
    }

    /// Writes what the run has come to at a moment: events and notes since the last frame,
    /// those of this moment included, then its frame.
    ///
    /// Whoever steps a run writes a moment when it is left: an event that is still to come
    /// at this moment has no place after its frame.
    ///
    /// # Errors
    ///
    /// A moment the run cannot be asked for, or not after the last one written; a run
    /// that has changed at a moment already written; a sink that refuses.
    pub fn frame(
        &mut self,
        run: &Run,
        at: ArrayTime,
        readings: Option<&mut Readings<'_>>,
    ) -> Result<(), RecordFault> {
        let state = run.state_at(at)?;
        self.events(run, at)?;
        let Some(readings) = readings else {
            self.writer.frame(&state, None)?;
            return Ok(());
        };
        self.readings.clear();
        readings(&state, self.writer.frames(), &mut self.readings);
        self.writer.frame(&state, Some(&self.readings))?;
        Ok(())
    }

    /// Writes the events and notes up to a moment that are not written yet.
    ///
    /// # Errors
    ///
    /// A run that has changed at a moment already written; a sink that refuses.
    pub fn events(&mut self, run: &Run, until: ArrayTime) -> Result<(), WriteFault> {
        let count_until =
            |moment: ArrayTime| run.events().partition_point(|event| event.at <= moment);
        if let Some(last) = self.written_until
            && (count_until(last) != self.known_events || until < last)
        {
            let changed = run.events().get(self.known_events).map_or(until, |event| event.at);
            return Err(WriteFault::OutOfOrder { at: changed, last });
        }
        for entry in run.journal(self.written_until, until) {
            self.writer.event(&entry)?;
        }
        self.written_until = Some(until);
        self.known_events = count_until(until);
        Ok(())
    }

    /// Ends the recording and gives the sink back.
    ///
    /// # Errors
    ///
    /// When the sink refuses.
    pub fn close(self) -> Result<W, WriteFault> {
        self.writer.close()
    }

    /// The lines written so far, and the sink.
    pub fn writer(&mut self) -> &mut Writer<W> {
        &mut self.writer
    }
}

/// The moments of a recording: `from + k · every`, up to `until`, exactly.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Schedule {
    from: ArrayTime,
    every: ArrayTime,
    until: ArrayTime,
}

/// Why three times are no schedule.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum ScheduleFault {
    /// The step is not above zero.
    NoStep,
    /// The end comes before the beginning.
    Backwards,
}

impl Schedule {
    /// A schedule from its beginning, step and end.
    ///
    /// # Errors
    ///
    /// A step that is not above zero; an end before the beginning.
    pub fn new(
        from: ArrayTime,
        every: ArrayTime,
        until: ArrayTime,
    ) -> Result<Schedule, ScheduleFault> {
        if every <= ArrayTime::ZERO {
            return Err(ScheduleFault::NoStep);
        }
        if until < from {
            return Err(ScheduleFault::Backwards);
        }
        Ok(Schedule { from, every, until })
    }

    /// The first moment.
    #[must_use]
    pub fn from(&self) -> ArrayTime {
        self.from
    }

    /// The step.
    #[must_use]
    pub fn every(&self) -> ArrayTime {
        self.every
    }

    /// The end, which need not be a moment of the schedule.
    #[must_use]
    pub fn until(&self) -> ArrayTime {
        self.until
    }

    /// The last moment of the schedule.
    #[must_use]
    pub fn last(&self) -> ArrayTime {
        let steps = (self.until.attoseconds() - self.from.attoseconds()) / self.every.attoseconds();
        self.from.stepped(self.every, steps).unwrap_or(self.until)
    }

    /// The moments, in order.
    pub fn moments(&self) -> impl Iterator<Item = ArrayTime> + use<> {
        let Schedule { from, every, until } = *self;
        (0..).map_while(move |count| from.stepped(every, count).filter(|at| *at <= until))
    }
}

/// How a recording came to its end.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Ended {
    /// All frames are written.
    Finished,
    /// It was told to stop before.
    Stopped,
}

/// Why a run cannot be recorded.
#[derive(Debug)]
pub enum RecordFault {
    /// The run refuses a moment.
    Run(RunFault),
    /// A line cannot be written.
    Write(WriteFault),
}

/// Records a run over a schedule. `may_go_on` is asked before every frame.
///
/// The recording is left open, also when it was stopped: the caller closes it.
///
/// # Errors
///
/// A run that cannot reach the last moment, before anything is written; a sink that
/// refuses.
pub fn record<W: Write>(
    run: &Run,
    schedule: &Schedule,
    recorder: &mut Recorder<W>,
    mut readings: Option<&mut Readings<'_>>,
    may_go_on: &mut dyn FnMut() -> bool,
) -> Result<Ended, RecordFault> {
    run.check_moment(schedule.last())?;
    for at in schedule.moments() {
        if !may_go_on() {
            return Ok(Ended::Stopped);
        }
        recorder.frame(run, at, readings.as_deref_mut())?;
    }
    // Events after the last frame are part of the run as well.
    recorder.events(run, schedule.until())?;
    Ok(Ended::Finished)
}

impl fmt::Display for ScheduleFault {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            ScheduleFault::NoStep => "the step between frames is above zero",
            ScheduleFault::Backwards => "the end does not come before the beginning",
        })
    }
}

impl fmt::Display for RecordFault {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            RecordFault::Run(fault) => fault.fmt(f),
            RecordFault::Write(fault) => fault.fmt(f),
        }
    }
}

impl std::error::Error for ScheduleFault {}
impl std::error::Error for RecordFault {}

impl From<RunFault> for RecordFault {
    fn from(fault: RunFault) -> RecordFault {
        RecordFault::Run(fault)
    }
}

impl From<WriteFault> for RecordFault {
    fn from(fault: WriteFault) -> RecordFault {
        RecordFault::Write(fault)
    }
}
