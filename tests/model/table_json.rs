//! JSON: key order, bits of every number, absent values, rows of many moments.

use clockspar::model::array_time::ArrayTime;
use clockspar::table::number::push_f64;
use clockspar::table::{Cell, Measure, Report, Scalar, Series, write_json, write_json_series};
use proptest::prelude::*;
use serde_json::Value;

use crate::table_sample::{SHA, absent, column, many, rates, report, series, table, text};

fn json(report: &Report<'_>) -> String {
    let mut out = Vec::new();
    write_json(report, &mut out).expect("memory");
    String::from_utf8(out).expect("UTF-8")
}

fn json_series(series: &Series<'_>) -> String {
    let mut out = Vec::new();
    write_json_series(series, &mut out).expect("memory");
    String::from_utf8(out).expect("UTF-8")
}

/// The keys stand in this order in the text.
fn assert_order(text: &str, keys: &[&str]) {
    let mut from = 0;
    for key in keys {
        let wanted = format!("\"{key}\":");
        let Some(place) = text[from..].find(&wanted) else {
            panic!("{wanted} after byte {from} of {text}");
        };
        from += place + wanted.len();
    }
}

#[test]
fn the_head_stands_in_its_order() {
    let text = json(&rates());
    let head = concat!(
        "{\"schema\":\"clockspar.rates/1\",\"program\":\"clockspar 0.1.0\",\"model\":1,",
        "\"layout\":\"Marram survey line\",\"revision\":\"C\",\"layout_sha256\":\"",
    );
    assert!(text.starts_with(head), "{text}");
    let moment = concat!(
        "\"at_s\":22200,\"reference_acceleration_m_s2\":0.196133,",
        "\"rapidity\":0.000014327960134843,\"worst_error_s\":1.23456789e-11,",
        "\"first_loss_s\":null,\"first_loss_s_why\":\"every signal arrives\",\n\"nodes\":[\n{",
    );
    assert!(text[head.len()..].starts_with(&format!("{SHA}\",{moment}")), "{text}");
    assert!(text.ends_with("}\n]}\n"), "{text}");
    assert_order(
        &text[text.find("\"nodes\"").expect("a table")..],
        &[
            "node",
            "position_m",
            "horizon_m",
            "acceleration_m_s2",
            "rate_minus_one",
            "redshift",
            "clock_offset_s",
            "proper_time_s",
            "predicted_reading_s",
            "predicted_reading_s_why",
            "launch_time_s",
            "launch_position_m",
        ],
    );
}

#[test]
fn what_is_absent_is_null_with_its_reason_and_every_key_is_there() {
    let report = Report {
        revision: None,
        at: Err("the report spans the plan"),
        rapidity: Err("a standing line has no launch frame"),
        ..rates()
    };
    let value: Value = serde_json::from_str(&json(&report)).expect("JSON");
    assert!(value["revision"].is_null());
    assert_eq!(value["revision_why"], "the layout states no revision");
    assert!(value["at_s"].is_null());
    assert_eq!(value["at_s_why"], "the report spans the plan");
    assert_eq!(value["rapidity_why"], "a standing line has no launch frame");
    assert_order(
        &json(&report),
        &["revision", "revision_why", "layout_sha256", "at_s", "at_s_why"],
    );
    let rows = value["nodes"].as_array().expect("rows");
    assert_eq!(rows.len(), 5);
    assert!(rows[0]["predicted_reading_s"].is_null());
    assert_eq!(rows[0]["predicted_reading_s_why"], "the node has no clock");
    for row in &rows[1..] {
        assert_eq!(row.as_object().expect("a row").len(), 11);
    }
}

#[test]
fn numbers_that_are_not_finite_are_null() {
    let columns = vec![column("rate_minus_one", "rate", Measure::Ratio)];
    let rows = vec![vec![Cell::Number(f64::NAN)], vec![Cell::Number(f64::NEG_INFINITY)]];
    let text = json(&report("rates", vec![table("nodes", columns, rows, None)]));
    let value: Value = serde_json::from_str(&text).expect("JSON");
    assert!(value["nodes"][1]["rate_minus_one"].is_null());
    assert_eq!(value["nodes"][0]["rate_minus_one_why"], "the value overflows");
}

#[test]
fn names_and_exact_times_read_back() {
    let name = "a \"b\" \\ 標準 é\u{301}";
    let columns = vec![column("node", "node", Measure::Word), column("at_s", "at", Measure::Time)];
    let time = ArrayTime::from_attoseconds(99_999_999_999_000_000_000_000_000_001);
    let rows = vec![vec![text(name), Cell::Time(time)], vec![text("x"), Cell::Integer(i64::MIN)]];
    let text = json(&report("rates", vec![table("nodes", columns, rows, None)]));
    let value: Value = serde_json::from_str(&text).expect("JSON");
    assert_eq!(value["nodes"][0]["node"], name);
    assert!(text.contains("\"at_s\":99999999999.000000000000000001}"), "{text}");
    assert!(text.contains("\"at_s\":-9223372036854775808}"), "{text}");
}

#[test]
fn a_report_without_rows_is_an_empty_array() {
    let value: Value =
        serde_json::from_str(&json(&report("reach", vec![table("passes", vec![], vec![], None)])))
            .expect("JSON");
    assert_eq!(value["passes"], Value::Array(Vec::new()));
}

#[test]
fn over_time_the_moment_leads_each_row() {
    let text = json_series(&series(3));
    let value: Value = serde_json::from_str(&text).expect("JSON");
    let top: Vec<&String> = value.as_object().expect("an object").keys().collect();
    for key in ["at_s", "reference_acceleration_m_s2", "rapidity"] {
        assert!(!top.iter().any(|known| *known == key), "{key} stands in the rows");
    }
    assert_order(&text, &["layout_sha256", "scalars", "nodes", "engines"]);
    let first_row = text.lines().find(|line| line.contains("\"node\"")).expect("a row");
    assert_order(first_row, &["at_s", "reference_acceleration_m_s2", "rapidity", "node"]);
    let nodes = value["nodes"].as_array().expect("rows");
    assert_eq!(nodes.len(), 6);
    assert_eq!(nodes[3]["at_s"].as_f64(), Some(1.5));
    assert!(nodes[0]["rapidity"].is_null());
    assert_eq!(nodes[0]["rapidity_why"], "there is no thrust yet");
    assert_eq!(value["scalars"].as_array().expect("rows").len(), 3);
    assert_eq!(value["scalars"][2]["worst_error_s"].as_f64(), Some(2e-12));
    // Engines stand in no row of the first moment, and no comma is left over.
    assert_eq!(value["engines"].as_array().expect("rows").len(), 3);
    assert_eq!(value["engines"][0]["at_s"].as_f64(), Some(1.5));
}

#[test]
fn over_no_moments_only_the_head_stands() {
    let value: Value = serde_json::from_str(&json_series(&series(0))).expect("JSON");
    assert_eq!(value.as_object().expect("an object").len(), 6);
}

#[test]
fn many_rows_are_the_same_bytes_as_few_at_a_time() {
    let whole = json(&many(0, 100_000));
    let rows = &whole[whole.find("[\n").expect("rows") + 2..whole.len() - "\n]}\n".len()];
    let mut pieces = Vec::new();
    for start in (0..100_000).step_by(10_000) {
        let piece = json(&many(start, 10_000));
        let from = piece.find("[\n").expect("rows") + 2;
        pieces.push(piece[from..piece.len() - "\n]}\n".len()].to_owned());
    }
    assert!(rows == pieces.join(",\n"), "the rows differ");
}

#[test]
fn a_scalar_may_be_of_any_kind() {
    let mut report = report("steer", vec![]);
    report.scalars = vec![
        Scalar { key: "words", heading: "words", measure: Measure::Count, value: Cell::Integer(7) },
        Scalar { key: "state", heading: "state", measure: Measure::Word, value: text("kept") },
        Scalar { key: "loss_s", heading: "loss", measure: Measure::Time, value: absent("never") },
    ];
    let text = json(&report);
    let end = ",\"words\":7,\"state\":\"kept\",\"loss_s\":null,\"loss_s_why\":\"never\"}\n";
    assert!(text.ends_with(end), "{text}");
}

proptest! {
    #![proptest_config(ProptestConfig { failure_persistence: None, ..ProptestConfig::with_cases(4096) })]

    #[test]
    fn every_double_reads_back_to_its_bits(bits in any::<u64>()) {
        let value = f64::from_bits(bits);
        let mut out = Vec::new();
        prop_assert_eq!(push_f64(&mut out, value), value.is_finite());
        if value.is_finite() && value != 0.0 {
            let text = String::from_utf8(out).expect("digits");
            let parsed: Value = serde_json::from_str(&text).expect("JSON");
            let read = parsed.as_f64().expect("a number");
            prop_assert_eq!(read.to_bits(), bits, "{}", text);
            prop_assert_eq!(text.parse::<f64>().expect("a number").to_bits(), bits, "{}", text);
        }
    }

    #[test]
    fn whole_doubles_read_back_to_their_bits(value in -1_i64 << 53..1 << 53, shift in 0..20) {
        let value = value as f64 * f64::from(1 << shift);
        let mut out = Vec::new();
        prop_assert!(push_f64(&mut out, value));
        let text = String::from_utf8(out).expect("digits");
        let read = serde_json::from_str::<Value>(&text).expect("JSON").as_f64();
        prop_assert_eq!(read.map(f64::to_bits), Some(value.to_bits()), "{}", text);
    }

    #[test]
    fn rows_read_back_to_their_bits(bits in prop::collection::vec(any::<u64>(), 1..40)) {
        let values: Vec<f64> = bits.iter().map(|&bits| f64::from_bits(bits)).collect();
        let rows = values.iter().map(|&value| vec![Cell::finite(value, "it overflows")]).collect();
        let columns = vec![column("value", "value", Measure::Ratio)];
        let text = json(&report("rates", vec![table("nodes", columns, rows, None)]));
        let parsed: Value = serde_json::from_str(&text).expect("JSON");
        for (value, row) in values.iter().zip(parsed["nodes"].as_array().expect("rows")) {
            if value.is_finite() {
                prop_assert_eq!(row["value"].as_f64(), Some(*value));
            } else {
                prop_assert_eq!(&row["value_why"], "it overflows");
            }
        }
    }
}
