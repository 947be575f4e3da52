//! `offsets`: what the clocks of the line differ by at the present moment.

use clockspar::table::Table;
use clockspar::table::content::offsets_report;

use super::{View, adapted};
use crate::program::desk::state::Desk;

/// The view.
pub static VIEW: View = View {
    digit: '2',
    name: "offsets",
    table: Some(table),
    first: &["node", "clock_offset_s", "rate_minus_one", "rate_difference", "predicted_reading_s"],
    nodes: true,
    beside: None,
    note: None,
};

fn table(desk: &Desk) -> Option<Table<'_>> {
    adapted(desk, offsets_report(desk.state()?, false).tables.pop()?)
}
