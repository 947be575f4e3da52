//! `reach`: signals between stations and the line, how long a station can still be heard,
//! and what becomes of a node that is let go.
//!
//! At a moment τ every node sends at array time τ, and every station at the launch time at
//! which the reference node passes τ: the `launch_time_s` of its row in `rates`.

use std::borrow::Cow;
use std::sync::Arc;

use super::released::push_released;
use super::{OVERFLOW, STANDING, column, double as number, head};
use crate::layout::Layout;
use crate::model::array_time::ArrayTime;
use crate::model::dd::Dd;
use crate::model::links::Rays;
use crate::model::rates::LaunchFrame;
use crate::model::reach::{Absent, LastCall, StationSignal};
use crate::run::{Light, Run, State};
use crate::table::{Cell, Column, Measure, Report, Table};

const NOT_THE_STATION: &str = "a station keeps launch time, not array time";
const HEARD_ALWAYS: &str = "what the line sends to a station always arrives";
const NO_THRUST: &str = "no thrust: everything arrives";

/// Words of the column `direction`.
const DIRECTIONS: [&str; 2] = ["to line", "to station"];

const STATIONS: [Column; 12] = [
    column("station", "station", Measure::Word),
    column("position_m", "position", Measure::Length),
    column("node", "node", Measure::Word),
    column("direction", "direction", Measure::Word),
    column("last_call_s", "last call, launch time", Measure::Time),
    column("sent_launch_s", "sent, launch time", Measure::Time),
    column("sent_array_s", "sent, array time", Measure::Time),
    column("arrives_array_s", "arrives, array time", Measure::Time),
    column("arrives_launch_s", "arrives, launch time", Measure::Time),
    column("age_launch_s", "age, launch", Measure::Time),
    column("received_shift", "shift", Measure::Ratio),
    column("ln_ratio", "ln of ratio", Measure::Ratio),
];

const CALLS: [Column; 5] = [
    column("station", "station", Measure::Word),
    column("position_m", "position", Measure::Length),
    column("last_call_s", "last call, launch time", Measure::Time),
    column("state", "state", Measure::Word),
    column("left_s", "left, launch time", Measure::Time),
];

const SILENCES: [Column; 6] = [
    column("station", "station", Measure::Word),
    column("node", "node", Measure::Word),
    column("direction", "direction", Measure::Word),
    column("clock", "clock", Measure::Word),
    column("from_s", "from", Measure::Time),
    column("until_s", "until", Measure::Time),
];

/// What a reach report is asked for beside the stations.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct Reach {
    /// The row of a node that is let go at the moment.
    pub released: Option<usize>,
    /// Adds the spans of sending time from which nothing arrives before this moment.
    pub before: Option<ArrayTime>,
}

/// The reach report of a line at a moment.
#[must_use]
pub fn reach_report(state: State<'_>, asked: Reach) -> Report<'_> {
    let mut report = head(&state, "reach");
    let run = state.run();
    let light = Arc::new(Light::of(run));
    // What was asked for by name comes first, and is the table of a CSV.
    if let Some(row) = asked.released {
        push_released(&mut report, &state, &light, row);
    }
    report.tables.push(station_table(&state, &light));
    report.tables.push(call_table(&state, &light));
    if let Some(before) = asked.before {
        report.tables.push(silence_table(run, &light, before));
    }
    report.remarks.push(
        "a station sends at the launch time at which the reference passes the moment; \
         stations are inertial, on the axis, and free of gravity"
            .to_owned(),
    );
    report
}

/// What a row of the table `stations` is about: station, node, and whether the signal runs
/// to the line.
#[must_use]
pub fn station_row(layout: &Layout, row: usize) -> Option<(usize, usize, bool)> {
    let nodes = layout.nodes.len();
    let station = row / (2 * nodes);
    (station < layout.stations.len()).then_some((station, row / 2 % nodes, row.is_multiple_of(2)))
}

/// Launch time of a position on the line at a moment, s.
fn launch_time_s(run: &Run, at: ArrayTime, position_m: Dd) -> Result<f64, &'static str> {
    let plan = run.plan().ok_or(STANDING)?;
    let frame = LaunchFrame::new(plan.launch(at), run.instant_at(at).moment.rapidity);
    frame.time_s(position_m).ok_or(OVERFLOW)
}

fn told(value: Result<f64, Absent>) -> Cell<'static> {
    match value {
        Ok(value) => number(value),
        Err(why) => Cell::Absent(why.to_string().into()),
    }
}

/// The rays of a line that has a launch frame.
fn rays_of<'l>(run: &Run, light: &'l Light<'_>) -> Result<&'l Rays, &'static str> {
    run.plan().and_then(|_| light.rays()).ok_or(STANDING)
}

fn station_table<'a>(state: &State<'a>, light: &Arc<Light<'a>>) -> Table<'a> {
    let (run, at) = (state.run(), state.at());
    let layout: &'a Layout = run.layout();
    let light = Arc::clone(light);
    let now = launch_time_s(run, at, Dd::ZERO);
    let calls: Vec<Cell<'static>> =
        layout.stations.iter().map(|station| call(run, &light, station.position_m, at).0).collect();
    Table {
        name: "stations",
        columns: STATIONS.to_vec(),
        rows: layout.stations.len() * layout.nodes.len() * 2,
        marked: None,
        fill: Box::new(move |row, cells| {
            let Some((index, node, is_to_line)) = station_row(layout, row) else { return };
            let station = &layout.stations[index];
            cells.push(Cell::Text(Cow::Borrowed(&station.name)));
            cells.push(number(station.position_m));
            cells.push(Cell::Text(Cow::Borrowed(&layout.nodes[node].name)));
            cells.push(Cell::Text(DIRECTIONS[usize::from(!is_to_line)].into()));
            cells.push(if is_to_line {
                calls[index].clone()
            } else {
                Cell::Absent(HEARD_ALWAYS.into())
            });
            let signal = if is_to_line {
                now.map_err(Cow::Borrowed)
                    .and_then(|sent| to_line(run, &light, station.position_m, node, at, sent))
            } else {
                to_station(run, &light, station.position_m, node, at)
            };
            let signal = match signal {
                Ok(signal) => signal,
                Err(why) => {
                    let rest = cells.len()..STATIONS.len();
                    cells.extend(rest.map(|_| Cell::Absent(why.clone())));
                    return;
                }
            };
            cells.push(told(signal.sent_launch_s));
            if is_to_line {
                cells.push(Cell::Absent(NOT_THE_STATION.into()));
                cells.push(told(signal.node_array.map(ArrayTime::to_f64)));
            } else {
                cells.push(Cell::Time(at));
                cells.push(Cell::Absent(NOT_THE_STATION.into()));
            }
            cells.push(told(signal.arrives_launch_s));
            cells.push(told(signal.age_launch_s));
            cells.push(told(signal.received_shift));
            cells.push(number(signal.ln_ratio));
        }),
    }
}

/// The signal that a station sends at a launch time, as a node hears it.
fn to_line(
    run: &Run,
    light: &Light<'_>,
    station_m: f64,
    node: usize,
    at: ArrayTime,
    sent_launch_s: f64,
) -> Result<StationSignal, Cow<'static, str>> {
    let rays = rays_of(run, light)?;
    let end = light.end(node, at).map_err(|why| why.why())?;
    let signal = rays.from_station(station_m, end.end(), sent_launch_s);
    light.check_receiver(node, at, signal.node_array.ok()).map_err(|why| why.why())?;
    Ok(signal)
}

/// The signal that a node sends at a moment, as a station hears it.
fn to_station(
    run: &Run,
    light: &Light<'_>,
    station_m: f64,
    node: usize,
    at: ArrayTime,
) -> Result<StationSignal, Cow<'static, str>> {
    let rays = rays_of(run, light)?;
    let end = light.end(node, at).map_err(|why| why.why())?;
    Ok(rays.to_station(station_m, end.end(), at))
}

/// The last call of a station at a moment, and whether it is past.
fn call(
    run: &Run,
    light: &Light<'_>,
    station_m: f64,
    at: ArrayTime,
) -> (Cell<'static>, Option<bool>) {
    match rays_of(run, light).map(|rays| rays.last_call(station_m, at)) {
        Err(why) => (Cell::Absent(why.into()), None),
        Ok(LastCall::None) => (Cell::Absent(NO_THRUST.into()), None),
        Ok(LastCall::At { launch_s, is_past }) => (told(launch_s), Some(is_past)),
    }
}

/// One row a station: the last call is the same for every node.
fn call_table<'a>(state: &State<'a>, light: &Arc<Light<'a>>) -> Table<'a> {
    let (run, at) = (state.run(), state.at());
    let layout: &'a Layout = run.layout();
    let light = Arc::clone(light);
    let now = launch_time_s(run, at, Dd::ZERO);
    Table {
        name: "calls",
        columns: CALLS.to_vec(),
        rows: layout.stations.len(),
        marked: None,
        fill: Box::new(move |row, cells| {
            let station = &layout.stations[row];
            cells.push(Cell::Text(Cow::Borrowed(&station.name)));
            cells.push(number(station.position_m));
            let (last, is_past) = call(run, &light, station.position_m, at);
            let left = match (&last, now) {
                (Cell::Number(last), Ok(now)) => number(last - now),
                (Cell::Number(_), Err(why)) => Cell::Absent(why.into()),
                (absent, _) => absent.clone(),
            };
            let word = match is_past {
                Some(true) => "past",
                Some(false) => "to come",
                None if run.plan().is_some() => "open",
                None => "none",
            };
            cells.push(last);
            cells.push(Cell::Text(word.into()));
            cells.push(left);
        }),
    }
}

/// For every pair and direction the sending times, on the sender's clock, from which
/// nothing arrives before a moment. They end where the sending itself is no longer before
/// it; arrival rises with sending, so there is one span a row.
///
/// The moment is an array time for arrivals at the line, and for arrivals at a station the
/// launch time at which the reference passes it.
fn silence_table<'a>(run: &'a Run, light: &Arc<Light<'a>>, before: ArrayTime) -> Table<'a> {
    let layout: &'a Layout = run.layout();
    let light = Arc::clone(light);
    let then = launch_time_s(run, before, Dd::ZERO);
    Table {
        name: "silences",
        columns: SILENCES.to_vec(),
        rows: layout.stations.len() * layout.nodes.len() * 2,
        marked: None,
        fill: Box::new(move |row, cells| {
            let Some((index, node, is_to_line)) = station_row(layout, row) else { return };
            let station = &layout.stations[index];
            cells.push(Cell::Text(Cow::Borrowed(&station.name)));
            cells.push(Cell::Text(Cow::Borrowed(&layout.nodes[node].name)));
            cells.push(Cell::Text(DIRECTIONS[usize::from(!is_to_line)].into()));
            cells.push(Cell::Text(if is_to_line { "launch time" } else { "array time" }.into()));
            let span = if is_to_line {
                silence_of_station(run, &light, station.position_m, node, before)
            } else {
                silence_of_node(run, &light, station.position_m, node, before, then)
            };
            match span {
                Ok([from, until]) => cells.extend([from, until]),
                Err(why) => cells.extend([Cell::Absent(why.clone()), Cell::Absent(why)]),
            }
        }),
    }
}

type Span = Result<[Cell<'static>; 2], Cow<'static, str>>;

fn silence_of_station(
    run: &Run,
    light: &Light<'_>,
    station_m: f64,
    node: usize,
    before: ArrayTime,
) -> Span {
    let rays = rays_of(run, light)?;
    let end = light.end(node, before).map_err(|why| why.why())?;
    let until = launch_time_s(run, before, end.position_m(before))?;
    let from = rays.latest_sending(station_m, end.end(), before);
    Ok([told(from), number(until)])
}

fn silence_of_node(
    run: &Run,
    light: &Light<'_>,
    station_m: f64,
    node: usize,
    before: ArrayTime,
    then: Result<f64, &'static str>,
) -> Span {
    let rays = rays_of(run, light)?;
    let end = light.end(node, before).map_err(|why| why.why())?;
    let then = then?;
    let signal = |at: ArrayTime| rays.to_station(station_m, end.end(), at);
    let from = moment_of(then, before, |at| signal(at).arrives_launch_s);
    let until = moment_of(then, before, |at| signal(at).sent_launch_s);
    Ok([from, until].map(|at| told(at.map(ArrayTime::to_f64))))
}

/// The array time at which a launch time that rises with it has a value, to the attosecond
/// or to the last digit of the launch time.
fn moment_of(
    value_s: f64,
    near: ArrayTime,
    launch_s: impl Fn(ArrayTime) -> Result<f64, Absent>,
) -> Result<ArrayTime, Absent> {
    // What overflows lies after every value, when time has gone on for long.
    let is_late =
        |at: ArrayTime| launch_s(at).map_or(at > ArrayTime::ZERO, |found| found > value_s);
    let limit = ArrayTime::LIMIT.attoseconds();
    let (mut low, mut high) = (near.attoseconds(), near.attoseconds());
    let mut width = 1_000_000_000_000_i128;
    while is_late(ArrayTime::from_attoseconds(low)) {
        if low == -limit {
            return Err(Absent::OutsideDomain);
        }
        (high, low) = (low, (low - width).max(-limit));
        width = width.saturating_mul(4);
    }
    while !is_late(ArrayTime::from_attoseconds(high)) {
        if high == limit {
            return Err(Absent::OutsideDomain);
        }
        (low, high) = (high, (high + width).min(limit));
        width = width.saturating_mul(4);
    }
    while high - low > 1 {
        let middle = low + (high - low) / 2;
        if is_late(ArrayTime::from_attoseconds(middle)) {
            high = middle;
        } else {
            low = middle;
        }
    }
    Ok(ArrayTime::from_attoseconds(low))
}
