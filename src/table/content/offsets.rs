//! `offsets`: clock offsets against the reference, or of every ordered pair.

use std::borrow::Cow;
use std::sync::Arc;

use super::{LineAt, RELEASED, column, number, predicted_reading_s};
use crate::table::{Cell, Column, Measure, Report, Table};

const NODES: [Column; 4] = [
    column("node", "node", Measure::Word),
    column("clock_offset_s", "clock offset", Measure::Time),
    column("rate_minus_one", "rate - 1", Measure::Ratio),
    column("predicted_reading_s", "predicted reading", Measure::Time),
];

const PAIRS: [Column; 4] = [
    column("from", "from", Measure::Word),
    column("to", "to", Measure::Word),
    column("clock_offset_s", "clock offset", Measure::Time),
    column("rate_difference", "rate difference", Measure::Ratio),
];

/// The offsets report of a line at a moment; with `pairs` also the table of every ordered
/// pair, to − from.
#[must_use]
pub fn offsets_report(line: LineAt<'_>, pairs: bool) -> Report<'_> {
    let mut report = line.report("offsets", Vec::new());
    let line = Arc::new(line);
    report.tables.push(nodes(Arc::clone(&line)));
    if pairs {
        report.tables.push(pair_table(line));
    }
    report
}

fn nodes(line: Arc<LineAt<'_>>) -> Table<'_> {
    let layout = line.layout;
    Table {
        name: "nodes",
        columns: NODES.to_vec(),
        rows: layout.nodes.len(),
        marked: Some(layout.reference),
        fill: Box::new(move |row, cells| {
            cells.push(Cell::Text(Cow::Borrowed(&layout.nodes[row].name)));
            let Some(state) = (line.nodes)(row) else {
                cells.extend((1..NODES.len()).map(|_| Cell::Absent(RELEASED.into())));
                return;
            };
            cells.push(number(state.clock_offset_s));
            cells.push(number(line.instant.rate_minus_one(state.position_m)));
            cells.push(number(predicted_reading_s(layout, &line.instant, row, &state)));
        }),
    }
}

fn pair_table(line: Arc<LineAt<'_>>) -> Table<'_> {
    let layout = line.layout;
    let others = layout.nodes.len() - 1;
    Table {
        name: "pairs",
        columns: PAIRS.to_vec(),
        rows: layout.nodes.len() * others,
        marked: None,
        fill: Box::new(move |row, cells| {
            let from = row / others;
            // The node itself is left out of its own run of partners.
            let to = row % others + usize::from(row % others >= from);
            for end in [from, to] {
                cells.push(Cell::Text(Cow::Borrowed(&layout.nodes[end].name)));
            }
            let (Some(first), Some(second)) = ((line.nodes)(from), (line.nodes)(to)) else {
                cells.extend([Cell::Absent(RELEASED.into()), Cell::Absent(RELEASED.into())]);
                return;
            };
            let (here, there) = (first.position_m, second.position_m);
            // Two nodes side by side far from the reference: the difference of their positions
            // is exact, that of their offsets is not.
            cells.push(number(if first.has_moved || second.has_moved {
                second.clock_offset_s - first.clock_offset_s
            } else {
                line.instant.clock_offset_difference_s(here, there)
            }));
            cells.push(number(line.instant.rate_difference(here, there)));
        }),
    }
}
