//! Units of the text form, by what is measured, and lengths of array time for people.

use super::Measure;
use super::digits::{Decimal, Scale, exponent_of};
use crate::layout::quantity::{Dimension, UnitFactor};
use crate::model::array_time::{ATTOSECONDS_PER_SECOND, ArrayTime};

/// A unit as it stands in a heading.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) struct Unit {
    pub label: &'static str,
    /// The label where only ASCII may be shown, which layouts and sentences also read.
    pub ascii: &'static str,
    pub scale: Scale,
}

impl Unit {
    /// How many attoseconds a unit of time has; `None` where that is no whole number.
    pub(super) fn attoseconds(self) -> Option<u128> {
        let power = |tens: i32| u32::try_from(tens + 18).ok().map(|tens| 10_u128.pow(tens));
        match self.scale {
            Scale::Ten(tens) => power(tens),
            Scale::Whole(whole, tens) => Some(u128::from(whole) * power(tens)?),
            Scale::Part(_) => None,
        }
    }

    /// A unit as layouts and sentences write it, as one of the text form.
    pub(super) fn of_factor(unit: UnitFactor) -> Unit {
        let scale = match unit {
            UnitFactor { denominator, .. } if denominator != 1 => Scale::Part(denominator),
            UnitFactor { numerator: 1, power_of_ten, .. } => Scale::Ten(power_of_ten),
            UnitFactor { numerator, power_of_ten, .. } => Scale::Whole(numerator, power_of_ten),
        };
        let signs =
            [("us", "µs"), ("um", "µm"), ("ug0", "µg0"), ("m/s^2", "m/s²"), ("/s^2", "/s²")];
        let label = signs.iter().find(|(ascii, _)| *ascii == unit.name);
        Unit { label: label.map_or(unit.name, |(_, label)| label), ascii: unit.name, scale }
    }
}

/// The dimension of what is measured; `None` for what has no unit.
pub(super) fn dimension_of(measure: Measure) -> Option<Dimension> {
    match measure {
        Measure::Word | Measure::Count | Measure::Ratio | Measure::Unit | Measure::Various => None,
        Measure::Time => Some(Dimension::Time),
        Measure::Length => Some(Dimension::Length),
        Measure::Acceleration => Some(Dimension::Acceleration),
        Measure::Frequency => Some(Dimension::Frequency),
        Measure::Force => Some(Dimension::Force),
        Measure::Mass => Some(Dimension::Mass),
        Measure::Speed => Some(Dimension::Speed),
        Measure::PerSecond => Some(Dimension::PerTime),
    }
}

const fn ten(label: &'static str, power: i32) -> Unit {
    Unit { label, ascii: label, scale: Scale::Ten(power) }
}

const fn whole(label: &'static str, count: u64, power: i32) -> Unit {
    Unit { label, ascii: label, scale: Scale::Whole(count, power) }
}

const fn micro(label: &'static str, ascii: &'static str) -> Unit {
    Unit { label, ascii, scale: Scale::Ten(-6) }
}

/// Decimal units of time, of which the second is the largest.
pub(super) const TIMES: [Unit; 7] = [
    ten("as", -18),
    ten("fs", -15),
    ten("ps", -12),
    ten("ns", -9),
    micro("µs", "us"),
    ten("ms", -3),
    SECOND,
];
pub(super) const SECOND: Unit = ten("s", 0);
/// Longer units of time with the second they begin to be used from.
pub(super) const LONG_TIMES: [(Unit, f64); 4] = [
    (whole("a", 31_557_600, 0), 31_557_600.0),
    (whole("d", 86_400, 0), 172_800.0),
    (whole("h", 3_600, 0), 7_200.0),
    (whole("min", 60, 0), 120.0),
];
const LENGTHS: [Unit; 5] =
    [ten("nm", -9), micro("µm", "um"), ten("mm", -3), ten("m", 0), ten("km", 3)];
/// The longest lengths, from a tenth of the unit on: 0.97 ly says more than 61 000 au.
const LONG_LENGTHS: [(Unit, f64); 2] =
    [(whole("ly", 9_460_730_472_580_800, 0), 0.95e15), (whole("au", 149_597_870_700, 0), 0.75e11)];
const FREQUENCIES: [Unit; 5] =
    [ten("Hz", 0), ten("kHz", 3), ten("MHz", 6), ten("GHz", 9), ten("THz", 12)];
const FORCES: [Unit; 3] = [ten("N", 0), ten("kN", 3), ten("MN", 6)];
const SPEEDS: [Unit; 2] = [ten("m/s", 0), ten("km/s", 3)];
const KILOGRAM: Unit = ten("kg", 0);
const METRES_PER_SECOND_SQUARED: Unit =
    Unit { label: "m/s²", ascii: "m/s^2", scale: Scale::Ten(0) };
const STANDARD_GRAVITY: Unit = whole("g0", 980_665, -5);
const MILLI_GRAVITY: Unit = whole("mg0", 980_665, -8);
const MICRO_GRAVITY: Unit = Unit { label: "µg0", ascii: "ug0", scale: Scale::Whole(980_665, -11) };

/// The SI unit, in which values of all sizes stand in scientific notation.
pub(super) fn base_unit(measure: Measure) -> Unit {
    match measure {
        Measure::Word | Measure::Unit | Measure::Various | Measure::Count | Measure::Ratio => {
            ten("", 0)
        }
        Measure::Time => SECOND,
        Measure::Length => ten("m", 0),
        Measure::Acceleration => METRES_PER_SECOND_SQUARED,
        Measure::Frequency => ten("Hz", 0),
        Measure::Force => ten("N", 0),
        Measure::Mass => KILOGRAM,
        Measure::Speed => ten("m/s", 0),
        Measure::PerSecond => ten("/s", 0),
    }
}

/// The unit in powers of ten in which the largest value of a column reads well.
pub(super) fn decimal_unit(measure: Measure, largest: f64) -> Unit {
    match measure {
        Measure::Word
        | Measure::Unit
        | Measure::Various
        | Measure::Count
        | Measure::Ratio
        | Measure::PerSecond => base_unit(measure),
        Measure::Time => from_ladder(&TIMES, largest),
        Measure::Length => from_ladder(&LENGTHS, largest),
        Measure::Frequency => from_ladder(&FREQUENCIES, largest),
        Measure::Force => from_ladder(&FORCES, largest),
        Measure::Speed => from_ladder(&SPEEDS, largest),
        Measure::Mass if largest < 1.0 => ten("g", -3),
        Measure::Mass if largest >= 1e5 => ten("t", 3),
        Measure::Mass => KILOGRAM,
        // Below 0.1 m/s² parts of g0 read better; they are no powers of ten but belong to
        // the same ladder.
        Measure::Acceleration if largest >= 0.1 => METRES_PER_SECOND_SQUARED,
        Measure::Acceleration if largest >= 0.009_806_65 => MILLI_GRAVITY,
        Measure::Acceleration => MICRO_GRAVITY,
    }
}

/// The longer unit, not a power of ten, that the largest value asks for.
pub(super) fn long_unit(measure: Measure, largest: f64) -> Option<Unit> {
    let ladder: &[(Unit, f64)] = match measure {
        Measure::Time => &LONG_TIMES,
        Measure::Length => &LONG_LENGTHS,
        _ => return None,
    };
    ladder.iter().find(|(_, from)| largest >= *from).map(|(unit, _)| *unit)
}

fn from_ladder(ladder: &[Unit], largest: f64) -> Unit {
    let exponent = if largest > 0.0 { exponent_of(largest) } else { 0 };
    let reached = |unit: &&Unit| matches!(unit.scale, Scale::Ten(power) if power <= exponent);
    *ladder.iter().rev().find(reached).unwrap_or(&ladder[0])
}

/// A value rounded to a number of digits, without zeros at the end: `0.02`, `1.45e-5`.
pub(super) fn rounded(value: f64, scale: Scale, count: usize) -> String {
    let mut decimal = Decimal::significant(value, scale, count);
    decimal.trim();
    let sign = if value < 0.0 { "-" } else { "" };
    if decimal.is_zero() {
        return "0".to_owned();
    }
    if (-4..=9).contains(&decimal.exponent) {
        let decimals = usize::try_from(-decimal.last_position()).unwrap_or(0);
        return format!("{sign}{}", decimal.fixed(decimals));
    }
    let (mantissa, exponent) = decimal.scientific();
    format!("{sign}{mantissa}{exponent}")
}

/// Digits of a measured cell, which stands beside others of other units.
const MEASURED_DIGITS: usize = 7;

/// A value with the unit it reads well in: `0.2 mg0`, `2 h`.
pub(super) fn measured(value: f64, measure: Measure, unicode: bool) -> String {
    let largest = value.abs();
    let unit = if value == 0.0 {
        base_unit(measure)
    } else {
        long_unit(measure, largest).unwrap_or_else(|| decimal_unit(measure, largest))
    };
    let shown = rounded(value, unit.scale, MEASURED_DIGITS);
    let label = if unicode { unit.label } else { unit.ascii };
    if label.is_empty() { shown } else { format!("{shown} {label}") }
}

/// An acceleration in m/s² to ten digits and in parts of g0 to seven: `0.196133 m/s² = 0.02 g0`.
pub(super) fn acceleration(value_m_s2: f64, unicode: bool) -> String {
    let unit = METRES_PER_SECOND_SQUARED;
    let label = if unicode { unit.label } else { unit.ascii };
    let si = format!("{} {label}", rounded(value_m_s2, unit.scale, 10));
    if value_m_s2 == 0.0 {
        return si;
    }
    let parts = match value_m_s2.abs() {
        size if size >= 0.005 => STANDARD_GRAVITY,
        size if size >= 0.000_005 => MILLI_GRAVITY,
        _ => MICRO_GRAVITY,
    };
    let label = if unicode { parts.label } else { parts.ascii };
    format!("{si} = {} {label}", rounded(value_m_s2, parts.scale, 7))
}

/// A length of array time in the units people count in, exactly: `6 h 10 min`,
/// `2 d 3 h 4.000000001 s`, `12.5 ps`. The sign of a negative one counts for all of it.
#[must_use]
pub fn readable_time(time: ArrayTime) -> String {
    let magnitude = time.attoseconds().unsigned_abs();
    let second = ATTOSECONDS_PER_SECOND.unsigned_abs();
    if magnitude == 0 {
        return "0 s".to_owned();
    }
    let sign = if time.attoseconds() < 0 { "-" } else { "" };
    if magnitude < second {
        let (mut label, mut size) = ("as", 1);
        for (place, unit) in TIMES.iter().enumerate() {
            let candidate = 1000_u128.pow(place as u32);
            if magnitude >= candidate {
                (label, size) = (unit.ascii, candidate);
            }
        }
        return format!("{sign}{} {label}", exact(magnitude, size));
    }
    let mut parts = Vec::new();
    let mut rest = magnitude;
    for (label, seconds) in [("d", 86_400), ("h", 3_600), ("min", 60)] {
        let size = seconds * second;
        if rest >= size {
            parts.push(format!("{} {label}", rest / size));
            rest %= size;
        }
    }
    if rest > 0 {
        parts.push(format!("{} s", exact(rest, second)));
    }
    format!("{sign}{}", parts.join(" "))
}

/// A count divided by a power of ten, exactly.
fn exact(count: u128, size: u128) -> String {
    let (whole, part) = (count / size, count % size);
    if part == 0 {
        return whole.to_string();
    }
    let width = size.ilog10() as usize;
    let digits = format!("{part:0width$}");
    format!("{whole}.{}", digits.trim_end_matches('0'))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn times_are_readable_and_exact() {
        let second = ATTOSECONDS_PER_SECOND;
        for (count, text) in [
            (0, "0 s"),
            (1, "1 as"),
            (-12_500_000, "-12.5 ps"),
            (999_999_999_999_999_999, "999.999999999999999 ms"),
            (90 * second, "1 min 30 s"),
            (22_200 * second, "6 h 10 min"),
            (86_400 * second, "1 d"),
            ((2 * 86_400 + 3 * 3_600 + 4) * second + 1_000_000_000, "2 d 3 h 4.000000001 s"),
            (-61 * second, "-1 min 1 s"),
            (100_000_000_000 * second, "1157407 d 9 h 46 min 40 s"),
        ] {
            assert_eq!(readable_time(ArrayTime::from_attoseconds(count)), text);
        }
    }

    #[test]
    fn accelerations_stand_in_both_units() {
        assert_eq!(acceleration(0.02 * 9.80665, true), "0.196133 m/s² = 0.02 g0");
        assert_eq!(acceleration(-9.80665, false), "-9.80665 m/s^2 = -1 g0");
        assert_eq!(acceleration(0.0, false), "0 m/s^2");
        assert_eq!(acceleration(9.80665e-7, true), "9.80665e-7 m/s² = 0.1 µg0");
    }

    #[test]
    fn the_largest_value_chooses_the_unit() {
        for (measure, largest, label) in [
            (Measure::Time, 999.0e-12, "ps"),
            (Measure::Time, 1.0e-9, "ns"),
            (Measure::Length, 40_000.0, "km"),
            (Measure::Length, 1e-12, "nm"),
            (Measure::Frequency, 194.4e12, "THz"),
            (Measure::Acceleration, 0.196, "m/s²"),
            (Measure::Acceleration, 1e-4, "µg0"),
        ] {
            assert_eq!(decimal_unit(measure, largest).label, label);
        }
        assert_eq!(long_unit(Measure::Length, 9.2e15).map(|unit| unit.label), Some("ly"));
        assert_eq!(long_unit(Measure::Time, 3_600.0).map(|unit| unit.label), Some("min"));
    }
}
