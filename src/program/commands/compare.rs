//! `clockspar compare`.

use std::cell::{Cell, RefCell};
use std::path::Path;

use clockspar::layout::{Epoch, Layout};
use clockspar::model::array_time::ArrayTime;
use clockspar::run::recording::{Column, Condition, Frame, ReadFault, Reader};
use clockspar::run::{Run, State};
use clockspar::table::Report;
use clockspar::table::content::{
    RecordedSide, compare_recorded_report, compare_report, differences, predicted_frame,
};

use super::choice::{LineShown, Nodes};
use super::frames::FrameList;
use super::replay::{check_dates, layout_of};
use super::show::{Asked, show};
use super::{recordings, run_of};
use crate::program::arguments::{CompareArguments, MomentArguments};
use crate::program::files;
use crate::program::message;
use crate::program::moments::{Moments, Span};
use crate::program::problem::{Problem, STATUS_RULE};
use crate::program::recording_file::RecordingSource;

/// Frames of one side alone that are named.
const MOST_NAMED: usize = 5;

/// Two layouts at the same moments as they are predicted; or, where a recording is among
/// them, what is recorded, at its frames.
pub fn compare(arguments: &CompareArguments) -> Result<u8, Problem> {
    let a = Side::load(&arguments.a)?;
    let b = Side::load(&arguments.b)?;
    check_epochs(&a, &b, &arguments.moments)?;
    match (&a.what, &b.what) {
        (What::Layout(first), What::Layout(second)) => {
            compare_predictions([(&a, first), (&b, second)], arguments)
        }
        _ => compare_recorded(&a, &b, arguments),
    }
}

fn compare_predictions(
    sides: [(&Side, &Run); 2],
    arguments: &CompareArguments,
) -> Result<u8, Problem> {
    let [(a, first), (b, second)] = sides;
    let moments = Moments::of(&arguments.moments, first.layout())?;
    for at in moments.iter() {
        for (side, run) in sides {
            check_moment(side, run, at)?;
        }
    }
    let line = LineShown { nodes: Nodes::OfBoth(a.nodes(), b.nodes()), epoch: a.epoch() };
    let asked = Asked { moments: &moments, options: &arguments.moments, line };
    show(&asked, &arguments.output, &|at| {
        let (first, second) = (state_at(first, at), state_at(second, at));
        let found = differences(&first, &second);
        compare_report(&first, &second, found)
    })?;
    Ok(0)
}

fn compare_recorded(a: &Side, b: &Side, arguments: &CompareArguments) -> Result<u8, Problem> {
    let (moments, compared) = recorded_moments(a, b, &arguments.moments)?;
    let common = moments.count();
    for side in [a, b] {
        if let What::Layout(run) = &side.what {
            for at in moments.iter() {
                check_moment(side, run, at)?;
            }
        }
    }
    let (ours, theirs) = (a.nodes(), b.nodes());
    let damage = RefCell::new(None);
    let seen = Seen::default();
    let remarks = remarks_on(a, b);
    let report = |at: ArrayTime| -> Report<'_> {
        let side = |side: &'_ Side, frame| match frame {
            Ok(frame) => frame,
            Err(fault) => {
                let fault: ReadFault = fault;
                damage.borrow_mut().get_or_insert(format!("{}: {fault}", side.shown));
                // A frame that cannot be read has no number to compare.
                Frame {
                    index: 0,
                    at,
                    reference_acceleration_m_s2: f64::NAN,
                    rapidity: None,
                    rate_minus_one: Column::default(),
                    clock_offset_s: Column::default(),
                    reading_s: None,
                }
            }
        };
        let (first, second) = (side(a, a.frame(at)), side(b, b.frame(at)));
        let is_unread = damage.borrow().is_some();
        let first = a.at_moment(&ours, first);
        let second = b.at_moment(&theirs, second);
        let mut report = compare_recorded_report(&first, &second, compared.clone());
        if is_unread {
            report.at = Err("the frame cannot be read");
            report.tables[0].rows = 0;
        } else {
            seen.take(at, report.tables[0].rows);
        }
        report.remarks.extend(remarks.iter().cloned());
        report
    };
    let line = LineShown { nodes: Nodes::OfBoth(a.nodes(), b.nodes()), epoch: a.epoch() };
    let asked = Asked { moments: &moments, options: &arguments.moments, line };
    show(&asked, &arguments.output, &report)?;
    if let Some(damage) = damage.into_inner() {
        message(&format!("{damage}; compared up to there"));
        return Ok(STATUS_RULE);
    }
    message(&seen.told(common));
    Ok(if [a, b].iter().any(|side| side.is_damaged()) { STATUS_RULE } else { 0 })
}

/// The moments compared, with what is compared there in words.
fn recorded_moments(
    a: &Side,
    b: &Side,
    asked: &MomentArguments,
) -> Result<(Moments, String), Problem> {
    let common: Vec<ArrayTime> = match (a.frames(), b.frames()) {
        (Some(first), Some(second)) => {
            first.moments.iter().copied().filter(|at| second.holds(*at)).collect()
        }
        (Some(only), None) | (None, Some(only)) => only.moments.clone(),
        (None, None) => Vec::new(),
    };
    let (Some(first), Some(last)) = (common.first(), common.last()) else {
        let none = [a, b]
            .into_iter()
            .find(|side| side.frames().is_some_and(|frames| frames.moments.is_empty()));
        return Err(Problem::new(
            match none {
                Some(side) => format!("{} holds no frame", side.shown),
                None => "the recordings have no moment in common".to_owned(),
            },
            "recordings are compared at the moments both hold a frame of",
            "record both over the same time, with steps of which one is a multiple of the other",
        ));
    };
    let ends = [a, b].map(|side| side.frames().and_then(|frames| frames.moments.last()));
    let end = ends.into_iter().flatten().min().unwrap_or(last);
    for side in [a, b] {
        if let What::Recording(held) = &side.what {
            check_dates(held.layout.as_ref(), asked, &side.shown)?;
        }
    }
    let span = Span { epoch: a.epoch(), first: *first, end: *end };
    let moments = match Moments::of_recording(asked, &span)? {
        Some(moments) => moments,
        None => Moments::from(common.clone()),
    };
    for at in moments.iter() {
        for side in [a, b] {
            if side.frames().is_some_and(|frames| !frames.holds(at)) {
                let nearest = nearest(&common, at);
                return Err(Problem::new(
                    format_args!("{} holds no frame at {at} s", side.shown),
                    "what is recorded is compared at moments of which both hold a frame",
                    format_args!("the nearest one is {nearest} s: `--at {nearest}s`"),
                ));
            }
        }
    }
    let count = common.len();
    let frames = if count == 1 { "the frame".to_owned() } else { format!("the {count} frames") };
    let compared = match (a.frames(), b.frames()) {
        (Some(first), Some(second)) => {
            let alone = |frames: &FrameList| frames.moments.len() - count;
            format!(
                "the numbers as recorded, at {frames} both hold; {} only in a, {} only in b",
                alone(first),
                alone(second)
            )
        }
        (Some(_), None) => format!("what a recorded and what b predicts, at {frames} of a"),
        _ => format!("what a predicts and what b recorded, at {frames} of b"),
    };
    Ok((moments, compared))
}

/// The moment nearest to another in a list that is not empty.
fn nearest(moments: &[ArrayTime], at: ArrayTime) -> ArrayTime {
    let distance = |moment: &ArrayTime| moment.attoseconds().abs_diff(at.attoseconds());
    moments.iter().copied().min_by_key(distance).unwrap_or(at)
}

/// What stands under a comparison of recordings, whatever the moment.
fn remarks_on(a: &Side, b: &Side) -> Vec<String> {
    let mut remarks = Vec::new();
    if let (Some(first), Some(second)) = (a.frames(), b.frames()) {
        for (word, frames, other) in [("a", first, second), ("b", second, first)] {
            let mut alone = frames.moments.iter().filter(|at| !other.holds(**at));
            let named: Vec<String> =
                alone.by_ref().take(MOST_NAMED).map(|at| format!("{at} s")).collect();
            let more = alone.count();
            if !named.is_empty() {
                let more = if more == 0 { String::new() } else { format!(" and {more} more") };
                remarks.push(format!("Frames only in {word}: {}{more}.", named.join(", ")));
            }
        }
    }
    if let (What::Recording(first), What::Recording(second)) = (&a.what, &b.what) {
        let (first, second) = (first.reader.opening(), second.reader.opening());
        if first.model != second.model {
            remarks.push(format!(
                "a was recorded under model {}, b under model {}.",
                first.model, second.model
            ));
        }
        if first.has_readings != second.has_readings {
            remarks.push("Only one of them holds readings; they are not compared.".to_owned());
        }
    }
    remarks
}

/// What has been compared so far.
#[derive(Default)]
struct Seen {
    last: Cell<Option<ArrayTime>>,
    compared: Cell<usize>,
    differing: Cell<usize>,
    first: Cell<Option<ArrayTime>>,
}

impl Seen {
    /// Takes a moment in, the first time it comes.
    fn take(&self, at: ArrayTime, rows: usize) {
        if self.last.get().is_some_and(|last| at <= last) {
            return;
        }
        self.last.set(Some(at));
        self.compared.set(self.compared.get() + 1);
        if rows > 0 {
            self.differing.set(self.differing.get() + 1);
            self.first.set(self.first.get().or(Some(at)));
        }
    }

    fn told(&self, moments: usize) -> String {
        let compared = self.compared.get();
        let frames = match compared {
            1 => "the frame compared".to_owned(),
            _ => format!("the {compared} frames compared"),
        };
        debug_assert!(compared <= moments);
        match (self.differing.get(), self.first.get()) {
            (0, _) | (_, None) => format!("no recorded number differs by a single bit at {frames}"),
            (1, Some(first)) if compared == 1 => {
                format!("numbers differ at the frame compared, that at {first} s")
            }
            (differing, Some(first)) => {
                format!("numbers differ at {differing} of {frames}, first at {first} s")
            }
        }
    }
}

/// A date names one moment only where both count from the same one.
fn check_epochs(a: &Side, b: &Side, asked: &MomentArguments) -> Result<(), Problem> {
    let Some(date) = Moments::date_given(asked) else { return Ok(()) };
    let zero = |side: &Side| Some(side.epoch()?.tai_since_2000);
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
    shown: String,
    what: What,
}

enum What {
    /// A layout as it is predicted.
    Layout(Box<Run>),
    /// A recording as it stands.
    Recording(Box<Held>),
}

/// What a recording holds.
struct Held {
    reader: Reader<RecordingSource>,
    frames: FrameList,
    layout: Option<Layout>,
}

impl Side {
    fn load(path: &Path) -> Result<Side, Problem> {
        let shown = files::shown_name(path);
        if !files::looks_like_recording(path) {
            let run = run_of(files::load(path)?, &shown)?;
            return Ok(Side { shown, what: What::Layout(Box::new(run)) });
        }
        let reader = recordings::open(path)?;
        if let Condition::Cut(cut) = reader.condition() {
            message(&format!("warning: {shown}: {cut}; compared up to its last whole line"));
        }
        let layout = layout_of(&reader, &shown);
        let frames = FrameList::of(&reader, &shown)?;
        if let Some(damage) = &frames.damage {
            message(&format!("warning: {shown}: {damage}; compared up to there"));
        }
        Ok(Side { shown, what: What::Recording(Box::new(Held { reader, frames, layout })) })
    }

    fn frames(&self) -> Option<&FrameList> {
        match &self.what {
            What::Layout(_) => None,
            What::Recording(held) => Some(&held.frames),
        }
    }

    fn is_damaged(&self) -> bool {
        self.frames().is_some_and(|frames| frames.damage.is_some())
    }

    fn layout(&self) -> Option<&Layout> {
        match &self.what {
            What::Layout(run) => Some(run.layout()),
            What::Recording(held) => held.layout.as_ref(),
        }
    }

    fn epoch(&self) -> Option<&Epoch> {
        self.layout().and_then(|layout| layout.epoch.as_ref())
    }

    fn nodes(&self) -> Vec<&str> {
        match &self.what {
            What::Layout(run) => run.layout().nodes.iter().map(|node| node.name.as_str()).collect(),
            What::Recording(held) => {
                held.reader.opening().nodes.iter().map(String::as_str).collect()
            }
        }
    }

    /// What is recorded at a frame, or predicted for its moment.
    fn frame(&self, at: ArrayTime) -> Result<Frame, ReadFault> {
        match &self.what {
            What::Layout(run) => Ok(predicted_frame(&state_at(run, at))),
            What::Recording(held) => held.frames.read(&held.reader, at).map(|(frame, _)| frame),
        }
    }

    fn at_moment<'a>(&'a self, nodes: &'a [&'a str], frame: Frame) -> RecordedSide<'a> {
        let revision = self.layout().and_then(|layout| layout.revision.as_deref());
        let (layout, layout_sha256) = match &self.what {
            What::Layout(run) => (run.layout().name.as_str(), run.layout().source.sha256.as_str()),
            What::Recording(held) => {
                let opening = held.reader.opening();
                (opening.layout.as_str(), opening.layout_sha256.as_str())
            }
        };
        RecordedSide { layout, revision, layout_sha256, nodes, frame }
    }
}

fn check_moment(side: &Side, run: &Run, at: ArrayTime) -> Result<(), Problem> {
    run.check_moment(at).map_err(|fault| {
        Problem::new(format_args!("{}: {fault}", side.shown), fault.rule(), fault.remedy())
    })
}

fn state_at(run: &Run, at: ArrayTime) -> State<'_> {
    run.state_at(at).unwrap_or_else(|_| unreachable!("the moments have been checked"))
}
