//! Faults of an input file, all at once, each with its place.

use std::fmt;
use std::ops::Range;

use super::names::{columns, made_safe, safe_char};

/// Faults shown of one file; the others are counted.
const MOST_SHOWN: usize = 1000;

/// Faults shown of one table of positions or accelerations, which may have a fault on
/// every one of a million lines for one and the same reason.
const MOST_SHOWN_OF_A_TABLE: usize = 20;

/// Faults kept of one file before they are sorted.
const MOST_KEPT: usize = 10_000;

/// Characters of a line shown before a fault, and from its first character on.
const SHOWN_BEFORE: usize = 50;
const SHOWN_FROM: usize = 70;

/// A fault of an input file: where it is, what holds there and what would be right.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Fault {
    /// Name of the file, made safe.
    pub file: String,
    /// Line, from 1.
    pub line: usize,
    /// Column, from 1, in characters.
    pub column: usize,
    /// Bytes of the file it is about.
    pub span: Range<usize>,
    /// The line, made safe; of a long line the part around the fault.
    pub source_line: String,
    /// The columns of `source_line` to be marked, from 0.
    pub marks: Range<usize>,
    /// What holds.
    pub rule: String,
    /// What would be right.
    pub remedy: String,
}

impl fmt::Display for Fault {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        writeln!(f, "{}, line {}, column {}", self.file, self.line, self.column)?;
        writeln!(f, "    {}", self.source_line)?;
        writeln!(f, "    {}{}", " ".repeat(self.marks.start), "^".repeat(self.marks.len()))?;
        writeln!(f, "rule: {}", self.rule)?;
        writeln!(f, "remedy: {}", self.remedy)
    }
}

/// All faults found in a layout and the files it names, in the order of their places:
/// the layout first, then its tables.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct Faults {
    shown: Vec<Fault>,
    /// Files with more faults than are shown, and how many more.
    untold: Vec<(String, usize)>,
}

impl Faults {
    /// The faults that are shown.
    #[must_use]
    pub fn shown(&self) -> &[Fault] {
        &self.shown
    }

    /// How many faults were found, shown or not.
    #[must_use]
    pub fn count(&self) -> usize {
        self.shown.len() + self.untold.iter().map(|(_, count)| count).sum::<usize>()
    }
}

impl fmt::Display for Faults {
    /// Each fault in its own paragraph, then a line with their count.
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        for fault in &self.shown {
            writeln!(f, "{fault}")?;
        }
        for (file, count) in &self.untold {
            writeln!(f, "and {count} more in {file}")?;
        }
        match self.count() {
            1 => write!(f, "1 fault"),
            count => write!(f, "{count} faults"),
        }
    }
}

impl std::error::Error for Faults {}

/// A place in one of the texts being read. Texts are shorter than 4 GiB.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, PartialOrd, Ord)]
pub(crate) struct Spot {
    /// Which text: 0 is the layout.
    pub(crate) file: u32,
    pub(crate) start: u32,
    pub(crate) end: u32,
}

impl Spot {
    pub(crate) fn new(file: u32, span: Range<usize>) -> Spot {
        let narrow = |at: usize| u32::try_from(at).unwrap_or(u32::MAX);
        Spot { file, start: narrow(span.start), end: narrow(span.end.max(span.start)) }
    }

    /// A part of this place, by bytes from its start.
    pub(crate) fn part(self, range: &Range<usize>) -> Spot {
        let start = self.start as usize;
        let part = Spot::new(self.file, start + range.start..start + range.end);
        Spot { end: part.end.min(self.end), start: part.start.min(self.end), ..part }
    }
}

/// A fault before its place was looked up.
#[derive(Debug)]
struct Found {
    spot: Spot,
    rule: String,
    remedy: String,
    /// A fault of syntax, after which the same lines are not judged for meaning.
    syntax: bool,
}

/// Gathers faults while files are read.
#[derive(Debug, Default)]
pub(crate) struct Collector {
    found: Vec<Found>,
    /// How many were found in each file, kept or not.
    counts: Vec<usize>,
}

impl Collector {
    /// Notes a fault.
    pub(crate) fn fault(&mut self, spot: Spot, rule: impl Into<String>, remedy: impl Into<String>) {
        self.note(spot, rule, remedy, false);
    }

    /// Notes a fault of syntax.
    pub(crate) fn syntax(
        &mut self,
        spot: Spot,
        rule: impl Into<String>,
        remedy: impl Into<String>,
    ) {
        self.note(spot, rule, remedy, true);
    }

    fn note(
        &mut self,
        spot: Spot,
        rule: impl Into<String>,
        remedy: impl Into<String>,
        syntax: bool,
    ) {
        let file = spot.file as usize;
        if self.counts.len() <= file {
            self.counts.resize(file + 1, 0);
        }
        self.counts[file] += 1;
        if self.counts[file] <= MOST_KEPT {
            self.found.push(Found { spot, rule: rule.into(), remedy: remedy.into(), syntax });
        }
    }

    /// Counts faults of a file that are not told one by one.
    pub(crate) fn count_more(&mut self, file: usize, count: usize) {
        if count > 0 {
            self.counts.resize(self.counts.len().max(file + 1), 0);
            self.counts[file] += count;
        }
    }

    /// Whether nothing was found.
    pub(crate) fn is_empty(&self) -> bool {
        self.total() == 0
    }

    /// How many were found.
    pub(crate) fn total(&self) -> usize {
        self.counts.iter().sum()
    }

    /// Whether a fault of syntax was found.
    pub(crate) fn has_syntax(&self) -> bool {
        self.found.iter().any(|found| found.syntax)
    }

    /// Drops what was found wrong in meaning on lines whose syntax is wrong, or nowhere.
    pub(crate) fn keep_what_syntax_leaves(&mut self, text: &str) {
        let line_of = |spot: Spot| {
            let before = floor_boundary(text, spot.start as usize);
            let after = floor_boundary(text, (spot.end as usize).max(before));
            let start = text[..before].rfind('\n').map_or(0, |at| at + 1);
            let end = text[after..].find('\n').map_or(text.len(), |at| after + at);
            (start, end)
        };
        let syntax = self.found.iter().filter(|found| found.syntax);
        let mut starts: Vec<u32> = syntax.clone().map(|found| found.spot.start).collect();
        let mut lines: Vec<(usize, usize)> = syntax.map(|found| line_of(found.spot)).collect();
        starts.sort_unstable();
        lines.sort_unstable();
        let before = self.found.len();
        self.found.retain(|found| {
            let Spot { start, end, .. } = found.spot;
            let nowhere = end == 0;
            let holds_one =
                starts.partition_point(|at| *at < start) < starts.partition_point(|at| *at < end);
            let next = lines.partition_point(|(from, _)| *from <= start as usize);
            let on_line = next > 0 && start as usize <= lines[next - 1].1;
            found.syntax || !(nowhere || holds_one || on_line)
        });
        if let Some(count) = self.counts.first_mut() {
            *count -= before - self.found.len();
        }
    }

    /// The faults with their places in the texts, given as names and contents; `None`
    /// when there are none.
    pub(crate) fn into_faults(mut self, texts: &[(&str, &str)]) -> Option<Faults> {
        if self.is_empty() {
            return None;
        }
        self.found.sort_by_key(|found| found.spot);
        let mut shown = Vec::new();
        let mut untold = Vec::new();
        for (file, (name, text)) in texts.iter().enumerate() {
            let most = if file == 0 { MOST_SHOWN } else { MOST_SHOWN_OF_A_TABLE };
            let mut locator = Locator::new(text);
            let here =
                self.found.iter().filter(|found| found.spot.file as usize == file).take(most);
            let before = shown.len();
            shown.extend(here.map(|found| locator.fault(name, found)));
            let more = self.counts.get(file).copied().unwrap_or(0) - (shown.len() - before);
            if more > 0 {
                untold.push((made_safe(name), more));
            }
        }
        Some(Faults { shown, untold })
    }
}

/// The nearest place at or before a byte where a character begins.
fn floor_boundary(text: &str, at: usize) -> usize {
    let mut at = at.min(text.len());
    while !text.is_char_boundary(at) {
        at -= 1;
    }
    at
}

/// Finds lines and columns of places in rising order, reading the text once.
struct Locator<'t> {
    text: &'t str,
    at: usize,
    line: usize,
    line_start: usize,
    column: usize,
}

impl<'t> Locator<'t> {
    fn new(text: &'t str) -> Locator<'t> {
        let start = if text.starts_with('\u{feff}') { '\u{feff}'.len_utf8() } else { 0 };
        Locator { text, at: start, line: 1, line_start: start, column: 1 }
    }

    fn move_to(&mut self, to: usize) {
        let to = floor_boundary(self.text, to).max(self.at);
        let passed = &self.text[self.at..to];
        if let Some(last) = passed.rfind('\n') {
            self.line += memchr::memchr_iter(b'\n', passed.as_bytes()).count();
            self.line_start = self.at + last + 1;
            self.column = 1 + self.text[self.line_start..to].chars().count();
        } else {
            self.column += passed.chars().count();
        }
        self.at = to;
    }

    fn fault(&mut self, file: &str, found: &Found) -> Fault {
        let span = found.spot.start as usize..found.spot.end as usize;
        self.move_to(span.start);
        let before = &self.text[self.line_start..self.at];
        let mut backwards = before.char_indices().rev();
        let from = backwards.nth(SHOWN_BEFORE - 1).map_or(0, |(at, _)| at);
        let cut_before = backwards.next().is_some();
        let after = &self.text[self.at..];
        let line_end = after
            .char_indices()
            .take(SHOWN_FROM + 1)
            .find(|(at, letter)| *letter == '\n' || after[*at..].starts_with("\r\n"));
        let window = after.char_indices().nth(SHOWN_FROM).map(|(at, _)| at);
        let (to, cut) = match (line_end, window) {
            (Some((at, _)), _) => (at, false),
            (None, Some(at)) => (at, true),
            (None, None) => (after.len(), false),
        };
        let mut source_line = String::new();
        if cut_before {
            source_line.push('…');
        }
        source_line.extend(before[from..].chars().map(safe_char));
        let marks_start = columns(&source_line);
        let marked = floor_boundary(after, span.len().min(to));
        let marks_length = columns(&made_safe(&after[..marked])).max(1);
        source_line.extend(after[..to].chars().map(safe_char));
        if cut {
            source_line.push('…');
        }
        Fault {
            file: made_safe(file),
            line: self.line,
            column: self.column,
            span,
            source_line,
            marks: marks_start..marks_start + marks_length,
            rule: made_safe(&found.rule),
            remedy: made_safe(&found.remedy),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn one(text: &str, span: Range<usize>) -> Fault {
        let mut faults = Collector::default();
        faults.fault(Spot::new(0, span), "what holds", "what would be right");
        let faults = faults.into_faults(&[("a.toml", text)]).expect("one fault");
        faults.shown()[0].clone()
    }

    #[test]
    fn marks_stand_under_the_spot() {
        let text = "one\r\nßé 灯 = \t\u{1b}x\n";
        let start = text.find('灯').expect("the letter");
        let fault = one(text, start..start + 3);
        assert_eq!((fault.line, fault.column, fault.marks.clone()), (2, 4, 3..5));
        assert_eq!(fault.source_line, "ßé 灯 =  \u{fffd}x");
        assert_eq!(
            fault.to_string(),
            "a.toml, line 2, column 4\n    ßé 灯 =  \u{fffd}x\n       ^^\nrule: what holds\nremedy: what would be right\n"
        );
    }

    #[test]
    fn the_end_of_a_text_has_a_place() {
        let fault = one("a = ", 4..4);
        assert_eq!((fault.line, fault.column, fault.marks), (1, 5, 4..5));
        let fault = one("", 7..9);
        assert_eq!((fault.line, fault.column, fault.marks), (1, 1, 0..1));
        let fault = one("a\n", 2..2);
        assert_eq!((fault.line, fault.column), (2, 1));
    }

    #[test]
    fn a_long_line_is_shown_around_the_spot() {
        let text = format!("{}HERE{}", "a".repeat(1_000_000), "b".repeat(1_000_000));
        let fault = one(&text, 1_000_000..1_000_004);
        assert_eq!(fault.column, 1_000_001);
        assert_eq!(fault.source_line.chars().count(), 1 + SHOWN_BEFORE + SHOWN_FROM + 1);
        assert_eq!(
            &fault.source_line[fault.source_line.find("HERE").expect("shown")..][..4],
            "HERE"
        );
        let marked: String =
            fault.source_line.chars().skip(fault.marks.start).take(fault.marks.len()).collect();
        assert_eq!(marked, "HERE");
    }

    #[test]
    fn faults_beyond_the_first_are_counted() {
        let mut faults = Collector::default();
        for _ in 0..50_000 {
            faults.fault(Spot::new(1, 0..1), "rule", "remedy");
        }
        let faults = faults.into_faults(&[("a.toml", "x"), ("b.csv", "y")]).expect("faults");
        assert_eq!((faults.count(), faults.shown().len()), (50_000, MOST_SHOWN_OF_A_TABLE));
        assert!(faults.to_string().ends_with("\nand 49980 more in b.csv\n50000 faults"));
    }
}
