//! A table as text: every column in one form, split into blocks where it is too wide.

use std::io::{self, Write};
use std::ops::Range;

use super::choose::Units;
use super::format::ColumnFormat;
use super::scan::ColumnScan;
use super::stream::{threads_for, write_rows};
use super::text::TextOptions;
use super::unit::Unit;
use super::width::{columns_of, push_blanks, push_left, push_right, wrapped};
use super::{Cell, Column, Measure, NOT_FINITE, Table};
use crate::cores;

/// Blanks between columns.
const GAP: usize = 2;
/// Columns in front of each row for the mark of the reference.
const MARK: usize = 2;
/// Reasons that get a letter of their own.
const MOST_REASONS: usize = 26;
/// The least a column of words is narrowed to.
const LEAST_WORDS: usize = 4;

/// What a table over time keeps from moment to moment, so that a number can be compared with
/// the one above it.
#[derive(Clone, Debug, Default)]
pub(super) struct Kept {
    columns: Vec<KeptColumn>,
    /// Headings are left out where they would say what they said, and tables without rows.
    pub is_compact: bool,
    /// The headings that are in sight, by the names of their tables.
    headings: Vec<(&'static str, String)>,
    /// Whether a heading has been written since this was last asked.
    is_headed: bool,
}

#[derive(Clone, Copy, Debug)]
struct KeptColumn {
    table: &'static str,
    key: &'static str,
    /// The unit of the first values that were not all zero.
    unit: Unit,
    width: usize,
}

impl Kept {
    /// Whether a heading has been written since the last time.
    pub fn take_headed(&mut self) -> bool {
        std::mem::take(&mut self.is_headed)
    }

    /// Headings have gone out of sight.
    pub fn forget_headings(&mut self) {
        self.headings.clear();
    }

    /// Whether a heading is in sight already; it is from now on.
    fn is_in_sight(&mut self, table: &'static str, heading: &str) -> bool {
        match self.headings.iter_mut().find(|(known, _)| *known == table) {
            Some((_, known)) if known == heading => true,
            Some((_, known)) => {
                heading.clone_into(known);
                false
            }
            None => {
                self.headings.push((table, heading.to_owned()));
                false
            }
        }
    }

    /// The form of a column in the unit kept for it. When that no longer serves, another one
    /// is kept from now on, and `changed` says so.
    fn format(
        &mut self,
        table: &Table<'_>,
        column: &Column,
        scan: &ColumnScan,
        unicode: bool,
        changed: &mut Vec<String>,
    ) -> ColumnFormat {
        let own = scan.format(unicode);
        if !scan.has_unit() || scan.is_in_given_unit() {
            return own;
        }
        let place =
            self.columns.iter().position(|kept| kept.table == table.name && kept.key == column.key);
        let Some(place) = place else {
            if scan.has_size() {
                let unit = own.unit_kept();
                let (table, key, width) = (table.name, column.key, own.width);
                self.columns.push(KeptColumn { table, key, unit, width });
            }
            return own;
        };
        let kept = &mut self.columns[place];
        let mut format = match scan.format_in(kept.unit, unicode) {
            Some(format) => format,
            None if !scan.has_size() => return own,
            None => {
                let before = if unicode { kept.unit.label } else { kept.unit.ascii };
                if kept.unit != own.unit_kept() {
                    let (heading, now) = (column.heading, own.unit());
                    changed.push(format!("`{heading}` is now in {now}, before in {before}"));
                }
                kept.unit = own.unit_kept();
                kept.width = own.width;
                own
            }
        };
        // So that numbers stand below each other.
        if self.is_compact {
            kept.width = kept.width.max(format.width);
            format.width = kept.width;
        }
        format
    }
}

/// Writes a table with its title, its columns in as many blocks as the width asks for, and
/// the reasons of what is absent.
pub(super) fn write_table(
    table: &Table<'_>,
    options: &TextOptions,
    units: Option<&Units>,
    titled: bool,
    mut kept: Option<&mut Kept>,
    out: &mut dyn Write,
) -> io::Result<()> {
    let mut text = String::new();
    if table.rows == 0 {
        if kept.is_some_and(|kept| kept.is_compact) {
            return Ok(());
        }
        options.push_lines(&mut text, &format!("{}: no rows", table.name));
        return out.write_all(text.as_bytes());
    }
    let mut changed = Vec::new();
    let (formats, reasons) = scan(table, units, options.unicode, kept.as_deref_mut(), &mut changed);
    for change in changed {
        options.push_lines(&mut text, &change);
    }
    let mut title = String::new();
    if titled {
        let order = if table.marked.is_some() { ", fore to aft, * the reference" } else { "" };
        options.push_lines(&mut title, &format!("{}{order}", table.name));
    }
    let margin = if table.marked.is_some() { MARK } else { 0 };
    let blocks = blocks(table, &formats, margin, *options);
    for (place, block) in blocks.iter().enumerate() {
        if place > 0 {
            text.push('\n');
        }
        // Only a heading of a single block can stay in sight above its rows.
        let mut heading = std::mem::take(&mut title);
        push_heading(&mut heading, block, margin, *options);
        let is_in_sight = match &mut kept {
            Some(kept) if kept.is_compact && blocks.len() == 1 => {
                kept.is_in_sight(table.name, &heading)
            }
            _ => false,
        };
        if !is_in_sight {
            text.push_str(&heading);
            if let Some(kept) = &mut kept {
                kept.is_headed = true;
            }
        }
        out.write_all(text.as_bytes())?;
        text.clear();
        write_rows(table.rows, threads_for(table.rows), out, |range, buffer| {
            push_rows(table, block, &reasons, range, buffer);
        })?;
    }
    for (place, reason) in reasons.texts.iter().enumerate() {
        options.push_lines(&mut text, &format!("-{}: {reason}", reasons.mark_at(place)));
    }
    if reasons.more {
        options.push_lines(&mut text, "-: other reasons, which the JSON form gives row by row");
    }
    out.write_all(text.as_bytes())
}

/// Distinct reasons of absent cells, in the order in which they are met.
#[derive(Clone)]
struct Reasons {
    texts: Vec<String>,
    /// There are others, for which no letter is left.
    more: bool,
}

impl Reasons {
    fn see(&mut self, why: &str) {
        if self.more || self.texts.iter().any(|known| known == why) {
            return;
        }
        if self.texts.len() == MOST_REASONS {
            self.more = true;
        } else {
            self.texts.push(why.to_owned());
        }
    }

    /// The letter of a reason; none where there is only one reason.
    fn mark_at(&self, place: usize) -> &'static str {
        const LETTERS: &str = "abcdefghijklmnopqrstuvwxyz";
        if self.texts.len() < 2 { "" } else { &LETTERS[place..=place] }
    }

    fn mark_of(&self, cell: &Cell<'_>) -> &'static str {
        let why = match cell {
            Cell::Absent(why) => why,
            Cell::Number(value) | Cell::Measured(value, _) if !value.is_finite() => NOT_FINITE,
            _ => return "",
        };
        self.texts.iter().position(|known| known == why).map_or("", |place| self.mark_at(place))
    }
}

/// Rows that are looked at together in the first pass.
const ROWS_AT_A_TIME: usize = 4096;
/// Groups of rows beyond which the first pass looks at no more than so many: the first ones,
/// and others evenly spread. A value outside what they hold is still shown with its digits,
/// only out of line.
const MOST_GROUPS: usize = 1024;
/// Groups that are worth the other cores.
const GROUPS_WORTH_THREADS: usize = 5;

/// The groups of rows that decide the form of the columns, in order.
fn groups(rows: usize) -> impl Fn(usize) -> Range<usize> {
    let count = rows.div_ceil(ROWS_AT_A_TIME);
    let in_order = if count <= MOST_GROUPS { count } else { MOST_GROUPS / 2 };
    move |place: usize| {
        let group = if place < in_order {
            place
        } else {
            in_order + (place - in_order) * (count - in_order) / (MOST_GROUPS - in_order)
        };
        group * ROWS_AT_A_TIME..rows.min((group + 1) * ROWS_AT_A_TIME)
    }
}

/// What the first pass gathers.
#[derive(Clone)]
struct Seen {
    scans: Vec<ColumnScan>,
    absent: Vec<bool>,
    reasons: Reasons,
}

impl Seen {
    fn see(&mut self, table: &Table<'_>, rows: Range<usize>) {
        let mut cells = Vec::with_capacity(self.scans.len());
        for row in rows {
            cells.clear();
            (table.fill)(row, &mut cells);
            debug_assert_eq!(cells.len(), self.scans.len(), "row {row} of `{}`", table.name);
            for ((scan, cell), absent) in self.scans.iter_mut().zip(&cells).zip(&mut self.absent) {
                scan.see(cell);
                let why = match cell {
                    Cell::Absent(why) => why,
                    Cell::Number(value) | Cell::Measured(value, _) if !value.is_finite() => {
                        NOT_FINITE
                    }
                    _ => continue,
                };
                *absent = true;
                self.reasons.see(why);
            }
        }
    }

    fn join(mut self, behind: &Seen) -> Seen {
        self.scans.iter_mut().zip(&behind.scans).for_each(|(scan, next)| scan.join(next));
        self.absent.iter_mut().zip(&behind.absent).for_each(|(absent, next)| *absent |= next);
        behind.reasons.texts.iter().for_each(|why| self.reasons.see(why));
        self.reasons.more |= behind.reasons.more;
        self
    }
}

/// The first pass over the rows.
fn scan(
    table: &Table<'_>,
    units: Option<&Units>,
    unicode: bool,
    kept: Option<&mut Kept>,
    changed: &mut Vec<String>,
) -> (Vec<ColumnFormat>, Reasons) {
    let unit = |column: &Column| units?.of(column.key, column.measure);
    let columns = table.columns.iter();
    let nothing = Seen {
        scans: columns.map(|column| ColumnScan::new(column).in_unit(unit(column))).collect(),
        absent: vec![false; table.columns.len()],
        reasons: Reasons { texts: Vec::new(), more: false },
    };
    let group = groups(table.rows);
    let count = table.rows.div_ceil(ROWS_AT_A_TIME).min(MOST_GROUPS);
    let seen = cores::fold(
        count,
        GROUPS_WORTH_THREADS,
        &nothing,
        |seen, place| seen.see(table, group(place)),
        |front, behind| front.join(&behind),
    );
    let scans = seen.scans.iter();
    let mut formats: Vec<ColumnFormat> = match kept {
        None => scans.map(|scan| scan.format(unicode)).collect(),
        Some(kept) => scans
            .zip(&table.columns)
            .map(|(scan, column)| kept.format(table, column, scan, unicode, changed))
            .collect(),
    };
    let mark = columns_of(seen.reasons.mark_at(0));
    for (format, _) in formats.iter_mut().zip(seen.absent).filter(|(_, absent)| *absent) {
        format.width = format.width.max(1 + mark);
    }
    (formats, seen.reasons)
}

/// A column as it stands in a block.
#[derive(Clone)]
struct Shown<'t> {
    index: usize,
    format: &'t ColumnFormat,
    heading: Vec<String>,
    width: usize,
    /// Cells may be longer than the width and are wrapped.
    narrowed: bool,
}

impl<'t> Shown<'t> {
    fn new(
        table: &Table<'_>,
        index: usize,
        format: &'t ColumnFormat,
        options: TextOptions,
    ) -> Self {
        let heading = options.signs(table.columns[index].heading);
        let least = format.width.max(columns_of(format.unit()));
        // A heading is wrapped to what the cells need, but never within a word.
        let longest = heading.split(' ').map(columns_of).max().unwrap_or(0);
        let heading = wrapped(&heading, options.width.map(|_| least.max(longest)));
        let widest = heading.iter().map(|line| columns_of(line)).max().unwrap_or(0);
        Shown { index, format, heading, width: least.max(widest), narrowed: false }
    }

    fn narrow(&mut self, width: usize) {
        let width = width.max(LEAST_WORDS);
        if self.width > width {
            self.width = width;
            self.narrowed = true;
            self.heading = wrapped(&self.heading.join(" "), Some(width));
        }
    }
}

/// Columns that stand side by side; the first of them name the row in every block.
fn blocks<'t>(
    table: &Table<'_>,
    formats: &'t [ColumnFormat],
    margin: usize,
    options: TextOptions,
) -> Vec<Vec<Shown<'t>>> {
    let mut columns: Vec<Shown<'t>> = formats
        .iter()
        .enumerate()
        // Measured cells carry their units themselves.
        .filter(|(index, _)| table.columns[*index].measure != Measure::Unit)
        .map(|(index, format)| Shown::new(table, index, format, options))
        .collect();
    let taken = |columns: &[Shown<'_>]| {
        columns.iter().map(|column| column.width + GAP).sum::<usize>().saturating_sub(GAP)
    };
    let Some(width) = options.width else {
        return vec![columns];
    };
    let room = width.saturating_sub(margin);
    if taken(&columns) <= room {
        return vec![columns];
    }
    let words = |column: &Shown<'_>| table.columns[column.index].measure == Measure::Word;
    // Only words can be narrowed: what is left must hold the widest number.
    let widest = |columns: &[Shown<'_>]| {
        let numbers = columns.iter().filter(|column| !words(column));
        numbers.map(|column| column.width).max().unwrap_or(LEAST_WORDS)
    };
    let mut names = columns.iter().take_while(|column| words(column)).count().max(1);
    if taken(&columns[..names]) + GAP + widest(&columns[names..]) > room {
        names = 1;
    }
    let rest = widest(&columns[1..]) + GAP;
    if words(&columns[0]) {
        columns[0].narrow(room.saturating_sub(rest));
    }
    let data = columns.split_off(names);
    let left = room.saturating_sub(taken(&columns));
    let mut blocks = Vec::new();
    let mut block = columns.clone();
    for mut column in data {
        if words(&column) {
            column.narrow(left.saturating_sub(GAP));
        }
        if block.len() > names && taken(&block) + GAP + column.width > room {
            blocks.push(std::mem::replace(&mut block, columns.clone()));
        }
        block.push(column);
    }
    blocks.push(block);
    blocks
}

fn push_heading(text: &mut String, block: &[Shown<'_>], margin: usize, options: TextOptions) {
    let height = block.iter().map(|column| column.heading.len()).max().unwrap_or(0);
    for line in 0..height {
        push_line(text, margin, block, |column| {
            // Headings stand on the line of the units, so short ones leave the top free.
            let above = height - column.heading.len();
            line.checked_sub(above).map_or("", |line| column.heading[line].as_str())
        });
    }
    if block.iter().any(|column| !column.format.unit().is_empty()) {
        push_line(text, margin, block, |column| column.format.unit());
    }
    let width = block.iter().map(|column| column.width + GAP).sum::<usize>() - GAP + margin;
    text.extend(std::iter::repeat_n(if options.unicode { '─' } else { '-' }, width));
    text.push('\n');
}

fn push_line<'c>(
    text: &mut String,
    margin: usize,
    block: &'c [Shown<'_>],
    part: impl Fn(&'c Shown<'_>) -> &'c str,
) {
    push_blanks(text, margin);
    for (place, column) in block.iter().enumerate() {
        push_blanks(text, if place > 0 { GAP } else { 0 });
        if column.format.is_left() {
            push_left(text, part(column), column.width);
        } else {
            push_right(text, part(column), column.width);
        }
    }
    end_line(text);
}

/// Ends a line without blanks at its end.
fn end_line(text: &mut String) {
    text.truncate(text.trim_end_matches(' ').len());
    text.push('\n');
}

/// The second pass over some rows.
fn push_rows(
    table: &Table<'_>,
    block: &[Shown<'_>],
    reasons: &Reasons,
    range: Range<usize>,
    out: &mut Vec<u8>,
) {
    let mut cells = Vec::with_capacity(table.columns.len());
    let mut text = String::new();
    for row in range {
        cells.clear();
        (table.fill)(row, &mut cells);
        text.clear();
        let mark = match table.marked {
            Some(marked) if marked == row => "* ",
            Some(_) => "  ",
            None => "",
        };
        // Only narrowed columns take more than a line.
        let wrapped: Vec<Vec<String>> = block
            .iter()
            .filter(|column| column.narrowed)
            .map(|column| {
                let cell = &cells[column.index];
                wrapped(&column.format.value(cell, reasons.mark_of(cell)), Some(column.width))
            })
            .collect();
        let height = wrapped.iter().map(Vec::len).max().unwrap_or(1);
        for line in 0..height {
            text.push_str(if line == 0 { mark } else { &"  "[..mark.len()] });
            let mut narrowed = wrapped.iter();
            for (place, column) in block.iter().enumerate() {
                push_blanks(&mut text, if place > 0 { GAP } else { 0 });
                let cell = &cells[column.index];
                if column.narrowed {
                    let lines = narrowed.next().map_or(&[][..], Vec::as_slice);
                    push_left(&mut text, lines.get(line).map_or("", String::as_str), column.width);
                } else if line == 0 {
                    column.format.push(&mut text, cell, reasons.mark_of(cell), column.width);
                } else {
                    push_blanks(&mut text, column.width);
                }
            }
            end_line(&mut text);
        }
        debug_assert!(!text.chars().any(|sign| sign != '\n' && sign.is_control()), "{text:?}");
        out.extend_from_slice(text.as_bytes());
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_row_of_an_ordinary_table_is_looked_at_and_a_huge_one_is_sampled() {
        for rows in [1, ROWS_AT_A_TIME, ROWS_AT_A_TIME + 1, MOST_GROUPS * ROWS_AT_A_TIME] {
            let group = groups(rows);
            let ranges = (0..rows.div_ceil(ROWS_AT_A_TIME)).map(group);
            assert!(ranges.flatten().eq(0..rows), "{rows}");
        }
        for rows in [MOST_GROUPS * ROWS_AT_A_TIME + 1, 99_990_000, 999_999_000_000] {
            let group = groups(rows);
            let ranges: Vec<Range<usize>> = (0..MOST_GROUPS).map(group).collect();
            let in_order = ranges.windows(2).all(|pair| pair[0].end <= pair[1].start);
            assert!(
                in_order && ranges[0].start == 0 && ranges.iter().all(|range| !range.is_empty())
            );
            let last = ranges[MOST_GROUPS - 1].end;
            assert!(last <= rows && last > rows - rows / 400, "{rows}: {last}");
        }
    }
}
