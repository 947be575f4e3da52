//! `offsets`: clock offsets against the reference, or of every ordered pair.

use std::borrow::Cow;

use super::{OVERFLOW, RELEASED, column, head, number, predicted_reading_s};
use crate::model::dd::Dd;
use crate::model::rates::PairFactors;
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

/// Nodes up to which what pairs share is kept for each first node; of more no one lists the
/// pairs, but for a few that are chosen.
const MOST_KEPT: usize = 1 << 16;

fn pair_table(state: State<'_>) -> Table<'_> {
    let layout = state.run().layout();
    let others = state.rows() - 1;
    let instant = *state.instant();
    let shared = |row: usize| PairFactors::new(&instant, layout.nodes[row].position_m);
    let kept: Vec<PairFactors> = if state.rows() <= MOST_KEPT {
        (0..state.rows()).map(shared).collect()
    } else {
        Vec::new()
    };
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
            if state.is_changed(from) || state.is_changed(to) {
                cells.extend(changed_pair(&state, from, to));
                return;
            }
            let there = layout.nodes[to].position_m;
            let pairs = match kept.get(from) {
                Some(factors) => *factors,
                None => PairFactors::new(&instant, layout.nodes[from].position_m),
            };
            for value in
                [pairs.clock_offset_s(&instant, there), pairs.rate_difference(&instant, there)]
            {
                cells.push(Cell::finite(value, OVERFLOW));
            }
        }),
    }
}

/// A pair with an end that has been moved or released, or will be.
fn changed_pair(state: &State<'_>, from: usize, to: usize) -> [Cell<'static>; 2] {
    let (Some(first), Some(second)) = (state.node(from).aboard(), state.node(to).aboard()) else {
        return [Cell::Absent(RELEASED.into()), Cell::Absent(RELEASED.into())];
    };
    let (here, there) = (Dd::new(first.position_m), Dd::new(second.position_m));
    [
        number(second.clock_offset_s - first.clock_offset_s),
        number(state.instant().rate_difference(here, there)),
    ]
}
