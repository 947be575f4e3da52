//! Decimal digits of a double in some unit, correctly rounded of its true value.
//!
//! Purpose: what a table shows must be the rounding of the number itself, not of a number
//! that was first multiplied by a power of ten.
//! Method: the decimal expansion of the double comes from the standard formatter, which is
//! exact. A unit that is a power of ten shifts the exponent; any other is a whole number
//! times a power of ten and divides the digits, as by hand.
//! Accuracy: to nearest, ties to even, at any place down to the 17th digit.

use std::fmt::{self, Write};

/// Digits that settle every rounding to 17 or fewer: a tie, once divided by a unit below
/// 2⁵⁴, has at most 33 digits.
const SETTLING_DIGITS: usize = 40;

/// Decimals of the scientific form that every double has at most: with them nothing of it is
/// left out.
const ALL_DECIMALS: usize = 766;

/// An attosecond is one part in ten to this power of a second.
const ATTO: i32 = 18;

/// The most digits that are ever shown.
pub(super) const MOST_DIGITS: usize = 17;

/// A unit in parts of the SI unit.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Scale {
    /// A power of ten.
    Ten(i32),
    /// A whole number (below 2⁵⁴) times a power of ten.
    Whole(u64, i32),
    /// One part of a whole number (below 2⁵⁴): per day is one part in 86 400 of per second.
    Part(u64),
}

/// A decimal magnitude `d₀.d₁d₂… · 10^exponent`; zero has no digits.
#[derive(Clone, Debug, PartialEq, Eq)]
pub(super) struct Decimal {
    /// Digits 0 to 9, the first not zero.
    pub digits: Vec<u8>,
    /// Power of ten of the first digit.
    pub exponent: i32,
}

/// A small text on the stack.
struct Scratch {
    bytes: [u8; 64],
    len: usize,
}

impl Write for Scratch {
    fn write_str(&mut self, text: &str) -> fmt::Result {
        let end = self.len + text.len();
        self.bytes.get_mut(self.len..end).ok_or(fmt::Error)?.copy_from_slice(text.as_bytes());
        self.len = end;
        Ok(())
    }
}

impl Decimal {
    const ZERO: Decimal = Decimal { digits: Vec::new(), exponent: 0 };

    /// Reads what the standard formatter or the shortest printer wrote, in either notation.
    fn read(text: &[u8]) -> Decimal {
        let mut digits = Vec::with_capacity(text.len());
        let mut point = None;
        let mut exponent = 0;
        for (place, &byte) in text.iter().enumerate() {
            match byte {
                b'0'..=b'9' => digits.push(byte - b'0'),
                b'.' => point = Some(digits.len()),
                b'e' => {
                    let rest = std::str::from_utf8(&text[place + 1..]).unwrap_or_default();
                    exponent = rest.parse().unwrap_or(0);
                    break;
                }
                _ => {}
            }
        }
        let whole = point.unwrap_or(digits.len());
        let zeros = digits.iter().take_while(|&&digit| digit == 0).count();
        if zeros == digits.len() {
            return Decimal::ZERO;
        }
        digits.drain(..zeros);
        Decimal { digits, exponent: exponent + whole as i32 - 1 - zeros as i32 }
    }

    /// The magnitude with a number of digits, correctly rounded.
    fn with_digits(value: f64, count: usize) -> Decimal {
        let mut scratch = Scratch { bytes: [0; 64], len: 0 };
        let written = write!(scratch, "{:.*e}", count - 1, value.abs());
        debug_assert!(written.is_ok(), "the scratch holds {SETTLING_DIGITS} digits");
        Decimal::read(&scratch.bytes[..scratch.len])
    }

    /// The shortest decimal that reads back to the same double.
    pub fn shortest(value: f64) -> Decimal {
        let mut buffer = zmij::Buffer::new();
        let mut decimal = Decimal::read(buffer.format_finite(value.abs()).as_bytes());
        decimal.trim();
        decimal
    }

    /// The magnitude times a whole number, with all its digits: a product that looks like a
    /// tie need not be one, and no fixed number of digits settles that.
    fn product(value: f64, factor: u64) -> Decimal {
        let all = Decimal::read(format!("{:.*e}", ALL_DECIMALS, value.abs()).as_bytes());
        let mut digits = Vec::with_capacity(all.digits.len() + 20);
        let mut carry = 0;
        for &digit in all.digits.iter().rev() {
            let sum = u64::from(digit) * factor + carry;
            digits.push((sum % 10) as u8);
            carry = sum / 10;
        }
        let before = digits.len();
        while carry > 0 {
            digits.push((carry % 10) as u8);
            carry /= 10;
        }
        let exponent = all.exponent + (digits.len() - before) as i32;
        digits.reverse();
        let mut product = Decimal { digits, exponent };
        product.trim();
        product
    }

    /// A count of attoseconds in a unit of time, rounded to a multiple of 10^`position` of
    /// that unit.
    pub fn of_attoseconds(count: u128, scale: Scale, position: i32) -> Decimal {
        let (tens, divisor) = match scale {
            Scale::Ten(tens) => (tens, 1),
            Scale::Whole(whole, tens) => (tens, whole),
            Scale::Part(_) => (0, 1),
        };
        let mut full = Decimal::read(count.to_string().as_bytes());
        full.exponent -= ATTO;
        let mut rounded =
            full.divided(divisor).rounded(position + tens, true).unwrap_or(Decimal::ZERO);
        rounded.exponent -= tens;
        rounded
    }

    /// The value in a unit, rounded to a multiple of 10^`position` of that unit.
    pub fn at_position(value: f64, scale: Scale, position: i32) -> Decimal {
        let (tens, divisor) = match scale {
            Scale::Ten(tens) => (tens, 1),
            Scale::Whole(whole, tens) => (tens, whole),
            Scale::Part(parts) => {
                let product = Decimal::product(value, parts);
                return product.rounded(position, true).unwrap_or(Decimal::ZERO);
            }
        };
        if divisor == 1 {
            // Seventeen digits settle all roundings but those that look like a tie.
            let near = Decimal::with_digits(value, MOST_DIGITS);
            if let Some(mut rounded) = near.rounded(position + tens, false) {
                rounded.exponent -= tens;
                return rounded;
            }
        }
        let full = Decimal::with_digits(value, SETTLING_DIGITS).divided(divisor);
        let mut rounded = full.rounded(position + tens, true).unwrap_or(Decimal::ZERO);
        rounded.exponent -= tens;
        rounded
    }

    /// The value in a unit, rounded to a number of digits.
    pub fn significant(value: f64, scale: Scale, count: usize) -> Decimal {
        match scale {
            Scale::Ten(tens) => {
                let mut decimal = Decimal::with_digits(value, count);
                decimal.exponent -= tens;
                decimal
            }
            Scale::Whole(whole, tens) => {
                let full = Decimal::with_digits(value, SETTLING_DIGITS).divided(whole);
                let mut rounded = full.cut_to(count);
                rounded.exponent -= tens;
                rounded
            }
            Scale::Part(parts) => Decimal::product(value, parts).cut_to(count),
        }
    }

    /// All the digits there are, rounded to a number of them.
    fn cut_to(self, count: usize) -> Decimal {
        let place = self.exponent + 1 - count as i32;
        let mut rounded = self.rounded(place, true).unwrap_or(Decimal::ZERO);
        // A carry into a new first digit leaves one digit too many.
        let digits = if rounded.digits.is_empty() { 0 } else { count };
        rounded.digits.resize(digits, 0);
        rounded
    }

    /// Power of ten of the last digit.
    pub fn last_position(&self) -> i32 {
        self.exponent + 1 - self.digits.len() as i32
    }

    /// Whether nothing is left.
    pub fn is_zero(&self) -> bool {
        self.digits.is_empty()
    }

    /// Drops zeros at the end.
    pub fn trim(&mut self) {
        while self.digits.last() == Some(&0) {
            self.digits.pop();
        }
    }

    /// The digits divided by a whole number, with a last digit of 1 for any rest, so that
    /// the rounding of the quotient is that of the true one.
    fn divided(self, divisor: u64) -> Decimal {
        if divisor == 1 || self.is_zero() {
            return self;
        }
        let mut rest = 0;
        let mut digits = Vec::with_capacity(self.digits.len() + MOST_DIGITS);
        for digit in self.digits.iter().copied().chain([0; MOST_DIGITS]) {
            rest = rest * 10 + u64::from(digit);
            digits.push((rest / divisor) as u8);
            rest %= divisor;
        }
        digits.push(u8::from(rest != 0));
        let zeros = digits.iter().take_while(|&&digit| digit == 0).count();
        digits.drain(..zeros);
        Decimal { digits, exponent: self.exponent - zeros as i32 }
    }

    /// The decimal rounded to a multiple of 10^`position`, ties to even. Unless these
    /// digits are all there are, `None` when what is dropped looks like a tie.
    fn rounded(mut self, position: i32, complete: bool) -> Option<Decimal> {
        if self.is_zero() {
            return Some(Decimal::ZERO);
        }
        let Ok(keep) = usize::try_from(self.exponent - position + 1) else {
            return Some(Decimal::ZERO);
        };
        if keep >= self.digits.len() {
            if !complete && keep > self.digits.len() {
                return None;
            }
            self.digits.resize(keep, 0);
            return Some(self);
        }
        let tail = self.digits[keep + 1..].iter().any(|&digit| digit != 0);
        let up = match self.digits[keep] {
            5 if !tail && !complete => return None,
            5 if !tail => keep > 0 && self.digits[keep - 1] % 2 == 1,
            first => first >= 5,
        };
        self.digits.truncate(keep);
        if up {
            let nines = self.digits.iter().rev().take_while(|&&digit| digit == 9).count();
            self.digits[keep - nines..].fill(0);
            if nines == keep {
                self.digits.insert(0, 1);
                self.exponent += 1;
            } else {
                self.digits[keep - nines - 1] += 1;
            }
        }
        Some(if self.digits.is_empty() { Decimal::ZERO } else { self })
    }

    /// Plain notation with a number of decimals: `0.0120`, `43200.00`.
    pub fn fixed(&self, decimals: usize) -> String {
        let mut text = String::new();
        let last = -(decimals as i32);
        for position in (last..=self.exponent.max(0)).rev() {
            if position == -1 {
                text.push('.');
            }
            let place = self.exponent - position;
            let digit = usize::try_from(place).ok().and_then(|place| self.digits.get(place));
            text.push(char::from(b'0' + digit.copied().unwrap_or(0)));
        }
        text
    }

    /// First digit, decimals and power of ten: `("1.0911", "e-13")`.
    pub fn scientific(&self) -> (String, String) {
        let mut mantissa = String::new();
        for (place, &digit) in self.digits.iter().enumerate() {
            if place == 1 {
                mantissa.push('.');
            }
            mantissa.push(char::from(b'0' + digit));
        }
        if mantissa.is_empty() {
            mantissa.push('0');
        }
        (mantissa, format!("e{}", self.exponent))
    }
}

/// Power of ten of the first digit of a value that is neither zero nor infinite.
pub(super) fn exponent_of(value: f64) -> i32 {
    Decimal::shortest(value).exponent
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn ties_and_carries_are_rounded_of_the_true_value() {
        let fixed = |value: f64, decimals: i32| {
            Decimal::at_position(value, Scale::Ten(0), -decimals).fixed(decimals as usize)
        };
        for decimals in 0..17 {
            for value in [0.5, 1.5, 2.5, 0.125, 9.5, 0.05, 99.95, 0.1, 1.0 / 3.0, 1e-3, 0.0] {
                let wanted = format!("{value:.*}", decimals as usize);
                let digits = Decimal::shortest(value).exponent + decimals + 1;
                if digits <= 17 {
                    assert_eq!(fixed(value, decimals), wanted, "{value} to {decimals}");
                }
            }
        }
        // 1e23 is a little below its shortest form.
        assert_eq!(Decimal::at_position(1e23, Scale::Ten(0), 23).digits, [1]);
        assert_eq!(Decimal::at_position(1e23, Scale::Ten(3), 5).fixed(0), "100000000000000000000");
    }

    #[test]
    fn units_that_are_no_power_of_ten_divide_exactly() {
        let hours = Scale::Whole(3_600, 0);
        assert_eq!(Decimal::at_position(5_400.0, hours, -1).fixed(1), "1.5");
        assert_eq!(Decimal::at_position(5_400.0, hours, 0).fixed(0), "2");
        assert_eq!(Decimal::at_position(9_000.0, hours, 0).fixed(0), "2");
        let gravity = Scale::Whole(980_665, -5);
        assert_eq!(Decimal::significant(9.80665, gravity, 5).fixed(4), "1.0000");
        let light_year = Scale::Whole(9_460_730_472_580_800, 0);
        let shown = Decimal::significant(
            f64::from_bits(9.460_730_472_580_8e15_f64.to_bits() - 1),
            light_year,
            4,
        );
        assert_eq!(shown.fixed(3), "1.000");
        assert_eq!(Decimal::at_position(1.0, light_year, -20).fixed(20), "0.00000000000000010570");
    }

    /// A generator of bits that is good enough to pick inputs with.
    fn next(state: &mut u64) -> u64 {
        *state =
            state.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
        *state ^ (*state >> 29)
    }

    #[test]
    fn plain_notation_agrees_with_the_standard_formatter() {
        let mut state = 1;
        for _ in 0..20_000 {
            let value = (next(&mut state) >> 12) as f64 / (1_u64 << (next(&mut state) % 60)) as f64;
            for decimals in 0..20_usize {
                let shown = Decimal::at_position(value, Scale::Ten(0), -(decimals as i32));
                assert_eq!(shown.fixed(decimals), format!("{value:.decimals$}"));
            }
        }
    }

    #[test]
    fn products_agree_with_whole_numbers() {
        let mut state = 3;
        for _ in 0..5_000 {
            let count = next(&mut state) >> (12 + next(&mut state) % 40);
            let halvings = (next(&mut state) % 40) as u32;
            let value = count as f64 / (1_u64 << halvings) as f64;
            for factor in [86_400_u64, 31_557_600] {
                for decimals in 0..6_u32 {
                    let parts = u128::from(count) * u128::from(factor) * 10_u128.pow(decimals);
                    let size = 1_u128 << halvings;
                    let (quotient, rest) = (parts / size, parts % size);
                    let up = 2 * rest > size || (2 * rest == size && quotient % 2 == 1);
                    let wanted = quotient + u128::from(up);
                    let shown =
                        Decimal::at_position(value, Scale::Part(factor), -(decimals as i32));
                    let shown = shown.fixed(decimals as usize).replace('.', "");
                    assert_eq!(shown.parse(), Ok(wanted), "{value} * {factor} to {decimals}");
                }
            }
        }
        let shown = Decimal::significant(1e-16, Scale::Part(86_400), 4);
        assert_eq!(shown.scientific(), ("8.640".to_owned(), "e-12".to_owned()));
    }

    #[test]
    fn quotients_agree_with_whole_numbers() {
        let mut state = 2;
        for _ in 0..20_000 {
            let count = next(&mut state) >> (12 + next(&mut state) % 40);
            for divisor in [60, 3_600, 86_400, 31_557_600, 149_597_870_700] {
                for decimals in 0..8_usize {
                    let parts = u128::from(count) * 10_u128.pow(decimals as u32) * 2;
                    let (quotient, rest) = (parts / (2 * divisor), parts % (2 * divisor));
                    let up = rest > divisor || (rest == divisor && quotient % 2 == 1);
                    let wanted = quotient + u128::from(up);
                    let scale = Scale::Whole(divisor as u64, 0);
                    let shown = Decimal::at_position(count as f64, scale, -(decimals as i32));
                    let shown = shown.fixed(decimals).replace('.', "");
                    assert_eq!(shown.parse(), Ok(wanted), "{count} / {divisor} to {decimals}");
                }
            }
        }
    }
}
