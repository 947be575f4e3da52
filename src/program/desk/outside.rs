//! The hands of the desk: what it asks for is carried out here, and nowhere else.

use std::path::{Path, PathBuf};
use std::time::{Duration, Instant};

use clockspar::model::array_time::ArrayTime;
use clockspar::run::Run;
use clockspar::run::recording::{
    Condition, Opening, ReadFault, Reader, RecordFault, Recorder, Seek, WriteFault,
};

use crate::program::output::Output;
use crate::program::problem::room_for;
use crate::program::recording_file::{RecordingFile, RecordingSource};
use crate::program::whole_file::CreateFault;

use super::message::{Effect, Made, Message, Notice, Reading, Wanted};
use super::state::Desk;
use super::words;

/// How long a line waits at most to be on the disk.
const SYNC_AFTER: Duration = Duration::from_secs(1);
/// How many names are tried for the next recording.
const MOST_NAMES: u32 = 10_000;

/// The files the desk has open.
#[derive(Debug, Default)]
pub struct Outside {
    recording: Option<(String, Recorder<RecordingFile>)>,
    /// When the first line was written that may not be on the disk yet.
    unsynced: Option<Instant>,
    reader: Option<Reader<RecordingSource>>,
    /// When it was last seen to have grown.
    grown: Option<Instant>,
}

impl Outside {
    /// Nothing open.
    pub fn new() -> Outside {
        Outside::default()
    }

    /// With a recording to replay.
    pub fn replaying(reader: Reader<RecordingSource>) -> Outside {
        Outside { reader: Some(reader), ..Outside::default() }
    }

    /// Does what was asked for; returns what has come of it.
    pub fn carry_out(&mut self, desk: &Desk, effect: Effect) -> Vec<Message> {
        match effect {
            // The loop ends the desk.
            Effect::Leave => Vec::new(),
            Effect::OpenRecording { path } => self.open(desk, &path),
            Effect::NextRecording { after } => self.open_next(desk, &after),
            Effect::Frame { at } => self.write(&desk.run, at),
            Effect::CloseRecording { run, last } => self.close(&run, last),
            Effect::Save { path, text, left_out } => {
                vec![Message::Told(save(&path, &text, left_out))]
            }
            Effect::Read { wanted, known } => self.read(wanted, known),
        }
    }

    fn open(&mut self, desk: &Desk, path: &str) -> Vec<Message> {
        match RecordingFile::create(Path::new(path), false) {
            Ok(file) => self.begin(desk, path.to_owned(), file),
            Err(fault) => vec![Message::RecordingFailed(not_created(path, &fault))],
        }
    }

    fn open_next(&mut self, desk: &Desk, after: &str) -> Vec<Message> {
        for number in 2..MOST_NAMES {
            let path = numbered(after, number);
            match RecordingFile::create(&path, false) {
                Ok(file) => return self.begin(desk, path.display().to_string(), file),
                Err(CreateFault::Exists) => {}
                Err(fault) => {
                    let path = path.display().to_string();
                    return vec![Message::RecordingFailed(not_created(&path, &fault))];
                }
            }
        }
        vec![Message::RecordingFailed(not_created(after, &CreateFault::Exists))]
    }

    fn begin(&mut self, desk: &Desk, path: String, file: RecordingFile) -> Vec<Message> {
        let opening = Opening::of(desk.layout(), desk.at, None, None);
        match Recorder::open(file, &opening) {
            Ok(recorder) => {
                self.recording = Some((path.clone(), recorder));
                vec![Message::RecordingOpened { path }]
            }
            Err(fault) => vec![Message::RecordingFailed(not_written(&path, &fault))],
        }
    }

    fn write(&mut self, run: &Run, at: ArrayTime) -> Vec<Message> {
        let Some((_, recorder)) = &mut self.recording else { return Vec::new() };
        self.unsynced.get_or_insert_with(Instant::now);
        match recorder.frame(run, at, None) {
            Ok(()) => Vec::new(),
            Err(fault) => self.fail(&fault),
        }
    }

    fn close(&mut self, run: &Run, last: Option<ArrayTime>) -> Vec<Message> {
        if let Some(at) = last {
            let messages = self.write(run, at);
            if !messages.is_empty() {
                return messages;
            }
        }
        let Some((path, mut recorder)) = self.recording.take() else { return Vec::new() };
        self.unsynced = None;
        let (frames, events) = (recorder.writer().frames(), recorder.writer().events());
        let closed = recorder.close();
        let made = Made { path: path.clone(), frames, events, is_whole: closed.is_ok() };
        let mut messages = vec![Message::RecordingClosed { made }];
        if let Err(fault) = closed {
            messages.push(Message::Told(not_written(&path, &fault)));
        }
        messages
    }

    /// The recording ends here; what is written of it stays.
    fn fail(&mut self, fault: &RecordFault) -> Vec<Message> {
        let Some((path, mut recorder)) = self.recording.take() else { return Vec::new() };
        self.unsynced = None;
        let (frames, events) = (recorder.writer().frames(), recorder.writer().events());
        let notice = match fault {
            RecordFault::Run(fault) => fault.clone().into(),
            RecordFault::Write(fault) => not_written(&path, fault),
        };
        let made = Made { path, frames, events, is_whole: false };
        vec![Message::RecordingClosed { made }, Message::RecordingFailed(notice)]
    }

    /// How long until lines have to be on the disk; `None` when all are.
    pub fn sync_due_in(&self) -> Option<Duration> {
        self.unsynced.map(|since| SYNC_AFTER.saturating_sub(since.elapsed()))
    }

    /// Puts lines on the disk that have waited for a second.
    pub fn sync_if_due(&mut self) -> Vec<Message> {
        let is_due = self.unsynced.is_some_and(|since| since.elapsed() >= SYNC_AFTER);
        let Some((_, recorder)) = self.recording.as_mut().filter(|_| is_due) else {
            return Vec::new();
        };
        self.unsynced = None;
        match recorder.writer().sink_mut().sync_if_due() {
            Ok(()) => Vec::new(),
            Err(error) => self.fail(&RecordFault::Write(WriteFault::Io(error))),
        }
    }

    fn read(&mut self, wanted: Wanted, known: Option<ArrayTime>) -> Vec<Message> {
        let Some(reader) = &mut self.reader else { return Vec::new() };
        // It may be one that is still being written.
        if reader.refresh().unwrap_or(false) {
            self.grown = Some(Instant::now());
        }
        let condition = match reader.condition() {
            // Whether it is whole besides, only reading all of it would tell.
            Condition::Whole(_) => "closed",
            Condition::Cut(_) if has_grown_lately(reader.source(), self.grown) => "growing",
            Condition::Cut(_) => "cut",
            Condition::Damaged(_) => "damaged",
        };
        let mut particulars = match reader.condition() {
            Condition::Whole(closing) => format!(
                "the recording is closed: {}, {}; `clockspar verify` reads every line",
                words::count(closing.frames, "frame"),
                words::count(closing.events, "event")
            ),
            other => other.to_string(),
        };
        if condition == "growing" {
            particulars = format!("{particulars}; it has grown lately and may still be written");
        }
        let mut reading = Reading {
            frame: None,
            events: Vec::new(),
            condition: (condition, particulars),
            damage: None,
            last: reader.last_moment().ok().flatten(),
        };
        let found = match wanted {
            Wanted::First => reader.first_frame(),
            Wanted::After(at) => reader.frame(Seek::After, at),
            Wanted::Before(at) => reader.frame(Seek::Before, at),
            Wanted::At(at) => reader.frame(Seek::AtOrBefore, at),
            Wanted::Newest => reader.last_frame(),
        };
        match found {
            Ok(frame) => reading.frame = frame,
            Err(fault) => reading.damage = Some(told(&fault)),
        }
        if let Some(until) = reading.frame.as_ref().map(|frame| frame.at)
            && known.is_none_or(|known| known < until)
        {
            let events = match known {
                None => reader.events_until(until),
                Some(known) => {
                    let next = ArrayTime::from_attoseconds(known.attoseconds() + 1);
                    reader.events_between(next, until)
                }
            };
            match events {
                Ok(events) => {
                    for event in events {
                        match event {
                            Ok(event) => reading.events.push(event),
                            Err(fault) => reading.damage = Some(told(&fault)),
                        }
                    }
                }
                Err(error) => reading.damage = Some(error.to_string()),
            }
        }
        vec![Message::Read(Box::new(reading))]
    }
}

/// How long after it has grown a recording counts as one that is being written.
const LATELY: Duration = Duration::from_secs(30);

/// Whether a recording without its closing line may be one that is being written.
fn has_grown_lately(source: &RecordingSource, grown: Option<Instant>) -> bool {
    let RecordingSource::File(file) = source else { return false };
    let changed = file.metadata().and_then(|metadata| metadata.modified()).ok();
    let age = changed.and_then(|changed| changed.elapsed().ok());
    grown.is_some_and(|grown| grown.elapsed() < LATELY) || age.is_some_and(|age| age < LATELY)
}

fn told(fault: &ReadFault) -> String {
    fault.to_string()
}

/// The name of a file with a number before its ending: `run-2.jsonl`.
fn numbered(path: &str, number: u32) -> PathBuf {
    let path = Path::new(path);
    let stem = path.file_stem().map(|stem| stem.to_string_lossy().into_owned()).unwrap_or_default();
    // A name that has a number already gets the next one instead of a second.
    let base = match stem.rsplit_once('-') {
        Some((base, digits))
            if !base.is_empty() && digits.len() < 6 && digits.parse::<u32>().is_ok() =>
        {
            base
        }
        _ => &stem,
    };
    let mut name = format!("{base}-{number}");
    if let Some(ending) = path.extension() {
        name = format!("{name}.{}", ending.to_string_lossy());
    }
    path.with_file_name(name)
}

fn not_created(path: &str, fault: &CreateFault) -> Notice {
    let (what, remedy) = match fault {
        CreateFault::Exists => (format!("{path} exists already"), "another name"),
        CreateFault::NotAFile => (format!("{path} is no ordinary file"), "another name"),
        CreateFault::IsRead => (format!("{path} is being read"), "another name"),
        CreateFault::Io(error) => {
            (format!("{path} cannot be created: {error}"), "another place, or its permissions")
        }
    };
    Notice::refused(what, "a recording is a new file", remedy)
}

fn not_written(path: &str, fault: &WriteFault) -> Notice {
    let room = match fault {
        WriteFault::Io(error) => room_for(error),
        _ => "make room",
    };
    Notice::refused(
        format!("{path} could not be written on: {fault}"),
        "lines written before are whole and stay; the recording ends there",
        format!("{room}, then `record to FILE` with another name"),
    )
}

/// Writes a layout to a new file, whole or not at all.
fn save(path: &str, text: &str, left_out: usize) -> Notice {
    let saved = Output::open(Some(Path::new(path)), false)
        .and_then(|output| output.write(|out| std::io::Write::write_all(out, text.as_bytes())));
    match saved {
        Ok(()) if left_out == 0 => Notice::said(format!("saved as {path}")),
        Ok(()) => Notice::said(format!(
            "saved as {path} without {}: a layout cannot hold moves, releases and failed links",
            words::count(left_out as u64, "change")
        )),
        Err(problem) => {
            let mut lines = problem.text.lines();
            let what = lines.next().unwrap_or("it could not be saved").to_owned();
            Notice::refused(what, "a layout is saved as a new file", "another name or place")
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_next_recording_counts_on() {
        let name = |path, number| numbered(path, number).display().to_string();
        assert_eq!(name("run.jsonl", 2), "run-2.jsonl");
        assert_eq!(name("run-2.jsonl", 3), "run-3.jsonl");
        assert_eq!(name("sea-trial.jsonl", 2), "sea-trial-2.jsonl");
        assert_eq!(name("logs/run", 2), "logs/run-2");
        assert_eq!(name("-7", 2), "-7-2");
    }
}
