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

use std::io::Write;

/// Prints one message on standard error. A message that cannot be printed is dropped:
/// there is nowhere left to say so.
pub fn message(text: &str) {
    let mut stderr = std::io::stderr().lock();
    let _ = writeln!(stderr, "{text}");
}
