//! `replay --follow`: the frames of a recording as they are written.

use std::fs;
use std::io::{self, ErrorKind, Write};
use std::os::unix::fs::MetadataExt;
use std::path::Path;
use std::rc::Rc;
use std::thread;
use std::time::{Duration, Instant};

use clockspar::layout::Layout;
use clockspar::model::array_time::ArrayTime;
use clockspar::run::Event;
use clockspar::run::recording::{
    Condition, Frame, Line, OpenFault, Opening, ReadAt, ReadFault, Reader,
};
use clockspar::table::content::replay_report;

use super::choice::{Choice, LineShown, Nodes};
use super::recordings::{LARGEST_PIPED, open, unopened};
use super::replay::{empty_report, layout_of, unread};
use super::show::{Asked, Blocks};
use crate::program::arguments::ReplayArguments;
use crate::program::moments::Moments;
use crate::program::output::Output;
use crate::program::problem::Problem;
use crate::program::recording_file::{LONGEST_PIPED_OPENING, RecordingSource, open_recording};
use crate::program::{files, message};

/// How long to wait before looking again.
const LOOK_EVERY: Duration = Duration::from_millis(250);

/// How long nothing may come before that is told, unless frames have come more slowly.
const QUIET: Duration = Duration::from_secs(3);

/// `clockspar replay FILE --follow`: prints every frame there is, then each one that is
/// appended, until the closing line.
pub fn follow(arguments: &ReplayArguments) -> Result<u8, Problem> {
    let shown = files::shown_name(&arguments.file);
    let mut reader = open_when_begun(&arguments.file, &shown)?;
    let opening = reader.opening().clone();
    let layout = layout_of(&reader, &shown);
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
        last: None,
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
        Ok(Ending::Removed) => message(&format!(
            "warning: {shown}: the file has been removed while it was followed; shown up to there"
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
    let (mut pause, mut size) = (Pause::new(), None);
    loop {
        let now = fs::metadata(path).ok().filter(fs::Metadata::is_file).map(|held| held.len());
        // A first line is looked through again only when there is more of it.
        if now.is_none() || now != size {
            size = now;
            pause.came();
            match open_recording(path, LARGEST_PIPED) {
                Ok(reader) => return Ok(reader),
                Err(OpenFault::NoOpening { is_unfinished: true, .. })
                    if now.is_some_and(|size| size <= LONGEST_PIPED_OPENING) => {}
                Err(fault) => return Err(unopened(shown, &fault)),
            }
        }
        if pause.is_to_be_told() {
            message(&format!("{shown}: its first line has no end yet; still waiting"));
        }
        thread::sleep(LOOK_EVERY);
    }
}

/// A time in which nothing comes.
struct Pause {
    since: Instant,
    /// The longest one so far that came to an end: whoever writes seldom is no news.
    longest: Duration,
    is_told: bool,
}

impl Pause {
    fn new() -> Pause {
        Pause { since: Instant::now(), longest: Duration::ZERO, is_told: false }
    }

    /// Something has come.
    fn came(&mut self) {
        self.longest = self.longest.max(self.since.elapsed());
        self.since = Instant::now();
        self.is_told = false;
    }

    /// Whether it has become long, the first time this is asked.
    fn is_to_be_told(&mut self) -> bool {
        let is_long = self.since.elapsed() >= QUIET.max(2 * self.longest);
        is_long && !std::mem::replace(&mut self.is_told, true)
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
    /// No file has its name any more.
    Removed,
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
    let shown = files::shown_name(path);
    let mut pause = Pause::new();
    loop {
        if printer.print(reader, out)? {
            pause.came();
        }
        if matches!(reader.condition(), Condition::Whole(_)) {
            return Ok(Ending::Closed);
        }
        let RecordingSource::File(file) = reader.source() else { return Ok(Ending::Cut) };
        // Looked at before waiting, so that what was written last is still printed.
        let named = Named::of(file, path);
        thread::sleep(LOOK_EVERY);
        let is_changed =
            reader.refresh().map_err(|error| Stopped::Reading(ReadFault::Io(error)))?;
        let size = reader.source().size().unwrap_or_default();
        if size < printer.next_byte {
            let error = io::Error::other("the file has become shorter while it was followed");
            return Err(Stopped::Reading(ReadFault::Io(error)));
        }
        match named {
            _ if is_changed => {}
            Named::TheSame => {}
            Named::Another => return Ok(Ending::Replaced),
            Named::Nothing => return Ok(Ending::Removed),
        }
        if pause.is_to_be_told() {
            let since = match printer.last {
                Some(last) => format!("no new frame since {last} s"),
                None => "no frame yet".to_owned(),
            };
            message(&format!("{shown}: {since}; still waiting"));
        }
    }
}

/// What a name stands for.
enum Named {
    /// The open file.
    TheSame,
    /// Another file.
    Another,
    /// No file.
    Nothing,
}

impl Named {
    fn of(file: &fs::File, path: &Path) -> Named {
        match (file.metadata(), fs::metadata(path)) {
            (Ok(held), Ok(named)) if (held.dev(), held.ino()) != (named.dev(), named.ino()) => {
                Named::Another
            }
            (_, Err(error)) if error.kind() == ErrorKind::NotFound => Named::Nothing,
            // What cannot be told now may be told later.
            _ => Named::TheSame,
        }
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
    /// The moment of the last frame printed.
    last: Option<ArrayTime>,
}

impl Printer<'_> {
    /// Prints what has been written since; says whether there was a frame.
    fn print(
        &mut self,
        reader: &Reader<RecordingSource>,
        out: &mut dyn Write,
    ) -> Result<bool, Stopped> {
        let before = self.last;
        let mut lines = reader.lines_at(self.next_byte);
        while let Some(line) = lines.next() {
            match line.map_err(Stopped::Reading)? {
                Line::Event(event) => self.events.push(event),
                Line::Frame(frame) => self.frame(&frame, out).map_err(Stopped::Output)?,
            }
            self.next_byte = lines.next_byte();
        }
        Ok(self.last != before)
    }

    fn frame(&mut self, frame: &Frame, out: &mut dyn Write) -> io::Result<()> {
        let events = std::mem::take(&mut self.events);
        self.last = Some(frame.at);
        let (opening, layout) = (self.opening, self.layout);
        let report = |_: ArrayTime| replay_report(opening, layout, frame.clone(), events.clone());
        self.blocks.append(frame.at, &report, out)
    }
}
