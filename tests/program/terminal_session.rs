//! A program on a pseudo-terminal: its screen, its keys, its end.
//!
//! Nothing here sleeps and hopes: every wait names what it waits for, has a
//! deadline, and shows the screen when the deadline passes. The pseudo-terminal
//! answers no question, so a program that asks its terminal something hangs here.

// Not every test needs every part of a session.
#![allow(dead_code)]

use std::ffi::{OsStr, OsString};
use std::fmt::Write as _;
use std::num::NonZeroU16;
use std::os::fd::OwnedFd;
use std::process::{Child, Command, ExitStatus, Stdio};
use std::sync::atomic::{AtomicBool, Ordering};
use std::sync::{Arc, Mutex, MutexGuard, PoisonError};
use std::thread::{self, JoinHandle};
use std::time::{Duration, Instant};

use rustix::event::{PollFd, PollFlags, Timespec, poll};
use rustix::process::{Pid, kill_process};
use rustix::pty::{OpenptFlags, grantpt, ioctl_tiocgptpeer, openpt, unlockpt};
use rustix::termios::{Winsize, tcgetattr, tcsetwinsize};

pub use rustix::process::Signal;

/// How long any wait may take; long, because the machine may be busy.
pub const DEADLINE: Duration = Duration::from_secs(15);

/// What keys send.
pub mod keys {
    pub const UP: &str = "\x1b[A";
    pub const DOWN: &str = "\x1b[B";
    pub const RIGHT: &str = "\x1b[C";
    pub const LEFT: &str = "\x1b[D";
    pub const HOME: &str = "\x1b[H";
    pub const END: &str = "\x1b[F";
    pub const PAGE_UP: &str = "\x1b[5~";
    pub const PAGE_DOWN: &str = "\x1b[6~";
    pub const DELETE: &str = "\x1b[3~";
    pub const ENTER: &str = "\r";
    pub const TAB: &str = "\t";
    pub const BACK_TAB: &str = "\x1b[Z";
    pub const BACKSPACE: &str = "\x7f";
    pub const ESC: &str = "\x1b";
    pub const CTRL_C: &str = "\x03";
    pub const CTRL_Z: &str = "\x1a";
}

/// What to run, and on what kind of terminal.
pub struct Launch {
    program: OsString,
    arguments: Vec<OsString>,
    variables: Vec<(OsString, OsString)>,
    columns: u16,
    rows: u16,
    controlling: bool,
}

impl Launch {
    /// `program` on an 80×24 xterm with 256 colours that shows UTF-8.
    pub fn new(program: impl AsRef<OsStr>) -> Launch {
        Launch {
            program: program.as_ref().to_owned(),
            arguments: Vec::new(),
            variables: Vec::new(),
            columns: 80,
            rows: 24,
            controlling: true,
        }
        .variable("TERM", "xterm-256color")
        .variable("LC_ALL", "C.UTF-8")
    }

    pub fn argument(mut self, argument: impl AsRef<OsStr>) -> Launch {
        self.arguments.push(argument.as_ref().to_owned());
        self
    }

    pub fn arguments<A: AsRef<OsStr>>(self, arguments: impl IntoIterator<Item = A>) -> Launch {
        arguments.into_iter().fold(self, |launch, argument| launch.argument(argument))
    }

    /// Sets a variable; the environment of the test itself is not passed on.
    pub fn variable(mut self, name: &str, value: impl AsRef<OsStr>) -> Launch {
        self.variables.retain(|(known, _)| known != name);
        self.variables.push((name.into(), value.as_ref().to_owned()));
        self
    }

    pub fn without_variable(mut self, name: &str) -> Launch {
        self.variables.retain(|(known, _)| known != name);
        self
    }

    pub fn size(mut self, columns: u16, rows: u16) -> Launch {
        (self.columns, self.rows) = (columns, rows);
        self
    }

    /// The terminal does not control the program, so its loss sends no SIGHUP.
    pub fn uncontrolled(mut self) -> Launch {
        self.controlling = false;
        self
    }

    pub fn start(self) -> Session {
        Session::start(self)
    }
}

/// What has come out of the program so far.
struct Seen {
    parser: vt100::Parser,
    bytes: Vec<u8>,
}

/// The four words of a terminal's modes.
type Modes = [u64; 4];

/// A running program and its terminal.
pub struct Session {
    child: Child,
    ended: Option<ExitStatus>,
    master: Option<Arc<OwnedFd>>,
    seen: Arc<Mutex<Seen>>,
    reader: Option<JoinHandle<()>>,
    stop_reading: Arc<AtomicBool>,
    modes_before: Modes,
}

impl Session {
    fn start(launch: Launch) -> Session {
        let flags = OpenptFlags::RDWR | OpenptFlags::NOCTTY | OpenptFlags::CLOEXEC;
        let master = openpt(flags).expect("a pseudo-terminal");
        grantpt(&master).expect("grantpt");
        unlockpt(&master).expect("unlockpt");
        set_size(&master, launch.columns, launch.rows);
        let modes_before = modes(&master);
        let slave = ioctl_tiocgptpeer(&master, flags).expect("the program's end");
        let end = || Stdio::from(slave.try_clone().expect("a copy of the program's end"));
        // setsid replaces itself by the program, which so keeps the process id.
        let child = Command::new("setsid")
            .args(launch.controlling.then_some("--ctty"))
            .arg(&launch.program)
            .args(&launch.arguments)
            .env_clear()
            .envs(launch.variables)
            .stdin(end())
            .stdout(end())
            .stderr(end())
            .spawn()
            .expect("setsid starts the program");
        drop(slave);
        let seen = Arc::new(Mutex::new(Seen {
            parser: vt100::Parser::new(at_least_one(launch.rows), at_least_one(launch.columns), 0),
            bytes: Vec::new(),
        }));
        let stop_reading = Arc::new(AtomicBool::new(false));
        let master = Arc::new(master);
        let reader = {
            let (master, seen, stop) = (master.clone(), seen.clone(), stop_reading.clone());
            thread::spawn(move || read_output(&master, &seen, &stop))
        };
        Session {
            child,
            ended: None,
            master: Some(master),
            seen,
            reader: Some(reader),
            stop_reading,
            modes_before,
        }
    }

    fn seen(&self) -> MutexGuard<'_, Seen> {
        self.seen.lock().unwrap_or_else(PoisonError::into_inner)
    }

    fn master(&self) -> &OwnedFd {
        self.master.as_deref().expect("the terminal still exists")
    }

    /// Types, or pastes when the caller adds the marks of a paste.
    pub fn send(&self, text: impl AsRef<[u8]>) {
        let mut bytes = text.as_ref();
        while !bytes.is_empty() {
            let taken = rustix::io::write(self.master(), bytes).expect("the terminal takes keys");
            bytes = &bytes[taken..];
        }
    }

    /// Pastes text the way a terminal with bracketed paste does.
    pub fn paste(&self, text: &str) {
        self.send(format!("\x1b[200~{text}\x1b[201~"));
    }

    pub fn resize(&self, columns: u16, rows: u16) {
        self.seen().parser.screen_mut().set_size(at_least_one(rows), at_least_one(columns));
        set_size(self.master(), columns, rows);
    }

    /// The text of the screen, one line a row.
    pub fn screen(&self) -> String {
        text_of(self.seen().parser.screen())
    }

    /// The text of one row, without the blanks at its end.
    pub fn row(&self, row: u16) -> String {
        self.screen().lines().nth(usize::from(row)).unwrap_or("").to_owned()
    }

    /// The row in which a text stands.
    pub fn row_of(&self, text: &str) -> Option<u16> {
        let row = self.screen().lines().position(|line| line.contains(text))?;
        u16::try_from(row).ok()
    }

    /// One cell, with its colours and attributes.
    pub fn cell(&self, row: u16, column: u16) -> Option<vt100::Cell> {
        self.seen().parser.screen().cell(row, column).cloned()
    }

    pub fn is_inverse(&self, row: u16, column: u16) -> bool {
        self.cell(row, column).is_some_and(|cell| cell.inverse())
    }

    /// Where the cursor stands, row and column, when it is shown.
    pub fn cursor(&self) -> Option<(u16, u16)> {
        let seen = self.seen();
        let screen = seen.parser.screen();
        (!screen.hide_cursor()).then(|| screen.cursor_position())
    }

    /// How many bytes have come out so far.
    pub fn bytes(&self) -> usize {
        self.seen().bytes.len()
    }

    /// What has come out since a number of bytes had.
    pub fn output_since(&self, mark: usize) -> String {
        String::from_utf8_lossy(&self.seen().bytes[mark..]).into_owned()
    }

    /// Waits until `condition` holds; shows the screen when it never does.
    #[track_caller]
    pub fn wait_until(&self, what: &str, mut condition: impl FnMut() -> bool) {
        let deadline = Instant::now() + DEADLINE;
        while !condition() {
            if Instant::now() >= deadline {
                self.fail(what);
            }
            thread::sleep(Duration::from_millis(5));
        }
    }

    /// Waits until the screen is as `condition` demands.
    #[track_caller]
    pub fn wait_for(&self, what: &str, condition: impl Fn(&vt100::Screen) -> bool) {
        self.wait_until(what, || condition(self.seen().parser.screen()));
    }

    /// Waits until a text stands on the screen.
    #[track_caller]
    pub fn wait_text(&self, text: &str) {
        self.wait_until(&format!("the text {text:?}"), || self.screen().contains(text));
    }

    /// Waits until a text no longer stands on the screen.
    #[track_caller]
    pub fn wait_no_text(&self, text: &str) {
        self.wait_until(&format!("the text {text:?} to go"), || !self.screen().contains(text));
    }

    /// Waits until nothing has come out for a while; gives the number of bytes then.
    #[track_caller]
    pub fn wait_quiet(&self, rest: Duration) -> usize {
        let (mut mark, mut since) = (self.bytes(), Instant::now());
        self.wait_until("the program to be quiet", || {
            let now = self.bytes();
            if now != mark {
                (mark, since) = (now, Instant::now());
            }
            since.elapsed() >= rest
        });
        mark
    }

    /// Waits until the program has ended, and until its last words have been read.
    #[track_caller]
    pub fn wait_exit(&mut self) -> ExitStatus {
        let deadline = Instant::now() + DEADLINE;
        let status = loop {
            if let Some(status) = self.try_exit() {
                break status;
            }
            if Instant::now() >= deadline {
                self.fail("the program to end");
            }
            thread::sleep(Duration::from_millis(5));
        };
        if let Some(reader) = self.reader.take_if(|_| self.master.is_some()) {
            // A process left behind would keep the terminal open for ever.
            let deadline = Instant::now() + Duration::from_secs(2);
            while !reader.is_finished() && Instant::now() < deadline {
                thread::sleep(Duration::from_millis(2));
            }
            self.stop_reading.store(true, Ordering::SeqCst);
            let _ = reader.join();
        }
        status
    }

    /// How the program has ended, if it has.
    pub fn try_exit(&mut self) -> Option<ExitStatus> {
        if self.ended.is_none() {
            self.ended = self.child.try_wait().expect("the state of the program");
        }
        self.ended
    }

    /// Fails unless the terminal is as the program found it.
    #[track_caller]
    pub fn assert_restored(&self) {
        let faults = {
            let seen = self.seen();
            let screen = seen.parser.screen();
            [
                (screen.alternate_screen(), "the alternate screen is on"),
                (screen.hide_cursor(), "the cursor is hidden"),
                (screen.bracketed_paste(), "bracketed paste is on"),
                (
                    screen.mouse_protocol_mode() != vt100::MouseProtocolMode::None,
                    "the mouse is captured",
                ),
                (
                    screen.fgcolor() != vt100::Color::Default || screen.inverse(),
                    "the pen is not plain",
                ),
                (modes(self.master()) != self.modes_before, "the modes have changed"),
            ]
        };
        for (fault, what) in faults {
            if fault {
                self.fail(&format!("a terminal given back, but {what}"));
            }
        }
    }

    /// Whether the terminal is in the modes the program found.
    pub fn has_first_modes(&self) -> bool {
        modes(self.master()) == self.modes_before
    }

    /// Reads no further, so that the program's output fills up, as on a stalled line.
    pub fn stall(&mut self) {
        self.stop_reading.store(true, Ordering::SeqCst);
        if let Some(reader) = self.reader.take() {
            let _ = reader.join();
        }
    }

    /// Closes the last handle on the terminal, as a dropped line does.
    pub fn hang_up(&mut self) {
        self.stall();
        self.master = None;
    }

    /// The program itself.
    pub fn process(&self) -> Process {
        Process(i32::try_from(self.child.id()).expect("a process id"))
    }

    /// A process of this name that the program has started, itself or through others.
    pub fn descendant(&self, name: &str) -> Option<Process> {
        self.process().descendant(name)
    }

    #[track_caller]
    fn fail(&self, what: &str) -> ! {
        let mut shown = String::new();
        for line in self.screen().lines() {
            let _ = writeln!(shown, "|{line}");
        }
        let bytes = self.bytes();
        let last = self.output_since(bytes.saturating_sub(400));
        panic!(
            "waited for {what}; the screen:\n{shown}{bytes} bytes, the last: {last:?}\nstate {:?}",
            self.process().state()
        );
    }
}

impl Drop for Session {
    fn drop(&mut self) {
        if self.try_exit().is_none() {
            let _ = self.child.kill();
            let _ = self.child.wait();
        }
        self.hang_up();
    }
}

/// A process, seen through `/proc`.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Process(pub i32);

impl Process {
    /// Sends a signal; a process that has ended is no fault.
    pub fn signal(self, signal: Signal) {
        let _ = kill_process(Pid::from_raw(self.0).expect("a process id"), signal);
    }

    /// The state letter: `R` runs, `S` sleeps, `T` is stopped, `Z` has ended.
    pub fn state(self) -> Option<char> {
        self.statistics()?.first()?.chars().next()
    }

    /// The processor time used so far, in ticks of mostly 10 ms.
    pub fn cpu_ticks(self) -> Option<u64> {
        let statistics = self.statistics()?;
        let ticks = |index: usize| statistics.get(index)?.parse::<u64>().ok();
        Some(ticks(11)? + ticks(12)?)
    }

    /// How often its threads have been put to sleep and woken, all together.
    pub fn context_switches(self) -> u64 {
        let threads = std::fs::read_dir(format!("/proc/{}/task", self.0));
        threads
            .into_iter()
            .flatten()
            .flatten()
            .filter_map(|thread| std::fs::read_to_string(thread.path().join("status")).ok())
            .flat_map(|status| {
                status
                    .lines()
                    .filter(|line| line.contains("ctxt_switches"))
                    .filter_map(|line| line.split_whitespace().last()?.parse::<u64>().ok())
                    .collect::<Vec<_>>()
            })
            .sum()
    }

    /// A process of this name below this one.
    pub fn descendant(self, name: &str) -> Option<Process> {
        let path = format!("/proc/{0}/task/{0}/children", self.0);
        let children = std::fs::read_to_string(path).ok()?;
        children.split_whitespace().filter_map(|id| id.parse().ok().map(Process)).find_map(
            |child| {
                let command = std::fs::read_to_string(format!("/proc/{}/comm", child.0)).ok()?;
                if command.trim_end() == name { Some(child) } else { child.descendant(name) }
            },
        )
    }

    /// The fields of `/proc/PID/stat` after the name, the state first.
    fn statistics(self) -> Option<Vec<String>> {
        let text = std::fs::read_to_string(format!("/proc/{}/stat", self.0)).ok()?;
        let (_, fields) = text.rsplit_once(')')?;
        Some(fields.split_whitespace().map(str::to_owned).collect())
    }
}

/// Reads what the program puts out until it has closed its end or is told to stop.
fn read_output(master: &OwnedFd, seen: &Mutex<Seen>, stop: &AtomicBool) {
    let mut buffer = [0; 8192];
    let rest = Timespec { tv_sec: 0, tv_nsec: 10_000_000 };
    while !stop.load(Ordering::SeqCst) {
        let mut waited = [PollFd::new(master, PollFlags::IN)];
        if !poll(&mut waited, Some(&rest)).is_ok_and(|ready| ready > 0) {
            continue;
        }
        let Ok(count @ 1..) = rustix::io::read(master, &mut buffer) else {
            return;
        };
        let mut seen = seen.lock().unwrap_or_else(PoisonError::into_inner);
        seen.parser.process(&buffer[..count]);
        seen.bytes.extend_from_slice(&buffer[..count]);
    }
}

fn text_of(screen: &vt100::Screen) -> String {
    let (_, columns) = screen.size();
    screen.rows(0, columns.get()).map(|row| row.trim_end().to_owned() + "\n").collect()
}

fn modes(master: &OwnedFd) -> Modes {
    let found = tcgetattr(master).expect("the terminal's modes");
    [
        found.input_modes.bits().into(),
        found.output_modes.bits().into(),
        found.control_modes.bits().into(),
        found.local_modes.bits().into(),
    ]
}

fn set_size(master: &OwnedFd, columns: u16, rows: u16) {
    let size = Winsize { ws_row: rows, ws_col: columns, ws_xpixel: 0, ws_ypixel: 0 };
    tcsetwinsize(master, size).expect("the terminal's size");
}

fn at_least_one(side: u16) -> NonZeroU16 {
    NonZeroU16::new(side).unwrap_or(NonZeroU16::MIN)
}
