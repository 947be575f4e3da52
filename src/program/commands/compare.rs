//! `clockspar compare`.

use std::path::Path;

use clockspar::model::array_time::ArrayTime;
use clockspar::run::{Run, State};
use clockspar::table::content::{compare_report, differences};

use super::show::show;
use super::{recordings, run_of};
use crate::program::arguments::CompareArguments;
use crate::program::moments::Moments;
use crate::program::problem::Problem;
use crate::program::{files, recording_file};

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
    let moments = match (asked.at.is_none() && asked.every.is_none(), a.recorded, b.recorded) {
        // Two recordings speak for themselves at the last moment both hold.
        (true, Some(first), Some(second)) => Moments::One(first.min(second)),
        _ => Moments::of(asked, a.run.layout())?,
    };
    for at in moments.iter() {
        for (side, path) in [(&a, &arguments.a), (&b, &arguments.b)] {
            side.run.check_moment(at).map_err(|fault| {
                let name = files::shown_name(path);
                Problem::new(format_args!("{name}: {fault}"), fault.rule(), fault.remedy())
            })?;
        }
    }
    let (a, b) = (&a.run, &b.run);
    show(moments, asked.paced, &arguments.output, &|at| {
        let (first, second) = (state_at(a, at), state_at(b, at));
        let found = differences(&first, &second);
        compare_report(&first, &second, found)
    })?;
    Ok(0)
}

/// One side of a comparison.
struct Side {
    run: Run,
    /// The last moment of a recording; `None` for a layout.
    recorded: Option<ArrayTime>,
}

impl Side {
    fn load(path: &Path) -> Result<Side, Problem> {
        if recording_file::looks_like_recording(path) {
            let (run, last) = recordings::run_of_recording(path)?;
            return Ok(Side { run, recorded: Some(last) });
        }
        let run = run_of(files::load(path)?, &files::shown_name(path))?;
        Ok(Side { run, recorded: None })
    }
}

fn state_at(run: &Run, at: ArrayTime) -> State<'_> {
    run.state_at(at).unwrap_or_else(|_| unreachable!("the moments have been checked"))
}
