//! The commands `record` and `verify`, and what all commands on recordings share.

use std::io::ErrorKind;
use std::path::Path;
use std::sync::Arc;
use std::sync::atomic::{AtomicUsize, Ordering};

use clockspar::layout::Layout;
use clockspar::model::array_time::ArrayTime;
use clockspar::run::recording::{
    self, Ended, OpenFault, Opening, Reader, RecordFault, Recorder, Schedule, WriteFault,
};
use clockspar::table::content::verify_report;
use signal_hook::consts::{SIGHUP, SIGINT, SIGTERM};

use super::choice::{LineShown, Nodes, date_note};
use super::show::{Asked, show};
use super::{run_of, warn_of_broken_rules};
use crate::program::arguments::{
    Form, MomentArguments, OutputArguments, RecordArguments, VerifyArguments,
};
use crate::program::moments::{self, Moments};
use crate::program::problem::{Problem, STATUS_RULE, room_for};
use crate::program::recording_file::{RecordingFile, RecordingSource, open_recording};
use crate::program::terminal::die_by;
use crate::program::{files, message, output};

/// Most bytes of a recording that come through a pipe and are held in memory.
pub const LARGEST_PIPED: u64 = 1 << 30;

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
    if let (Some(given), Some(epoch)) = (Moments::date_given(&dates), &run.layout().epoch) {
        message(&format!("{shown}: {}", date_note(epoch, given)));
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
    RecordingFile::create(path, replace).map_err(|fault| output::not_created(path, &fault))
}

fn failed_record(shown: &str, fault: &RecordFault) -> Problem {
    match fault {
        RecordFault::Run(fault) => {
            Problem::new(format_args!("{shown}: {fault}"), fault.rule(), fault.remedy())
        }
        RecordFault::Write(fault) => {
            let room = match fault {
                WriteFault::Io(error) => room_for(error),
                _ => "make room",
            };
            Problem::new(
                format_args!("{shown} could not be written on: {fault}"),
                "every line written before is whole and stays",
                format_args!(
                    "{room} or choose another place with --out; `clockspar replay` shows what \
                     is there"
                ),
            )
        }
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
    opened.map_err(|fault| unopened(&shown, &fault))
}

/// What is told when a recording cannot be opened.
pub fn unopened(shown: &str, fault: &OpenFault) -> Problem {
    let remedy = match fault {
        OpenFault::NoOpening { .. } => "name a file that `clockspar record` or the desk wrote",
        OpenFault::Newer { .. } => "open it with the version of clockspar that wrote it",
        OpenFault::Io(error) if error.kind() == ErrorKind::FileTooLarge => {
            "give the recording by the name of its file"
        }
        OpenFault::Io(_) => "check the name and the permissions",
    };
    Problem::new(
        format_args!("{shown}: {fault}"),
        "a recording begins with a readable opening line of a known format",
        remedy,
    )
}

/// `clockspar verify`.
pub fn verify(arguments: &VerifyArguments) -> Result<u8, Problem> {
    let reader = open(&arguments.file)?;
    let shown = files::shown_name(&arguments.file);
    let layout: Option<Layout> = reader.layout().ok();
    let verdict =
        recording::verify(reader.source(), None).map_err(|fault| unopened(&shown, &fault))?;
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
