//! `reach`: signals between stations and the line, or what a released node passes.

use clockspar::table::Table;
use clockspar::table::content::{Reach, reach_report};

use super::View;
use crate::program::desk::launch_chart;
use crate::program::desk::state::Desk;

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

/// The caution beside closing speeds; otherwise until when the stations are heard.
fn note(desk: &Desk) -> Option<String> {
    desk.reach_of.map(|row| {
        let name = &desk.layout().nodes[row].name;
        format!(
            "{name} let go: for planning only; recoil of a stretched tether and motion off the \
             axis are not computed; have it reviewed by qualified staff"
        )
    })
}
