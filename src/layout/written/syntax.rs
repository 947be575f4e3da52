//! Faults of TOML syntax, in our own words.

use std::collections::HashMap;
use std::ops::Range;

use toml::Spanned;
use toml::de::DeTable;

use super::keys;
use crate::layout::fault::{Collector, Spot};
use crate::layout::quantity::short;

/// Up to this size every fault of syntax is looked for; of a longer file the first.
const ALL_SYNTAX_UP_TO: usize = 1 << 20;

/// Faults of syntax that are told apart; the others are counted.
const MOST_TOLD: usize = 1000;

const UNQUOTED: &str = "string values must be quoted";
const DUPLICATE: &str = "duplicate key";
const OPEN_LIST: &str = "unexpected `=` in array";

/// Parses a text, noting what is not TOML in it. What could be understood all the same is
/// returned.
pub(crate) fn parse<'i>(text: &'i str, faults: &mut Collector) -> Spanned<DeTable<'i>> {
    let (root, errors) = if text.len() <= ALL_SYNTAX_UP_TO {
        DeTable::parse_recoverable(text)
    } else {
        match DeTable::parse(text) {
            Ok(root) => (root, Vec::new()),
            Err(error) => (Spanned::new(0..0, DeTable::new()), vec![error]),
        }
    };
    let end = text.len()..text.len();
    let mut errors: Vec<_> =
        errors.into_iter().map(|error| (error.span().unwrap_or(end.clone()), error)).collect();
    errors.sort_by_key(|(span, _)| span.start);
    let untold = errors.len().saturating_sub(MOST_TOLD);
    errors.truncate(MOST_TOLD);
    if errors.is_empty() {
        return root;
    }
    let lines = Lines::of(text);
    let found = errors.iter().map(|(span, error)| Found {
        message: error.message(),
        span: span.clone(),
        line: lines.start_of(span.start),
    });
    for found in essential(text, &lines, found.collect()) {
        let marked = text.get(found.span.clone()).unwrap_or("");
        let (rule, remedy) = words_for(found.message, marked);
        faults.syntax(Spot::new(0, found.span), rule, remedy);
    }
    faults.count_more(0, untold);
    root
}

/// Where the lines of a text begin, and those of them that are headers.
struct Lines {
    starts: Vec<usize>,
    headers: Vec<usize>,
}

impl Lines {
    fn of(text: &str) -> Lines {
        let newlines = text.bytes().enumerate().filter(|(_, byte)| *byte == b'\n');
        let starts: Vec<usize> = std::iter::once(0).chain(newlines.map(|(at, _)| at + 1)).collect();
        let is_header = |start: &usize| text.as_bytes().get(*start) == Some(&b'[');
        let headers = starts.iter().copied().filter(is_header).collect();
        Lines { starts, headers }
    }

    /// Where the line of a place begins.
    fn start_of(&self, at: usize) -> usize {
        let after = self.starts.partition_point(|start| *start <= at);
        self.starts[after.saturating_sub(1)]
    }

    /// Where the nearest header above a line begins.
    fn header_above(&self, line: usize) -> Option<usize> {
        let after = self.headers.partition_point(|start| *start < line);
        self.headers.get(after.checked_sub(1)?).copied()
    }
}

/// A fault as the parser tells it.
struct Found<'e> {
    message: &'e str,
    span: Range<usize>,
    /// Where its line begins.
    line: usize,
}

/// Leaves out what only follows from another fault: all but the first fault of a line,
/// and keys that are doubled because the header above them is broken. Texts without
/// quotes are all kept.
fn essential<'e>(text: &str, starts: &Lines, found: Vec<Found<'e>>) -> Vec<Found<'e>> {
    let mut lines: HashMap<usize, (bool, bool)> = HashMap::new();
    for fault in &found {
        let (unquoted, open_list) = lines.entry(fault.line).or_default();
        *unquoted |= fault.message.starts_with(UNQUOTED);
        *open_list |= fault.message.starts_with(OPEN_LIST);
    }
    let is_broken = |line: usize| lines.contains_key(&line);
    let mut last_line = None;
    let mut keep = |fault: &Found| {
        let (unquoted, open_list) = lines.get(&fault.line).copied().unwrap_or_default();
        let is_first = last_line != Some(fault.line);
        let kept = if open_list {
            fault.message.starts_with(OPEN_LIST) && is_first
        } else if unquoted {
            fault.message.starts_with(UNQUOTED)
        } else if fault.message == DUPLICATE && !text[fault.line..].starts_with('[') {
            is_first && !starts.header_above(fault.line).is_some_and(is_broken)
        } else {
            is_first
        };
        if kept {
            last_line = Some(fault.line);
        }
        kept
    };
    found.into_iter().filter(|fault| keep(fault)).collect()
}

/// The rule and the remedy for a fault of syntax.
fn words_for(message: &str, marked: &str) -> (String, String) {
    if message == DUPLICATE {
        return match keys::TABLES.iter().find(|kind| kind.key == marked) {
            Some(kind) if kind.title.starts_with("[[") => (
                format!("each {} has its own header", kind.title),
                format!("write {}, with two brackets on either side", kind.title),
            ),
            _ => (
                format!("`{}` is stated once", short(marked)),
                "take one of the two away".to_owned(),
            ),
        };
    }
    let (what, expected) = message.split_once(", expected ").unwrap_or((message, ""));
    let known: Option<(&str, &str)> = match what {
        UNQUOTED => {
            let rule = "texts, and quantities with a unit, stand in quotes";
            return (rule.to_owned(), format!("write `\"{}\"`", short(marked)));
        }
        OPEN_LIST => Some(("a list ends with `]`", "close the list above with `]`")),
        "extra `=`" => Some(("one `=` stands between a key and its value", "take this `=` away")),
        "unexpected key or value" => {
            Some(("each `key = value` has a line of its own", "begin a new line here"))
        }
        "key with no value" | "missing value for key" | "missing value" => {
            Some(("a key has a value, `key = value`", "write the value, or take the key away"))
        }
        "missing assignment between key-value pairs" => {
            Some(("a key has a value, `key = value`", "put `=` between them"))
        }
        "invalid basic string" | "invalid literal string" if expected.contains("characters") => {
            Some(("a text holds visible characters", "take the invisible one away"))
        }
        "invalid comment character" => {
            Some(("a remark holds visible characters", "take the invisible one away"))
        }
        "invalid basic string" => {
            Some(("a text ends with the quote it begins with", "close the text with `\"`"))
        }
        "invalid literal string" => {
            Some(("a text ends with the quote it begins with", "close the text with `'`"))
        }
        "unclosed table" => Some(("a header ends like it begins", "close it with `]`")),
        "unclosed array table" => Some(("a header ends like it begins", "close it with `]]`")),
        "unclosed array" => Some(("a list ends with `]`", "close the list with `]`")),
        "unclosed inline table" => {
            Some(("a table in braces ends with `}`", "close the table with `}`"))
        }
        "missing comma between array elements" | "missing comma between key-value pairs" => {
            Some(("a comma stands between two entries", "put a comma here"))
        }
        "extra comma in array" | "extra comma in inline table" => {
            Some(("one comma stands between two entries", "take this comma away"))
        }
        "invalid unquoted key" | "unquoted keys cannot be empty" => {
            Some(("a key is made of letters, digits, `_` and `-`", "write a key of these"))
        }
        "`_` may only go between digits" => {
            Some(("`_` in a number stands between two digits", "take this `_` away"))
        }
        "unexpected leading zero" => {
            Some(("a number without quotes begins with one zero at most", "take the zero away"))
        }
        "invalid mantissa" | "invalid fraction" | "invalid exponent" => Some((
            "digits stand on both sides of a decimal point, and after `e`",
            "write for example `0.5` or `1e-16`",
        )),
        _ if what.contains("recursion") || what.contains("recurse") => {
            Some(("lists and tables are nested at most 80 deep", "take the brackets away"))
        }
        _ => None,
    };
    if let Some((rule, remedy)) = known {
        return (rule.to_owned(), remedy.to_owned());
    }
    let remedy = match expected {
        "" => "see the TOML format, toml.io".to_owned(),
        "nothing" => "take away what is marked".to_owned(),
        one_of => format!("expected here: {one_of}"),
    };
    (format!("a layout is a TOML file, and this is not TOML: {what}"), remedy)
}
