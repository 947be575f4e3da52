//! The units, each with its exact factor.

/// What kind of quantity a value is.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Dimension {
    /// A number without a unit.
    Number,
    /// A length, in m.
    Length,
    /// A time, in s.
    Time,
    /// A frequency, in Hz.
    Frequency,
    /// A mass, in kg.
    Mass,
    /// A force, in N.
    Force,
    /// A speed, in m/s.
    Speed,
    /// An acceleration, in m/s².
    Acceleration,
    /// A mass per length, in kg/m.
    LinearDensity,
    /// A temperature change, in K.
    Temperature,
    /// A fraction per temperature change, in 1/K.
    PerTemperature,
    /// A gradient of acceleration, in 1/s².
    PerTimeSquared,
    /// A fraction per time, in 1/s.
    PerTime,
    /// A fraction per acceleration, in 1/(m/s²); it has no unit of its own and is
    /// written as a bare number.
    PerAcceleration,
}

impl Dimension {
    /// The dimension in words, with its article.
    #[must_use]
    pub const fn words(self) -> &'static str {
        match self {
            Dimension::Number => "a plain number",
            Dimension::Length => "a length",
            Dimension::Time => "a time",
            Dimension::Frequency => "a frequency",
            Dimension::Mass => "a mass",
            Dimension::Force => "a force",
            Dimension::Speed => "a speed",
            Dimension::Acceleration => "an acceleration",
            Dimension::LinearDensity => "a mass per length",
            Dimension::Temperature => "a temperature change",
            Dimension::PerTemperature => "a fraction per kelvin",
            Dimension::PerTimeSquared => "a gradient of acceleration",
            Dimension::PerTime => "a fraction per time",
            Dimension::PerAcceleration => "a plain number, per m/s^2,",
        }
    }

    /// The SI unit in which a bare number is taken; empty for plain numbers.
    #[must_use]
    pub const fn si_unit(self) -> &'static str {
        match self {
            Dimension::Number | Dimension::PerAcceleration => "",
            Dimension::Length => "m",
            Dimension::Time => "s",
            Dimension::Frequency => "Hz",
            Dimension::Mass => "kg",
            Dimension::Force => "N",
            Dimension::Speed => "m/s",
            Dimension::Acceleration => "m/s^2",
            Dimension::LinearDensity => "kg/m",
            Dimension::Temperature => "K",
            Dimension::PerTemperature => "/K",
            Dimension::PerTimeSquared => "/s^2",
            Dimension::PerTime => "/s",
        }
    }

    /// A value of this dimension as one would write it.
    #[must_use]
    pub const fn example(self) -> &'static str {
        match self {
            Dimension::Number => "0.5",
            Dimension::Length => "120 m",
            Dimension::Time => "10 min",
            Dimension::Frequency => "10 MHz",
            Dimension::Mass => "35 kg",
            Dimension::Force => "9 kN",
            Dimension::Speed => "30 km/s",
            Dimension::Acceleration => "0.02 g0",
            Dimension::LinearDensity => "12 g/m",
            Dimension::Temperature => "-40 K",
            Dimension::PerTemperature => "2e-6 /K",
            Dimension::PerTimeSquared => "3.086e-6 /s^2",
            Dimension::PerTime => "1e-16 /d",
            Dimension::PerAcceleration => "1e-13",
        }
    }

    /// The units of this dimension, in the order of their table.
    pub fn units(self) -> impl Iterator<Item = &'static str> {
        UNITS.iter().filter(move |unit| unit.dimension == self).map(|unit| unit.name)
    }
}

/// A unit: its value in SI is `numerator / denominator · 10^power_of_ten`, exactly.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Unit {
    pub(crate) name: &'static str,
    pub(crate) dimension: Dimension,
    pub(crate) numerator: u64,
    pub(crate) denominator: u64,
    pub(crate) power_of_ten: i32,
}

const fn decimal(name: &'static str, dimension: Dimension, power_of_ten: i32) -> Unit {
    Unit { name, dimension, numerator: 1, denominator: 1, power_of_ten }
}

const fn multiple(name: &'static str, dimension: Dimension, numerator: u64) -> Unit {
    Unit { name, dimension, numerator, denominator: 1, power_of_ten: 0 }
}

const fn per(name: &'static str, dimension: Dimension, denominator: u64) -> Unit {
    Unit { name, dimension, numerator: 1, denominator, power_of_ten: 0 }
}

/// Standard gravity is 980 665 · 10⁻⁵ m/s², exactly.
const fn gravity(name: &'static str, power_of_ten: i32) -> Unit {
    Unit {
        name,
        dimension: Dimension::Acceleration,
        numerator: 980_665,
        denominator: 1,
        power_of_ten: power_of_ten - 5,
    }
}

/// Every unit. Factors with provenance are those of [`crate::model::constants`]; a test
/// holds them together.
pub(super) const UNITS: &[Unit] = &[
    decimal("nm", Dimension::Length, -9),
    decimal("um", Dimension::Length, -6),
    decimal("mm", Dimension::Length, -3),
    decimal("cm", Dimension::Length, -2),
    decimal("m", Dimension::Length, 0),
    decimal("km", Dimension::Length, 3),
    multiple("au", Dimension::Length, 149_597_870_700),
    multiple("ly", Dimension::Length, 9_460_730_472_580_800),
    decimal("as", Dimension::Time, -18),
    decimal("fs", Dimension::Time, -15),
    decimal("ps", Dimension::Time, -12),
    decimal("ns", Dimension::Time, -9),
    decimal("us", Dimension::Time, -6),
    decimal("ms", Dimension::Time, -3),
    decimal("s", Dimension::Time, 0),
    multiple("min", Dimension::Time, 60),
    multiple("h", Dimension::Time, 3_600),
    multiple("d", Dimension::Time, 86_400),
    multiple("a", Dimension::Time, 31_557_600),
    decimal("Hz", Dimension::Frequency, 0),
    decimal("kHz", Dimension::Frequency, 3),
    decimal("MHz", Dimension::Frequency, 6),
    decimal("GHz", Dimension::Frequency, 9),
    decimal("THz", Dimension::Frequency, 12),
    decimal("g", Dimension::Mass, -3),
    decimal("kg", Dimension::Mass, 0),
    decimal("t", Dimension::Mass, 3),
    decimal("N", Dimension::Force, 0),
    decimal("kN", Dimension::Force, 3),
    decimal("MN", Dimension::Force, 6),
    decimal("m/s", Dimension::Speed, 0),
    decimal("km/s", Dimension::Speed, 3),
    decimal("m/s^2", Dimension::Acceleration, 0),
    gravity("g0", 0),
    gravity("mg0", -3),
    gravity("ug0", -6),
    decimal("g/m", Dimension::LinearDensity, -3),
    decimal("kg/m", Dimension::LinearDensity, 0),
    decimal("K", Dimension::Temperature, 0),
    decimal("/K", Dimension::PerTemperature, 0),
    decimal("/s^2", Dimension::PerTimeSquared, 0),
    decimal("/s", Dimension::PerTime, 0),
    per("/d", Dimension::PerTime, 86_400),
    per("/a", Dimension::PerTime, 31_557_600),
];

/// The unit of a name; `µ`, in either of its two characters, reads as `u`.
pub(crate) fn find(name: &str) -> Option<&'static Unit> {
    let plain = |name: &str| UNITS.iter().find(|unit| unit.name == name);
    if name.contains(['\u{b5}', '\u{3bc}']) {
        return plain(&name.replace(['\u{b5}', '\u{3bc}'], "u"));
    }
    plain(name)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::model::constants::{
        ASTRONOMICAL_UNIT_M, JULIAN_YEAR_S, LIGHT_YEAR_M, STANDARD_GRAVITY_M_S2,
    };

    #[test]
    fn units_are_unique_and_every_dimension_with_a_unit_has_its_si_unit() {
        for (index, unit) in UNITS.iter().enumerate() {
            assert!(UNITS[..index].iter().all(|other| other.name != unit.name), "{}", unit.name);
            let si = find(unit.dimension.si_unit()).expect("an SI unit");
            assert_eq!((si.numerator, si.denominator, si.power_of_ten), (1, 1, 0));
        }
    }

    #[test]
    fn factors_are_those_of_the_constants() {
        let factor = |name| find(name).map(|unit| unit.numerator as f64);
        assert_eq!(factor("au"), Some(ASTRONOMICAL_UNIT_M));
        assert_eq!(factor("ly"), Some(LIGHT_YEAR_M));
        assert_eq!(factor("a"), Some(JULIAN_YEAR_S));
        assert_eq!(factor("g0"), Some(STANDARD_GRAVITY_M_S2 * 1e5));
    }

    #[test]
    fn both_micro_signs_read_as_u() {
        assert_eq!(find("\u{b5}m").map(|unit| unit.name), Some("um"));
        assert_eq!(find("\u{3bc}g0").map(|unit| unit.name), Some("ug0"));
        assert!(find("M").is_none() && find("KM").is_none() && find("").is_none());
    }
}
