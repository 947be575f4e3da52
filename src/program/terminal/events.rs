//! What reaches the main thread, and the thread that reads keys.

use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};
use std::sync::mpsc::Sender;
use std::thread;
use std::time::Duration;

use ratatui::crossterm::event::{
    self, Event, KeyCode, KeyEvent, KeyEventKind, KeyEventState, KeyModifiers,
};
use rustix::process::{Signal, kill_current_process_group};

use super::guard;
use super::signals::Ended;

/// Everything that can reach the desk from outside.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Incoming {
    /// A key was pressed, or is being held.
    Key(KeyEvent),
    /// Text was pasted; it may hold line ends and control characters.
    Paste(String),
    /// The terminal has another size; the next frame has it.
    Resized,
    /// The program was stopped and continues; every cell will be drawn again.
    Resumed,
    /// A [`Waker`] was used.
    Woken,
    /// The desk must end now, for this reason.
    Ended(Ended),
}

/// What the threads send: news for the desk, and what is dealt with before it.
#[derive(Debug)]
pub(super) enum Report {
    /// For the desk.
    Told(Incoming),
    /// Ctrl-Z, or SIGTSTP from outside.
    StopAsked,
    /// SIGCONT.
    Continued,
}

/// Wakes the main thread from another thread.
///
/// Put the result where the main thread finds it, then call [`Waker::wake`]. However
/// often it is called before the main thread looks, one [`Incoming::Woken`] is sent,
/// so that results never queue up faster than they are drawn.
#[derive(Debug, Clone)]
pub struct Waker {
    sender: Sender<Report>,
    pending: Arc<AtomicBool>,
}

impl Waker {
    pub(super) fn new(sender: Sender<Report>) -> Self {
        Waker {
            sender,
            pending: Arc::new(AtomicBool::new(false)),
        }
    }

    /// Makes the main thread receive [`Incoming::Woken`].
    pub fn wake(&self) {
        if !self.pending.swap(true, Ordering::SeqCst) {
            let _ = self.sender.send(Report::Told(Incoming::Woken));
        }
    }

    /// Lets the next call to [`Waker::wake`] send again.
    pub(super) fn rearm(&self) {
        self.pending.store(false, Ordering::SeqCst);
    }
}

/// Reads keys for ever; blocks while there are none.
pub(super) fn read_keys(sender: &Sender<Report>) {
    let mut failures = 0;
    loop {
        match event::read() {
            Ok(event) => {
                failures = 0;
                if let Some(report) = understood(event)
                    && sender.send(report).is_err()
                {
                    return;
                }
            }
            // The size may fail to be read while the line drops; a lost line has its
            // own watch, so only a failure that lasts is taken to be one.
            Err(_) if failures < 20 => {
                failures += 1;
                thread::sleep(Duration::from_millis(50));
            }
            Err(_) => {
                let _ = sender.send(Report::Told(Incoming::Ended(Ended::TerminalLost)));
                return;
            }
        }
    }
}

/// The report that an event gives rise to, if any.
fn understood(event: Event) -> Option<Report> {
    let incoming = match event {
        Event::Key(key) if key.kind == KeyEventKind::Release => return None,
        Event::Key(key) if is_ctrl_z(&key) => return stop_asked_by_key(),
        Event::Key(key) => Incoming::Key(key),
        Event::Paste(text) => Incoming::Paste(text),
        Event::Resize(..) => Incoming::Resized,
        Event::FocusGained | Event::FocusLost | Event::Mouse(_) => return None,
    };
    Some(Report::Told(incoming))
}

fn is_ctrl_z(key: &KeyEvent) -> bool {
    *key == KeyEvent {
        code: KeyCode::Char('z'),
        modifiers: KeyModifiers::CONTROL,
        kind: key.kind,
        state: KeyEventState::NONE,
    }
}

/// Does what the terminal does for Ctrl-Z when it is not in raw mode.
///
/// The whole foreground group gets the signal, so that a wrapper the program was
/// started from stops as well and the shell comes back. Our own copy arrives at the
/// signal thread like one from outside.
fn stop_asked_by_key() -> Option<Report> {
    if guard::is_foreground_group() && kill_current_process_group(Signal::TSTP).is_ok() {
        None
    } else {
        Some(Report::StopAsked)
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::sync::mpsc::channel;

    #[test]
    fn releases_and_pointer_events_are_not_news() {
        let mut key = KeyEvent::new(KeyCode::Char('a'), KeyModifiers::NONE);
        assert!(understood(Event::Key(key)).is_some());
        key.kind = KeyEventKind::Repeat;
        assert!(understood(Event::Key(key)).is_some());
        key.kind = KeyEventKind::Release;
        assert!(understood(Event::Key(key)).is_none());
        assert!(understood(Event::FocusLost).is_none());
    }

    #[test]
    fn many_wakes_are_one_message_until_it_has_been_seen() {
        let (sender, reports) = channel();
        let waker = Waker::new(sender);
        let worker = waker.clone();
        worker.wake();
        worker.wake();
        assert_eq!(reports.try_iter().count(), 1);
        waker.rearm();
        worker.wake();
        assert_eq!(reports.try_iter().count(), 1);
    }
}
