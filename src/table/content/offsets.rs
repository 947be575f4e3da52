//! `offsets`: clock offsets against the reference, or of every ordered pair.

use std::borrow::Cow;

use super::{RELEASED, column, head, number, predicted_reading_s};
use crate::model::dd::Dd;
use crate::run::State;
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
pub fn offsets_report(state: State<'_>, pairs: bool) -> Report<'_> {
    let mut report = head(&state, "offsets");
    if pairs {
        report.tables = vec![node_table(state.clone()), pair_table(state)];
    } else {
        report.tables.push(node_table(state));
    }
    report
}

fn node_table(state: State<'_>) -> Table<'_> {
    let layout = state.run().layout();
    Table {
        name: "nodes",
        columns: NODES.to_vec(),
        rows: state.rows(),
        marked: Some(layout.reference),
        fill: Box::new(move |row, cells| {
            cells.push(Cell::Text(Cow::Borrowed(&layout.nodes[row].name)));
            let Some(aboard) = state.node(row).aboard() else {
                cells.extend((1..NODES.len()).map(|_| Cell::Absent(RELEASED.into())));
                return;
            };
            cells.push(number(aboard.clock_offset_s));
            cells.push(number(aboard.rate_minus_one));
            cells.push(number(predicted_reading_s(layout, state.instant(), row, &aboard)));
        }),
    }
}

fn pair_table(state: State<'_>) -> Table<'_> {
    let layout = state.run().layout();
    let others = state.rows() - 1;
    Table {
        name: "pairs",
        columns: PAIRS.to_vec(),
        rows: state.rows() * others,
        marked: None,
        fill: Box::new(move |row, cells| {
            let from = row / others;
            // The node itself is left out of its own run of partners.
            let to = row % others + usize::from(row % others >= from);
            for end in [from, to] {
                cells.push(Cell::Text(Cow::Borrowed(&layout.nodes[end].name)));
            }
            let ends = (state.node(from).aboard(), state.node(to).aboard());
            let (Some(first), Some(second)) = ends else {
                cells.extend([Cell::Absent(RELEASED.into()), Cell::Absent(RELEASED.into())]);
                return;
            };
            let instant = state.instant();
            let (here, there) = (Dd::new(first.position_m), Dd::new(second.position_m));
            // Two nodes side by side far from the reference: the difference of their positions
            // is exact, that of their offsets is not.
            cells.push(number(if state.is_changed(from) || state.is_changed(to) {
                second.clock_offset_s - first.clock_offset_s
            } else {
                instant.clock_offset_difference_s(here, there)
            }));
            cells.push(number(instant.rate_difference(here, there)));
        }),
    }
}
