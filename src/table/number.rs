//! Numbers as bytes that read back to the same number, in forms that JSON and CSV
//! both accept, pushed straight onto a buffer.

use crate::model::array_time::{ATTOSECONDS_PER_SECOND, ArrayTime};

/// Appends the shortest decimal that reads back to the same bits; either zero is `0`.
///
/// A value without a fraction is written without one (`22200`), which every reader of
/// JSON turns into the same double. Returns `false`, with nothing appended, for a value
/// that is not finite: neither JSON nor a table has a form for it.
pub fn push_f64(out: &mut Vec<u8>, value: f64) -> bool {
    if !value.is_finite() {
        return false;
    }
    if value == 0.0 {
        out.push(b'0');
        return true;
    }
    let mut buffer = zmij::Buffer::new();
    let printed = buffer.format_finite(value);
    out.extend_from_slice(printed.strip_suffix(".0").unwrap_or(printed).as_bytes());
    true
}

/// Appends a whole number.
pub fn push_i64(out: &mut Vec<u8>, value: i64) {
    if value < 0 {
        out.push(b'-');
    }
    push_u64(out, value.unsigned_abs());
}

/// Appends a moment as the exact decimal count of seconds, as its `Display` does.
pub fn push_time(out: &mut Vec<u8>, time: ArrayTime) {
    let magnitude = time.attoseconds().unsigned_abs();
    let per_second = ATTOSECONDS_PER_SECOND.unsigned_abs();
    if time.attoseconds() < 0 {
        out.push(b'-');
    }
    let whole = magnitude / per_second;
    match u64::try_from(whole) {
        Ok(whole) => push_u64(out, whole),
        // Only a count outside the domain of array time comes here.
        Err(_) => out.extend_from_slice(whole.to_string().as_bytes()),
    }
    let part = u64::try_from(magnitude % per_second).unwrap_or(0);
    if part != 0 {
        let mut digits = [b'0'; 18];
        fill_digits(&mut digits, part);
        let shown = digits.iter().rposition(|&digit| digit != b'0').map_or(0, |last| last + 1);
        out.push(b'.');
        out.extend_from_slice(&digits[..shown]);
    }
}

/// Appends a count.
fn push_u64(out: &mut Vec<u8>, value: u64) {
    let mut digits = [b'0'; 20];
    let first = fill_digits(&mut digits, value).min(digits.len() - 1);
    out.extend_from_slice(&digits[first..]);
}

/// Writes a count to the right end of a field of zeros and returns where it begins.
fn fill_digits(field: &mut [u8], mut value: u64) -> usize {
    let mut place = field.len();
    while value > 0 && place > 0 {
        place -= 1;
        field[place] = b'0' + (value % 10) as u8;
        value /= 10;
    }
    place
}

#[cfg(test)]
mod tests {
    use super::*;

    fn printed(value: f64) -> String {
        let mut out = Vec::new();
        assert!(push_f64(&mut out, value));
        String::from_utf8(out).expect("digits")
    }

    #[test]
    fn floats_are_short_and_valid_json() {
        for (value, text) in [
            (1.0911369672198218e-13, "1.0911369672198218e-13"),
            (22_200.0, "22200"),
            (-40_000.0, "-40000"),
            (0.1, "0.1"),
            (0.0, "0"),
            (-0.0, "0"),
            (f64::MAX, "1.7976931348623157e+308"),
            (f64::from_bits(1), "5e-324"),
        ] {
            assert_eq!(printed(value), text);
        }
        let mut out = Vec::new();
        for value in [f64::NAN, f64::INFINITY, f64::NEG_INFINITY] {
            assert!(!push_f64(&mut out, value));
        }
        assert!(out.is_empty());
    }

    #[test]
    fn whole_numbers_and_moments_are_exact() {
        for value in [0, 1, -1, 10, i64::MAX, i64::MIN] {
            let mut out = Vec::new();
            push_i64(&mut out, value);
            assert_eq!(String::from_utf8(out).expect("digits"), value.to_string());
        }
        for count in [0, 1, -1, 1_500_000_000_000_000_000, -100_000_000_000 * 10_i128.pow(18)] {
            let time = ArrayTime::from_attoseconds(count);
            let mut out = Vec::new();
            push_time(&mut out, time);
            assert_eq!(String::from_utf8(out).expect("digits"), time.to_string());
        }
    }
}
