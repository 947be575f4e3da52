//! Choosing nodes: which rows of a table are about them.

use std::collections::{HashMap, HashSet};
use std::sync::Arc;

use super::{ChoiceFault, with_rows};
use crate::layout::nearest::nearest;
use crate::table::{Cell, Report, Table};

/// Lines up to this many nodes are searched for the name that was meant.
const SEARCHED_FOR_NAMES: usize = 20_000;

/// Columns that name nodes; a row is shown when every one of them names a chosen node.
const NODE_KEYS: [&str; 4] = ["node", "subject", "from", "to"];

/// What stands between the two ends of a range.
const RANGE: &str = "..";

/// Nodes that were chosen of a line.
#[derive(Clone, Debug)]
pub struct NodeChoice {
    /// Their rows, rising.
    rows: Arc<[usize]>,
    names: Arc<HashSet<String>>,
    /// How many nodes there are.
    of: usize,
}

impl NodeChoice {
    /// Reads a list of nodes: names, separated by commas, and ranges.
    ///
    /// `first..last` is every row from the one node to the other, both included, in either
    /// order; without a first or a last it goes to the end of the line. An item that is a
    /// name is that node, whatever else it might mean. Rows stay in the order of the line.
    ///
    /// # Errors
    ///
    /// An empty item, and a name the line does not have; the error gives the nearest.
    pub fn read(text: &str, names: &[&str]) -> Result<NodeChoice, ChoiceFault> {
        let items: Vec<&str> = text.split(',').map(str::trim).collect();
        if items.contains(&"") {
            let rule = "nodes are chosen by their names, separated by commas, and by ranges";
            return Err(ChoiceFault::new(text, rule, "write for example `hub,s2..s7`"));
        }
        // One pass over the names finds all that the list might mean.
        let mut rows: HashMap<&str, Option<usize>> = HashMap::new();
        for item in &items {
            rows.insert(item, None);
            for (first, last) in ways_to_split(item) {
                rows.insert(first, None);
                rows.insert(last, None);
            }
        }
        for (row, name) in names.iter().enumerate() {
            if let Some(found) = rows.get_mut(name) {
                *found = found.or(Some(row));
            }
        }
        let row_of = |name: &str| rows.get(name).copied().flatten();
        let mut chosen = vec![false; names.len()];
        for item in &items {
            let range = match row_of(item) {
                Some(row) => row..row + 1,
                None => range_of(item, names, &row_of)?,
            };
            chosen[range].fill(true);
        }
        let rows: Arc<[usize]> =
            chosen.iter().enumerate().filter_map(|(row, chosen)| chosen.then_some(row)).collect();
        let names_chosen = rows.iter().map(|&row| names[row].to_owned()).collect();
        Ok(NodeChoice { rows, names: Arc::new(names_chosen), of: names.len() })
    }

    /// How many nodes were chosen, and of how many.
    #[must_use]
    pub fn count(&self) -> (usize, usize) {
        (self.rows.len(), self.of)
    }

    /// Whether a cell that names nodes names chosen ones: a node, or a pair as `a to b`.
    fn is_about(&self, named: &str) -> bool {
        let is_pair = |between: &str| {
            named.match_indices(between).any(|(place, _)| {
                let (first, last) = (&named[..place], &named[place + between.len()..]);
                self.names.contains(first) && self.names.contains(last)
            })
        };
        self.names.contains(named) || PAIRED_BY.into_iter().any(is_pair)
    }
}

/// What may stand between the two nodes of a pair in a cell.
const PAIRED_BY: [&str; 2] = [" to ", " - "];

/// Every way to read an item as a range: names may hold the same two points.
fn ways_to_split(item: &str) -> impl Iterator<Item = (&str, &str)> {
    item.match_indices(RANGE)
        .map(|(place, _)| (item[..place].trim_end(), item[place + RANGE.len()..].trim_start()))
}

/// The rows of an item that is no name.
fn range_of(
    item: &str,
    names: &[&str],
    row_of: &impl Fn(&str) -> Option<usize>,
) -> Result<std::ops::Range<usize>, ChoiceFault> {
    let end = |name: &str, open: usize| if name.is_empty() { Some(open) } else { row_of(name) };
    for (first, last) in ways_to_split(item).filter(|ends| *ends != ("", "")) {
        if let (Some(first), Some(last)) = (end(first, 0), end(last, names.len().saturating_sub(1)))
        {
            return Ok(first.min(last)..first.max(last) + 1);
        }
    }
    // Of a range, the end that is not there is told.
    let missing = ways_to_split(item)
        .flat_map(|(first, last)| [first, last])
        .find(|name| !name.is_empty() && row_of(name).is_none())
        .unwrap_or(item);
    let searched = if names.len() <= SEARCHED_FOR_NAMES { names } else { &[] };
    let remedy = match nearest(missing, searched.iter().copied()) {
        Some(meant) => format!("write `{meant}`"),
        None => "write names, separated by commas, or `first..last` for all rows between two \
                 nodes"
            .to_owned(),
    };
    Err(ChoiceFault::new(item, format!("no node is called `{missing}`"), remedy))
}

/// Leaves the rows of the chosen nodes in a report; of pairs those whose two ends are both
/// chosen. A table that names no nodes keeps all its rows.
pub fn choose_nodes(report: &mut Report<'_>, chosen: &NodeChoice) {
    let command = report.command;
    let tables = std::mem::take(&mut report.tables);
    report.tables = tables.into_iter().map(|table| with_nodes(command, table, chosen)).collect();
}

fn with_nodes<'a>(command: &str, table: Table<'a>, chosen: &NodeChoice) -> Table<'a> {
    let rows = Arc::clone(&chosen.rows);
    let marked = table.marked.and_then(|marked| rows.binary_search(&marked).ok());
    match (command, table.name) {
        // One row a node, in the order of the line.
        ("rates" | "offsets" | "replay", "nodes") if table.rows == chosen.of => {
            with_rows(table, rows.len(), marked, move |row| rows[row])
        }
        // Every ordered pair: row = from · (n − 1) + to, the node itself left out.
        ("offsets", "pairs") => {
            let (all, others) = (chosen.of - 1, rows.len().saturating_sub(1));
            with_rows(table, rows.len() * others, None, move |row| {
                let (from, to) = (row / others, row % others);
                let to = to + usize::from(to >= from);
                let (from, to) = (rows[from], rows[to]);
                from * all + to - usize::from(to > from)
            })
        }
        _ => with_named_nodes(table, chosen),
    }
}

/// The rows of any other table, found by the names in them.
fn with_named_nodes<'a>(table: Table<'a>, chosen: &NodeChoice) -> Table<'a> {
    let columns: Vec<usize> = (0..table.columns.len())
        .filter(|place| NODE_KEYS.contains(&table.columns[*place].key))
        .collect();
    if columns.is_empty() {
        return table;
    }
    let mut cells = Vec::with_capacity(table.columns.len());
    let mut rows = Vec::new();
    for row in 0..table.rows {
        cells.clear();
        (table.fill)(row, &mut cells);
        let is_chosen = columns
            .iter()
            .all(|place| matches!(&cells[*place], Cell::Text(name) if chosen.is_about(name)));
        if is_chosen {
            rows.push(row);
        }
    }
    drop(cells);
    let marked = table.marked.and_then(|marked| rows.binary_search(&marked).ok());
    with_rows(table, rows.len(), marked, move |row| rows[row])
}

#[cfg(test)]
mod tests {
    use super::*;

    const NAMES: [&str; 6] = ["mast", "hub", "s1", "s2", "s3", "a..b"];

    fn rows(text: &str) -> Result<Vec<usize>, String> {
        NodeChoice::read(text, &NAMES)
            .map(|choice| choice.rows.to_vec())
            .map_err(|fault| fault.to_string())
    }

    #[test]
    fn names_and_ranges_are_chosen_in_the_order_of_the_line() {
        assert_eq!(rows("s2"), Ok(vec![3]));
        assert_eq!(rows(" s2 , mast,s2"), Ok(vec![0, 3]));
        assert_eq!(rows("hub..s2"), Ok(vec![1, 2, 3]));
        assert_eq!(rows("s2 .. hub"), Ok(vec![1, 2, 3]));
        assert_eq!(rows("s3.."), Ok(vec![4, 5]));
        assert_eq!(rows("..hub,s3"), Ok(vec![0, 1, 4]));
    }

    #[test]
    fn a_name_is_a_name_before_it_is_a_range() {
        assert_eq!(rows("a..b"), Ok(vec![5]));
        assert_eq!(rows("s3..a..b"), Ok(vec![4, 5]));
    }

    #[test]
    fn what_is_not_there_is_told_with_the_nearest_name() {
        assert_eq!(rows("hubb").unwrap_err(), "no node is called `hubb`; write `hub`");
        assert_eq!(rows("hub..s33").unwrap_err(), "no node is called `s33`; write `s3`");
        for text in ["", "hub,", ",", "..", "hub,,s1", "no such node"] {
            assert!(rows(text).is_err(), "{text:?}");
        }
    }
}
