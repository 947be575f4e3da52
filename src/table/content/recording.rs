//! `replay` and `verify`: what stands in a recording, and whether it still holds.

use std::borrow::Cow;

use super::{RELEASED, column};
use crate::layout::Layout;
use crate::model::array_time::ArrayTime;
use crate::run::recording::{Basis, Finding, Frame, Opening, Verdict};
use crate::run::{Event, EventKind};
use crate::table::{Cell, Column, Measure, Report, Scalar, Table};

const FRAME: [Column; 4] = [
    column("node", "node", Measure::Word),
    column("rate_minus_one", "rate - 1", Measure::Ratio),
    column("clock_offset_s", "clock offset", Measure::Time),
    column("reading_s", "reading", Measure::Time),
];

const EVENTS: [Column; 3] = [
    column("event_at_s", "at", Measure::Time),
    column("event", "event", Measure::Word),
    column("detail", "detail", Measure::Word),
];

/// One frame of a recording, with the events since the frame before it.
///
/// `layout` is the one in the recording, when it can still be read.
#[must_use]
pub fn replay_report<'a>(
    opening: &'a Opening,
    layout: Option<&'a Layout>,
    frame: Frame,
    events: Vec<Event>,
) -> Report<'a> {
    let columns = if frame.reading_s.is_some() { FRAME.len() } else { FRAME.len() - 1 };
    let mut report = head("replay", opening, layout);
    report.at = Ok(frame.at);
    report.reference_acceleration_m_s2 = Ok(frame.reference_acceleration_m_s2);
    report.rapidity = frame.rapidity.ok_or(super::NO_RAPIDITY);
    report.tables.push(Table {
        name: "nodes",
        columns: FRAME[..columns].to_vec(),
        rows: opening.nodes.len(),
        marked: layout.map(|layout| layout.reference),
        fill: Box::new(move |row, cells| {
            cells.push(Cell::Text(Cow::Borrowed(&opening.nodes[row])));
            let readings = frame.reading_s.as_ref();
            for column in [Some(&frame.rate_minus_one), Some(&frame.clock_offset_s), readings] {
                let Some(column) = column else { continue };
                cells.push(match column.get(row) {
                    Some(value) => Cell::Number(value),
                    None => Cell::Absent(RELEASED.into()),
                });
            }
        }),
    });
    report.tables.push(events_table(events));
    report
}

/// The events of a run as a table.
#[must_use]
pub fn events_table<'a>(events: Vec<Event>) -> Table<'a> {
    Table {
        name: "events",
        columns: EVENTS.to_vec(),
        rows: events.len(),
        marked: None,
        fill: Box::new(move |row, cells| {
            let event = &events[row];
            cells.push(Cell::Time(event.at));
            cells.push(Cell::Text(Cow::Borrowed(event.kind.word())));
            cells.push(Cell::Text(Cow::Owned(detail(&event.kind))));
        }),
    }
}

/// What an event changes, in words.
#[must_use]
pub fn detail(kind: &EventKind) -> String {
    match kind {
        EventKind::Hold { acceleration_m_s2 } => format!("{acceleration_m_s2:?} m/s^2"),
        EventKind::Ramp { to_m_s2, length } => format!("to {to_m_s2:?} m/s^2 for {length} s"),
        EventKind::Plan => "back to the plan as filed".to_owned(),
        EventKind::Move { node, position_m } => format!("{node} to {position_m:?} m"),
        EventKind::Release { node } => node.clone(),
        EventKind::Fail { between } | EventKind::Mend { between } => between.join(" - "),
        EventKind::Note { text } => text.clone(),
    }
}

const VERDICT: [Column; 6] = [
    column("frames", "frames", Measure::Count),
    column("events", "events", Measure::Count),
    column("whole", "whole", Measure::Word),
    column("holds", "holds", Measure::Word),
    column("first_bad_line", "first bad line", Measure::Count),
    column("worst_ulps", "worst ulps", Measure::Count),
];

const FINDINGS: [Column; 2] =
    [column("line", "line", Measure::Count), column("finding", "finding", Measure::Word)];

/// The verdict on a recording.
#[must_use]
pub fn verify_report<'a>(
    opening: &'a Opening,
    layout: Option<&'a Layout>,
    verdict: &Verdict,
) -> Report<'a> {
    let mut report = head("verify", opening, layout);
    let cells = verdict_cells(verdict);
    report.scalars = VERDICT
        .iter()
        .zip(&cells)
        .map(|(column, value)| Scalar {
            key: column.key,
            heading: column.heading,
            measure: column.measure,
            value: value.clone(),
        })
        .collect();
    report.scalars.push(Scalar {
        key: "compared",
        heading: "compared",
        measure: Measure::Word,
        value: Cell::Text(match verdict.basis {
            Basis::Bits => "bit by bit: recorded under this model".into(),
            Basis::Tolerance { model } => {
                format!("within the allowed errors: recorded under model {model}").into()
            }
        }),
    });
    report.tables.push(Table {
        name: "verdict",
        columns: VERDICT.to_vec(),
        rows: 1,
        marked: None,
        fill: Box::new(move |_, row| row.extend(cells.iter().cloned())),
    });
    report.tables.push(findings_table(verdict.findings.clone()));
    if verdict.more_findings > 0 {
        report.remarks.push(format!("{} more findings are not listed.", verdict.more_findings));
    }
    report
}

fn verdict_cells(verdict: &Verdict) -> [Cell<'static>; 6] {
    let count = |number: u64| Cell::Integer(i64::try_from(number).unwrap_or(i64::MAX));
    [
        count(verdict.frames),
        count(verdict.events),
        Cell::Flag(verdict.whole),
        Cell::Flag(verdict.holds),
        match verdict.first_bad_line {
            Some(line) => count(line),
            None => Cell::Absent("no line is bad".into()),
        },
        count(verdict.worst_ulps),
    ]
}

fn findings_table<'a>(findings: Vec<Finding>) -> Table<'a> {
    Table {
        name: "findings",
        columns: FINDINGS.to_vec(),
        rows: findings.len(),
        marked: None,
        fill: Box::new(move |row, cells| {
            let Finding { line, what } = &findings[row];
            cells.push(match line {
                Some(line) => Cell::Integer(i64::try_from(*line).unwrap_or(i64::MAX)),
                None => Cell::Absent("it concerns no single line".into()),
            });
            cells.push(Cell::Text(Cow::Owned(what.clone())));
        }),
    }
}

fn head<'a>(command: &'static str, opening: &'a Opening, layout: Option<&'a Layout>) -> Report<'a> {
    const WHOLE: &str = "it is about the whole recording";
    Report {
        command,
        schema_version: 1,
        layout: &opening.layout,
        revision: layout.and_then(|layout| layout.revision.as_deref()),
        layout_sha256: &opening.layout_sha256,
        at: Err::<ArrayTime, _>(WHOLE),
        reference_acceleration_m_s2: Err(WHOLE),
        rapidity: Err(WHOLE),
        scalars: Vec::new(),
        tables: Vec::new(),
        remarks: Vec::new(),
    }
}
