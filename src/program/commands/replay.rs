//! The command `replay`: a recording in the desk, as a table, or as it grows.

use std::cell::RefCell;
use std::io::IsTerminal;

use clockspar::layout::Layout;
use clockspar::model::array_time::ArrayTime;
use clockspar::run::Event;
use clockspar::run::recording::{Column, Condition, Frame, Line, Opening, ReadFault, Reader, Seek};
use clockspar::table::Report;
use clockspar::table::content::replay_report;

use super::choice::{LineShown, Nodes};
use super::following;
use super::recordings::open;
use super::show::{Asked, show};
use crate::program::arguments::ReplayArguments;
use crate::program::moments::Moments;
use crate::program::problem::{Problem, STATUS_RULE};
use crate::program::recording_file::RecordingSource;
use crate::program::{desk, files, message, preferences};

/// `clockspar replay`: the desk on a terminal, a table elsewhere or when asked for.
pub fn replay(arguments: &ReplayArguments) -> Result<u8, Problem> {
    if arguments.follow {
        return following::follow(arguments);
    }
    let reader = open(&arguments.file)?;
    let (output, moments) = (&arguments.output, &arguments.moments);
    let wants_table = output.wants_table() || moments.at.is_some() || moments.every.is_some();
    if !wants_table && std::io::stdout().is_terminal() {
        let look = preferences::look(&arguments.look, &output.preferences);
        return desk::replay(reader, &files::shown_name(&arguments.file), &look);
    }
    replay_table(&reader, arguments)
}

fn replay_table(
    reader: &Reader<RecordingSource>,
    arguments: &ReplayArguments,
) -> Result<u8, Problem> {
    let shown = files::shown_name(&arguments.file);
    if let Condition::Cut(cut) = reader.condition() {
        message(&format!("warning: {shown}: {cut}; shown up to its last whole line"));
    }
    let layout = reader.layout().ok();
    let asked = &arguments.moments;
    let listed = if asked.at.is_some() || asked.every.is_some() {
        let layout = layout.as_ref().ok_or_else(|| unreadable_layout(&shown))?;
        FrameList::in_force(reader, &Moments::of(asked, layout)?, &shown)?
    } else {
        FrameList::all(reader, &shown)?
    };
    let damage = RefCell::new(listed.damage);
    if listed.moments.count() == 0 {
        message(&format!("{shown} holds no frame"));
    } else {
        let starts = listed.starts;
        let moments = listed.moments;
        let opening = reader.opening();
        let report = |at: ArrayTime| -> Report<'_> {
            let read = match place_of(&moments, at).and_then(|index| starts.get(index)) {
                Some(start) => frame_at(reader, *start),
                None => frame_with_events(reader, at),
            };
            match read {
                Ok((frame, events)) => replay_report(opening, layout.as_ref(), frame, events),
                Err(fault) => {
                    // The line was good as far as it was looked at when it was listed: the
                    // file has been changed, or a number in it is none. Its place stays
                    // empty, and the status tells.
                    damage.borrow_mut().get_or_insert(fault.to_string());
                    empty_report(opening, layout.as_ref(), at)
                }
            }
        };
        let epoch = layout.as_ref().and_then(|layout| layout.epoch.as_ref());
        let line = LineShown { nodes: Nodes::Listed(&opening.nodes), epoch };
        let asked = Asked { moments: &moments, options: asked, line };
        show(&asked, &arguments.output, &report)?;
    }
    if let Some(damage) = damage.into_inner() {
        message(&format!("{shown}: {damage}; shown up to there"));
        return Ok(STATUS_RULE);
    }
    Ok(0)
}

/// The frames that are to be shown.
struct FrameList {
    moments: Moments,
    /// Where the lines of each frame begin, its events included; empty when they are looked
    /// for by moment.
    starts: Vec<u64>,
    /// The first damage met.
    damage: Option<String>,
}

impl FrameList {
    /// All frames up to the first damage. Only the beginnings of lines are read, and of
    /// each frame no more is kept than its moment and its place.
    fn all(reader: &Reader<RecordingSource>, shown: &str) -> Result<FrameList, Problem> {
        let (mut found, mut starts, mut damage) = (Vec::new(), Vec::new(), None);
        let mut heads = reader.heads();
        let mut start = heads.next_byte();
        while let Some(head) = heads.next() {
            match head {
                Ok(head) if head.frame.is_some() => {
                    found.push(head.at);
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
        Ok(FrameList { moments: Moments::Listed(found.into()), starts, damage })
    }

    /// Moments that are asked for are answered by the frame in force, the last one at or
    /// before. It is found without reading what lies before it.
    fn in_force(
        reader: &Reader<RecordingSource>,
        asked: &Moments,
        shown: &str,
    ) -> Result<FrameList, Problem> {
        let mut found = Vec::new();
        for at in asked.iter() {
            let frame =
                reader.frame(Seek::AtOrBefore, at).map_err(|fault| unread(shown, &fault))?;
            let frame = frame.ok_or_else(|| {
                Problem::new(
                    format_args!("{shown}: no frame at or before {at} s"),
                    "a moment of a recording is shown by the last frame at or before it",
                    "ask for a later moment",
                )
            })?;
            if found.last() != Some(&frame.at) {
                found.push(frame.at);
            }
        }
        let moments = match found.as_slice() {
            [single] => Moments::One(*single),
            _ => Moments::Listed(found.into()),
        };
        Ok(FrameList { moments, starts: Vec::new(), damage: None })
    }
}

/// The place of a moment among those listed.
fn place_of(moments: &Moments, at: ArrayTime) -> Option<usize> {
    match moments {
        Moments::Listed(moments) => moments.binary_search(&at).ok(),
        _ => None,
    }
}

/// The first frame from a byte on, and the events before it.
fn frame_at(
    reader: &Reader<RecordingSource>,
    start: u64,
) -> Result<(Frame, Vec<Event>), ReadFault> {
    let mut events = Vec::new();
    for line in reader.lines_at(start) {
        match line? {
            Line::Frame(frame) => return Ok((frame, events)),
            Line::Event(event) => events.push(event),
        }
    }
    Err(gone())
}

/// The frame of a moment, and the events since the frame before it.
fn frame_with_events(
    reader: &Reader<RecordingSource>,
    at: ArrayTime,
) -> Result<(Frame, Vec<Event>), ReadFault> {
    let frame = reader.frame(Seek::AtOrBefore, at)?.ok_or_else(gone)?;
    if reader.has_no_event() {
        return Ok((frame, Vec::new()));
    }
    let before = reader.frame(Seek::Before, at).ok().flatten();
    let since = before
        .map_or(ArrayTime::from_attoseconds(-ArrayTime::LIMIT.attoseconds()), |before| {
            ArrayTime::from_attoseconds(before.at.attoseconds() + 1)
        });
    let events = reader.events_between(since, at)?.collect::<Result<_, _>>()?;
    Ok((frame, events))
}

fn gone() -> ReadFault {
    ReadFault::Io(std::io::Error::other("a frame that was there is gone"))
}

/// The report of a frame that cannot be shown: it has no rows.
pub fn empty_report<'a>(
    opening: &'a Opening,
    layout: Option<&'a Layout>,
    at: ArrayTime,
) -> Report<'a> {
    let frame = Frame {
        index: 0,
        at,
        reference_acceleration_m_s2: 0.0,
        rapidity: None,
        rate_minus_one: Column::default(),
        clock_offset_s: Column::default(),
        reading_s: opening.has_readings.then(Column::default),
    };
    let mut report = replay_report(opening, layout, frame, Vec::new());
    report.reference_acceleration_m_s2 = Err("the frame cannot be read");
    report.rapidity = Err("the frame cannot be read");
    report.tables[0].rows = 0;
    report
}

/// What is told when a line cannot be read.
pub fn unread(shown: &str, fault: &ReadFault) -> Problem {
    Problem {
        status: STATUS_RULE,
        text: format!(
            "{shown}: {fault}\nrule: every line agrees with its CRC\nremedy: `clockspar verify` \
             tells what else is wrong; take a copy that was not altered"
        ),
    }
}

fn unreadable_layout(shown: &str) -> Problem {
    Problem::new(
        format_args!("{shown}: the layout in the recording has a fault"),
        "`end` and dates are moments of the layout",
        "`clockspar verify` tells the fault; replay without --at shows every frame",
    )
}
