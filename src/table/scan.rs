//! What a column holds, gathered in one pass and constant memory, and the form it asks for.

use super::digits::{Decimal, MOST_DIGITS, Scale, exponent_of};
use super::format::yes_or_no;
use super::format::{ColumnFormat, Form};
use super::unit::{
    LONG_TIMES, SECOND, TIMES, Unit, base_unit, decimal_unit, dimension_of, long_unit, measured,
};
use super::width::columns_of;
use super::{Cell, Column, Measure};

/// Digits that every value that is not zero shows, unless it has fewer.
const LEAST_DIGITS: i32 = 4;
/// Decades that values in plain notation may span.
const MOST_DECADES: i32 = 6;
/// Digits up to which plain notation serves values of any span, when they are exact.
const SHORT_DIGITS: i32 = 10;
/// Decimals up to which minutes, hours, days and years serve: further ones are fractions
/// of a second that are read better as such.
const MOST_LONG_DECIMALS: i32 = 6;
/// Power of ten of the first digit of the largest value, in its unit, from which and up to
/// which plain notation serves; less far up for numbers that have no unit.
const LEAST_FIRST: i32 = -3;
const MOST_WHOLE: i32 = 11;
const MOST_BARE: i32 = 6;
/// Power of ten of the first digit up to which a table over time keeps a unit.
const MOST_KEPT: i32 = 5;
/// Decimals up to which an exact time in a unit asked for is shown exactly, and those it is
/// rounded to where they do not do.
const MOST_EXACT_DECIMALS: u32 = 9;
const ROUNDED_DECIMALS: usize = 9;
/// Steps between neighbours smaller than this part of the column's spread need not show.
const LEAST_STEP: f64 = 1e-15;
/// Digits of a number that a reader takes in, clock readings aside.
const GLANCE_DIGITS: i32 = 12;
/// Digits shown where the glance would not do.
const PLAIN_DIGITS: i32 = 7;

/// Gathers, cell by cell in the order of the rows, what decides units and digits.
#[derive(Clone, Debug)]
pub struct ColumnScan {
    measure: Measure,
    signed: bool,
    /// The unit that was asked for, if any.
    unit: Option<Unit>,
    least_digits: i32,
    text_columns: usize,
    /// The measured cell last seen: limits are often the same in many rows.
    measured: Option<(f64, Measure)>,
    anything_absent: bool,
    /// Numbers, in SI units.
    numbers: usize,
    lowest: f64,
    highest: f64,
    smallest: f64,
    first: Option<f64>,
    previous: Option<f64>,
    /// Smallest difference between neighbours, absolute and in parts of the larger.
    step: f64,
    relative_step: f64,
    /// Lowest decimal position that the shortest form of any number reaches.
    shortest_position: i32,
    /// Most digits that the shortest form of any number has.
    longest: usize,
    /// Exact times, in attoseconds.
    times: usize,
    common_divisor: u128,
    earliest: i128,
    latest: i128,
    /// Whole numbers.
    least: i64,
    most: i64,
    integers: usize,
}

impl ColumnScan {
    /// Nothing seen yet.
    #[must_use]
    pub fn new(column: &Column) -> ColumnScan {
        ColumnScan::of(column.key, column.measure)
    }

    pub(super) fn of(key: &str, measure: Measure) -> ColumnScan {
        ColumnScan {
            measure,
            signed: is_difference(key),
            unit: None,
            least_digits: LEAST_DIGITS,
            text_columns: 0,
            measured: None,
            anything_absent: false,
            numbers: 0,
            lowest: f64::INFINITY,
            highest: f64::NEG_INFINITY,
            smallest: f64::INFINITY,
            first: None,
            previous: None,
            step: f64::INFINITY,
            relative_step: f64::INFINITY,
            shortest_position: i32::MAX,
            longest: 0,
            times: 0,
            common_divisor: 0,
            earliest: i128::MAX,
            latest: i128::MIN,
            least: i64::MAX,
            most: i64::MIN,
            integers: 0,
        }
    }

    /// Asks for more digits than a table needs, for a value that stands alone.
    pub(super) fn with_digits(mut self, count: i32) -> ColumnScan {
        self.least_digits = count;
        self
    }

    /// Asks for a unit instead of the one that reads best.
    pub(super) fn in_unit(mut self, unit: Option<Unit>) -> ColumnScan {
        self.unit = unit;
        self
    }

    /// Takes in the cell of the next row.
    pub fn see(&mut self, cell: &Cell<'_>) {
        match cell {
            Cell::Text(text) => {
                debug_assert!(!text.chars().any(char::is_control), "names are clean: {text:?}");
                self.text_columns = self.text_columns.max(columns_of(text));
            }
            Cell::Flag(flag) => self.text_columns = self.text_columns.max(yes_or_no(*flag).len()),
            Cell::Absent(_) => self.anything_absent = true,
            Cell::Number(value) if value.is_finite() => self.see_number(*value),
            Cell::Number(_) => self.anything_absent = true,
            Cell::Measured(value, measure) if self.measured == Some((*value, *measure)) => {}
            Cell::Measured(value, measure) if value.is_finite() => {
                self.measured = Some((*value, *measure));
                // The ASCII label may be the longer one; a column too wide is no harm.
                let shown = measured(*value, *measure, false);
                self.text_columns = self.text_columns.max(columns_of(&shown));
            }
            Cell::Measured(..) => self.anything_absent = true,
            Cell::Computed(time) => {
                let shown = measured(time.to_f64(), Measure::Time, false);
                self.text_columns = self.text_columns.max(columns_of(&shown));
            }
            // A whole number of something with a unit is a number like any other.
            Cell::Integer(value) if !self.counts() => self.see_number(*value as f64),
            Cell::Integer(value) => {
                self.integers += 1;
                self.least = self.least.min(*value);
                self.most = self.most.max(*value);
            }
            Cell::Time(time) => {
                self.times += 1;
                let count = time.attoseconds();
                self.common_divisor = common_divisor(self.common_divisor, count.unsigned_abs());
                self.earliest = self.earliest.min(count);
                self.latest = self.latest.max(count);
            }
        }
    }

    /// Whether whole numbers are counts and not values with a unit.
    fn counts(&self) -> bool {
        matches!(
            self.measure,
            Measure::Word | Measure::Unit | Measure::Various | Measure::Count | Measure::Ratio
        )
    }

    fn see_number(&mut self, value: f64) {
        self.numbers += 1;
        self.lowest = self.lowest.min(value);
        self.highest = self.highest.max(value);
        match self.previous.replace(value) {
            Some(previous) => self.see_step(previous, value),
            None => self.first = Some(value),
        }
        if value == 0.0 {
            return;
        }
        self.smallest = self.smallest.min(value.abs());
        // A number with as many digits as are ever shown settles that none can be saved.
        if self.longest >= MOST_DIGITS {
            return;
        }
        let shortest = Decimal::shortest(value);
        self.shortest_position = self.shortest_position.min(shortest.last_position());
        self.longest = self.longest.max(shortest.digits.len());
    }

    fn see_step(&mut self, previous: f64, value: f64) {
        let step = (value - previous).abs();
        if step > 0.0 {
            self.step = self.step.min(step);
            self.relative_step = self.relative_step.min(step / value.abs().max(previous.abs()));
        }
    }

    /// Takes in what another scan of the same column saw in the rows behind these, as if
    /// this one had seen them all.
    pub(super) fn join(&mut self, behind: &ColumnScan) {
        self.text_columns = self.text_columns.max(behind.text_columns);
        self.measured = behind.measured.or(self.measured);
        self.anything_absent |= behind.anything_absent;
        self.numbers += behind.numbers;
        self.lowest = self.lowest.min(behind.lowest);
        self.highest = self.highest.max(behind.highest);
        self.smallest = self.smallest.min(behind.smallest);
        self.step = self.step.min(behind.step);
        self.relative_step = self.relative_step.min(behind.relative_step);
        if let (Some(previous), Some(first)) = (self.previous, behind.first) {
            self.see_step(previous, first);
        }
        self.first = self.first.or(behind.first);
        self.previous = behind.previous.or(self.previous);
        if self.longest < MOST_DIGITS {
            self.shortest_position = self.shortest_position.min(behind.shortest_position);
            self.longest = self.longest.max(behind.longest);
        }
        self.times += behind.times;
        self.common_divisor = common_divisor(self.common_divisor, behind.common_divisor);
        self.earliest = self.earliest.min(behind.earliest);
        self.latest = self.latest.max(behind.latest);
        self.least = self.least.min(behind.least);
        self.most = self.most.max(behind.most);
        self.integers += behind.integers;
    }

    /// The form of the column: its unit, its digits and its width.
    #[must_use]
    pub fn format(&self, unicode: bool) -> ColumnFormat {
        let (unit, form) = if self.numbers > 0 {
            self.number_form()
        } else if self.times > 0 {
            self.exact_form()
        } else if self.integers > 0 {
            (base_unit(Measure::Count), Form::Counts)
        } else if self.measure == Measure::Word {
            (base_unit(Measure::Word), Form::Words)
        } else {
            let unit = self.unit.unwrap_or(base_unit(self.measure));
            (unit, Form::Fixed { scale: unit.scale, decimals: 0 })
        };
        let mut format = ColumnFormat::new(unit, form, self.signed, unicode);
        format.smallest = self.smallest;
        let mut width = self.text_columns.max(usize::from(self.anything_absent));
        if self.numbers > 0 {
            for value in [self.lowest, self.highest, self.smallest] {
                if value.is_finite() {
                    width = width.max(columns_of(&format.number(value)));
                }
            }
        }
        if self.times > 0 {
            for count in [self.earliest, self.latest] {
                width = width.max(columns_of(&format.time(count)));
            }
        }
        if self.integers > 0 {
            for count in [self.least, self.most] {
                width = width.max(columns_of(&format.count(count)));
            }
        }
        format.width = width;
        format
    }

    /// The form in the unit of an earlier table, when the values read well in it or are all
    /// zero; `None` where there is no number or another unit was asked for.
    pub(super) fn format_in(&self, kept: Unit, unicode: bool) -> Option<ColumnFormat> {
        if self.numbers == 0 || self.unit.is_some() {
            return None;
        }
        let serves = self.largest() == 0.0 || self.places(kept.scale).reads_well(MOST_KEPT);
        serves.then(|| self.clone().in_unit(Some(kept)).format(unicode))
    }

    /// Whether there is a number that is not zero.
    pub(super) fn has_size(&self) -> bool {
        self.numbers > 0 && self.largest() > 0.0
    }

    /// Whether a unit was asked for.
    pub(super) fn is_in_given_unit(&self) -> bool {
        self.unit.is_some()
    }

    /// Whether what is measured has a unit.
    pub(super) fn has_unit(&self) -> bool {
        dimension_of(self.measure).is_some()
    }

    fn number_form(&self) -> (Unit, Form) {
        let largest = self.largest();
        let fixed = |unit: Unit, place: Places| {
            let decimals = usize::try_from(-place.last).unwrap_or(0);
            (unit, Form::Fixed { scale: unit.scale, decimals })
        };
        if largest == 0.0 {
            let unit = self.unit.unwrap_or(base_unit(self.measure));
            return fixed(unit, Places { first: 0, span: 0, last: 0 });
        }
        if let Some(unit) = self.unit {
            let places = self.places(unit.scale);
            let readable = places.reads_well(MOST_WHOLE) || self.times > 0;
            return if readable { fixed(unit, places) } else { self.scientific(unit) };
        }
        // Exact times beside numbers are told in seconds, so the numbers are as well.
        if self.times > 0 {
            return fixed(SECOND, self.places(SECOND.scale));
        }
        if let Some(unit) = long_unit(self.measure, largest) {
            let places = self.places(unit.scale);
            let readable = self.measure == Measure::Length || -places.last <= MOST_LONG_DECIMALS;
            if readable && places.first <= MOST_WHOLE && places.span <= MOST_DECADES {
                return fixed(unit, places);
            }
        }
        let unit = decimal_unit(self.measure, largest);
        let places = self.places(unit.scale);
        let most = if unit.label.is_empty() { MOST_BARE } else { MOST_WHOLE };
        if places.reads_well(most) {
            return fixed(unit, places);
        }
        self.scientific(base_unit(self.measure))
    }

    /// Powers of ten in each cell.
    fn scientific(&self, unit: Unit) -> (Unit, Form) {
        let told_apart = if self.relative_step.is_finite() {
            1 - exponent_of(self.relative_step / 2.0)
        } else {
            1
        };
        let digits = usize::try_from(self.least_digits.max(told_apart)).unwrap_or(MOST_DIGITS);
        let digits = digits.min(self.longest).clamp(1, MOST_DIGITS);
        let exponent_width = [self.smallest, self.largest()]
            .map(|value| Decimal::significant(value, unit.scale, digits).scientific().1.len())
            .into_iter()
            .max()
            .unwrap_or(0);
        (unit, Form::Scientific { digits, exponent_width })
    }

    fn largest(&self) -> f64 {
        self.highest.abs().max(self.lowest.abs())
    }

    /// Decimal places, in a unit, that show every value and every step between neighbours.
    fn places(&self, scale: Scale) -> Places {
        let exponent = |value: f64| Decimal::significant(value, scale, MOST_DIGITS).exponent;
        let first = exponent(self.largest());
        let smallest = exponent(self.smallest);
        let mut last = smallest + 1 - self.least_digits;
        let step = self.step.max(LEAST_STEP * (self.highest - self.lowest));
        if step.is_finite() {
            // Two values a step apart differ in a place of half the step, ties and all.
            last = last.min(exponent(step / 2.0));
        }
        last = last.max(first + 1 - MOST_DIGITS as i32);
        // Only readings of clocks are worth more than a glance can hold: where other
        // neighbours differ farther down, the difference is told by another column.
        if self.measure != Measure::Time && first - last >= GLANCE_DIGITS {
            last = last.max(first + 1 - PLAIN_DIGITS).min(smallest + 1 - self.least_digits);
        }
        if let Scale::Ten(tens) = scale {
            last = last.max(self.shortest_position - tens);
        }
        Places { first, span: first - smallest, last: last.min(0) }
    }

    /// Exact times in a unit that was asked for: exactly where a short decimal does it.
    fn exact_form_in(&self, unit: Unit) -> (Unit, Form) {
        let size = unit.attoseconds().unwrap_or(1);
        let exact = (0..=MOST_EXACT_DECIMALS).find(|&decimals| {
            let parts = self.common_divisor.checked_mul(10_u128.pow(decimals));
            parts.is_some_and(|parts| parts.is_multiple_of(size))
        });
        let form = match exact {
            Some(decimals) => Form::Exact { size, decimals: decimals as usize },
            None => Form::Rounded { scale: unit.scale, decimals: ROUNDED_DECIMALS },
        };
        (unit, form)
    }

    /// Exact times: the largest unit in which they all are exact and short.
    fn exact_form(&self) -> (Unit, Form) {
        if let Some(unit) = self.unit {
            return self.exact_form_in(unit);
        }
        let latest = self.earliest.unsigned_abs().max(self.latest.unsigned_abs());
        let second = 10_u128.pow(18);
        for (unit, from) in LONG_TIMES {
            let Scale::Whole(seconds, _) = unit.scale else {
                continue;
            };
            let size = u128::from(seconds) * second;
            if latest < from as u128 * second {
                continue;
            }
            let decimals = (0..=2).find(|&decimals| {
                let parts = self.common_divisor.checked_mul(10_u128.pow(decimals));
                parts.is_some_and(|parts| parts.is_multiple_of(size))
            });
            if let Some(decimals) = decimals {
                return (unit, Form::Exact { size, decimals: decimals as usize });
            }
        }
        let mut place = TIMES.iter().rposition(|unit| match unit.scale {
            Scale::Ten(power) => latest >= 10_u128.pow((power + 18).unsigned_abs()),
            Scale::Whole(..) | Scale::Part(_) => false,
        });
        if latest == 0 {
            place = Some(TIMES.len() - 1);
        }
        let place = place.unwrap_or(0);
        let size = 1000_u128.pow(place as u32);
        let decimals = (0..3 * place as u32)
            .find(|&decimals| self.common_divisor.is_multiple_of(size / 10_u128.pow(decimals)))
            .unwrap_or(3 * place as u32);
        (TIMES[place], Form::Exact { size, decimals: decimals as usize })
    }
}

/// Decimal places of a column in some unit, as powers of ten.
struct Places {
    /// Of the first digit of the largest value.
    first: i32,
    /// Decades from the smallest value to the largest.
    span: i32,
    /// Of the last digit shown.
    last: i32,
}

impl Places {
    fn digits(&self) -> i32 {
        self.first - self.last + 1
    }

    /// Whether plain notation serves, up to a first digit of that power of ten.
    fn reads_well(&self, most: i32) -> bool {
        (LEAST_FIRST..=most).contains(&self.first)
            && (self.span <= MOST_DECADES || self.digits() <= SHORT_DIGITS)
    }
}

/// Whether a key names a difference of clocks or rates, whose sign is always shown.
fn is_difference(key: &str) -> bool {
    const DIFFERENCES: [&str; 11] = [
        "offset",
        "minus",
        "redshift",
        "shift",
        "rate",
        "difference",
        "error",
        "reading",
        "ideal",
        "applied",
        "residual",
    ];
    // The worst of several is a size, and so is the smallest.
    let is_size = key.starts_with("worst_") || key.starts_with("smallest_");
    !is_size && key.split('_').any(|word| DIFFERENCES.contains(&word))
}

fn common_divisor(mut left: u128, mut right: u128) -> u128 {
    while right != 0 {
        (left, right) = (right, left % right);
    }
    left
}

#[cfg(test)]
mod tests {
    use proptest::prelude::*;

    use super::*;
    use crate::model::array_time::ArrayTime;

    fn cell() -> impl Strategy<Value = Cell<'static>> {
        prop_oneof![
            6 => prop_oneof![
                any::<f64>().prop_map(Cell::Number),
                (-40_i32..40).prop_map(|power| {
                    Cell::Number(format!("2.5e{power}").parse().expect("a number"))
                }),
                Just(Cell::Number(0.0)), Just(Cell::Number(0.1 + 0.2)),
            ],
            1 => any::<i32>().prop_map(|count| Cell::Integer(i64::from(count))),
            1 => any::<i64>().prop_map(|at| Cell::Time(ArrayTime::from_attoseconds(at.into()))),
            1 => prop_oneof![
                Just(Cell::Absent("none".into())), Just(Cell::Text("灯台".into())),
                Just(Cell::Flag(true)), Just(Cell::Measured(12.5, Measure::Length)),
            ],
        ]
    }

    proptest! {
        #[test]
        fn parts_joined_are_the_whole(
            cells in prop::collection::vec(cell(), 0..20),
            cut in 0_usize..20,
            measure in prop_oneof![Just(Measure::Time), Just(Measure::Ratio), Just(Measure::Count)],
        ) {
            let see = |cells: &[Cell<'static>]| {
                let mut scan = ColumnScan::of("clock_offset_s", measure);
                cells.iter().for_each(|cell| scan.see(cell));
                scan
            };
            let (front, behind) = cells.split_at(cut.min(cells.len()));
            let mut joined = see(front);
            joined.join(&see(behind));
            prop_assert_eq!(format!("{joined:?}"), format!("{:?}", see(&cells)));
        }
    }
}
