//! The thread that hears signals, and the ways to end.
//!
//! Signals have a thread of their own. A flag that the main loop looks at would not
//! do: reading keys from a line that has dropped may never return.

use std::io;
use std::process::ExitCode;
use std::sync::atomic::{AtomicBool, Ordering};
use std::sync::mpsc::Sender;
use std::thread;
use std::time::{Duration, Instant};

use signal_hook::consts::{SIGCONT, SIGHUP, SIGINT, SIGQUIT, SIGTERM, SIGTSTP, SIGWINCH};
use signal_hook::iterator::Signals;
use signal_hook::low_level;

use super::events::{Incoming, Report};
use super::guard;

/// How long the main thread may take to act on the wish to end.
const TO_ACT: Duration = Duration::from_secs(1);
/// How long it may take in all, once it has given the terminal back and is closing
/// its files.
const TO_CLOSE: Duration = Duration::from_secs(10);
/// A second signal ends the program at once, unless it comes sooner than this: one
/// wish to end often reaches a program twice, by its group and by itself.
const INSISTENCE: Duration = Duration::from_millis(250);

/// Whether the desk is open, stopped or not.
static OPEN: AtomicBool = AtomicBool::new(false);
/// Whether the desk has been open and has ended.
static CLOSING: AtomicBool = AtomicBool::new(false);
/// Whether a signal to end has been heard.
static ENDING: AtomicBool = AtomicBool::new(false);

/// Why the desk ended.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Ended {
    /// The reader asked for it.
    ByReader,
    /// This signal was received.
    Signal(i32),
    /// The terminal no longer exists.
    TerminalLost,
    /// A thread other than the one that draws has panicked, and has said so.
    ThreadPanicked,
}

impl Ended {
    /// Ends the program as this reason demands, or gives the exit status to end with.
    ///
    /// The terminal is given back first. Everything that must be closed has to be
    /// closed before, because a signal ends the process here, without unwinding.
    pub fn finish(self) -> ExitCode {
        match self {
            Ended::ByReader => ExitCode::SUCCESS,
            Ended::Signal(signal) => die_by(signal),
            Ended::TerminalLost => die_by(SIGHUP),
            Ended::ThreadPanicked => ExitCode::from(101),
        }
    }
}

/// Gives the terminal back and dies by a signal, so that the parent sees 128 + n.
pub fn die_by(signal: i32) -> ! {
    guard::leave();
    // This returns only for a signal whose default is to be ignored.
    let _ = low_level::emulate_default_handler(signal);
    std::process::exit(128 + signal)
}

pub(super) fn is_open() -> bool {
    OPEN.load(Ordering::SeqCst)
}

pub(super) fn is_ending() -> bool {
    ENDING.load(Ordering::SeqCst)
}

/// Notes that the desk is open; false when it is or was open already.
pub(super) fn note_open() -> bool {
    !CLOSING.load(Ordering::SeqCst) && !OPEN.swap(true, Ordering::SeqCst)
}

/// Notes that the desk has ended and only files remain to be closed.
pub(super) fn note_closing() {
    CLOSING.store(true, Ordering::SeqCst);
    OPEN.store(false, Ordering::SeqCst);
}

/// Starts the thread that hears signals.
pub(super) fn start(sender: &Sender<Report>) -> io::Result<()> {
    let signals = Signals::new([SIGTERM, SIGHUP, SIGINT, SIGQUIT, SIGTSTP, SIGCONT, SIGWINCH])?;
    let heard = sender.clone();
    spawn("signals", move || hear_signals(signals, &heard))
}

pub(super) fn spawn(name: &str, body: impl FnOnce() + Send + 'static) -> io::Result<()> {
    thread::Builder::new().name(name.to_owned()).spawn(body).map(|_| ())
}

/// Passes signals on to the main thread, and ends the program when it does not act.
fn hear_signals(mut signals: Signals, sender: &Sender<Report>) {
    let mut first_wish: Option<Instant> = None;
    for signal in signals.forever() {
        match (signal, first_wish) {
            (SIGTSTP, _) => drop(sender.send(Report::StopSignal)),
            (SIGCONT, _) => drop(sender.send(Report::Continued)),
            (SIGWINCH, _) => drop(sender.send(Report::Told(Incoming::Resized))),
            (_, None) => {
                first_wish = Some(Instant::now());
                ENDING.store(true, Ordering::SeqCst);
                let ended = Report::Told(Incoming::Ended(Ended::Signal(signal)));
                // When the desk has ended nobody hears this, but closing the files
                // still gets its time.
                let _ = sender.send(ended);
                if spawn("grace", move || force_after_grace(|| die_by_force(signal))).is_err() {
                    die_by_force(signal);
                }
            }
            // A shell and the kernel may both report the same hangup, any time apart.
            (SIGHUP, Some(_)) => {}
            (_, Some(then)) if then.elapsed() < INSISTENCE => {}
            (_, Some(_)) => die_by_force(signal),
        }
    }
}

/// Ends the program when the main thread does not act on the loss of the terminal.
pub(super) fn force_end_of_lost_terminal() {
    force_after_grace(|| die_by_force(SIGHUP));
}

/// Calls `force` when the main thread has not ended the program in time.
fn force_after_grace(force: impl FnOnce()) {
    thread::sleep(TO_ACT);
    if CLOSING.load(Ordering::SeqCst) {
        thread::sleep(TO_CLOSE - TO_ACT);
    }
    force();
}

fn die_by_force(signal: i32) {
    guard::leave_by_force();
    let _ = low_level::emulate_default_handler(signal);
    low_level::exit(128 + signal);
}

/// Tells the main thread of a panic elsewhere and holds the thread that panicked
/// until the program has ended.
pub(super) fn end_after_panic(sender: &Sender<Report>) {
    let _ = sender.send(Report::Told(Incoming::Ended(Ended::ThreadPanicked)));
    force_after_grace(|| low_level::exit(101));
}
