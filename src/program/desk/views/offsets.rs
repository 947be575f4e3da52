//! `offsets`: what the clocks of the line differ by at the present moment.

use clockspar::table::content::{RELEASED, offsets_report};
use clockspar::table::{Cell, Column, Measure, Table};

use super::{FROM_STRETCH, View, adapted};
use crate::program::desk::state::Desk;

/// The view.
pub static VIEW: View = View {
    digit: '2',
    name: "offsets",
    table: Some(table),
    first: &[
        "node",
        "clock_offset_s",
        "rate_minus_one",
        "rate_difference",
        "predicted_reading_s",
        FROM_STRETCH,
    ],
    nodes: true,
    beside: None,
    note: None,
};

fn table(desk: &Desk) -> Option<Table<'_>> {
    let mut tables = offsets_report(desk.state()?, false).tables.into_iter();
    adapted(desk, with_stretch(desk, tables.next()?)?)
}

/// The table with the part of the clock offset that load and temperature make, on a line
/// that they move.
fn with_stretch<'a>(desk: &'a Desk, table: Table<'a>) -> Option<Table<'a>> {
    let state = desk.state()?;
    if state.loaded().is_none() {
        return Some(table);
    }
    let Table { name, mut columns, rows, fill, marked } = table;
    columns.push(Column { key: FROM_STRETCH, heading: "from stretch", measure: Measure::Time });
    let fill = Box::new(move |row: usize, cells: &mut Vec<Cell<'a>>| {
        fill(row, cells);
        cells.push(match state.stretched(row) {
            Some(stretched) => {
                let part_s = stretched.offset_from_stretch_s.to_f64();
                Cell::finite(part_s, "exceeds the largest double")
            }
            None => Cell::Absent(RELEASED.into()),
        });
    });
    Some(Table { name, columns, rows, fill, marked })
}
