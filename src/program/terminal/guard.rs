//! Takes the terminal over and gives it back, on every way out.
//!
//! The screen is given back by a normal end, by an early return, by a panic on any
//! thread, by a signal, and before a stop. All of these come through [`leave`], which
//! acts once for each [`enter`] and may be called from any thread at any time.

use std::io::{self, Write};
use std::panic;
use std::sync::atomic::{AtomicBool, Ordering};
use std::sync::{Mutex, MutexGuard, PoisonError, TryLockError};
use std::thread;
use std::time::{Duration, Instant};

use ratatui::layout::Size;
use rustix::event::{PollFd, PollFlags, Timespec, poll};
use rustix::io::{Errno, retry_on_intr};
use rustix::process::getpgrp;
use rustix::stdio::{stdin, stdout};
use rustix::termios::{OptionalActions, Termios, tcgetattr, tcgetpgrp, tcgetwinsize, tcsetattr};

/// Alternate screen, plain pen, clear, hidden cursor, bracketed paste.
///
/// The clear is for terminals that have no alternate screen: the drawing library
/// takes a new screen to be blank and would let old text show through.
const ENTER: &[u8] = b"\x1b[?1049h\x1b[0m\x1b[2J\x1b[H\x1b[?25l\x1b[?2004h";

/// The reverse of [`ENTER`], after the end of a frame that may have been cut short.
///
/// It is a constant, so that leaving needs no memory. Without an alternate screen,
/// the clear keeps the shell's prompt from landing in the middle of the last frame.
const LEAVE: &[u8] = b"\x1b[?2026l\x1b[?2004l\x1b[0m\x1b[2J\x1b[H\x1b[?1049l\x1b[?25h";

/// How long the way out by force waits for another thread or for a stalled line.
const PATIENCE: Duration = Duration::from_millis(300);

/// Whether the screen is ours at the moment.
static ENTERED: AtomicBool = AtomicBool::new(false);
/// Held while bytes go to the screen, so that no frame can follow the leave bytes.
static SCREEN: Mutex<()> = Mutex::new(());
/// The modes found on entry, until they have been put back.
static ORIGINAL: Mutex<Option<Termios>> = Mutex::new(None);

/// Locks, also when another thread has panicked while it held the lock.
fn lock<T>(mutex: &Mutex<T>) -> MutexGuard<'_, T> {
    mutex.lock().unwrap_or_else(PoisonError::into_inner)
}

/// Whether the screen is ours at the moment.
pub(super) fn is_entered() -> bool {
    ENTERED.load(Ordering::SeqCst)
}

/// Takes the terminal over; called again without [`leave`], it takes it over anew.
///
/// The second case is that of a process which was stopped from outside and continued:
/// the shell has since put the modes back, but the modes to return to in the end are
/// still those found first.
pub(super) fn enter() -> io::Result<()> {
    let _screen = lock(&SCREEN);
    let raw = {
        let mut original = lock(&ORIGINAL);
        let found = match original.as_ref() {
            Some(found) => found.clone(),
            None => tcgetattr(stdin())?,
        };
        let mut raw = found.clone();
        raw.make_raw();
        *original = Some(found);
        raw
    };
    ENTERED.store(true, Ordering::SeqCst);
    // The modes come first: in the background this call stops the process, as a
    // shell expects, before anything has been written over the shell's screen.
    let outcome = retry_on_intr(|| tcsetattr(stdin(), OptionalActions::Now, &raw))
        .map_err(io::Error::from)
        .and_then(|()| write_fully(ENTER, None));
    if outcome.is_err() {
        restore_modes();
        ENTERED.store(false, Ordering::SeqCst);
    }
    outcome
}

/// Gives the terminal back; does nothing when it has been given back already.
///
/// Errors are ignored: there is nothing left to do about them, and the terminal may
/// be gone.
pub(super) fn leave() {
    let _screen = lock(&SCREEN);
    if ENTERED.swap(false, Ordering::SeqCst) && !is_in_background() {
        restore_modes();
        let _ = write_fully(LEAVE, None);
    }
}

/// Gives the terminal back as far as that is possible within a short time.
///
/// The thread that draws may be stuck in the middle of a write to a stalled line. The
/// modes can be put back even then; the bytes are sent only when they can be.
pub(super) fn leave_by_force() {
    let deadline = Instant::now() + PATIENCE;
    let screen = loop {
        match SCREEN.try_lock() {
            Ok(screen) => break Some(screen),
            Err(TryLockError::Poisoned(poisoned)) => break Some(poisoned.into_inner()),
            Err(TryLockError::WouldBlock) if Instant::now() >= deadline => break None,
            Err(TryLockError::WouldBlock) => thread::sleep(Duration::from_millis(5)),
        }
    };
    if ENTERED.swap(false, Ordering::SeqCst) && !is_in_background() {
        restore_modes();
        if screen.is_some() {
            let _ = write_fully(LEAVE, Some(PATIENCE));
        }
    }
}

/// Puts the modes found on entry back, once.
fn restore_modes() {
    if let Some(found) = lock(&ORIGINAL).take() {
        let _ = retry_on_intr(|| tcsetattr(stdin(), OptionalActions::Now, &found));
    }
}

/// Whether the terminal belongs to another process group of our session.
///
/// A process that was stopped from outside and is then ended by a signal must not
/// touch the terminal: the shell has it, and changing its modes would stop the
/// process once more instead of ending it.
pub(super) fn is_in_background() -> bool {
    tcgetpgrp(stdin()).is_ok_and(|foreground| foreground != getpgrp())
}

/// Whether Ctrl-Z on this terminal would stop our whole process group.
pub(super) fn is_foreground_group() -> bool {
    tcgetpgrp(stdin()).is_ok_and(|foreground| foreground == getpgrp())
}

/// Makes a panic on any thread give the terminal back before its text is printed.
///
/// A panic on this thread, which draws, then unwinds as usual. A panic on another
/// thread would leave the desk running on results that no longer come, so
/// `end_after_panic` is called for it, after the text.
pub(super) fn install_panic_hook(end_after_panic: impl Fn() + Send + Sync + 'static) {
    let drawing = thread::current().id();
    let previous = panic::take_hook();
    panic::set_hook(Box::new(move |facts| {
        let was_open = super::signals::is_open();
        leave();
        previous(facts);
        if was_open && thread::current().id() != drawing {
            end_after_panic();
        }
    }));
}

/// Standard output without a buffer, for whole frames.
///
/// A frame that comes after the terminal has been given back is dropped.
#[derive(Debug)]
pub(super) struct Screen;

impl Write for Screen {
    fn write(&mut self, bytes: &[u8]) -> io::Result<usize> {
        let _screen = lock(&SCREEN);
        if is_entered() {
            write_fully(bytes, None)?;
        }
        Ok(bytes.len())
    }

    fn flush(&mut self) -> io::Result<()> {
        Ok(())
    }
}

/// Writes all bytes to standard output, in one call when the terminal takes them.
///
/// With a `patience` it waits at most that long for a terminal that takes nothing.
fn write_fully(mut bytes: &[u8], patience: Option<Duration>) -> io::Result<()> {
    if patience.is_some() {
        wait_until_writable(patience)?;
    }
    while !bytes.is_empty() {
        match rustix::io::write(stdout(), bytes) {
            Ok(0) => return Err(io::ErrorKind::WriteZero.into()),
            Ok(taken) => bytes = &bytes[taken..],
            Err(Errno::INTR) => {}
            // Another program on this terminal may have made it non-blocking.
            Err(Errno::AGAIN) => wait_until_writable(patience)?,
            Err(error) => return Err(error.into()),
        }
    }
    Ok(())
}

/// Waits until standard output takes bytes, or fails after `patience`.
fn wait_until_writable(patience: Option<Duration>) -> io::Result<()> {
    let limit = patience.and_then(|patience| Timespec::try_from(patience).ok());
    let output = stdout();
    let mut waited = [PollFd::new(&output, PollFlags::OUT)];
    match retry_on_intr(|| poll(&mut waited, limit.as_ref()))? {
        0 => Err(io::ErrorKind::TimedOut.into()),
        _ => Ok(()),
    }
}

/// The size of the terminal.
///
/// A serial line reports zero; COLUMNS and LINES speak then, and 80×24 is assumed
/// when they do not. A size past a thousand is cut, so that no report can ask for
/// more memory than a screen is worth.
pub(super) fn size() -> Size {
    let reported = tcgetwinsize(stdout()).map_or((0, 0), |size| (size.ws_col, size.ws_row));
    let variable = |name: &str| std::env::var(name).ok();
    Size {
        width: side(reported.0, variable("COLUMNS"), 80),
        height: side(reported.1, variable("LINES"), 24),
    }
}

fn side(reported: u16, variable: Option<String>, otherwise: u16) -> u16 {
    let stated = || {
        variable
            .and_then(|text| text.trim().parse::<u16>().ok())
            .filter(|side| *side > 0)
            .unwrap_or(otherwise)
    };
    match reported {
        0 => stated(),
        known => known,
    }
    .min(1000)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_size_of_zero_is_replaced() {
        assert_eq!(side(0, None, 80), 80);
        assert_eq!(side(0, Some("132".to_owned()), 80), 132);
        assert_eq!(side(0, Some("0".to_owned()), 80), 80);
        assert_eq!(side(0, Some("wide".to_owned()), 80), 80);
        assert_eq!(side(66, Some("132".to_owned()), 80), 66);
        assert_eq!(side(u16::MAX, None, 80), 1000);
    }

    #[test]
    fn leaving_undoes_every_mode_that_entering_sets() {
        let text = |bytes: &[u8]| String::from_utf8_lossy(bytes).into_owned();
        let (enter, leave) = (text(ENTER), text(LEAVE));
        assert!(enter.contains("\x1b[?1049h") && leave.contains("\x1b[?1049l"));
        assert!(enter.contains("\x1b[?2004h") && leave.contains("\x1b[?2004l"));
        assert!(enter.contains("\x1b[?25l") && leave.ends_with("\x1b[?25h"));
        assert!(leave.starts_with("\x1b[?2026l"));
    }

    #[test]
    fn leaving_without_having_entered_does_nothing() {
        leave();
        leave_by_force();
        assert!(!is_entered());
    }
}
