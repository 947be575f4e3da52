//! The ground the desk stands on: one terminal, taken over and always given back.
//!
//! # How it holds together
//!
//! * The main thread owns the [`Terminal`] and is the only one that draws.
//! * A thread reads keys and notices a lost line, another hears signals; both send
//!   into one channel, from which [`Terminal::recv`] takes.
//! * At rest no byte is sent and the main thread sleeps; the thread that reads keys
//!   looks every five seconds whether the line still stands.
//! * The terminal is never asked a question, because the answer would come as keys.
//! * A frame that changed is one write; a frame that did not change is none.
//!
//! # Ways to end
//!
//! The desk returns why it ended, its caller drops the [`Terminal`] and closes the
//! files, and [`Ended::finish`] then ends the program as the reason demands. When the
//! main thread is too busy to drop the terminal within about a second of a signal, the
//! terminal is given back and the program dies by the signal all the same; once it
//! has dropped the terminal, it has ten seconds for the files.

mod backend;
mod colour;
mod events;
mod glyphs;
mod guard;
mod keys;
mod pace;
mod signals;
mod usable;

use std::io::{self, IsTerminal};
use std::sync::mpsc::{Receiver, Sender, channel};
use std::thread;
use std::time::{Duration, Instant};

use ratatui::Frame;
use ratatui::layout::{Rect, Size};
use rustix::process::{Signal, kill_current_process_group};
use signal_hook::consts::SIGSTOP;
use signal_hook::low_level;

pub use colour::ColourChoice;
pub use events::Incoming;
#[cfg(test)]
pub use glyphs::{ASCII, UNICODE};
pub use glyphs::{GlyphChoice, Glyphs};
pub use pace::FramePace;
pub use ratatui::crossterm::event::{KeyCode, KeyEvent, KeyModifiers};
pub use signals::{Ended, die_by};
pub use usable::{Unusable, is_usable};

use backend::ScreenBackend;
use events::Report;
use guard::Screen;

/// What the reader asked for on the command line.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub struct Options {
    /// Whether to use colours.
    pub colour: ColourChoice,
    /// Which marks to use.
    pub glyphs: GlyphChoice,
}

/// The terminal while the desk is open; dropping it gives the terminal back.
#[derive(Debug)]
pub struct Terminal {
    drawing: ratatui::Terminal<ScreenBackend<Screen>>,
    reports: Receiver<Report>,
    glyphs: &'static Glyphs,
}

impl Terminal {
    /// Takes the terminal over.
    ///
    /// A program can do this once: the thread that reads keys cannot be ended while
    /// it waits for one, and two of them would share the keys out between them.
    pub fn open(options: Options) -> Result<Terminal, Unusable> {
        is_usable()?;
        if !signals::note_open() {
            return Err(Unusable::opened_before());
        }
        Self::set_up(options).map_err(|error| {
            guard::leave();
            signals::note_closing();
            Unusable::because_of(&error)
        })
    }

    fn set_up(options: Options) -> io::Result<Terminal> {
        let variable =
            |name: &str| std::env::var_os(name).map(|value| value.to_string_lossy().into_owned());
        let depth = colour::depth(options.colour, io::stdout().is_terminal(), &variable);
        let glyphs = Glyphs::choose(options.glyphs, &variable);
        let backend = ScreenBackend::new(Screen, guard::size, depth, glyphs.ascii_only);
        let drawing = ratatui::Terminal::new(backend)?;
        let (sender, reports): (Sender<Report>, _) = channel();
        // Signals and panics are caught before there is anything to give back.
        signals::start(&sender)?;
        let panicked = sender.clone();
        guard::install_panic_hook(move || signals::end_after_panic(&panicked));
        guard::enter()?;
        let keys = sender.clone();
        signals::spawn("keys", move || events::read_keys(&keys))?;
        Ok(Terminal { drawing, reports, glyphs })
    }

    /// Draws a frame and sends what differs from the one before, in one write.
    ///
    /// The frame always has the terminal's present size. An error means that the
    /// terminal is gone; end with [`Ended::TerminalLost`].
    pub fn draw(&mut self, view: impl FnOnce(&mut Frame<'_>)) -> io::Result<()> {
        self.drawing.draw(view).map(|_| ())
    }

    /// Waits for the next news, for ever or up to `timeout`; `None` when it has passed.
    ///
    /// A stop asked for by Ctrl-Z or from outside is carried out in here: the call
    /// returns [`Incoming::Resumed`] after the program has been continued.
    pub fn recv(&mut self, timeout: Option<Duration>) -> Option<Incoming> {
        let deadline = timeout.and_then(|timeout| Instant::now().checked_add(timeout));
        loop {
            let report = match deadline {
                None => self.reports.recv().ok()?,
                Some(deadline) => {
                    let left = deadline.saturating_duration_since(Instant::now());
                    self.reports.recv_timeout(left).ok()?
                }
            };
            if let Some(incoming) = self.deal_with(report) {
                return Some(incoming);
            }
        }
    }

    /// News that has already arrived; empty the queue with this before drawing.
    pub fn try_recv(&mut self) -> Option<Incoming> {
        loop {
            let report = self.reports.try_recv().ok()?;
            if let Some(incoming) = self.deal_with(report) {
                return Some(incoming);
            }
        }
    }

    fn deal_with(&mut self, report: Report) -> Option<Incoming> {
        match report {
            Report::Told(incoming) => Some(incoming),
            // What the terminal does for Ctrl-Z when it is not in raw mode: the whole
            // foreground group gets the signal, so that a wrapper the program was
            // started from stops too and the shell comes back. The terminal is given
            // back before, while it is still ours. Our own copy of the signal then
            // stops us.
            Report::StopKey => {
                guard::leave();
                if !guard::is_foreground_group()
                    || kill_current_process_group(Signal::TSTP).is_err()
                {
                    stop();
                }
                None
            }
            Report::StopSignal => {
                guard::leave();
                stop();
                None
            }
            // This follows every stop, the ones above and one from outside, which
            // leaves no time to give the terminal back.
            Report::Continued if !may_enter() => None,
            Report::Continued => match guard::enter().and_then(|()| self.repaint()) {
                Ok(()) => Some(Incoming::Resumed),
                Err(_) => Some(Incoming::Ended(Ended::TerminalLost)),
            },
        }
    }

    /// Makes the next frame draw every cell again.
    pub fn repaint(&mut self) -> io::Result<()> {
        self.drawing.backend_mut().forget_cursor();
        let Size { width, height } = guard::size();
        self.drawing.resize(Rect::new(0, 0, width, height))
    }

    /// The marks to draw with.
    pub fn glyphs(&self) -> &'static Glyphs {
        self.glyphs
    }
}

/// Whether the terminal may be taken over after the program has been continued.
///
/// In the background it may not. A shell continues a program there because of `bg`,
/// or to let it die of a signal that it has already sent. The first cannot be
/// granted, and the group stops again as if it had used the terminal; the second has
/// to be heard first.
fn may_enter() -> bool {
    if guard::is_in_background() {
        thread::sleep(Duration::from_millis(50));
    }
    if signals::is_ending() {
        return false;
    }
    let in_background = guard::is_in_background();
    if in_background {
        let _ = kill_current_process_group(Signal::TTOU);
    }
    !in_background
}

/// Stops the program until it is continued.
fn stop() {
    // SIGTSTP would be dropped in a group that no shell looks after.
    let _ = low_level::raise(SIGSTOP);
}

impl Drop for Terminal {
    fn drop(&mut self) {
        guard::leave();
        signals::note_closing();
    }
}
