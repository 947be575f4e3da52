//! Steps: so much array time, or so much of a node's own proper time.

use clockspar::model::array_time::ArrayTime;
use clockspar::model::dd::Dd;
use clockspar::run::Run;

use super::message::Notice;

/// How far one step goes.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Step {
    /// Its length, above zero.
    pub length: ArrayTime,
    /// The row of the node in whose proper time it is; `None`: array time.
    pub of: Option<usize>,
}

/// Steps that a new desk may begin with, s.
const LADDER_S: [i64; 12] = [
    1,
    10,
    60,
    600,
    3_600,
    21_600,
    86_400,
    604_800,
    2_592_000,
    31_557_600,
    315_576_000,
    3_155_760_000,
];

impl Step {
    /// A step of which a plan has some fifty.
    pub fn for_plan(end: ArrayTime) -> Step {
        let fitting = LADDER_S
            .iter()
            .map(|seconds| ArrayTime::from_seconds(*seconds))
            .rfind(|step| step.attoseconds().saturating_mul(50) <= end.attoseconds());
        let least = || {
            // Plans of seconds and less: the power of ten below a fiftieth.
            let mut step = ArrayTime::from_seconds(1).attoseconds();
            while step > 1 && step.saturating_mul(50) > end.attoseconds() {
                step /= 10;
            }
            ArrayTime::from_attoseconds(step)
        };
        let length = match fitting {
            Some(step) => step,
            None if end > ArrayTime::ZERO => least(),
            None => ArrayTime::from_seconds(600),
        };
        Step { length, of: None }
    }

    /// The moment one step after another, or before it.
    pub fn from(self, run: &Run, at: ArrayTime, forward: bool) -> Result<ArrayTime, Notice> {
        let Some(row) = self.of else {
            let count = if forward { 1 } else { -1 };
            return at.stepped(self.length, count).ok_or_else(outside);
        };
        own_step(run, row, at, self.length, forward)
    }
}

fn outside() -> Notice {
    Notice::refused(
        "the step leads out of array time",
        "array time lies within 1e11 s of its zero",
        "a shorter step",
    )
}

/// The array time at which a node's clock has gone on, or back, by exactly so much, to the
/// nearest attosecond.
///
/// The node's proper time is `s(τ) = τ + offset(τ)`. It never falls, since the rate
/// `N = ds/dτ` is above zero on every line that can be flown, so the moment is found by
/// halving the range of attoseconds it lies in. The offset is a double-double; what is
/// compared is the exact difference of array times less the step, plus the difference of
/// offsets, so no large time is rounded.
fn own_step(
    run: &Run,
    row: usize,
    at: ArrayTime,
    length: ArrayTime,
    forward: bool,
) -> Result<ArrayTime, Notice> {
    let start = offset(run, row, at)?;
    let count = if forward { 1 } else { -1 };
    // Proper time gone by since the start, less what is wanted; it rises with the moment.
    let beyond = |moment: ArrayTime| -> Result<Dd, Notice> {
        let wanted = at.attoseconds() + count * length.attoseconds();
        let exact = Dd::from_i128(moment.attoseconds() - wanted) / 1.0e18;
        Ok(exact + (offset(run, row, moment)? - start))
    };
    let is_past = |moment: ArrayTime| beyond(moment).map(|left| !left.is_negative());
    let edge = if forward {
        run.last_moment()
    } else {
        ArrayTime::from_attoseconds(-ArrayTime::LIMIT.attoseconds())
    };
    // A range that holds the moment: doubled until it does, or until array time ends.
    let mut near = at;
    let mut reach = length;
    let far = loop {
        let moved = at
            .stepped(reach, count)
            .map_or(edge, |moment| if forward { moment.min(edge) } else { moment.max(edge) });
        if is_past(moved)? == forward {
            break moved;
        }
        if moved == edge {
            return Err(run
                .check_moment(edge.stepped(length, count).unwrap_or(edge))
                .map_or_else(Notice::from, |()| outside()));
        }
        near = moved;
        reach = ArrayTime::from_attoseconds(reach.attoseconds().saturating_mul(2));
    };
    let (mut below, mut above) =
        (near.attoseconds().min(far.attoseconds()), near.attoseconds().max(far.attoseconds()));
    // Outwards by one, so that the moment sought is never the lower end itself.
    below -= 1;
    while above - below > 1 {
        let middle = ArrayTime::from_attoseconds(below + (above - below) / 2);
        if is_past(middle)? {
            above = middle.attoseconds();
        } else {
            below = middle.attoseconds();
        }
    }
    let (below, above) = (ArrayTime::from_attoseconds(below), ArrayTime::from_attoseconds(above));
    let is_nearer = below.in_domain().is_some() && beyond(below)?.abs() < beyond(above)?.abs();
    Ok(if is_nearer { below } else { above })
}

fn offset(run: &Run, row: usize, at: ArrayTime) -> Result<Dd, Notice> {
    let state = run.state_at(at)?;
    state.node(row).aboard().map(|aboard| aboard.clock_offset_s).ok_or_else(|| {
        Notice::refused(
            format!("`{}` is no longer part of the line at {at} s", run.layout().nodes[row].name),
            "a step is in the proper time of a node of the line",
            "`step 1 s`, or the step of another node",
        )
    })
}
