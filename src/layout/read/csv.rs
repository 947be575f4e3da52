//! Tables of comma-separated values (RFC 4180), split in place.
//!
//! Blank lines and lines that begin with `#` are skipped, blanks around an unquoted field
//! are dropped, and lines may end with CR LF. A field knows where it stands, so that a
//! fault can be shown.

use std::borrow::Cow;
use std::ops::Range;

use crate::layout::fault::{Collector, Spot};

/// Most fields of a row that are kept; more than any table here has columns. The others are
/// counted, so that a row of a hundred million commas costs no memory.
const MOST_FIELDS: usize = 256;

/// A table being split.
#[derive(Clone)]
pub(super) struct Rows<'t> {
    text: &'t str,
    /// Where the next row begins, and where the last one ends.
    at: usize,
    end: usize,
    pub(super) file: u32,
    fields: Vec<Cell>,
    /// How many fields the row has, kept or not.
    count: usize,
}

/// A field: the bytes of its content.
#[derive(Clone, Copy, Debug)]
struct Cell {
    start: usize,
    end: usize,
    /// Whether it holds doubled quotes.
    doubled: bool,
}

/// One row.
#[derive(Clone, Copy)]
pub(super) struct Row<'r, 't> {
    text: &'t str,
    file: u32,
    fields: &'r [Cell],
    count: usize,
}

impl<'t> Rows<'t> {
    pub(super) fn new(file: u32, text: &'t str) -> Rows<'t> {
        let at = if text.starts_with('\u{feff}') { '\u{feff}'.len_utf8() } else { 0 };
        Rows { text, at, end: text.len(), file, fields: Vec::new(), count: 0 }
    }

    /// The whole text.
    pub(super) fn text(&self) -> &'t str {
        self.text
    }

    /// Where the next row begins.
    pub(super) fn at(&self) -> usize {
        self.at
    }

    /// Goes to the rows of a part of the text.
    pub(super) fn turn_to(&mut self, part: Range<usize>) {
        self.at = part.start;
        self.end = part.end.min(self.text.len());
    }

    /// The bytes up to where the last row ends.
    fn bytes(&self) -> &'t [u8] {
        &self.text.as_bytes()[..self.end]
    }

    /// The next row that is neither blank nor a remark; a malformed one is noted and
    /// skipped.
    pub(super) fn next(&mut self, faults: &mut Collector) -> Option<Row<'_, 't>> {
        loop {
            // Nearly every line begins with what is neither a blank nor a remark, and is gone
            // through only once.
            match self.bytes().get(self.at) {
                None => return None,
                Some(first) if first.is_ascii_graphic() && *first != b'#' => {}
                Some(_) => {
                    let line_end = self.line_end(self.at);
                    let line = self.text[self.at..line_end].trim();
                    if line.is_empty() || line.starts_with('#') {
                        self.at = line_end + 1;
                        continue;
                    }
                }
            }
            match self.split() {
                Ok(()) => break,
                Err((range, rule, remedy)) => {
                    faults.fault(Spot::new(self.file, range), rule, remedy);
                }
            }
        }
        Some(Row { text: self.text, file: self.file, fields: &self.fields, count: self.count })
    }

    fn line_end(&self, from: usize) -> usize {
        let rest = self.bytes().get(from..).unwrap_or(&[]);
        memchr::memchr(b'\n', rest).map_or(self.end, |at| from + at)
    }

    /// Splits the record that begins here and moves behind it.
    fn split(&mut self) -> Result<(), (Range<usize>, &'static str, &'static str)> {
        self.fields.clear();
        self.count = 0;
        let bytes = self.bytes();
        let mut at = self.at;
        loop {
            while matches!(bytes.get(at), Some(b' ' | b'\t')) {
                at += 1;
            }
            if bytes.get(at) == Some(&b'"') {
                at = self.quoted(at)?;
            } else {
                let start = at;
                while !matches!(bytes.get(at), None | Some(b',' | b'\n')) {
                    at += 1;
                }
                let mut end = at;
                while end > start && matches!(bytes[end - 1], b' ' | b'\t' | b'\r') {
                    end -= 1;
                }
                self.keep(Cell { start, end, doubled: false });
            }
            match bytes.get(at) {
                Some(b',') => at += 1,
                _ => {
                    self.at = at + 1;
                    return Ok(());
                }
            }
        }
    }

    fn keep(&mut self, field: Cell) {
        self.count += 1;
        if self.fields.len() < MOST_FIELDS {
            self.fields.push(field);
        }
    }

    /// Reads a quoted field; returns where its comma or line end stands.
    fn quoted(&mut self, open: usize) -> Result<usize, (Range<usize>, &'static str, &'static str)> {
        let bytes = self.bytes();
        let start = open + 1;
        let mut at = start;
        let mut doubled = false;
        loop {
            match (bytes.get(at), bytes.get(at + 1)) {
                (Some(b'"'), Some(b'"')) => {
                    doubled = true;
                    at += 2;
                }
                (Some(b'"'), _) => break,
                (Some(_), _) => at += 1,
                (None, _) => {
                    self.at = bytes.len();
                    let rule = "a field that begins with a quote ends with one";
                    return Err((open..open + 1, rule, "close the quote"));
                }
            }
        }
        self.keep(Cell { start, end: at, doubled });
        at += 1;
        while matches!(bytes.get(at), Some(b' ' | b'\t' | b'\r')) {
            at += 1;
        }
        if matches!(bytes.get(at), None | Some(b',' | b'\n')) {
            return Ok(at);
        }
        self.at = self.line_end(at) + 1;
        let rule = "a comma or the end of the line follows a closing quote";
        Err((at..at + 1, rule, "double the quotes inside a quoted field"))
    }
}

impl<'t> Row<'_, 't> {
    pub(super) fn len(self) -> usize {
        self.count
    }

    /// Whether the row has more fields than are kept.
    pub(super) fn is_too_wide(self) -> bool {
        self.count > self.fields.len()
    }

    /// The content of a field; empty when the row is too short.
    pub(super) fn field(self, index: usize) -> Cow<'t, str> {
        let Some(cell) = self.fields.get(index) else {
            return Cow::Borrowed("");
        };
        let content = &self.text[cell.start..cell.end];
        if cell.doubled {
            return Cow::Owned(content.replace("\"\"", "\""));
        }
        Cow::Borrowed(content)
    }

    /// Where a field stands.
    pub(super) fn spot(self, index: usize) -> Spot {
        let cell = self.fields.get(index).copied();
        let cell = cell.unwrap_or(Cell { start: 0, end: 0, doubled: false });
        Spot::new(self.file, cell.start..cell.end)
    }

    /// Where the whole row stands.
    pub(super) fn whole(self) -> Spot {
        let start = self.fields.first().map_or(0, |cell| cell.start);
        let end = self.fields.last().map_or(start, |cell| cell.end);
        Spot::new(self.file, start..end)
    }

    /// Whether the row has as many fields as the header; otherwise a fault.
    pub(super) fn is_as_wide_as(self, header: usize, faults: &mut Collector) -> bool {
        if self.len() == header {
            return true;
        }
        let rule =
            format!("each row has {header} fields, like the header; this has {}", self.len());
        faults.fault(self.whole(), rule, "add or take away commas");
        false
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn split(text: &str) -> (Vec<Vec<String>>, usize) {
        let mut faults = Collector::default();
        let mut rows = Rows::new(1, text);
        let mut all = Vec::new();
        while let Some(row) = rows.next(&mut faults) {
            all.push((0..row.len()).map(|index| row.field(index).into_owned()).collect());
        }
        (all, faults.total())
    }

    #[test]
    fn splits_what_rfc_4180_allows() {
        let (rows, faults) =
            split("\u{feff}a, b ,c\r\n\r\n# remark\n\"x,\"\"y\"\"\",,\"two\nlines\"\nlast,1,");
        let expected: [&[&str]; 3] =
            [&["a", "b", "c"], &["x,\"y\"", "", "two\nlines"], &["last", "1", ""]];
        assert_eq!(faults, 0);
        assert_eq!(rows.len(), expected.len());
        for (row, expected) in rows.iter().zip(expected) {
            assert_eq!(row, expected);
        }
    }

    #[test]
    fn fields_beyond_the_widest_table_are_counted() {
        let mut faults = Collector::default();
        let text = ",".repeat(1_000_000);
        let mut rows = Rows::new(1, &text);
        let row = rows.next(&mut faults).expect("a row");
        assert_eq!((row.len(), row.fields.len(), row.is_too_wide()), (1_000_001, 256, true));
        assert_eq!(row.field(1_000_000), "");
        assert!(!row.is_as_wide_as(2, &mut faults));
        assert!(rows.next(&mut faults).is_none());
    }

    #[test]
    fn a_broken_quote_costs_one_row() {
        assert_eq!(split("a,b\n\"x\"y,1\nz,2\n").1, 1);
        assert_eq!(split("a,b\n\"x\"y,1\nz,2\n").0.len(), 2);
        assert_eq!(split("a,b\n\"x").1, 1);
        assert_eq!(split("").0.len(), 0);
    }
}
