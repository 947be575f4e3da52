//! Choosing what to see: nodes, columns, and units of the text form.
//!
//! A choice is laid over a report that is there already: rows are mapped and cells put in
//! another order as they are asked for, so a table that streams goes on streaming. No
//! value is touched.

mod nodes;
mod units;

use std::fmt;

use super::{Cell, Column, Fill, Measure, Report, Table};
use crate::layout::nearest::nearest;

pub use nodes::{NodeChoice, choose_nodes};
pub use units::{UnitFault, Units};

/// Why something that was asked to be seen cannot be.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct ChoiceFault {
    /// What was asked for.
    pub wanted: String,
    /// What holds.
    pub rule: String,
    /// What would be right.
    pub remedy: String,
}

impl fmt::Display for ChoiceFault {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{}; {}", self.rule, self.remedy)
    }
}

impl std::error::Error for ChoiceFault {}

impl ChoiceFault {
    fn new(wanted: &str, rule: impl Into<String>, remedy: impl Into<String>) -> ChoiceFault {
        ChoiceFault { wanted: wanted.to_owned(), rule: rule.into(), remedy: remedy.into() }
    }
}

/// What becomes of a table that has none of the columns chosen.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Unchosen {
    /// It is left out.
    LeftOut,
    /// It is shown whole.
    Whole,
}

/// The keys of a list, separated by commas.
///
/// # Errors
///
/// An empty list, an empty item, a key that stands twice.
pub fn read_columns(text: &str) -> Result<Vec<String>, ChoiceFault> {
    let mut keys: Vec<String> = Vec::new();
    for item in text.split(',').map(str::trim) {
        if item.is_empty() {
            let rule = "columns are chosen by their keys, separated by commas";
            return Err(ChoiceFault::new(text, rule, "write for example `node,rate_minus_one`"));
        }
        if keys.iter().any(|known| known == item) {
            let rule = "each column is shown once";
            return Err(ChoiceFault::new(item, rule, "take the second one away"));
        }
        keys.push(item.to_owned());
    }
    Ok(keys)
}

/// Leaves the columns of these keys in a report, in the order given.
///
/// A key may leave out the SI unit it ends in. Each table keeps those of the keys it has.
///
/// # Errors
///
/// A key that no table has; the error lists the keys there are.
pub fn choose_columns(
    report: &mut Report<'_>,
    keys: &[String],
    unchosen: Unchosen,
) -> Result<(), ChoiceFault> {
    for key in keys {
        if !report.tables.iter().any(|table| table.place_of(key).is_some()) {
            return Err(unknown_column(report, key));
        }
    }
    let mut shown = Vec::with_capacity(report.tables.len());
    for table in std::mem::take(&mut report.tables) {
        let mut places: Vec<usize> = keys.iter().filter_map(|key| table.place_of(key)).collect();
        // The same column may be meant by its key with and without the unit.
        let mut seen = vec![false; table.columns.len()];
        places.retain(|place| !std::mem::replace(&mut seen[*place], true));
        if !places.is_empty() {
            shown.push(with_columns(table, &places));
        } else if unchosen == Unchosen::Whole {
            shown.push(table);
        }
    }
    report.tables = shown;
    Ok(())
}

/// The key of the first column with a heading.
fn key_of_heading(report: &Report<'_>, heading: &str) -> Option<&'static str> {
    let mut columns = report.tables.iter().flat_map(|table| &table.columns);
    columns.find(|column| column.heading == heading).map(|column| column.key)
}

fn unknown_column(report: &Report<'_>, key: &str) -> ChoiceFault {
    let rule = format!("no column has the key `{key}`");
    let leading = report.moment_cells().map(|(key, _)| key);
    if leading.contains(&key) {
        let remedy = "leave it out: the moment stands on top of the table or in front of each row";
        return ChoiceFault::new(key, rule, remedy);
    }
    let mut known: Vec<&str> = Vec::new();
    for column in report.tables.iter().flat_map(|table| &table.columns) {
        if !known.contains(&column.key) {
            known.push(column.key);
        }
    }
    let meant = key_of_heading(report, key).or_else(|| nearest(key, known.iter().copied()));
    let remedy = match meant {
        Some(meant) => format!("write `{meant}`; the keys are {}", known.join(", ")),
        None => format!("the keys are {}", known.join(", ")),
    };
    ChoiceFault::new(key, rule, remedy)
}

/// A table with some of its columns, by their places.
fn with_columns<'a>(table: Table<'a>, places: &[usize]) -> Table<'a> {
    // Swaps that bring the chosen cells to the front, in their order, without a copy.
    let mut order: Vec<usize> = (0..table.columns.len()).collect();
    let mut swaps = Vec::with_capacity(places.len());
    for (to, place) in places.iter().enumerate() {
        let from = order.iter().position(|at| at == place).unwrap_or(to);
        order.swap(to, from);
        swaps.push(from);
    }
    let columns = places.iter().map(|place| table.columns[*place].clone()).collect();
    let inner = table.fill;
    let fill: Fill<'a> = Box::new(move |row, cells: &mut Vec<Cell<'a>>| {
        inner(row, cells);
        for (to, from) in swaps.iter().enumerate() {
            cells.swap(to, *from);
        }
        cells.truncate(swaps.len());
    });
    Table { columns, fill, ..table }
}

/// A table with some of its rows, by a map from the new rows to the old.
fn with_rows<'a>(
    table: Table<'a>,
    rows: usize,
    marked: Option<usize>,
    old_row: impl Fn(usize) -> usize + Send + Sync + 'a,
) -> Table<'a> {
    let inner = table.fill;
    let fill: Fill<'a> = Box::new(move |row, cells: &mut Vec<Cell<'a>>| inner(old_row(row), cells));
    Table { rows, marked, fill, ..table }
}

impl Table<'_> {
    /// The place of the column of a key; the SI unit at the end of the key may be left out.
    fn place_of(&self, key: &str) -> Option<usize> {
        let exact = self.columns.iter().position(|column| column.key == key);
        exact.or_else(|| {
            let bare = |column: &Column| bare_key(column.key, column.measure) == Some(key);
            self.columns.iter().position(bare)
        })
    }
}

/// The SI units that keys end in.
const SI_ENDINGS: [&str; 8] = ["_s", "_m", "_m_s2", "_hz", "_n", "_kg", "_m_s", "_per_s"];

/// A key without the SI unit at its end; `None` when it has none.
fn bare_key(key: &str, measure: Measure) -> Option<&str> {
    let unit = match measure {
        Measure::Word | Measure::Count | Measure::Ratio | Measure::Unit | Measure::Various => {
            return None;
        }
        Measure::Time => "_s",
        Measure::Length => "_m",
        Measure::Acceleration => "_m_s2",
        Measure::Frequency => "_hz",
        Measure::Force => "_n",
        Measure::Mass => "_kg",
        Measure::Speed => "_m_s",
        Measure::PerSecond => "_per_s",
    };
    key.strip_suffix(unit)
}
