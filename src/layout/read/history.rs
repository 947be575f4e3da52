//! A logged acceleration: points of array time, piecewise linear between them.

use super::csv::{Row, Rows};
use crate::layout::fault::{Collector, Spot};
use crate::layout::quantity::{self, Dimension, short};
use crate::model::array_time::ArrayTime;
use crate::model::plan::{LARGEST_ACCELERATION_M_S2, Phase};

/// The phases of a history, and where the row stands that ends each.
#[derive(Default)]
pub(super) struct History {
    pub(super) phases: Vec<Phase>,
    pub(super) spots: Vec<Spot>,
}

/// Reads a history, columns `at_s` and `acceleration_m_s2` in any order; `None` when a
/// fault leaves no plan.
///
/// Times never fall; two rows at one time are a jump. Before the first row the
/// acceleration is zero, as it is after the last.
pub(super) fn read(file: u32, text: &str, faults: &mut Collector) -> Option<History> {
    let before = faults.total();
    let mut rows = Rows::new(file, text);
    let columns = rows.next(faults).and_then(|header| read_header(header, faults));
    let Some([at_column, acceleration_column]) = columns else {
        if faults.total() == before {
            faults.fault(
                Spot::new(file, 0..0),
                "a history begins with a header line",
                "begin with `at_s,acceleration_m_s2`",
            );
        }
        return None;
    };
    let mut history = History::default();
    let mut last: Option<(ArrayTime, f64)> = None;
    let mut count = 0_usize;
    while let Some(row) = rows.next(faults) {
        if !row.is_as_wide_as(2, faults) {
            continue;
        }
        count += 1;
        let at = time(row, at_column, faults);
        let acceleration_m_s2 = acceleration(row, acceleration_column, faults);
        let (Some(at), Some(acceleration_m_s2)) = (at, acceleration_m_s2) else {
            continue;
        };
        let spot = row.spot(at_column);
        let (start, from_m_s2) = last.unwrap_or((ArrayTime::ZERO, 0.0));
        if at < start {
            let (rule, remedy) = if last.is_some() {
                ("times of a history never fall", "put the rows in order of time")
            } else {
                ("a history begins at array time zero or later", "count times from array time zero")
            };
            faults.fault(spot, rule, remedy);
            continue;
        }
        if at > start {
            let length = ArrayTime::from_attoseconds(at.attoseconds() - start.attoseconds());
            // Before the first row the line coasts.
            let to_m_s2 = if last.is_some() { acceleration_m_s2 } else { 0.0 };
            history.phases.push(Phase::whole(start, length, from_m_s2, to_m_s2));
            history.spots.push(spot);
        }
        last = Some((at, acceleration_m_s2));
    }
    if count < 2 && faults.total() == before {
        faults.fault(
            Spot::new(file, 0..0),
            "a history has at least two rows below its header",
            "add the rows",
        );
    }
    (faults.total() == before).then_some(history)
}

fn read_header(header: Row<'_, '_>, faults: &mut Collector) -> Option<[usize; 2]> {
    let looked_at = header.len().min(2);
    let find = |wanted: &str| (0..looked_at).find(|index| header.field(*index) == wanted);
    if let (Some(at), Some(acceleration), 2) =
        (find("at_s"), find("acceleration_m_s2"), header.len())
    {
        return Some([at, acceleration]);
    }
    faults.fault(
        header.whole(),
        "the columns of a history are at_s and acceleration_m_s2",
        "write the header `at_s,acceleration_m_s2`",
    );
    None
}

fn time(row: Row<'_, '_>, column: usize, faults: &mut Collector) -> Option<ArrayTime> {
    let text = row.field(column);
    if let Some(at) = quantity::plain_seconds(&text) {
        return Some(at);
    }
    let parsed = if ends_with_a_digit(&text) { quantity::parse_duration(&text).ok() } else { None };
    if parsed.is_none() {
        let rule = format!(
            "`at_s` is a bare number of seconds, whole in attoseconds, within 1e11 s; this is `{}`",
            short(&text)
        );
        faults.fault(row.spot(column), rule, "write for example `12.5`");
    }
    parsed
}

fn acceleration(row: Row<'_, '_>, column: usize, faults: &mut Collector) -> Option<f64> {
    let text = row.field(column);
    let value = quantity::plain(&text).or_else(|| {
        let bare = ends_with_a_digit(&text);
        if bare { quantity::parse(&text, Dimension::Acceleration).ok() } else { None }
    });
    let value = value.filter(|value| value.abs() <= LARGEST_ACCELERATION_M_S2);
    if value.is_none() {
        let rule = format!(
            "`acceleration_m_s2` is a bare number of m/s^2, at most 1e6 either sign; this is `{}`",
            short(&text)
        );
        faults.fault(row.spot(column), rule, "write for example `0.196133`");
    }
    value
}

/// Whether a text has no unit at its end.
fn ends_with_a_digit(text: &str) -> bool {
    text.bytes().last().is_some_and(|byte| byte.is_ascii_digit())
}
