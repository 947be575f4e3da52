//! A node that is let go: what it passes, how it is heard, and how long.

use std::borrow::Cow;
use std::sync::Arc;

use super::{column, double as number};
use crate::cores;
use crate::layout::Layout;
use crate::model::array_time::ArrayTime;
use crate::model::reach::{Pass, Passes, Released};
use crate::run::{Light, NoSignal, NodeEnd, State};
use crate::table::{Cell, Column, Measure, Report, Scalar, Table};

/// What stands beside every closing speed.
pub const CAUTION: &str = "closing speeds are for planning: recoil of a stretched tether is not \
     computed, nor any motion off the axis; they do not replace review by qualified structural, \
     propulsion and range-safety staff under the rules that apply locally";

const GRADIENT: &str = "not computed in gravity with a gradient";
const NO_LAST_TICK: &str = "no thrust: every tick is heard";

/// Ticks that the table `heard` shows for each node, beside the release itself.
const TICKS: usize = 8;
/// Lines from which on the passes are found on all cores.
const NODES_WORTH_THREADS: usize = 500;

const PASSES: [Column; 5] = [
    column("released", "released", Measure::Word),
    column("node", "passes", Measure::Word),
    column("own_time_s", "own time since", Measure::Time),
    column("array_time_s", "array time", Measure::Time),
    column("closing_speed_m_s", "closing speed", Measure::Speed),
];

const HEARD: [Column; 5] = [
    column("released", "released", Measure::Word),
    column("node", "heard at", Measure::Word),
    column("own_time_s", "own time since", Measure::Time),
    column("heard_array_s", "heard, array time", Measure::Time),
    column("received_shift", "shift", Measure::Ratio),
];

/// Adds what becomes of a node that is let go at the moment of a state, or that was let go
/// before it: tables `passes` and `heard`, scalars `last_tick_s` and `caution`.
///
/// Passes and shifts are those of the plan as it is flown and the coast after it; the last
/// tick is that while the thrust of the release is held for good.
pub(super) fn push_released<'a>(
    report: &mut Report<'a>,
    state: &State<'a>,
    light: &Arc<Light<'a>>,
    row: usize,
) {
    let layout: &'a Layout = state.run().layout();
    let name = &layout.nodes[row].name;
    let let_go = LetGo::of(state, light, row);
    let released = let_go.released();
    let tick = match &released {
        Ok(released) => released.last_tick_s().map_or(Cell::Absent(NO_LAST_TICK.into()), number),
        Err(why) => Cell::Absent(why.clone()),
    };
    report.scalars.push(Scalar {
        key: "released",
        heading: "released",
        measure: Measure::Word,
        value: Cell::Text(Cow::Borrowed(name)),
    });
    report.scalars.push(Scalar {
        key: "last_tick_s",
        heading: "last tick heard while this thrust is held, own time since the release",
        measure: Measure::Time,
        value: tick,
    });
    report.scalars.push(Scalar {
        key: "caution",
        heading: "caution",
        measure: Measure::Word,
        value: Cell::Text(CAUTION.into()),
    });
    let (met, is_cut) = match &released {
        Ok(released) => all_passes(light, released, row, let_go.since, layout.nodes.len()),
        Err(_) => (Vec::new(), false),
    };
    if is_cut {
        report.remarks.push(
            "passes are looked for up to a relative rapidity of 690, where the search ended"
                .to_owned(),
        );
    }
    let span_s = released.as_ref().map_or(0.0, |released| span_s(state, released, let_go.since));
    drop(released);
    report.tables.push(Table {
        name: "passes",
        columns: PASSES.to_vec(),
        rows: met.len(),
        marked: None,
        fill: Box::new(move |index, cells| {
            let (node, pass) = &met[index];
            cells.push(Cell::Text(Cow::Borrowed(name)));
            cells.push(Cell::Text(Cow::Borrowed(&layout.nodes[*node].name)));
            cells.push(number(pass.own_time_s));
            cells.push(match pass.array_time {
                Ok(at) => number(at.to_f64()),
                Err(why) => Cell::Absent(why.to_string().into()),
            });
            cells.push(number(pass.closing_speed_m_s));
        }),
    });
    report.tables.push(heard_table(layout, let_go, span_s));
}

/// What is needed to let the node go again for each row of a table: what comes of it borrows
/// the rays, and rows outlive the making of the report.
struct LetGo<'a> {
    light: Arc<Light<'a>>,
    row: usize,
    end: Result<NodeEnd<'a>, NoSignal>,
    since: ArrayTime,
}

impl<'a> LetGo<'a> {
    fn of(state: &State<'a>, light: &Arc<Light<'a>>, row: usize) -> LetGo<'a> {
        let at = state.at();
        let (end, since) = match light.released_end(row, at) {
            Some((end, since)) => (Ok(end), since),
            None => (light.end(row, at), at),
        };
        LetGo { light: Arc::clone(light), row, end, since }
    }

    fn released(&self) -> Result<Released<'_>, Cow<'static, str>> {
        let rays = self.light.rays().ok_or(GRADIENT)?;
        let end = self.end.as_ref().map_err(|why| why.why())?;
        rays.release(end.end(), self.since).map_err(|why| why.to_string().into())
    }
}

/// The own times that the table `heard` covers: to the last tick, or to the end of the plan
/// where that comes first.
fn span_s(state: &State<'_>, released: &Released<'_>, since: ArrayTime) -> f64 {
    let left = state
        .run()
        .plan()
        .map(|plan| plan.end().seconds_since(since).to_f64())
        .filter(|left| *left > 0.0);
    match (released.last_tick_s(), left) {
        (Some(tick), Some(left)) => tick.min(left),
        (Some(tick), None) => tick,
        (None, Some(left)) => left,
        (None, None) => 86_400.0,
    }
}

fn heard_table<'a>(layout: &'a Layout, let_go: LetGo<'a>, span_s: f64) -> Table<'a> {
    let others = layout.nodes.len() - 1;
    let name = &layout.nodes[let_go.row].name;
    Table {
        name: "heard",
        columns: HEARD.to_vec(),
        rows: others * (TICKS + 1),
        marked: None,
        fill: Box::new(move |row, cells| {
            let (other, tick) = (row / (TICKS + 1), row % (TICKS + 1));
            let node = other + usize::from(other >= let_go.row);
            let own_time_s = span_s * (tick as f64 / TICKS as f64);
            cells.push(Cell::Text(Cow::Borrowed(name)));
            cells.push(Cell::Text(Cow::Borrowed(&layout.nodes[node].name)));
            cells.push(number(own_time_s));
            let heard = let_go.released().and_then(|released| {
                let end = let_go.light.end(node, let_go.since).map_err(|why| why.why())?;
                let heard = released
                    .heard(own_time_s, end.end())
                    .map_err(|why| Cow::Owned(why.to_string()))?;
                let_go
                    .light
                    .check_receiver(node, let_go.since, heard.received.ok())
                    .map_err(|why| why.why())?;
                Ok(heard)
            });
            match heard {
                Ok(heard) => {
                    cells.push(match heard.received {
                        Ok(at) => number(at.to_f64()),
                        Err(why) => Cell::Absent(why.to_string().into()),
                    });
                    cells.push(number(heard.received_shift));
                }
                Err(why) => cells.extend([Cell::Absent(why.clone()), Cell::Absent(why)]),
            }
        }),
    }
}

/// Every meeting with every other node, fore to aft, and whether a search was cut short.
fn all_passes(
    light: &Light<'_>,
    released: &Released<'_>,
    row: usize,
    since: ArrayTime,
    nodes: usize,
) -> (Vec<(usize, Pass)>, bool) {
    let of = |node: usize| -> Passes {
        if node == row {
            return Passes::default();
        }
        match light.end(node, since) {
            Ok(end) => released.passes(end.end()),
            Err(_) => Passes::default(),
        }
    };
    let mut met = Vec::new();
    let mut is_cut = false;
    let all = cores::map(nodes, NODES_WORTH_THREADS, of);
    for (node, passes) in all.into_iter().enumerate() {
        is_cut |= passes.is_cut;
        met.extend(passes.passes.into_iter().map(|pass| (node, pass)));
    }
    (met, is_cut)
}
