//! One function a command.

mod choice;
mod compare;
mod following;
mod frames;
mod recordings;
mod replay;
mod show;
mod tables;

use std::sync::Arc;

use clockspar::layout::Layout;
use clockspar::run::Run;
use clockspar::table::content::{Check, JudgedOver};

use super::arguments::{Arguments, Command};
use super::problem::{Problem, STATUS_RULE};
use super::{desk, files, message, preferences};

/// Runs the command; the result is the exit status.
pub fn run(arguments: Arguments) -> Result<u8, Problem> {
    match arguments.command {
        None => built_in(&arguments),
        Some(Command::Desk(arguments)) => {
            let look = preferences::look(&arguments.look, &arguments.preferences);
            desk::run(files::load(&arguments.layout)?, &look)
        }
        Some(Command::Check(arguments)) => tables::check(&arguments),
        Some(Command::Rates(arguments)) => tables::rates(&arguments),
        Some(Command::Offsets(arguments)) => tables::offsets(&arguments),
        Some(Command::Loads(arguments)) => tables::loads(&arguments),
        Some(Command::Links(arguments)) => tables::links(&arguments),
        Some(Command::Reach(arguments)) => tables::reach(&arguments),
        Some(Command::Compare(arguments)) => compare::compare(&arguments),
        Some(Command::Record(arguments)) => recordings::record(&arguments),
        Some(Command::Replay(arguments)) => replay::replay(&arguments),
        Some(Command::Verify(arguments)) => recordings::verify(&arguments),
    }
}

/// Without a command: the desk, or a table when there is no terminal to draw on.
fn built_in(arguments: &Arguments) -> Result<u8, Problem> {
    use std::io::IsTerminal;
    let layout = files::built_in()?;
    if std::io::stdout().is_terminal() {
        let look = preferences::look(&arguments.look, &arguments.preferences);
        return desk::run(layout, &look);
    }
    tables::print_rates(layout, &arguments.preferences)
}

/// The run of a layout; one in which a node reaches the horizon is refused, because its
/// numbers do not exist.
fn run_of(layout: Layout, file: &str) -> Result<Run, Problem> {
    Run::new(Arc::new(layout)).map_err(|fault| {
        Problem::new(format_args!("{file}: {fault}"), fault.rule(), fault.remedy())
    })
}

/// One line of warning when a layout breaks a rule the command does not show.
fn warn_of_broken_rules(run: &Run, file: &str) {
    let layout = run.layout();
    // Those of a rigid line are built only when a rule asks for them.
    let built = if run.is_rigid() { None } else { run.loads().ok() };
    let check = Check::with_loads(layout, JudgedOver::Plan, built);
    let Some((first, count)) = check.broken() else { return };
    let more = if count == 1 { String::new() } else { format!(" and {} more", count - 1) };
    message(&format!(
        "warning: {file} breaks the rule `{}` for `{}`{more}; see `clockspar check`",
        first.rule.word(),
        first.subject.name(layout)
    ));
}

/// The status of a layout that breaks a rule.
fn status_of(broken: bool) -> u8 {
    if broken { STATUS_RULE } else { 0 }
}
