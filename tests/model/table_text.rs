//! Text: golden pages at several widths, and what holds of every column.

use std::fmt::Write as _;
use std::path::Path;

use clockspar::model::array_time::ArrayTime;
use clockspar::table::width::columns_of;
use clockspar::table::{Cell, Measure, Report, TextOptions, fit, write_text, write_text_series};
use proptest::prelude::*;

use crate::table_sample::{absent, column, many, rates, report, series, table, text};

fn page(report: &Report<'_>, width: Option<usize>, unicode: bool) -> String {
    let mut out = Vec::new();
    write_text(report, &TextOptions { width, unicode }, &mut out).expect("memory");
    String::from_utf8(out).expect("UTF-8")
}

/// Compares with a page kept beside the tests; `REWRITE_PAGES=1` writes it anew.
fn assert_page(name: &str, shown: &str) {
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/model/table_pages").join(name);
    if std::env::var_os("REWRITE_PAGES").is_some() {
        std::fs::write(&path, shown).expect("a page");
    }
    let kept = std::fs::read_to_string(&path).expect("a page");
    assert!(shown == kept, "{name} differs; it is now\n{shown}");
}

#[test]
fn pages_are_as_kept() {
    for (width, unicode, name) in [
        (None, true, "unlimited.txt"),
        (None, false, "unlimited_ascii.txt"),
        (Some(80), true, "80.txt"),
        (Some(80), false, "80_ascii.txt"),
        (Some(60), true, "60.txt"),
        (Some(40), true, "40.txt"),
        (Some(40), false, "40_ascii.txt"),
    ] {
        let shown = page(&rates(), width, unicode);
        assert_lines(&shown, width);
        assert_page(name, &shown);
    }
}

#[test]
fn a_page_over_time_is_as_kept() {
    let mut out = Vec::new();
    let options = TextOptions { width: Some(60), unicode: true };
    write_text_series(&series(3), &options, &mut out).expect("memory");
    assert_page("over_time.txt", &String::from_utf8(out).expect("UTF-8"));
}

#[test]
fn rules_with_long_remedies_are_wrapped_and_whole() {
    let remedy = "raise the strength of the span from mast to hub to at least 12.5 kN, or lower \
                  the hold of phase 2 to 0.014 g0";
    let columns = vec![
        column("rule", "rule", Measure::Word),
        column("subject", "subject", Measure::Word),
        column("phase", "phase", Measure::Count),
        column("at_s", "at", Measure::Time),
        column("margin", "margin", Measure::Ratio),
        column("state", "state", Measure::Word),
        column("remedy", "remedy", Measure::Word),
    ];
    let rows = vec![
        vec![
            text("strength"),
            text("mast to hub"),
            Cell::Integer(2),
            Cell::Time(ArrayTime::from_seconds(22_200)),
            Cell::Number(-0.38),
            text("broken"),
            text(remedy),
        ],
        vec![
            text("horizon"),
            text("s8"),
            Cell::Integer(1),
            Cell::Time(ArrayTime::from_seconds(600)),
            Cell::Number(0.999_999_999_999_13),
            text("kept"),
            absent("the rule is kept"),
        ],
        vec![
            text("rating"),
            text("hub"),
            absent("no phase decides it"),
            absent("no phase decides it"),
            absent("the node has no rating"),
            text("not_judged"),
            absent("the rule is not judged"),
        ],
    ];
    let report = report("check", vec![table("rules", columns, rows, None)]);
    assert!(page(&report, None, false).contains(remedy));
    for width in [40, 60, 80] {
        let shown = page(&report, Some(width), true);
        assert_lines(&shown, Some(width));
        assert_page(&format!("rules_{width}.txt"), &shown);
    }
}

#[test]
fn the_longest_names_fit_forty_columns() {
    let names =
        ["標準時計標準時計標準時計標準時計", "e\u{301}tat tres long de la ligne no 12", "ab"];
    let columns = vec![
        column("node", "node", Measure::Word),
        column("rate_minus_one", "rate less one", Measure::Ratio),
        column("clock_offset_s", "clock offset", Measure::Time),
    ];
    let rows = names.iter().enumerate().map(|(place, name)| {
        let value = 1.091_136_967_219_821_8e-13 * (1.0 + place as f64 * 1e-15);
        vec![text(name), Cell::Number(value), Cell::Number(value)]
    });
    let report = report("rates", vec![table("nodes", columns, rows.collect(), Some(2))]);
    let shown = page(&report, Some(40), true);
    assert_lines(&shown, Some(40));
    assert_page("long_names_40.txt", &shown);
}

#[test]
fn nothing_is_cut_even_below_forty_columns() {
    let digits = |shown: &str| shown.matches("8.729").count();
    let whole = digits(&page(&rates(), None, true));
    for width in 0..40 {
        assert_eq!(digits(&page(&rates(), Some(width), true)), whole, "{width} columns");
    }
}

#[test]
fn absent_moments_and_revisions_are_said() {
    let report = Report {
        revision: None,
        at: Err("the report spans the plan"),
        reference_acceleration_m_s2: Err("the report spans the plan"),
        rapidity: Err("a standing line has no launch frame"),
        ..report("check", vec![table("rules", vec![], vec![], None)])
    };
    let shown = page(&report, None, false);
    let wanted = "layout: Marram survey line\nrevision: -\nhash: 3f2a9c01d4e7\n\
                  array time: - (the report spans the plan)\n";
    assert!(shown.starts_with(wanted), "{shown}");
    assert!(shown.ends_with("\n\nrules: no rows\n"), "{shown}");
}

#[test]
fn long_tables_are_shown_whole() {
    let shown = page(&many(0, 100_000), None, false);
    let lines: Vec<&str> = shown.lines().collect();
    assert_eq!(lines.len(), 100_000 + 13);
    let rule = columns_of(lines[11]);
    assert!(lines[12..lines.len() - 1].iter().all(|line| columns_of(line) <= rule));
    assert_eq!(lines[12], "s0    -      -8.5000000");
    assert_eq!(lines[lines.len() - 2], "s315  hub    +8.4998300");
}

#[test]
fn units_follow_the_column() {
    for (key, measure, values, unit, first) in [
        ("clock_offset_s", Measure::Time, &[12.345e-12, 9.2e-12][..], "ps", "+12.345"),
        ("launch_position_m", Measure::Length, &[9.164_747_4e15, 9.164_74e15], "ly", "0.9687146"),
        ("flight_array_s", Measure::Time, &[1.5e8, 1.25e8], "a", "4.753"),
        ("flight_array_s", Measure::Time, &[3_600.0], "min", "60.00"),
        ("proper_time_s", Measure::Time, &[31_557_600.000_1, 31_557_600.0], "s", "31557600.0001"),
        ("carrier_hz", Measure::Frequency, &[194.4e12], "THz", "194.4"),
        ("force_n", Measure::Force, &[9_000.0, 120.5], "kN", "9.0000"),
        ("acceleration_m_s2", Measure::Acceleration, &[0.000_98], "µg0", "99.93"),
        ("rate_minus_one", Measure::Ratio, &[-4.6e-13, 3e-17], "", "-4.6e-13"),
        ("mass_ratio", Measure::Ratio, &[1.25, 1.5], "", "1.25"),
        ("separation_m", Measure::Length, &[40_000.0, 1.234_567_8e-4], "m", "4.000e4"),
    ] {
        let cells: Vec<Cell<'_>> = values.iter().map(|&value| Cell::Number(value)).collect();
        let format = fit(&column(key, "", measure), &cells, true);
        assert_eq!((format.unit(), format.cell(&cells[0]).trim()), (unit, first), "{values:?}");
    }
}

#[test]
fn exact_times_stay_exact() {
    let times = |counts: &[i128]| -> Vec<Cell<'static>> {
        let cell = |&count| Cell::Time(ArrayTime::from_attoseconds(count));
        counts.iter().map(cell).collect()
    };
    const SECOND: i128 = 1_000_000_000_000_000_000;
    for (counts, unit, shown) in [
        (&[0, 43_200 * SECOND, 5_400 * SECOND][..], "h", &[" 0   ", "12.0", "1.5"][..]),
        (&[22_201 * SECOND, SECOND / 2], "s", &["22201.0", "0.5"]),
        (&[SECOND * 1_000_000_000 + 1], "s", &["1000000000.000000000000000001"]),
        (&[12_500_000, -1_000_000], "ps", &["12.5", "-1.0"]),
        (&[0], "s", &["0"]),
    ] {
        let cells = times(counts);
        let format = fit(&column("at_s", "at", Measure::Time), &cells, true);
        assert_eq!(format.unit(), unit);
        for (cell, shown) in cells.iter().zip(shown) {
            assert_eq!(format.cell(cell).trim(), shown.trim());
            assert_eq!(columns_of(&format.cell(cell)), format.width());
        }
    }
}

#[test]
fn values_outside_the_window_keep_their_digits() {
    let window: Vec<Cell<'_>> = [1.234e-9, -5.678e-9].map(Cell::Number).to_vec();
    let format = fit(&column("clock_offset_s", "", Measure::Time), &window, true);
    assert_eq!(format.unit(), "ns");
    for (value, shown) in [(1.2e-15, "+1.2e-6"), (2.5e-9, "+2.500"), (-1.234_567e-3, "-1.235e6")] {
        assert_eq!(format.cell(&Cell::Number(value)).trim(), shown);
    }
}

/// What holds of every page: no line is longer than the width, none ends in a blank, and
/// every rule is as wide as the widest line of its block or wider.
fn assert_lines(shown: &str, width: Option<usize>) {
    let mut rule = None;
    for line in shown.lines() {
        assert!(!line.ends_with(' '), "a blank at the end of {line:?}");
        let columns = columns_of(line);
        if let Some(width) = width {
            assert!(columns <= width, "{columns} of {width} columns in {line:?} of\n{shown}");
        }
        if !line.is_empty() && line.chars().all(|sign| sign == '─' || sign == '-') && columns > 3
        {
            rule = Some(columns);
        } else if line.is_empty() || line.starts_with('-') {
            rule = None;
        } else if let Some(rule) = rule {
            assert!(columns <= rule, "{line:?} passes its rule of {rule} in\n{shown}");
        }
    }
}

/// A number of any size that a column may hold.
fn number() -> impl Strategy<Value = f64> {
    prop_oneof![
        any::<f64>().prop_filter("finite", |value| value.is_finite()),
        (-20_i32..20, 1.0..10.0_f64, any::<bool>()).prop_map(|(power, digits, negative)| {
            let value: f64 = format!("{digits}e{power}").parse().expect("a number");
            if negative { -value } else { value }
        }),
        (-100_000_i32..100_000).prop_map(f64::from),
    ]
}

/// Numbers of one column: of any size, or near each other.
fn numbers() -> impl Strategy<Value = Vec<f64>> {
    prop_oneof![
        prop::collection::vec(number(), 1..12),
        (number(), prop::collection::vec(-1.0..1.0_f64, 1..12), -16_i32..0).prop_map(
            |(base, parts, power)| {
                let size: f64 = format!("1e{power}").parse().expect("a number");
                let near = parts.iter().map(|part| base * (1.0 + part * size));
                near.filter(|value| value.is_finite()).chain([base]).collect()
            }
        ),
    ]
}

fn measure() -> impl Strategy<Value = (Measure, &'static str)> {
    prop::sample::select(vec![
        (Measure::Ratio, "rate_minus_one"),
        (Measure::Time, "clock_offset_s"),
        (Measure::Time, "proper_time_s"),
        (Measure::Length, "position_m"),
        (Measure::Acceleration, "acceleration_m_s2"),
        (Measure::Frequency, "carrier_hz"),
        (Measure::Force, "force_n"),
        (Measure::Mass, "mass_kg"),
        (Measure::Speed, "closing_speed_m_s"),
        (Measure::PerSecond, "shift_rate_per_s"),
    ])
}

/// The size of a unit, for reading shown values back.
fn size_of(unit: &str) -> f64 {
    match unit {
        "" | "s" | "m" | "Hz" | "N" | "kg" | "m/s" | "m/s^2" | "/s" => 1.0,
        "as" => 1e-18,
        "fs" => 1e-15,
        "ps" => 1e-12,
        "ns" | "nm" => 1e-9,
        "us" | "um" => 1e-6,
        "ms" | "mm" | "g" => 1e-3,
        "min" => 60.0,
        "h" => 3_600.0,
        "d" => 86_400.0,
        "a" => 31_557_600.0,
        "km" | "kHz" | "kN" | "t" | "km/s" => 1e3,
        "MHz" | "MN" => 1e6,
        "GHz" => 1e9,
        "THz" => 1e12,
        "au" => 149_597_870_700.0,
        "ly" => 9_460_730_472_580_800.0,
        "mg0" => 9.80665e-3,
        "ug0" => 9.80665e-6,
        other => panic!("no unit {other}"),
    }
}

proptest! {
    #![proptest_config(ProptestConfig { failure_persistence: None, ..ProptestConfig::with_cases(2000) })]

    #[test]
    fn columns_are_in_line_readable_and_tell_neighbours_apart(
        values in numbers(),
        (measure, key) in measure(),
    ) {
        let cells: Vec<Cell<'_>> = values.iter().map(|&value| Cell::Number(value)).collect();
        let format = fit(&column(key, "", measure), &cells, false);
        let shown: Vec<String> = cells.iter().map(|cell| format.cell(cell)).collect();
        let highest = values.iter().copied().fold(f64::NEG_INFINITY, f64::max);
        let lowest = values.iter().copied().fold(f64::INFINITY, f64::min);
        let point = shown.iter().find_map(|text| text.find('.'));
        for (value, text) in values.iter().zip(&shown) {
            prop_assert_eq!(text.len(), format.width(), "{:?}", &shown);
            if let Some(place) = text.find('.') {
                prop_assert_eq!(Some(place), point, "{:?}", &shown);
            }
            let digits = text.split('e').next().expect("a text").trim();
            let digits = digits.trim_start_matches(['+', '-', '0', '.']);
            let count = digits.chars().filter(char::is_ascii_digit).count();
            prop_assert!(count <= 17, "{:?}", &shown);
            let read = text.trim().parse::<f64>().expect("a number") * size_of(format.unit());
            let near = (read - value).abs() <= 5.1e-4 * value.abs() || value.abs() < 1e-300;
            prop_assert!(near || read.is_infinite(), "{} as {:?} {}", value, text, format.unit());
        }
        // Only readings of clocks show a step that is far below the largest value.
        let steps = values.windows(2).map(|pair| (pair[0] - pair[1]).abs());
        let least = steps.filter(|&step| step > 0.0).fold(f64::INFINITY, f64::min);
        let largest = highest.abs().max(lowest.abs());
        let told_apart = measure == Measure::Time || least > 1e-10 * largest;
        for (pair, texts) in values.windows(2).zip(shown.windows(2)) {
            let step = (pair[0] - pair[1]).abs();
            // Below a normal number the step itself has no digits left to halve.
            if step > 1e-15 * (highest - lowest) && step > 1e-300 && told_apart {
                prop_assert_ne!(&texts[0], &texts[1], "{:?}", pair);
            }
        }
    }

    #[test]
    fn pages_keep_to_their_width(
        names in prop::collection::vec("[a-z標é]{1,16}", 1..6),
        columns in prop::collection::vec((measure(), numbers()), 1..7),
        width in 40_usize..120,
        unicode in any::<bool>(),
        marked in any::<bool>(),
    ) {
        let mut headings = vec![column("node", "node", Measure::Word)];
        headings.extend(columns.iter().map(|&((measure, key), _)| column(key, "heading of it", measure)));
        let rows = names.iter().enumerate().map(|(row, name)| {
            let mut cells = vec![text(name)];
            cells.extend(columns.iter().enumerate().map(|(place, (_, values))| {
                let why = if place % 2 == 0 { "the node has no clock" } else { "it has no rating" };
                values.get(row).map_or(absent(why), |&value| Cell::Number(value))
            }));
            cells
        });
        let rows: Vec<_> = rows.collect();
        let report = report("rates", vec![table("nodes", headings, rows, marked.then_some(0))]);
        assert_lines(&page(&report, Some(width), unicode), Some(width));
        let whole = page(&report, None, unicode);
        assert_lines(&whole, None);
        for name in &names {
            prop_assert!(whole.contains(name.as_str()));
        }
        let ascii_names = names.iter().all(|name| name.is_ascii());
        prop_assert!(unicode || !ascii_names || whole.is_ascii());
    }
}

#[test]
fn pages_list_every_reason_once() {
    let columns = vec![
        column("node", "node", Measure::Word),
        column("horizon_m", "horizon", Measure::Length),
        column("launch_time_s", "launch time", Measure::Time),
    ];
    let rows = (0..3).map(|_| vec![text("hub"), absent("no acceleration"), absent("it stands")]);
    let report = report("rates", vec![table("nodes", columns, rows.collect(), None)]);
    let mut wanted = String::new();
    for _ in 0..3 {
        writeln!(wanted, "hub        -a           -b").expect("memory");
    }
    wanted.push_str("-a: no acceleration\n-b: it stands\n");
    assert!(page(&report, None, true).ends_with(&wanted), "{}", page(&report, None, true));
}
