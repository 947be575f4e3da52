//! Everything that touches the world: arguments, files, the wall clock, the terminal.

pub mod arguments;
pub mod commands;
mod desk;
mod files;
mod moments;
mod output;
mod preferences;
pub mod problem;
mod recording_file;
mod terminal;
mod whole_file;

use std::io::Write;
use std::sync::Arc;
use std::sync::atomic::AtomicBool;

use clockspar::layout::names::made_safe;
use signal_hook::consts::SIGXFSZ;

/// Prints one message on standard error. A message that cannot be printed is dropped:
/// there is nowhere left to say so.
///
/// Messages hold names of files, which may hold anything: what could act on a terminal is
/// replaced here.
pub fn message(text: &str) {
    let lines: Vec<String> = text.split('\n').map(made_safe).collect();
    let mut stderr = std::io::stderr().lock();
    let _ = writeln!(stderr, "{}", lines.join("\n"));
}

/// Makes a write beyond the largest size a file may have fail like one on a full disk,
/// instead of ending the program in the middle of a line.
pub fn outlive_the_limit_on_file_sizes() {
    // When it cannot be arranged everything else still works.
    let _ = signal_hook::flag::register(SIGXFSZ, Arc::new(AtomicBool::new(false)));
}
