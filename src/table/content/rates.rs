//! `rates`: everything about each node at a moment.

use std::borrow::Cow;

use super::{OVERFLOW, RELEASED, STANDING, column, head, number, predicted_reading_s};
use crate::model::rates::{LaunchFrame, redshift_of};
use crate::run::State;
use crate::table::{Cell, Column, Measure, Report, Table};

const COLUMNS: [Column; 11] = [
    column("node", "node", Measure::Word),
    column("position_m", "position", Measure::Length),
    column("horizon_m", "horizon", Measure::Length),
    column("acceleration_m_s2", "felt", Measure::Acceleration),
    column("rate_minus_one", "rate - 1", Measure::Ratio),
    column("redshift", "redshift", Measure::Ratio),
    column("clock_offset_s", "clock offset", Measure::Time),
    column("proper_time_s", "proper time", Measure::Time),
    column("predicted_reading_s", "predicted reading", Measure::Time),
    column("launch_time_s", "launch time", Measure::Time),
    column("launch_position_m", "launch position", Measure::Length),
];

/// The rates report of a line at a moment.
#[must_use]
pub fn rates_report(state: State<'_>) -> Report<'_> {
    let mut report = head(&state, "rates");
    let layout = state.run().layout();
    let moment = state.instant().moment;
    let frame =
        state.run().plan().map(|plan| LaunchFrame::new(plan.launch(moment.at), moment.rapidity));
    report.remarks.extend(super::standing_warning(&state));
    report.tables.push(Table {
        name: "nodes",
        columns: COLUMNS.to_vec(),
        rows: state.rows(),
        marked: Some(layout.reference),
        fill: Box::new(move |row, cells| {
            cells.push(Cell::Text(Cow::Borrowed(&layout.nodes[row].name)));
            let Some(aboard) = state.node(row).aboard() else {
                cells.extend((1..COLUMNS.len()).map(|_| Cell::Absent(RELEASED.into())));
                return;
            };
            let (instant, position) = (state.instant(), aboard.position_m);
            // The rate is the same in all that follows, so it is made once.
            let rate = aboard.rate_minus_one + 1.0;
            cells.push(number(position));
            cells.push(match instant.horizon_at_rate_m(rate) {
                Some(horizon) => number(horizon),
                None if instant.gradient_per_s2 != 0.0 => {
                    Cell::Absent("gravity with a gradient has no such horizon".into())
                }
                None => Cell::Absent("no thrust, no horizon".into()),
            });
            cells.push(number(instant.felt_at_rate_m_s2(position, rate)));
            cells.push(number(aboard.rate_minus_one));
            cells.push(number(redshift_of(aboard.rate_minus_one)));
            cells.push(number(aboard.clock_offset_s));
            cells.push(number(moment.at.seconds() + aboard.clock_offset_s));
            cells.push(number(predicted_reading_s(layout, instant, row, &aboard)));
            let events = match &frame {
                Some(frame) => [frame.time_s(position), frame.position_m(position)]
                    .map(|value| value.map_or(Cell::Absent(OVERFLOW.into()), Cell::Number)),
                None => [Cell::Absent(STANDING.into()), Cell::Absent(STANDING.into())],
            };
            cells.extend(events);
        }),
    });
    report
}
