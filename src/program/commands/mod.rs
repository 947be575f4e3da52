//! One function a command.

mod compare;
mod recordings;
mod tables;

use clockspar::layout::{Course, Layout};
use clockspar::model::horizon::{Extremes, reached};
use clockspar::table::content::{Span, State, judge};

use super::arguments::{Arguments, Command};
use super::problem::{Problem, STATUS_RULE};
use super::{desk, files, message};

/// Runs the command; the result is the exit status.
pub fn run(arguments: Arguments) -> Result<u8, Problem> {
    match arguments.command {
        None => built_in(&arguments.look),
        Some(Command::Desk(arguments)) => {
            desk::run(files::load(&arguments.layout)?, &arguments.look)
        }
        Some(Command::Check(arguments)) => tables::check(&arguments),
        Some(Command::Rates(arguments)) => tables::rates(&arguments),
        Some(Command::Offsets(arguments)) => tables::offsets(&arguments),
        Some(Command::Compare(arguments)) => compare::compare(&arguments),
        Some(Command::Record(arguments)) => recordings::record(&arguments),
        Some(Command::Replay(arguments)) => recordings::replay(&arguments),
        Some(Command::Verify(arguments)) => recordings::verify(&arguments),
    }
}

/// Without a command: the desk, or a table when there is no terminal to draw on.
fn built_in(look: &super::arguments::Look) -> Result<u8, Problem> {
    use std::io::IsTerminal;
    let layout = files::built_in()?;
    if std::io::stdout().is_terminal() {
        return desk::run(layout, look);
    }
    tables::print_rates(&layout)
}

/// Refuses a layout in which a node reaches the horizon: its numbers do not exist.
fn refuse_horizon(layout: &Layout, file: &str) -> Result<(), Problem> {
    let Course::Thrust(plan) = &layout.course else { return Ok(()) };
    let Some(extremes) = Extremes::of(plan) else { return Ok(()) };
    for node in &layout.nodes {
        let Some(found) = reached(plan, &extremes, node.position_m) else { continue };
        return Err(Problem::new(
            format_args!(
                "{file}: node `{}` at {:?} m reaches the horizon in phase {}, at {} s of array time",
                node.name,
                node.position_m,
                found.phase + 1,
                found.at_s.to_f64()
            ),
            "every node keeps its rate 1 + a h/c^2 above zero at every moment of the plan",
            format_args!(
                "hold no more than {:?} m/s^2 at the reference in that direction, or place the node \
                 no farther than {:?} m; `clockspar check` lists every such node",
                found.largest_acceleration_m_s2.abs(),
                found.nearest_position_m
            ),
        ));
    }
    Ok(())
}

/// One line of warning when a layout breaks a rule the command does not show.
fn warn_of_broken_rules(layout: &Layout, file: &str) {
    let judgements = judge(layout, Span::Plan);
    let mut broken = judgements.iter().filter(|judgement| judgement.state == State::Broken);
    let Some(first) = broken.next() else { return };
    let others = broken.count();
    let more = if others == 0 { String::new() } else { format!(" and {others} more") };
    message(&format!(
        "warning: {file} breaks the rule `{}` for node `{}`{more}; see `clockspar check`",
        first.rule.word(),
        layout.nodes[first.node].name
    ));
}

/// The status of a layout that breaks a rule.
fn status_of(broken: bool) -> u8 {
    if broken { STATUS_RULE } else { 0 }
}
