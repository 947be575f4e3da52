//! `links`: signals sent at the present moment, every direction of every link.

use clockspar::table::Table;
use clockspar::table::content::links_report;

use super::View;
use crate::program::desk::launch_chart;
use crate::program::desk::state::Desk;

/// The view.
pub static VIEW: View = View {
    digit: '3',
    name: "links",
    table: Some(table),
    first: &[
        "from",
        "to",
        "received_shift",
        "flight_array_s",
        "received_minus_carrier_hz",
        "shift_rate_per_s",
        "two_way_error_s",
        "separation_m",
        "round_trip_s",
        "radar_distance_m",
    ],
    nodes: false,
    beside: Some(launch_chart::draw),
    note: None,
};

fn table(desk: &Desk) -> Option<Table<'_>> {
    let mut tables = links_report(desk.state()?, false).tables;
    (!tables.is_empty()).then(|| tables.swap_remove(0))
}
