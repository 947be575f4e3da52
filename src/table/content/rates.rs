//! `rates`: everything about each node at a moment.

use std::borrow::Cow;

use super::{LineAt, OVERFLOW, RELEASED, STANDING, column, number, predicted_reading_s};
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
pub fn rates_report(line: LineAt<'_>) -> Report<'_> {
    let layout = line.layout;
    let mut report = line.report("rates", Vec::new());
    let table = Table {
        name: "nodes",
        columns: COLUMNS.to_vec(),
        rows: layout.nodes.len(),
        marked: Some(layout.reference),
        fill: Box::new(move |row, cells| {
            cells.push(Cell::Text(Cow::Borrowed(&layout.nodes[row].name)));
            let Some(state) = (line.nodes)(row) else {
                cells.extend((1..COLUMNS.len()).map(|_| Cell::Absent(RELEASED.into())));
                return;
            };
            let (instant, position) = (&line.instant, state.position_m);
            cells.push(number(position));
            cells.push(match instant.horizon_m(position) {
                Some(horizon) => number(horizon),
                None if instant.gradient_per_s2 != 0.0 => {
                    Cell::Absent("gravity with a gradient has no such horizon".into())
                }
                None => Cell::Absent("no thrust, no horizon".into()),
            });
            cells.push(number(instant.felt_acceleration_m_s2(position)));
            cells.push(number(instant.rate_minus_one(position)));
            cells.push(number(instant.redshift(position)));
            cells.push(number(state.clock_offset_s));
            cells.push(number(instant.moment.at.seconds() + state.clock_offset_s));
            cells.push(number(predicted_reading_s(layout, instant, row, &state)));
            match &line.frame {
                Some(frame) => {
                    for value in [frame.time_s(position), frame.position_m(position)] {
                        cells.push(value.map_or(Cell::Absent(OVERFLOW.into()), Cell::Number));
                    }
                }
                None => {
                    cells.extend([Cell::Absent(STANDING.into()), Cell::Absent(STANDING.into())]);
                }
            }
        }),
    };
    report.tables.push(table);
    report
}
