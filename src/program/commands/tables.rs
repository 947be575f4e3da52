//! The table commands on a layout.

use std::path::Path;
use std::sync::Arc;

use clockspar::layout::Layout;
use clockspar::model::array_time::ArrayTime;
use clockspar::run::{Event, EventKind, Run, State};
use clockspar::table::Report;
use clockspar::table::content::{
    Check, JudgedOver, LoadsOverPlan, Reach, check_report, has_short_summary, links_report,
    loads_report, offsets_report, rates_report, reach_report,
};

use super::choice::LineShown;
use super::show::{Asked, show};
use super::{run_of, status_of, warn_of_broken_rules};
use crate::program::arguments::{
    MomentArguments, OffsetsArguments, OutputArguments, PreferenceArguments, ReachArguments,
    TableArguments,
};
use crate::program::files;
use crate::program::moments::{Moments, moment};
use crate::program::problem::Problem;

/// `clockspar rates`.
pub fn rates(arguments: &TableArguments) -> Result<u8, Problem> {
    table_of_run(&arguments.layout, &arguments.moments, &arguments.output, rates_report)
}

/// `clockspar offsets`.
pub fn offsets(arguments: &OffsetsArguments) -> Result<u8, Problem> {
    let (table, pairs) = (&arguments.table, arguments.pairs);
    table_of_run(&table.layout, &table.moments, &table.output, move |state| {
        offsets_report(state, pairs)
    })
}

/// `clockspar loads`: status 1 when the plan breaks strength, a rating, slack or propellant.
pub fn loads(arguments: &TableArguments) -> Result<u8, Problem> {
    let run = run_of(files::load(&arguments.layout)?, &files::shown_name(&arguments.layout))?;
    let loads = run
        .loads()
        .map_err(|fault| Problem::new(format_args!("{fault}"), fault.rule(), fault.remedy()))?;
    let over_plan = LoadsOverPlan::new(run.layout(), loads);
    show_run(&run, &arguments.moments, &arguments.output, |state| loads_report(state, &over_plan))?;
    Ok(status_of(over_plan.fails()))
}

/// `clockspar links`. The summary spans the plan and looks through all of it for every row,
/// so a table over time and a long line have it only when it is asked for by name.
pub fn links(arguments: &TableArguments) -> Result<u8, Problem> {
    let is_named = arguments.output.table.as_deref() == Some("summary");
    let is_one = arguments.moments.every.is_none();
    table_of_run(&arguments.layout, &arguments.moments, &arguments.output, move |state| {
        let is_short = is_one && has_short_summary(state.run().layout());
        links_report(state, is_named || is_short)
    })
}

/// `clockspar reach`.
pub fn reach(arguments: &ReachArguments) -> Result<u8, Problem> {
    let table = &arguments.table;
    let layout = files::load(&table.layout)?;
    let name = files::shown_name(&table.layout);
    let run = run_of(layout, &name)?;
    let before = arguments.before.as_deref();
    let before = before.map(|text| moment("--before", text, run.layout())).transpose()?;
    let released = arguments.release.as_deref().map(|node| node_to_release(&run, node));
    let asked = Reach { released: released.transpose()?, before };
    warn_of_broken_rules(&run, &name);
    show_run(&run, &table.moments, &table.output, move |state| reach_report(state, asked))
}

/// The row of a node that can be let go: any but the reference.
fn node_to_release(run: &Run, node: &str) -> Result<usize, Problem> {
    let event = Event { at: ArrayTime::ZERO, kind: EventKind::Release { node: node.to_owned() } };
    run.clone().apply(event).and_then(|()| run.row(node)).map_err(|fault| {
        Problem::new(format_args!("--release {node}: {fault}"), fault.rule(), fault.remedy())
    })
}

/// The rates of the built-in layout, when there is no terminal to open the desk on.
pub fn print_rates(layout: Layout, preferences: &PreferenceArguments) -> Result<u8, Problem> {
    let run = run_of(layout, files::BUILT_IN_NAME)?;
    let output = OutputArguments { preferences: preferences.clone(), ..Default::default() };
    show_run(&run, &MomentArguments::default(), &output, rates_report)
}

/// Reads a layout, refuses one that cannot be flown, warns of broken rules, and shows.
fn table_of_run(
    path: &Path,
    moments: &MomentArguments,
    output: &OutputArguments,
    report: impl for<'a> Fn(State<'a>) -> Report<'a>,
) -> Result<u8, Problem> {
    let layout = files::load(path)?;
    let name = files::shown_name(path);
    let run = run_of(layout, &name)?;
    warn_of_broken_rules(&run, &name);
    show_run(&run, moments, output, report)
}

fn show_run(
    run: &Run,
    moments: &MomentArguments,
    output: &OutputArguments,
    report: impl for<'a> Fn(State<'a>) -> Report<'a>,
) -> Result<u8, Problem> {
    let asked = Moments::of(moments, run.layout())?;
    let asked = Asked { moments: &asked, options: moments, line: LineShown::of(run.layout()) };
    show(&asked, output, &|at| report(state_at(run, at)))?;
    Ok(0)
}

/// The line at a moment that has been checked to lie in the domain.
fn state_at(run: &Run, at: ArrayTime) -> State<'_> {
    run.state_at(at).unwrap_or_else(|_| unreachable!("moments are parsed within the domain"))
}

/// `clockspar check`: over the whole plan, or at the moments asked for.
pub fn check(arguments: &TableArguments) -> Result<u8, Problem> {
    let layout = files::load(&arguments.layout)?;
    let asked = arguments.moments.at.is_some() || arguments.moments.every.is_some();
    if !asked {
        let check = Arc::new(Check::new(&layout, JudgedOver::Plan));
        let report = |_| check_report(Arc::clone(&check));
        let asked = Asked {
            moments: &Moments::One(ArrayTime::ZERO),
            options: &MomentArguments::default(),
            line: LineShown::of(&layout),
        };
        show(&asked, &arguments.output, &report)?;
        return Ok(status_of(check.broken().is_some()));
    }
    let moments = Moments::of(&arguments.moments, &layout)?;
    let check = |at| Check::new(&layout, JudgedOver::Moment(at));
    let report = |at| check_report(Arc::new(check(at)));
    let asked =
        Asked { moments: &moments, options: &arguments.moments, line: LineShown::of(&layout) };
    show(&asked, &arguments.output, &report)?;
    Ok(status_of(moments.iter().any(|at| check(at).broken().is_some())))
}
