//! One table of a report as CSV: RFC 4180 quoting, LF, an empty field for what does not
//! exist.

use std::io::{self, Write};
use std::ops::Range;

use super::number::{push_f64, push_i64, push_time};
use super::stream::{threads_for, write_rows};
use super::{Cell, Report, Series, Table};

/// Writes the table `index` of a report of one moment; [`Report::table_named`] finds the
/// index of a name.
///
/// Each row starts with `at_s`. A table that has a column of that key itself (moments a
/// rule is judged at) gives its own, moved to the front.
///
/// # Errors
///
/// Those of the writer.
///
/// # Panics
///
/// If there is no table `index`.
pub fn write_csv(report: &Report<'_>, index: usize, out: &mut dyn Write) -> io::Result<()> {
    let table = &report.tables[index];
    let fields = Field::of_rows(report, table, 1);
    write_header(&fields, out)?;
    write_table(table, &fields, out)
}

/// Writes the table `index` of a report over time: the moment, the acceleration of the
/// reference and the rapidity lead each row.
///
/// # Errors
///
/// Those of the writer.
///
/// # Panics
///
/// If there is no table `index`.
pub fn write_csv_series(series: &Series<'_>, index: usize, out: &mut dyn Write) -> io::Result<()> {
    for moment in 0..series.moments {
        let report = (series.report)(moment);
        let table = &report.tables[index];
        let fields = Field::of_rows(&report, table, usize::MAX);
        if moment == 0 {
            write_header(&fields, out)?;
        }
        write_table(table, &fields, out)?;
    }
    Ok(())
}

/// One field of a row.
struct Field {
    key: &'static str,
    source: Source,
}

enum Source {
    /// The same in every row: a value of the report's moment, as it is written.
    Moment(Vec<u8>),
    /// A column of the table.
    Column(usize),
}

impl Field {
    /// The fields of a row: the first `leading` values of the moment, then the columns. A
    /// column with the key of such a value takes its place, so that no key stands twice.
    fn of_rows(report: &Report<'_>, table: &Table<'_>, leading: usize) -> Vec<Field> {
        let mut fields = Vec::new();
        let mut placed = vec![false; table.columns.len()];
        for (key, value) in report.moment_cells().into_iter().take(leading) {
            let own = table.columns.iter().position(|column| column.key == key);
            let source = if let Some(place) = own {
                placed[place] = true;
                Source::Column(place)
            } else {
                let mut written = Vec::new();
                push_cell(&mut written, &value);
                Source::Moment(written)
            };
            fields.push(Field { key, source });
        }
        for (place, column) in table.columns.iter().enumerate() {
            if !placed[place] {
                fields.push(Field { key: column.key, source: Source::Column(place) });
            }
        }
        fields
    }
}

fn write_header(fields: &[Field], out: &mut dyn Write) -> io::Result<()> {
    let mut line = Vec::new();
    for (place, field) in fields.iter().enumerate() {
        if place > 0 {
            line.push(b',');
        }
        push_text(&mut line, field.key);
    }
    line.push(b'\n');
    out.write_all(&line)
}

fn write_table(table: &Table<'_>, fields: &[Field], out: &mut dyn Write) -> io::Result<()> {
    write_rows(table.rows, threads_for(table.rows), out, |range, buffer| {
        push_rows(table, fields, range, buffer);
    })
}

fn push_rows(table: &Table<'_>, fields: &[Field], range: Range<usize>, out: &mut Vec<u8>) {
    let mut cells = Vec::with_capacity(fields.len());
    for row in range {
        cells.clear();
        (table.fill)(row, &mut cells);
        debug_assert_eq!(cells.len(), table.columns.len(), "row {row} of `{}`", table.name);
        for (place, field) in fields.iter().enumerate() {
            if place > 0 {
                out.push(b',');
            }
            match &field.source {
                Source::Moment(written) => out.extend_from_slice(written),
                Source::Column(column) => push_cell(out, &cells[*column]),
            }
        }
        out.push(b'\n');
    }
}

fn push_cell(out: &mut Vec<u8>, cell: &Cell<'_>) {
    match cell {
        Cell::Text(text) => push_text(out, text),
        // A number without a form leaves its field empty, as an absent one does.
        Cell::Number(value) | Cell::Measured(value, _) => _ = push_f64(out, *value),
        Cell::Integer(value) => push_i64(out, *value),
        Cell::Time(time) | Cell::Computed(time) => push_time(out, *time),
        Cell::Flag(flag) => out.extend_from_slice(flag.to_string().as_bytes()),
        Cell::Absent(_) => {}
    }
}

/// Appends a text, within quotes where RFC 4180 asks for them.
fn push_text(out: &mut Vec<u8>, text: &str) {
    let bytes = text.as_bytes();
    if !bytes.iter().any(|byte| matches!(byte, b'"' | b',' | b'\n' | b'\r')) {
        out.extend_from_slice(bytes);
        return;
    }
    out.push(b'"');
    for &byte in bytes {
        if byte == b'"' {
            out.push(b'"');
        }
        out.push(byte);
    }
    out.push(b'"');
}
