//! What a person prefers to see, in a file of their own: units, columns, colour, marks and
//! width. It is for the text form and the desk only, and no value depends on it.
//!
//! ```toml
//! colour = "never"                  # auto, always or never
//! marks = "ascii"                   # auto, ascii or unicode
//! width = 100                       # columns of the text form, 40 or more
//!
//! [units]
//! clock_offset = "ps"
//!
//! [columns]
//! rates = ["node", "rate_minus_one", "clock_offset_s"]
//! ```

use std::ops::Range;

use toml::Spanned;
use toml::de::{DeTable, DeValue};

use super::choose::{Units, read_columns};
use crate::layout::fault::{Collector, Faults, Spot};
use crate::layout::nearest::nearest;
use crate::layout::parse_toml;
use crate::layout::quantity::short;

/// Narrowest and widest text that may be asked for, columns.
const WIDTHS: std::ops::RangeInclusive<usize> = 40..=1000;

/// Keys at the top of the file.
const KEYS: [&str; 5] = ["colour", "marks", "width", "units", "columns"];

/// Commands whose columns may be chosen.
const COMMANDS: [&str; 12] = [
    "check",
    "rates",
    "offsets",
    "loads",
    "links",
    "reach",
    "steer",
    "budget",
    "compare",
    "replay",
    "verify",
    "reconcile",
];

/// What a person prefers to see.
#[derive(Clone, Debug, Default)]
pub struct Preferences {
    /// When to use colour: `auto`, `always` or `never`.
    pub colour: Option<Colour>,
    /// The signs things are drawn and written with.
    pub marks: Option<Marks>,
    /// Columns of the text form.
    pub width: Option<usize>,
    /// Units of columns, by key.
    pub units: Units,
    /// Keys of the columns to show, by command.
    columns: Vec<(&'static str, Vec<String>)>,
    places: Places,
}

/// When to use colour.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Colour {
    /// As environment and terminal say.
    Auto,
    /// Always.
    Always,
    /// Never.
    Never,
}

/// The signs things are drawn and written with.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Marks {
    /// As the locale says.
    Auto,
    /// ASCII only.
    Ascii,
    /// Unicode whatever the locale says.
    Unicode,
}

/// Where in the file each wish stands, to be told when it cannot be met.
#[derive(Clone, Debug, Default)]
struct Places {
    file_name: String,
    text: String,
    units: Vec<(String, Spot)>,
    columns: Vec<(String, Spot)>,
}

impl Places {
    fn fault(&self, spot: Spot, rule: &str, remedy: &str) -> Faults {
        let mut collector = Collector::default();
        collector.fault(spot, rule, remedy);
        collector.into_faults(&[(&self.file_name, &self.text)]).unwrap_or_default()
    }
}

impl Preferences {
    /// Reads preferences from their text; `file_name` only serves the messages.
    ///
    /// # Errors
    ///
    /// Every fault, with its place, rule and remedy.
    pub fn read(file_name: &str, text: &str) -> Result<Preferences, Faults> {
        let mut faults = Collector::default();
        let root = parse_toml(text, &mut faults);
        let mut read = Preferences::default();
        read.places.file_name = file_name.to_owned();
        read.places.text = text.to_owned();
        if !faults.has_syntax() {
            read.take_in(root.get_ref(), &mut faults);
        }
        match faults.into_faults(&[(file_name, text)]) {
            Some(faults) => Err(faults),
            None => Ok(read),
        }
    }

    /// The columns to show of a command.
    #[must_use]
    pub fn columns_of(&self, command: &str) -> Option<&[String]> {
        let (_, keys) = self.columns.iter().find(|(known, _)| *known == command)?;
        Some(keys)
    }

    /// A wish for a unit that cannot be met, with its place.
    #[must_use]
    pub fn unmet_unit(&self, key: &str, rule: &str, remedy: &str) -> Faults {
        self.places.fault(spot_of(&self.places.units, key), rule, remedy)
    }

    /// A wish for columns of a command that cannot be met, with its place.
    #[must_use]
    pub fn unmet_columns(&self, command: &str, rule: &str, remedy: &str) -> Faults {
        self.places.fault(spot_of(&self.places.columns, command), rule, remedy)
    }

    fn take_in(&mut self, root: &DeTable<'_>, faults: &mut Collector) {
        for (key, value) in root {
            match &**key.get_ref() {
                "colour" => {
                    let words = [
                        ("auto", Colour::Auto),
                        ("always", Colour::Always),
                        ("never", Colour::Never),
                    ];
                    self.colour = one_of("colour", value, &words, faults);
                }
                "marks" => {
                    let words = [
                        ("auto", Marks::Auto),
                        ("ascii", Marks::Ascii),
                        ("unicode", Marks::Unicode),
                    ];
                    self.marks = one_of("marks", value, &words, faults);
                }
                "width" => self.width = width(value, faults),
                "units" => self.take_in_units(value, faults),
                "columns" => self.take_in_columns(value, faults),
                other => {
                    let rule = format!("`{}` is not a key of the preferences", short(other));
                    faults.fault(at(key.span()), rule, remedy_for_key(other, &KEYS));
                }
            }
        }
    }

    fn take_in_units(&mut self, value: &Spanned<DeValue<'_>>, faults: &mut Collector) {
        let Some(table) = table("[units]", value, faults) else { return };
        for (key, value) in table {
            let key: &str = key.get_ref();
            let spot = at(value.span());
            let DeValue::String(unit) = value.get_ref() else {
                let rule = "a unit is a text";
                faults.fault(spot, rule, "write for example `clock_offset = \"ps\"`");
                continue;
            };
            match self.units.ask(key, unit) {
                Ok(()) => self.places.units.push((key.to_owned(), spot)),
                Err(fault) => faults.fault(spot, fault.rule, fault.remedy),
            }
        }
    }

    fn take_in_columns(&mut self, value: &Spanned<DeValue<'_>>, faults: &mut Collector) {
        let Some(table) = table("[columns]", value, faults) else { return };
        for (key, value) in table {
            let name: &str = key.get_ref();
            let Some(command) = COMMANDS.iter().find(|command| **command == name) else {
                let rule = format!("`{}` is not a command with columns", short(name));
                faults.fault(at(key.span()), rule, remedy_for_key(name, &COMMANDS));
                continue;
            };
            let spot = at(value.span());
            match list(value) {
                Ok(keys) => {
                    self.columns.push((command, keys));
                    self.places.columns.push((name.to_owned(), spot));
                }
                Err((rule, remedy)) => faults.fault(spot, rule, remedy),
            }
        }
    }
}

fn at(span: Range<usize>) -> Spot {
    Spot::new(0, span)
}

fn spot_of(places: &[(String, Spot)], key: &str) -> Spot {
    places.iter().find(|(known, _)| known == key).map_or(Spot::default(), |(_, spot)| *spot)
}

fn remedy_for_key(name: &str, known: &[&str]) -> String {
    match nearest(name, known.iter().copied()) {
        Some(meant) => format!("write `{meant}`"),
        None => format!("take it away; keys here: {}", known.join(" ")),
    }
}

fn table<'t, 'i>(
    title: &str,
    value: &'t Spanned<DeValue<'i>>,
    faults: &mut Collector,
) -> Option<&'t DeTable<'i>> {
    if let DeValue::Table(table) = value.get_ref() {
        return Some(table);
    }
    let rule = format!("`{title}` is a header with keys below it");
    faults.fault(at(value.span()), rule, format!("write {title} on a line of its own"));
    None
}

fn one_of<T: Copy>(
    key: &str,
    value: &Spanned<DeValue<'_>>,
    words: &[(&str, T)],
    faults: &mut Collector,
) -> Option<T> {
    if let DeValue::String(text) = value.get_ref()
        && let Some((_, chosen)) = words.iter().find(|(word, _)| word == text)
    {
        return Some(*chosen);
    }
    let all: Vec<String> = words.iter().map(|(word, _)| format!("\"{word}\"")).collect();
    let rule = format!("`{key}` is {}", all.join(" or "));
    faults.fault(at(value.span()), rule, format!("write for example `{key} = {}`", all[0]));
    None
}

fn width(value: &Spanned<DeValue<'_>>, faults: &mut Collector) -> Option<usize> {
    if let DeValue::Integer(digits) = value.get_ref()
        && digits.radix() == 10
        && let Ok(width) = digits.as_str().parse()
        && WIDTHS.contains(&width)
    {
        return Some(width);
    }
    let rule =
        format!("`width` is a whole number of columns from {} to {}", WIDTHS.start(), WIDTHS.end());
    faults.fault(at(value.span()), rule, "write for example `width = 100`");
    None
}

/// A list of keys of columns.
fn list(value: &Spanned<DeValue<'_>>) -> Result<Vec<String>, (String, String)> {
    let wrong = || {
        (
            "columns are a list of their keys".to_owned(),
            "write for example `rates = [\"node\", \"rate_minus_one\"]`".to_owned(),
        )
    };
    let DeValue::Array(array) = value.get_ref() else { return Err(wrong()) };
    let mut keys: Vec<&str> = Vec::new();
    for item in array.iter() {
        let DeValue::String(key) = item.get_ref() else { return Err(wrong()) };
        keys.push(key);
    }
    read_columns(&keys.join(",")).map_err(|fault| (fault.rule, fault.remedy))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn everything_may_be_preferred() {
        let text = "colour = \"never\"\nmarks = \"ascii\"\nwidth = 100\n\
                    [units]\nclock_offset = \"ps\"\nposition_m = \"µm\"\n\
                    [columns]\nrates = [\"node\", \"redshift\"]\n";
        let read = Preferences::read("p.toml", text).expect("no fault");
        assert_eq!(read.colour, Some(Colour::Never));
        assert_eq!(read.marks, Some(Marks::Ascii));
        assert_eq!(read.width, Some(100));
        let units: Vec<_> = read.units.iter().collect();
        assert_eq!(units, [("clock_offset", "ps"), ("position_m", "um")]);
        assert_eq!(read.columns_of("rates"), Some(&["node".to_owned(), "redshift".to_owned()][..]));
        assert_eq!(read.columns_of("check"), None);
        assert!(Preferences::read("p.toml", "").is_ok());
    }

    #[test]
    fn faults_are_told_with_their_places() {
        for (text, place, part) in [
            ("color = \"never\"", "line 1, column 1", "write `colour`"),
            ("\nwidth = 3", "line 2, column 9", "from 40 to 1000"),
            ("marks = \"braille\"", "line 1, column 9", "\"ascii\""),
            ("[units]\nclock_offset = \"psec\"", "line 2, column 16", "not a unit"),
            ("[units]\nclock_offset = 3", "line 2, column 16", "a unit is a text"),
            ("[columns]\nrate = [\"node\"]", "line 2, column 1", "write `rates`"),
            ("[columns]\nrates = [\"node\", \"node\"]", "line 2, column 9", "shown once"),
            ("[columns]\nrates = []", "line 2, column 9", "separated by commas"),
            ("units = 3", "line 1, column 9", "[units]"),
            ("colour = ", "line 1", "rule: "),
            ("a\u{1b}[2J = 1", "line 1", "rule: "),
        ] {
            let told = Preferences::read("p.toml", text).expect_err(text).to_string();
            assert!(told.starts_with(&format!("p.toml, {place}")), "{text:?}: {told}");
            assert!(told.contains(part), "{text:?}: {told}");
            assert!(!told.contains('\u{1b}'), "{text:?}");
        }
    }
}
