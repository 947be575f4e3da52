//! Whether there is a terminal that the desk can be drawn on.

use std::fmt;
use std::io::{self, IsTerminal};

/// Why the desk cannot be drawn here; its text is whole and ready to print.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Unusable {
    what: String,
}

impl Unusable {
    /// What the desk needs.
    pub const RULE: &str = "standard input and standard output are a terminal, and TERM names one that can place its cursor";

    /// What to do instead.
    pub const REMEDY: &str = "use `clockspar rates` for the same numbers as text";

    pub(super) fn because_of(error: &io::Error) -> Self {
        Unusable { what: format!("the terminal could not be set up: {error}") }
    }

    pub(super) fn opened_before() -> Self {
        Unusable { what: "the desk has been opened before in this program".to_owned() }
    }
}

impl fmt::Display for Unusable {
    fn fmt(&self, formatter: &mut fmt::Formatter<'_>) -> fmt::Result {
        writeln!(formatter, "{}", self.what)?;
        writeln!(formatter, "rule: {}", Self::RULE)?;
        write!(formatter, "remedy: {}", Self::REMEDY)
    }
}

impl std::error::Error for Unusable {}

/// Whether the desk can be drawn on standard input and output.
pub fn is_usable() -> Result<(), Unusable> {
    judge(
        io::stdin().is_terminal(),
        io::stdout().is_terminal(),
        std::env::var_os("TERM").map(|term| term.to_string_lossy().into_owned()).as_deref(),
    )
}

fn judge(input: bool, output: bool, term: Option<&str>) -> Result<(), Unusable> {
    let what = match (input, output, term) {
        (_, false, _) => "the desk needs a terminal, and standard output is not one",
        (false, true, _) => "the desk needs a terminal, and standard input is not one",
        (true, true, None | Some("")) => "the desk needs to know the terminal, and TERM is not set",
        (true, true, Some("dumb")) => {
            "the desk needs to place the cursor, and TERM=dumb says that it cannot"
        }
        (true, true, Some(_)) => return Ok(()),
    };
    Err(Unusable { what: what.to_owned() })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn each_missing_thing_is_named() {
        let text = |input, output, term| judge(input, output, term).map_err(|fault| fault.what);
        assert_eq!(text(true, true, Some("xterm")), Ok(()));
        assert!(text(true, false, Some("xterm")).is_err_and(|what| what.contains("output")));
        assert!(text(false, true, Some("xterm")).is_err_and(|what| what.contains("input")));
        assert!(text(true, true, None).is_err_and(|what| what.contains("TERM is not set")));
        assert!(text(true, true, Some("")).is_err_and(|what| what.contains("TERM is not set")));
        assert!(text(true, true, Some("dumb")).is_err_and(|what| what.contains("TERM=dumb")));
    }

    #[test]
    fn the_text_says_what_the_rule_is_and_what_to_do() {
        let fault = judge(true, false, Some("xterm")).expect_err("no terminal");
        assert_eq!(
            fault.to_string(),
            "the desk needs a terminal, and standard output is not one\n\
             rule: standard input and standard output are a terminal, and TERM names one that can place its cursor\n\
             remedy: use `clockspar rates` for the same numbers as text"
        );
    }
}
