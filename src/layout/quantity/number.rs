//! Decimal numbers, kept exact until they are rounded once.

use std::ops::Range;

use crate::model::array_time::ArrayTime;

/// Largest size of a decimal exponent kept; beyond it every value overflows or is zero.
const LARGEST_EXPONENT: i64 = 1_000_000_000_000_000;

/// Significant digits that settle every rounding to a double: a number halfway between
/// two doubles has at most 768 (it is a multiple of 2⁻¹⁰⁷⁵ below 2¹⁰²⁴ with at most 54
/// significant bits), so all that lies behind them only matters as "more than nothing".
const ENOUGH_DIGITS: usize = 800;

/// A decimal number `± d₁d₂…dₙ · 10^exponent`, exactly.
#[derive(Clone, Debug, PartialEq, Eq)]
pub(super) struct Decimal {
    negative: bool,
    /// Digits 0…9, the first and the last of them not zero; none for the number zero.
    digits: Vec<u8>,
    exponent: i64,
    /// Whether a remainder below the last digit was dropped.
    more: bool,
}

/// The decimal number a text begins with, and where it stands; `None` when the text does
/// not begin with one.
///
/// A sign, digits with at most one point among them, and an exponent; an underscore may
/// stand between two digits.
pub(super) fn scan(text: &str) -> Option<(Decimal, Range<usize>)> {
    let bytes = text.as_bytes();
    let mut at = 0;
    let negative = bytes.first() == Some(&b'-');
    if matches!(bytes.first(), Some(b'+' | b'-')) {
        at += 1;
    }
    let mut digits = Vec::new();
    let whole = digits_at(bytes, at, &mut digits);
    at += whole;
    let mut exponent = 0_i64;
    if bytes.get(at) == Some(&b'.') {
        let count_before = digits.len();
        let part = digits_at(bytes, at + 1, &mut digits);
        if whole == 0 && part == 0 {
            return None;
        }
        at += 1 + part;
        exponent -= signed(digits.len() - count_before);
    } else if whole == 0 {
        return None;
    }
    if let Some((written, length)) = exponent_at(bytes, at) {
        exponent = exponent.saturating_add(written);
        at += length;
    }
    Some((Decimal::normal(negative, digits, exponent), 0..at))
}

/// Reads digits from a place on, with single underscores between them; returns the
/// number of bytes read.
fn digits_at(bytes: &[u8], start: usize, digits: &mut Vec<u8>) -> usize {
    let mut at = start;
    loop {
        match bytes.get(at) {
            Some(digit) if digit.is_ascii_digit() => digits.push(digit - b'0'),
            Some(b'_')
                if at > start
                    && bytes[at - 1].is_ascii_digit()
                    && bytes.get(at + 1).is_some_and(u8::is_ascii_digit) => {}
            _ => return at - start,
        }
        at += 1;
    }
}

/// The exponent `e±digits` at a place, and its length in bytes.
fn exponent_at(bytes: &[u8], start: usize) -> Option<(i64, usize)> {
    if !matches!(bytes.get(start), Some(b'e' | b'E')) {
        return None;
    }
    let mut at = start + 1;
    let negative = bytes.get(at) == Some(&b'-');
    if matches!(bytes.get(at), Some(b'+' | b'-')) {
        at += 1;
    }
    let mut digits = Vec::new();
    let count = digits_at(bytes, at, &mut digits);
    if count == 0 {
        return None;
    }
    let size = digits.iter().fold(0_i64, |size, digit| {
        (size.saturating_mul(10).saturating_add(i64::from(*digit))).min(LARGEST_EXPONENT)
    });
    Some((if negative { -size } else { size }, at + count - start))
}

fn signed(count: usize) -> i64 {
    i64::try_from(count).unwrap_or(i64::MAX)
}

impl Decimal {
    /// The number with no zeros at either end of its digits.
    fn normal(negative: bool, mut digits: Vec<u8>, exponent: i64) -> Decimal {
        let kept = digits.iter().rposition(|digit| *digit != 0).map_or(0, |last| last + 1);
        let exponent = exponent.saturating_add(signed(digits.len() - kept));
        digits.truncate(kept);
        let leading = digits.iter().position(|digit| *digit != 0).unwrap_or(0);
        digits.drain(..leading);
        if digits.is_empty() {
            return Decimal { negative: false, digits, exponent: 0, more: false };
        }
        Decimal { negative, digits, exponent, more: false }
    }

    /// Whether the number is zero.
    pub(super) fn is_zero(&self) -> bool {
        self.digits.is_empty()
    }

    /// Whether the number is below zero.
    pub(super) fn is_negative(&self) -> bool {
        self.negative
    }

    /// The exact product with a whole number below 10¹⁸ and a power of ten.
    pub(super) fn times(&self, factor: u64, power_of_ten: i32) -> Decimal {
        debug_assert!(factor < 1_000_000_000_000_000_000);
        let mut digits = Vec::with_capacity(self.digits.len() + 20);
        let mut carry = 0_u64;
        for digit in self.digits.iter().rev() {
            let sum = u64::from(*digit) * factor + carry;
            digits.push((sum % 10) as u8);
            carry = sum / 10;
        }
        while carry > 0 {
            digits.push((carry % 10) as u8);
            carry /= 10;
        }
        digits.reverse();
        let exponent = self.exponent.saturating_add(i64::from(power_of_ten));
        Decimal::normal(self.negative, digits, exponent)
    }

    /// The quotient by a whole number between 1 and 10¹⁷: exact, or cut after more digits
    /// than a double can feel, with the cut remembered.
    pub(super) fn over(&self, divisor: u64) -> Decimal {
        debug_assert!((1..100_000_000_000_000_000).contains(&divisor));
        let mut digits = Vec::with_capacity(self.digits.len().max(ENOUGH_DIGITS) + 20);
        let mut exponent = self.exponent;
        let mut remainder = 0_u64;
        let mut significant = 0;
        let mut written = self.digits.iter();
        loop {
            let next = written.next();
            if next.is_none() {
                if remainder == 0 || significant >= ENOUGH_DIGITS {
                    break;
                }
                exponent = exponent.saturating_sub(1);
            }
            let sum = remainder * 10 + u64::from(next.copied().unwrap_or(0));
            let digit = (sum / divisor) as u8;
            remainder = sum % divisor;
            if digit != 0 || significant > 0 {
                significant += 1;
            }
            digits.push(digit);
        }
        let mut quotient = Decimal::normal(self.negative, digits, exponent);
        quotient.more = remainder != 0;
        quotient
    }

    /// The nearest double, ties to even; infinite when the number is too large for one.
    /// Zero has no sign.
    pub(super) fn to_f64(&self) -> f64 {
        if self.digits.is_empty() {
            return 0.0;
        }
        // The number is 0.d₁d₂… · 10^size.
        let size = self.exponent.saturating_add(signed(self.digits.len()));
        let magnitude = if size > 400 {
            f64::INFINITY
        } else if size < -400 {
            0.0
        } else {
            let kept = self.digits.len().min(ENOUGH_DIGITS);
            let mut text = String::with_capacity(kept + 16);
            text.push_str("0.");
            text.extend(self.digits[..kept].iter().map(|digit| char::from(b'0' + digit)));
            if kept < self.digits.len() || self.more {
                text.push('1');
            }
            text.push_str(&format!("e{size}"));
            text.parse().unwrap_or(f64::NAN)
        };
        // Adding zero turns a negative zero into zero.
        if self.negative { -magnitude + 0.0 } else { magnitude }
    }

    /// The number as a whole count, when it is one and below 10³⁸.
    ///
    /// # Errors
    ///
    /// [`NotACount`].
    pub(super) fn to_count(&self) -> Result<i128, NotACount> {
        debug_assert!(!self.more);
        if self.digits.is_empty() {
            return Ok(0);
        }
        if self.exponent < 0 {
            return Err(NotACount::Finer);
        }
        let length = self.exponent.saturating_add(signed(self.digits.len()));
        if length > 38 {
            return Err(NotACount::TooLarge);
        }
        let mut count =
            self.digits.iter().fold(0_i128, |count, digit| count * 10 + i128::from(*digit));
        for _ in 0..self.exponent {
            count *= 10;
        }
        Ok(if self.negative { -count } else { count })
    }
}

/// Why a decimal number is not a whole count.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum NotACount {
    /// It has a part below one.
    Finer,
    /// It has more than 38 digits.
    TooLarge,
}

/// A bare number without underscores, rounded once; `None` for anything else, which then
/// deserves the slower road with its messages.
pub(crate) fn plain(text: &str) -> Option<f64> {
    let bytes = text.as_bytes();
    let allowed =
        |byte: &u8| byte.is_ascii_digit() || matches!(byte, b'+' | b'-' | b'.' | b'e' | b'E');
    if !bytes.iter().all(allowed) {
        return None;
    }
    let value: f64 = text.parse().ok()?;
    value.is_finite().then_some(value + 0.0)
}

/// A bare number of seconds without exponent or underscores, exactly; `None` for
/// anything else, and outside the domain of array time.
pub(crate) fn plain_seconds(text: &str) -> Option<ArrayTime> {
    let (negative, digits) = match text.as_bytes() {
        [b'-', rest @ ..] => (true, rest),
        rest => (false, rest),
    };
    let point = digits.iter().position(|byte| *byte == b'.').unwrap_or(digits.len());
    let (whole, part) = (&digits[..point], digits.get(point + 1..).unwrap_or(&[]));
    if whole.is_empty() || whole.len() > 12 || part.len() > 18 {
        return None;
    }
    let mut count = 0_i128;
    for byte in whole.iter().chain(part) {
        if !byte.is_ascii_digit() {
            return None;
        }
        count = count * 10 + i128::from(byte - b'0');
    }
    for _ in part.len()..18 {
        count *= 10;
    }
    ArrayTime::from_attoseconds(if negative { -count } else { count }).in_domain()
}

#[cfg(test)]
mod tests {
    use super::*;

    fn number(text: &str) -> Decimal {
        let (decimal, range) = scan(text).expect("a number");
        assert_eq!(range, 0..text.len());
        decimal
    }

    #[test]
    fn long_numbers_round_once() {
        // Half a unit above 1, and the least bit more far behind it.
        let tie = "1.00000000000000011102230246251565404236316680908203125";
        assert_eq!(number(tie).to_f64(), 1.0);
        assert_eq!(number(&format!("{tie}{}1", "0".repeat(5000))).to_f64(), 1.0 + f64::EPSILON);
        let long = format!("{}e-{}", "7".repeat(100_000), 100_000);
        assert_eq!(number(&long).to_f64(), 7.0 / 9.0);
        assert_eq!(number(&format!("1{}e-100000", "0".repeat(100_000))).to_f64(), 1.0);
        assert_eq!(number(&format!("0.{}1e100001", "0".repeat(100_000))).to_f64(), 1.0);
    }

    #[test]
    fn extremes_are_infinite_or_zero() {
        assert_eq!(number("1e999999999999999999999").to_f64(), f64::INFINITY);
        assert_eq!(number("-1e-999999999999999999999").to_f64().to_bits(), 0);
        assert_eq!(number("-0.000").to_f64().to_bits(), 0);
        assert_eq!(number("4.9e-324").to_f64(), 4.9e-324);
        assert_eq!(number("1.7976931348623157e308").to_f64(), f64::MAX);
    }

    #[test]
    fn quotients_remember_what_was_cut() {
        assert_eq!(number("1").over(3).to_f64(), 1.0 / 3.0);
        assert_eq!(number("-2").over(31_557_600).to_f64(), -2.0 / 31_557_600.0);
        assert_eq!(number("86400").over(86_400).to_f64(), 1.0);
        assert_eq!(number("1").over(7).times(7, 0).to_f64(), 1.0);
    }

    #[test]
    fn counts_are_whole() {
        assert_eq!(number("1.5e1").to_count(), Ok(15));
        assert_eq!(number("0e99").to_count(), Ok(0));
        assert_eq!(number("-1.25").to_count(), Err(NotACount::Finer));
        assert_eq!(number("1e38").to_count(), Err(NotACount::TooLarge));
    }

    #[test]
    fn plain_numbers_agree_with_the_exact_road() {
        for text in ["1", "-12.5", "1e-20", "+3.25E+4", "0.1", ".5", "5."] {
            assert_eq!(plain(text), Some(number(text).to_f64()), "{text}");
        }
        assert_eq!(plain("-0").map(f64::to_bits), Some(0));
        for text in ["inf", "nan", "1_0", "", "1e999", "0x1", "1 m"] {
            assert_eq!(plain(text), None, "{text}");
        }
        assert_eq!(
            plain_seconds("-1.5"),
            Some(ArrayTime::from_attoseconds(-1_500_000_000_000_000_000))
        );
        assert_eq!(plain_seconds("100000000000.000000000000000001"), None);
        assert_eq!(plain_seconds("1."), Some(ArrayTime::from_seconds(1)));
    }
}
