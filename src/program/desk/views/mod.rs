//! The views. Adding one is a file here and its entry in [`VIEWS`].

mod events;
mod keys;
mod links;
mod loads;
mod offsets;
mod rates;
mod reach;

use clockspar::run::recording::{self, Frame};
use clockspar::table::{Cell, Column, Measure, Table};

use ratatui::layout::Rect;

use super::painter::Painter;
use super::state::Desk;

/// What a view shows.
pub struct View {
    /// The digit that chooses it.
    pub digit: char,
    /// Its name: that of the command which prints the same numbers.
    pub name: &'static str,
    /// Its table at the present moment; `None`: the view is not there yet.
    pub table: Option<for<'a> fn(&'a Desk) -> Option<Table<'a>>>,
    /// Keys of the columns in the order in which they get room; those not named come last.
    pub first: &'static [&'static str],
    /// Whether the rows are the nodes, fore to aft, so that the line is drawn beside them.
    pub nodes: bool,
    /// What is drawn to the right of the table where there is room.
    pub beside: Option<fn(&Desk, Rect, &mut Painter<'_>)>,
    /// What has to stand under the table, if anything.
    pub note: Option<fn(&Desk) -> Option<String>>,
}

/// All views, in the order in which their names are shown.
pub static VIEWS: [&View; 10] = [
    &rates::VIEW,
    &offsets::VIEW,
    &links::VIEW,
    &reach::VIEW,
    &loads::VIEW,
    &to_come('6', "steer"),
    &to_come('7', "budget"),
    &to_come('8', "reconcile"),
    &events::VIEW,
    &keys::VIEW,
];

/// A view whose name and digit are settled, and which is not there yet.
const fn to_come(digit: char, name: &'static str) -> View {
    View { digit, name, table: None, first: &[], nodes: false, beside: None, note: None }
}

/// A table of nodes with rates and clock offsets as they are to be shown: those recorded
/// where a recording is replayed, and differences where a node has been chosen for it.
fn adapted<'a>(desk: &'a Desk, table: Table<'a>) -> Option<Table<'a>> {
    let table = match desk.replay.as_ref() {
        Some(replay) => recorded(replay.frame.as_ref()?, table),
        None => table,
    };
    match desk.against {
        Some(row) => against(desk, row, table),
        None => Some(table),
    }
}

const RATE: &str = "rate_minus_one";
const FROM_STRETCH: &str = "clock_offset_from_stretch_s";
const OFFSET: &str = "clock_offset_s";

fn place_of(columns: &[Column], key: &str) -> Option<usize> {
    columns.iter().position(|column| column.key == key)
}

/// The table with the numbers of a recorded frame in the places of those recomputed.
fn recorded<'a>(frame: &'a Frame, table: Table<'a>) -> Table<'a> {
    let (rate, offset) = (place_of(&table.columns, RATE), place_of(&table.columns, OFFSET));
    let Table { name, columns, rows, fill, marked } = table;
    let fill = Box::new(move |row: usize, cells: &mut Vec<Cell<'a>>| {
        fill(row, cells);
        for (place, values) in [(rate, &frame.rate_minus_one), (offset, &frame.clock_offset_s)] {
            if let Some(cell) = place.and_then(|place| cells.get_mut(place))
                && let Some(value) = values.get(row)
            {
                *cell = Cell::Number(value);
            }
        }
    });
    Table { name, columns, rows, fill, marked }
}

/// The table with differences from one node in the places of rates and clock offsets.
/// What would still be against the reference is left out.
fn against<'a>(desk: &'a Desk, from: usize, table: Table<'a>) -> Option<Table<'a>> {
    const LEFT_OUT: [&str; 3] = ["redshift", "predicted_reading_s", FROM_STRETCH];
    let kept: Vec<usize> = (0..table.columns.len())
        .filter(|place| !LEFT_OUT.contains(&table.columns[*place].key))
        .collect();
    let mut columns: Vec<Column> = kept.iter().map(|place| table.columns[*place].clone()).collect();
    let (rate, offset) = (place_of(&columns, RATE), place_of(&columns, OFFSET));
    if let Some(place) = rate {
        columns[place] =
            Column { key: "rate_difference", heading: "rate difference", measure: Measure::Ratio };
    }
    let differences = differences_from(desk, from)?;
    let Table { name, rows, fill, .. } = table;
    let fill = Box::new(move |row: usize, cells: &mut Vec<Cell<'a>>| {
        fill(row, cells);
        let mut place = 0;
        cells.retain(|_| {
            place += 1;
            kept.contains(&(place - 1))
        });
        let [of_offset, of_rate] = differences(row);
        for (place, cell) in [(offset, of_offset), (rate, of_rate)] {
            if let Some(shown) = place.and_then(|place| cells.get_mut(place)) {
                *shown = cell;
            }
        }
    });
    Some(Table { name, columns, rows, fill, marked: Some(from) })
}

/// Differences of clock offset and rate from a node to a row.
type Differences<'a> = Box<dyn Fn(usize) -> [Cell<'a>; 2] + Send + Sync + 'a>;

/// Those of the numbers recorded, or those of the table of pairs.
fn differences_from<'a>(desk: &'a Desk, from: usize) -> Option<Differences<'a>> {
    if let Some(replay) = &desk.replay {
        let frame = replay.frame.as_ref()?;
        return Some(Box::new(move |row| recorded_differences(frame, from, row)));
    }
    let pairs = clockspar::table::content::offsets_report(desk.state()?, true);
    let pairs = pairs.tables.into_iter().find(|table| table.name == "pairs")?;
    let others = desk.layout().nodes.len() - 1;
    Some(Box::new(move |row| {
        if row == from {
            return [Cell::Number(0.0), Cell::Number(0.0)];
        }
        // The rows of the pairs of one node leave the node itself out.
        let mut cells = Vec::with_capacity(4);
        (pairs.fill)(from * others + row - usize::from(row > from), &mut cells);
        let rate = cells.pop();
        let offset = cells.pop();
        let missing = || Cell::Absent("not in the table of pairs".into());
        [offset.unwrap_or_else(missing), rate.unwrap_or_else(missing)]
    }))
}

fn recorded_differences<'a>(frame: &Frame, from: usize, row: usize) -> [Cell<'a>; 2] {
    let pair = |values: &recording::Column| Some((values.get(from)?, values.get(row)?));
    let told = |value: Option<f64>| match value {
        Some(value) => Cell::finite(value, "the value overflows"),
        None => Cell::Absent("released: the node no longer belongs to the line".into()),
    };
    let offset = pair(&frame.clock_offset_s).map(|(from, to)| to - from);
    let rate = pair(&frame.rate_minus_one).map(|(from, to)| (to - from) / (1.0 + from));
    [told(offset), told(rate)]
}
