//! Quantities, durations and dates against exact values made elsewhere.

use clockspar::layout::TimeScale;
use clockspar::layout::date::{LEAP_SECONDS, format_date, parse_date, parse_moment};
use clockspar::layout::quantity::{Dimension, parse, parse_duration, parse_length_of_time};
use clockspar::model::array_time::{ATTOSECONDS_PER_SECOND, ArrayTime};

/// Every dimension with a unit, by the name its variant has in the table.
const DIMENSIONS: [Dimension; 12] = [
    Dimension::Length,
    Dimension::Time,
    Dimension::Frequency,
    Dimension::Mass,
    Dimension::Force,
    Dimension::Speed,
    Dimension::Acceleration,
    Dimension::LinearDensity,
    Dimension::Temperature,
    Dimension::PerTemperature,
    Dimension::PerTimeSquared,
    Dimension::PerTime,
];

#[test]
fn values_are_the_nearest_doubles_of_exact_fractions() {
    let table = std::fs::read_to_string("tests/data/quantities.csv").expect("the table");
    let mut rows = 0;
    for row in table.lines().skip(1) {
        let fields: Vec<&str> = row.split(',').collect();
        let [text, dimension, bits, attoseconds] = fields[..] else { panic!("{row}") };
        let dimension = *DIMENSIONS
            .iter()
            .find(|known| format!("{known:?}") == dimension)
            .expect("a known dimension");
        let found = parse(text, dimension);
        if bits == "overflow" {
            assert!(found.is_err(), "{text}");
        } else {
            let wanted = u64::from_str_radix(bits, 16).expect("bits");
            let found = found.unwrap_or_else(|fault| panic!("{text}: {fault}")).to_bits();
            assert_eq!(found, wanted, "{text}: wanted {:e}", f64::from_bits(wanted));
        }
        if dimension == Dimension::Time {
            let found = parse_duration(text).ok().map(ArrayTime::attoseconds);
            assert_eq!(found, attoseconds.parse().ok(), "{text}");
        }
        rows += 1;
    }
    assert!(rows > 2000, "{rows} rows");
    for dimension in DIMENSIONS {
        for unit in dimension.units() {
            assert!(
                table.contains(&format!("{unit},{dimension:?},")),
                "{unit} is not in the table"
            );
        }
    }
}

#[test]
fn values_worked_by_hand() {
    for (text, dimension, value) in [
        ("0.02 g0", Dimension::Acceleration, 0.196_133),
        ("4.7 ug0", Dimension::Acceleration, 4.609_125_5e-5),
        ("3.5mg0", Dimension::Acceleration, 0.034_323_275),
        ("-1.2 au", Dimension::Length, -179_517_444_840.0),
        ("3 ly", Dimension::Length, 28_382_191_417_742_400.0),
        ("5 d", Dimension::Time, 432_000.0),
        ("0.25 a", Dimension::Time, 7_889_400.0),
        ("12 g/m", Dimension::LinearDensity, 0.012),
        ("0 /d", Dimension::PerTime, 0.0),
        ("8.64 /d", Dimension::PerTime, 1e-4),
        ("31.5576 /a", Dimension::PerTime, 1e-6),
        ("429.228 THz", Dimension::Frequency, 429_228e9),
        ("5 \u{b5}m", Dimension::Length, 5e-6),
        ("5\u{3bc}s", Dimension::Time, 5e-6),
        ("  7 \u{a0}mm ", Dimension::Length, 7e-3),
        ("-0 kg", Dimension::Mass, 0.0),
        ("1_000.5", Dimension::Number, 1000.5),
    ] {
        let found = parse(text, dimension).unwrap_or_else(|fault| panic!("{text}: {fault}"));
        assert_eq!(found.to_bits(), f64::to_bits(value), "{text}: {found:e}");
    }
}

#[test]
fn what_is_no_quantity_is_refused_at_its_place() {
    for (text, dimension, place, remedy) in [
        ("2 g", Dimension::Acceleration, 2..3, "write `2 g0` for multiples of"),
        ("-2 G", Dimension::Acceleration, 3..4, "write `-2 g0`"),
        ("12 kg", Dimension::Length, 3..5, "write for example `120 m`; units here: nm"),
        (" 3 sec ", Dimension::Time, 3..6, "write `3 s`"),
        ("inf", Dimension::Length, 0..3, "write for example"),
        ("-nan m", Dimension::Length, 0..6, "write for example"),
        ("0x1F m", Dimension::Length, 0..6, "write for example"),
        ("1e309 m", Dimension::Length, 0..7, "write a length such as"),
        ("1e300 ly", Dimension::Length, 0..8, "write a length such as"),
        ("1__0 m", Dimension::Length, 0..6, "write for example"),
        ("1,5 m", Dimension::Length, 1..2, "write `.` for the decimal mark"),
        ("", Dimension::Length, 0..0, "write for example"),
        ("m", Dimension::Length, 0..1, "write for example"),
        ("5 m/s^2", Dimension::PerTimeSquared, 2..7, "write for example `3.086e-6 /s^2`"),
        ("5 e", Dimension::Length, 2..3, "write for example"),
        ("1 h 30 min", Dimension::Time, 0..10, "put the sum into one unit"),
        ("3 \u{1f680}", Dimension::Length, 2..6, "write for example"),
    ] {
        let fault = parse(text, dimension).expect_err(text);
        assert_eq!(fault.range, place, "{text}: {fault}");
        assert!(fault.remedy.starts_with(remedy), "{text}: {fault}");
    }
    for text in ["0.5 as", "1e-19", "1.0000000000000000001 s"] {
        assert!(parse_duration(text).expect_err(text).rule.contains("whole attoseconds"));
    }
    for text in ["1e11 s", "-1e11 s", "0.000000000000000001", "1e-18 s", "0e-40"] {
        assert!(parse_duration(text).is_ok(), "{text}");
    }
    for text in ["100000000000.000000000000000001 s", "3169 a", "-1e30 s", "1e999999999"] {
        assert!(parse_duration(text).expect_err(text).rule.contains("within 1e11 s"), "{text}");
    }
    assert!(parse_length_of_time("0 s").is_err() && parse_length_of_time("1 as").is_ok());
}

#[test]
fn leap_seconds_are_those_of_the_iers_list() {
    let table = std::fs::read_to_string("tests/data/leap-seconds.csv").expect("the table");
    let rows = table.lines().filter(|line| !line.starts_with('#')).skip(1);
    let rows: Vec<(i128, i128)> = rows
        .map(|row| {
            let (utc, offset) = row.split_once(',').expect("two fields");
            (utc.parse().expect("seconds"), offset.parse().expect("seconds"))
        })
        .collect();
    assert_eq!(rows.len(), LEAP_SECONDS.len());
    // 1900-01-01 to 2000-01-01: 100 years with 24 leap days.
    let to_2000 = 36_524 * 86_400;
    for (index, ((utc, offset), (year, month, listed))) in rows.iter().zip(LEAP_SECONDS).enumerate()
    {
        assert_eq!(*offset, i128::from(listed));
        let tai = ArrayTime::from_attoseconds((utc - to_2000 + offset) * ATTOSECONDS_PER_SECOND);
        let date = format!("{year:04}-{month:02}-01T00:00:00 UTC");
        assert_eq!(format_date(tai, TimeScale::Utc).as_deref(), Some(&*date));
        assert_eq!(parse_date(&date).expect("a date").tai_since_2000, tai);
        let second = ArrayTime::from_attoseconds(tai.attoseconds() - ATTOSECONDS_PER_SECOND / 2);
        let before = format_date(second, TimeScale::Utc);
        if index == 0 {
            assert_eq!(before, None, "UTC had no whole seconds before");
            continue;
        }
        let before = before.expect("a leap second");
        assert!(before.ends_with(":59:60.5 UTC"), "{before}");
        assert_eq!(parse_date(&before).expect("a date").tai_since_2000, second);
    }
}

#[test]
fn dates_are_exact_in_every_scale() {
    let tai = |text: &str| {
        parse_date(text)
            .unwrap_or_else(|fault| panic!("{text}: {fault}"))
            .tai_since_2000
            .to_string()
    };
    // 41 years and 68 days after 2000-01-01: 15 043 days, and six hours.
    assert_eq!(tai("2041-03-09T06:00:00 TAI"), "1299736800");
    assert_eq!(tai("2041-03-09T06:00:00.25 TT"), "1299736768.066");
    assert_eq!(tai("2041-03-09T06:00:00 UTC"), "1299736837");
    assert_eq!(tai("1972-01-01T00:00:00 TT"), "-883612832.184");
    assert_eq!(
        tai(" 2000-02-29T23:59:59.999999999999999999000  TAI "),
        "5183999.999999999999999999"
    );
    // TAI − UTC = 32 s from 1999-01-01 (IERS Bulletin C 16), and J2000.0 is 12 h TT.
    assert_eq!(tai("1999-01-01T00:00:00 UTC"), "-31535968");
    assert_eq!(tai("2000-01-01T12:00:00 TT"), "43167.816");
    for text in [
        "2041-03-09T06:00:00",
        "2041-03-09T06:00:00Z",
        "2041-03-09T06:00:00 utc",
        "2041-03-09 06:00:00 TAI",
        "2041-3-9T06:00:00 TAI",
        "2041-03-09T06:00 TAI",
        "2041-03-09T06:00:00. TAI",
        "2041-03-09T06:00:00.0000000000000000001 TAI",
        "2041-02-29T06:00:00 TAI",
        "2100-02-29T06:00:00 TAI",
        "2041-13-01T06:00:00 TAI",
        "2041-00-01T06:00:00 TAI",
        "2041-04-31T06:00:00 TAI",
        "2041-04-00T06:00:00 TAI",
        "2041-04-01T24:00:00 TAI",
        "2041-04-01T23:60:00 TAI",
        "2016-12-31T23:59:60 TAI",
        "2016-12-31T23:58:60 UTC",
        "2016-12-30T23:59:60 UTC",
        "2015-12-31T23:59:60 UTC",
        "2016-12-31T23:59:61 UTC",
        "1971-12-31T23:59:59 UTC",
        "+2041-03-09T06:00:00 TAI",
        "2041-03-09T06:00:0\u{661} TAI",
        "",
        " ",
    ] {
        assert!(parse_date(text).is_err(), "{text}");
    }
}

#[test]
fn moments_are_durations_dates_or_the_end() {
    let epoch = parse_date("2016-12-31T23:59:59 UTC").expect("a date");
    let end = ArrayTime::from_seconds(90);
    let moment = |text: &str| parse_moment(text, Some(&epoch), end).map(|at| at.to_string());
    assert_eq!(moment("end").as_deref(), Ok("90"));
    assert_eq!(moment("1.5 min").as_deref(), Ok("90"));
    assert_eq!(moment("-3").as_deref(), Ok("-3"));
    // Two seconds of UTC later, with a leap second between: three seconds.
    assert_eq!(moment("2017-01-01T00:00:01 UTC").as_deref(), Ok("3"));
    assert_eq!(moment("2017-01-01T00:00:34 TAI").as_deref(), Ok("-1"));
    assert!(moment("9999-01-01T00:00:00 TAI").is_err());
    assert!(parse_moment("2017-01-01T00:00:01 UTC", None, end).is_err());
}
