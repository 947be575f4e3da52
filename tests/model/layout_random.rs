//! Layouts, tables and quantities put together at random: never a panic, and what is
//! printed is read again.

use clockspar::layout::date::{format_date, parse_date};
use clockspar::layout::quantity::{self, Dimension};
use clockspar::layout::{self, TimeScale};
use clockspar::model::array_time::ArrayTime;
use proptest::collection::vec;
use proptest::prelude::*;
use proptest::sample::select;

/// Pieces a layout is made of, whole and broken.
const PIECES: &[&str] = &[
    "name",
    "node",
    "series",
    "span",
    "clock",
    "phase",
    "survey",
    "note",
    "along",
    "position",
    "prefix",
    "count",
    "from",
    "to",
    "hold",
    "ramp",
    "for",
    "file",
    "at",
    "text",
    "epoch",
    "kind",
    "standing",
    "acceleration",
    "history",
    "gravity",
    "gradient",
    "share",
    "engine",
    "link",
    "between",
    "station",
    "limit",
    "pair",
    "reference",
    "\n",
    "\n",
    "\n",
    "\r\n",
    " ",
    "=",
    " = ",
    "=",
    "[",
    "]",
    "[[",
    "]]",
    "{",
    "}",
    ",",
    ".",
    "\"",
    "'",
    "\"\"\"",
    "#",
    "\\",
    "\u{feff}",
    "\u{0}",
    "\u{7}",
    "\u{202e}",
    "灯",
    "1",
    "-0",
    "3e5",
    "1e999",
    "0x10",
    "inf",
    "nan",
    "true",
    "1979-05-27T07:32:00Z",
    "\"12 km\"",
    "\"1 g0\"",
    "\"hub\"",
    "\"s1\"",
    "\"tether\"",
    "\"2041-03-09T06:00:00 TAI\"",
    "[[node]]\n",
    "[[series]]\n",
    "[[phase]]\n",
    "[survey]\n",
    "[clock.a]\n",
    "[[span]]\n",
    "name = \"hub\"\n",
    "position = \"3 m\"\n",
    "count = 3\n",
    "prefix = \"s\"\n",
    "from = 0\n",
    "to = \"-5 km\"\n",
    "spacing = \"equal shift\"\n",
    "hold = \"1 g0\"\n",
    "for = \"1 h\"\n",
    "file = \"x.csv\"\n",
    "history = \"x.csv\"\n",
    "along = [\"hub\", \"s1\"]\n",
    "kind = \"boom\"\n",
    "[acceleration]\n",
    "[standing]\n",
    "design_acceleration = \"1 g0\"\n",
    "a.b.c = 1\n",
    "[a.b]\n",
    "[a]\n",
];

const TABLE_PIECES: &[&str] = &[
    "name",
    "position_m",
    "u_position_m",
    "at_s",
    "acceleration_m_s2",
    "mass",
    "clock",
    "hub",
    "s1",
    "\n",
    "\n",
    "\r\n",
    ",",
    ",",
    ",",
    "\"",
    "\"\"",
    "#",
    " ",
    "0",
    "1",
    "-5.25",
    "1e20",
    "nan",
    "\u{feff}",
    "灯",
    "name,position_m\n",
    "at_s,acceleration_m_s2\n",
    "0,0\n",
    "10,1\n",
    "hub,0\n",
    "\u{0}",
];

fn text_of(pieces: &'static [&'static str], most: usize) -> impl Strategy<Value = String> {
    vec(select(pieces), 0..most).prop_map(|pieces| pieces.concat())
}

/// Reads, and shows what is wrong.
fn try_read(text: &str, table: &str) {
    if let Err(faults) = layout::read("a.toml", text, &|_| Ok(table.to_owned())) {
        let shown = faults.to_string();
        assert!(faults.count() > 0 && !faults.shown().is_empty());
        assert!(!shown.contains(['\u{0}', '\u{7}', '\u{1b}', '\u{202e}', '\r']), "{shown:?}");
        for fault in faults.shown() {
            assert!(fault.line > 0 && fault.column > 0 && !fault.marks.is_empty());
        }
    }
}

proptest! {
    #![proptest_config(ProptestConfig { failure_persistence: None, ..ProptestConfig::default() })]

    #[test]
    fn any_text_is_read_or_refused(text in any::<String>(), table in any::<String>()) {
        try_read(&text, &table);
    }

    #[test]
    fn anything_like_a_layout_is_read_or_refused(
        text in text_of(PIECES, 40),
        table in text_of(TABLE_PIECES, 40),
    ) {
        try_read(&text, &table);
        try_read(&format!("name = \"A\"\n[[node]]\nname = \"hub\"\n{text}"), &table);
    }

    #[test]
    fn anything_like_a_table_is_read_or_refused(table in text_of(TABLE_PIECES, 60)) {
        let line = "name = \"A\"\n[[node]]\nname = \"hub\"\n";
        try_read(&format!("{line}[survey]\nfile = \"x.csv\"\n"), &table);
        try_read(&format!("{line}[acceleration]\nhistory = \"x.csv\"\n"), &table);
    }

    #[test]
    fn an_example_with_a_piece_cut_out_or_put_in_is_read_or_refused(
        name in select(&["towed-array", "gauge-boom", "near-horizon", "braking-run"][..]),
        at in any::<prop::sample::Index>(),
        length in 0_usize..60,
        piece in select(PIECES),
    ) {
        let text = std::fs::read_to_string(format!("layouts/{name}.toml")).expect("an example");
        let start = at.index(text.len());
        let end = (start + length).min(text.len());
        if text.is_char_boundary(start) && text.is_char_boundary(end) {
            try_read(&format!("{}{piece}{}", &text[..start], &text[end..]), "");
        }
    }

    #[test]
    fn any_text_is_a_quantity_or_not(text in "\\PC*", number in "[-+0-9._eE xb]{0,12}") {
        for dimension in [Dimension::Number, Dimension::Length, Dimension::Acceleration] {
            for text in [&text, &number, &format!("{number}{text}")] {
                if let Err(fault) = quantity::parse(text, dimension) {
                    prop_assert!(text.get(fault.range.clone()).is_some(), "{text:?} {fault:?}");
                }
                if let Err(fault) = quantity::parse_duration(text) {
                    prop_assert!(text.get(fault.range.clone()).is_some(), "{text:?} {fault:?}");
                }
                if let Err(fault) = parse_date(text) {
                    prop_assert!(text.get(fault.range.clone()).is_some(), "{text:?} {fault:?}");
                }
            }
        }
    }

    #[test]
    fn printed_numbers_read_back(bits in any::<u64>(), count in any::<i64>()) {
        let value = f64::from_bits(bits);
        for text in [format!("{value}"), format!("{value:?}"), format!("{value:e} m")] {
            let read = quantity::parse(&text, Dimension::Length);
            if value.is_finite() {
                prop_assert_eq!(read.map(f64::to_bits), Ok((value + 0.0).to_bits()));
            } else {
                prop_assert!(read.is_err());
            }
        }
        let time = ArrayTime::from_attoseconds(i128::from(count) * 10_000_019);
        prop_assert_eq!(quantity::parse_duration(&time.to_string()), Ok(time));
        prop_assert_eq!(quantity::parse_duration(&format!("{time} s")), Ok(time));
    }

    #[test]
    fn numbers_with_units_are_rounded_once(digits in 1_u64..1_000_000_000_000_000, shift in 0_i32..30) {
        // A decimal unit only moves the point, so the text with the point moved is the value.
        let text = format!("{digits}e-{shift} nm");
        let moved: f64 = format!("{digits}e-{}", shift + 9).parse().expect("a number");
        prop_assert_eq!(quantity::parse(&text, Dimension::Length), Ok(moved));
    }

    #[test]
    fn printed_dates_read_back(seconds in -883_612_790_i64..252_455_615_000, part in 0_i128..1_000_000_000_000_000_000) {
        let tai = ArrayTime::from_attoseconds(i128::from(seconds) * 1_000_000_000_000_000_000 + part);
        for scale in [TimeScale::Tai, TimeScale::Tt, TimeScale::Utc] {
            let text = format_date(tai, scale);
            if let Some(text) = text {
                let read = parse_date(&text).map(|date| (date.tai_since_2000, date.scale));
                prop_assert_eq!(read, Ok((tai, scale)), "{}", text);
            }
        }
    }
}
