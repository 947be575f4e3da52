//! One table of a layout file: its keys by type, with a fault for each that is wrong.

use std::ops::Range;

use toml::Spanned;
use toml::de::{DeTable, DeValue};

use super::keys::{Kind, TABLES};
use super::{Field, SHAPES};
use crate::layout::Uncertainty;
use crate::layout::fault::{Collector, Spot};
use crate::layout::names::{self, Wrong};
use crate::layout::nearest::nearest;
use crate::layout::quantity::{self, Dimension, QuantityFault, short};
use crate::model::array_time::ArrayTime;

/// The range a number has to lie in.
#[derive(Clone, Copy, Debug)]
pub(crate) enum Bound {
    /// Any finite number.
    Any,
    /// Zero or more.
    NotNegative,
    /// More than zero.
    Positive,
    /// One or more.
    AtLeastOne,
    /// At most this, either sign; the text says what the limit is.
    Within(f64, &'static str),
    /// More than zero and at most this.
    PositiveUpTo(f64, &'static str),
}

impl Bound {
    /// What would be inside, in words.
    pub(crate) fn remedy(self) -> &'static str {
        match self {
            Bound::Any => "write a number",
            Bound::NotNegative => "take the minus away, or write 0",
            Bound::Positive => "write a value above zero, or leave the key out",
            Bound::AtLeastOne => "write 1 or more, or leave the key out",
            Bound::Within(..) | Bound::PositiveUpTo(..) => "write a value inside this range",
        }
    }

    /// What is broken by a value, in words; `None` when it is inside.
    pub(crate) fn broken_by(self, value: f64) -> Option<String> {
        match self {
            Bound::Any => None,
            Bound::NotNegative => (value < 0.0).then(|| "is zero or more".to_owned()),
            Bound::Positive => (value <= 0.0).then(|| "is more than zero".to_owned()),
            Bound::AtLeastOne => (value < 1.0).then(|| "is 1 or more".to_owned()),
            Bound::Within(most, words) => {
                (value.abs() > most).then(|| format!("is at most {words}, either sign"))
            }
            Bound::PositiveUpTo(most, words) => (value <= 0.0 || value > most)
                .then(|| format!("is more than zero and at most {words}")),
        }
    }
}

/// A table being read.
pub(crate) struct Section<'a, 'i> {
    text: &'i str,
    table: &'a DeTable<'i>,
    pub(crate) spot: Spot,
    kind: &'static Kind,
    /// Known keys that were meant by misspelt ones: they are not missing.
    meant: Vec<&'static str>,
    pub(crate) faults: &'a mut Collector,
}

impl<'a, 'i> Section<'a, 'i> {
    /// Opens a table; keys it does not know are faults.
    pub(crate) fn open(
        text: &'i str,
        table: &'a DeTable<'i>,
        span: Range<usize>,
        kind: &'static Kind,
        faults: &'a mut Collector,
    ) -> Section<'a, 'i> {
        let mut meant = Vec::new();
        for (key, _) in table {
            let name: &str = key.get_ref();
            if kind.keys.contains(&name) {
                continue;
            }
            let nearest = nearest(name, kind.keys.iter().copied());
            let rule = format!("`{}` is not a key of {}", short(name), kind.title);
            let remedy = remedy_for_key(name, nearest, kind);
            faults.fault(Spot::new(0, key.span()), rule, remedy);
            meant.extend(nearest);
        }
        Section { text, table, spot: Spot::new(0, span), kind, meant, faults }
    }

    /// A table whose keys were judged before.
    pub(crate) fn quiet(
        text: &'i str,
        table: &'a DeTable<'i>,
        kind: &'static Kind,
        faults: &'a mut Collector,
    ) -> Section<'a, 'i> {
        Section { text, table, spot: Spot::default(), kind, meant: Vec::new(), faults }
    }

    /// The text of the file at a place.
    pub(crate) fn text_at(&self, span: Range<usize>) -> &'i str {
        self.text.get(span).unwrap_or("")
    }

    pub(crate) fn get(&self, key: &str) -> Option<&'a Spanned<DeValue<'i>>> {
        debug_assert!(self.kind.keys.contains(&key), "{key} is missing in the list of keys");
        self.table.get(key)
    }

    /// The field of a key that is not there; one that was misspelt is faulty instead.
    fn absent<T>(&self, key: &str) -> Field<T> {
        if self.meant.contains(&key) { Field::Faulty } else { Field::Absent }
    }

    pub(crate) fn has(&self, key: &str) -> bool {
        self.get(key).is_some()
    }

    /// Notes a fault about a value.
    pub(crate) fn fault_at(
        &mut self,
        span: Range<usize>,
        rule: impl Into<String>,
        remedy: impl Into<String>,
    ) {
        self.faults.fault(Spot::new(0, span), rule, remedy);
    }

    /// Notes that a key is missing, unless broken syntax may have swallowed it.
    pub(crate) fn missing(&mut self, key: &str, example: &str) {
        if !self.faults.has_syntax() && !self.meant.contains(&key) {
            let rule = format!("{} states its `{key}`", self.kind.title);
            self.faults.fault(self.spot, rule, format!("add `{key} = {example}`"));
        }
    }

    /// The field, and a fault when the key is absent.
    pub(crate) fn required<T>(&mut self, field: Field<T>, key: &str, example: &str) -> Field<T> {
        if field.is_absent() {
            self.missing(key, example);
        }
        field
    }

    /// A quantity in SI units.
    pub(crate) fn quantity(&mut self, key: &str, dimension: Dimension, bound: Bound) -> Field<f64> {
        let Some(value) = self.get(key) else {
            return self.absent(key);
        };
        self.quantity_of(value, key, dimension, bound)
    }

    /// The same, of a value already in hand.
    pub(crate) fn quantity_of(
        &mut self,
        value: &Spanned<DeValue<'_>>,
        key: &str,
        dimension: Dimension,
        bound: Bound,
    ) -> Field<f64> {
        let field = self.scalar(value, dimension, |text| quantity::parse(text, dimension));
        if let Some((number, spot)) = field.stated()
            && let Some(broken) = bound.broken_by(*number)
        {
            self.faults.fault(spot, format!("`{key}` {broken}"), bound.remedy());
            return Field::Faulty;
        }
        field
    }

    /// An exact length of time above zero.
    pub(crate) fn length_of_time(&mut self, key: &str) -> Field<ArrayTime> {
        let Some(value) = self.get(key) else {
            return self.absent(key);
        };
        self.scalar(value, Dimension::Time, quantity::parse_length_of_time)
    }

    /// Whatever a parser makes of a bare number or a text.
    pub(crate) fn scalar<T>(
        &mut self,
        value: &Spanned<DeValue<'_>>,
        dimension: Dimension,
        parser: impl FnOnce(&str) -> Result<T, QuantityFault>,
    ) -> Field<T> {
        let span = value.span();
        let spot = Spot::new(0, span.clone());
        let raw = self.text_at(span.clone());
        let (result, place) = match value.get_ref() {
            // The number as it stands in the file, so that no digit is lost.
            DeValue::Integer(_) | DeValue::Float(_) => (parser(raw), Some(spot)),
            DeValue::String(text) => (parser(text), place_of_text(raw, text, spot)),
            other => {
                let rule =
                    format!("{} is wanted here, not {}", dimension.words(), type_words(other));
                let remedy = format!("write for example `\"{}\"`", dimension.example());
                self.fault_at(span, rule, remedy);
                return Field::Faulty;
            }
        };
        match result {
            Ok(value) => Field::Stated(value, spot),
            Err(fault) => {
                let spot = match place {
                    Some(place) if !fault.range.is_empty() => place.part(&fault.range),
                    _ => spot,
                };
                self.faults.fault(spot, fault.rule, fault.remedy);
                Field::Faulty
            }
        }
    }

    /// A text of any content.
    fn string(&mut self, key: &str, example: &str) -> Field<String> {
        let Some(value) = self.get(key) else {
            return self.absent(key);
        };
        let rule = format!("`{key}` is a text");
        self.string_of(value, &rule, example)
    }

    fn string_of(
        &mut self,
        value: &Spanned<DeValue<'_>>,
        rule: &str,
        example: &str,
    ) -> Field<String> {
        let span = value.span();
        if let DeValue::String(text) = value.get_ref() {
            return Field::Stated(text.clone().into_owned(), Spot::new(0, span));
        }
        let rule = format!("{rule}, not {}", type_words(value.get_ref()));
        self.fault_at(span, rule, format!("write for example `{example}`"));
        Field::Faulty
    }

    fn checked(
        &mut self,
        field: Field<String>,
        check: impl Fn(&str) -> Result<(), Wrong>,
    ) -> Field<String> {
        if let Some((text, spot)) = field.stated()
            && let Err((rule, remedy)) = check(text)
        {
            self.faults.fault(spot, rule, remedy);
            return Field::Faulty;
        }
        field
    }

    /// A text to be shown: one line, nothing invisible.
    pub(crate) fn line_of_text(&mut self, key: &str, example: &str) -> Field<String> {
        let field = self.string(key, example);
        self.checked(field, names::check_text)
    }

    /// The name of a node, clock or station.
    pub(crate) fn name(&mut self, key: &str, example: &str) -> Field<String> {
        let field = self.string(key, example);
        self.checked(field, names::check_name)
    }

    /// The name of another thing of this layout; it is looked up later, so its form is
    /// not judged here.
    pub(crate) fn reference_to(&mut self, key: &str, example: &str) -> Field<String> {
        self.string(key, example)
    }

    /// Two different names, `["a", "b"]`.
    pub(crate) fn pair(&mut self, key: &str) -> Field<[(String, Spot); 2]> {
        let Some(value) = self.get(key) else {
            return self.absent(key);
        };
        let example = "[\"hub\", \"s1\"]";
        let rule = format!("`{key}` is a list of two node names");
        let DeValue::Array(array) = value.get_ref() else {
            let rule = format!("{rule}, not {}", type_words(value.get_ref()));
            self.fault_at(value.span(), rule, format!("write for example `{key} = {example}`"));
            return Field::Faulty;
        };
        let [first, second] = array.as_ref() else {
            let rule = format!("{rule}; this one has {}", array.len());
            self.fault_at(value.span(), rule, format!("write for example `{key} = {example}`"));
            return Field::Faulty;
        };
        let first = self.string_of(first, "a node name is a text", "\"hub\"");
        let second = self.string_of(second, "a node name is a text", "\"s1\"");
        let (Field::Stated(first, first_spot), Field::Stated(second, second_spot)) =
            (first, second)
        else {
            return Field::Faulty;
        };
        if first == second {
            let rule = format!("`{key}` names two different nodes");
            self.faults.fault(second_spot, rule, "name another node as its second end");
            return Field::Faulty;
        }
        Field::Stated([(first, first_spot), (second, second_spot)], Spot::new(0, value.span()))
    }

    /// A whole number from 1 to a limit.
    pub(crate) fn count(&mut self, key: &str, most: usize) -> Field<usize> {
        let Some(value) = self.get(key) else {
            return self.absent(key);
        };
        if let DeValue::Integer(digits) = value.get_ref()
            && digits.radix() == 10
            && let Ok(count) = digits.as_str().parse::<usize>()
            && (1..=most).contains(&count)
        {
            return Field::Stated(count, Spot::new(0, value.span()));
        }
        let rule = format!("`{key}` is a whole number from 1 to {most}");
        self.fault_at(value.span(), rule, format!("write for example `{key} = 8`"));
        Field::Faulty
    }

    /// One of several words.
    pub(crate) fn choice<T: Copy>(&mut self, key: &str, choices: &[(&str, T)]) -> Field<T> {
        let Some(value) = self.get(key) else {
            return self.absent(key);
        };
        let span = value.span();
        let spot = Spot::new(0, span.clone());
        let words: Vec<String> = choices.iter().map(|(word, _)| format!("\"{word}\"")).collect();
        let rule = format!("`{key}` is {}", words.join(" or "));
        let DeValue::String(text) = value.get_ref() else {
            self.fault_at(span, rule, format!("write for example `{key} = {}`", words[0]));
            return Field::Faulty;
        };
        if let Some((_, chosen)) = choices.iter().find(|(word, _)| word == text) {
            return Field::Stated(*chosen, spot);
        }
        let meant = nearest(text, choices.iter().map(|(word, _)| *word));
        let remedy = match meant {
            Some(word) => format!("write `{key} = \"{word}\"`"),
            None => format!("write one of {}", words.join(", ")),
        };
        self.fault_at(span, rule, remedy);
        Field::Faulty
    }

    /// An uncertainty, its degrees of freedom and its shape, each under its key.
    pub(crate) fn uncertainty(
        &mut self,
        keys: [&'static str; 3],
        dimension: Dimension,
    ) -> Uncertainty {
        let [u_key, dof_key, shape_key] = keys;
        let u = self.quantity(u_key, dimension, Bound::NotNegative);
        let dof = self.quantity(dof_key, Dimension::Number, Bound::Positive);
        let shape = self.choice(shape_key, &SHAPES);
        if u.is_absent() {
            for key in [dof_key, shape_key] {
                if let Some(value) = self.get(key) {
                    let rule = format!("`{key}` stands beside `{u_key}`");
                    let remedy = format!("add `{u_key}`, or take `{key}` away");
                    self.fault_at(value.span(), rule, remedy);
                }
            }
        }
        Uncertainty {
            u: u.into_value().unwrap_or(0.0),
            dof: dof.into_value().unwrap_or(f64::INFINITY),
            shape: shape.into_value().unwrap_or_default(),
        }
    }
}

/// Where the characters of a text stand in the file, when they stand there as they are.
fn place_of_text(raw: &str, text: &str, spot: Spot) -> Option<Spot> {
    let quotes = raw.len().checked_sub(text.len())? / 2;
    let inner = raw.get(quotes..raw.len() - quotes)?;
    (inner == text).then(|| spot.part(&(quotes..quotes + text.len())))
}

/// What a TOML value is, in words.
pub(crate) fn type_words(value: &DeValue<'_>) -> &'static str {
    match value {
        DeValue::String(_) => "a text",
        DeValue::Integer(_) | DeValue::Float(_) => "a number",
        DeValue::Boolean(_) => "true or false",
        DeValue::Datetime(_) => "a date without quotes",
        DeValue::Array(_) => "a list",
        DeValue::Table(_) => "a table",
    }
}

/// What would be right instead of an unknown key.
fn remedy_for_key(name: &str, meant: Option<&str>, kind: &Kind) -> String {
    if let Some(meant) = meant {
        return match TABLES.iter().find(|table| kind.key.is_empty() && table.key == meant) {
            Some(table) => format!("write {}", table.title),
            None => format!("write `{meant}`"),
        };
    }
    if let Some(home) = TABLES.iter().find(|table| table.keys.contains(&name)) {
        return format!("move it to {}, or take it away", home.title);
    }
    format!("take it away; keys here: {}", kind.keys.join(" "))
}
