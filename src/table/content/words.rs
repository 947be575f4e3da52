//! Amounts for sentences: six digits, rounded to the side on which the rule holds.

use crate::layout::quantity::{Dimension, parse};
use crate::model::constants::{
    ASTRONOMICAL_UNIT_M, JULIAN_YEAR_S, LIGHT_YEAR_M, STANDARD_GRAVITY_M_S2,
};
use crate::table::digits::Scale;
use crate::table::unit::rounded;

/// What is measured, and units with their size in SI, the smallest first, and the amount of
/// it, in SI, from which each is used.
pub(super) struct Units(Dimension, &'static [(&'static str, f64, f64)]);

/// Accelerations, in parts of g0.
pub(super) const ACCELERATION: Units = Units(
    Dimension::Acceleration,
    &[
        ("ug0", STANDARD_GRAVITY_M_S2 / 1e6, 0.0),
        ("mg0", STANDARD_GRAVITY_M_S2 / 1e3, 5e-6 * STANDARD_GRAVITY_M_S2),
        ("g0", STANDARD_GRAVITY_M_S2, 5e-3 * STANDARD_GRAVITY_M_S2),
    ],
);

/// Lengths.
pub(super) const LENGTH: Units = Units(
    Dimension::Length,
    &[
        ("um", 1e-6, 0.0),
        ("mm", 1e-3, 1e-3),
        ("m", 1.0, 1.0),
        ("km", 1e3, 1e4),
        ("au", ASTRONOMICAL_UNIT_M, 0.75e11),
        ("ly", LIGHT_YEAR_M, 0.95e15),
    ],
);

/// Lengths of time.
pub(super) const TIME: Units = Units(
    Dimension::Time,
    &[
        ("as", 1e-18, 0.0),
        ("fs", 1e-15, 1e-15),
        ("ps", 1e-12, 1e-12),
        ("ns", 1e-9, 1e-9),
        ("us", 1e-6, 1e-6),
        ("ms", 1e-3, 1e-3),
        ("s", 1.0, 1.0),
        ("min", 60.0, 120.0),
        ("h", 3_600.0, 7_200.0),
        ("d", 86_400.0, 172_800.0),
        ("a", JULIAN_YEAR_S, JULIAN_YEAR_S),
    ],
);

/// Lengths of time in seconds alone.
pub(super) const SECONDS: Units = Units(Dimension::Time, &[("s", 1.0, 0.0)]);

/// Speeds.
pub(super) const SPEED: Units = Units(Dimension::Speed, &[("m/s", 1.0, 0.0), ("km/s", 1e3, 1e5)]);

/// Forces.
pub(super) const FORCE: Units =
    Units(Dimension::Force, &[("N", 1.0, 0.0), ("kN", 1e3, 1e4), ("MN", 1e6, 1e7)]);

/// Masses.
pub(super) const MASS: Units = Units(Dimension::Mass, &[("kg", 1.0, 0.0)]);

/// Digits of an amount.
const DIGITS: usize = 6;

/// Steps in the last digit that are tried before an amount is given up.
const STEPS: usize = 12;

impl Units {
    /// The amount nearest to a value.
    pub(super) fn about(&self, value: f64) -> String {
        let (label, size) = self.unit(value);
        let (mantissa, exponent) = six_digits(value / size);
        shown(mantissa, exponent, label)
    }

    /// The largest amount of six digits up to a value that is allowed, as a layout reads it;
    /// `None` where none near the value is.
    pub(super) fn at_most(&self, value: f64, is_allowed: impl Fn(f64) -> bool) -> Option<String> {
        self.towards(value, -1, is_allowed)
    }

    /// The smallest amount of six digits from a value on that is allowed, as a layout reads
    /// it; `None` where none near the value is.
    pub(super) fn at_least(&self, value: f64, is_allowed: impl Fn(f64) -> bool) -> Option<String> {
        self.towards(value, 1, is_allowed)
    }

    fn unit(&self, value: f64) -> (&'static str, f64) {
        let unit = self.1.iter().rev().find(|(_, _, from)| value.abs() >= *from);
        let (label, size, _) = *unit.unwrap_or(&self.1[0]);
        (label, size)
    }

    /// The nearest amount is off by half a step at most, so one step settles what is monotone;
    /// the others are for roundings beneath.
    fn towards(&self, value: f64, step: i64, is_allowed: impl Fn(f64) -> bool) -> Option<String> {
        if !value.is_finite() || value <= 0.0 {
            return None;
        }
        let (label, size) = self.unit(value);
        let (mut mantissa, exponent) = six_digits(value / size);
        for _ in 0..STEPS {
            let amount = shown(mantissa, exponent, label);
            if parse(&amount, self.0).is_ok_and(&is_allowed) {
                return Some(amount);
            }
            mantissa += step;
            if mantissa <= 0 {
                return None;
            }
        }
        None
    }
}

fn shown(mantissa: i64, exponent: i32, label: &str) -> String {
    format!("{} {label}", rounded(decimal(mantissa, exponent), Scale::Ten(0), DIGITS))
}

/// `a, b, or c`.
pub(super) fn listed(ways: &[String]) -> String {
    match ways {
        [] => String::new(),
        [one] => one.clone(),
        [one, other] => format!("{one}, or {other}"),
        [first, rest @ ..] => format!("{first}, {}", listed(rest)),
    }
}

/// The nearest number of six digits, as a whole number and a power of ten.
fn six_digits(value: f64) -> (i64, i32) {
    let shown = format!("{value:.5e}");
    let (digits, exponent) = shown.split_once('e').unwrap_or((&shown, "0"));
    let mantissa = digits.replace('.', "").parse().unwrap_or(0);
    (mantissa, exponent.parse::<i32>().unwrap_or(0) - 5)
}

fn decimal(mantissa: i64, exponent: i32) -> f64 {
    format!("{mantissa}e{exponent}").parse().unwrap_or(0.0)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn amounts_are_rounded_to_the_side_that_is_allowed() {
        let some = |amount: &str| Some(amount.to_owned());
        let below = |limit: f64| move |value: f64| value <= limit;
        let above = |limit: f64| move |value: f64| value >= limit;
        assert_eq!(ACCELERATION.at_most(4.903_325, below(4.903_325)), some("0.5 g0"));
        assert_eq!(ACCELERATION.at_most(0.01, below(0.01)), some("1.01971 mg0"));
        assert_eq!(ACCELERATION.at_least(0.01, above(0.01)), some("1.01972 mg0"));
        assert_eq!(LENGTH.at_most(12_345.678_9, below(12_345.678_9)), some("12.3456 km"));
        assert_eq!(TIME.at_least(5.000_000_1e-6, above(5.000_000_1e-6)), some("5.00001 us"));
        assert_eq!(TIME.about(7_200.0), "2 h");
        assert_eq!(LENGTH.at_most(1.0, |_| false), None);
        assert_eq!(LENGTH.at_most(f64::INFINITY, |_| true), None);
        assert_eq!(SPEED.about(0.0), "0 m/s");
    }
}
