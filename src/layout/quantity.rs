//! Quantities as people write them: a decimal number, an optional blank, a unit.
//!
//! The value is the number times the exact factor of its unit, rounded once, so
//! `0.02 g0` is the double nearest to 0.196133 m/s². A bare number is in SI units.
//! Durations become exact counts of attoseconds and are never rounded.
//!
//! The grammar is the same in a layout file, on a command line and in a sentence of the
//! desk; a fault carries the place in the text, the rule and the remedy.

mod number;
mod units;

use std::fmt;
use std::ops::Range;

use super::nearest::nearest;
use crate::model::array_time::ArrayTime;
use number::{Decimal, NotACount};
pub(crate) use number::{plain, plain_seconds};
pub use units::Dimension;
use units::{UNITS, Unit};
pub(crate) use units::{Unit as UnitFactor, find as find_unit};

/// What is wrong with the text of a quantity.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct QuantityFault {
    /// The bytes of the text it is about.
    pub range: Range<usize>,
    /// What holds.
    pub rule: String,
    /// What would be right.
    pub remedy: String,
}

impl fmt::Display for QuantityFault {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{}; {}", self.rule, self.remedy)
    }
}

impl std::error::Error for QuantityFault {}

impl QuantityFault {
    pub(crate) fn new(
        range: Range<usize>,
        rule: impl Into<String>,
        remedy: impl Into<String>,
    ) -> QuantityFault {
        QuantityFault { range, rule: rule.into(), remedy: remedy.into() }
    }
}

/// The value of a quantity in SI units: number times exact unit factor, rounded once,
/// ties to even. A bare number is SI; −0 is 0.
///
/// # Errors
///
/// Text that is not a decimal number with a unit of this dimension, and values above the
/// largest double. A value below the smallest double is rounded to zero like any other.
pub fn parse(text: &str, dimension: Dimension) -> Result<f64, QuantityFault> {
    if let Some(value) = in_si_unit(text, dimension) {
        return Ok(value);
    }
    let written = Written::scan(text, dimension)?;
    let value = match written.unit {
        None => written.number.to_f64(),
        Some(unit) => {
            let product = written.number.times(unit.numerator, unit.power_of_ten);
            if unit.denominator == 1 {
                product.to_f64()
            } else {
                product.over(unit.denominator).to_f64()
            }
        }
    };
    if value.is_finite() {
        return Ok(value);
    }
    Err(QuantityFault::new(
        written.whole,
        "a value stays below 1.8e308 in SI units, the largest number carried",
        format!("write {} such as `{}`", dimension.words(), dimension.example()),
    ))
}

/// The value of the commonest form, a plain number of the SI unit, which asks for no product.
fn in_si_unit(text: &str, dimension: Dimension) -> Option<f64> {
    let number = text.strip_suffix(dimension.si_unit())?.strip_suffix(' ')?;
    plain(number)
}

/// The names of all units.
pub(crate) fn all_units() -> impl Iterator<Item = &'static str> + Clone {
    UNITS.iter().map(|unit| unit.name)
}

/// A moment or length of array time, exactly: a whole number of attoseconds within
/// ±10¹¹ s. A bare number is in seconds.
///
/// # Errors
///
/// Text that is not a decimal number with a unit of time, digits finer than 1 as, and
/// values outside the domain.
pub fn parse_duration(text: &str) -> Result<ArrayTime, QuantityFault> {
    let written = Written::scan(text, Dimension::Time)?;
    let (factor, power) = written.unit.map_or((1, 0), |unit| (unit.numerator, unit.power_of_ten));
    let range = written.whole;
    let beyond = |range: Range<usize>| {
        QuantityFault::new(
            range,
            "array time lies within 1e11 s of its zero, about 3168 years either way",
            "write a time of at most `1e11 s`",
        )
    };
    match written.number.times(factor, power + 18).to_count() {
        Ok(count) => ArrayTime::from_attoseconds(count).in_domain().ok_or_else(|| beyond(range)),
        Err(NotACount::TooLarge) => Err(beyond(range)),
        Err(NotACount::Finer) => Err(QuantityFault::new(
            range,
            "array time is exact and counts whole attoseconds",
            "leave out the digits below 1 as, the 18th decimal of a second",
        )),
    }
}

/// A length of array time above zero, exactly.
///
/// # Errors
///
/// As [`parse_duration`], and zero or below.
pub fn parse_length_of_time(text: &str) -> Result<ArrayTime, QuantityFault> {
    let length = parse_duration(text)?;
    if length > ArrayTime::ZERO {
        return Ok(length);
    }
    Err(QuantityFault::new(
        0..text.len(),
        "a length of time is above zero",
        "write for example `10 min`",
    ))
}

/// The two halves of a quantity, found in its text.
struct Written {
    number: Decimal,
    unit: Option<&'static Unit>,
    /// Where number and unit stand.
    whole: Range<usize>,
}

impl Written {
    fn scan(text: &str, dimension: Dimension) -> Result<Written, QuantityFault> {
        let trimmed = text.trim_matches(is_blank);
        let start = text.len() - text.trim_start_matches(is_blank).len();
        let whole = start..start + trimmed.len();
        let Some((number, range)) = number::scan(trimmed) else {
            return Err(no_number(text, trimmed, whole, dimension));
        };
        let after = &trimmed[range.end..];
        let name = after.trim_start_matches(is_blank);
        if name.is_empty() {
            return Ok(Written { number, unit: None, whole });
        }
        let place = whole.end - name.len()..whole.end;
        match units::find(name) {
            Some(unit) if unit.dimension == dimension => {
                Ok(Written { number, unit: Some(unit), whole })
            }
            Some(unit) => Err(wrong_dimension(&trimmed[range], unit, place, dimension)),
            None => Err(unknown_unit(trimmed, name, &number, place, whole, dimension)),
        }
    }
}

/// Blanks allowed between number and unit: the space, and the no-break spaces that
/// typeset quantities carry.
fn is_blank(letter: char) -> bool {
    matches!(letter, ' ' | '\u{a0}' | '\u{202f}')
}

/// How to write a value of a dimension, with its units.
fn how_to_write(dimension: Dimension) -> String {
    let units: Vec<&str> = dimension.units().collect();
    if units.is_empty() {
        return format!("write the number alone, for example `{}`", dimension.example());
    }
    format!("write for example `{}`; units here: {}", dimension.example(), units.join(" "))
}

fn no_number(
    text: &str,
    trimmed: &str,
    whole: Range<usize>,
    dimension: Dimension,
) -> QuantityFault {
    if trimmed.is_empty() {
        return QuantityFault::new(
            0..text.len(),
            format!("{} is wanted here, and the text is empty", dimension.words()),
            how_to_write(dimension),
        );
    }
    let bare = trimmed.trim_start_matches(['+', '-']).to_ascii_lowercase();
    if bare.starts_with("inf") || bare.starts_with("nan") {
        return QuantityFault::new(whole, "a value is a finite number", how_to_write(dimension));
    }
    if trimmed.starts_with('\u{2212}') {
        return QuantityFault::new(
            whole.start..whole.start + '\u{2212}'.len_utf8(),
            "the minus sign of a number is `-`",
            "write `-`, the minus of the keyboard",
        );
    }
    QuantityFault::new(
        whole,
        format!("{} is wanted here: a decimal number, then its unit", dimension.words()),
        how_to_write(dimension),
    )
}

fn wrong_dimension(
    number: &str,
    unit: &Unit,
    place: Range<usize>,
    dimension: Dimension,
) -> QuantityFault {
    let rule =
        format!("{} is wanted here, and `{}` is {}", dimension.words(), unit.name, role(unit));
    let remedy = match (dimension, unit.name) {
        (Dimension::Acceleration, "g") => {
            format!("write `{} g0` for multiples of standard gravity, 9.80665 m/s^2", short(number))
        }
        _ => how_to_write(dimension),
    };
    QuantityFault::new(place, rule, remedy)
}

/// What a unit measures, in words.
fn role(unit: &Unit) -> String {
    match unit.name {
        "g" => "the gram, a unit of mass".to_owned(),
        "a" => "the year, a unit of time".to_owned(),
        _ => {
            let words = unit.dimension.words();
            let bare = words.split_once(' ').map_or(words, |(_, bare)| bare);
            format!("a unit of {bare}")
        }
    }
}

fn unknown_unit(
    trimmed: &str,
    name: &str,
    number: &Decimal,
    place: Range<usize>,
    whole: Range<usize>,
    dimension: Dimension,
) -> QuantityFault {
    let first = name.chars().next().unwrap_or(' ');
    let has_radix = number.is_zero()
        && matches!(first, 'x' | 'X' | 'o' | 'O' | 'b' | 'B')
        && name[1..].starts_with(|digit: char| digit.is_ascii_hexdigit())
        && trimmed.len() - name.len() <= 2;
    if has_radix {
        return QuantityFault::new(
            whole,
            "numbers are decimal, never hexadecimal, octal or binary",
            how_to_write(dimension),
        );
    }
    if first == ',' {
        return QuantityFault::new(
            place.start..place.start + 1,
            "the decimal mark of a number is the point",
            "write `.` for the decimal mark; `_` may stand between digits",
        );
    }
    if first.is_ascii_digit() || matches!(first, '.' | '_' | '+' | '-') {
        return QuantityFault::new(
            whole,
            "a quantity holds one decimal number, without gaps; `_` may stand between digits",
            how_to_write(dimension),
        );
    }
    if name.contains(|digit: char| digit.is_ascii_digit()) && name.contains(is_blank) {
        return QuantityFault::new(
            whole,
            "a quantity holds one number and one unit",
            "put the sum into one unit, for example `90 min` for an hour and a half",
        );
    }
    if dimension.units().next().is_none() {
        return QuantityFault::new(
            place,
            format!("{} is wanted here, without a unit", dimension.words()),
            how_to_write(dimension),
        );
    }
    let sign = if number.is_negative() { "-" } else { "" };
    let written = &trimmed[..trimmed.len() - name.len()].trim_end_matches(is_blank);
    let digits = written.trim_start_matches(['+', '-']);
    let remedy = match nearest(name, dimension.units()).or_else(|| respelt(name, dimension)) {
        Some(unit) => format!("write `{sign}{} {unit}`", short(digits)),
        None => how_to_write(dimension),
    };
    let rule = format!("`{}` is not a unit known here; capitals count", short(name));
    QuantityFault::new(place, rule, remedy)
}

/// Spellings that are not near by letters, and what is meant.
fn respelt(name: &str, dimension: Dimension) -> Option<&'static str> {
    let meant = match name {
        "m/s\u{b2}" | "m s^-2" | "m/s/s" | "m/s**2" | "ms^-2" | "m*s^-2" => "m/s^2",
        "s^-2" | "1/s^2" | "/s\u{b2}" => "/s^2",
        "sec" | "secs" | "second" | "seconds" => "s",
        "minutes" | "minute" | "mins" => "min",
        "hr" | "hrs" | "hour" | "hours" => "h",
        "day" | "days" => "d",
        "yr" | "y" | "year" | "years" => "a",
        "AU" | "ua" => "au",
        "G" | "gee" | "gees" | "gn" | "g_n" | "g_0" => "g0",
        "1/K" | "K^-1" | "ppm/K" => "/K",
        _ => return None,
    };
    UNITS.iter().find(|unit| unit.name == meant && unit.dimension == dimension).map(|u| u.name)
}

/// A piece of the text for a message, cut when it is long.
pub(crate) fn short(text: &str) -> String {
    const MOST: usize = 40;
    match text.char_indices().nth(MOST) {
        None => text.to_owned(),
        Some((end, _)) => format!("{}…", &text[..end]),
    }
}
