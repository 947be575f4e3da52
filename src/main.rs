//! The program `clockspar`: exit status, and the one place that prints errors.
#![warn(missing_docs)]

mod program;

use std::process::ExitCode;

use program::arguments::Arguments;

fn main() -> ExitCode {
    program::outlive_the_limit_on_file_sizes();
    match Arguments::given().and_then(program::commands::run) {
        Ok(status) => ExitCode::from(status),
        Err(problem) => {
            if !problem.text.is_empty() {
                program::message(&problem.text);
            }
            ExitCode::from(problem.status)
        }
    }
}
