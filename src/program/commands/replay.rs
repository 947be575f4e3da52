//! The command `replay`: a recording in the desk, as a table, or as it grows.

use std::cell::{Cell as Slot, RefCell};
use std::io::IsTerminal;

use clockspar::layout::Layout;
use clockspar::layout::date::looks_like_a_date;
use clockspar::model::array_time::ArrayTime;
use clockspar::run::Event;
use clockspar::run::recording::{Column, Condition, Frame, Line, Opening, ReadFault, Reader};
use clockspar::table::content::{events_table, replay_report};
use clockspar::table::{Cell, Measure, Report, Scalar};

use super::choice::{LineShown, Nodes};
use super::following;
use super::frames::{FrameList, frame_in_force};
use super::recordings::open;
use super::show::{Asked, show};
use crate::program::arguments::{Form, MomentArguments, ReplayArguments};
use crate::program::moments::{Moments, Span};
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
    let layout = layout_of(reader, &shown);
    let opening = reader.opening();
    let asked = &arguments.moments;
    let frames = if asked.at.is_some() || asked.every.is_some() {
        Frames::in_force(reader, asked, layout.as_ref(), &shown)?
    } else {
        Frames::All(FrameList::of(reader, &shown)?)
    };
    let damage = RefCell::new(match &frames {
        Frames::All(listed) => listed.damage.clone(),
        Frames::InForce(_) => None,
    });
    // From here on nothing is shown: a frame before could not be read.
    let stopped = Slot::new(None);
    let report = |at: ArrayTime| -> Report<'_> {
        if stopped.get().is_some_and(|from| at >= from) {
            return empty_report(opening, layout.as_ref(), UNREADABLE);
        }
        let read = match &frames {
            Frames::All(listed) if listed.moments.is_empty() => {
                return without_frames(reader, layout.as_ref());
            }
            Frames::All(listed) => listed.read(reader, at),
            Frames::InForce(_) => frame_in_force(reader, at).and_then(|found| {
                found.ok_or_else(|| ReadFault::Io(std::io::Error::other("the frame is gone")))
            }),
        };
        match read {
            Ok((frame, events)) => {
                let frame_at = frame.at;
                let mut report = replay_report(opening, layout.as_ref(), frame, events);
                if matches!(frames, Frames::InForce(_)) {
                    say_what_was_asked(&mut report, at, frame_at);
                }
                report
            }
            Err(fault) => {
                // The line was good as far as it was looked at when it was listed: the file
                // has been changed, or what stands in it is no frame.
                stopped.set(Some(at));
                damage.borrow_mut().get_or_insert(fault.to_string());
                empty_report(opening, layout.as_ref(), UNREADABLE)
            }
        }
    };
    let epoch = layout.as_ref().and_then(|layout| layout.epoch.as_ref());
    let line = LineShown { nodes: Nodes::Listed(&opening.nodes), epoch };
    let moments = match &frames {
        Frames::All(listed) if listed.moments.is_empty() => Moments::One(opening.from),
        Frames::All(listed) => Moments::Listed(listed.moments.as_slice().into()),
        Frames::InForce(moments) => moments.clone(),
    };
    if let (Frames::InForce(Moments::One(at)), Form::Csv) = (&frames, arguments.output.form())
        && let Ok(Some((frame, _))) = frame_in_force(reader, *at)
        && frame.at != *at
    {
        // The rows have no place for it.
        message(&what_was_asked(*at, frame.at));
    }
    show(&Asked { moments: &moments, options: asked, line }, &arguments.output, &report)?;
    if let Some(damage) = damage.into_inner() {
        message(&format!("{shown}: {damage}; shown up to there"));
        return Ok(STATUS_RULE);
    }
    Ok(0)
}

/// The layout in a recording, with a warning when it is not the one of its frames.
pub fn layout_of(reader: &Reader<RecordingSource>, shown: &str) -> Option<Layout> {
    match reader.layout() {
        Ok(layout) => {
            if let Some(what) = reader.opening().disagreement(&layout) {
                message(&format!(
                    "warning: {shown}: {what}; the frames are shown as they are recorded"
                ));
            }
            Some(layout)
        }
        Err(_) => {
            message(&format!(
                "warning: {shown}: the layout in the recording has a fault; see `clockspar \
                 verify`"
            ));
            None
        }
    }
}

/// The frames that are to be shown.
enum Frames {
    /// All of them.
    All(FrameList),
    /// Those in force at moments that are asked for.
    InForce(Moments),
}

impl Frames {
    fn in_force(
        reader: &Reader<RecordingSource>,
        asked: &MomentArguments,
        layout: Option<&Layout>,
        shown: &str,
    ) -> Result<Frames, Problem> {
        let span = span_of(reader, layout, asked, shown)?;
        let moments = Moments::of_recording(asked, &span)?.unwrap_or(Moments::One(span.end));
        // What comes after the first moment has a frame before it too.
        let first = moments.nth(0);
        if frame_in_force(reader, first).map_err(|fault| unread(shown, &fault))?.is_none() {
            return Err(Problem::new(
                format_args!("{shown}: no frame at or before {first} s"),
                "a moment of a recording is shown by the last frame at or before it",
                format_args!("ask for {} s or later", span.first),
            ));
        }
        Ok(Frames::InForce(moments))
    }
}

/// What moments of a recording are counted and bounded by: its frames.
fn span_of<'a>(
    reader: &Reader<RecordingSource>,
    layout: Option<&'a Layout>,
    asked: &MomentArguments,
    shown: &str,
) -> Result<Span<'a>, Problem> {
    check_dates(layout, asked, shown)?;
    let is_end = |text: &Option<String>| text.as_ref().is_some_and(|text| text.trim() == "end");
    let needs_end = [&asked.at, &asked.from, &asked.until].into_iter().any(is_end)
        || (asked.every.is_some() && asked.until.is_none());
    let mut end = reader.opening().from;
    if needs_end {
        let last = reader.last_frame().map_err(|fault| unread(shown, &fault))?;
        end = last.map_or(end, |last| last.at);
    }
    let epoch = layout.and_then(|layout| layout.epoch.as_ref());
    Ok(Span { epoch, first: reader.opening().from, end })
}

/// A date is a moment of the layout in the recording.
pub fn check_dates(
    layout: Option<&Layout>,
    asked: &MomentArguments,
    shown: &str,
) -> Result<(), Problem> {
    let is_date = |text: &&String| looks_like_a_date(text.trim_matches(' '));
    let asks_for_dates =
        [&asked.at, &asked.from, &asked.until].into_iter().flatten().any(|text| is_date(&text));
    if asks_for_dates && layout.is_none() {
        return Err(Problem::new(
            format_args!("{shown}: the layout in the recording has a fault"),
            "a date is a moment of the layout",
            "`clockspar verify` tells the fault; give the moment as a time since array time zero",
        ));
    }
    Ok(())
}

/// A frame answers for every moment up to the next one: what was asked for is said.
fn say_what_was_asked(report: &mut Report<'_>, asked: ArrayTime, found: ArrayTime) {
    report.scalars.push(Scalar {
        key: "asked_at_s",
        heading: "asked for",
        measure: Measure::Time,
        value: Cell::Time(asked),
    });
    if asked != found {
        report.remarks.push(what_was_asked(asked, found));
    }
}

fn what_was_asked(asked: ArrayTime, found: ArrayTime) -> String {
    format!("asked for {asked} s; the last frame at or before it is {found} s")
}

/// The report of a recording that holds no frame: what else there is.
fn without_frames<'a>(
    reader: &'a Reader<RecordingSource>,
    layout: Option<&'a Layout>,
) -> Report<'a> {
    const WHY: &str = "the recording holds no frame";
    let mut report = empty_report(reader.opening(), layout, WHY);
    let events = reader.lines().map_while(Result::ok).filter_map(|line| match line {
        Line::Event(event) => Some(event),
        Line::Frame(_) => None,
    });
    let mut events: Vec<Event> = events.take(MOST_EVENTS + 1).collect();
    report.remarks.push("The recording holds no frame.".to_owned());
    if events.len() > MOST_EVENTS {
        events.truncate(MOST_EVENTS);
        report.remarks.push(format!("Only the first {MOST_EVENTS} events are listed."));
    }
    report.tables.pop();
    report.tables.push(events_table(events));
    report
}

/// Events shown of a recording without a frame.
const MOST_EVENTS: usize = 10_000;

/// Why a frame that was listed is not shown.
const UNREADABLE: &str = "the frame cannot be read";

/// The report of no frame: it has no rows.
pub fn empty_report<'a>(
    opening: &'a Opening,
    layout: Option<&'a Layout>,
    why: &'static str,
) -> Report<'a> {
    let frame = Frame {
        index: 0,
        at: opening.from,
        reference_acceleration_m_s2: 0.0,
        rapidity: None,
        rate_minus_one: Column::default(),
        clock_offset_s: Column::default(),
        reading_s: opening.has_readings.then(Column::default),
    };
    let mut report = replay_report(opening, layout, frame, Vec::new());
    report.at = Err(why);
    report.reference_acceleration_m_s2 = Err(why);
    report.rapidity = Err(why);
    report.tables[0].rows = 0;
    report
}

/// What is told when a line cannot be read.
pub fn unread(shown: &str, fault: &ReadFault) -> Problem {
    let (rule, remedy) = match fault {
        ReadFault::Damaged(damage) if damage.what.contains("CRC") => (
            "every line agrees with its CRC",
            "`clockspar verify` tells what else is wrong; take a copy that was not altered",
        ),
        ReadFault::Damaged(_) => (
            "every line is a frame or an event in the form of a recording, with the columns of \
             the opening",
            "the line agrees with its CRC, so it was written like this: `clockspar verify` tells \
             what else is wrong; make the recording again",
        ),
        ReadFault::Io(_) => (
            "a recording stays readable while it is shown",
            "look at the disk and at who else writes the file",
        ),
    };
    Problem {
        status: STATUS_RULE,
        text: format!("{shown}: {fault}\nrule: {rule}\nremedy: {remedy}"),
    }
}
