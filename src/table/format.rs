//! The form of a column: one unit, one number of digits, one width, decimal points in line.

use super::digits::{Decimal, Scale, exponent_of};
use super::scan::ColumnScan;
use super::unit::{SECOND, Unit, measured};
use super::width::{push_blanks, push_left, push_right};
use super::{Cell, Column, Measure};
use crate::model::array_time::ArrayTime;

/// Digits under which a value that has more is not shown in plain notation.
const LEAST_DIGITS: i32 = 4;

/// A flag for people.
pub(super) fn yes_or_no(flag: bool) -> &'static str {
    if flag { "yes" } else { "no" }
}

/// How the cells of a column are shown: chosen once from the cells of a whole table or of
/// the rows in view, then used for each of them.
#[derive(Clone, Debug)]
pub struct ColumnFormat {
    unit: Unit,
    form: Form,
    signed: bool,
    unicode: bool,
    /// Smallest magnitude that the form was chosen for.
    pub(super) smallest: f64,
    pub(super) width: usize,
}

/// The notation of a column.
#[derive(Clone, Copy, Debug)]
pub(super) enum Form {
    /// Texts, to the left.
    Words,
    /// Whole numbers.
    Counts,
    /// Plain notation with the same number of decimals in each cell.
    Fixed { scale: Scale, decimals: usize },
    /// A power of ten in each cell, of which the longest takes that many columns.
    Scientific { digits: usize, exponent_width: usize },
    /// Exact times with the same number of decimals, in a unit of so many attoseconds.
    Exact { size: u128, decimals: usize },
    /// Exact times rounded to that many decimals, in a unit that was asked for and in which
    /// they are no short decimals.
    Rounded { scale: Scale, decimals: usize },
}

/// Chooses the form of a column for some of its cells, in the order of their rows.
#[must_use]
pub fn fit<'c, 'a: 'c>(
    column: &Column,
    cells: impl IntoIterator<Item = &'c Cell<'a>>,
    unicode: bool,
) -> ColumnFormat {
    let mut scan = ColumnScan::new(column);
    for cell in cells {
        scan.see(cell);
    }
    scan.format(unicode)
}

impl ColumnFormat {
    pub(super) fn new(unit: Unit, form: Form, signed: bool, unicode: bool) -> ColumnFormat {
        ColumnFormat { unit, form, signed, unicode, smallest: f64::INFINITY, width: 0 }
    }

    /// The unit for the heading; empty where there is none.
    #[must_use]
    pub fn unit(&self) -> &'static str {
        if self.unicode { self.unit.label } else { self.unit.ascii }
    }

    /// The unit itself.
    pub(super) fn unit_kept(&self) -> Unit {
        self.unit
    }

    /// Columns of a cell, without room for the heading.
    #[must_use]
    pub fn width(&self) -> usize {
        self.width
    }

    /// Whether cells stand to the left, as texts do.
    #[must_use]
    pub fn is_left(&self) -> bool {
        matches!(self.form, Form::Words)
    }

    /// A cell, padded to the width. A value from outside the cells the form was chosen for
    /// takes a power of ten rather than lose its digits, and stands out of line rather
    /// than be cut.
    #[must_use]
    pub fn cell(&self, cell: &Cell<'_>) -> String {
        let mut shown = String::new();
        self.push(&mut shown, cell, "", self.width);
        shown
    }

    /// Appends a cell padded to a width, with a mark behind an absent value.
    pub(super) fn push(&self, out: &mut String, cell: &Cell<'_>, mark: &str, width: usize) {
        match cell {
            Cell::Text(text) if self.is_left() => push_left(out, text, width),
            Cell::Text(text) => push_right(out, text, width),
            Cell::Flag(flag) if self.is_left() => push_left(out, yes_or_no(*flag), width),
            Cell::Absent(_) if self.is_left() => push_left(out, &format!("-{mark}"), width),
            _ => push_right(out, &self.value(cell, mark), width),
        }
    }

    /// A cell without padding to the width.
    pub(super) fn value(&self, cell: &Cell<'_>, mark: &str) -> String {
        match cell {
            Cell::Text(text) => text.clone().into_owned(),
            Cell::Absent(_) => format!("-{mark}"),
            Cell::Number(value) | Cell::Measured(value, _) if !value.is_finite() => {
                format!("-{mark}")
            }
            Cell::Measured(value, measure) => measured(*value, *measure, self.unicode),
            Cell::Number(value) => self.number_in_width(*value),
            Cell::Integer(value) => match self.form {
                Form::Counts | Form::Words => self.count(*value),
                _ if self.unit.label.is_empty() => self.count(*value),
                _ => self.number_in_width(*value as f64),
            },
            Cell::Time(time) => self.time(time.attoseconds()),
            Cell::Computed(time) => measured(time.to_f64(), Measure::Time, self.unicode),
            Cell::Flag(flag) => yes_or_no(*flag).to_owned(),
        }
    }

    fn sign(&self, negative: bool) -> &'static str {
        match (negative, self.signed) {
            (true, _) => "-",
            (false, true) => "+",
            (false, false) => "",
        }
    }

    pub(super) fn count(&self, value: i64) -> String {
        let sign = if value == 0 { "" } else { self.sign(value < 0) };
        format!("{sign}{}", value.unsigned_abs())
    }

    /// A finite number in the form of the column, whatever its width.
    pub(super) fn number(&self, value: f64) -> String {
        let sign = self.sign(value < 0.0);
        match self.form {
            Form::Fixed { decimals, .. } if value == 0.0 => zero(decimals, 0),
            Form::Scientific { digits, exponent_width } if value == 0.0 => {
                zero(digits - 1, exponent_width)
            }
            Form::Fixed { scale, decimals } => {
                let decimal = Decimal::at_position(value, scale, -(decimals as i32));
                format!("{sign}{}", decimal.fixed(decimals))
            }
            Form::Scientific { digits, exponent_width } => {
                let (mantissa, exponent) =
                    Decimal::significant(value, self.unit.scale, digits).scientific();
                format!("{sign}{mantissa}{exponent:exponent_width$}")
            }
            // A number in a column of another kind: all its digits.
            Form::Words | Form::Counts | Form::Exact { .. } | Form::Rounded { .. } => {
                format!("{sign}{}", value.abs())
            }
        }
    }

    /// A finite number in the form of the column, or in scientific notation when it would
    /// take too much room or lose its digits.
    fn number_in_width(&self, value: f64) -> String {
        let shown = self.number(value);
        if value == 0.0 || (shown.len() <= self.width && self.keeps_digits(value)) {
            return shown;
        }
        let scale = self.unit.scale;
        let all = Decimal::shortest(value).digits.len();
        for digits in (1..=all).rev() {
            let (mantissa, exponent) = Decimal::significant(value, scale, digits).scientific();
            let shown = format!("{}{mantissa}{exponent}", self.sign(value < 0.0));
            if shown.len() <= self.width || digits <= LEAST_DIGITS as usize {
                return shown;
            }
        }
        shown
    }

    /// Whether plain notation shows four digits of a value, or all it has.
    fn keeps_digits(&self, value: f64) -> bool {
        let Form::Fixed { scale, decimals } = self.form else {
            return true;
        };
        if value.abs() >= self.smallest {
            return true;
        }
        let last = -(decimals as i32);
        let shift = match scale {
            Scale::Ten(tens) => tens,
            Scale::Whole(..) | Scale::Part(_) => {
                return Decimal::significant(value, scale, 17).exponent - last + 1 >= LEAST_DIGITS;
            }
        };
        exponent_of(value) - shift - last + 1 >= LEAST_DIGITS
            || Decimal::shortest(value).last_position() - shift >= last
    }

    /// An exact time in the form of the column, whatever its width.
    pub(super) fn time(&self, count: i128) -> String {
        let sign = self.sign(count < 0);
        let magnitude = count.unsigned_abs();
        let (size, decimals) = match self.form {
            Form::Exact { size, decimals } => (size, decimals),
            Form::Rounded { decimals, .. } if magnitude == 0 => return zero(decimals, 0),
            // Beside numbers in a unit that was asked for, times are told in it as well.
            Form::Rounded { scale, decimals } | Form::Fixed { scale, decimals }
                if scale != SECOND.scale =>
            {
                let decimal = Decimal::of_attoseconds(magnitude, scale, -(decimals as i32));
                return format!("{sign}{}", decimal.fixed(decimals));
            }
            _ => {
                let sign = if count > 0 { sign } else { "" };
                return format!("{sign}{}", ArrayTime::from_attoseconds(count));
            }
        };
        if magnitude == 0 {
            return zero(decimals, 0);
        }
        let (whole, rest) = (magnitude / size, magnitude % size);
        let parts = 10_u128.pow(decimals as u32);
        if !(rest * parts).is_multiple_of(size) {
            // From outside the cells the form was chosen for: exact in seconds all the same.
            return format!("{} s", ArrayTime::from_attoseconds(count));
        }
        let mut shown = format!("{sign}{whole}");
        if decimals > 0 {
            shown.push_str(&format!(".{:0decimals$}", rest * parts / size));
        }
        shown
    }
}

/// An exact zero, in line with the digit before the decimal point.
fn zero(decimals: usize, exponent_width: usize) -> String {
    let mut shown = "0".to_owned();
    push_blanks(&mut shown, if decimals > 0 { decimals + 1 } else { 0 } + exponent_width);
    shown
}
