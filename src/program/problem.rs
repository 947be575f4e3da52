//! What ends a command early: a message for standard error and an exit status.

use std::fmt;
use std::io;

/// Exit status of a rule that is broken, a recording that does not hold, and the like.
pub const STATUS_RULE: u8 = 1;

/// Exit status of bad input or use.
pub const STATUS_INPUT: u8 = 2;

/// A problem that ends a command.
#[derive(Debug)]
pub struct Problem {
    /// Exit status.
    pub status: u8,
    /// Text for standard error; empty when there is nothing to say.
    pub text: String,
}

impl Problem {
    /// A problem told as what happened, the rule, and the remedy.
    pub fn new(
        what: impl fmt::Display,
        rule: impl fmt::Display,
        remedy: impl fmt::Display,
    ) -> Problem {
        Problem { status: STATUS_INPUT, text: format!("{what}\nrule: {rule}\nremedy: {remedy}") }
    }

    /// A problem whose text is already in the project's own form.
    pub fn told(text: impl fmt::Display) -> Problem {
        Problem { status: STATUS_INPUT, text: text.to_string() }
    }

    /// An ending that is not a fault: the reader closed the pipe.
    pub fn quiet() -> Problem {
        Problem { status: 0, text: String::new() }
    }

    /// A failed write of results.
    pub fn writing(target: &str, error: &io::Error) -> Problem {
        if error.kind() == io::ErrorKind::BrokenPipe {
            return Problem::quiet();
        }
        Problem::new(
            format_args!("{target} could not be written: {error}"),
            "results are written whole or not at all",
            format_args!("{} or choose another place with --out", room_for(error)),
        )
    }
}

/// What makes room for a write that was refused.
pub fn room_for(error: &io::Error) -> &'static str {
    match error.kind() {
        io::ErrorKind::FileTooLarge => "raise the limit on the size of files (`ulimit -f`)",
        io::ErrorKind::QuotaExceeded => "make room within your quota",
        _ => "make room",
    }
}
