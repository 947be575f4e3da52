//! What each table holds: the rows of a command as functions of the line at a moment.

mod check;
mod compare;
mod offsets;
mod rates;

use crate::layout::{Course, Layout};
use crate::model::array_time::ArrayTime;
use crate::model::dd::Dd;
use crate::model::plan::Moment;
use crate::model::rates::{Instant, LaunchFrame};

use super::{Cell, Column, Measure, Report, Table};

pub use check::{Judgement, Rule, State, Span, check_report, judge};
pub use compare::{Difference, compare_report, differences};
pub use offsets::offsets_report;
pub use rates::rates_report;

/// Why a released node has no number.
pub const RELEASED: &str = "released: the node no longer belongs to the line";
const STANDING: &str = "a line that stands in gravity has no launch frame";
const OVERFLOW: &str = "exceeds the largest double";

/// A column of a table.
const fn column(key: &'static str, heading: &'static str, measure: Measure) -> Column {
    Column { key, heading, measure }
}

/// One node of the line at a moment.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct NodeState {
    /// Position, m.
    pub position_m: Dd,
    /// Own proper time less array time, s.
    pub clock_offset_s: Dd,
    /// Whether it has stood at other positions before.
    pub has_moved: bool,
}

/// The state of every node: `None` for a node that has been released.
pub type Nodes<'a> = Box<dyn Fn(usize) -> Option<NodeState> + Send + Sync + 'a>;

/// The line at one moment, as the tables need it.
pub struct LineAt<'a> {
    /// The layout.
    pub layout: &'a Layout,
    /// What moves or holds the line.
    pub instant: Instant,
    /// The launch frame; `None` for a standing line.
    pub frame: Option<LaunchFrame>,
    /// The nodes.
    pub nodes: Nodes<'a>,
}

impl<'a> LineAt<'a> {
    /// The line as laid out, at a moment of its plan.
    #[must_use]
    pub fn of_layout(layout: &'a Layout, at: ArrayTime) -> LineAt<'a> {
        let (instant, frame) = match &layout.course {
            Course::Thrust(plan) => {
                let moment = plan.moment(at);
                let frame = LaunchFrame::new(plan.launch(at), moment.rapidity);
                (Instant { moment, gradient_per_s2: 0.0 }, Some(frame))
            }
            Course::Standing(standing) => {
                let moment = Moment::held_always(at, standing.gravity_m_s2);
                (Instant { moment, gradient_per_s2: standing.gradient_per_s2 }, None)
            }
        };
        let nodes: Nodes<'a> = Box::new(move |row| {
            let position_m = Dd::new(layout.nodes[row].position_m);
            let clock_offset_s = instant.clock_offset_s(position_m);
            Some(NodeState { position_m, clock_offset_s, has_moved: false })
        });
        LineAt { layout, instant, frame, nodes }
    }

    /// The head every report on this moment has.
    fn report(&self, command: &'static str, tables: Vec<Table<'a>>) -> Report<'a> {
        let standing = matches!(self.layout.course, Course::Standing(_));
        Report {
            command,
            schema_version: 1,
            layout: &self.layout.name,
            revision: self.layout.revision.as_deref(),
            layout_sha256: &self.layout.source.sha256,
            at: Ok(self.instant.moment.at),
            reference_acceleration_m_s2: Ok(self.instant.moment.acceleration_m_s2.to_f64()),
            rapidity: if standing {
                Err("a line that stands in gravity gains no rapidity")
            } else {
                Ok(self.instant.moment.rapidity.to_f64())
            },
            scalars: Vec::new(),
            tables,
            remarks: Vec::new(),
        }
    }
}

/// A number, or its absence when it overflows.
fn number(value: Dd) -> Cell<'static> {
    Cell::finite(value.to_f64(), OVERFLOW)
}

/// Reading less array time of the real clock of a node, s.
///
/// With own proper time `s`: `reading − τ = (s − τ) + x₀ + b s + D s²/2 + k ∫ a ds`, where
/// `x₀` is the reading at the start, `b` the known bias, `D` the known drift and `k` the
/// acceleration sensitivity. Under thrust `∫ a ds = ∫ α dτ = c φ`, for every node the same,
/// because the local clock and the local acceleration differ by the same factor `N`.
fn predicted_reading_s(layout: &Layout, instant: &Instant, row: usize, state: &NodeState) -> Dd {
    let node = &layout.nodes[row];
    let own = instant.moment.at.seconds() + state.clock_offset_s;
    let mut reading = state.clock_offset_s + node.reading_at_start_s + own * node.bias;
    if let Some(clock) = node.clock.map(|clock| &layout.clocks[clock]) {
        reading = reading + own * own * (0.5 * clock.drift_per_s);
        if clock.acceleration_sensitivity != 0.0 {
            let felt = if instant.gradient_per_s2 == 0.0 {
                instant.moment.velocity_gain_m_s
            } else {
                instant.felt_acceleration_m_s2(state.position_m) * own
            };
            reading = reading + felt * clock.acceleration_sensitivity;
        }
    }
    reading
}
