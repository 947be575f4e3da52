//! `rates`: everything about each node at the present moment.

use clockspar::table::Table;
use clockspar::table::content::rates_report;

use super::{View, adapted};
use crate::program::desk::state::Desk;

/// The view.
pub static VIEW: View = View {
    digit: '1',
    name: "rates",
    table: Some(table),
    first: &[
        "node",
        "rate_minus_one",
        "rate_difference",
        "clock_offset_s",
        "position_m",
        "acceleration_m_s2",
        "horizon_m",
        "redshift",
        "proper_time_s",
        "predicted_reading_s",
    ],
    nodes: true,
    beside: None,
    note: None,
};

fn table(desk: &Desk) -> Option<Table<'_>> {
    adapted(desk, rates_report(desk.state()?).tables.pop()?)
}
