//! Moments as people write them: durations, `end`, dates.

use clockspar::layout::quantity::{self, QuantityFault};
use std::sync::Arc;

use clockspar::layout::date::{looks_like_a_date, parse_moment};
use clockspar::layout::{Course, Epoch, Layout};
use clockspar::model::array_time::ArrayTime;

use super::arguments::MomentArguments;
use super::problem::Problem;

/// The moments a table command is asked for.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum Moments {
    /// One moment.
    One(ArrayTime),
    /// `from + k · every` up to `until`.
    Every {
        /// First moment.
        from: ArrayTime,
        /// None lies beyond it.
        until: ArrayTime,
        /// Step, above zero.
        every: ArrayTime,
    },
    /// Moments that were found, in order; may be none.
    Listed(Arc<[ArrayTime]>),
}

impl Moments {
    /// Resolves the options of a table command.
    pub fn of(arguments: &MomentArguments, layout: &Layout) -> Result<Moments, Problem> {
        let Some(every) = &arguments.every else {
            let at = match &arguments.at {
                Some(text) => moment("--at", text, layout)?,
                None => default_moment(layout),
            };
            return Ok(Moments::One(at));
        };
        let span =
            Span { epoch: layout.epoch.as_ref(), first: ArrayTime::ZERO, end: plan_end(layout) };
        span.every(arguments, every)
    }

    /// Resolves the options of a table of a recording, whose `end` is its last frame;
    /// `None` when no moment is asked for.
    pub fn of_recording(
        arguments: &MomentArguments,
        span: &Span<'_>,
    ) -> Result<Option<Moments>, Problem> {
        if let Some(every) = &arguments.every {
            return span.every(arguments, every).map(Some);
        }
        let at = arguments.at.as_ref().map(|text| span.moment("--at", text));
        Ok(at.transpose()?.map(Moments::One))
    }

    /// The first date among the options, as it was given.
    pub fn date_given(arguments: &MomentArguments) -> Option<&str> {
        [&arguments.at, &arguments.from, &arguments.until]
            .into_iter()
            .flatten()
            .map(|text| text.trim_matches(' '))
            .find(|text| looks_like_a_date(text))
    }

    /// How many moments there are.
    pub fn count(&self) -> usize {
        match self {
            Moments::One(_) => 1,
            Moments::Listed(moments) => moments.len(),
            Moments::Every { from, until, every } => {
                let steps = (until.attoseconds() - from.attoseconds()) / every.attoseconds();
                usize::try_from(steps).unwrap_or(usize::MAX).saturating_add(1)
            }
        }
    }

    /// A moment, by its number from 0.
    pub fn nth(&self, index: usize) -> ArrayTime {
        match self {
            Moments::One(at) => *at,
            Moments::Listed(moments) => moments[index],
            Moments::Every { from, every, .. } => {
                from.stepped(*every, index as i128).unwrap_or(ArrayTime::LIMIT)
            }
        }
    }

    /// The moments, in order.
    pub fn iter(&self) -> impl Iterator<Item = ArrayTime> + '_ {
        (0..self.count()).map(move |index| self.nth(index))
    }
}

/// What moments are counted and bounded by.
#[derive(Clone, Copy, Debug)]
pub struct Span<'a> {
    /// The date of array time zero.
    pub epoch: Option<&'a Epoch>,
    /// Where a table over time begins when nothing else is asked for.
    pub first: ArrayTime,
    /// What `end` means.
    pub end: ArrayTime,
}

impl Span<'_> {
    /// A moment: a duration, `end`, or a date when there is an epoch.
    fn moment(&self, option: &str, text: &str) -> Result<ArrayTime, Problem> {
        parse_moment(text, self.epoch, self.end).map_err(|fault| told(option, text, &fault))
    }

    fn every(&self, arguments: &MomentArguments, every: &str) -> Result<Moments, Problem> {
        let or = |option: &str, text: &Option<String>, default| match text {
            Some(text) => self.moment(option, text),
            None => Ok(default),
        };
        let from = or("--from", &arguments.from, self.first)?;
        let until = or("--until", &arguments.until, self.end)?;
        every_moment(from, until, step("--every", every)?)
    }
}

impl From<Vec<ArrayTime>> for Moments {
    fn from(moments: Vec<ArrayTime>) -> Moments {
        Moments::Listed(moments.into())
    }
}

/// A range of moments, checked.
pub fn every_moment(
    from: ArrayTime,
    until: ArrayTime,
    every: ArrayTime,
) -> Result<Moments, Problem> {
    if until < from {
        return Err(Problem::new(
            format_args!("the last moment, {until} s, lies before the first, {from} s"),
            "a table over time runs forwards",
            "give --until a moment at or after --from",
        ));
    }
    Ok(Moments::Every { from, until, every })
}

/// A step, above zero.
pub fn step(option: &str, text: &str) -> Result<ArrayTime, Problem> {
    quantity::parse_length_of_time(text).map_err(|fault| told(option, text, &fault))
}

/// A moment: a duration, `end`, or a date when the layout has an epoch.
pub fn moment(option: &str, text: &str, layout: &Layout) -> Result<ArrayTime, Problem> {
    parse_moment(text, layout.epoch.as_ref(), plan_end(layout))
        .map_err(|fault| told(option, text, &fault))
}

/// The end of the plan; a standing line has none, so a day.
fn plan_end(layout: &Layout) -> ArrayTime {
    match &layout.course {
        Course::Thrust(plan) => plan.end(),
        Course::Standing(_) => default_moment(layout),
    }
}

/// The middle of the first hold; no hold: 0; a standing line: 1 d.
pub fn default_moment(layout: &Layout) -> ArrayTime {
    match &layout.course {
        Course::Thrust(plan) => {
            plan.phases().iter().find(|phase| phase.is_hold()).map_or(ArrayTime::ZERO, |hold| {
                let (start, end) = (hold.start.attoseconds(), hold.end.attoseconds());
                ArrayTime::from_attoseconds(start + (end - start) / 2)
            })
        }
        Course::Standing(_) => ArrayTime::from_seconds(86_400),
    }
}

fn told(option: &str, text: &str, fault: &QuantityFault) -> Problem {
    Problem::new(format_args!("{option} {text}"), &fault.rule, &fault.remedy)
}
