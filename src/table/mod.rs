//! Results as data before they are text: one table type, then text, CSV and JSON
//! renderers of the same table.

mod csv;
mod json;
pub mod number;
mod text;

use std::borrow::Cow;

use crate::model::array_time::ArrayTime;

pub use csv::write_csv;
pub use json::write_json;
pub use text::{TextOptions, write_text};

/// One value of a row.
#[derive(Clone, Debug, PartialEq)]
pub enum Cell<'a> {
    /// A name or a word.
    Text(Cow<'a, str>),
    /// An SI value, finite.
    Number(f64),
    /// A whole number.
    Integer(i64),
    /// An exact moment or length of array time.
    Time(ArrayTime),
    /// A value that does not exist or overflows, and why.
    Absent(Cow<'a, str>),
}

/// What a column measures: decides the units and digits of the text form.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Measure {
    /// A name or a word.
    Word,
    /// A count.
    Count,
    /// A dimensionless number such as a rate difference.
    Ratio,
    /// Seconds, shown from as to years.
    Time,
    /// Metres, shown from nm to light-years.
    Length,
    /// m/s², shown in m/s² or parts of g0.
    Acceleration,
    /// Hertz.
    Frequency,
    /// Newtons.
    Force,
    /// Kilograms.
    Mass,
    /// m/s.
    Speed,
    /// Per second.
    PerSecond,
}

/// One column.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Column {
    /// Key of the value in JSON and CSV; ends in the SI unit where there is one.
    pub key: &'static str,
    /// Heading in text, without the unit.
    pub heading: &'static str,
    /// What is measured.
    pub measure: Measure,
}

/// A table whose rows are made when they are asked for, so that it can be streamed,
/// windowed or rendered on all cores without being held.
pub struct Table<'a> {
    /// Its name, the key of its rows in JSON.
    pub name: &'static str,
    /// Its columns.
    pub columns: Vec<Column>,
    /// Number of rows.
    pub rows: usize,
    /// Fills a row with one cell per column. The vector comes in empty.
    pub fill: Box<dyn Fn(usize, &mut Vec<Cell<'a>>) + Send + Sync + 'a>,
    /// Row to mark in text (the reference node), if any.
    pub marked: Option<usize>,
}

/// A named value beside the tables.
#[derive(Clone, Debug, PartialEq)]
pub struct Scalar<'a> {
    /// Key in JSON.
    pub key: &'static str,
    /// Heading in text.
    pub heading: &'static str,
    /// What is measured.
    pub measure: Measure,
    /// The value.
    pub value: Cell<'a>,
}

/// What a command found at one moment: the head that stands on every output, and the
/// tables.
pub struct Report<'a> {
    /// Command, e.g. `rates`: the schema is `clockspar.rates/1`.
    pub command: &'static str,
    /// Version of the schema.
    pub schema_version: u32,
    /// Name of the layout.
    pub layout: &'a str,
    /// Revision of the layout.
    pub revision: Option<&'a str>,
    /// SHA-256 of the bytes of the layout, 64 hex digits.
    pub layout_sha256: &'a str,
    /// The moment; `None` for a report that spans the plan (`at_s` null with this reason).
    pub at: Result<ArrayTime, &'static str>,
    /// Acceleration of the reference at the moment, m/s².
    pub reference_acceleration_m_s2: Result<f64, &'static str>,
    /// Rapidity at the moment.
    pub rapidity: Result<f64, &'static str>,
    /// Values beside the tables.
    pub scalars: Vec<Scalar<'a>>,
    /// The tables; CSV writes the chosen one.
    pub tables: Vec<Table<'a>>,
    /// Lines that stand under the text form: cautions, what the numbers leave out.
    pub remarks: Vec<String>,
}
