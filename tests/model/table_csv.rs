//! CSV: quoting, empty fields, the moment in front, the choice of a table.

use clockspar::model::array_time::ArrayTime;
use clockspar::table::{Cell, Measure, Report, Series, write_csv, write_csv_series};
use proptest::prelude::*;

use crate::table_sample::{absent, column, many, rates, report, series, table, text};

fn csv(report: &Report<'_>, name: Option<&str>) -> String {
    let mut out = Vec::new();
    let index = report.table_named(name).expect("a table");
    write_csv(report, index, &mut out).expect("memory");
    String::from_utf8(out).expect("UTF-8")
}

fn csv_series(series: &Series<'_>, index: usize) -> String {
    let mut out = Vec::new();
    write_csv_series(series, index, &mut out).expect("memory");
    String::from_utf8(out).expect("UTF-8")
}

fn records(text: &str) -> Vec<Vec<String>> {
    let mut reader = csv::ReaderBuilder::new().has_headers(false).from_reader(text.as_bytes());
    let fields = |record: csv::StringRecord| record.iter().map(str::to_owned).collect();
    reader.records().map(|record| fields(record.expect("a record"))).collect()
}

#[test]
fn the_moment_leads_and_what_is_absent_is_empty() {
    let text = csv(&rates(), None);
    assert!(!text.contains('\r'));
    let records = records(&text);
    assert_eq!(records.len(), 6);
    assert_eq!(records[0][..3], ["at_s", "node", "position_m"]);
    assert_eq!(records[1][..3], ["22200", "mast", "120"]);
    assert_eq!(records[0][9], "predicted_reading_s");
    assert_eq!(records[1][9], "");
    assert_eq!(records[4][1], "標準時計");
    assert_eq!(records[3][6].parse::<f64>(), Ok(1.0911369672198217e-14));
}

#[test]
fn names_are_quoted_where_they_must_be() {
    let names = ["a \"b\"", "plain", "with, comma", "two\nlines", ""];
    let columns = vec![column("node", "node", Measure::Word), column("why", "why", Measure::Word)];
    let rows = names.iter().map(|name| vec![text(name), absent("no clock")]).collect();
    let text = csv(&report("rates", vec![table("nodes", columns, rows, None)]), Some("nodes"));
    assert!(text.starts_with("at_s,node,why\n22200,\"a \"\"b\"\"\",\n22200,plain,\n"), "{text}");
    let records = records(&text);
    for (name, record) in names.iter().zip(&records[1..]) {
        assert_eq!(record[1], *name);
    }
}

#[test]
fn a_moment_of_the_rows_own_takes_the_first_place() {
    let columns = vec![
        column("rule", "rule", Measure::Word),
        column("at_s", "at", Measure::Time),
        column("value", "value", Measure::Ratio),
    ];
    let time = ArrayTime::from_attoseconds(1_500_000_000_000_000_001);
    let rows = vec![vec![text("ramp"), Cell::Time(time), Cell::Number(0.5)]];
    let mut report = report("check", vec![table("rules", columns, rows, None)]);
    report.at = Err("the report spans the plan");
    assert_eq!(csv(&report, None), "at_s,rule,value\n1.500000000000000001,ramp,0.5\n");
}

#[test]
fn no_moment_is_an_empty_field() {
    let report = Report { at: Err("the report spans the plan"), ..rates() };
    assert!(csv(&report, None).lines().nth(1).expect("a row").starts_with(",mast,120,"));
}

#[test]
fn tables_are_chosen_by_name() {
    let one = series(1);
    let report = (one.report)(0);
    assert_eq!(report.table_named(None), Ok(0));
    assert_eq!(report.table_named(Some("engines")), Ok(1));
    let error = report.table_named(Some("node")).expect_err("no such table");
    assert_eq!(error.to_string(), "no table `node`; there is `nodes`, `engines`");
}

#[test]
fn over_time_the_moment_leads_each_row() {
    let text = csv_series(&series(2), 0);
    let wanted = "at_s,reference_acceleration_m_s2,rapidity,node,force_n\n\
                  0,0,,hub,0\n\
                  0,0,,s1,\n\
                  1.5,0.25,0.125,hub,1\n\
                  1.5,0.25,0.125,s1,\n";
    assert_eq!(text, wanted);
    assert_eq!(csv_series(&series(2), 1).lines().count(), 2);
    assert_eq!(csv_series(&series(0), 0), "");
}

#[test]
fn many_rows_are_the_same_bytes_as_few_at_a_time() {
    let whole = csv(&many(0, 100_000), None);
    let mut pieces = String::new();
    for start in (0..100_000).step_by(10_000) {
        let piece = csv(&many(start, 10_000), None);
        pieces.push_str(if start == 0 { &piece } else { piece.split_once('\n').expect("rows").1 });
    }
    assert!(whole == pieces, "the rows differ");
}

proptest! {
    #![proptest_config(ProptestConfig { failure_persistence: None, ..ProptestConfig::with_cases(256) })]

    #[test]
    fn records_read_back(rows in prop::collection::vec(("[ -~é標\n\r]{1,20}", any::<f64>()), 1..30)) {
        let cells = rows.iter().map(|(name, value)| {
            vec![text(name), Cell::finite(*value, "it overflows")]
        });
        let columns = vec![
            column("node", "node", Measure::Word),
            column("value", "value", Measure::Ratio),
        ];
        let report = report("rates", vec![table("nodes", columns, cells.collect(), None)]);
        let records = records(&csv(&report, None));
        prop_assert_eq!(records.len(), rows.len() + 1);
        for ((name, value), record) in rows.iter().zip(&records[1..]) {
            prop_assert_eq!(&record[1], name);
            if value.is_finite() {
                prop_assert_eq!(record[2].parse::<f64>(), Ok(*value));
            } else {
                prop_assert_eq!(&record[2], "");
            }
        }
    }
}
