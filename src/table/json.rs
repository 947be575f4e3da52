//! Reports as JSON: one object, keys in a fixed order, a row a line.

use std::io::{self, Write};
use std::ops::Range;

use super::number::{push_f64, push_i64, push_time};
use super::stream::{threads_for, write_rows};
use super::{
    Cell, Column, Head, MODEL, NO_REVISION, NOT_FINITE, PROGRAM, Report, Scalar, Series, Table,
};

/// Writes a report of one moment: the head, the moment, the scalars, then every table as
/// an array of rows.
///
/// Every key of a row is present; what does not exist is `null` and its reason follows
/// under `KEY_why`. Rows are made and written as they come, many of them on all cores.
///
/// # Errors
///
/// Those of the writer.
pub fn write_json(report: &Report<'_>, out: &mut dyn Write) -> io::Result<()> {
    let mut buffer = Vec::new();
    push_head(&mut buffer, &report.head());
    buffer.push(b',');
    push_moment(&mut buffer, report);
    for scalar in &report.scalars {
        buffer.push(b',');
        push_scalar(&mut buffer, scalar);
    }
    for table in &report.tables {
        open_rows(&mut buffer, table.name);
        out.write_all(&buffer)?;
        buffer.clear();
        write_table(table, b"", true, threads_for(table.rows), out)?;
        buffer.extend_from_slice(b"\n]");
    }
    buffer.extend_from_slice(b"}\n");
    out.write_all(&buffer)
}

/// Writes a report over time: the head, then every table as one array in which the moment,
/// the acceleration of the reference and the rapidity lead each row.
///
/// Scalars belong to a moment, so they become an array `scalars` with a row a moment. The
/// moments are gone through once for each table, so that nothing has to be held.
///
/// # Errors
///
/// Those of the writer.
pub fn write_json_series(series: &Series<'_>, out: &mut dyn Write) -> io::Result<()> {
    let mut buffer = Vec::new();
    push_head(&mut buffer, &series.head);
    let tables = if series.moments == 0 {
        0
    } else {
        let first = (series.report)(0);
        if !first.scalars.is_empty() {
            open_rows(&mut buffer, "scalars");
            for moment in 0..series.moments {
                let report = (series.report)(moment);
                buffer.extend_from_slice(if moment == 0 { b"\n{" } else { b",\n{" });
                push_moment(&mut buffer, &report);
                for scalar in &report.scalars {
                    buffer.push(b',');
                    push_scalar(&mut buffer, scalar);
                }
                buffer.push(b'}');
                out.write_all(&buffer)?;
                buffer.clear();
            }
            buffer.extend_from_slice(b"\n]");
        }
        first.tables.len()
    };
    for index in 0..tables {
        let mut nothing_yet = true;
        for moment in 0..series.moments {
            let report = (series.report)(moment);
            let table = &report.tables[index];
            if moment == 0 {
                open_rows(&mut buffer, table.name);
                out.write_all(&buffer)?;
                buffer.clear();
            }
            let lead = lead_of_rows(&report, table);
            write_table(table, &lead, nothing_yet, threads_for(table.rows), out)?;
            nothing_yet &= table.rows == 0;
        }
        buffer.extend_from_slice(b"\n]");
    }
    buffer.extend_from_slice(b"}\n");
    out.write_all(&buffer)
}

/// The moment's values that lead each row of a report over time. A table with a column of
/// the same key keeps its own.
fn lead_of_rows(report: &Report<'_>, table: &Table<'_>) -> Vec<u8> {
    let mut lead = Vec::new();
    for (key, value) in report.moment_cells() {
        if table.columns.iter().all(|column| column.key != key) {
            push_pair(&mut lead, &ColumnKeys::of(key), &value);
            lead.push(b',');
        }
    }
    lead
}

fn open_rows(out: &mut Vec<u8>, name: &str) {
    out.extend_from_slice(b",\n");
    push_string(out, name);
    out.extend_from_slice(b":[");
}

fn push_head(out: &mut Vec<u8>, head: &Head<'_>) {
    out.extend_from_slice(b"{\"schema\":");
    push_string(out, &format!("clockspar.{}/{}", head.command, head.schema_version));
    out.extend_from_slice(b",\"program\":");
    push_string(out, PROGRAM);
    out.extend_from_slice(b",\"model\":");
    push_i64(out, i64::from(MODEL));
    out.extend_from_slice(b",\"layout\":");
    push_string(out, head.layout);
    out.push(b',');
    let revision = match head.revision {
        Some(text) => Cell::Text(text.into()),
        None => Cell::Absent(NO_REVISION.into()),
    };
    push_pair(out, &ColumnKeys::of("revision"), &revision);
    out.extend_from_slice(b",\"layout_sha256\":");
    push_string(out, head.layout_sha256);
}

fn push_moment(out: &mut Vec<u8>, report: &Report<'_>) {
    for (place, (key, value)) in report.moment_cells().iter().enumerate() {
        if place > 0 {
            out.push(b',');
        }
        push_pair(out, &ColumnKeys::of(key), value);
    }
}

fn push_scalar(out: &mut Vec<u8>, scalar: &Scalar<'_>) {
    push_pair(out, &ColumnKeys::of(scalar.key), &scalar.value);
}

/// Writes the rows of a table, each after its separator; `lead` stands first in each.
fn write_table(
    table: &Table<'_>,
    lead: &[u8],
    nothing_yet: bool,
    threads: usize,
    out: &mut dyn Write,
) -> io::Result<()> {
    let keys: Vec<ColumnKeys> = table.columns.iter().map(Column::keys).collect();
    write_rows(table.rows, threads, out, |range, buffer| {
        push_rows(table, &keys, lead, nothing_yet, range, buffer);
    })
}

fn push_rows(
    table: &Table<'_>,
    keys: &[ColumnKeys],
    lead: &[u8],
    nothing_yet: bool,
    range: Range<usize>,
    out: &mut Vec<u8>,
) {
    let mut cells = Vec::with_capacity(keys.len());
    for row in range {
        cells.clear();
        (table.fill)(row, &mut cells);
        debug_assert_eq!(cells.len(), keys.len(), "row {row} of `{}`", table.name);
        let first = nothing_yet && row == 0;
        out.extend_from_slice(if first { b"\n{" } else { b",\n{" });
        out.extend_from_slice(lead);
        for (place, (key, cell)) in keys.iter().zip(&cells).enumerate() {
            if place > 0 {
                out.push(b',');
            }
            push_pair(out, key, cell);
        }
        out.push(b'}');
    }
}

/// A key with its quotes and colon, and the key of the reason beside it.
struct ColumnKeys {
    value: Vec<u8>,
    why: Vec<u8>,
}

impl ColumnKeys {
    fn of(key: &str) -> ColumnKeys {
        let mut value = Vec::new();
        push_string(&mut value, key);
        value.push(b':');
        let mut why = vec![b','];
        push_string(&mut why, &format!("{key}_why"));
        why.push(b':');
        ColumnKeys { value, why }
    }
}

impl Column {
    fn keys(&self) -> ColumnKeys {
        ColumnKeys::of(self.key)
    }
}

fn push_pair(out: &mut Vec<u8>, keys: &ColumnKeys, cell: &Cell<'_>) {
    out.extend_from_slice(&keys.value);
    let why = match cell {
        Cell::Text(text) => return push_string(out, text),
        Cell::Integer(value) => return push_i64(out, *value),
        Cell::Time(time) | Cell::Computed(time) => return push_time(out, *time),
        Cell::Flag(flag) => return out.extend_from_slice(flag.to_string().as_bytes()),
        Cell::Number(value) | Cell::Measured(value, _) => {
            if push_f64(out, *value) {
                return;
            }
            NOT_FINITE
        }
        Cell::Absent(why) => why,
    };
    out.extend_from_slice(b"null");
    out.extend_from_slice(&keys.why);
    push_string(out, why);
}

/// Appends a string with its quotes. Characters past ASCII stand as they are.
fn push_string(out: &mut Vec<u8>, text: &str) {
    out.push(b'"');
    let bytes = text.as_bytes();
    let mut copied = 0;
    for (place, &byte) in bytes.iter().enumerate() {
        if byte >= b' ' && byte != b'"' && byte != b'\\' {
            continue;
        }
        out.extend_from_slice(&bytes[copied..place]);
        copied = place + 1;
        match byte {
            b'"' => out.extend_from_slice(b"\\\""),
            b'\\' => out.extend_from_slice(b"\\\\"),
            b'\n' => out.extend_from_slice(b"\\n"),
            b'\t' => out.extend_from_slice(b"\\t"),
            _ => out.extend_from_slice(format!("\\u{byte:04x}").as_bytes()),
        }
    }
    out.extend_from_slice(&bytes[copied..]);
    out.push(b'"');
}
