//! `compare`: what differs between two lines at a moment, as predicted or as recorded.

use std::borrow::Cow;
use std::collections::HashMap;

use super::{column, head, predicted_reading_s};
use crate::layout::Layout;
use crate::model::dd::Dd;
use crate::run::recording::{self, Frame};
use crate::run::{Aboard, State};
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

/// One side of a comparison in which something was recorded: the numbers of a frame, or
/// what is predicted at its moment.
#[derive(Clone, Debug)]
pub struct RecordedSide<'a> {
    /// Name of the layout.
    pub layout: &'a str,
    /// Its revision.
    pub revision: Option<&'a str>,
    /// SHA-256 of its bytes.
    pub layout_sha256: &'a str,
    /// Names of the nodes, in the order of the columns.
    pub nodes: &'a [&'a str],
    /// The numbers.
    pub frame: Frame,
}

/// What a recording holds of a state: every number as a double.
#[must_use]
pub fn predicted_frame(state: &State<'_>) -> Frame {
    let finite = |value: Dd| Some(value.to_f64()).filter(|value| value.is_finite());
    let column = |pick: fn(&Aboard) -> Dd| {
        state.nodes().map(|node| node.aboard().and_then(|aboard| finite(pick(&aboard)))).collect()
    };
    Frame {
        index: 0,
        at: state.at(),
        reference_acceleration_m_s2: state.reference_acceleration_m_s2(),
        rapidity: state.rapidity(),
        rate_minus_one: column(|aboard| aboard.rate_minus_one),
        clock_offset_s: column(|aboard| aboard.clock_offset_s),
        reading_s: None,
    }
}

/// Everything that differs between two frames, each number as it is recorded: in the order
/// of [`differences`]. Readings are compared where both sides have them.
#[must_use]
pub fn recorded_differences(a: &RecordedSide<'_>, b: &RecordedSide<'_>) -> Vec<Difference> {
    let mut found = Vec::new();
    let (first, second) = (&a.frame, &b.frame);
    for (quantity, a, b) in [
        (
            "reference_acceleration_m_s2",
            Some(first.reference_acceleration_m_s2),
            Some(second.reference_acceleration_m_s2),
        ),
        ("rapidity", first.rapidity, second.rapidity),
    ] {
        push(&mut found, None, quantity, a.map(Dd::new), b.map(Dd::new));
    }
    let columns = [
        ("rate_minus_one", Some(&first.rate_minus_one), Some(&second.rate_minus_one)),
        ("clock_offset_s", Some(&first.clock_offset_s), Some(&second.clock_offset_s)),
        ("reading_s", first.reading_s.as_ref(), second.reading_s.as_ref()),
    ];
    let mut push_row = |name: &str, ours: Option<usize>, theirs: Option<usize>| {
        for (quantity, first, second) in columns {
            let (Some(first), Some(second)) = (first, second) else { continue };
            let pick = |column: &recording::Column, row: Option<usize>| {
                row.and_then(|row| column.get(row)).map(Dd::new)
            };
            let (a, b) = (pick(first, ours), pick(second, theirs));
            push(&mut found, Some(name), quantity, a, b);
        }
    };
    if a.nodes == b.nodes {
        for (row, name) in a.nodes.iter().enumerate() {
            push_row(name, Some(row), Some(row));
        }
        return found;
    }
    let rows = |nodes: &[&'_ str]| -> HashMap<String, usize> {
        nodes.iter().enumerate().map(|(row, name)| ((*name).to_owned(), row)).collect()
    };
    let (ours, theirs) = (rows(a.nodes), rows(b.nodes));
    for (row, name) in a.nodes.iter().enumerate() {
        push_row(name, Some(row), theirs.get(*name).copied());
    }
    for (row, name) in b.nodes.iter().enumerate() {
        if !ours.contains_key(*name) {
            push_row(name, None, Some(row));
        }
    }
    found
}

/// The compare report of two lines that are predicted: the head is that of the first, the
/// second stands in scalars.
#[must_use]
pub fn compare_report<'a>(
    a: &State<'a>,
    b: &State<'a>,
    differences: Vec<Difference>,
) -> Report<'a> {
    let mut report = head(a, "compare");
    let (ours, other): (&'a Layout, &'a Layout) = (a.run().layout(), b.run().layout());
    let is_alike = differences.is_empty();
    let second = (other.name.as_str(), other.revision.as_deref(), other.source.sha256.as_str());
    fill_in(&mut report, second, "as predicted at this moment".to_owned(), differences);
    if is_alike {
        report.remarks.push("At this moment no number differs by a single bit.".to_owned());
    }
    let phases = |state: &State<'a>| state.run().plan().map(crate::model::plan::Plan::phases);
    if phases(a) != phases(b) {
        report
            .remarks
            .push("Their thrust plans differ: what differs changes over time.".to_owned());
    } else if ours.source.sha256 != other.source.sha256 {
        report.remarks.push("The layouts are not the same text.".to_owned());
    }
    report
}

/// The compare report of a moment at which something was recorded; `compared` says what is
/// compared with what.
#[must_use]
pub fn compare_recorded_report<'a>(
    a: &RecordedSide<'a>,
    b: &RecordedSide<'a>,
    compared: String,
) -> Report<'a> {
    let differences = recorded_differences(a, b);
    let mut report = Report {
        command: "compare",
        schema_version: 1,
        layout: a.layout,
        revision: a.revision,
        layout_sha256: a.layout_sha256,
        at: Ok(a.frame.at),
        reference_acceleration_m_s2: Ok(a.frame.reference_acceleration_m_s2),
        rapidity: a.frame.rapidity.ok_or(super::NO_RAPIDITY),
        scalars: Vec::new(),
        tables: Vec::new(),
        remarks: Vec::new(),
    };
    fill_in(&mut report, (b.layout, b.revision, b.layout_sha256), compared, differences);
    if a.layout_sha256 != b.layout_sha256 {
        report.remarks.push("The layouts are not the same text.".to_owned());
    }
    report
}

/// The scalars and the table of a comparison with another layout: its name, its revision
/// and its hash.
fn fill_in<'a>(
    report: &mut Report<'a>,
    (name, revision, sha256): (&'a str, Option<&'a str>, &'a str),
    compared: String,
    differences: Vec<Difference>,
) {
    let word = |key, heading, text: Cow<'a, str>| Scalar {
        key,
        heading,
        measure: Measure::Word,
        value: Cell::Text(text),
    };
    report.scalars = vec![
        word("other_layout", "compared with", name.into()),
        match revision {
            Some(revision) => word("other_revision", "its revision", revision.into()),
            None => Scalar {
                key: "other_revision",
                heading: "its revision",
                measure: Measure::Word,
                value: Cell::Absent("the layout states no revision".into()),
            },
        },
        word("other_layout_sha256", "its hash", sha256.into()),
        word("compared", "compared", compared.into()),
        Scalar {
            key: "count",
            heading: "differences",
            measure: Measure::Count,
            value: Cell::Integer(i64::try_from(differences.len()).unwrap_or(i64::MAX)),
        },
    ];
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
                _ => Cell::Absent("one side has no such number".into()),
            });
        }),
    });
}
