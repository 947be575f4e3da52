//! `compare`: what differs between two lines at a moment.

use std::borrow::Cow;
use std::collections::HashMap;

use super::{column, head, predicted_reading_s};
use crate::layout::Layout;
use crate::model::dd::Dd;
use crate::run::State;
use crate::table::{Cell, Column, Measure, Report, Scalar, Table};

/// One number that differs, or that only one side has.
#[derive(Clone, Debug, PartialEq)]
pub struct Difference {
    /// Name of the node; `None` for the line as a whole.
    pub node: Option<String>,
    /// Key of the quantity.
    pub quantity: &'static str,
    /// Value in the first.
    pub a: Option<Dd>,
    /// Value in the second.
    pub b: Option<Dd>,
}

const COLUMNS: [Column; 5] = [
    column("node", "node", Measure::Word),
    column("quantity", "quantity", Measure::Word),
    column("a", "a", Measure::Ratio),
    column("b", "b", Measure::Ratio),
    column("difference", "b - a", Measure::Ratio),
];

/// Everything that differs between two lines, each at its own moment: first the line as
/// a whole, then node by node in the order of the first, then what only the second has.
/// Differences are formed before anything is rounded.
#[must_use]
pub fn differences(a: &State<'_>, b: &State<'_>) -> Vec<Difference> {
    let mut found = Vec::new();
    let (first, second) = (&a.instant().moment, &b.instant().moment);
    for (quantity, a, b) in [
        ("reference_acceleration_m_s2", first.acceleration_m_s2, second.acceleration_m_s2),
        ("rapidity", first.rapidity, second.rapidity),
    ] {
        push(&mut found, None, quantity, Some(a), Some(b));
    }
    let rows: HashMap<&str, usize> = b
        .run()
        .layout()
        .nodes
        .iter()
        .enumerate()
        .map(|(row, node)| (node.name.as_str(), row))
        .collect();
    for (row, node) in a.run().layout().nodes.iter().enumerate() {
        let theirs = rows.get(node.name.as_str()).and_then(|&row| values(b, row));
        push_node(&mut found, &node.name, values(a, row), theirs);
    }
    let known: HashMap<&str, ()> =
        a.run().layout().nodes.iter().map(|node| (node.name.as_str(), ())).collect();
    for (row, node) in b.run().layout().nodes.iter().enumerate() {
        if !known.contains_key(node.name.as_str()) {
            push_node(&mut found, &node.name, None, values(b, row));
        }
    }
    found
}

const QUANTITIES: [&str; 5] =
    ["position_m", "acceleration_m_s2", "rate_minus_one", "clock_offset_s", "predicted_reading_s"];

fn values(state: &State<'_>, row: usize) -> Option<[Dd; 5]> {
    let aboard = state.node(row).aboard()?;
    let position = aboard.position_m;
    let instant = state.instant();
    Some([
        position,
        instant.felt_acceleration_m_s2(position),
        aboard.rate_minus_one,
        aboard.clock_offset_s,
        predicted_reading_s(state.run().layout(), instant, row, &aboard),
    ])
}

fn push_node(found: &mut Vec<Difference>, name: &str, a: Option<[Dd; 5]>, b: Option<[Dd; 5]>) {
    for (index, quantity) in QUANTITIES.into_iter().enumerate() {
        let pick = |side: Option<[Dd; 5]>| side.map(|values| values[index]);
        push(found, Some(name), quantity, pick(a), pick(b));
    }
}

fn push(
    found: &mut Vec<Difference>,
    node: Option<&str>,
    quantity: &'static str,
    a: Option<Dd>,
    b: Option<Dd>,
) {
    // What cannot be seen in any table is no difference.
    if a.map(Dd::to_f64) != b.map(Dd::to_f64) {
        found.push(Difference { node: node.map(str::to_owned), quantity, a, b });
    }
}

/// The compare report: the head is that of the first line, the second stands in scalars.
#[must_use]
pub fn compare_report<'a>(
    a: &State<'a>,
    b: &State<'a>,
    differences: Vec<Difference>,
) -> Report<'a> {
    let mut report = head(a, "compare");
    let other: &'a Layout = b.run().layout();
    let word = |key, heading, text: &'a str| Scalar {
        key,
        heading,
        measure: Measure::Word,
        value: Cell::Text(Cow::Borrowed(text)),
    };
    report.scalars = vec![
        word("other_layout", "compared with", &other.name),
        match &other.revision {
            Some(revision) => word("other_revision", "its revision", revision),
            None => Scalar {
                key: "other_revision",
                heading: "its revision",
                measure: Measure::Word,
                value: Cell::Absent("the layout states no revision".into()),
            },
        },
        word("other_layout_sha256", "its hash", &other.source.sha256),
        Scalar {
            key: "count",
            heading: "differences",
            measure: Measure::Count,
            value: Cell::Integer(i64::try_from(differences.len()).unwrap_or(i64::MAX)),
        },
    ];
    if differences.is_empty() {
        report.remarks.push("No number differs by a single bit.".to_owned());
    }
    report.tables.push(Table {
        name: "differences",
        columns: COLUMNS.to_vec(),
        rows: differences.len(),
        marked: None,
        fill: Box::new(move |row, cells| {
            let Difference { node, quantity, a, b } = &differences[row];
            cells.push(match node {
                Some(node) => Cell::Text(Cow::Owned(node.clone())),
                None => Cell::Absent("the line as a whole".into()),
            });
            cells.push(Cell::Text(Cow::Borrowed(*quantity)));
            for (side, why) in [(a, "only in b"), (b, "only in a")] {
                cells.push(match side {
                    Some(value) => super::number(*value),
                    None => Cell::Absent(why.into()),
                });
            }
            cells.push(match (a, b) {
                (Some(a), Some(b)) => super::number(*b - *a),
                _ => Cell::Absent("one side has no such node".into()),
            });
        }),
    });
    report
}
