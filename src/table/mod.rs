//! Results as data before they are text: one table type, then text, CSV and JSON
//! renderers of the same table.
//!
//! ```
//! use clockspar::model::array_time::ArrayTime;
//! use clockspar::table::{Cell, Column, Measure, Report, Table, TextOptions, write_text};
//!
//! let rates = [("mast", 2.62e-16), ("hub", 0.0)];
//! let column = |key, heading, measure| Column { key, heading, measure };
//! let report = Report {
//!     command: "rates",
//!     schema_version: 1,
//!     layout: "Marram survey line",
//!     revision: Some("C"),
//!     layout_sha256: "3f2a9c01d4e7b688",
//!     at: Ok(ArrayTime::from_seconds(22_200)),
//!     reference_acceleration_m_s2: Ok(0.196133),
//!     rapidity: Ok(1.4e-5),
//!     scalars: Vec::new(),
//!     tables: vec![Table {
//!         name: "nodes",
//!         columns: vec![
//!             column("node", "node", Measure::Word),
//!             column("rate_minus_one", "rate less one", Measure::Ratio),
//!         ],
//!         rows: rates.len(),
//!         fill: Box::new(|row, cells| {
//!             let (name, rate) = rates[row];
//!             cells.push(Cell::Text(name.into()));
//!             cells.push(Cell::Number(rate));
//!         }),
//!         marked: Some(1),
//!     }],
//!     remarks: Vec::new(),
//! };
//! let mut page = Vec::new();
//! write_text(&report, &TextOptions { width: Some(80), unicode: true }, &mut page)?;
//! assert!(String::from_utf8_lossy(&page).contains("array time: 6 h 10 min = 22200 s"));
//! # Ok::<(), std::io::Error>(())
//! ```

pub mod choose;
mod columns;
pub mod content;
mod csv;
mod digits;
mod format;
mod json;
pub mod number;
pub mod preferences;
mod scan;
mod stream;
mod text;
mod unit;
pub mod width;

use std::borrow::Cow;
use std::fmt;

use crate::model::array_time::ArrayTime;

pub use csv::{write_csv, write_csv_series};
pub use format::{ColumnFormat, fit};
pub use json::{write_json, write_json_series};
pub use scan::ColumnScan;
pub use text::{
    TextChoice, TextOptions, TextWriter, write_text, write_text_as, write_text_series,
    write_text_series_as,
};
pub use unit::readable_time;

/// Raised whenever a change of the model may change any printed bit.
pub const MODEL: u32 = 1;

/// The program and its version, as every output states it.
pub const PROGRAM: &str = concat!(env!("CARGO_PKG_NAME"), " ", env!("CARGO_PKG_VERSION"));

/// Why there is no revision to print.
const NO_REVISION: &str = "the layout states no revision";

/// Why a number that overflowed in spite of all care is not printed.
const NOT_FINITE: &str = "the value overflows";

/// One value of a row.
#[derive(Clone, Debug, PartialEq)]
pub enum Cell<'a> {
    /// A name or a word.
    Text(Cow<'a, str>),
    /// An SI value, finite.
    Number(f64),
    /// An SI value, finite, of what the cell itself says: for columns whose rows measure
    /// different things. Text shows it with its unit.
    Measured(f64, Measure),
    /// A whole number.
    Integer(i64),
    /// An exact moment or length of array time.
    Time(ArrayTime),
    /// A moment that was computed, to the attosecond, and is not worth so many digits to a
    /// person: text shows it as a measured cell.
    Computed(ArrayTime),
    /// Yes or no.
    Flag(bool),
    /// A value that does not exist or overflows, and why.
    Absent(Cow<'a, str>),
}

impl<'a> Cell<'a> {
    /// A number, or its absence with the reason when it is not finite.
    #[must_use]
    pub fn finite(value: f64, why_not: &'a str) -> Cell<'a> {
        if value.is_finite() { Cell::Number(value) } else { Cell::Absent(why_not.into()) }
    }
}

impl<'a> From<Result<f64, &'a str>> for Cell<'a> {
    fn from(value: Result<f64, &'a str>) -> Cell<'a> {
        value.map_or_else(|why| Cell::Absent(why.into()), Cell::Number)
    }
}

impl<'a> From<Result<ArrayTime, &'a str>> for Cell<'a> {
    fn from(value: Result<ArrayTime, &'a str>) -> Cell<'a> {
        value.map_or_else(|why| Cell::Absent(why.into()), Cell::Time)
    }
}

/// What a column measures: decides the units and digits of the text form.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Measure {
    /// A name or a word.
    Word,
    /// The SI unit of the measured cells of a row, for JSON and CSV: text leaves the column
    /// out, because there each of those cells carries the unit it is shown in.
    Unit,
    /// What each measured cell says itself.
    Various,
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

/// Makes a row: one cell per column, pushed onto the vector it is given.
pub type Fill<'a> = Box<dyn Fn(usize, &mut Vec<Cell<'a>>) + Send + Sync + 'a>;

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
    pub fill: Fill<'a>,
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

impl Report<'_> {
    /// What stands on top of every output of this report, whatever the moment.
    #[must_use]
    pub fn head(&self) -> Head<'_> {
        Head {
            command: self.command,
            schema_version: self.schema_version,
            layout: self.layout,
            revision: self.revision,
            layout_sha256: self.layout_sha256,
        }
    }

    /// The index of the table of that name, or of the first table.
    ///
    /// # Errors
    ///
    /// When there is no such table; the error lists those there are.
    pub fn table_named(&self, name: Option<&str>) -> Result<usize, UnknownTable> {
        let wanted = match name {
            Some(wanted) => wanted,
            None if self.tables.is_empty() => "",
            None => return Ok(0),
        };
        self.tables.iter().position(|table| table.name == wanted).ok_or_else(|| UnknownTable {
            wanted: wanted.to_owned(),
            known: self.tables.iter().map(|table| table.name).collect(),
        })
    }

    /// The moment and what the reference does at it, with their keys in order.
    fn moment_cells(&self) -> [(&'static str, Cell<'static>); 3] {
        [
            ("at_s", self.at.into()),
            ("reference_acceleration_m_s2", self.reference_acceleration_m_s2.into()),
            ("rapidity", self.rapidity.into()),
        ]
    }
}

/// What stands on top of every output, whatever the moment.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Head<'a> {
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
}

/// A report over time: the same tables at each of a number of moments, made when they are
/// asked for. Some renderers go through the moments more than once.
pub struct Series<'a> {
    /// What stands on top.
    pub head: Head<'a>,
    /// Number of moments.
    pub moments: usize,
    /// The report of a moment, by its number from 0. Every report has the same tables and
    /// columns in the same order; the numbers of rows may differ.
    pub report: Box<dyn Fn(usize) -> Report<'a> + 'a>,
}

/// A table that a report does not have.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct UnknownTable {
    /// The name asked for.
    pub wanted: String,
    /// The names there are.
    pub known: Vec<&'static str>,
}

impl fmt::Display for UnknownTable {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        if self.known.is_empty() {
            return f.write_str("this report has no tables");
        }
        write!(f, "no table `{}`; there is `{}`", self.wanted, self.known.join("`, `"))
    }
}

impl std::error::Error for UnknownTable {}
