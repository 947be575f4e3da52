//! `replay --follow`: the frames of a recording as they are written.

use std::fs;
use std::io::{self, ErrorKind, Write};
use std::os::unix::fs::MetadataExt;
use std::path::Path;
use std::rc::Rc;
use std::thread;
use std::time::Duration;

use clockspar::layout::Layout;
use clockspar::model::array_time::ArrayTime;
use clockspar::run::Event;
use clockspar::run::recording::{
    Condition, Frame, Line, OpenFault, Opening, ReadAt, ReadFault, Reader,
};
use clockspar::table::content::replay_report;

use super::choice::{Choice, LineShown, Nodes};
use super::recordings::{LARGEST_PIPED, open, unopened};
use super::replay::{empty_report, unread};
use super::show::{Asked, Blocks};
use crate::program::arguments::ReplayArguments;
use crate::program::moments::Moments;
use crate::program::output::Output;
use crate::program::problem::Problem;
use crate::program::recording_file::{RecordingSource, open_recording};
use crate::program::{files, message};

/// How long to wait before looking again.
const LOOK_EVERY: Duration = Duration::from_millis(250);

/// `clockspar replay FILE --follow`: prints every frame there is, then each one that is
/// appended, until the closing line.
pub fn follow(arguments: &ReplayArguments) -> Result<u8, Problem> {
    let shown = files::shown_name(&arguments.file);
    let mut reader = open_when_begun(&arguments.file, &shown)?;
    let opening = reader.opening().clone();
    let layout = reader.layout().ok();
    let output = Output::open(None, false)?;
    let asked = Asked {
        moments: &Moments::One(opening.from),
        options: &arguments.moments,
        line: LineShown {
            nodes: Nodes::Listed(&opening.nodes),
            epoch: layout.as_ref().and_then(|layout| layout.epoch.as_ref()),
        },
    };
    let mut choice = Choice::of(&arguments.output, &asked)?;
    choice.settle(empty_report(&opening, layout.as_ref(), "nothing has been read yet"))?;
    let choice = Rc::new(choice);
    let options = choice.text_options(&output);
    let printer = Printer {
        opening: &opening,
        layout: layout.as_ref(),
        blocks: Blocks::new(arguments.output.form(), options, &choice, "--follow")?,
        events: Vec::new(),
        next_byte: 0,
    };
    let mut ended = Ok(Ending::Closed);
    output.write(|out| {
        ended = watch(&mut reader, &arguments.file, printer, out);
        match &mut ended {
            // What stands against printing is told as for every output.
            Err(Stopped::Output(error)) => Err(std::mem::replace(error, ErrorKind::Other.into())),
            _ => Ok(()),
        }
    })?;
    match ended {
        Ok(Ending::Closed) => {}
        Ok(Ending::Cut) => {
            message(&format!("warning: {shown}: {}; there is no more of it", reader.condition()));
        }
        Ok(Ending::Replaced) => message(&format!(
            "warning: {shown}: the file of that name is another one now; shown up to there"
        )),
        Err(Stopped::Reading(fault)) => return Err(unread(&shown, &fault)),
        Err(Stopped::Output(_)) => {}
    }
    Ok(0)
}

/// Opens a recording, waiting for its first line when that is being written.
fn open_when_begun(path: &Path, shown: &str) -> Result<Reader<RecordingSource>, Problem> {
    if path == Path::new("-") {
        return open(path);
    }
    loop {
        match open_recording(path, LARGEST_PIPED) {
            Ok(reader) => return Ok(reader),
            Err(OpenFault::NoOpening { is_unfinished: true, .. })
                if fs::metadata(path).is_ok_and(|metadata| metadata.is_file()) =>
            {
                thread::sleep(LOOK_EVERY);
            }
            Err(fault) => return Err(unopened(shown, &fault)),
        }
    }
}

/// How following a recording comes to its end.
enum Ending {
    /// Its closing line has been written.
    Closed,
    /// It came through a pipe that has ended without a closing line.
    Cut,
    /// Another file has taken its name.
    Replaced,
}

/// What stops it before.
enum Stopped {
    Reading(ReadFault),
    Output(io::Error),
}

fn watch(
    reader: &mut Reader<RecordingSource>,
    path: &Path,
    mut printer: Printer<'_>,
    out: &mut dyn Write,
) -> Result<Ending, Stopped> {
    loop {
        printer.print(reader, out)?;
        if matches!(reader.condition(), Condition::Whole(_)) {
            return Ok(Ending::Closed);
        }
        let RecordingSource::File(file) = reader.source() else { return Ok(Ending::Cut) };
        // Looked at before waiting, so that what was written last is still printed.
        let is_replaced = !is_same_file(file, path);
        thread::sleep(LOOK_EVERY);
        let is_changed =
            reader.refresh().map_err(|error| Stopped::Reading(ReadFault::Io(error)))?;
        let size = reader.source().size().unwrap_or_default();
        if size < printer.next_byte {
            let error = io::Error::other("the file has become shorter while it was followed");
            return Err(Stopped::Reading(ReadFault::Io(error)));
        }
        if is_replaced && !is_changed {
            return Ok(Ending::Replaced);
        }
    }
}

/// Whether a name still stands for an open file. A file that has been deleted while it is
/// written is followed on.
fn is_same_file(file: &fs::File, path: &Path) -> bool {
    match (file.metadata(), fs::metadata(path)) {
        (Ok(held), Ok(named)) => (held.dev(), held.ino()) == (named.dev(), named.ino()),
        _ => true,
    }
}

/// Prints frames with the events before them.
struct Printer<'a> {
    opening: &'a Opening,
    layout: Option<&'a Layout>,
    blocks: Blocks<'a>,
    /// Events read since the last frame.
    events: Vec<Event>,
    /// Where the first line begins that has not been read.
    next_byte: u64,
}

impl Printer<'_> {
    fn print(
        &mut self,
        reader: &Reader<RecordingSource>,
        out: &mut dyn Write,
    ) -> Result<(), Stopped> {
        let mut lines = reader.lines_at(self.next_byte);
        while let Some(line) = lines.next() {
            match line.map_err(Stopped::Reading)? {
                Line::Event(event) => self.events.push(event),
                Line::Frame(frame) => self.frame(&frame, out).map_err(Stopped::Output)?,
            }
            self.next_byte = lines.next_byte();
        }
        Ok(())
    }

    fn frame(&mut self, frame: &Frame, out: &mut dyn Write) -> io::Result<()> {
        let events = std::mem::take(&mut self.events);
        let (opening, layout) = (self.opening, self.layout);
        let report = |_: ArrayTime| replay_report(opening, layout, frame.clone(), events.clone());
        self.blocks.append(frame.at, &report, out)
    }
}
