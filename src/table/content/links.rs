//! `links`: per link and direction when light arrives, how shifted, and what a two-way
//! exchange makes of it; the extremes over the plan; known equipment delays.
//!
//! Flights are of light alone. What the equipment adds stands beside it, in a table of its
//! own, counted on the clock of the receiver.

use std::borrow::Cow;
use std::sync::{Arc, OnceLock};

use super::{column, double as number, head};
use crate::cores;
use crate::layout::{Course, Layout, Link};
use crate::model::links::{Extreme, Extremes, Rays};
use crate::run::{Light, NoSignal, Signal, State};
use crate::table::{Cell, Column, Measure, Report, Table};

const NO_CARRIER: &str = "the layout states no carrier for this link";

/// Rows of a summary, each with the phases of the plan, that nobody minds waiting for: of a
/// line that stretches one takes ten times as long.
const SHORT_SUMMARY: usize = 200;
const SHORT_ROWS_AND_PHASES: usize = 20_000;
/// Rows of a summary that are found together on all cores, and kept for the next pass.
const MOST_KEPT: usize = 10_000;

const LINKS: [Column; 13] = [
    column("from", "from", Measure::Word),
    column("to", "to", Measure::Word),
    column("separation_m", "separation", Measure::Length),
    column("flight_array_s", "flight, array", Measure::Time),
    column("flight_emitter_s", "flight, emitter", Measure::Time),
    column("flight_receiver_s", "flight, receiver", Measure::Time),
    column("received_shift", "shift", Measure::Ratio),
    column("shift_rate_per_s", "shift rate", Measure::PerSecond),
    column("carrier_hz", "carrier", Measure::Frequency),
    column("received_minus_carrier_hz", "received - carrier", Measure::Frequency),
    column("round_trip_s", "round trip", Measure::Time),
    column("radar_distance_m", "radar distance", Measure::Length),
    column("two_way_error_s", "two-way error", Measure::Time),
];

const SUMMARY: [Column; 17] = [
    column("from", "from", Measure::Word),
    column("to", "to", Measure::Word),
    column("shift_low", "lowest shift", Measure::Ratio),
    column("shift_low_at_s", "sent at", Measure::Time),
    column("shift_high", "highest shift", Measure::Ratio),
    column("shift_high_at_s", "sent at", Measure::Time),
    column("shift_rate_low_per_s", "lowest shift rate", Measure::PerSecond),
    column("shift_rate_low_at_s", "sent at", Measure::Time),
    column("shift_rate_high_per_s", "highest shift rate", Measure::PerSecond),
    column("shift_rate_high_at_s", "sent at", Measure::Time),
    column("flight_low_s", "shortest flight", Measure::Time),
    column("flight_low_at_s", "sent at", Measure::Time),
    column("flight_high_s", "longest flight", Measure::Time),
    column("flight_high_at_s", "sent at", Measure::Time),
    column("received_minus_carrier_low_hz", "lowest received - carrier", Measure::Frequency),
    column("received_minus_carrier_high_hz", "highest received - carrier", Measure::Frequency),
    column("complete", "complete", Measure::Word),
];

const DELAYS: [Column; 6] = [
    column("from", "from", Measure::Word),
    column("to", "to", Measure::Word),
    column("equipment_delay_s", "equipment delay", Measure::Time),
    column("delay_with_equipment_s", "delay with equipment", Measure::Time),
    column("round_trip_with_equipment_s", "round trip with equipment", Measure::Time),
    column("two_way_equipment_error_s", "two-way error of equipment", Measure::Time),
];

/// The links report of a line at a moment, at which every signal is sent.
///
/// The table `summary` spans the plan and is the same at every moment, so a report over
/// time leaves it out by `with_summary`.
#[must_use]
pub fn links_report(state: State<'_>, with_summary: bool) -> Report<'_> {
    let mut report = head(&state, "links");
    let layout: &Layout = state.run().layout();
    let ways = Arc::new(Ways::of(layout));
    let light = Arc::new(Light::of(state.run()));
    report.tables.push(links_table(&state, &ways, &light));
    if with_summary {
        report.tables.push(summary_table(layout, &ways, &light));
        if light.rays().is_some_and(Rays::is_screened) {
            report.remarks.push(
                "the plan is so long that the summary looks only where the thrust, its slope or \
                 a change of its slope is among the most extreme: `complete` is no"
                    .to_owned(),
            );
        }
    } else {
        let left_out = "the table `summary`, the extremes over the plan, has to be asked for here";
        report.remarks.push(left_out.to_owned());
    }
    report.tables.push(delay_table(&state, &ways, &light));
    report.remarks.push(
        "flights are of light on the axis and in vacuum; an answer leaves at once".to_owned(),
    );
    report
}

/// Whether the summary of a line takes no longer than a reader waits: every row looks through
/// the whole plan.
#[must_use]
pub fn has_short_summary(layout: &Layout) -> bool {
    let phases = match &layout.course {
        Course::Thrust(plan) => plan.phases().len(),
        Course::Standing(_) => 1,
    };
    let cost = if crate::run::may_stretch(layout) { 10 } else { 1 };
    let rows = Ways::of(layout).rows();
    rows <= SHORT_SUMMARY && rows * phases * cost <= SHORT_ROWS_AND_PHASES
}

/// The two rows that a row of the table `links` goes between.
#[must_use]
pub fn link_way(layout: &Layout, row: usize) -> Option<[usize; 2]> {
    let ways = Ways::of(layout);
    (row < ways.rows()).then(|| ways.way(row)).map(|way| [way.from, way.to])
}

/// The links of a layout in the order of rows, fore to aft, each from its fore end first.
struct Ways<'a> {
    layout: &'a Layout,
    /// The links as written, by their fore ends; empty when every neighbour pair is one.
    order: Vec<usize>,
}

/// One direction of a link.
struct Way<'a> {
    from: usize,
    to: usize,
    /// The link as written, unless it is a neighbour pair.
    link: Option<&'a Link>,
}

impl<'a> Ways<'a> {
    fn of(layout: &'a Layout) -> Ways<'a> {
        let mut order: Vec<usize> = (0..layout.links.len()).collect();
        order.sort_by_key(|index| {
            let [one, other] = layout.links[*index].between;
            [one.min(other), one.max(other)]
        });
        Ways { layout, order }
    }

    fn rows(&self) -> usize {
        if self.order.is_empty() {
            2 * self.layout.nodes.len().saturating_sub(1)
        } else {
            2 * self.order.len()
        }
    }

    fn way(&self, row: usize) -> Way<'a> {
        let link = self.order.get(row / 2).map(|index| &self.layout.links[*index]);
        let [fore, aft] = match link {
            Some(link) => {
                let [one, other] = link.between;
                [one.min(other), one.max(other)]
            }
            None => [row / 2, row / 2 + 1],
        };
        if row.is_multiple_of(2) {
            Way { from: fore, to: aft, link }
        } else {
            Way { from: aft, to: fore, link }
        }
    }
}

impl Way<'_> {
    fn rows(&self) -> [usize; 2] {
        [self.from, self.to]
    }

    /// Known equipment delays of this direction and of the answer, s.
    fn delays_s(&self) -> [f64; 2] {
        match self.link {
            None => [0.0, 0.0],
            Some(link) if link.between[0] == self.from => [link.delay_out_s, link.delay_back_s],
            Some(link) => [link.delay_back_s, link.delay_out_s],
        }
    }

    fn names<'a>(&self, layout: &'a Layout, cells: &mut Vec<Cell<'a>>) {
        for row in self.rows() {
            cells.push(Cell::Text(Cow::Borrowed(&layout.nodes[row].name)));
        }
    }
}

fn absent(why: NoSignal) -> Cell<'static> {
    Cell::Absent(why.why())
}

fn links_table<'a>(state: &State<'a>, ways: &Arc<Ways<'a>>, light: &Arc<Light<'a>>) -> Table<'a> {
    let (ways, light) = (Arc::clone(ways), Arc::clone(light));
    let layout: &'a Layout = state.run().layout();
    let at = state.at();
    Table {
        name: "links",
        columns: LINKS.to_vec(),
        rows: ways.rows(),
        marked: None,
        fill: Box::new(move |row, cells| {
            let way = ways.way(row);
            way.names(layout, cells);
            let signal = light.signal(way.rows(), at);
            let one = |value: fn(&Signal) -> f64| match &signal {
                Ok(signal) => number(value(signal)),
                Err(why) => absent(*why),
            };
            let carrier = way.link.and_then(|link| link.carrier_hz);
            cells.push(match &signal {
                // How far apart two nodes are does not hang on whether light passes.
                Err(why) => match (light.end(way.from, at), light.end(way.to, at)) {
                    (Ok(from), Ok(to)) => {
                        number((to.position_m(at) - from.position_m(at)).abs().to_f64())
                    }
                    _ => absent(*why),
                },
                Ok(signal) => number(signal.separation_m),
            });
            cells.push(one(|signal| signal.flight_array_s));
            cells.push(one(|signal| signal.flight_emitter_s));
            cells.push(one(|signal| signal.flight_receiver_s));
            cells.push(one(|signal| signal.received_shift));
            cells.push(one(|signal| signal.shift_rate_per_s));
            cells.push(carrier.map_or(Cell::Absent(NO_CARRIER.into()), number));
            cells.push(match (carrier, &signal) {
                (None, _) => Cell::Absent(NO_CARRIER.into()),
                (Some(carrier), Ok(signal)) => number(carrier * signal.received_shift),
                (Some(_), Err(why)) => absent(*why),
            });
            let answer = signal.as_ref().map_err(|why| *why).and_then(|signal| signal.answer);
            match answer {
                Ok(answer) => {
                    cells.push(number(answer.round_trip_s));
                    cells.push(number(answer.radar_distance_m));
                    cells.push(number(answer.two_way_error_s));
                }
                Err(why) => cells.extend((0..3).map(|_| absent(why))),
            }
        }),
    }
}

fn summary_table<'a>(
    layout: &'a Layout,
    ways: &Arc<Ways<'a>>,
    light: &Arc<Light<'a>>,
) -> Table<'a> {
    let (ways, light) = (Arc::clone(ways), Arc::clone(light));
    let kept: OnceLock<Vec<Result<Extremes, NoSignal>>> = OnceLock::new();
    let rows = ways.rows();
    Table {
        name: "summary",
        columns: SUMMARY.to_vec(),
        rows: ways.rows(),
        marked: None,
        fill: Box::new(move |row, cells| {
            let way = ways.way(row);
            way.names(layout, cells);
            let carrier = way.link.and_then(|link| link.carrier_hz);
            let find = |row: usize| light.extremes(ways.way(row).rows());
            let found = if rows <= MOST_KEPT {
                kept.get_or_init(|| cores::map(rows, 2, find))[row]
            } else {
                find(row)
            };
            let extremes = match found {
                Ok(extremes) => extremes,
                Err(why) => {
                    cells.extend((2..SUMMARY.len()).map(|_| absent(why)));
                    return;
                }
            };
            let shift = extremes.received_shift;
            for range in [shift, extremes.shift_rate_per_s, extremes.flight_array_s] {
                for Extreme { value, emitted, .. } in [range.least, range.greatest] {
                    cells.push(number(value));
                    cells.push(Cell::Computed(emitted));
                }
            }
            for extreme in [shift.least, shift.greatest] {
                cells.push(match carrier {
                    Some(carrier) => number(carrier * extreme.value),
                    None => Cell::Absent(NO_CARRIER.into()),
                });
            }
            cells.push(Cell::Flag(!extremes.is_partial && !extremes.is_screened));
        }),
    }
}

fn delay_table<'a>(state: &State<'a>, ways: &Arc<Ways<'a>>, light: &Arc<Light<'a>>) -> Table<'a> {
    let (ways, light) = (Arc::clone(ways), Arc::clone(light));
    let layout: &'a Layout = state.run().layout();
    let at = state.at();
    // Links without equipment delays have nothing to say here.
    let delayed: Vec<usize> = if ways.order.is_empty() {
        Vec::new()
    } else {
        (0..ways.rows()).filter(|row| ways.way(*row).delays_s() != [0.0, 0.0]).collect()
    };
    Table {
        name: "delays",
        columns: DELAYS.to_vec(),
        rows: delayed.len(),
        marked: None,
        fill: Box::new(move |row, cells| {
            let way = ways.way(delayed[row]);
            way.names(layout, cells);
            let [out, back] = way.delays_s();
            let signal = light.signal(way.rows(), at);
            cells.push(number(out));
            cells.push(match &signal {
                Ok(signal) => number(signal.flight_receiver_s + out),
                Err(why) => absent(*why),
            });
            cells.push(match signal.and_then(|signal| signal.answer) {
                Ok(answer) => number(answer.round_trip_s + (out + back)),
                Err(why) => absent(why),
            });
            cells.push(number(0.5 * (back - out)));
        }),
    }
}
