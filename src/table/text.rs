//! Reports for people: a head in sentences' order, then tables fitted to the width.

use std::io::{self, Write};

use super::choose::Units;
use super::columns::{Kept, write_table};
use super::digits::Scale;
use super::scan::ColumnScan;
use super::unit::{acceleration, readable_time, rounded};
use super::width::{columns_of, in_ascii, push_blanks, wrapped};
use super::{Cell, Head, Report, Scalar, Series};
use crate::layout::Epoch;
use crate::layout::date::format_date;
use crate::model::array_time::ArrayTime;

/// Digits of a value that stands alone, outside a table.
const DIGITS_ALONE: i32 = 6;
/// Digits of the hash that a person compares.
const HASH_DIGITS: usize = 12;
/// Blanks before the further lines of a text that was wrapped.
const INDENT: usize = 2;
/// A blank at which no line is broken: a sign that no clean text holds.
const JOINT: char = '\u{1f}';
/// Remarks remembered so that a report over time says each once.
const REMARKS_REMEMBERED: usize = 100;

/// How text is shown.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct TextOptions {
    /// Columns of the terminal, 40 or more; `None`: unlimited, for a pipe or a file.
    pub width: Option<usize>,
    /// Whether signs outside ASCII may be used. Names stand as they are either way.
    pub unicode: bool,
}

impl TextOptions {
    /// A text of our own in the signs that may be used.
    pub(super) fn signs(self, text: &str) -> String {
        if self.unicode { text.to_owned() } else { in_ascii(text) }
    }

    /// Appends a text as lines that fit, the later ones indented.
    pub(super) fn push_lines(self, out: &mut String, text: &str) {
        let clean = !text.chars().any(|sign| sign != JOINT && sign.is_control());
        debug_assert!(clean, "text is clean: {text:?}");
        let text = self.signs(text);
        let width = self.width.map(|width| width.saturating_sub(INDENT));
        // A text that fits needs no room for an indentation.
        let whole = self.width.is_none_or(|width| columns_of(&text) <= width);
        for (place, line) in wrapped(&text, width.filter(|_| !whole)).iter().enumerate() {
            if place > 0 {
                push_blanks(out, INDENT);
            }
            out.push_str(&line.trim_end().replace(JOINT, " "));
            out.push('\n');
        }
    }
}

/// What a reader chose of the text form: no value depends on it.
#[derive(Clone, Copy, Debug, Default)]
pub struct TextChoice<'a> {
    /// Units for some columns instead of those that read best.
    pub units: Option<&'a Units>,
    /// The date of array time zero, when moments are to be told by date as well.
    pub epoch: Option<&'a Epoch>,
}

impl TextChoice<'_> {
    /// The date of a moment.
    fn date(&self, at: ArrayTime) -> Option<String> {
        let epoch = self.epoch?;
        let count = epoch.tai_since_2000.attoseconds().checked_add(at.attoseconds())?;
        format_date(ArrayTime::from_attoseconds(count), epoch.scale)
    }
}

/// Writes a report of one moment as text for people: the head, the scalars, every table
/// and the remarks.
///
/// Rows are gone through twice, for the form of the columns and for the text, and never
/// held.
///
/// # Errors
///
/// Those of the writer.
pub fn write_text(
    report: &Report<'_>,
    options: &TextOptions,
    out: &mut dyn Write,
) -> io::Result<()> {
    write_text_as(report, options, TextChoice::default(), out)
}

/// The same with what the reader chose.
///
/// # Errors
///
/// Those of the writer.
pub fn write_text_as(
    report: &Report<'_>,
    options: &TextOptions,
    choice: TextChoice<'_>,
    out: &mut dyn Write,
) -> io::Result<()> {
    let mut text = String::new();
    push_head(&mut text, &report.head(), *options);
    for (label, value) in moment_parts(report, *options) {
        options.push_lines(&mut text, &format!("{label}: {value}"));
        if let ("array time", Ok(at)) = (label, report.at)
            && let Some(date) = choice.date(at)
        {
            let whose = if at > ArrayTime::ZERO { OWN_COUNT } else { "" };
            options.push_lines(&mut text, &format!("date: {date}{whose}"));
        }
    }
    options.push_lines(&mut text, UNITS);
    push_scalars(&mut text, &report.scalars, choice, *options);
    out.write_all(text.as_bytes())?;
    for table in &report.tables {
        out.write_all(b"\n")?;
        write_table(table, options, choice.units, true, None, out)?;
    }
    text.clear();
    if !report.remarks.is_empty() {
        text.push('\n');
    }
    for remark in &report.remarks {
        options.push_lines(&mut text, remark);
    }
    out.write_all(text.as_bytes())
}

/// Whose count a date after the start is.
const OWN_COUNT: &str = " by the reference clock's own count";

/// Writes a report over time as text: the head once, then a compact block a moment.
///
/// # Errors
///
/// Those of the writer.
pub fn write_text_series(
    series: &Series<'_>,
    options: &TextOptions,
    out: &mut dyn Write,
) -> io::Result<()> {
    write_text_series_as(series, options, TextChoice::default(), out)
}

/// The same with what the reader chose.
///
/// # Errors
///
/// Those of the writer.
pub fn write_text_series_as(
    series: &Series<'_>,
    options: &TextOptions,
    choice: TextChoice<'_>,
    out: &mut dyn Write,
) -> io::Result<()> {
    let mut writer = TextWriter::new(*options).with(choice);
    writer.head(&series.head, out)?;
    for moment in 0..series.moments {
        writer.moment(&(series.report)(moment), out)?;
    }
    Ok(())
}

/// Writes a report over time moment by moment, for a caller who has to wait in between.
#[derive(Clone, Debug)]
pub struct TextWriter<'a> {
    options: TextOptions,
    choice: TextChoice<'a>,
    moments: usize,
    remarks: Vec<String>,
    kept: Kept,
    /// Lines written since the headings.
    lines: usize,
}

/// Lines after which headings stand again, so that they do not leave a screen for long.
const SCREENFUL: usize = 20;

/// Counts the lines that pass.
struct Counted<'o> {
    out: &'o mut dyn Write,
    lines: usize,
}

impl Write for Counted<'_> {
    fn write(&mut self, bytes: &[u8]) -> io::Result<usize> {
        let written = self.out.write(bytes)?;
        self.lines += bytes[..written].iter().filter(|byte| **byte == b'\n').count();
        Ok(written)
    }

    fn flush(&mut self) -> io::Result<()> {
        self.out.flush()
    }
}

impl<'a> TextWriter<'a> {
    /// Nothing written yet.
    #[must_use]
    pub fn new(options: TextOptions) -> TextWriter<'a> {
        let choice = TextChoice::default();
        TextWriter {
            options,
            choice,
            moments: 0,
            remarks: Vec::new(),
            kept: Kept::default(),
            lines: 0,
        }
    }

    /// The same with what the reader chose.
    #[must_use]
    pub fn with(mut self, choice: TextChoice<'a>) -> TextWriter<'a> {
        self.choice = choice;
        self
    }

    /// For a watch on a screen: headings stand where they change and once a screenful, and
    /// tables without rows are left out.
    #[must_use]
    pub fn compact(mut self) -> TextWriter<'a> {
        self.kept.is_compact = true;
        self
    }

    /// Writes what stands on top, once.
    ///
    /// # Errors
    ///
    /// Those of the writer.
    pub fn head(&mut self, head: &Head<'_>, out: &mut dyn Write) -> io::Result<()> {
        let mut text = String::new();
        push_head(&mut text, head, self.options);
        self.options.push_lines(&mut text, UNITS);
        out.write_all(text.as_bytes())
    }

    /// Writes the block of a moment: the moment in a line, scalars, tables, and the remarks
    /// that were not made before.
    ///
    /// # Errors
    ///
    /// Those of the writer.
    pub fn moment(&mut self, report: &Report<'_>, out: &mut dyn Write) -> io::Result<()> {
        let options = self.options;
        let mut parts: Vec<String> = moment_parts(report, options)
            .into_iter()
            .map(|(label, value)| format!("{label} {value}"))
            .collect();
        if let Some(date) = report.at.ok().and_then(|at| self.choice.date(at)) {
            parts.insert(1, format!("date {date}"));
        }
        let mut text = String::from("\n");
        options.push_lines(&mut text, &parts.join(", "));
        push_scalars(&mut text, &report.scalars, self.choice, options);
        let mut out = Counted { out, lines: 0 };
        out.write_all(text.as_bytes())?;
        if self.lines >= SCREENFUL {
            self.kept.forget_headings();
        }
        let mut shown = 0;
        for table in &report.tables {
            let several = report.tables.len() > 1;
            let titled = self.moments == 0 || several || self.kept.is_compact;
            let (units, kept) = (self.choice.units, Some(&mut self.kept));
            write_table(table, &options, units, titled, kept, &mut out)?;
            shown += usize::from(table.rows > 0);
        }
        if shown > 1 {
            // The heading in sight is that of the last table.
            self.kept.forget_headings();
        }
        text.clear();
        for remark in &report.remarks {
            if !self.remarks.contains(remark) {
                options.push_lines(&mut text, remark);
                if self.remarks.len() < REMARKS_REMEMBERED {
                    self.remarks.push(remark.clone());
                }
            }
        }
        self.moments += 1;
        out.write_all(text.as_bytes())?;
        self.lines = out.lines + if self.kept.take_headed() { 0 } else { self.lines };
        Ok(())
    }
}

/// What the labels of the headings mean, with joints inside the equations.
const UNITS: &str = "units: as headed; g0\u{1f}=\u{1f}9.80665\u{1f}m/s², \
                     d\u{1f}=\u{1f}86400\u{1f}s, a\u{1f}=\u{1f}365.25\u{1f}d";

/// Quantities as one word each when lines are broken, an equation of two as two.
fn joined(text: &str) -> String {
    let joint = &JOINT.to_string();
    text.split(" = ")
        .map(|side| side.replace(' ', joint))
        .collect::<Vec<_>>()
        .join(&format!(" ={joint}"))
}

fn push_head(text: &mut String, head: &Head<'_>, options: TextOptions) {
    // The name of the layout and its revision are the layout's own, so no sign is changed.
    let named = TextOptions { unicode: true, ..options };
    named.push_lines(text, &format!("layout: {}", head.layout));
    let revision = head.revision.unwrap_or("-");
    named.push_lines(text, &format!("revision: {revision}"));
    let hash = head.layout_sha256.get(..HASH_DIGITS).unwrap_or(head.layout_sha256);
    options.push_lines(text, &format!("hash: {hash}"));
}

/// The moment, the acceleration of the reference and the rapidity, with their labels.
fn moment_parts(report: &Report<'_>, options: TextOptions) -> Vec<(&'static str, String)> {
    if let (Err(why), Err(_), Err(_)) =
        (report.at, report.reference_acceleration_m_s2, report.rapidity)
    {
        return vec![("array time", absent_alone(why))];
    }
    let absent = absent_alone;
    let moment = report.at.map_or_else(absent, |at| {
        let (readable, exact) = (readable_time(at), format!("{at} s"));
        if readable == exact { exact } else { format!("{readable} = {exact}") }
    });
    let reference = report.reference_acceleration_m_s2;
    let reference =
        reference.map_or_else(absent, |value| joined(&acceleration(value, options.unicode)));
    let rapidity = report.rapidity;
    let rapidity = rapidity.map_or_else(absent, |value| rounded(value, Scale::Ten(0), 10));
    vec![("array time", moment), ("reference acceleration", reference), ("rapidity", rapidity)]
}

/// What stands for a value that does not exist, outside a table.
fn absent_alone(why: &str) -> String {
    format!("- ({why})")
}

fn push_scalars(
    text: &mut String,
    scalars: &[Scalar<'_>],
    choice: TextChoice<'_>,
    options: TextOptions,
) {
    if !scalars.is_empty() {
        text.push('\n');
    }
    for scalar in scalars {
        let unit = choice.units.and_then(|units| units.of(scalar.key, scalar.measure));
        let mut scan = ColumnScan::of(scalar.key, scalar.measure);
        scan = scan.with_digits(DIGITS_ALONE).in_unit(unit);
        scan.see(&scalar.value);
        let format = scan.format(options.unicode);
        let value = match &scalar.value {
            Cell::Absent(why) => format!("- ({why})"),
            Cell::Number(value) | Cell::Measured(value, _) if !value.is_finite() => {
                format!("- ({})", super::NOT_FINITE)
            }
            value => format!("{}{JOINT}{}", format.value(value, "").trim_end(), format.unit()),
        };
        let line = format!("{}: {}", scalar.heading, value.trim_end_matches(JOINT));
        options.push_lines(text, &line);
    }
}
