//! `events`: notes and events with their moments.

use clockspar::table::{Cell, Column, Measure, Table};

use super::View;
use crate::program::desk::state::Desk;
use crate::program::desk::words;

/// The view.
pub static VIEW: View = View {
    digit: '9',
    name: "events",
    table: Some(table),
    first: &[],
    nodes: false,
    beside: None,
    note: None,
};

const COLUMNS: [Column; 4] = [
    Column { key: "moment", heading: "moment", measure: Measure::Word },
    Column { key: "at_s", heading: "array time", measure: Measure::Time },
    Column { key: "when", heading: "", measure: Measure::Word },
    Column { key: "event", heading: "event", measure: Measure::Word },
];

fn table(desk: &Desk) -> Option<Table<'_>> {
    // Of a recording only what has come to pass: how much of the rest is known depends on
    // what has been visited.
    let events = if desk.replay.is_some() { desk.events_so_far() } else { &desk.journal };
    Some(Table {
        name: "events",
        columns: COLUMNS.to_vec(),
        rows: events.len(),
        marked: None,
        fill: Box::new(move |row, cells| {
            let Some(event) = events.get(row) else { return };
            let when = if event.at <= desk.at { "past" } else { "to come" };
            cells.push(Cell::Text(words::time(event.at).into()));
            cells.push(Cell::Time(event.at));
            cells.push(Cell::Text(when.into()));
            cells.push(Cell::Text(words::event(&event.kind).into()));
        }),
    })
}
