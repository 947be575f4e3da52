//! Moments as people write them: durations, `end`, dates.

use clockspar::layout::quantity::{self, QuantityFault};
use clockspar::layout::{Course, Layout};
use clockspar::model::array_time::ArrayTime;

use super::arguments::MomentArguments;
use super::problem::Problem;

/// The moments a table command is asked for.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
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
        let or = |option: &str, text: &Option<String>, default| match text {
            Some(text) => moment(option, text, layout),
            None => Ok(default),
        };
        let from = or("--from", &arguments.from, ArrayTime::ZERO)?;
        let until = or("--until", &arguments.until, plan_end(layout))?;
        every_moment(from, until, step("--every", every)?)
    }

    /// The moments, in order.
    pub fn iter(self) -> impl Iterator<Item = ArrayTime> {
        let (from, until, every) = match self {
            Moments::One(at) => (at, at, ArrayTime::from_seconds(1)),
            Moments::Every { from, until, every } => (from, until, every),
        };
        (0..).map_while(move |count| from.stepped(every, count).filter(|&at| at <= until))
    }
}

/// A range of moments, checked.
pub fn every_moment(from: ArrayTime, until: ArrayTime, every: ArrayTime) -> Result<Moments, Problem> {
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
    let step = quantity::parse_duration(text).map_err(|fault| told(option, text, &fault))?;
    if step <= ArrayTime::ZERO {
        return Err(Problem::new(
            format_args!("{option} {text}: a step of {step} s"),
            "a step is longer than zero",
            "give a duration such as `10 min`",
        ));
    }
    Ok(step)
}

/// A moment: a duration, `end`, or a date when the layout has an epoch.
pub fn moment(option: &str, text: &str, layout: &Layout) -> Result<ArrayTime, Problem> {
    let text = text.trim();
    if text == "end" {
        return Ok(plan_end(layout));
    }
    if !looks_like_date(text) {
        return quantity::parse_duration(text).map_err(|fault| told(option, text, &fault));
    }
    let Some(epoch) = &layout.epoch else {
        return Err(Problem::new(
            format_args!("{option} {text}: a date, but the layout states no epoch"),
            "a date is a moment of array time only through the date of array time zero",
            "give a duration since the start, or add `epoch = \"…\"` to the layout",
        ));
    };
    let date = quantity::parse_date(text).map_err(|fault| told(option, text, &fault))?;
    date.tai_since_2000.checked_sub(epoch.tai_since_2000).ok_or_else(|| {
        Problem::new(
            format_args!("{option} {text}: more than 1e11 s from the epoch"),
            "array time is within ±1e11 s",
            "give a date nearer to the epoch",
        )
    })
}

/// A date has its year, month and day before anything else.
fn looks_like_date(text: &str) -> bool {
    let mut parts = text.splitn(3, '-');
    let is_number = |part: Option<&str>| {
        part.is_some_and(|part| !part.is_empty() && part.bytes().all(|byte| byte.is_ascii_digit()))
    };
    is_number(parts.next()) && is_number(parts.next()) && parts.next().is_some()
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
        Course::Thrust(plan) => plan
            .phases()
            .iter()
            .find(|phase| phase.is_hold())
            .map_or(ArrayTime::ZERO, |hold| {
                let (start, end) = (hold.start.attoseconds(), hold.end.attoseconds());
                ArrayTime::from_attoseconds(start + (end - start) / 2)
            }),
        Course::Standing(_) => ArrayTime::from_seconds(86_400),
    }
}

fn told(option: &str, text: &str, fault: &QuantityFault) -> Problem {
    Problem::new(format_args!("{option} {text}"), &fault.rule, &fault.remedy)
}
