//! Dates: `2041-03-09T06:00:00 TAI`, with the time scale always stated.
//!
//! A date becomes an exact count of attoseconds of International Atomic Time. Terrestrial
//! Time is TAI + 32.184 s (IAU 1991 resolution A4, IAU 2000 resolution B1.9);
//! Coordinated Universal Time is TAI less a whole number of seconds, which changes at the
//! leap seconds announced in the IERS Bulletin C.

use std::ops::Range;

use super::quantity::{self, QuantityFault, short};
use super::{Epoch, TimeScale};
use crate::model::array_time::{ATTOSECONDS_PER_SECOND, ArrayTime};

/// TAI − UTC in whole seconds from the beginning of a date on: year, month, offset.
/// Source: IERS, `leap-seconds.list`, after Bulletin C; the last row stands until
/// another leap second is announced.
pub const LEAP_SECONDS: [(i64, i64, i64); 28] = [
    (1972, 1, 10),
    (1972, 7, 11),
    (1973, 1, 12),
    (1974, 1, 13),
    (1975, 1, 14),
    (1976, 1, 15),
    (1977, 1, 16),
    (1978, 1, 17),
    (1979, 1, 18),
    (1980, 1, 19),
    (1981, 7, 20),
    (1982, 7, 21),
    (1983, 7, 22),
    (1985, 7, 23),
    (1988, 1, 24),
    (1990, 1, 25),
    (1991, 1, 26),
    (1992, 7, 27),
    (1993, 7, 28),
    (1994, 7, 29),
    (1996, 1, 30),
    (1997, 7, 31),
    (1999, 1, 32),
    (2006, 1, 33),
    (2009, 1, 34),
    (2012, 7, 35),
    (2015, 7, 36),
    (2017, 1, 37),
];

/// TT − TAI, 32.184 s exactly, in attoseconds.
const TT_LESS_TAI: i128 = 32_184 * (ATTOSECONDS_PER_SECOND / 1_000);

const SECONDS_PER_DAY: i64 = 86_400;

/// How a date is written.
const FORM: &str = "write for example `2041-03-09T06:00:00 TAI`; the scale is TAI, TT or UTC";

/// A calendar date and time of day, as written; the second may be 60.
struct Calendar {
    year: i64,
    month: i64,
    day: i64,
    hour: i64,
    minute: i64,
    second: i64,
}

/// Reads a date with its time scale, exactly to the attosecond.
///
/// Years 1972 to 9999. A UTC date after the last leap second announced takes the last
/// offset; the second 60 exists only where a leap second was inserted.
///
/// # Errors
///
/// Another form, no time scale, a date the calendar does not have, a year outside the
/// range, digits finer than 1 as.
pub fn parse_date(text: &str) -> Result<Epoch, QuantityFault> {
    let trimmed = text.trim_matches(' ');
    let start = text.len() - text.trim_start_matches(' ').len();
    let whole = start..start + trimmed.len();
    let form = |range: Range<usize>, rule: &str| QuantityFault::new(range, rule, FORM);

    let Some((date, scale_word)) = trimmed.rsplit_once(' ') else {
        let rule = match trimmed.as_bytes().last() {
            Some(b'Z' | b'z') => "a date states its time scale as a word",
            _ => "a date states its time scale: TAI, TT or UTC",
        };
        return Err(form(whole, rule));
    };
    let scale_place = whole.end - scale_word.len()..whole.end;
    let scale = match scale_word {
        "TAI" => TimeScale::Tai,
        "TT" => TimeScale::Tt,
        "UTC" => TimeScale::Utc,
        _ => {
            return Err(QuantityFault::new(
                scale_place,
                format!("`{}` is not a time scale known here", short(scale_word)),
                "end the date with TAI, TT or UTC, in capitals",
            ));
        }
    };
    let date = date.trim_end_matches(' ');
    let date_place = whole.start..whole.start + date.len();
    let (clock_text, fraction) = match date.split_once('.') {
        None => (date, 0),
        Some((clock_text, digits)) => {
            let place = date_place.end - digits.len()..date_place.end;
            (clock_text, attoseconds_of_fraction(digits, place)?)
        }
    };
    let calendar = fields(clock_text).ok_or_else(|| {
        form(date_place.clone(), "a date is written year-month-dayThour:minute:second")
    })?;
    check(&calendar, scale, date_place)?;
    let seconds = seconds_since_2000(&calendar);
    let stated = i128::from(seconds) * ATTOSECONDS_PER_SECOND + fraction;
    let tai = match scale {
        TimeScale::Tai => stated,
        TimeScale::Tt => stated - TT_LESS_TAI,
        TimeScale::Utc => {
            let offset = utc_offset(calendar.year, calendar.month);
            stated + i128::from(offset) * ATTOSECONDS_PER_SECOND
        }
    };
    let tai_since_2000 = ArrayTime::from_attoseconds(tai);
    Ok(Epoch { text: trimmed.to_owned(), scale, tai_since_2000 })
}

/// A date in a time scale, in the form [`parse_date`] reads, exactly; `None` outside the
/// years 1972 to 9999.
#[must_use]
pub fn format_date(tai_since_2000: ArrayTime, scale: TimeScale) -> Option<String> {
    let tai = tai_since_2000.attoseconds();
    let (stated, leap) = match scale {
        TimeScale::Tai => (tai, false),
        TimeScale::Tt => (tai.checked_add(TT_LESS_TAI)?, false),
        TimeScale::Utc => utc_of(tai)?,
    };
    let seconds = i64::try_from(stated.div_euclid(ATTOSECONDS_PER_SECOND)).ok()?;
    let part = stated.rem_euclid(ATTOSECONDS_PER_SECOND);
    let (year, month, day) = civil(seconds.div_euclid(SECONDS_PER_DAY) + DAYS_TO_2000)?;
    let of_day = seconds.rem_euclid(SECONDS_PER_DAY);
    let (hour, minute) = (of_day / 3600, of_day / 60 % 60);
    // A leap second is counted back into the minute it ends.
    let second = of_day % 60 + i64::from(leap);
    let mut text = format!("{year:04}-{month:02}-{day:02}T{hour:02}:{minute:02}:{second:02}");
    if part != 0 {
        text.push('.');
        text.push_str(format!("{part:018}").trim_end_matches('0'));
    }
    text.push_str(match scale {
        TimeScale::Tai => " TAI",
        TimeScale::Tt => " TT",
        TimeScale::Utc => " UTC",
    });
    (1972..=9999).contains(&year).then_some(text)
}

/// A moment of array time as a person names it: a duration since array time zero, also in
/// parts as moments are shown (`5 h 20 min`), the word `end`, or, when the layout has an
/// epoch, a date.
///
/// # Errors
///
/// Whatever [`quantity::parse_duration`] and [`parse_date`] refuse; a date without an
/// epoch; a date more than 10¹¹ s away from it.
pub fn parse_moment(
    text: &str,
    epoch: Option<&Epoch>,
    end: ArrayTime,
) -> Result<ArrayTime, QuantityFault> {
    let trimmed = text.trim_matches(' ');
    if trimmed == "end" {
        return Ok(end);
    }
    if !looks_like_a_date(trimmed) {
        return match parse_parts(trimmed) {
            Some(sum) => Ok(sum),
            None => quantity::parse_duration(text),
        };
    }
    let date = parse_date(text)?;
    let Some(epoch) = epoch else {
        return Err(QuantityFault::new(
            0..text.len(),
            "a date names a moment only when the layout states its epoch",
            "write the moment as a time since array time zero, or give the layout an `epoch`",
        ));
    };
    date.tai_since_2000.checked_sub(epoch.tai_since_2000).ok_or_else(|| {
        QuantityFault::new(
            0..text.len(),
            "array time lies within 1e11 s of its zero, about 3168 years either way",
            format!("write a date nearer to the epoch, {}", epoch.text),
        )
    })
}

/// A duration in two or more parts, each of a smaller unit than the one before; a sign in
/// front is that of the whole. `None` for anything else.
fn parse_parts(text: &str) -> Option<ArrayTime> {
    let (is_negative, unsigned) = match text.strip_prefix('-') {
        Some(rest) => (true, rest),
        None => (false, text),
    };
    let words: Vec<&str> = unsigned.split(' ').collect();
    if words.len() < 4 || !words.len().is_multiple_of(2) || unsigned.starts_with(['+', '-']) {
        return None;
    }
    let mut sum = ArrayTime::ZERO;
    let mut last_unit = None;
    for part in words.chunks(2) {
        let unit = quantity::parse_duration(&format!("1 {}", part[1])).ok()?;
        let is_smaller = last_unit.is_none_or(|last| unit < last);
        if !is_smaller || !part[0].starts_with(|first: char| first.is_ascii_digit()) {
            return None;
        }
        last_unit = Some(unit);
        sum = sum.checked_add(quantity::parse_duration(&part.join(" ")).ok()?)?;
    }
    if is_negative { ArrayTime::ZERO.checked_sub(sum) } else { Some(sum) }
}

/// Whether a text begins like a date: four digits, a hyphen, a digit.
#[must_use]
pub fn looks_like_a_date(text: &str) -> bool {
    let bytes = text.as_bytes();
    bytes.len() > 5
        && bytes[..4].iter().all(u8::is_ascii_digit)
        && bytes[4] == b'-'
        && bytes[5].is_ascii_digit()
}

fn attoseconds_of_fraction(digits: &str, place: Range<usize>) -> Result<i128, QuantityFault> {
    if digits.is_empty() || !digits.bytes().all(|byte| byte.is_ascii_digit()) {
        return Err(QuantityFault::new(place, "digits follow the point of the seconds", FORM));
    }
    let kept = digits.trim_end_matches('0');
    if kept.len() > 18 {
        return Err(QuantityFault::new(
            place,
            "a date is exact and counts whole attoseconds",
            "leave out the digits below 1 as, the 18th decimal of a second",
        ));
    }
    let count = kept.bytes().fold(0_i128, |count, byte| count * 10 + i128::from(byte - b'0'));
    Ok((kept.len()..18).fold(count, |count, _| count * 10))
}

/// The six fields of `YYYY-MM-DDThh:mm:ss`.
fn fields(text: &str) -> Option<Calendar> {
    let bytes = text.as_bytes();
    let marks = [(4, b'-'), (7, b'-'), (10, b'T'), (13, b':'), (16, b':')];
    if bytes.len() != 19 || marks.iter().any(|(at, mark)| bytes[*at] != *mark) {
        return None;
    }
    let field = |range: Range<usize>| {
        bytes[range].iter().try_fold(0_i64, |value, byte| {
            byte.is_ascii_digit().then(|| value * 10 + i64::from(byte - b'0'))
        })
    };
    Some(Calendar {
        year: field(0..4)?,
        month: field(5..7)?,
        day: field(8..10)?,
        hour: field(11..13)?,
        minute: field(14..16)?,
        second: field(17..19)?,
    })
}

fn check(date: &Calendar, scale: TimeScale, place: Range<usize>) -> Result<(), QuantityFault> {
    let at = |from: usize, length: usize| place.start + from..place.start + from + length;
    let fault = |range: Range<usize>, rule: String, remedy: &str| {
        Err(QuantityFault::new(range, rule, remedy))
    };
    if date.year < 1972 {
        return fault(
            at(0, 4),
            "dates lie in the years 1972 to 9999".to_owned(),
            "write a year of 1972 or later; UTC has had whole seconds since then",
        );
    }
    if !(1..=12).contains(&date.month) {
        return fault(at(5, 2), "a month is 01 to 12".to_owned(), FORM);
    }
    let days = days_in_month(date.year, date.month);
    if !(1..=days).contains(&date.day) {
        let rule = format!("month {:02} of {} has {days} days", date.month, date.year);
        return fault(at(8, 2), rule, "write a day of that month");
    }
    if date.hour > 23 || date.minute > 59 {
        let range = if date.hour > 23 { at(11, 2) } else { at(14, 2) };
        return fault(range, "an hour is 00 to 23 and a minute 00 to 59".to_owned(), FORM);
    }
    if date.second < 60 || (date.second == 60 && scale == TimeScale::Utc && has_leap_second(date)) {
        return Ok(());
    }
    let rule = if date.second == 60 && scale == TimeScale::Utc {
        "the second 60 exists only where UTC inserted a leap second"
    } else {
        "a second is 00 to 59; the second 60 exists only in UTC, at a leap second"
    };
    fault(at(17, 2), rule.to_owned(), "write a second that existed, or state the scale as TAI")
}

/// Whether a leap second ends the minute of a date.
fn has_leap_second(date: &Calendar) -> bool {
    let ends_month = date.day == days_in_month(date.year, date.month);
    let (year, month) =
        if date.month == 12 { (date.year + 1, 1) } else { (date.year, date.month + 1) };
    let listed = LEAP_SECONDS[1..].iter().any(|(y, m, _)| (*y, *m) == (year, month));
    ends_month && date.hour == 23 && date.minute == 59 && listed
}

/// TAI − UTC on a date, s.
fn utc_offset(year: i64, month: i64) -> i64 {
    let later = LEAP_SECONDS.partition_point(|(y, m, _)| (*y, *m) <= (year, month));
    LEAP_SECONDS[later.saturating_sub(1)].2
}

/// UTC of a TAI count, in attoseconds since 2000-01-01, and whether it lies in a leap
/// second (the count is then one second early); `None` before 1972.
fn utc_of(tai: i128) -> Option<(i128, bool)> {
    let mut row = LEAP_SECONDS.len();
    while row > 0 {
        row -= 1;
        let (year, month, offset) = LEAP_SECONDS[row];
        let begins = i128::from(seconds_of_day(year, month, 1) + offset) * ATTOSECONDS_PER_SECOND;
        let utc = tai.checked_sub(i128::from(offset) * ATTOSECONDS_PER_SECOND)?;
        if tai >= begins {
            return Some((utc, false));
        }
        // The second before a new offset is the leap second, still counted with the old one.
        if row > 0 && tai >= begins - ATTOSECONDS_PER_SECOND {
            return Some((utc, true));
        }
    }
    None
}

fn is_leap_year(year: i64) -> bool {
    year % 4 == 0 && (year % 100 != 0 || year % 400 == 0)
}

fn days_in_month(year: i64, month: i64) -> i64 {
    match month {
        2 => 28 + i64::from(is_leap_year(year)),
        4 | 6 | 9 | 11 => 30,
        _ => 31,
    }
}

/// Days from 0000-03-01 to 2000-01-01 in the Gregorian calendar.
const DAYS_TO_2000: i64 = 730_425;

/// Days since 0000-03-01 of a date; years begin in March so that the leap day ends them.
fn days(year: i64, month: i64, day: i64) -> i64 {
    let shifted = if month > 2 { year } else { year - 1 };
    let of_year = (153 * ((month + 9) % 12) + 2) / 5 + day - 1;
    365 * shifted + shifted / 4 - shifted / 100 + shifted / 400 + of_year
}

fn seconds_of_day(year: i64, month: i64, day: i64) -> i64 {
    (days(year, month, day) - DAYS_TO_2000) * SECONDS_PER_DAY
}

fn seconds_since_2000(date: &Calendar) -> i64 {
    let of_day = date.hour * 3600 + date.minute * 60 + date.second;
    seconds_of_day(date.year, date.month, date.day) + of_day
}

/// The date of a count of days since 0000-03-01; `None` before that.
fn civil(count: i64) -> Option<(i64, i64, i64)> {
    if !(0..=3_700_000).contains(&count) {
        return None;
    }
    let mut year = count / 366;
    while days(year + 1, 3, 1) <= count {
        year += 1;
    }
    let of_year = count - days(year, 3, 1);
    let shifted = (5 * of_year + 2) / 153;
    let day = of_year - (153 * shifted + 2) / 5 + 1;
    let month = (shifted + 2) % 12 + 1;
    Some((if month > 2 { year } else { year + 1 }, month, day))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn moments_are_read_as_they_are_shown() {
        let end = ArrayTime::from_seconds(1);
        for seconds in [0, 59, 60, 3_601, 19_200, 90_061, 86_399, 100_000_000_000] {
            for sign in [1, -1] {
                let at = ArrayTime::from_seconds(sign * seconds);
                let shown = crate::table::readable_time(at);
                assert_eq!(parse_moment(&shown, None, end), Ok(at), "{shown}");
            }
        }
        let quarter = ArrayTime::from_attoseconds(3_600_250_000_000_000_000_000);
        assert_eq!(parse_moment("1 h 250 ms", None, end), Ok(quarter));
        for text in ["20 min 5 h", "1 h 1 h", "1 h -5 min", "1 h 5 kg", "1 h 5", "--1 h 5 s"] {
            assert!(parse_moment(text, None, end).is_err(), "{text}");
        }
    }

    #[test]
    fn the_calendar_counts_every_day_once() {
        assert_eq!(days(2000, 1, 1), DAYS_TO_2000);
        let mut count = days(1972, 1, 1);
        for year in 1972..=9999 {
            for month in 1..=12 {
                for day in 1..=days_in_month(year, month) {
                    assert_eq!(days(year, month, day), count);
                    if day == 1 || day > 27 {
                        assert_eq!(civil(count), Some((year, month, day)));
                    }
                    count += 1;
                }
            }
        }
    }

    #[test]
    fn scales_differ_by_their_offsets() {
        let tai = |text: &str| parse_date(text).expect("a date").tai_since_2000.to_string();
        assert_eq!(tai("2000-01-01T00:00:00 TAI"), "0");
        assert_eq!(tai("2000-01-01T00:00:32.184 TT"), "0");
        assert_eq!(tai("1999-12-31T23:59:28 UTC"), "0");
        assert_eq!(tai("1972-01-01T00:00:00 UTC"), "-883612790");
        assert_eq!(
            tai("2017-01-01T00:00:00.000000000000000001 UTC"),
            "536544037.000000000000000001"
        );
        assert_eq!(tai("9999-12-31T23:59:59 UTC"), "252455616036");
    }
}
