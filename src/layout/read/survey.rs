//! Positions from a table.

mod all_cores;

use compact_str::CompactString;

use super::csv::{Row, Rows};
use super::index::ByName;
use super::nodes::{Clocks, Origin, Place, Places, node_as_written};
use super::{FARTHEST_POSITION_M, MOST_NODES};
use crate::cores;
use crate::layout::Node;
use crate::layout::fault::{Collector, Spot};
use crate::layout::names;
use crate::layout::nearest::nearest;
use crate::layout::quantity::{self, Dimension, short};
use crate::layout::written::{Field, NodeKey, NodeValues, WrittenNode, set_from_text, set_number};

/// A column of a survey.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum Column {
    Name,
    /// In metres, a bare number.
    PositionM,
    /// In metres, a bare number.
    UPositionM,
    /// As in a layout, with a unit.
    Position,
    Key(NodeKey),
}

/// A survey to be read.
#[derive(Clone, Copy)]
pub(super) struct Table<'t> {
    pub(super) file: u32,
    pub(super) text: &'t str,
    pub(super) reading: Reading,
}

/// How a survey is read.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Reading {
    /// On all cores, without keeping where each row stands. Whatever is not as it should be
    /// only ends the reading, and is then found again row by row.
    OnAllCores,
    /// One row after the other, with the place of each.
    RowByRow,
}

impl Reading {
    /// What suits a text: a short one is read before the cores are awake.
    pub(super) fn of(text: &str) -> Reading {
        const LONG: usize = 1 << 20;
        let is_shared = text.len() >= LONG && cores::pool().is_some();
        if is_shared { Reading::OnAllCores } else { Reading::RowByRow }
    }
}

/// Reads a survey: it adds to what the nodes already listed state, puts the new ones behind
/// the others, and returns their places. `None` when it has to be read row by row.
///
/// A row states what it has a value for; an empty field states nothing. What a node
/// states in the layout, the survey does not state again.
pub(super) fn read(
    table: Table<'_>,
    listed: &mut Vec<WrittenNode>,
    clocks: &Clocks<'_>,
    nodes: &mut Vec<Node>,
    faults: &mut Collector,
) -> Option<Places> {
    let mut rows = Rows::new(table.file, table.text);
    let Some(columns) = rows.next(faults).map(|header| read_header(header, faults)) else {
        faults.fault(
            Spot::new(table.file, 0..0),
            "a survey begins with a header line",
            "begin with `name,position_m,u_position_m`",
        );
        return Some(Places::default());
    };
    let Some(columns) = columns else {
        return Some(Places::default());
    };
    let names = listed.iter().map(|node| node.name.value().cloned().unwrap_or_default());
    let survey = Survey { columns, by_name: ByName::of(names), clocks };
    match table.reading {
        Reading::OnAllCores => survey.read_on_all_cores(&rows, listed, nodes),
        Reading::RowByRow => Some(survey.read_by_row(rows, listed, nodes, faults)),
    }
}

/// What the rows of a survey are read by.
struct Survey<'s> {
    columns: Vec<Column>,
    by_name: ByName,
    clocks: &'s Clocks<'s>,
}

impl Survey<'_> {
    fn read_by_row(
        &self,
        mut rows: Rows<'_>,
        listed: &mut [WrittenNode],
        nodes: &mut Vec<Node>,
        faults: &mut Collector,
    ) -> Places {
        let mut surveyed = vec![false; listed.len()];
        let mut places = Places::default();
        let before = nodes.len();
        while let Some(row) = rows.next(faults) {
            if !row.is_as_wide_as(self.columns.len(), faults) {
                continue;
            }
            let Some(node) = read_row(row, &self.columns, faults) else {
                continue;
            };
            match self.listed(&node) {
                None if nodes.len() - before == MOST_NODES => {
                    faults.fault(
                        row.whole(),
                        format!("a line has at most {MOST_NODES} nodes"),
                        "divide the line",
                    );
                    break;
                }
                None => {
                    let place = Place::of(&node, Origin::Survey);
                    let clock = self.clocks.index(&node.values, faults);
                    if let Some(node) = node_as_written(&node, clock) {
                        places.push(place, 1);
                        nodes.push(node);
                    }
                }
                Some(index) if surveyed[index] => faults.fault(
                    row.whole(),
                    format!("a survey has one row a node; `{}` has two", row_name(&node)),
                    "take one of the two away",
                ),
                Some(index) => {
                    surveyed[index] = true;
                    join(&mut listed[index], node, row, &self.columns, faults);
                }
            }
        }
        places
    }

    /// The number of the listed node a row is about.
    fn listed(&self, row: &WrittenNode) -> Option<usize> {
        self.by_name.find(row.name.value()?)
    }
}

fn row_name(node: &WrittenNode) -> &str {
    node.name.value().map_or("", CompactString::as_str)
}

fn read_header(header: Row<'_, '_>, faults: &mut Collector) -> Option<Vec<Column>> {
    if header.is_too_wide() {
        let rule = format!("a survey has one column a quantity; this header has {}", header.len());
        let remedy = "the columns are name, position_m, u_position_m and the keys of [[node]]";
        faults.fault(header.whole(), rule, remedy);
        return None;
    }
    let mut columns = Vec::with_capacity(header.len());
    let before = faults.total();
    for index in 0..header.len() {
        let word = header.field(index);
        let key = NodeKey::ALL.iter().find(|(name, _)| *name == word).map(|(_, key)| *key);
        let column = match &*word {
            "name" => Some(Column::Name),
            "position_m" => Some(Column::PositionM),
            "u_position_m" => Some(Column::UPositionM),
            "position" => Some(Column::Position),
            _ => key.map(Column::Key),
        };
        let Some(column) = column else {
            let known = ["name", "position_m", "u_position_m", "position"];
            let words = known.into_iter().chain(NodeKey::ALL.iter().map(|(name, _)| *name));
            let remedy = match nearest(&word, words) {
                _ if word.contains([';', '\t']) => "separate the fields by commas".to_owned(),
                Some(meant) => format!("write `{meant}`"),
                None => "the columns are name, position_m, u_position_m and the keys of [[node]]"
                    .to_owned(),
            };
            let rule = format!("`{}` is not a column of a survey", short(&word));
            faults.fault(header.spot(index), rule, remedy);
            continue;
        };
        if columns.iter().any(|other| same_quantity(*other, column)) {
            let rule = format!("a survey states each quantity once; `{word}` is stated before");
            faults.fault(header.spot(index), rule, "take one of the two columns away");
        }
        columns.push(column);
    }
    if !columns.contains(&Column::Name) && faults.total() == before {
        faults.fault(header.whole(), "a survey has a column `name`", "add it to the header");
    }
    (faults.total() == before).then_some(columns)
}

/// Whether two columns state one quantity.
fn same_quantity(a: Column, b: Column) -> bool {
    let plain = |column| match column {
        Column::PositionM => Column::Position,
        Column::UPositionM => Column::Key(NodeKey::UPosition),
        other => other,
    };
    plain(a) == plain(b)
}

fn read_row(row: Row<'_, '_>, columns: &[Column], faults: &mut Collector) -> Option<WrittenNode> {
    let mut node = WrittenNode { spot: row.whole(), ..WrittenNode::default() };
    read_row_into(&mut node, row, columns, faults).then_some(node)
}

/// Reads a row into what states nothing yet; whether it has a name.
fn read_row_into(
    node: &mut WrittenNode,
    row: Row<'_, '_>,
    columns: &[Column],
    faults: &mut Collector,
) -> bool {
    for (index, column) in columns.iter().enumerate() {
        let text = row.field(index);
        let spot = row.spot(index);
        match column {
            Column::Name => {
                if let Err((rule, remedy)) = names::check_name(&text) {
                    faults.fault(spot, rule, remedy);
                    return false;
                }
                node.name = Field::Stated(text.into(), spot);
            }
            _ if text.is_empty() => {}
            Column::PositionM => node.position_m = metres(&text, spot, "position_m", faults),
            Column::UPositionM => {
                if let Field::Stated(value, _) = metres(&text, spot, "u_position_m", faults)
                    && let Err((rule, remedy)) =
                        set_number(&mut node.values, NodeKey::UPosition, value)
                {
                    faults.fault(spot, rule, remedy);
                }
            }
            Column::Position => match quantity::parse(&text, Dimension::Length) {
                Ok(value) => node.position_m = near_enough(value, spot, faults),
                Err(fault) => {
                    node.position_m = Field::Faulty;
                    faults.fault(spot, fault.rule, fault.remedy);
                }
            },
            Column::Key(key) => set(&mut node.values, *key, &text, spot, faults),
        }
    }
    let lonely = [
        (NodeKey::UPosition, [NodeKey::DofPosition, NodeKey::ShapePosition]),
        (NodeKey::UBias, [NodeKey::DofBias, NodeKey::ShapeBias]),
    ];
    for (key, beside) in lonely {
        if !node.values.states(key) && beside.iter().any(|key| node.values.states(*key)) {
            faults.fault(
                row.whole(),
                "degrees of freedom and a shape stand beside an uncertainty",
                "give the uncertainty, or leave both out",
            );
        }
    }
    true
}

fn set(values: &mut NodeValues, key: NodeKey, text: &str, spot: Spot, faults: &mut Collector) {
    if let Err(fault) = set_from_text(values, key, text, spot) {
        faults.fault(spot, fault.rule, fault.remedy);
    }
}

/// A bare number of metres.
fn metres(text: &str, spot: Spot, column: &str, faults: &mut Collector) -> Field<f64> {
    match quantity::plain(text) {
        Some(value) => near_enough(value, spot, faults),
        None => {
            let is_number = text.parse::<f64>().is_ok();
            let example = "write for example `-5000.25`".to_owned();
            let (rule, remedy) = match quantity::parse(text, Dimension::Length) {
                Ok(value) => (not_bare(column), format!("write `{value}`")),
                Err(fault) if is_number => (fault.rule, example),
                Err(_) => (not_bare(column), example),
            };
            faults.fault(spot, rule, remedy);
            Field::Faulty
        }
    }
}

fn not_bare(column: &str) -> String {
    format!("the column `{column}` holds bare numbers, in metres")
}

fn near_enough(value: f64, spot: Spot, faults: &mut Collector) -> Field<f64> {
    if value.abs() <= FARTHEST_POSITION_M {
        return Field::Stated(value, spot);
    }
    let rule = "a position is at most 1e19 m, about 1057 ly, either sign";
    faults.fault(spot, rule, "write a nearer position");
    Field::Faulty
}

/// Adds a row of the survey to a node the layout lists.
fn join(
    node: &mut WrittenNode,
    row: WrittenNode,
    place: Row<'_, '_>,
    columns: &[Column],
    faults: &mut Collector,
) {
    let name = row_name(&row).to_owned();
    for (index, column) in columns.iter().enumerate() {
        let (twice, word) = match column {
            Column::Name => continue,
            Column::PositionM | Column::Position => {
                (!row.position_m.is_absent() && !node.position_m.is_absent(), "position")
            }
            Column::UPositionM => (both(node, &row, NodeKey::UPosition), "u_position"),
            Column::Key(key) => {
                let word = NodeKey::ALL.iter().find(|(_, other)| other == key);
                (both(node, &row, *key), word.map_or("", |(word, _)| word))
            }
        };
        if twice {
            let rule =
                format!("each value is stated once; `{name}` has its `{word}` in the layout");
            faults.fault(place.spot(index), rule, "leave this field empty, or take the key away");
        }
    }
    if !row.position_m.is_absent() {
        node.position_m = row.position_m;
    }
    node.values.add(row.values);
}

fn both(node: &WrittenNode, row: &WrittenNode, key: NodeKey) -> bool {
    node.values.states(key) && row.values.states(key)
}
