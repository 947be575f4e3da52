//! A scanner for the JSON of one line: no blanks, keys in a fixed order, numbers kept as
//! they are written until their meaning is known.
//!
//! A general JSON reader would round moments to doubles and build a tree of a frame of a
//! million nodes.

use std::ops::Range;

use crate::layout::quantity::parse_duration;
use crate::model::array_time::ArrayTime;
use memchr::memchr;

/// What is wrong with a line, and at which of its bytes.
#[derive(Clone, Debug, PartialEq, Eq)]
pub(super) struct Malformed {
    pub(super) at: usize,
    pub(super) what: String,
}

impl Malformed {
    /// The text of the fault with its place.
    pub(super) fn text(&self) -> String {
        format!("{} at column {}", self.what, self.at + 1)
    }
}

type Scanned<T> = Result<T, Malformed>;

/// A position in the bytes of one line.
#[derive(Clone, Debug)]
pub(super) struct Scanner<'a> {
    bytes: &'a [u8],
    at: usize,
}

impl<'a> Scanner<'a> {
    pub(super) fn new(bytes: &'a [u8]) -> Scanner<'a> {
        Scanner { bytes, at: 0 }
    }

    pub(super) fn fail<T>(&self, what: impl Into<String>) -> Scanned<T> {
        Err(Malformed { at: self.at, what: what.into() })
    }

    /// Whether the next bytes are these; passes over them when they are.
    pub(super) fn passes(&mut self, expected: &str) -> bool {
        let found = self.bytes[self.at..].starts_with(expected.as_bytes());
        if found {
            self.at += expected.len();
        }
        found
    }

    pub(super) fn expect(&mut self, expected: &str) -> Scanned<()> {
        if self.passes(expected) { Ok(()) } else { self.fail(format!("`{expected}` is missing")) }
    }

    /// The next key, with the comma before it.
    pub(super) fn key(&mut self, key: &str) -> Scanned<()> {
        let start = self.at;
        if self.passes(",\"") && self.passes(key) && self.passes("\":") {
            return Ok(());
        }
        self.at = start;
        self.fail(format!("the key `{key}` is missing"))
    }

    /// The bytes scanned.
    pub(super) fn bytes(&self) -> &'a [u8] {
        self.bytes
    }

    /// Where the next byte stands.
    pub(super) fn at(&self) -> usize {
        self.at
    }

    /// Passes over a list without lists or texts in it; returns where its entries stand.
    pub(super) fn passes_flat_list(&mut self) -> Option<Range<usize>> {
        let rest = self.bytes[self.at..].strip_prefix(b"[")?;
        let start = self.at + 1;
        let end = start + memchr(b']', rest)?;
        self.at = end + 1;
        Some(start..end)
    }

    /// The end of the line.
    pub(super) fn end(&self) -> Scanned<()> {
        if self.at == self.bytes.len() {
            Ok(())
        } else {
            self.fail("more than the line should have")
        }
    }

    pub(super) fn text(&mut self) -> Scanned<String> {
        let start = self.at;
        if !self.passes("\"") {
            return self.fail("a text is missing");
        }
        loop {
            let rest = &self.bytes[self.at..];
            let Some(length) = rest.iter().position(|byte| matches!(byte, b'"' | b'\\')) else {
                return self.fail("a text without an end");
            };
            if rest[length] == b'"' {
                self.at += length + 1;
                break;
            }
            // Whatever stands after a backslash belongs to the text.
            self.at = (self.at + length + 2).min(self.bytes.len());
        }
        let text = &self.bytes[start..self.at];
        // Nearly all texts, a million names among them, stand for themselves.
        let stands_for_itself = |byte: &u8| matches!(byte, b' '..=b'~') && *byte != b'\\';
        let parsed = if text.iter().all(stands_for_itself) {
            std::str::from_utf8(&text[1..text.len() - 1]).ok().map(str::to_owned)
        } else {
            serde_json::from_slice(text).ok()
        };
        parsed.ok_or_else(|| Malformed { at: start, what: "a malformed text".to_owned() })
    }

    /// The next number, as it is written.
    fn number(&mut self) -> Scanned<&'a str> {
        let bytes = &self.bytes[self.at..];
        let digits = |from: usize| bytes[from..].iter().take_while(|b| b.is_ascii_digit()).count();
        let mut length = usize::from(bytes.first() == Some(&b'-'));
        let whole = digits(length);
        let is_padded = whole > 1 && bytes[length] == b'0';
        length += whole;
        let mut is_good = whole > 0 && !is_padded;
        if bytes.get(length) == Some(&b'.') {
            let part = digits(length + 1);
            is_good &= part > 0;
            length += 1 + part;
        }
        if let Some(b'e' | b'E') = bytes.get(length) {
            length += 1 + usize::from(matches!(bytes.get(length + 1), Some(b'+' | b'-')));
            let exponent = digits(length);
            is_good &= exponent > 0;
            length += exponent;
        }
        match std::str::from_utf8(&bytes[..length]) {
            Ok(text) if is_good => {
                self.at += length;
                Ok(text)
            }
            _ => self.fail("a number is missing"),
        }
    }

    /// A double: the one nearest to the decimal, which must be finite.
    pub(super) fn double(&mut self) -> Scanned<f64> {
        let at = self.at;
        match self.number()?.parse() {
            Ok(value) if f64::is_finite(value) => Ok(value),
            _ => Err(Malformed { at, what: "a number beyond the largest double".to_owned() }),
        }
    }

    pub(super) fn double_or_null(&mut self) -> Scanned<Option<f64>> {
        if self.passes("null") { Ok(None) } else { self.double().map(Some) }
    }

    pub(super) fn whole(&mut self) -> Scanned<u64> {
        let at = self.at;
        let parsed = self.number()?.parse();
        parsed.map_err(|_| Malformed { at, what: "not a whole number".to_owned() })
    }

    /// An exact moment or length of array time.
    pub(super) fn time(&mut self) -> Scanned<ArrayTime> {
        let at = self.at;
        let written = self.number()?;
        parse_duration(written).map_err(|_| Malformed {
            at,
            what: format!("`{written:.40}` is not a moment of array time"),
        })
    }

    pub(super) fn time_or_null(&mut self) -> Scanned<Option<ArrayTime>> {
        if self.passes("null") { Ok(None) } else { self.time().map(Some) }
    }

    /// A list; `item` reads one entry. At most so many entries.
    pub(super) fn list<T>(
        &mut self,
        most: usize,
        mut item: impl FnMut(&mut Self) -> Scanned<T>,
    ) -> Scanned<Vec<T>> {
        self.expect("[")?;
        let mut items = Vec::new();
        if self.passes("]") {
            return Ok(items);
        }
        loop {
            if items.len() == most {
                return self.fail(format!("more than {most} entries"));
            }
            items.push(item(self)?);
            if self.passes("]") {
                return Ok(items);
            }
            self.expect(",")?;
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::model::array_time::ATTOSECONDS_PER_SECOND;

    #[test]
    fn moments_are_read_exactly_or_not_at_all() {
        let count = |written: &str| {
            Scanner::new(written.as_bytes()).time().ok().map(ArrayTime::attoseconds)
        };
        assert_eq!(count("0"), Some(0));
        assert_eq!(count("-0.0"), Some(0));
        assert_eq!(count("43200"), Some(43_200 * ATTOSECONDS_PER_SECOND));
        assert_eq!(count("43200.0"), Some(43_200 * ATTOSECONDS_PER_SECOND));
        assert_eq!(count("-0.000000000000000001"), Some(-1));
        assert_eq!(count("1e-18"), Some(1));
        assert_eq!(count("10e-19"), Some(1));
        assert_eq!(count("1.5E3"), Some(1_500 * ATTOSECONDS_PER_SECOND));
        assert_eq!(count("100000000000"), Some(ArrayTime::LIMIT.attoseconds()));
        assert_eq!(count("100000000000.000000000000000001"), None);
        assert_eq!(count("0.0000000000000000001"), None);
        assert_eq!(count("1e999999999999"), None);
        assert_eq!(count("1e-2147483648"), None);
    }

    #[test]
    fn numbers_follow_json() {
        for good in ["0", "-0", "10", "1.5", "1e-13", "-2.5E+10"] {
            assert!(Scanner::new(good.as_bytes()).double().is_ok(), "{good}");
        }
        for bad in ["", "-", "01", ".5", "1.", "1e", "+1", "inf", "nan", "NaN", "1e999"] {
            let mut scanner = Scanner::new(bad.as_bytes());
            assert!(scanner.double().is_err() || scanner.end().is_err(), "{bad}");
        }
    }

    #[test]
    fn texts_end_at_their_own_quote() {
        let mut scanner = Scanner::new(br#""a\"b\\"rest"#);
        assert_eq!(scanner.text().as_deref(), Ok(r#"a"b\"#));
        assert!(scanner.passes("rest"));
        for bad in [&b"\"a"[..], b"\"a\\", b"\"\xff\"", b"\"\\x\"", b"\"\n\"", b"a", b""] {
            assert!(Scanner::new(bad).text().is_err(), "{bad:?}");
        }
    }
}
