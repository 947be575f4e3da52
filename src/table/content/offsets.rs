//! `offsets`: clock offsets against the reference, or of every ordered pair.

use std::borrow::Cow;

use super::{OVERFLOW, RELEASED, column, head, number, predicted_reading_s};
use crate::model::rates::PairFactors;
use crate::run::State;
use crate::table::{Cell, Column, Measure, Report, Table};

const NODES: [Column; 4] = [
    column("node", "node", Measure::Word),
    column("clock_offset_s", "clock offset", Measure::Time),
    column("rate_minus_one", "rate - 1", Measure::Ratio),
    column("predicted_reading_s", "predicted reading", Measure::Time),
];

const STRETCH: [Column; 6] = [
    column("node", "node", Measure::Word),
    column("unloaded_position_m", "unloaded position", Measure::Length),
    column("loaded_position_m", "loaded position", Measure::Length),
    column("clock_offset_unloaded_s", "clock offset unloaded", Measure::Time),
    column("clock_offset_from_stretch_s", "clock offset from stretch", Measure::Time),
    column("neglected_motion_s", "neglected motion", Measure::Time),
];

const PAIRS: [Column; 4] = [
    column("from", "from", Measure::Word),
    column("to", "to", Measure::Word),
    column("clock_offset_s", "clock offset", Measure::Time),
    column("rate_difference", "rate difference", Measure::Ratio),
];

/// The offsets report of a line at a moment; with `pairs` also the table of every ordered
/// pair, to − from; of a line that stretches also what part of each offset that makes.
#[must_use]
pub fn offsets_report(state: State<'_>, pairs: bool) -> Report<'_> {
    let mut report = head(&state, "offsets");
    report.remarks.extend(super::standing_warning(&state));
    // What was asked for by name comes first, and is the table of a CSV.
    if pairs {
        report.tables.push(pair_table(state.clone()));
    }
    report.tables.push(node_table(state.clone()));
    if let Some((loads, _)) = state.loaded() {
        let motion = loads.neglected_motion(state.at());
        let rows = (0..state.rows()).filter(|row| state.node(*row).aboard().is_some());
        let most_s = rows.map(|row| loads.neglected_of_row_s(&motion, row)).fold(0.0, f64::max);
        let further = if most_s == 0.0 {
            "stretching has not moved any up to now, which would slow its clock further".to_owned()
        } else {
            format!(
                "the motion of stretching nodes along the line slows their clocks further, by \
                 {most_s:.1e} s at most up to now"
            )
        };
        report.remarks.push(format!("Clock offsets are those of the loaded positions; {further}."));
        report.tables.push(stretch_table(state));
    }
    report
}

/// What part of each clock offset comes from load and temperature, and what is left out.
fn stretch_table(state: State<'_>) -> Table<'_> {
    let layout = state.run().layout();
    let motion = state.loaded().map(|(loads, _)| loads.neglected_motion(state.at()));
    Table {
        name: "stretch",
        columns: STRETCH.to_vec(),
        rows: state.rows(),
        marked: Some(layout.reference),
        fill: Box::new(move |row, cells| {
            cells.push(Cell::Text(Cow::Borrowed(&layout.nodes[row].name)));
            let (Some(stretched), Some(aboard)) = (state.stretched(row), state.node(row).aboard())
            else {
                cells.extend((1..STRETCH.len()).map(|_| Cell::Absent(RELEASED.into())));
                return;
            };
            cells.push(number(stretched.unloaded_position_m));
            cells.push(number(aboard.position_m));
            cells.push(number(stretched.offset_unloaded_s));
            cells.push(number(stretched.offset_from_stretch_s));
            let neglected_s = match (&motion, state.loaded()) {
                (Some(motion), Some((loads, _))) => loads.neglected_of_row_s(motion, row),
                _ => 0.0,
            };
            cells.push(Cell::finite(neglected_s, OVERFLOW));
        }),
    }
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
    let kept: Vec<PairFactors> = if state.rows() <= MOST_KEPT && state.loaded().is_none() {
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
            if state.loaded().is_some() || state.is_changed(from) || state.is_changed(to) {
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

/// A pair on a line that stretches, or with an end that has been moved or released, or
/// will be.
fn changed_pair(state: &State<'_>, from: usize, to: usize) -> [Cell<'static>; 2] {
    let (Some(first), Some(second)) = (state.node(from).aboard(), state.node(to).aboard()) else {
        return [Cell::Absent(RELEASED.into()), Cell::Absent(RELEASED.into())];
    };
    let apart = state.offset_difference_s(from, to);
    [
        apart.map_or_else(|| Cell::Absent(RELEASED.into()), number),
        number(state.instant().rate_difference(first.position_m, second.position_m)),
    ]
}
