//! The desk: the interactive front end.
//!
//! # How it holds together
//!
//! * A [`state::Desk`] changes by a [`message::Message`] and nothing else;
//!   [`state::Desk::update`] touches no file, no clock and no terminal. Wall time comes in
//!   as a message.
//! * What has to be done outside comes out as [`message::Effect`]s, which
//!   [`outside::Outside`] carries out; what comes of it goes in again as messages.
//! * [`screen::view`] is a function of the desk and an area into a buffer.
//! * The loop here owns the terminal, the files and the clock. At rest it sleeps.
//!
//! A view is one file in `views` and its entry there; keys and sentences are tables of
//! their own, by which the desk acts and from which its list of them is made.

mod changing;
mod chart;
mod completion;
mod drawn_line;
mod entry;
mod geometry;
mod head;
mod keys;
mod launch_chart;
mod message;
mod outside;
mod painter;
mod replaying;
mod running;
mod saving;
mod screen;
mod sentences;
mod state;
mod step;
mod table_pane;
#[cfg(test)]
mod tests;
mod update;
mod views;
mod words;

use std::sync::Arc;
use std::time::{Duration, Instant};

use clockspar::layout::Layout;
use clockspar::run::Run;
use clockspar::run::recording::Reader;

use super::arguments::{Look, When};
use super::problem::{Problem, STATUS_RULE};
use super::recording_file::RecordingSource;
use super::terminal::{ColourChoice, Ended, FramePace, GlyphChoice, Incoming, Options, Terminal};

use message::{Effect, Message, Notice, Wanted};
use outside::Outside;
use state::Desk;

/// The most frames drawn in a second; keys are answered at once after a rest.
const FRAMES_PER_SECOND: u32 = 20;

/// Opens the desk on a layout; returns the exit status.
pub fn run(layout: Layout, look: &Look) -> Result<u8, Problem> {
    let run = run_of(layout)?;
    let terminal = open_terminal(look)?;
    let desk = Desk::new(run, terminal.glyphs());
    attend(desk, Outside::new(), terminal)
}

/// Opens the desk on a recording; returns the exit status.
pub fn replay(reader: Reader<RecordingSource>, name: &str, look: &Look) -> Result<u8, Problem> {
    let layout = reader.layout().map_err(Problem::told)?;
    let disagreement = reader.opening().disagreement(&layout);
    let run = run_of(layout)?;
    let terminal = open_terminal(look)?;
    let mut desk = Desk::on_recording(run, name.to_owned(), terminal.glyphs());
    desk.notice = disagreement.map(|what| {
        let remedy =
            "`clockspar verify` tells more; `clockspar replay --as text` shows the numbers";
        Notice::refused(what, "frames are of the nodes of the layout in the recording", remedy)
    });
    attend(desk, Outside::replaying(reader), terminal)
}

fn run_of(layout: Layout) -> Result<Run, Problem> {
    Run::new(Arc::new(layout))
        .map_err(|fault| Problem::new(fault.what(), fault.rule(), fault.remedy()))
}

fn open_terminal(look: &Look) -> Result<Terminal, Problem> {
    let colour = match look.colour {
        None | Some(When::Auto) => ColourChoice::Auto,
        Some(When::Always) => ColourChoice::Always,
        Some(When::Never) => ColourChoice::Never,
    };
    let glyphs = match (look.ascii, look.unicode) {
        (true, _) => GlyphChoice::Ascii,
        (false, true) => GlyphChoice::Unicode,
        (false, false) => GlyphChoice::Auto,
    };
    Terminal::open(Options { colour, glyphs }).map_err(Problem::told)
}

/// Attends to the desk until it ends.
fn attend(mut desk: Desk, mut outside: Outside, mut terminal: Terminal) -> Result<u8, Problem> {
    if desk.replay.is_some() {
        let first = Effect::Read { wanted: Wanted::First, known: None };
        carry_out(&mut desk, &mut outside, vec![first]);
    }
    let ended = watch(&mut desk, &mut outside, &mut terminal);
    // The terminal first: closing a file may take its time.
    drop(terminal);
    tell(&mut desk, &mut outside, Message::Leaving);
    super::message(&summary(&desk));
    match ended {
        Ended::ByReader => {
            let is_damaged = desk.replay.is_some_and(|replay| replay.is_damaged);
            Ok(if is_damaged { STATUS_RULE } else { 0 })
        }
        Ended::ThreadPanicked => Ok(101),
        Ended::Signal(_) | Ended::TerminalLost => {
            // Ends the program by the signal.
            let _ = ended.finish();
            Ok(STATUS_RULE)
        }
    }
}

/// Draws, waits, takes in; returns why it ended.
fn watch(desk: &mut Desk, outside: &mut Outside, terminal: &mut Terminal) -> Ended {
    let mut pace = FramePace::per_second(FRAMES_PER_SECOND);
    let tick = Duration::from_secs(1) / running::TICKS_PER_SECOND;
    let mut is_stale = true;
    let mut ticked = Instant::now();
    loop {
        let to_draw = is_stale.then(|| pace.wait(Instant::now()));
        if to_draw == Some(Duration::ZERO) {
            if draw(desk, terminal).is_err() {
                return Ended::TerminalLost;
            }
            pace.drawn(Instant::now());
            is_stale = false;
            continue;
        }
        let to_tick = desk.running.map(|_| tick.saturating_sub(ticked.elapsed()));
        let wait = [to_draw, to_tick, outside.sync_due_in()].into_iter().flatten().min();
        let was_running = desk.running;
        let mut incoming = terminal.recv(wait);
        while let Some(news) = incoming {
            is_stale = true;
            match take_in(desk, outside, news) {
                Heard::Ended(ended) => return ended,
                // Time in which the program was stopped does not count.
                Heard::Resumed => ticked = Instant::now(),
                Heard::Nothing => {}
            }
            incoming = terminal.try_recv();
        }
        if desk.running.map(|running| running.from) != was_running.map(|running| running.from) {
            ticked = Instant::now();
        } else if desk.running.is_some() && ticked.elapsed() >= tick {
            let elapsed = ticked.elapsed();
            ticked = Instant::now();
            let before = desk.at;
            tell(desk, outside, Message::Elapsed(elapsed));
            is_stale |= desk.at != before || desk.running.is_none();
        }
        for message in outside.sync_if_due() {
            is_stale = true;
            tell(desk, outside, message);
        }
    }
}

/// What news means for the loop.
enum Heard {
    Nothing,
    Resumed,
    Ended(Ended),
}

fn take_in(desk: &mut Desk, outside: &mut Outside, news: Incoming) -> Heard {
    let message = match news {
        Incoming::Key(key) => Message::Key(key),
        Incoming::Paste(text) => Message::Paste(text),
        Incoming::Resized => Message::Resized,
        Incoming::Resumed => return Heard::Resumed,
        Incoming::Ended(ended) => return Heard::Ended(ended),
    };
    if tell(desk, outside, message) { Heard::Ended(Ended::ByReader) } else { Heard::Nothing }
}

/// Gives the desk a message and does what it asks for; true when it asks to be left.
fn tell(desk: &mut Desk, outside: &mut Outside, message: Message) -> bool {
    let effects = desk.update(message);
    carry_out(desk, outside, effects)
}

fn carry_out(desk: &mut Desk, outside: &mut Outside, effects: Vec<Effect>) -> bool {
    let mut leaves = false;
    for effect in effects {
        leaves |= matches!(effect, Effect::Leave);
        for message in outside.carry_out(desk, effect) {
            leaves |= tell(desk, outside, message);
        }
    }
    leaves
}

fn draw(desk: &mut Desk, terminal: &mut Terminal) -> std::io::Result<()> {
    let mut size = desk.size;
    terminal.draw(|frame| {
        let area = frame.area();
        size = (area.width, area.height);
        if let Some(cursor) = screen::view(desk, area, frame.buffer_mut()) {
            frame.set_cursor_position(cursor);
        }
    })?;
    if size != desk.size {
        desk.update(Message::Sized { width: size.0, height: size.1 });
    }
    Ok(())
}

/// What stands on the normal screen after the desk has been left.
fn summary(desk: &Desk) -> String {
    let layout = desk.layout();
    let revision = match &layout.revision {
        Some(revision) => format!(", revision {revision}"),
        None => String::new(),
    };
    let mut lines = vec![format!("{}{revision}: left at {}", layout.name, words::moment(desk.at))];
    if let Some(replay) = &desk.replay {
        let frame = replay
            .frame
            .as_ref()
            .map_or_else(|| "no frame shown".to_owned(), |frame| format!("frame {}", frame.index));
        lines.push(format!("{}: {frame}; {}", replay.path, replay.particulars));
    }
    for made in &desk.made {
        let state = if made.is_whole { "closed" } else { "cut: it has no closing line" };
        lines.push(format!(
            "recorded {}: {}, {}, {state}",
            made.path,
            words::count(made.frames, "frame"),
            words::count(made.events, "event")
        ));
    }
    lines.join("\n")
}
