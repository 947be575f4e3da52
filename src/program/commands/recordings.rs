//! The commands on recordings: `record`, `replay`, `verify`.

use std::io::IsTerminal;
use std::path::Path;
use std::sync::Arc;
use std::sync::atomic::{AtomicUsize, Ordering};

use clockspar::layout::Layout;
use clockspar::model::array_time::ArrayTime;
use clockspar::run::Run;
use clockspar::run::recording::{
    self, Condition, Ended, Frame, Line, OpenFault, Opening, ReadFault, Reader, RecordFault,
    Recorder, Schedule, Seek,
};
use clockspar::table::Report;
use clockspar::table::content::{replay_report, verify_report};
use signal_hook::consts::{SIGHUP, SIGINT, SIGTERM};

use super::choice::{DATE_NOTE, LineShown, Nodes};
use super::show::{Asked, show};
use super::{run_of, warn_of_broken_rules};
use crate::program::arguments::{
    Form, MomentArguments, OutputArguments, RecordArguments, ReplayArguments, VerifyArguments,
};
use crate::program::moments::{self, Moments};
use crate::program::problem::{Problem, STATUS_RULE};
use crate::program::recording_file::{CreateFault, RecordingFile, RecordingSource, open_recording};
use crate::program::terminal::die_by;
use crate::program::{desk, files, message, output, preferences};

/// Most bytes of a recording that come through a pipe and are held in memory.
const LARGEST_PIPED: u64 = 1 << 30;

/// `clockspar record`.
pub fn record(arguments: &RecordArguments) -> Result<u8, Problem> {
    let layout = files::load(&arguments.layout)?;
    let name = files::shown_name(&arguments.layout);
    let run = run_of(layout, &name)?;
    warn_of_broken_rules(&run, &name);
    let from = match &arguments.from {
        Some(text) => moments::moment("--from", text, run.layout())?,
        None => ArrayTime::ZERO,
    };
    let until = moments::moment("--until", &arguments.until, run.layout())?;
    let every = moments::step("--every", &arguments.every)?;
    let schedule = Schedule::new(from, every, until).map_err(|fault| {
        Problem::new(
            format_args!("--from {from} s --until {until} s --every {every} s"),
            fault,
            "give a first moment, a later last one, and a step",
        )
    })?;
    let interrupted = watch_signals()?;
    let file = create(&arguments.out, arguments.replace)?;
    let opening = Opening::of(run.layout(), from, Some(every), None);
    let shown = arguments.out.display().to_string();
    let failed = |error: RecordFault| failed_record(&shown, &error);
    let mut recorder = Recorder::open(file, &opening).map_err(|fault| failed(fault.into()))?;
    let mut may_go_on = || interrupted.load(Ordering::Relaxed) == 0;
    let ended =
        recording::record(&run, &schedule, &mut recorder, None, &mut may_go_on).map_err(failed)?;
    let (frames, events) = (recorder.writer().frames(), recorder.writer().events());
    recorder.close().map_err(|fault| failed(fault.into()))?;
    if ended == Ended::Stopped {
        message(&format!("interrupted: {shown} is closed after {frames} frames"));
        die_by(i32::try_from(interrupted.load(Ordering::Relaxed)).unwrap_or(SIGTERM));
    }
    message(&format!("{shown}: {frames} frames, {events} events"));
    let dates = MomentArguments {
        from: arguments.from.clone(),
        until: Some(arguments.until.clone()),
        ..MomentArguments::default()
    };
    if Moments::date_given(&dates).is_some() {
        message(&format!("{shown}: {DATE_NOTE}"));
    }
    Ok(0)
}

/// The last signal that asked the program to end, 0 before there is one.
fn watch_signals() -> Result<Arc<AtomicUsize>, Problem> {
    let flag = Arc::new(AtomicUsize::new(0));
    for signal in [SIGINT, SIGTERM, SIGHUP] {
        let number = usize::try_from(signal).unwrap_or_default();
        signal_hook::flag::register_usize(signal, Arc::clone(&flag), number).map_err(|error| {
            Problem::new(
                format_args!("signals cannot be caught: {error}"),
                "a recording is closed when it is interrupted",
                "try again, or look at the limits of the system",
            )
        })?;
    }
    Ok(flag)
}

/// Creates the file of a recording.
pub fn create(path: &Path, replace: bool) -> Result<RecordingFile, Problem> {
    RecordingFile::create(path, replace).map_err(|fault| match fault {
        CreateFault::Exists => output::exists(path),
        CreateFault::NotAFile => Problem::new(
            format_args!("{} is no ordinary file", path.display()),
            "a recording is written to a file",
            "choose another name for --out",
        ),
        CreateFault::Io(error) => Problem::writing(&path.display().to_string(), &error),
    })
}

fn failed_record(shown: &str, fault: &RecordFault) -> Problem {
    match fault {
        RecordFault::Run(fault) => {
            Problem::new(format_args!("{shown}: {fault}"), fault.rule(), fault.remedy())
        }
        RecordFault::Write(fault) => Problem::new(
            format_args!("{shown} could not be written on: {fault}"),
            "every line written before is whole and stays",
            "make room or choose another place with --out; `clockspar replay` shows what is there",
        ),
    }
}

/// Opens a recording for reading.
pub fn open(path: &Path) -> Result<Reader<RecordingSource>, Problem> {
    let shown = files::shown_name(path);
    let opened = if path == Path::new("-") {
        RecordingSource::take_in(std::io::stdin().lock(), LARGEST_PIPED)
            .map_err(OpenFault::Io)
            .and_then(Reader::open)
    } else {
        open_recording(path, LARGEST_PIPED)
    };
    opened.map_err(|fault| {
        let remedy = match fault {
            OpenFault::NoOpening { .. } => "name a file that `clockspar record` or the desk wrote",
            OpenFault::Newer { .. } => "open it with the version of clockspar that wrote it",
            OpenFault::Io(_) => "check the name and the permissions",
        };
        Problem::new(
            format_args!("{shown}: {fault}"),
            "a recording begins with a readable opening line of a known format",
            remedy,
        )
    })
}

/// The layout in a recording flown with its events, and the last moment recorded.
pub fn run_of_recording(path: &Path) -> Result<(Run, Vec<ArrayTime>), Problem> {
    let reader = open(path)?;
    let shown = files::shown_name(path);
    let mut run = run_of(reader.layout().map_err(Problem::told)?, &shown)?;
    let mut found = Vec::new();
    for line in reader.lines() {
        match line {
            Ok(Line::Frame(frame)) => found.push(frame.at),
            Ok(Line::Event(event)) => run.apply(event).map_err(|fault| {
                Problem::new(format_args!("{shown}: {fault}"), fault.rule(), fault.remedy())
            })?,
            Err(fault) => {
                message(&format!("warning: {shown}: {fault}; compared up to there"));
                break;
            }
        }
    }
    Ok((run, found))
}

/// `clockspar replay`: the desk on a terminal, a table elsewhere or when asked for.
pub fn replay(arguments: &ReplayArguments) -> Result<u8, Problem> {
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
    let (moments, damage) = if asked.at.is_some() || asked.every.is_some() {
        let layout = layout.as_ref().ok_or_else(|| unreadable_layout(&shown))?;
        (Moments::of(asked, layout)?, None)
    } else {
        let (found, damage) = frame_moments(reader)?;
        (Moments::Listed(found.into()), damage)
    };
    let mut moments = moments;
    if moments.count() == 0 {
        message(&format!("{shown} holds no frame"));
        return Ok(if damage.is_some() { STATUS_RULE } else { 0 });
    }
    // Moments asked for are answered by the frame in force: the last one at or before.
    if !matches!(moments, Moments::Listed(_)) {
        let mut found = Vec::new();
        for at in moments.iter() {
            let frame =
                reader.frame(Seek::AtOrBefore, at).map_err(|fault| unread(&shown, &fault))?;
            let frame = frame.ok_or_else(|| {
                Problem::new(
                    format_args!("{shown}: no frame at or before {at} s"),
                    "a moment of a recording is shown by the last frame at or before it",
                    "ask for a later moment",
                )
            })?;
            found.push(frame.at);
        }
        found.dedup();
        moments = match found.as_slice() {
            [single] => Moments::One(*single),
            _ => Moments::Listed(found.into()),
        };
    }
    let opening = reader.opening();
    let report = |at: ArrayTime| -> Report<'_> {
        let (frame, events) = frame_with_events(reader, at);
        replay_report(opening, layout.as_ref(), frame, events)
    };
    let epoch = layout.as_ref().and_then(|layout| layout.epoch.as_ref());
    let line = LineShown { nodes: Nodes::Listed(&opening.nodes), epoch };
    let asked = Asked { moments: &moments, options: asked, line };
    show(&asked, &arguments.output, &report)?;
    if let Some(damage) = damage {
        message(&format!("{shown}: {damage}; shown up to there"));
        return Ok(STATUS_RULE);
    }
    Ok(0)
}

/// The moments of all frames up to the first damage, and that damage.
fn frame_moments(
    reader: &Reader<RecordingSource>,
) -> Result<(Vec<ArrayTime>, Option<String>), Problem> {
    let mut found = Vec::new();
    for line in reader.lines() {
        match line {
            Ok(Line::Frame(frame)) => found.push(frame.at),
            Ok(Line::Event(_)) => {}
            Err(ReadFault::Damaged(damage)) => return Ok((found, Some(damage.to_string()))),
            Err(fault) => return Err(unread("the recording", &fault)),
        }
    }
    Ok((found, None))
}

/// The frame of a moment, and the events since the frame before it.
///
/// A file that changes under the reader shows as a frame without numbers.
fn frame_with_events(
    reader: &Reader<RecordingSource>,
    at: ArrayTime,
) -> (Frame, Vec<clockspar::run::Event>) {
    let frame = reader.frame(Seek::AtOrBefore, at).ok().flatten().unwrap_or_else(|| Frame {
        index: 0,
        at,
        reference_acceleration_m_s2: 0.0,
        rapidity: None,
        rate_minus_one: Vec::new(),
        clock_offset_s: Vec::new(),
        reading_s: None,
    });
    let before = reader.frame(Seek::Before, at).ok().flatten();
    let since = before
        .map_or(ArrayTime::from_attoseconds(-ArrayTime::LIMIT.attoseconds()), |before| {
            ArrayTime::from_attoseconds(before.at.attoseconds() + 1)
        });
    let events = reader
        .events_between(since, at)
        .map(|events| events.filter_map(Result::ok).collect())
        .unwrap_or_default();
    (frame, events)
}

fn unread(shown: &str, fault: &ReadFault) -> Problem {
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

/// `clockspar verify`.
pub fn verify(arguments: &VerifyArguments) -> Result<u8, Problem> {
    let reader = open(&arguments.file)?;
    let shown = files::shown_name(&arguments.file);
    let layout: Option<Layout> = reader.layout().ok();
    let verdict = recording::verify(reader.source(), None).map_err(|fault| {
        Problem::new(
            format_args!("{shown}: {fault}"),
            "a recording begins with a readable opening line of a known format",
            "name a file that `clockspar record` or the desk wrote",
        )
    })?;
    let mut output: OutputArguments = arguments.output.clone();
    let opening = reader.opening();
    if output.form() == Form::Text && output.table.is_none() && output.columns.is_none() {
        // As text the verdict already stands above the table.
        output.table = Some("findings".to_owned());
    }
    let report = |_| verify_report(opening, layout.as_ref(), &verdict);
    let asked = Asked {
        moments: &Moments::One(ArrayTime::ZERO),
        options: &MomentArguments::default(),
        line: LineShown { nodes: Nodes::None, epoch: None },
    };
    show(&asked, &output, &report)?;
    Ok(if verdict.is_good() { 0 } else { STATUS_RULE })
}
