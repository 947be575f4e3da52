//! Array time: the proper time of the reference node, counted exactly.

use std::fmt;

use super::dd::Dd;

/// Attoseconds in a second.
pub const ATTOSECONDS_PER_SECOND: i128 = 1_000_000_000_000_000_000;

/// A moment of array time, or a length of it: a signed count of attoseconds.
///
/// Parsed, stepped, compared and printed without rounding; the domain is
/// ±10¹¹ s ([`ArrayTime::LIMIT`]). The physics receives differences of such counts
/// as double-doubles, formed before anything is rounded.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct ArrayTime(i128);

impl ArrayTime {
    /// The start of the thrust plan.
    pub const ZERO: ArrayTime = ArrayTime(0);
    /// The largest moment of the domain, 10¹¹ s.
    pub const LIMIT: ArrayTime = ArrayTime(100_000_000_000 * ATTOSECONDS_PER_SECOND);

    /// A count of attoseconds.
    #[must_use]
    pub const fn from_attoseconds(count: i128) -> ArrayTime {
        ArrayTime(count)
    }

    /// A count of whole seconds.
    #[must_use]
    pub const fn from_seconds(seconds: i64) -> ArrayTime {
        ArrayTime(seconds as i128 * ATTOSECONDS_PER_SECOND)
    }

    /// The moment nearest to a double, to the attosecond; `None` outside the domain
    /// or for a number that is not finite. For moments that were *computed* (a zero
    /// of a rate, an arrival); what a person writes is parsed exactly instead.
    #[must_use]
    pub fn nearest(seconds: Dd) -> Option<ArrayTime> {
        if !seconds.is_finite() || seconds.abs().hi > 1.0e11 {
            return None;
        }
        let whole = seconds.hi.trunc();
        let rest = (Dd::new(seconds.hi - whole) + seconds.lo) * 1.0e18;
        let count = whole as i128 * ATTOSECONDS_PER_SECOND + rest.hi.round() as i128;
        // What is left of the rest is below half an attosecond unless `rest.hi` itself
        // has an odd last bit above one, which its low half then corrects.
        let count = count + (Dd::new(rest.hi - rest.hi.round()) + rest.lo).hi.round() as i128;
        ArrayTime(count).in_domain()
    }

    /// The count of attoseconds.
    #[must_use]
    pub const fn attoseconds(self) -> i128 {
        self.0
    }

    /// The value itself when it lies in the domain.
    #[must_use]
    pub fn in_domain(self) -> Option<ArrayTime> {
        (self.0.abs() <= Self::LIMIT.0).then_some(self)
    }

    /// The sum, or `None` outside the domain.
    #[must_use]
    pub fn checked_add(self, other: ArrayTime) -> Option<ArrayTime> {
        ArrayTime(self.0.checked_add(other.0)?).in_domain()
    }

    /// The difference, or `None` outside the domain.
    #[must_use]
    pub fn checked_sub(self, other: ArrayTime) -> Option<ArrayTime> {
        ArrayTime(self.0.checked_sub(other.0)?).in_domain()
    }

    /// `self + count · step`, or `None` outside the domain.
    #[must_use]
    pub fn stepped(self, step: ArrayTime, count: i128) -> Option<ArrayTime> {
        ArrayTime(self.0.checked_add(step.0.checked_mul(count)?)?).in_domain()
    }

    /// The difference from an earlier moment in seconds, as a double-double:
    /// the subtraction is exact, the division by 10¹⁸ good to 2⁻¹⁰².
    #[must_use]
    pub fn seconds_since(self, earlier: ArrayTime) -> Dd {
        Dd::from_i128(self.0 - earlier.0) / 1.0e18
    }

    /// Seconds from array time zero, as a double-double good to 2⁻¹⁰².
    #[must_use]
    pub fn seconds(self) -> Dd {
        self.seconds_since(ArrayTime::ZERO)
    }

    /// Seconds, rounded to the nearest double.
    #[must_use]
    pub fn to_f64(self) -> f64 {
        self.seconds().to_f64()
    }
}

impl fmt::Display for ArrayTime {
    /// Seconds as an exact decimal with no trailing zeros: `43200`, `-0.000000001`.
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let magnitude = self.0.unsigned_abs();
        let per_second = ATTOSECONDS_PER_SECOND.unsigned_abs();
        let (whole, part) = (magnitude / per_second, magnitude % per_second);
        let sign = if self.0 < 0 { "-" } else { "" };
        if part == 0 {
            return f.pad(&format!("{sign}{whole}"));
        }
        let digits = format!("{part:018}");
        f.pad(&format!("{sign}{whole}.{}", digits.trim_end_matches('0')))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn prints_exact_decimals() {
        assert_eq!(ArrayTime::from_seconds(43_200).to_string(), "43200");
        assert_eq!(ArrayTime::from_attoseconds(-1_000_000_000).to_string(), "-0.000000001");
        assert_eq!(ArrayTime::from_attoseconds(1).to_string(), "0.000000000000000001");
        assert_eq!(ArrayTime::LIMIT.to_string(), "100000000000");
    }

    #[test]
    fn a_nanosecond_counts_at_a_gigasecond() {
        let start = ArrayTime::from_seconds(1_000_000_000);
        let step = ArrayTime::from_attoseconds(1_000_000_000);
        let next = start.checked_add(step).expect("inside the domain");
        assert_eq!(next.to_string(), "1000000000.000000001");
        assert_eq!(next.seconds_since(start).to_f64(), 1e-9);
    }

    #[test]
    fn nearest_finds_every_count() {
        for count in [
            0,
            1,
            -1,
            999_999_999_999_999_999,
            1_000_000_000_000_000_001,
            123_456_789_012_345_678_901_234_567,
        ] {
            let time = ArrayTime::from_attoseconds(count);
            assert_eq!(ArrayTime::nearest(time.seconds()), Some(time));
        }
        assert_eq!(ArrayTime::nearest(Dd::new(f64::NAN)), None);
        assert_eq!(ArrayTime::nearest(Dd::new(2e11)), None);
    }
}
