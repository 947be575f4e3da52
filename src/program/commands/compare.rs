//! `clockspar compare`.

use std::collections::HashSet;
use std::path::Path;

use clockspar::model::array_time::ArrayTime;
use clockspar::run::{Run, State};
use clockspar::table::content::{compare_report, differences};

use super::choice::{LineShown, Nodes};
use super::show::{Asked, show};
use super::{recordings, run_of};
use crate::program::arguments::{CompareArguments, MomentArguments};
use crate::program::files;
use crate::program::moments::Moments;
use crate::program::problem::Problem;

/// Two layouts, or two recordings, at the same moments.
///
/// A recording is compared as it was flown: its layout with its events.
pub fn compare(arguments: &CompareArguments) -> Result<u8, Problem> {
    let a = Side::load(&arguments.a)?;
    let b = Side::load(&arguments.b)?;
    if a.recorded.is_some() != b.recorded.is_some() {
        return Err(Problem::new(
            format_args!(
                "{} and {} are not of one kind",
                files::shown_name(&arguments.a),
                files::shown_name(&arguments.b)
            ),
            "two layouts are compared, or two recordings",
            "record the layout first, with `clockspar record`",
        ));
    }
    let asked = &arguments.moments;
    check_epochs(&a, &b, asked)?;
    let moments = match (&a.recorded, &b.recorded) {
        // Two recordings speak for themselves at every moment both hold.
        (Some(first), Some(second)) if asked.at.is_none() && asked.every.is_none() => {
            let common: HashSet<_> = second.iter().collect();
            first.iter().copied().filter(|at| common.contains(at)).collect::<Vec<_>>().into()
        }
        _ => Moments::of(asked, a.run.layout())?,
    };
    if moments.count() == 0 {
        return Err(Problem::new(
            "the recordings have no moment in common",
            "recordings are compared at the moments both hold a frame of",
            "give the moments with --at or --every",
        ));
    }
    for at in moments.iter() {
        for (side, path) in [(&a, &arguments.a), (&b, &arguments.b)] {
            side.run.check_moment(at).map_err(|fault| {
                let name = files::shown_name(path);
                Problem::new(format_args!("{name}: {fault}"), fault.rule(), fault.remedy())
            })?;
        }
    }
    let (a, b) = (&a.run, &b.run);
    let (first, second) = (a.layout(), b.layout());
    let line = LineShown { nodes: Nodes::OfBoth(first, second), epoch: first.epoch.as_ref() };
    let asked = Asked { moments: &moments, options: asked, line };
    show(&asked, &arguments.output, &|at| {
        let (first, second) = (state_at(a, at), state_at(b, at));
        let found = differences(&first, &second);
        compare_report(&first, &second, found)
    })?;
    Ok(0)
}

/// A date names one moment only where both count from the same one.
fn check_epochs(a: &Side, b: &Side, asked: &MomentArguments) -> Result<(), Problem> {
    let Some(date) = Moments::date_given(asked) else { return Ok(()) };
    let zero = |side: &Side| Some(side.run.layout().epoch.as_ref()?.tai_since_2000);
    if zero(a) == zero(b) {
        return Ok(());
    }
    Err(Problem::new(
        format_args!("{date}: the two have not the same epoch"),
        "lines are compared at one array time, and a date is another one in each of these",
        "give the moment as a time since array time zero, for example `--at 2h`",
    ))
}

/// One side of a comparison.
struct Side {
    run: Run,
    /// The moments of its frames; `None` for a layout.
    recorded: Option<Vec<ArrayTime>>,
}

impl Side {
    fn load(path: &Path) -> Result<Side, Problem> {
        if files::looks_like_recording(path) {
            let (run, moments) = recordings::run_of_recording(path)?;
            return Ok(Side { run, recorded: Some(moments) });
        }
        let run = run_of(files::load(path)?, &files::shown_name(path))?;
        Ok(Side { run, recorded: None })
    }
}

fn state_at(run: &Run, at: ArrayTime) -> State<'_> {
    run.state_at(at).unwrap_or_else(|_| unreachable!("the moments have been checked"))
}
