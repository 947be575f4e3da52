//! What reaches the main thread, and the thread that reads keys.

use std::sync::mpsc::Sender;

use ratatui::crossterm::event::{KeyCode, KeyEvent, KeyModifiers};
use rustix::event::{PollFd, PollFlags, Timespec, poll};
use rustix::io::Errno;
use rustix::stdio::stdin;

use super::keys::{KeyParser, Typed};
use super::signals::{self, Ended};

/// How long a lone Esc waits for a sequence to follow it.
const SEQUENCE_PATIENCE: Timespec = Timespec { tv_sec: 0, tv_nsec: 50_000_000 };
/// How long a paste may stand still before what has come of it is taken for all.
const PASTE_PATIENCE: Timespec = Timespec { tv_sec: 5, tv_nsec: 0 };
/// How often a line is looked at that does not report its own loss.
const LINE_CHECK: Timespec = Timespec { tv_sec: 5, tv_nsec: 0 };

/// Everything that can reach the desk from outside.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Incoming {
    /// A key was pressed, or is being held. Ctrl-C comes as a key; Ctrl-Z does not
    /// come, because it stops the program.
    Key(KeyEvent),
    /// Text was pasted; it may hold line ends and control characters.
    Paste(String),
    /// The terminal has another size; the next frame has it.
    Resized,
    /// The program was stopped and continues; every cell will be drawn again.
    Resumed,
    /// The desk must end now, for this reason.
    Ended(Ended),
}

/// What the threads send: news for the desk, and what is dealt with before it.
#[derive(Debug)]
pub(super) enum Report {
    /// For the desk.
    Told(Incoming),
    /// The key Ctrl-Z.
    StopKey,
    /// SIGTSTP.
    StopSignal,
    /// SIGCONT.
    Continued,
}

/// Reads keys until the terminal is lost; blocks while there are none.
///
/// A terminal that does not control the program, as under some ways of becoming
/// another user, sends no SIGHUP when it goes, so this thread looks out for that too.
pub(super) fn read_keys(sender: &Sender<Report>) {
    let (mut parser, mut typed) = (KeyParser::default(), Vec::new());
    let mut buffer = [0; 4096];
    loop {
        let patience = if parser.is_in_sequence() {
            &SEQUENCE_PATIENCE
        } else if parser.is_in_paste() {
            &PASTE_PATIENCE
        } else {
            &LINE_CHECK
        };
        let input = stdin();
        let mut waited = [PollFd::new(&input, PollFlags::IN)];
        match poll(&mut waited, Some(patience)) {
            Ok(0) => parser.give_up(&mut typed),
            // Reading from a terminal that is gone gives an error or nothing.
            Ok(_) => match rustix::io::read(input, &mut buffer) {
                Ok(count @ 1..) => parser.feed(&buffer[..count], &mut typed),
                Err(Errno::INTR | Errno::AGAIN) => {}
                Ok(0) | Err(_) => break,
            },
            Err(Errno::INTR) => {}
            Err(_) => break,
        }
        for input in typed.drain(..) {
            let _ = sender.send(understood(input));
        }
    }
    let _ = sender.send(Report::Told(Incoming::Ended(Ended::TerminalLost)));
    signals::force_end_of_lost_terminal();
}

/// The report that a key or a paste gives rise to.
fn understood(typed: Typed) -> Report {
    match typed {
        Typed::Key(key) if key == KeyEvent::new(KeyCode::Char('z'), KeyModifiers::CONTROL) => {
            Report::StopKey
        }
        Typed::Key(key) => Report::Told(Incoming::Key(key)),
        Typed::Paste(text) => Report::Told(Incoming::Paste(text)),
    }
}
