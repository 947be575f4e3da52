//! `reach`: signals between stations and the line, or what a released node passes.

use clockspar::table::content::{Reach, reach_report, station_row};
use clockspar::table::{Cell, Measure, Table};

use super::View;
use crate::program::desk::launch_chart;
use crate::program::desk::state::Desk;
use crate::program::desk::words;

/// The view.
pub static VIEW: View = View {
    digit: '4',
    name: "reach",
    table: Some(table),
    first: &[
        "station",
        "node",
        "direction",
        "age_launch_s",
        "received_shift",
        "arrives_array_s",
        "last_call_s",
        "own_time_s",
        "closing_speed_m_s",
        "array_time_s",
        "sent_launch_s",
        "arrives_launch_s",
    ],
    nodes: false,
    beside: Some(launch_chart::draw),
    note: Some(note),
};

fn table(desk: &Desk) -> Option<Table<'_>> {
    let asked = Reach { released: desk.reach_of, before: None };
    let name = if desk.reach_of.is_some() { "passes" } else { "stations" };
    let tables = reach_report(desk.state()?, asked).tables;
    tables.into_iter().find(|table| table.name == name)
}

/// The caution beside closing speeds; otherwise until when the station chosen is heard.
fn note(desk: &Desk) -> Option<String> {
    let Some(row) = desk.reach_of else { return last_call(desk) };
    let name = &desk.layout().nodes[row].name;
    Some(format!(
        "{name} let go: for planning only; recoil of a stretched tether and motion off the axis \
         are not computed; have it reviewed by qualified staff"
    ))
}

/// The last call of the station of the chosen row, under the thrust in force.
fn last_call(desk: &Desk) -> Option<String> {
    let (station, ..) = station_row(desk.layout(), desk.cursor().row)?;
    let tables = reach_report(desk.state()?, Reach::default()).tables;
    let calls = tables.iter().find(|table| table.name == "calls")?;
    let mut cells = Vec::new();
    (calls.fill)(station, &mut cells);
    let cell = |key: &str| cells.get(calls.columns.iter().position(|column| column.key == key)?);
    let name = &desk.layout().stations[station].name;
    let time = |value: f64| words::value(Measure::Time, value);
    Some(match (cell("last_call_s")?, cell("left_s")?) {
        (Cell::Number(last), Cell::Number(left)) if *left >= 0.0 => {
            format!(
                "last call from {name} under this thrust: launch time {}, in {}",
                time(*last),
                time(*left)
            )
        }
        (Cell::Number(last), Cell::Number(left)) => {
            format!(
                "last call from {name} under this thrust: launch time {}, {} ago",
                time(*last),
                time(-left)
            )
        }
        (Cell::Number(last), _) => {
            format!("last call from {name} under this thrust: launch time {}", time(*last))
        }
        (Cell::Absent(why), _) => format!("last call from {name}: none, {why}"),
        _ => return None,
    })
}
