//! `loads`: what every node feels, and what each span between two of them carries.

use clockspar::model::loads::Loads;
use clockspar::table::content::{RELEASED, SpanLoad};
use clockspar::table::{Cell, Column, Measure, Table};

use super::View;
use crate::program::desk::state::Desk;

/// The view.
pub static VIEW: View = View {
    digit: '5',
    name: "loads",
    table: Some(table),
    first: &[
        "node",
        "span",
        "force_fore_n",
        "margin",
        "acceleration_m_s2",
        "node_state",
        "loaded_position_m",
        "force_aft_n",
        "rating_m_s2",
        "stretch_m",
    ],
    nodes: true,
    beside: None,
    note: Some(caution),
};

const fn column(key: &'static str, heading: &'static str, measure: Measure) -> Column {
    Column { key, heading, measure }
}

/// A node, and behind it the span to the next one aft.
const COLUMNS: [Column; 10] = [
    column("node", "node", Measure::Word),
    column("acceleration_m_s2", "felt", Measure::Acceleration),
    column("rating_m_s2", "rating", Measure::Acceleration),
    column("node_state", "", Measure::Word),
    column("loaded_position_m", "position", Measure::Length),
    column("span", "span", Measure::Word),
    column("force_fore_n", "fore end", Measure::Force),
    column("force_aft_n", "aft end", Measure::Force),
    column("margin", "margin", Measure::Ratio),
    column("stretch_m", "stretch", Measure::Length),
];

/// Places of the first column about the span.
const SPAN: usize = 5;

fn table(desk: &Desk) -> Option<Table<'_>> {
    let state = desk.state()?;
    let loads = desk.run.loads().ok()?;
    let now = loads.state_of_instant(*state.instant());
    let layout = desk.layout();
    Some(Table {
        name: "loads",
        columns: COLUMNS.to_vec(),
        rows: state.rows(),
        marked: Some(layout.reference),
        fill: Box::new(move |row, cells| {
            let node = &layout.nodes[row];
            cells.push(Cell::Text(node.name.as_str().into()));
            let Some(aboard) = state.node(row).aboard() else {
                cells.extend((1..COLUMNS.len()).map(|_| Cell::Absent(RELEASED.into())));
                return;
            };
            let felt = state.instant().felt_acceleration_m_s2(aboard.position_m).to_f64();
            cells.push(Cell::finite(felt, OVERFLOW));
            match node.rating_m_s2 {
                Some(rating) => {
                    let word = if felt.abs() > rating { "over" } else { "kept" };
                    cells.extend([Cell::Number(rating), Cell::Text(word.into())]);
                }
                None => cells.extend([Cell::Absent(NO_RATING.into()), Cell::Text("".into())]),
            }
            cells.push(Cell::finite(aboard.position_m.to_f64(), OVERFLOW));
            let is_joined = row + 1 < state.rows() && state.node(row + 1).aboard().is_some();
            if is_joined {
                push_span(&loads, &now, row, cells);
            } else {
                cells.push(Cell::Text("".into()));
                cells.extend((SPAN + 1..COLUMNS.len()).map(|_| Cell::Absent(NO_SPAN.into())));
            }
        }),
    })
}

const OVERFLOW: &str = "exceeds the largest double";
const NO_RATING: &str = "no rating is given";
const NO_SPAN: &str = "nothing aft of it";

fn push_span(
    loads: &Loads,
    now: &clockspar::model::loads::State,
    gap: usize,
    cells: &mut Vec<Cell<'_>>,
) {
    let load = SpanLoad::of(loads, now, gap);
    cells.push(Cell::Text(load.word().into()));
    cells.extend(loads.span_force_n(now, gap).map(|force_n| Cell::finite(force_n, OVERFLOW)));
    cells.push(match SpanLoad::margin(loads, now, gap) {
        Some(_) if load == SpanLoad::Slack => Cell::Absent("a tether cannot push".into()),
        Some(margin) => Cell::finite(margin, OVERFLOW),
        None => Cell::Absent("no strength is given".into()),
    });
    cells.push(Cell::finite(loads.span_stretch_m(now, gap), OVERFLOW));
}

/// The caution under everything that shows forces, as short as the room asks for.
fn caution(desk: &Desk) -> Option<String> {
    let is_changed =
        desk.state().is_some_and(|state| (0..state.rows()).any(|row| state.is_changed(row)));
    // The weight of a node that was moved or released stays where the layout puts it.
    let text = match (desk.size.0 >= 80, is_changed) {
        (true, false) => {
            "Caution: for planning; dynamics left out; qualified safety staff must review."
        }
        (true, true) => {
            "Caution: for planning; weights as filed; qualified safety staff must review."
        }
        (false, false) => "Caution: for planning; qualified staff must review.",
        (false, true) => "Caution: weights as filed; qualified staff must review.",
    };
    Some(text.to_owned())
}
