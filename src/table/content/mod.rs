//! What each table holds: the rows of a command as functions of the line at a moment.

mod check;
mod compare;
mod links;
mod loads;
mod offsets;
mod rates;
mod reach;
mod recording;
mod released;
mod thrust;
mod words;

use crate::layout::{Course, Layout};
use crate::model::dd::Dd;
use crate::model::rates::{Instant, KnownClock};
use crate::run::{Aboard, State};

use super::{Cell, Column, Measure, Report};

pub use check::{
    Check, JudgedOver, Judgement, Rule, RuleState, Subject, Summary, check_report, judge,
};
pub use compare::{
    Difference, RecordedSide, compare_recorded_report, compare_report, differences,
    predicted_frame, recorded_differences,
};
pub use links::{has_short_summary, link_way, links_report};
pub use loads::{
    CAUTION, JudgedLoads, LoadJudgement, LoadRule, LoadSubject, LoadsOverPlan, SpanLoad,
    judge_loads, loads_report,
};
pub use offsets::offsets_report;
pub use rates::rates_report;
pub use reach::{Reach, reach_report, station_row};
pub use recording::{detail, events_table, replay_report, verify_report};
pub use released::CAUTION as CAUTION_OF_SPEEDS;

/// Why a released node has no number.
pub const RELEASED: &str = "released: the node no longer belongs to the line";
const NO_RAPIDITY: &str = "a line that stands in gravity gains no rapidity";
const STANDING: &str = "a line that stands in gravity has no launch frame";
const OVERFLOW: &str = "exceeds the largest double";

/// A column of a table.
const fn column(key: &'static str, heading: &'static str, measure: Measure) -> Column {
    Column { key, heading, measure }
}

/// The head of a report on the line at a moment, without tables.
fn head<'a>(state: &State<'a>, command: &'static str) -> Report<'a> {
    let layout: &'a Layout = state.run().layout();
    Report {
        command,
        schema_version: 1,
        layout: &layout.name,
        revision: layout.revision.as_deref(),
        layout_sha256: &layout.source.sha256,
        at: Ok(state.at()),
        reference_acceleration_m_s2: Ok(state.reference_acceleration_m_s2()),
        rapidity: state.rapidity().ok_or(NO_RAPIDITY),
        scalars: Vec::new(),
        tables: Vec::new(),
        remarks: Vec::new(),
    }
}

/// How far the first-order form of a standing line's gradient holds; `None` under thrust.
fn standing_warning(state: &State<'_>) -> Option<String> {
    let layout = state.run().layout();
    let Course::Standing(standing) = &layout.course else { return None };
    if standing.gradient_per_s2 == 0.0 {
        return None;
    }
    let loads = state.run().loads().ok()?;
    loads::standing_remark(layout, loads.gradient_warning())
}

/// A number, or its absence when it overflows.
fn number(value: Dd) -> Cell<'static> {
    Cell::finite(value.to_f64(), OVERFLOW)
}

/// The same for a double.
fn double(value: f64) -> Cell<'static> {
    Cell::finite(value, OVERFLOW)
}

/// Reading less array time of the real clock of a node, s; a node without a clock is given
/// an ideal one.
fn predicted_reading_s(layout: &Layout, instant: &Instant, row: usize, aboard: &Aboard) -> Dd {
    let node = &layout.nodes[row];
    let clock = layout.clock_of(node);
    let known = KnownClock {
        reading_at_start_s: node.reading_at_start_s,
        bias: node.bias,
        drift_per_s: clock.map_or(0.0, |clock| clock.drift_per_s),
        acceleration_sensitivity: clock.map_or(0.0, |clock| clock.acceleration_sensitivity),
    };
    let at_s = instant.moment.at.seconds();
    let velocity = if instant.gradient_per_s2 == 0.0 {
        instant.moment.velocity_gain_m_s
    } else {
        instant.felt_acceleration_m_s2(aboard.position_m) * (at_s + aboard.clock_offset_s)
    };
    known.reading_less_array_time_s(at_s, aboard.clock_offset_s, velocity)
}
