//! The frames of a recording: where each of them begins, and reading one with its events.

use clockspar::model::array_time::ArrayTime;
use clockspar::run::Event;
use clockspar::run::recording::{Frame, Line, ReadFault, Reader, Seek};

use super::replay::unread;
use crate::program::problem::Problem;
use crate::program::recording_file::RecordingSource;

/// All frames up to the first damage.
pub struct FrameList {
    /// Their moments, in order.
    pub moments: Vec<ArrayTime>,
    /// Where the lines of each frame begin, its events included.
    starts: Vec<u64>,
    /// The first damage met.
    pub damage: Option<String>,
}

impl FrameList {
    /// Only the beginnings of lines are read, and of each frame no more is kept than its
    /// moment and its place.
    pub fn of(reader: &Reader<RecordingSource>, shown: &str) -> Result<FrameList, Problem> {
        let (mut moments, mut starts, mut damage) = (Vec::new(), Vec::new(), None);
        let mut heads = reader.heads();
        let mut start = heads.next_byte();
        while let Some(head) = heads.next() {
            match head {
                Ok(head) if head.frame.is_some() => {
                    moments.push(head.at);
                    starts.push(start);
                    start = heads.next_byte();
                }
                Ok(_) => {}
                Err(ReadFault::Damaged(found)) => {
                    damage = Some(found.to_string());
                    break;
                }
                Err(fault) => return Err(unread(shown, &fault)),
            }
        }
        Ok(FrameList { moments, starts, damage })
    }

    /// Whether there is a frame at a moment.
    pub fn holds(&self, at: ArrayTime) -> bool {
        self.moments.binary_search(&at).is_ok()
    }

    /// The frame at a moment that is among those listed, and the events before it.
    pub fn read(
        &self,
        reader: &Reader<RecordingSource>,
        at: ArrayTime,
    ) -> Result<(Frame, Vec<Event>), ReadFault> {
        let place = self.moments.binary_search(&at).map_err(|_| gone())?;
        let mut events = Vec::new();
        for line in reader.lines_at(self.starts[place]) {
            match line? {
                Line::Frame(frame) => return Ok((frame, events)),
                Line::Event(event) => events.push(event),
            }
        }
        Err(gone())
    }
}

/// The frame in force at a moment, the last one at or before it, and the events since the
/// frame before that. It is found without reading what lies before it.
pub fn frame_in_force(
    reader: &Reader<RecordingSource>,
    at: ArrayTime,
) -> Result<Option<(Frame, Vec<Event>)>, ReadFault> {
    let Some(frame) = reader.frame(Seek::AtOrBefore, at)? else { return Ok(None) };
    if reader.has_no_event() {
        return Ok(Some((frame, Vec::new())));
    }
    let before = reader.frame(Seek::Before, frame.at).ok().flatten();
    let since = before
        .map_or(ArrayTime::from_attoseconds(-ArrayTime::LIMIT.attoseconds()), |before| {
            ArrayTime::from_attoseconds(before.at.attoseconds() + 1)
        });
    let events = reader.events_between(since, frame.at)?.collect::<Result<_, _>>()?;
    Ok(Some((frame, events)))
}

fn gone() -> ReadFault {
    ReadFault::Io(std::io::Error::other("a frame that was there is gone"))
}
